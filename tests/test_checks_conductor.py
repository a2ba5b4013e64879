"""conductor.*: ampacity with its factors, smallest size, material, return path; what a rulebook lacks is said."""

import random
from typing import Any

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from farvolt.conductors import made_sizes
from farvolt.plan import Plan
from strategies import Wishes, random_draft
from strategies import plan_of as drafted
from wiring import (
    cable,
    context_of,
    fails,
    findings,
    fuse,
    lacking,
    lamp,
    named_sizes,
    only,
    plan_of,
    resized,
)


def loaded(amps: str, size: str = "10 AWG", book: str = "small-craft-us", length: str = "2 m", **more: Any) -> Plan:
    """One fused cable with a constant current."""
    runs = [cable("feed", "bank", "pump", length, size, protection=fuse("200 A", kind="strip"), **more)]
    tables = {
        "zones": {"engine": {"ambient": "50 degC", "engine_space": True}, "hot": {"ambient": "60 degC"}},
        "routes": {"loom": {"conductors": 6}},
    }
    return plan_of(runs, [lamp("pump", "pump", amps)], rulebook=book, tables=tables)


# Ampacity ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("amps", "over"), [("60 A", False), ("60.001 A", True)])
def test_boundary_is_the_tables_figure(amps: str, over: bool) -> None:
    """33 CFR 183.425 Table 5: 10 AWG, 105 degC insulation, outside engine spaces: 60 A."""
    assert bool(findings(loaded(amps), "conductor.ampacity")) is over


def test_every_factor_is_in_the_working() -> None:
    """33 CFR 183.425 Table 5: 10 AWG 60 A, x 0.85 in engine spaces; E-11: x 0.60 for four to six conductors.

    60 x 0.85 x 0.60 = 30.6 A.
    """
    found = only(loaded("31 A", zone="engine", bundled=6), "conductor.ampacity", "feed")
    assert found.limit == pytest.approx(60 * 0.85 * 0.60)
    assert found.value == pytest.approx(31)
    text = " | ".join(found.working)
    for part in ("60 A", "x 0.85", "x 0.60", "= 60 x 0.85 x 0.6 = 30.6 A", "31 A > 30.6 A"):
        assert part in text
    assert "33 CFR 183.425" in found.basis
    assert "E-11" in found.basis
    assert findings(loaded("30.6 A", zone="engine", bundled=6), "conductor.ampacity") == []


def test_where_it_lies_and_how_warm_it_gets_is_in_the_working() -> None:
    """60 + (105 - 60) x (55 A / Iz)^2 with Iz = 60 A x sqrt((105 - 60) / (105 - 30)) = 46.48 A: 123.0 degC.

    Copper of 5.261 mm2 (10 AWG, ASTM B258) there: 17.241 / 5.261 x (1 + 0.00393 x 103.0) = 4.604 mohm/m by IEC 60028,
    and the lay of the strand on top.
    """
    working = only(loaded("55 A", zone="hot"), "conductor.ampacity", "feed").working
    assert working[0] == 'Ambient 60 degC, that of the zone "hot"; 2 conductors laid together, its own'
    assert "At 55 A the conductor reaches about 60 + (105 - 60) x (55 / 46.48)^2 = 123 degC, " in working[-1]
    mohm = float(working[-1].removesuffix(" mohm/m").split(", ")[-1])
    assert 1.0 <= mohm / (17.241 / 5.261 * (1 + 0.00393 * 103.0)) < 1.05


@pytest.mark.parametrize(
    ("more", "told"),
    [
        ({"route": "loom"}, '6 conductors laid together, as stated for the route "loom"'),
        ({"bundled": 7}, "7 conductors laid together, as the run states"),
        ({}, "2 conductors laid together, its own"),
    ],
)
def test_what_is_laid_together_is_told_with_where_it_comes_from(more: dict[str, Any], told: str) -> None:
    assert told in only(loaded("61 A", **more), "conductor.ampacity", "feed").working[0]


