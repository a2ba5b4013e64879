"""The numbers of a study as data frames and as files: what the study says, units in the names, text as text."""

import csv
import math
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from farvolt import examples, planfile
from farvolt.study import study
from farvolt_app.cli import main
from farvolt_app.frames import frames

FORMULA = '=HYPERLINK("x")'

PLAN = f"""\
format = 1
[plan]
name = "Lamps"
nominal = "12 V"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "15 mohm"
[[runs]]
name = "feed, long"
from = "bank"
to = "lamp"
length = "4 m"
size = "2.5 mm2"
[[loads]]
name = '{FORMULA}'
at = "lamp"
current = "5 A"
[[cases]]
name = "on"
loads = "all"
[[cases]]
name = "too much"
loads = {{ '{FORMULA}' = 400 }}
"""


def checked(folder: Path, *more: str) -> Result:
    """`farvolt check` on the plan, with its tables in a folder."""
    plan = folder / "plan.toml"
    plan.write_text(PLAN, encoding="utf-8")
    return CliRunner().invoke(main, ["check", str(plan), "--tables", str(folder / "tables"), *more])


def rows(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8-sig", newline="") as file:
        return list(csv.DictReader(file))


def test_frames_hold_what_the_study_says() -> None:
    found = study(planfile.parse(examples.text("instrument-repair-van")), margins=False)
    every = frames(found)
    for name in ("points", "runs", "loads", "sources"):
        entries = [(case.name, entry) for case in found.cases for entry in getattr(case, name)]
        assert len(every[name]) == len(entries)
        assert list(every[name]["case"]) == [case for case, _ in entries]
        assert list(every[name].iloc[:, 2]) == [entry.name for _, entry in entries]
    lowest = min(load.volts for case in found.cases for load in case.loads if load.volts is not None)
    assert every["loads"]["voltage_V"].min() == lowest
    assert every["runs"]["loss_W"].sum() == pytest.approx(
        sum(run.loss_W for case in found.cases for run in case.runs if run.loss_W is not None)
    )


def test_every_number_has_its_unit_and_is_a_number() -> None:
    for frame in frames(study(planfile.parse(PLAN), margins=False)).values():
        for column in frame.columns[3:]:
            assert column.rsplit("_", 1)[-1] in ("V", "A", "W", "ohm", "degC", "percent")
            assert frame[column].dtype == float


def test_a_case_that_gives_way_has_no_numbers() -> None:
    """12.8 V behind 15 milliohm gives at most 853 A: 2,000 A are too many."""
    loads = frames(study(planfile.parse(PLAN), margins=False))["loads"]
    assert loads["solved"].tolist() == [True, False]
    assert math.isnan(loads["voltage_V"][1])
    assert loads["current_A"][0] == pytest.approx(5)


def test_files_hold_numbers_in_full_and_text_as_text(tmp_path: Path) -> None:
    result = checked(tmp_path)
    assert result.exit_code in (0, 1), result.output
    (on, gives_way) = rows(tmp_path / "tables" / "loads.csv")
    found = study(planfile.parse(PLAN), margins=False).cases[0].loads[0]
    assert on["load"] == "'" + FORMULA
    assert float(on["voltage_V"]) == found.volts
    assert gives_way["voltage_V"] == ""
    assert rows(tmp_path / "tables" / "runs.csv")[0]["run"] == "feed, long"
    assert {path.name for path in (tmp_path / "tables").iterdir()} == {
        "points.csv", "runs.csv", "loads.csv", "sources.csv"
    }  # fmt: skip


def test_what_was_there_is_kept_and_said(tmp_path: Path) -> None:
    folder = tmp_path / "tables"
    folder.mkdir()
    (folder / "runs.csv").write_text("mine", encoding="utf-8")
    result = checked(tmp_path)
    assert (folder / "runs.csv.previous").read_text(encoding="utf-8") == "mine"
    assert "runs.csv.previous" in result.stderr
    assert "loads.csv.previous" not in result.stderr


def test_a_folder_that_cannot_be_made_is_one_message(tmp_path: Path) -> None:
    (tmp_path / "tables").write_text("a file", encoding="utf-8")
    result = checked(tmp_path)
    assert result.exit_code == 2
    assert "cannot be written" in result.stderr
    assert "Traceback" not in result.output


def test_tables_go_with_json(tmp_path: Path) -> None:
    result = checked(tmp_path, "--json")
    assert result.stdout.startswith('{"output"')
    assert (tmp_path / "tables" / "points.csv").is_file()
