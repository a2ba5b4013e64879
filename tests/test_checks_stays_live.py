"""plan.stays-live: what a switch leaves live, by hand on plans small enough to see."""

from typing import Any

import pytest
from hypothesis import given, settings

from farvolt import planfile
from farvolt.checks.stays_live import OPENS, stays_live
from farvolt.fed import fed
from farvolt.operating import operating
from farvolt.plan import Case, Plan
from strategies import Draft, Wishes, drafts, text_of
from wiring import bank, cable, charger, context_of, findings, lamp, only, plan_of

RULE = "plan.stays-live"
RUNS = [cable("main", "bank", "stud"), cable("feed", "bus", "pump")]


def switch(name: str = "main switch", start: str = "stud", end: str = "bus", **more: Any) -> dict[str, Any]:
    return {"name": name, "kind": "switch", "from": start, "to": end, **more}


def switched(*devices: dict[str, Any], runs: Any = (), loads: Any = (), sources: Any = ()) -> Plan:
    return plan_of(
        [*RUNS, *runs], [lamp("pump", "pump"), *loads], sources=[bank(), *sources], devices=devices or [switch()]
    )


def test_nothing_is_said_where_opening_kills_all_beyond() -> None:
    assert findings(switched(), RULE) == []


def test_a_charger_beyond_the_main_switch_keeps_it_live() -> None:
    plan = switched(sources=[charger(at="charger")], runs=[cable("charging", "charger", "bus")])
    found = only(plan, RULE, "main switch")
    assert found.severity == "note"
    assert found.message == (
        'With "main switch" open, what lies beyond it at "bus" with 1 load stays live from "charger"'
    )
    assert found.working == ('at "stud": "bank"', 'at "bus": "charger"')


def test_the_side_of_the_reference_source_is_never_the_far_one() -> None:
    """The same switch written the other way round."""
    plan = switched(switch(start="bus", end="stud"), sources=[charger()], runs=[cable("charging", "charger", "bus")])
    assert 'beyond it at "bus"' in only(plan, RULE, "main switch").message


def test_a_switch_in_front_of_one_lamp_is_not_named() -> None:
    """A charger on the bus, and two switches that each end in a lamp alone."""
    plan = switched(
        switch("lamp 1", "bus", "a"), switch("lamp 2", "bus", "b"),
        runs=[cable("link", "stud", "bus")], loads=[lamp("one", "a"), lamp("two", "b")],
        sources=[charger(at="bus")],
    )  # fmt: skip
    assert [one.kind for one in findings(plan, RULE)] == ["plan"]


def test_loads_before_the_switch_are_named_once() -> None:
    found = findings(switched(loads=[lamp("alarm", "stud"), lamp("gauge", "bank")]), RULE)
    assert [(one.severity, one.kind) for one in found] == [("note", "plan")]
    assert 'these stay live: "alarm", "gauge"' in found[0].message


def test_without_any_switch_nothing_is_said() -> None:
    assert findings(plan_of([cable("feed", "bank", "pump")], [lamp("pump", "pump")]), RULE) == []


def test_a_run_round_the_switch_is_named() -> None:
    found = only(switched(runs=[cable("forgotten", "bank", "bus")]), RULE, "main switch")
    assert found.severity == "warn"
    assert 'cuts off nothing: the feed leads round it by "main", "forgotten"' in found.message


def test_two_switches_side_by_side_are_each_led_round_by_the_other() -> None:
    found = findings(switched(switch("left"), switch("right")), RULE)
    assert [(one.severity, one.subject) for one in found] == [("warn", "left"), ("warn", "right")]
    assert 'by "right"' in found[0].message


def test_an_open_link_between_two_banks_does_not_count() -> None:
    """Two banks with a switch each, and an emergency link that the plan leaves open."""
    link = switch("link", "bus", "bus 2") | {"state": "open"}
    plan = switched(
        switch(), switch("switch 2", "bank 2", "bus 2"), link, sources=[bank("bank 2")], loads=[lamp("crank", "bus 2")]
    )
    assert findings(plan, RULE) == []
    closed = switched(
        switch(), switch("switch 2", "bank 2", "bus 2"), link | {"state": "closed"}, sources=[bank("bank 2")],
        loads=[lamp("crank", "bus 2")],
    )  # fmt: skip
    assert [one.subject for one in findings(closed, RULE)] == ["main switch", "switch 2", "link"]