def test_conductors_of_a_route_are_counted_run_by_run() -> None:
    """Two runs of two conductors each in one route without a stated number: four, so E-11's x 0.60."""
    runs = [cable(name, "bank", name, "2 m", "10 AWG", route="way", protection=fuse("60 A")) for name in ("one", "two")]
    plan = plan_of(runs, [lamp("one", "one", "40 A"), lamp("two", "two", "30 A")], rulebook="small-craft-us",
                   tables={"routes": {"way": {}}}, cases=[{"name": "on"}])  # fmt: skip
    found = only(plan, "conductor.ampacity", "one")
    assert '4 conductors laid together, all that pass the route "way"' in found.working[0]
    assert found.limit == pytest.approx(36)


def test_nec_table_and_its_ambient_factor() -> None:
    """NEC Table 310.16: 12 AWG copper, 75 degC: 25 A; Table 310.15(B)(1): x 0.58 at 56 to 60 degC: 14.5 A."""
    found = only(loaded("15 A", "12 AWG", "cabin-nec", zone="hot"), "conductor.ampacity", "feed")
    assert found.limit == pytest.approx(25 * 0.58)


def test_parallel_cables_share_the_current() -> None:
    """Two of 10 AWG carry twice 60 A, counted as four conductors laid together (E-11: x 0.60): 72 A."""
    found = only(loaded("73 A", parallel=2), "conductor.ampacity", "feed")
    assert found.limit == pytest.approx(2 * 60 * 0.60)
    assert findings(loaded("72 A", parallel=2), "conductor.ampacity") == []


def test_the_thinner_return_decides() -> None:
    """A return of 14 AWG (35 A in Table 5) limits a feed of 10 AWG (60 A)."""
    found = only(loaded("36 A", **{"return": {"size": "14 AWG"}}), "conductor.ampacity", "feed")
    assert found.limit == pytest.approx(35)
    assert found.remedy is not None
    assert named_sizes(found.remedy) == {}


def test_a_start_warms_no_cable() -> None:
    """10 A and five times that for a moment, in a cable that carries 25 A or so and more than 10 A."""
    runs = [cable("feed", "bank", "galley", "3 m", "1.5 mm2", protection=fuse("15 A"))]
    loads = [lamp("fridge", "galley", "10 A", surge={"times": 5})]
    assert fails(plan_of(runs, loads, cases=[{"name": "Start", "surge": ["fridge"]}]), "conductor.ampacity") == []
    lasting = [{"name": "All at once", "loads": {"fridge": 5.0}}]
    assert fails(plan_of(runs, loads, cases=lasting), "conductor.ampacity") == ["feed"]


def test_a_size_carries_what_lasts_after_a_start() -> None:
    """50 A last, more than 14 AWG carries: the size offered carries those, whatever the start draws for a moment."""
    runs = [cable("feed", "bank", "galley", "1 m", "14 AWG", protection=fuse("50 A", kind="strip"))]
    loads = [lamp("fridge", "galley", "50 A", surge={"times": 5})]
    started = only(plan_of(runs, loads, cases=[{"name": "Start", "surge": ["fridge"]}]), "conductor.ampacity", "feed")
    steady = only(plan_of(runs, loads, cases=[{"name": "Running"}]), "conductor.ampacity", "feed")
    assert started.remedy == steady.remedy
    assert "carries this where it lies" in (started.remedy or "")


def test_the_worst_case_is_named() -> None:
    runs = [cable("feed", "bank", "pump", "2 m", "10 AWG", protection=fuse("100 A", kind="strip"))]
    cases = [
        {"name": "cool and heavy", "ambient": "20 degC", "loads": {"pump": 1.0}},
        {"name": "hot and heavy", "ambient": "70 degC", "loads": {"pump": 1.0}},
        {"name": "hot and light", "ambient": "70 degC", "loads": {"pump": 0.1}},
    ]
    plan = plan_of(runs, [lamp("pump", "pump", "58 A")], rulebook="small-craft-us", cases=cases)
    assert only(plan, "conductor.ampacity", "feed").case == "hot and heavy"


