"""plan.*: what is not fed, what has no way back, what looks like a slip of the pen."""

from typing import Any

import pytest
from hypothesis import given

from farvolt import planfile
from farvolt.errors import PlanError
from farvolt.network import build
from farvolt.operating import components
from farvolt.plan import Plan
from farvolt.rulebook import load
from strategies import Draft, Wishes, drafts, text_of
from wiring import bank, cable, fails, findings, fuse, lamp, only, plan_of

FEED = cable("feed", "bank", "pump", "2 m", "4 mm2", protection=fuse("15 A"))


def test_a_sound_plan_has_no_slips() -> None:
    plan = plan_of([FEED], [lamp("pump", "pump")])
    for rule in ("plan.unfed", "plan.no-return", "plan.two-runs", "plan.lonely-point"):
        assert findings(plan, rule) == []


def test_a_load_that_no_run_reaches_offers_the_nearest_point() -> None:
    found = only(plan_of([FEED], [lamp("pump", "pmup")]), "plan.unfed", "pump")
    assert found.severity == "fail"
    assert 'no run reaches that point; did you mean "pump"?' in found.message


def test_a_load_behind_an_open_switch_is_unfed_in_that_case_alone() -> None:
    runs = [cable("feed", "switched", "pump", "2 m", "4 mm2", protection=fuse("15 A"))]
    devices = [{"name": "switch", "kind": "switch", "from": "bank", "to": "switched"}]
    cases = [{"name": "on"}, {"name": "off", "devices": {"switch": "open"}}]
    found = only(plan_of(runs, [lamp("pump", "pump")], devices=devices, cases=cases), "plan.unfed", "pump")
    assert found.case == "off"
    assert "no closed way leads there" in found.message
    cases[1]["loads"] = "none"
    assert findings(plan_of(runs, [lamp("pump", "pump")], devices=devices, cases=cases), "plan.unfed") == []


@pytest.mark.parametrize(
    ("device", "why"),
    [
        ({"kind": "switch", "state": "open"}, '"d" is open'),
        ({"kind": "relay", "state": "open", "pole": "both"}, '"d" is open'),
        ({"kind": "diode", "from": "far", "to": "bank"}, 'the diode "d" lies the other way round'),
    ],
)
def test_an_unfed_load_is_told_what_stops_the_current(device: dict[str, Any], why: str) -> None:
    device = {"name": "d", "from": "bank", "to": "far", **device}
    plan = plan_of([cable("feed", "far", "pump")], [lamp("pump", "pump")], devices=[device])
    found = only(plan, "plan.unfed", "pump")
    assert found.message.endswith(f"no closed way leads there from a source that is on: {why}")


@pytest.mark.parametrize(
    ("device", "why"),
    [
        ({"kind": "switch", "state": "open"}, '"d" is open'),
        ({"kind": "diode"}, 'the diode "d" lies the other way round'),
    ],
)
def test_a_load_without_a_way_back_is_told_what_stops_it(device: dict[str, Any], why: str) -> None:
    """A diode in the return conducts from `from` to `to`: here away from the source."""
    device = {"name": "d", "from": "bank", "to": "far", "pole": "return", **device}
    plan = plan_of([cable("feed", "far", "pump")], [lamp("pump", "pump")], devices=[device])
    rules = ("plan.no-return", "plan.unfed")
    (found,) = [one for rule in rules for one in findings(plan, rule) if one.kind == "load"]
    assert found.message.endswith(why)


def test_a_source_that_is_off_or_not_fed_is_named() -> None:
    row = {
        "name": "drop", "kind": "converter", "from": "none", "at": "low", "nominal": "12 V", "volts": "12 V",
        "amps": "5 A", "efficiency": "90 %",
    }  # fmt: skip
    plan = plan_of([FEED], [lamp("lamp", "low")], sources=[bank(), row])
    assert '"drop" is itself not fed' in only(plan, "plan.unfed", "lamp").message
    cases = [{"name": "c", "sources": {"bank": "off"}}]
    off = only(plan_of([FEED], [lamp("pump", "pump")], cases=cases), "plan.unfed", "pump")
    assert off.message.endswith('"bank" is off')


def test_an_unfed_load_is_said_once_for_all_its_cases() -> None:
    cases = [{"name": name, "sources": {"bank": "off"}} for name in ("one", "two", "three")]
    assert only(plan_of([FEED], [lamp("pump", "pump")], cases=cases), "plan.unfed", "pump").case == "one"


def test_a_load_without_a_way_back() -> None:
    runs = [FEED | {"carries": "feed"}]
    found = only(plan_of(runs, [lamp("pump", "pump")]), "plan.no-return", "pump")
    assert found.severity == "fail"
    assert findings(plan_of(runs, [lamp("pump", "pump")]), "plan.unfed") == []


def test_a_part_that_nothing_feeds_is_named_once() -> None:
    """Two cables in a corner of the plan that no source reaches: nothing there is checked, so it is said."""
    runs = [FEED, cable("a", "shed", "door"), cable("b", "door", "gate")]
    found = findings(plan_of(runs, [lamp("pump", "pump")]), "plan.unfed")
    assert [(one.severity, one.kind) for one in found] == [("warn", "point")]
    assert '"shed", "door", "gate"' in found[0].message


