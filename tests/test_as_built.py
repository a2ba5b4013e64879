"""What was built: ohms from readings by hand, what goes into the plan, and drift between two dates."""

from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from farvolt import as_built, planfile, reading_table
from farvolt.installation import Installation
from farvolt.network import FEED, RETURN
from farvolt.rulebook import load
from farvolt_app.cli import main

PLAN = """\
format = 1
# A bench, invented.
[plan]
name = "Bench"
nominal = "12 V"
rulebook = "small-craft-iso"
ambient = "20 degC"
[[sources]]
name = "battery"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "10 mohm"
[[runs]]
name = "main"          # through the locker
from = "bank"
to = "lamp"
length = "2 m"         # by the tape
size = "10 mm2"
strand = "flexible"
protection = { type = "blade", rating = "20 A", resistance = "0 ohm" }
[[loads]]
name = "lamp"
at = "lamp"
current = "10 A"
[[cases]]
name = "On"
"""
HEAD = "set,from,from pole,to,to pole,volts,run,pole,amps,accuracy,time\n"


def readings(feed: str = "40.0 mV", back: str = "39.0 mV", amps: str = "10.00", time: str = "") -> str:
    return (
        f"{HEAD}1,bank,feed,lamp,feed,{feed},,,,,{time}\n1,lamp,return,bank,return,{back},,,,,\n"
        f"1,,,,,,main,feed,{amps},,\n"
    )


def installation(text: str = PLAN) -> Installation:
    plan = planfile.parse(text)
    return Installation(plan, load(plan.plan.rulebook))


def measured(text: str) -> dict[as_built.Conductor, as_built.Measured]:
    made = installation()
    return as_built.measured(made, reading_table.from_text(text, made.plan))


def run(folder: Path, text: str, *options: str, plan: str = PLAN) -> Result:
    (folder / "bench.toml").write_text(plan)
    (folder / "read.csv").write_text(text)
    return CliRunner().invoke(main, ["as-built", str(folder / "bench.toml"), str(folder / "read.csv"), *options])


def test_ohms_are_volts_over_amps_with_what_the_meter_may_be_off_by() -> None:
    # 40.0 mV ± (0.5 % + 2 x 0.1 mV) = ± 0.4 mV; 10.00 A ± (0.5 % + 0.02 A) = ± 0.07 A. The most is 40.4 / 9.93.
    found = measured(readings())
    assert found["main", FEED].ohm == pytest.approx(4.0e-3)
    assert found["main", FEED].limit_ohm == pytest.approx(40.4e-3 / 9.93 - 4.0e-3)
    # The lamp's current is the same in both conductors, so one clamp serves the return as well.
    assert found["main", RETURN].ohm == pytest.approx(3.9e-3)


def test_the_sign_of_a_lead_or_clamp_does_not_matter() -> None:
    assert measured(readings(feed="-40.0 mV"))["main", FEED].ohm == pytest.approx(4.0e-3)


def test_a_voltage_within_the_error_of_the_meter_measures_nothing() -> None:
    assert ("main", FEED) not in measured(readings(feed="0.2 mV"))


def test_a_run_is_measured_feed_and_return_together_beside_its_plan() -> None:
    # 1.91 mohm/m at 20 degC (IEC 60228 table 3, class 5, 10 mm2): 2 x 3.82 = 7.64 mohm, 10 % of length either way.
    made = installation()
    (one,) = as_built.runs_built(made, reading_table.from_text(readings(), made.plan))
    assert (one.planned_ohm, one.least_ohm, one.most_ohm) == pytest.approx((7.64e-3, 6.876e-3, 8.404e-3))
    assert (one.ohm, one.degC, one.outside) == (pytest.approx(7.9e-3), 20.0, "")
    (bad,) = as_built.runs_built(made, reading_table.from_text(readings(feed="80.0 mV"), made.plan))
    assert bad.outside == "more"
    (thick,) = as_built.runs_built(made, reading_table.from_text(readings("20.0 mV", "20.0 mV"), made.plan))
    assert thick.outside == "less"


def test_a_run_with_one_conductor_measured_is_not_taken_over(tmp_path: Path) -> None:
    text = f"{HEAD}1,bank,feed,lamp,feed,40.0 mV,,,,,\n1,,,,,,main,feed,10.00,,\n"
    done = run(tmp_path, text, "--accept", "main", "--write")
    assert done.exit_code == 2
    assert "its return was not measured" in done.stderr
    assert (tmp_path / "bench.toml").read_text() == PLAN


def test_nothing_is_written_unless_asked_and_then_comments_stay(tmp_path: Path) -> None:
    shown = run(tmp_path, readings())
    assert shown.exit_code == 0
    assert "7.9 mohm" in shown.stdout
    assert (tmp_path / "bench.toml").read_text() == PLAN
    done = run(tmp_path, readings(), "--length", "main=2.1 m", "--size", "main=16 mm2", "--write")
    assert done.exit_code == 1  # of 16 mm2 it would be less, so it is left and told
    assert "is left as planned" in done.stdout
    text = (tmp_path / "bench.toml").read_text()
    assert (tmp_path / "bench.toml.previous").read_text() == PLAN
    assert text == PLAN.replace('"2 m"', '"2.1 m"').replace("10 mm2", "16 mm2")