def test_current_is_taken_with_hot_conductors() -> None:
    """A constant power draws more the more its cable drops: judged at the insulation's rating, not at 20 degC."""
    runs = [cable("feed", "bank", "pump", "4 m", "10 AWG", protection=fuse("100 A", kind="strip"))]
    plan = plan_of(runs, [{"name": "pump", "at": "pump", "power": "700 W"}], rulebook="small-craft-us")
    found = only(plan, "conductor.ampacity", "feed")
    cool = context_of(plan).cases[0].solutions["cold"].largest_run_amps[0]
    assert found.value is not None
    assert found.value > cool > 60


def test_an_entry_that_the_table_lacks_is_said_and_not_passed() -> None:
    """ISO 10133 has no aluminium: a warning, which says that protection is not judged either."""
    found = only(loaded("5 A", "16 mm2", "small-craft-iso", material="aluminium"), "conductor.ampacity", "feed")
    assert found.severity == "warn"
    assert "neither its ampacity nor its protection can be checked" in found.message
    assert "aluminium" in found.message


def test_a_size_that_is_not_stated_is_said_and_not_passed() -> None:
    runs = [cable("feed", "bank", "pump", size=None, resistance="10 mohm", protection=fuse("200 A", kind="strip"))]
    found = only(plan_of(runs, [lamp("pump", "pump", "150 A")]), "conductor.ampacity", "feed")
    assert found.severity == "warn"
    assert "states a resistance but no size" in found.message


def test_a_missing_factor_in_one_case_hides_no_other_case() -> None:
    """NEC ambient factors end at 70 degC for 75 degC insulation: that case cannot be judged, the cool one fails."""
    runs = [cable("feed", "bank", "pump", "2 m", "12 AWG", protection=fuse("20 A"))]
    cases = [{"name": "furnace", "ambient": "72 degC"}, {"name": "cool", "ambient": "20 degC"}]
    plan = plan_of(runs, [lamp("pump", "pump", "29 A")], rulebook="cabin-nec", cases=cases)
    found = findings(plan, "conductor.ampacity")
    assert [(one.severity, one.case) for one in found] == [("fail", "cool"), ("warn", None)]


@pytest.mark.parametrize("amps", ["61 A", "90 A", "240 A"])
def test_the_size_offered_carries_the_current(amps: str) -> None:
    plan = loaded(amps)
    remedy = only(plan, "conductor.ampacity", "feed").remedy
    assert remedy is not None
    sizes = named_sizes(remedy)
    assert list(sizes) == ["feed"]
    assert findings(resized(plan, sizes), "conductor.ampacity") == []


def test_a_load_beyond_any_cable_gets_another_remedy() -> None:
    remedy = only(loaded("600 A", length="0.2 m"), "conductor.ampacity", "feed").remedy
    assert remedy is not None
    assert remedy.startswith("several cables in parallel")


ONE_WAY = Wishes(
    loops=0, behaviours=("power", "current"), extra_batteries=0, chargers=0, limited_sources=False, charger_only=0,
    solar=0, converters=0, diodes=0, chassis=0, load_share=0.5,
)  # fmt: skip


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 10**6), st.data())
def test_enlarging_a_cable_of_a_tree_overloads_none(seed: int, data: st.DataObject) -> None:
    """One battery, no loops, no heaters: less resistance lets every load draw no more than before.

    A case that gives way has no currents to compare with: its thicker cable may make it hold, and then be overloaded.
    """
    plan = drafted(random_draft(random.Random(seed), ONE_WAY))
    assume(not fails(plan, "volts.collapse"))
    sized = [run for run in plan.runs if run.size is not None]
    assume(sized)
    run = data.draw(st.sampled_from(sized))
    assert run.size is not None
    larger = [size for size in made_sizes("metric") if size.area_mm2 > run.size.area_mm2]
    size = data.draw(st.sampled_from(larger))
    changed = resized(plan, {run.name: size.name})
    assert set(fails(changed, "conductor.ampacity")) <= set(fails(plan, "conductor.ampacity"))