@pytest.mark.parametrize(("turned", "live"), [(False, True), (True, False)])
def test_a_diode_feeds_in_its_own_direction_only(turned: bool, live: bool) -> None:
    """A second bank behind a diode keeps the bus live; a diode the other way round only charges that bank."""
    ends = ("bus", "bank 2") if turned else ("bank 2", "bus")
    diode = {"name": "splitter", "kind": "diode", "from": ends[0], "to": ends[1]}
    plan = switched(switch(), diode, sources=[bank("bank 2")])
    assert [one.kind for one in findings(plan, RULE)] == (["device"] if live else [])


def test_a_converter_keeps_live_what_it_feeds() -> None:
    """A converter round a relay between two banks: the far bank's side is fed by both."""
    converter = {
        "name": "dc-dc", "kind": "converter", "from": "stud", "at": "bus", "nominal": "12 V", "volts": "14.2 V",
        "amps": "20 A", "efficiency": "90 %",
    }  # fmt: skip
    relay = switch("relay") | {"kind": "relay"}
    found = only(
        switched(relay, sources=[bank("bank 2"), converter], runs=[cable("b", "bank 2", "bus")]), RULE, "relay"
    )
    assert 'beyond it at "bus" with 1 load stays live from "bank", "bank 2"' in found.message


def test_a_switch_in_the_return_leaves_the_feed_live() -> None:
    found = only(switched(switch(pole="return")), RULE, "main switch")
    assert found.severity == "note"
    assert "the feed beyond stays live" in found.message
    bonds = [cable("bond 1", "bank", "chassis"), cable("bond 2", "bus", "chassis")]
    round_it = only(switched(switch(pole="return"), runs=bonds), RULE, "main switch")
    assert round_it.severity == "warn"
    assert 'the return leads round it by "main", "bond 1", "bond 2"' in round_it.message


def test_a_return_that_passes_through_another_device_is_not_cut() -> None:
    """Two devices between the same points, one in each pole: each pole passes straight through the other device."""
    found = only(switched(switch(), switch("return switch", pole="return")), RULE, "return switch")
    assert found.severity == "warn"
    assert 'by "main switch"' in found.message


def test_both_poles_at_once() -> None:
    assert findings(switched(switch(pole="both")), RULE) == []


def test_an_array_s_own_isolator() -> None:
    """The points of an array are live by day, whatever is open: not from the controller's side alone."""
    array = {"at": "roof", "voc": "24 V", "isc": "5 A", "vmp": "20 V", "imp": "4 A"}
    solar = {"name": "sun", "kind": "solar", "at": "bus", "power": "80 W", "ceiling": "14.4 V", "array": array}
    plan = switched(switch(), sources=[solar], runs=[cable("link", "bank", "bus")])
    assert "cuts off nothing" in only(plan, RULE, "main switch").message
    beyond = only(switched(sources=[solar]), RULE, "main switch")
    assert 'stays live from "sun"' in beyond.message


@settings(deadline=None, max_examples=60)
@given(drafts(Wishes(devices=1.0, open_devices=0.3)))
def test_both_ends_stay_live_where_a_device_is_named(draft: Draft) -> None:
    """Compared with the graph search that precedes every solution, with that device open and all others as planned."""
    draft["cases"] = [{"name": "as planned"}]
    context = context_of(planfile.parse(text_of(draft)))
    plan, net = context.plan, context.network
    named = {one.subject for one in stays_live(context)}
    for device in plan.devices:
        if device.kind in OPENS and device.pole != "return" and device.state == "closed":
            case = Case(name="opened", devices={device.name: "open"})
            live = fed(net, operating(net, case)).live
            ends = [bool(live[net.feed(point)]) for point in (device.from_point, device.to_point)]
            assert (device.name in named) == all(ends), device.name
