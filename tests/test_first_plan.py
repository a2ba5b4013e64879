"""First plans from a few answers: complete, without failures, and kind to answers that make no sense."""

from dataclasses import replace
from pathlib import Path

import pytest
from click.testing import CliRunner
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import planfile, rulebook
from farvolt.errors import FarvoltError
from farvolt.first_plan import VOLTAGES, Answers, Wanted, appliances, first_plan
from farvolt.study import study
from farvolt_app import cli

VAN = Answers(
    "My van", 12, "leisure-vehicle-eu", "lfp", "200 Ah", "1.2 m",
    (Wanted("compressor fridge", "4 m"), Wanted("interior lights", "3 m"), Wanted("water pump", "2.5 m"),
     Wanted("fuel-burning air heater", "2 m"), Wanted("USB outlets", "3 m")),
    "1500 A", "40 A", "20 A", "200 W",
)  # fmt: skip


def failures(text: str) -> list[str]:
    """The failing findings of a plan's text."""
    return [f"{one.rule}: {one.message}" for one in study(planfile.parse(text), margins=False).findings
            if one.severity == "fail"]  # fmt: skip


def test_a_van_of_five_appliances_is_complete_and_fails_nothing() -> None:
    text = first_plan(VAN)
    plan = planfile.parse(text)
    assert all(run.size is not None for run in plan.runs)
    assert all(run.protections for run in plan.runs)
    assert len(plan.loads) == 5
    assert failures(text) == []


def test_the_fuse_of_a_charger_carries_what_it_gives_through_the_cables_chosen() -> None:
    """A 350 W controller beside larger chargers gives less through thin cables than through those that are chosen."""
    answers = replace(
        VAN, rulebook="small-craft-us", loads=VAN.loads[:2], short_circuit="3000 A", alternator="60 A", solar="350 W",
        bank_distance="1 m",
    )  # fmt: skip
    assert failures(first_plan(answers)) == []


@pytest.mark.parametrize("volts", VOLTAGES)
@pytest.mark.parametrize("book", rulebook.shipped())
def test_every_rulebook_and_voltage_gives_a_plan(book: str, volts: int) -> None:
    answers = replace(VAN, rulebook=book, nominal_V=volts, loads=VAN.loads[:2], solar="", mains="")
    found = failures(first_plan(answers))
    assert [one for one in found if not one.startswith("protection.interrupting")] == []


@settings(max_examples=10, deadline=None)
@given(
    st.lists(st.tuples(st.sampled_from(sorted(set(appliances()) - {"electric winch"})), st.floats(0.5, 9)), min_size=1,
             max_size=6),
    st.sampled_from(["agm", "lfp"]),
)  # fmt: skip
def test_no_choice_of_appliances_leaves_a_cable_without_protection(
    loads: list[tuple[str, float]], chemistry: str
) -> None:
    wanted = tuple(Wanted(name, f"{length:.2f} m") for name, length in loads)
    text = first_plan(replace(VAN, loads=wanted, chemistry=chemistry, capacity="300 Ah"))
    unsafe = ("protection.missing", "protection.over", "conductor")
    assert [one for one in failures(text) if one.startswith(unsafe)] == []


def test_two_of_a_kind_get_names_of_their_own() -> None:
    lights = (Wanted("reading light", "2 m"), Wanted("reading light", "3 m"))
    plan = planfile.parse(first_plan(replace(VAN, loads=lights)))
    assert [load.name for load in plan.loads] == ["reading light", "reading light 2"]


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"loads": (Wanted("water pum", "2 m"),)}, 'did you mean "water pump"'),
        ({"loads": (Wanted("water pump", "2"),)}, 'did you mean "2 m"'),
        ({"capacity": "much"}, "capacity"),
        ({"chemistry": "lead"}, "no chemistry"),
        ({"solar": "200"}, "no unit"),
        ({"rulebook": "nec"}, "rulebook"),
    ],
)
def test_an_answer_of_no_sense_is_named(change: dict[str, object], words: str) -> None:
    with pytest.raises(FarvoltError, match=words):
        first_plan(replace(VAN, **change))  # type: ignore[arg-type]


def test_text_is_only_text() -> None:
    name = 'x"] # \\n[plan] name = "y'
    assert planfile.parse(first_plan(replace(VAN, name=name, loads=VAN.loads[:1]))).plan.name == name
    with pytest.raises(FarvoltError, match="control character"):
        first_plan(replace(VAN, name="two\nlines"))


def test_the_command_writes_the_same(tmp_path: Path) -> None:
    path = tmp_path / "van.toml"
    done = CliRunner().invoke(
        cli.main, ["new", str(path), "--load", "water pump=3 m", "--load", "USB outlets=2 m", "--capacity", "150 Ah"]
    )
    assert done.exit_code == 0, done.output
    plan = planfile.read(path).plan
    assert [load.name for load in plan.loads] == ["water pump", "USB outlets"]
    refused = CliRunner().invoke(cli.main, ["new", "-", "--load", "water pump"])
    assert (refused.exit_code, "has no length" in refused.output) == (2, True)