# Smallest size -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("book", "size", "sheath", "small"),
    [
        ("small-craft-us", "18 AWG", False, True),  # 33 CFR 183.425(d): 16 AWG laid singly
        ("small-craft-us", "16 AWG", False, False),
        ("small-craft-us", "18 AWG", True, False),  # (e): 18 AWG in a sheath
        ("small-craft-us", "20 AWG", True, True),
        ("small-craft-iso", "0.75 mm2", False, True),  # ISO 10133:2012 7.7: 1 mm2, or 0.75 mm2 in a sheath
        ("small-craft-iso", "0.75 mm2", True, False),
        ("cabin-nec", "14 AWG", False, True),  # NEC 720.4: 12 AWG
        ("cabin-iec", "1 mm2", True, True),  # IEC 60364-5-52 Table 52.2: 1.5 mm2
        ("cabin-iec", "1.5 mm2", False, False),
    ],
)
def test_smallest_size(book: str, size: str, sheath: bool, small: bool) -> None:
    runs = [cable("feed", "bank", "lamp", "2 m", size, sheathed=sheath, protection=fuse("3 A"))]
    plan = plan_of(runs, [lamp("lamp", "lamp", "0.5 A")], rulebook=book)
    found = findings(plan, "conductor.minimum-size", "feed")
    assert [one.severity for one in found] == ["fail"] * small
    if found:
        assert found[0].remedy is not None
        assert findings(resized(plan, named_sizes(found[0].remedy)), "conductor.minimum-size", "feed") == []


@pytest.mark.parametrize(
    ("book", "length", "severity"),
    [
        ("small-craft-us", "7 in", "note"),  # 33 CFR 183.425(f), from memory: pigtails of less than 7 in
        ("small-craft-us", "7.1 in", "fail"),
        ("small-craft-iso", "200 mm", "note"),  # ISO 10133:2012 7.7: conductors up to 200 mm long
        ("small-craft-iso", "201 mm", "fail"),
    ],
)
def test_short_conductors_are_exempt_by_their_length(book: str, length: str, severity: str) -> None:
    runs = [cable("feed", "bank", "lamp", length, "0.5 mm2", protection=fuse("3 A", "0.05 m"))]
    found = only(plan_of(runs, [lamp("lamp", "lamp", "0.5 A")], rulebook=book), "conductor.minimum-size", "feed")
    assert found.severity == severity
    assert ("exempt:" in found.message) is (severity == "note")


@pytest.mark.parametrize(("amps", "may"), [("1 A", True), ("1.01 A", False)])
def test_an_exemption_by_use_is_named_and_left_to_a_person(amps: str, may: bool) -> None:
    """E-11, from memory: leads of electronic equipment under 1 A. A plan does not tell what a load is: still a fail."""
    runs = [cable("feed", "bank", "radio", "2 m", "18 AWG", protection=fuse("3 A"))]
    plan = plan_of(runs, [lamp("radio", "radio", amps)], rulebook="small-craft-us")
    found = only(plan, "conductor.minimum-size", "feed")
    assert found.severity == "fail"
    assert ("exempt only if it serves electronic equipment" in found.message) is may
    lines = [line for line in found.working if line.startswith("Exempt: leads of electronic equipment")]
    assert lines[0].endswith("to be judged by its use" if may else "does not hold")
    assert "provisional" in lines[0]


