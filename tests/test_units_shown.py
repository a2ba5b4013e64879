"""Results in metric or American units: the same quantities under other headings."""

import pytest

from farvolt_app.units_shown import rows

ROW = {"Run": "feed (m)x", "Length (m)": 3.048, "Length (ft)": 10.0, "All (m)": 0.3048, "Metal (kg)": 0.45359237,
       "Conductor (degC)": 100.0, "Drop (V)": 0.5, "Empty (m)": None}  # fmt: skip


def test_of_a_column_in_both_systems_one_is_left() -> None:
    assert "Length (ft)" not in rows([ROW], "metric")[0]
    assert "Length (m)" not in rows([ROW], "american")[0]
    assert rows([ROW], "american")[0]["Length (ft)"] == 10.0


def test_what_is_metric_alone_is_converted_by_the_definitions_of_the_units() -> None:
    found = rows([ROW], "american")[0]
    assert found["All (ft)"] == pytest.approx(1)
    assert found["Metal (lb)"] == pytest.approx(1)
    assert found["Conductor (degF)"] == pytest.approx(212)  # water boils at 100 degC
    assert (found["Drop (V)"], found["Run"], found["Empty (ft)"]) == (0.5, "feed (m)x", None)


def test_metric_leaves_metric_columns_as_they_are() -> None:
    assert rows([ROW], "metric") == [{key: value for key, value in ROW.items() if key != "Length (ft)"}]
