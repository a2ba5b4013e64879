"""The command that splits a load's drop: its parts sum up, and a wrong name gets the nearest right one."""

import re

import pytest
from click.testing import CliRunner

from farvolt import examples
from farvolt_app.cli import BAD_INPUT, main

VAN = str(examples.path("instrument-repair-van"))


def run(*options: str) -> tuple[int, str]:
    """Exit code and output of `farvolt drop` on the van."""
    result = CliRunner().invoke(main, ["drop", VAN, *options], env={"COLUMNS": "160"})
    return result.exit_code, result.output


def test_parts_sum_to_the_drop_shown() -> None:
    """Amps times milliohms is each part's volts, and the volts sum to the drop, as far as the digits shown go."""
    code, output = run("--load", "fridge")
    assert code == 0
    drop = float(re.search(r": ([\d.]+) V, case", output).group(1))  # type: ignore[union-attr]
    rows = re.findall(r"(?:feed|return) +(-?[\d.]+) +([\d.]+) +(-?[\d.]+) +(-?[\d.]+)", output)
    assert len(rows) == 10
    assert sum(float(volts) for _, _, volts, _ in rows) == pytest.approx(drop, abs=1e-3)
    for amps, mohm, volts, percent in rows:
        assert float(amps) * float(mohm) / 1000 == pytest.approx(float(volts), rel=2e-3)
        assert float(percent) == pytest.approx(100 * float(volts) / drop, rel=0.02)


def test_the_largest_gain_comes_first() -> None:
    """The fridge's own thin cable gains most."""
    _, output = run("--load", "fridge")
    gains = output.split("What the next size gains")[1].splitlines()[2:]
    volts = [float(line.split()[-1]) for line in gains if line.strip()]
    assert gains[0].startswith("fridge feed")
    assert volts == sorted(volts, reverse=True)


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--load", "frige"), 'there is no load "frige"'),
        (("--load", "fridge", "--case", "Evening"), 'there is no case "Evening"'),
        (("--load", "roof fan", "--case", "Charging, bank full, little load"), "has no drop to show"),
    ],
)
def test_a_name_that_makes_no_sense_gets_one_message(options: tuple[str, ...], said: str) -> None:
    """Exit code 2, one line, what is accepted."""
    code, output = run(*options)
    assert code == BAD_INPUT
    assert said in output
    assert "Traceback" not in output