def test_what_a_sheath_alone_allows_is_noted_with_how_far_it_may_leave_it() -> None:
    """33 CFR 183.425(e): 18 AWG in a sheath, at most 30 in outside it."""
    runs = [cable("feed", "bank", "lamp", "2 m", "18 AWG", sheathed=True, protection=fuse("3 A"))]
    plan = plan_of(runs, [lamp("lamp", "lamp", "0.5 A")], rulebook="small-craft-us")
    found = only(plan, "conductor.minimum-size", "Test plan")
    assert (found.severity, found.limit, found.unit) == ("note", pytest.approx(30 * 0.0254), "m")
    assert '"feed"' in found.message


@pytest.mark.parametrize(
    ("book", "size", "small"),
    [("cabin-nec", "12 AWG", True), ("cabin-nec", "10 AWG", False), ("cabin-iec", "6 mm2", True),
     ("cabin-iec", "10 mm2", False)],
)  # fmt: skip
def test_aluminium_has_a_smallest_size_of_its_own(book: str, size: str, small: bool) -> None:
    """NEC 720.4: 12 AWG copper or equivalent; IEC 60364-5-52 Table 52.2: 10 mm2 of aluminium (both from memory)."""
    runs = [cable("feed", "bank", "lamp", "2 m", size, material="aluminium", protection=fuse("3 A"))]
    plan = plan_of(runs, [lamp("lamp", "lamp")], rulebook=book)
    assert (fails(plan, "conductor.minimum-size") == ["feed"]) is small


@pytest.mark.parametrize(("size", "small"), [("1 mm2", True), ("1.5 mm2", False)])
def test_smallest_size_in_leisure_vehicles(size: str, small: bool) -> None:
    """IEC 60364-7-721, 721.524, from memory: 1.5 mm2; the figures of EN 1648-2 were not seen, and it says so."""
    runs = [cable("feed", "bank", "lamp", "2 m", size, protection=fuse("3 A"))]
    found = findings(plan_of(runs, [lamp("lamp", "lamp")], rulebook="leisure-vehicle-eu"), "conductor.minimum-size")
    assert [one.severity for one in found] == ["fail"] * small
    assert all("not seen) (provisional)" in one.basis for one in found)


def test_published_navigation_light() -> None:
    """E-11 standards-body quiz (7/2015), question 3: 0.8 A, 12 V, 12 ft one way, duplex, 3 %.

    CM = 10.75 x 0.8 x 24 / 0.36 = 573: by drop far less than 18 AWG (1624) is needed; the smallest size governs,
    18 AWG, allowed because the pair is sheathed.
    """
    needed = 10.75 * 0.8 * 24 / 0.36
    assert needed == pytest.approx(573, abs=1)
    found = {}
    for sheath in (True, False):
        runs = [cable("feed", "bank", "light", "12 ft", "18 AWG", sheathed=sheath, protection=fuse("3 A"))]
        load = lamp("light", "light", "0.8 A", **{"class": "critical"})
        plan = plan_of(runs, [load], rulebook="small-craft-us")
        found[sheath] = (fails(plan, "drop.load"), fails(plan, "conductor.minimum-size"))
    assert found == {True: ([], []), False: ([], ["feed"])}


def test_the_return_conductor_has_a_smallest_size_too() -> None:
    runs = [cable("feed", "bank", "lamp", "2 m", "4 mm2", protection=fuse("3 A"), **{"return": {"size": "0.5 mm2"}})]
    found = only(plan_of(runs, [lamp("lamp", "lamp")]), "conductor.minimum-size", "feed")
    assert found.value == pytest.approx(0.5)
    assert found.message.startswith('the return of "feed" is 0.5 mm2')


def test_a_bond_has_no_smallest_size() -> None:
    bond = cable("bond", "bank", "chassis", "1 m", "0.5 mm2", purpose="bond")
    runs = [bond, cable("feed", "bank", "lamp", "2 m", "4 mm2", protection=fuse("3 A"))]
    assert findings(plan_of(runs, [lamp("lamp", "lamp")]), "conductor.minimum-size") == []


# Material and return -------------------------------------------------------------------------------------------


