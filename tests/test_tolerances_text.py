"""The command that shows voltages within tolerances, and the check that reads them."""

import json
from pathlib import Path

import pytest
from click.testing import CliRunner

from farvolt import examples, planfile
from farvolt.study import study
from farvolt_app.cli import BAD_INPUT, main

VAN = str(examples.path("instrument-repair-van"))
EVENING = "Evening, resting bank at low charge"
DRIVING = "Driving, alternator charging"


def run(*options: str, plan: str = VAN) -> tuple[int, str]:
    """Exit code and output of `farvolt tolerances`."""
    result = CliRunner().invoke(main, ["tolerances", plan, *options], env={"COLUMNS": "200"})
    return result.exit_code, result.output


def test_a_proven_case_is_called_guaranteed_and_draws_no_samples() -> None:
    code, output = run("--case", EVENING)
    assert code == 0
    assert f'"{EVENING}": guaranteed' in output
    assert "samples" not in output
    assert "What matters most" in output


def test_a_sampled_case_is_never_called_guaranteed() -> None:
    code, output = run("--case", DRIVING, "--samples", "100")
    assert code == 0
    assert "guaranteed" not in output
    assert "100 samples, because 3 sources" in output
    # 100 samples and 12 figures: 1 - 12 * 0.9^100 is the first above 95 %.
    assert "at least 90 %" in output


def test_the_lowest_of_guaranteed_and_sampled_cases_is_sampled() -> None:
    """A bound over all cases would need one in each."""
    code, output = run("--samples", "20")
    assert code == 0
    rows = [line for line in output.splitlines() if line.startswith("fridge")]
    assert "sampled" in rows[0]


def test_json_has_every_case_and_full_numbers() -> None:
    code, output = run("--json", "--samples", "30", "--load", "radio")
    found = json.loads(output)
    assert code == 0
    assert [one["guaranteed"] for one in found["cases"]] == [True, False, False, False]
    assert found["cases"][0]["claim"] is None
    assert found["cases"][1]["samples"] == 30
    assert found["cases"][1]["claim"]["confidence_each"] == pytest.approx(1 - 0.9**30)
    assert found["matters"]["load"] == "radio"
    for case in found["cases"]:
        for load in case["loads"]:
            assert load["lowest_V"] <= load["highest_V"]
    assert json.loads(run("--json", "--samples", "30", "--load", "radio")[1]) == found


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--case", "Evening"), 'there is no case "Evening"'),
        (("--load", "frige"), 'there is no load "frige"; accepted'),
        (("--load", "water pump", "--case", DRIVING, "--samples", "5"), "has no voltage to show"),
        (("--samples", "0"), "0 is not in the range"),
        (("--samples", "many"), "not a valid integer"),
        (("--seed", "-1"), "-1 is not in the range"),
    ],
)
def test_what_makes_no_sense_gets_one_message(options: tuple[str, ...], said: str) -> None:
    code, output = run(*options)
    assert code == BAD_INPUT
    assert said in output
    assert "Traceback" not in output


def test_a_case_that_gives_way_has_no_numbers(tmp_path: Path) -> None:
    """By hand: 12 V behind 1 Ω give at most E²/4R = 36 W, never 300 W: no sample holds, and the command says so."""
    plan = tmp_path / "plan.toml"
    plan.write_text(
        'format = 1\n[plan]\nnominal = "12 V"\n'
        '[[sources]]\nname = "bank"\nkind = "battery"\nat = "bank"\nemf = "12 V"\nresistance = "1 ohm"\n'
        '[[loads]]\nname = "lamp"\nat = "bank"\npower = "300 W"\n'
        '[[cases]]\nname = "on"\n'
    )
    code, output = run("--samples", "7", plan=str(plan))
    assert code == 0
    assert "7 of them give way" in output
    assert run("--samples", "7", "--load", "lamp", plan=str(plan))[0] == BAD_INPUT


# The check -------------------------------------------------------------------------------------------------------


def findings(tolerances: str, least: str = "11 V", more: str = "") -> list[tuple[str, str, float | None]]:
    """Severity, subject and value of volts.tolerance on a bank of 12 V, a run of 33 mΩ a conductor, and 10 A."""
    text = (
        f'format = 1\n[plan]\nnominal = "12 V"\nambient = "20 degC"\n{tolerances}\n'
        '[[sources]]\nname = "bank"\nkind = "battery"\nat = "bank"\nemf = "12 V"\nresistance = "1 mohm"\n'
        '[[runs]]\nname = "run"\nfrom = "bank"\nto = "lamp"\nlength = "10 m"\nsize = "6 mm2"\nstrand = "flexible"\n'
        f'insulation = "70 degC"\n[[loads]]\nname = "lamp"\nat = "lamp"\ncurrent = "10 A"\n'
        f'min_volts = "{least}"\n{more}[[cases]]\nname = "on"\n'
    )
    found = study(planfile.parse(text), margins=False).findings
    return [(one.severity, one.subject, one.value) for one in found if one.rule == "volts.tolerance"]


def test_the_check_is_silent_without_stated_tolerances() -> None:
    assert findings("") == []


def test_a_load_that_passes_as_planned_but_not_within_tolerances() -> None:
    """By hand, hot (70 °C): 12 − 10(0.001 + 0.066·1.1965) = 11.200 V; worst 12·0.99 − 11(0.001 + 0.0726·1.1965)
    = 10.9135 V."""
    stated = '[tolerances]\nlength = "10 %"\nsource_volts = "1 %"\nloads = "10 %"'
    worst = 11.88 - 11 * (0.001 + 0.0726 * 1.1965)
    assert findings(stated) == [("warn", "lamp", pytest.approx(worst, abs=1e-9))]
    assert findings(stated, least=f"{worst - 1e-6} V") == []
    # Below its range as planned already: volts.low says that.
    assert findings(stated, least="11.5 V") == []


def test_a_high_voltage_within_tolerances() -> None:
    """By hand, cold (20 °C): 12 − 10·0.067 = 11.33 V; best 12·1.01 − 9(0.001 + 0.0594) = 11.5764 V."""
    stated = '[tolerances]\nsource_volts = "1 %"'
    found = findings(stated, least="5 V", more='max_volts = "11.4 V"\n')
    assert found == [("warn", "lamp", pytest.approx(11.5764, abs=1e-9))]


def test_cases_without_a_proof_are_named_once() -> None:
    heater = '[[loads]]\nname = "heater"\nat = "lamp"\nresistance = "4 ohm"\n'
    assert findings('[tolerances]\nlength = "10 %"', more=heater) == [("note", "Unnamed plan", None)]
