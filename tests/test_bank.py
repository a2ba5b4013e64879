"""The bank of a plan as people get it: the command, its JSON, the chart, and the rows of the page."""

import json
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from farvolt import examples, planfile
from farvolt.bank_study import BankStudy, as_object, bank_study
from farvolt.study import study
from farvolt_app import bank_rows, energy_chart
from farvolt_app.cli import main
from plan_text import EVERY_FIELD


def run(*arguments: str) -> Result:
    return CliRunner().invoke(main, ["bank", *arguments])


def answer(text: str) -> BankStudy:
    return bank_study(study(planfile.parse(text), margins=False))


@pytest.mark.parametrize("name", examples.names())
def test_the_examples_are_sized(name: str, tmp_path: Path) -> None:
    plan = tmp_path / "plan.toml"
    plan.write_text(examples.text(name))
    done = run(str(plan), "--working")
    assert done.exit_code == 0, done.output
    for words in ("Size of the bank", "Charging", "Time to full", "The answer", "Days of autonomy", "x "):
        assert words in done.stdout


def test_json_says_what_the_rows_say() -> None:
    done = run(str(EVERY_FIELD), "--json")
    found = json.loads(done.stdout)
    bank = answer(EVERY_FIELD.read_text())
    assert found == json.loads(json.dumps(as_object(bank)))
    assert bank.sizing is not None
    assert found["sizing"]["capacity_Ah"] == bank.sizing.capacity_Ah
    assert [one["name"] for one in found["days"]] == ["winter weekend", "any other day"]
    assert found["sizing"]["day"] == "winter weekend"
    (load,) = [one for one in found["days"][0]["loads"] if one["name"] == "fridge"]
    assert load["Wh"] == pytest.approx(60 * 8 * 0.4)
    assert found["findings"] == [one for one in found["findings"] if one["rule"].startswith("bank.")]


@pytest.mark.parametrize("suffix", [".svg", ".pdf", ".png"])
def test_the_chart_is_written(suffix: str, tmp_path: Path) -> None:
    output = tmp_path / f"shares{suffix}"
    done = run(str(EVERY_FIELD), "--output", str(output))
    assert output.exists(), done.output
    assert output.read_bytes()[:4] in (b"<svg", b"%PDF", b"\x89PNG")


def test_what_cannot_be_done_is_refused_in_one_message(tmp_path: Path) -> None:
    done = run(str(EVERY_FIELD), "--day", "winter weekday")
    assert done.exit_code == 2
    assert '"winter weekend"' in done.stderr
    done = run(str(EVERY_FIELD), "--output", str(tmp_path / "x.gif"))
    assert done.exit_code == 2
    assert ".svg, .pdf, .png" in done.stderr


def test_a_plan_without_a_battery_is_told_so() -> None:
    text = """format = 1
[plan]
name = "bench"
nominal = "12 V"
[[sources]]
name = "supply"
kind = "charger"
at = "bus"
volts = "13 V"
amps = "10 A"
[[loads]]
name = "lamp"
at = "bus"
power = "10 W"
hours_per_day = 3
"""
    bank = answer(text)
    assert (bank.sizing, bank.charging, bank.air) == (None, None, ())
    assert bank.budgets[0].bank.Wh == 30
    assert "no battery" in bank_rows.answer(bank)[0]
    assert as_object(bank)["sizing"] is None


def test_the_bars_of_the_chart_sum_to_the_day() -> None:
    budget = answer(examples.text("bird-observatory-cabin")).design
    bars = energy_chart.bars(budget)
    assert len(bars) <= energy_chart.MOST_BARS
    assert sum(Wh for _, Wh in bars) == pytest.approx(budget.bank.Wh)


def test_a_name_in_the_plan_is_only_text_in_the_chart() -> None:
    text = EVERY_FIELD.read_text().replace('"fridge"', "\"<script>alert('x')</script>\"")
    drawn = energy_chart.svg(answer(text).budgets[1])
    assert "<script" not in drawn
    assert "alert" in drawn


def test_hours_are_shown_as_they_are_read() -> None:
    assert bank_rows.times(((0, 1440),)) == "all day"
    assert bank_rows.times(((0, 30), (1320, 1440))) == "00:00-00:30, 22:00-24:00"