def test_a_measured_resistance_goes_in_with_its_temperature(tmp_path: Path) -> None:
    assert run(tmp_path, readings(), "--temperature", "25 degC", "--write").exit_code == 0
    found = planfile.read(tmp_path / "bench.toml")
    (main_run,) = found.plan.runs
    assert main_run.resistance is not None
    assert (main_run.resistance.text, main_run.resistance_temperature.text) == ("7.9 mohm", "25 degC")
    assert "# by the tape" in found.text


def test_a_run_outside_its_tolerances_needs_to_be_named(tmp_path: Path) -> None:
    left = run(tmp_path, readings(feed="80.0 mV"), "--write")
    assert left.exit_code == 1
    assert "look for a bad joint" in " ".join(left.stdout.split())
    assert (tmp_path / "bench.toml").read_text() == PLAN
    assert run(tmp_path, readings(feed="80.0 mV"), "--accept", "main", "--write").exit_code == 1
    assert 'resistance = "11.9 mohm"' in (tmp_path / "bench.toml").read_text()


def test_readings_are_kept_with_their_date_and_read_back(tmp_path: Path) -> None:
    kept = tmp_path / "kept.csv"
    assert run(tmp_path, readings(time="2026-03-09"), "--keep", str(kept)).exit_code == 0
    assert "2026-03-09" in kept.read_text(encoding="utf-8-sig").splitlines()[1]
    same = run(tmp_path, readings(), "--against", str(kept))
    assert same.exit_code == 0
    assert "grew by" not in same.stdout
    grown = run(tmp_path, readings(feed="41.9 mV"), "--against", str(kept))
    # 4.00 ± 0.068 and 4.19 ± 0.071 mohm: 0.19 more than 0.14.
    assert grown.exit_code == 1
    assert "grew by more than the meter" in " ".join(grown.stdout.split())
    less = run(tmp_path, readings(feed="41.0 mV"), "--against", str(kept))
    assert less.exit_code == 0


def test_drift_by_hand() -> None:
    made = installation()
    before, after = (reading_table.from_text(readings(feed=one), made.plan) for one in ("40.0 mV", "41.9 mV"))
    first, second = as_built.drift(made, before, after)
    assert (first.pole, first.changed) == (FEED, "grew")
    assert first.grown_ohm == pytest.approx(0.19e-3)
    # 40.4 / 9.93 - 4 = 0.0685 and (41.9 + 0.4095) / 9.93 - 4.19 = 0.0708 mohm.
    assert first.limit_ohm == pytest.approx((40.4 / 9.93 - 4 + 42.3095 / 9.93 - 4.19) * 1e-3)
    assert (second.pole, second.changed) == (RETURN, "")


def test_names_like_formulas_come_back_from_what_is_kept(tmp_path: Path) -> None:
    plan = PLAN.replace('"lamp"', '"=SUM(A1)"')
    text = readings().replace("lamp", "=SUM(A1)")
    kept = tmp_path / "kept.csv"
    assert run(tmp_path, text, "--keep", str(kept), plan=plan).exit_code == 0
    assert "'=SUM(A1)" in kept.read_text(encoding="utf-8-sig")
    assert run(tmp_path, text, "--against", str(kept), plan=plan).exit_code == 0


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (["--accept", "mian"], "did you mean"),
        (["--length", "main"], '"main=4.8 m"'),
        (["--length", "main=4"], "no unit"),
        (["--length", "main=0 m"], "more than 0 m"),
        (["--size", "main=11 mm2"], "accepted"),
        (["--temperature", "25"], "no unit"),
        (["--keep", "kept.txt"], ".csv"),
        (["--against", "nowhere.csv"], "nowhere.csv"),
    ],
)
def test_what_cannot_be_used_is_told(options: list[str], said: str, tmp_path: Path) -> None:
    done = run(tmp_path, readings(), *options)
    assert done.exit_code == 2
    assert said in done.stderr
    assert "Traceback" not in done.output


def test_lengths_and_sizes_need_no_readings(tmp_path: Path) -> None:
    (tmp_path / "bench.toml").write_text(PLAN)
    file = str(tmp_path / "bench.toml")
    assert CliRunner().invoke(main, ["as-built", file, "--length", "main=7 ft", "--write"]).exit_code == 0
    assert 'length = "7 ft"         # by the tape' in (tmp_path / "bench.toml").read_text()
    assert CliRunner().invoke(main, ["as-built", file]).exit_code == 2


def test_readings_of_points_alone_measure_no_run(tmp_path: Path) -> None:
    done = run(tmp_path, f"{HEAD}1,bank,,,,12.70,,,,,\n")
    assert done.exit_code == 2
    assert "no run was measured" in done.stderr
