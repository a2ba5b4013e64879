"""The measurements in `bench` still run, at a small size; how long they take is not judged."""

import shutil

import choice
import choice_against_all
import cold_start
import days as days_of_the_van
import file_to_findings
import linear_100k
import many_cases
import network_and_solve
import numpy as np
import pytest
from grid import grid


def test_grid_has_the_runs_asked_for() -> None:
    for runs in (50, 500):
        assert len(grid(runs)["runs"]) == runs


def test_network_and_solve() -> None:
    row = network_and_solve.measure(50)
    assert row["runs"] == 50
    assert row["imbalance_A"] < 1e-9
    if shutil.which("ngspice"):
        assert row["difference_V"] < 1e-6


def test_linear_solution() -> None:
    rows = [linear_100k.measure(runs, compared=True) for runs in (100, 200)]
    assert np.isfinite(linear_100k.exponent(rows))
    if shutil.which("ngspice"):
        assert max(row["difference_V"] for row in rows) < 1e-6


def test_many_cases() -> None:
    for row in many_cases.rows(30, 30).values():
        assert row["together"] == row["cases"] == 30
        assert row["difference_V"] < 1e-9


def test_file_to_findings() -> None:
    row = file_to_findings.measure(50)
    assert row["runs"] == 50
    assert row["total_s"] >= row["read_s"] > 0


def test_cold_start(capsys: pytest.CaptureFixture[str]) -> None:
    cold_start.main(1)
    assert "farvolt check" in capsys.readouterr().out


def test_days() -> None:
    for row in days_of_the_van.rows(1, 1).values():
        assert row["uncertified"] == 0
        assert row["energy_error"] < 1e-9


def test_choice() -> None:
    row = choice.measure(20, 1, {"gap": 1e-3})
    assert row["kg"] <= row["run_by_run_kg"] * (1 + 1e-6)
    assert row["gap_percent"] <= 0.1 + 1e-6


def test_choice_against_all() -> None:
    assert choice_against_all.judged(1) in ("same", "none passes")