def test_refused_material_and_strand() -> None:
    """33 CFR 183.425: conductors are of stranded copper."""
    runs = [
        cable("one", "bank", "lamp", "2 m", "16 AWG", material="copper-clad aluminium", protection=fuse("3 A")),
        cable("two", "bank", "fan", "2 m", "16 AWG", strand="solid", protection=fuse("3 A")),
        cable("three", "bank", "pump", "2 m", "16 AWG", strand="stranded", protection=fuse("3 A")),
    ]
    plan = plan_of(runs, [lamp(at, at) for at in ("lamp", "fan", "pump")], rulebook="small-craft-us")
    assert fails(plan, "conductor.material") == ["one", "two"]
    assert "33 CFR 183.425" in only(plan, "conductor.material", "one").basis


@pytest.mark.parametrize(("book", "forbidden"), [("small-craft-iso", True), ("leisure-vehicle-eu", False)])
def test_return_through_the_chassis(book: str, forbidden: bool) -> None:
    """ISO 10133:2012 clause 4 forbids the hull as a conductor; in road vehicles the chassis serves as a return."""
    runs = [
        cable("bond", "bank", "chassis", "0.5 m", "10 mm2", purpose="bond"),
        cable("feed", "bank", "lamp", "2 m", "4 mm2", protection=fuse("3 A"), **{"return": "chassis"}),
    ]
    plan = plan_of(runs, [lamp("lamp", "lamp")], rulebook=book)
    assert fails(plan, "conductor.return") == (["feed"] if forbidden else [])


@pytest.mark.parametrize(("purpose", "named"), [("power", True), ("bond", False)])
def test_a_run_to_the_chassis_that_carries_current_is_a_return(purpose: str, named: bool) -> None:
    runs = [
        cable("ground", "bank", "chassis", "0.5 m", "10 mm2", purpose="bond"),
        cable("feed", "bank", "lamp", "2 m", "4 mm2", carries="feed", protection=fuse("3 A")),
        cable("back", "lamp", "chassis", "0.5 m", "4 mm2", purpose=purpose),
    ]
    assert ("back" in fails(plan_of(runs, [lamp("lamp", "lamp")]), "conductor.return")) is named


# What a rulebook lacks -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("rule", "entry"),
    [("conductor.minimum-size", "minimum_size"), ("conductor.material", "refused"), ("conductor.return", "returns")],
)
def test_a_missing_entry_is_said_once_with_its_name(rule: str, entry: str) -> None:
    runs = [cable(name, "bank", name, "2 m", "0.5 mm2", protection=fuse("3 A")) for name in ("one", "two")]
    plan = plan_of(runs, [lamp("one", "one"), lamp("two", "two")])
    (found,) = findings(plan, rule, book=lacking("small-craft-iso", **{entry: None}))
    assert (found.severity, found.kind, found.subject) == ("warn", "plan", "Test plan")
    assert f'no entry "{entry}"' in found.message
    assert found.working == (f"{entry}: the rulebook gives no reason",)


def test_a_missing_entry_tells_the_rulebooks_own_reason() -> None:
    """A rulebook that knows of smallest sizes without their figures: said as a warning, never passed."""
    runs = [cable("feed", "bank", "lamp", "2 m", "0.5 mm2", protection=fuse("1 A"))]
    book = lacking("leisure-vehicle-eu", minimum_size=None, missing={"minimum_size": "its figures were not seen"})
    found = only(plan_of(runs, [lamp("lamp", "lamp", "0.1 A")]), "conductor.minimum-size", "Test plan", book)
    assert found.severity == "warn"
    assert "figures were not seen" in found.working[0]


def test_a_rulebook_that_says_it_refuses_nothing_needs_no_warning() -> None:
    runs = [cable("feed", "bank", "lamp", "2 m", "12 AWG", material="aluminium", protection=fuse("3 A"))]
    assert findings(plan_of(runs, [lamp("lamp", "lamp")], rulebook="cabin-nec"), "conductor.material") == []
