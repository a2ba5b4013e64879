"""Types of protection that a plan states itself, from a data sheet."""

import math

import pytest

from farvolt import planfile
from farvolt.errors import PlanError
from farvolt.plan import Plan
from farvolt.study import study
from farvolt_app import columns, edits, tables
from plan_text import BASE, outcome
from wiring import findings, only

TYPE = """
[protection_types."winch fuse"]
kind = "fuse"
ratings = ["150 A", "100 A"]
volts = "32 V"
interrupting = "2 kA"
drop = "80 mV"
band = [
  { times = 1.35, not_before = "2 min", within = "0.5 h" },
  { times = 6, not_before = "0.1 s", within = "1 s" },
]
derating = "0.3 %"
derating_above = "23 degC"
"""
SIZE = 'size = "6 mm2"'


def with_type(protection: str = '{ type = "winch fuse", rating = "100 A" }', own: str = TYPE) -> str:
    return BASE.replace(SIZE, f"{SIZE}\nprotection = {protection}") + own


def read(text: str) -> Plan:
    found = outcome(text)
    assert isinstance(found, Plan), found
    return found


def test_a_type_of_the_plans_own_is_one_like_any_other() -> None:
    plan = read(with_type())
    kind = plan.runs[0].protections[0].kind
    assert (kind.name, kind.title, kind.ratings_A) == ("winch fuse", "winch fuse", (100, 150))
    assert (kind.interrupting_at(24), kind.interrupting_at(36)) == (2000, None)
    assert (kind.holds_for_s(135, 100), kind.opens_within_s(135, 100)) == (120, 1800)
    assert (kind.holds_for_s(600, 100), kind.opens_within_s(134, 100)) == (0.1, math.inf)
    # By hand: 80 mV at 100 A; 40 K above its reference at 0.3 % each.
    assert kind.resistance_ohm(100) == pytest.approx(0.0008)
    assert kind.rating_at_A(100, 63) == pytest.approx(88)
    assert kind.own
    assert not kind.provisional


def test_shipped_types_are_found_beside_it_in_any_case_of_letters() -> None:
    plan = read(with_type('{ type = "Large Strip", rating = "100 A" }'))
    assert plan.runs[0].protections[0].kind.name == "large strip"


def test_its_drop_counts_in_the_network() -> None:
    # By hand: 80 mV at 100 A are 0.8 mohm, 160 mV twice that; the pump's current through it is lost.
    texts = (with_type(own=TYPE.replace("80 mV", f"{drop} mV")) for drop in (80, 160))
    less, more = (study(read(text)).cases[0] for text in texts)
    lost = [
        source.volts - load.volts
        for source, load in ((case.sources[0], case.loads[0]) for case in (less, more))
        if source.volts is not None and load.volts is not None
    ]
    assert more.loads[0].amps is not None
    assert lost[1] - lost[0] == pytest.approx(0.0008 * more.loads[0].amps, rel=0.02)


def test_a_rating_it_is_not_made_in_is_named_with_the_nearest() -> None:
    plan = read(with_type('{ type = "winch fuse", rating = "125 A" }'))
    made = only(plan, "protection.rating-not-made", "feed")
    assert "125 A is not a usual rating of the type winch fuse" in made.message
    assert made.remedy is not None
    assert "125 A is made as strip, large strip" in made.remedy
    assert "Made: 100, 150 A" in made.working[0]


def test_its_ratings_are_offered_for_shipped_types_too() -> None:
    plan = read(with_type('{ type = "rail breaker", rating = "150 A" }'))
    made = only(plan, "protection.rating-not-made", "feed")
    assert made.remedy is not None
    assert "winch fuse" in made.remedy


def test_its_voltage_is_held_against_the_system() -> None:
    own = TYPE.replace('volts = "32 V"', 'volts = "9 V"')
    found = findings(read(with_type(own=own)), "protection.voltage-rating")
    assert [(one.value, one.limit) for one in found] == [(13, 9)]
    assert "provisional" not in found[0].basis


FAULTS = [
    (
        '{ type = "winch fues", rating = "100 A" }',
        TYPE,
        "protection.type",
        "no such type of protection",
        '"winch fuse"',
    ),
    ('[{ type = "blads", rating = "5 A" }]', TYPE, "protection.entry 1.type", "no such type", '"blade"'),
    (None, TYPE.replace('"winch fuse"', "Blade"), "", "a type of this name is shipped", ""),
    (None, TYPE.replace('["150 A", "100 A"]', "[]"), "ratings", "is empty", ""),
    (None, TYPE.replace('["150 A", "100 A"]', '["150 V"]'), "ratings.entry 1", "unit of voltage", ""),
    (None, TYPE.replace('kind = "fuse"', 'kind = "fuze"'), "kind", "not a known choice", '"fuse"'),
    (None, TYPE.replace('volts = "32 V"\n', ""), "volts", "is missing", ""),
    (None, TYPE.replace("times = 6", "times = 1.2"), "band", "the multiples must rise", ""),
    (None, TYPE.replace('"0.1 s"', '"9 s"'), "band", "the least time is above the greatest", ""),
    (None, TYPE.replace("times = 6", "times = 0.6"), "band.entry 2.times", "is too small", ""),
    (None, TYPE.replace('times = 6, not_before = "0.1 s", within = "1 s"', "times = 6"), "band.entry 2", "nothing", ""),
    (None, TYPE.replace('within = "1 s"', "within = 1"), "band.entry 2.within", "a bare number", '"1 s"'),
    (None, TYPE.replace('within = "1 s"', 'withn = "1 s"'), "band.entry 2.withn", "no such field", '"within"'),
    (None, TYPE.replace('not_before = "0.1 s", within = "1 s"', 'within = "0 s"'), "band.entry 2", "no time", ""),
    (None, TYPE.replace("drop", "dropp"), "dropp", "no such field", '"drop"'),
]


@pytest.mark.parametrize(("protection", "own", "field", "problem", "nearest"), FAULTS)
def test_what_is_wrong_with_a_type_is_told(
    protection: str | None, own: str, field: str, problem: str, nearest: str
) -> None:
    text = with_type(protection or '{ type = "strip", rating = "100 A" }', own)
    found = outcome(text)
    assert isinstance(found, PlanError)
    assert len(found.faults) == 1, found
    fault = found.faults[0]
    assert (fault.field, fault.nearest) == (field, nearest)
    assert problem in fault.problem
    assert fault.line is not None
    assert fault.place.startswith("runs" if protection else "protection_types")


def test_the_editor_offers_the_plans_own_types_after_those_shipped() -> None:
    column = next(one for one in columns.RUNS.columns if one.id == "protection.type")
    offered = tables.choices(edits.read(with_type()), column, ())
    assert offered[0] == "small blade"
    assert offered[-1] == "winch fuse"


def test_a_type_is_renamed_with_the_protection_that_is_of_it() -> None:
    two = '[{ type = "strip", rating = "100 A" }, { type = "winch fuse", rating = "100 A", end = "to" }]'
    text = with_type(two)
    after = edits.read(edits.apply(text, edits.renaming(edits.read(text), "protection_types", "winch fuse", "slow")))
    assert list(after["protection_types"]) == ["slow"]
    assert [one["type"] for one in after["runs"][0]["protection"]] == ["strip", "slow"]
    planfile.parse(edits.apply(text, edits.renaming(edits.read(text), "protection_types", "winch fuse", "slow")))
