"""Two plans compared: what differs is named once, what is alike is not."""

import json
from pathlib import Path

import pytest
from click.testing import CliRunner

from farvolt import examples, planfile
from farvolt.differences import Difference, compare, summary
from farvolt.results import Study
from farvolt.study import study
from farvolt_app import edits
from farvolt_app.cli import main
from farvolt_app.edits import Add, Remove, Set

VAN = examples.text("instrument-repair-van")
SMALL = """format = 1
[plan]
nominal = "12 V"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12 V"
resistance = "10 mohm"
[[runs]]
name = "feed"
label = "W1"
from = "bank"
to = "lamp"
length = "10 m"
size = "4 mm2"
[[loads]]
name = "lamp"
at = "lamp"
current = "5 A"
"""


def studied(text: str) -> Study:
    """The study of a text."""
    return study(planfile.parse(text), margins=False)


def test_a_plan_compared_with_itself_differs_in_nothing() -> None:
    van = studied(VAN)
    found = compare(van, van)
    assert (found.differences, found.gone, found.new) == ((), (), ())
    assert found.before == found.after
    assert {one.name for one in found.loads} == {load.name for load in van.plan.loads}
    assert all(one.before == one.after for one in found.loads)


def test_the_same_quantity_in_other_words_is_no_difference() -> None:
    for other in ("1000 cm", "10.0 m", "10000 mm"):
        assert compare(studied(SMALL), studied(SMALL.replace('"10 m"', f'"{other}"'))).differences == ()


def test_what_is_added_removed_changed_and_renamed_is_named() -> None:
    text = edits.apply(SMALL, [
        Set("runs", 0, ("length",), "12 m"),
        Set("runs", 0, ("protection",), {"type": "blade", "rating": "10 A"}),
        *edits.renaming(edits.read(SMALL), "runs", 0, "lamp feed"),
        Add("loads", {"name": "fan", "at": "lamp", "power": "20 W"}),
        Set("plan", None, ("rulebook",), "cabin-iec"),
    ])  # fmt: skip
    there = compare(studied(SMALL), studied(text))
    assert Difference("runs", "feed", "changed", "length", "10 m", "12 m") in there.differences
    assert Difference("runs", "feed", "changed", "name", "feed", "lamp feed") in there.differences
    assert Difference("runs", "feed", "changed", "protection.1.rating", None, "10 A") in there.differences
    assert Difference("loads", "fan", "added", "", None, "at lamp, power 20 W") in there.differences
    assert Difference("plan", "", "changed", "rulebook", "small-craft-iso", "cabin-iec") in there.differences
    back = compare(studied(text), studied(SMALL))
    assert Difference("loads", "fan", "removed", "", "at lamp, power 20 W", None) in back.differences
    assert [(one.name, one.before is None) for one in there.loads] == [("lamp", False), ("fan", True)]


def test_a_longer_cable_costs_volts_and_its_finding_is_new_one_way_and_gone_the_other() -> None:
    short, long = studied(SMALL), studied(SMALL.replace('"10 m"', '"40 m"'))
    there, back = compare(short, long), compare(long, short)
    lamp = there.loads[0]
    assert lamp.before is not None
    assert lamp.after is not None
    assert lamp.before.volts is not None
    assert lamp.after.volts is not None
    assert lamp.after.volts < lamp.before.volts
    fails = {(one.rule, one.subject) for one in there.new if one.severity == "fail"}
    assert ("drop.load", "lamp") in fails
    assert there.new == back.gone
    assert there.gone == back.new


def test_the_mass_of_the_metal_is_density_times_area_times_length() -> None:
    # Copper weighs 8890 kg/m3 (IEC 60028): two conductors of 4 mm2, 10 m each, 0.711 kg.
    found = summary(studied(SMALL))
    assert found.cable_m == pytest.approx(20)
    assert found.metal_kg == pytest.approx(2 * 10 * 4e-6 * 8890, rel=2e-3)
    assert found.without_size == 0
    free = summary(studied(SMALL.replace('size = "4 mm2"\n', "")))
    assert (free.metal_kg, free.without_size) == (0.0, 1)


def test_the_command_prints_the_same_as_text_and_as_json(tmp_path: Path) -> None:
    before, after = tmp_path / "a.toml", tmp_path / "b.toml"
    before.write_text(VAN)
    after.write_text(edits.apply(VAN, [Set("runs", 7, ("length",), "9 m"), Remove("cases", 0)]))
    shown = CliRunner().invoke(main, ["compare", str(before), str(after)])
    assert shown.exit_code == 0
    assert "6.5 m" in shown.stdout
    done = CliRunner().invoke(main, ["compare", str(before), str(after), "--json"])
    answer = json.loads(done.stdout)
    removed = [one["entry"] for one in answer["differences"] if one["change"] == "removed"]
    assert removed == [planfile.parse(VAN).cases[0].name]
    assert answer["before"]["metal_kg"] < answer["after"]["metal_kg"]
    missing = CliRunner().invoke(main, ["compare", str(before), str(tmp_path / "none.toml")])
    assert missing.exit_code == 2
    assert "no such file" in missing.stderr