def test_a_part_that_is_fed_in_some_case_is_not_named() -> None:
    cases = [{"name": "off", "loads": "none", "sources": {"bank": "off"}}, {"name": "on"}]
    assert findings(plan_of([FEED], [lamp("pump", "pump")], cases=cases), "plan.unfed") == []


@pytest.mark.parametrize(
    ("first", "second", "named"),
    [
        ({}, {}, True),
        ({}, {"from": "pump", "to": "bank"}, True),
        ({"carries": "feed"}, {"carries": "return"}, False),
        ({"carries": "feed"}, {}, True),
    ],
)
def test_two_runs_between_the_same_points(first: dict[str, Any], second: dict[str, Any], named: bool) -> None:
    runs = [FEED | first, cable("again", "bank", "pump", "2 m", "4 mm2") | second]
    found = findings(plan_of(runs, [lamp("pump", "pump")]), "plan.two-runs")
    assert [one.subject for one in found] == (["again"] if named else [])
    if found:
        assert found[0].severity == "warn"


def lonely(**more: Any) -> Plan:
    return plan_of([FEED, cable("spare", "pump", "pumpp", **more)], [lamp("pump", "pump")])


def test_a_point_named_once_may_be_a_slip() -> None:
    found = only(lonely(), "plan.lonely-point", "pumpp")
    assert found.severity == "warn"
    assert 'did you mean "pump"?' in found.message


@pytest.mark.parametrize(
    "rows",
    [
        {"points": [{"name": "pumpp"}]},
        {"loads": [lamp("pump", "pump"), lamp("other", "pumpp")]},
        {"sources": [bank(), bank("pumpp")]},
        {"devices": [{"name": "switch", "kind": "switch", "from": "pumpp", "to": "bank"}]},
    ],
)
def test_a_point_that_is_listed_or_used_again_is_none(rows: dict[str, Any]) -> None:
    loads = rows.pop("loads", [lamp("pump", "pump")])
    plan = plan_of([FEED, cable("spare", "pump", "pumpp")], loads, **rows)
    assert findings(plan, "plan.lonely-point") == []


def test_many_lonely_points_are_all_named_though_few_are_compared() -> None:
    runs = [FEED, *(cable(f"run {index}", "pump", f"stray {index}") for index in range(60))]
    found = findings(plan_of(runs, [lamp("pump", "pump")]), "plan.lonely-point")
    assert len(found) == 60
    assert sum("did you mean" in one.message for one in found) <= 20


def test_an_interim_size_is_named() -> None:
    runs = [cable("feed", "bank", "pump", "2 m", None, protection=fuse("15 A"))]
    plan = plan_of(runs, [lamp("pump", "pump", "10 A")])
    found = only(plan, "plan.free-size", "feed")
    assert found.severity == "warn"
    assert "has no size yet" in found.message
    assert fails(plan, "conductor.ampacity") == []


@given(drafts(Wishes(devices=0.8, chassis=0.6, diodes=0.3)))
def test_no_conductor_of_a_plan_joins_a_feed_and_a_return(draft: Draft) -> None:
    """A source cannot be shorted by what a plan says: only loads and sources stand between feed and return."""
    plan = planfile.parse(text_of(draft))
    network = build(plan, load(plan.plan.rulebook))
    part = components(network.node_count, network.a, network.b)
    feeds = {int(part[network.feed(name)]) for name in plan.point_names}
    assert not feeds & {int(part[network.ret(name)]) for name in plan.point_names}


@pytest.mark.parametrize(
    ("table", "row", "said"),
    [
        ("runs", cable("slip", "bank", "chassis", carries="feed"), "a run to the chassis is a return"),
        ("devices", {"name": "d", "kind": "switch", "from": "bank", "to": "chassis"}, "the chassis is one node"),
        ("loads", lamp("lamp", "chassis"), "the chassis is one node"),
    ],
)
def test_a_feed_taken_to_the_chassis_is_refused(table: str, row: dict[str, Any], said: str) -> None:
    rows: dict[str, Any] = {"runs": [FEED], "loads": [lamp("pump", "pump")], "devices": []}
    rows[table] = [*rows[table], row]
    with pytest.raises(PlanError, match=said):
        plan_of(rows["runs"], rows["loads"], devices=rows["devices"])


@pytest.mark.parametrize(
    ("case", "said"),
    [
        ({"devices": {"swich": "open"}}, 'there is no such device .*accepted: "switch"; did you mean "switch"'),
        ({"devices": {"switch": "opened"}}, 'accepted: "closed" or "open"; did you mean "open"'),
        ({"sources": {"bank": "shut"}}, 'accepted: "on", "off" or "full"'),
        ({"loads": {"pmup": 1.0}}, 'there is no such load .*did you mean "pump"'),
    ],
)
def test_a_case_that_names_what_is_not_there(case: dict[str, Any], said: str) -> None:
    devices = [{"name": "switch", "kind": "switch", "from": "pump", "to": "far"}]
    with pytest.raises(PlanError, match=said):
        plan_of([FEED], [lamp("pump", "pump")], devices=devices, cases=[{"name": "night", **case}])
