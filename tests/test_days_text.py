"""The days on a terminal, as JSON, as CSV and as a chart; and what is refused."""

import csv
import datetime as dt
import io
import json
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from farvolt import planfile
from farvolt.day_results import DaysStudy
from farvolt_app import days_chart, days_command, days_rows
from farvolt_app.cli import main
from farvolt_app.days_command import Wishes

PLAN = """\
format = 1
[plan]
name = "=1+1 [b]Days[/b]"
nominal = "12 V"
ambient = "15 degC"
[site]
latitude = "59.9 deg"
longitude = "10.75 deg"
time_zone = "Europe/Oslo"
clearness = [0.4, 0.45, 0.5, 0.5, 0.5, 0.5, 0.5, 0.48, 0.45, 0.42, 0.38, 0.35]
[[sources]]
name = "=bank"
kind = "battery"
at = "bank"
chemistry = "agm"
capacity = "100 Ah"
[[sources]]
name = "roof"
kind = "solar"
at = "bank"
power = "200 W"
ceiling = "14.4 V"
tilt = "20 deg"
[[runs]]
name = "feed"
from = "bank"
to = "lamp"
length = "2 m"
size = "2.5 mm2"
[[loads]]
name = "lamp"
at = "lamp"
power = "24 W"
schedule = ["18:00-23:00"]
[[loads]]
name = "fridge"
at = "lamp"
power = "40 W"
hours_per_day = 24
duty = "40 %"
cut_out = "11.9 V"
"""


@pytest.fixture
def plan(tmp_path: Path) -> Path:
    path = tmp_path / "plan.toml"
    path.write_text(PLAN)
    return path


def days(plan: Path, *more: str) -> Result:
    wide = CliRunner(env={"COLUMNS": "160"})
    return wide.invoke(main, ["days", str(plan), "--from", "2027-06-10", "--days", "2", *more])


def study(**changes: object) -> DaysStudy:
    wishes = Wishes(dt.date(2027, 6, 10), 2, **changes)  # type: ignore[arg-type]
    return days_command.study(planfile.parse(PLAN), None, wishes)


def test_summer_days_serve_all(plan: Path) -> None:
    done = days(plan)
    assert done.exit_code == 0, done.output
    assert "Every load is served whenever it is asked for." in done.output
    assert "=1+1 [b]Days[/b]: 2027-06-10 to 2027-06-11, 48 steps of 60 min" in done.output


def test_dark_days_end_with_exit_code_1_and_say_what_was_missed(plan: Path) -> None:
    done = days(plan, "--from", "2027-12-10", "--days", "5", "--start-charge", "60 %")
    assert done.exit_code == 1
    assert "Not served: " in done.output
    assert 'Off for good once they had cut out, as no recovery voltage is stated: "fridge".' in done.output


def test_json_adds_up(plan: Path) -> None:
    done = days(plan, "--json", "--low-charge", "90 %")
    found = json.loads(done.output)
    account = found["account"]
    out = sum(account[name] for name in ("loads_Wh", "cables_Wh", "converters_Wh", "banks_Wh", "unkept_Wh",
                                         "self_discharge_Wh"))  # fmt: skip
    assert account["given_Wh"] == pytest.approx(out + account["stored_Wh"], rel=1e-9)
    assert account["error"] < 1e-9
    assert found["steps"] == 48
    assert found["low_charge"] == 0.9
    assert found["start"] == "2027-06-10T00:00:00+02:00"
    # 24 W for 5 h, and 16 W all day long: 504 Wh a day.
    assert sum(one["wanted_Wh"] for one in found["loads"]) == pytest.approx(2 * (24 * 5 + 16 * 24))
    assert sum(one["drawn_Wh"] for one in found["loads"]) == pytest.approx(account["loads_Wh"])
    assert found["uncertified"] == 0


def test_csv_holds_every_step_and_no_formula(plan: Path, tmp_path: Path) -> None:
    done = days(plan, "--csv", "-")
    rows = list(csv.reader(io.StringIO(done.output)))
    assert len(rows) == 49
    assert rows[1][0] == "2027-06-10T00:00+02:00"
    assert not [one for one in rows[0] if one.startswith("=")]
    written = tmp_path / "days.csv"
    assert days(plan, "--csv", str(written)).exit_code == 0
    assert written.read_text(encoding="utf-8-sig") == done.output


def test_chart_has_charge_power_and_volts(plan: Path, tmp_path: Path) -> None:
    path = tmp_path / "days.svg"
    assert days(plan, "--chart", str(path)).exit_code == 0
    drawn = path.read_text()
    for words in ("Charge (%)", "Power (W)", "At the bank (V)", "roof"):
        assert words in drawn


def test_a_long_series_is_drawn_in_parts() -> None:
    found = study(step_min=1)
    assert len(found.outcome.course) == 2880
    made = days_chart.chart(found).to_dict()
    points = made["vconcat"][1]["data"]["values"]
    names = {one["name"] for one in points}
    assert len(points) == 1440 * len(names)
    # The mean of each part keeps the energy.
    drawn = sum(one["value"] for one in points if one["name"] == "all loads") * 2 / 60
    assert drawn == pytest.approx(found.account.loads_Wh, rel=1e-6)


def test_longest_times_and_cycles() -> None:
    found = study(start_charge="55 %", low_charge="56 %")
    assert found.longest_below is not None
    assert found.longest_below.step == 0
    bank = found.banks[0]
    assert bank.first_charge == 0.55
    assert bank.deepest_discharge == pytest.approx(1 - found.outcome.sums.charge.min())
    given = found.outcome.sums.bank_A[:, 0]
    assert bank.cycles == pytest.approx(given[given > 0].sum() / 100)
    assert [one["Load"] for one in days_rows.load_rows(found)] == ["fridge", "lamp"]


def test_irradiance_of_one_s_own(plan: Path, tmp_path: Path) -> None:
    table = tmp_path / "sun.csv"
    rows = [f"2027-06-{10 + day} {hour:02d}:00,{700 if 10 <= hour < 16 else 0}" for day in (0, 1) for hour in range(24)]
    table.write_text("time,ghi\n" + "\n".join(rows) + "\n")
    done = days(plan, "--irradiance", str(table))
    assert done.exit_code == 0, done.output
    assert "The sun of sun.csv." in done.output
    table.write_text("time,ghi\n2027-06-10 00:00,seven\n")
    refused = days(plan, "--irradiance", str(table))
    assert refused.exit_code == 2
    assert 'sun.csv, row 2: ghi "seven" is not a number' in refused.output


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--step", "7"], "a step of 7 min does not divide the day; accepted: 1 to 60 min that do, such as 6 min"),
        (["--days", "0"], "0 days; accepted: 1 to 3660"),
        (["--start-charge", "120 %"], '--start-charge: "120 %" is beyond what there is; accepted: 0 % to 100 %'),
        (["--start-charge", "90"], '--start-charge: "90"'),
        (["--ambient", "5 V"], '--ambient: "5 V"'),
        (["--day", "Sunday"], 'no type of day is called "Sunday"; accepted: none'),
        (["--irradiance", "nowhere.csv"], "nowhere.csv: cannot be read"),
        (["--chart", "days.gif"], '".gif" is not written; accepted: .svg, .pdf, .png'),
    ],
)
def test_what_cannot_be(plan: Path, arguments: list[str], said: str) -> None:
    done = days(plan, *arguments)
    assert done.exit_code == 2
    assert said in done.output
    assert "Traceback" not in done.output
