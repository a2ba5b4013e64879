"""device.rating: switches, shunts, diodes and busbars against what they carry, stand, and are protected by."""

from typing import Any

import pytest

from farvolt.plan import Plan
from wiring import BANK, Row, bank, cable, charger, fails, findings, fuse, lamp, only, plan_of

RULE = "device.rating"


def switched(amps: str = "20 A", *, rating: str = "30 A", fused: str = "30 A", **more: Any) -> Plan:
    """A bank, a fused cable, a switch and a load of constant current."""
    switch: Row = {"name": "main switch", "kind": "switch", "from": "stud", "to": "lamp", "continuous": rating,
                   "volts": "48 V", **more.pop("switch", {})}  # fmt: skip
    runs = [cable("feed", "bank", "stud", protection=fuse(fused))]
    return plan_of(runs, [lamp("lamp", "lamp", amps)], devices=[switch], **more)


# Current -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("amps", "over"), [("30 A", False), ("30.01 A", True)])
def test_boundary_is_the_continuous_rating(amps: str, over: bool) -> None:
    """A constant current of one load in series: the switch carries just that."""
    assert (fails(switched(amps), RULE) == ["main switch"]) is over


def test_the_case_that_carries_most_is_named_with_its_working() -> None:
    cases = [{"name": "half", "loads": {"lamp": 0.5}}, {"name": "whole", "loads": {"lamp": 1.0}}]
    found = only(switched("40 A", cases=cases), RULE, "main switch")
    assert (found.severity, found.kind, found.case) == ("fail", "device", "whole")
    assert found.value == pytest.approx(40)
    assert "40 A > 30 A" in found.working[0]


def test_both_poles_of_a_switch_count() -> None:
    """The second load returns through this switch but is fed past it: 10 A in the feed pole, 25 A in the return."""
    runs = [
        cable("feed", "bank", "stud", protection=fuse("30 A")),
        cable("past", "bank", "lamp", carries="feed", protection=fuse("30 A")),
    ]
    switch = {"name": "switch", "kind": "switch", "from": "stud", "to": "lamp", "pole": "both",
              "continuous": "20 A", "volts": "48 V", "resistance": "10 mohm"}  # fmt: skip
    found = only(plan_of(runs, [lamp("lamp", "lamp", "25 A")], devices=[switch]), RULE, "switch")
    assert found.value == pytest.approx(25)


def test_a_surge_of_a_case_is_no_continuous_current() -> None:
    loads = [lamp("lamp", "lamp", "20 A", surge={"times": 3})]
    runs = [cable("feed", "bank", "stud", protection=fuse("30 A"))]
    switch = {"name": "s", "kind": "switch", "from": "stud", "to": "lamp", "continuous": "30 A", "volts": "48 V"}
    cases = [{"name": "steady"}, {"name": "start", "surge": ["lamp"]}]
    assert findings(plan_of(runs, loads, devices=[switch], cases=cases), RULE) == []


def test_a_diode_carries_its_own_current() -> None:
    runs = [cable("feed", "bank", "stud", protection=fuse("30 A"))]
    diode = {"name": "d", "kind": "diode", "from": "stud", "to": "lamp", "continuous": "15 A", "volts": "40 V"}
    assert only(plan_of(runs, [lamp("lamp", "lamp", "20 A")], devices=[diode]), RULE, "d").value == pytest.approx(20)


# Voltage -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("rated", "over"), [("14.4 V", False), ("14.39 V", True)])
def test_boundary_of_voltage_is_the_highest_of_its_part_of_the_plan(rated: str, over: bool) -> None:
    """The charger is set to 14.4 V, whatever it happens to stand at in a case."""
    runs = [cable("feed", "bank", "stud", protection=fuse("30 A")), cable("charge", "charger", "stud")]
    switch = {"name": "s", "kind": "switch", "from": "stud", "to": "lamp", "continuous": "30 A", "volts": rated}
    plan = plan_of(runs, [lamp("lamp", "lamp")], sources=[BANK, charger()], devices=[switch])
    assert (fails(plan, RULE) == ["s"]) is over


def test_a_converter_s_output_is_another_part_of_the_plan() -> None:
    """24 V from a converter does not reach a 16 V switch before it."""
    sources = [BANK, {"name": "up", "kind": "converter", "from": "lamp", "at": "high", "nominal": "24 V",
                      "volts": "24 V", "amps": "2 A", "efficiency": "90 %"}]  # fmt: skip
    assert findings(switched(sources=sources, switch={"volts": "16 V"}), RULE) == []
    before = only(switched(sources=sources, switch={"volts": "12 V"}), RULE, "main switch")
    assert before.value == pytest.approx(12.8, abs=0.05)
    assert before.unit == "V"


# Protection before it ------------------------------------------------------------------------------------------


def test_a_switch_rated_less_than_its_protection_is_doubtful() -> None:
    """It carries 20 A of its 30 A, but the 40 A before it lets an overload pass: common practice."""
    found = only(switched(fused="40 A"), RULE, "main switch")
    assert (found.severity, found.value, found.limit) == ("warn", 40.0, 30.0)
    assert "common practice" in found.basis
    assert findings(switched(fused="30 A"), RULE) == []


def test_protection_that_follows_the_switch_counts_where_none_stands_before_it() -> None:
    """The switch sits at the battery post; the only cable it leads on to starts with the 40 A."""
    switch = {"name": "s", "kind": "switch", "from": "bank", "to": "stud", "continuous": "30 A", "volts": "48 V"}
    runs = [cable("feed", "stud", "lamp", protection=fuse("40 A"))]
    assert only(plan_of(runs, [lamp("lamp", "lamp")], devices=[switch]), RULE, "s").value == 40


# Busbars -------------------------------------------------------------------------------------------------------


def bus(rating: str | None, *, fused: str = "60 A", amps: str = "20 A") -> Plan:
    """A bank through 60 A and a charger of 20 A onto a bar with two loads."""
    runs = [
        cable("main", "bank", "bar", size="25 mm2", protection=fuse(fused)),
        cable("charge", "charger", "bar", protection_to=fuse("30 A")),
        cable("a", "bar", "one", size="25 mm2", protection=fuse("30 A")),
        cable("b", "bar", "two", size="25 mm2", protection=fuse("30 A")),
    ]
    point: Row = {"name": "bar", "kind": "busbar"} | ({"rating": rating} if rating else {})
    loads = [lamp("one", "one", amps), lamp("two", "two", "25 A")]
    cases = [{"name": "all on"}]
    return plan_of(runs, loads, sources=[bank(), charger()], points=[point], cases=cases)


@pytest.mark.parametrize(("amps", "over"), [("35 A", False), ("35.01 A", True)])
def test_boundary_of_a_bar_is_the_sum_that_flows_into_it(amps: str, over: bool) -> None:
    """Kirchhoff: what two loads take, 35 + 25 = 60 A, is what bank and charger bring."""
    assert (fails(bus("60 A", amps=amps), RULE) == ["bar"]) is over


def test_the_working_of_a_bar_adds_up_what_flows_into_it() -> None:
    found = only(bus("50 A", amps="35 A"), RULE, "bar")
    assert (found.kind, found.unit) == ("point", "A")
    assert found.value == pytest.approx(60)
    assert '20 A of "charge"' in found.working[0]
    assert '40 A of "main"' in found.working[0]
    assert found.working[0].endswith("= 60 A")


def test_a_bar_rated_less_than_the_protection_that_feeds_it_is_doubtful() -> None:
    found = only(bus("60 A", fused="80 A"), RULE, "bar")
    assert (found.severity, found.value) == ("warn", 80.0)
    assert findings(bus("80 A", fused="80 A"), RULE) == []


def test_what_states_no_rating_is_listed_once() -> None:
    found = only(bus(None), RULE, "Test plan")
    assert found.severity == "note"
    assert found.working == ('No rating: "bar"',)
    switch = {"name": "s", "kind": "switch", "from": "stud", "to": "lamp"}
    plan = plan_of([cable("feed", "bank", "stud")], [lamp("lamp", "lamp")], devices=[switch])
    assert only(plan, RULE, "Test plan").working == ('No continuous: "s"', 'No volts: "s"')


def test_strings_of_a_battery_count_together_at_their_bar() -> None:
    """Two strings share 40 A; the bar they stand on carries the whole of it."""
    battery = bank(strings=2, take_off="bar", link={"length": "0.3 m", "size": "50 mm2"})
    runs = [cable("feed", "bank", "lamp", size="25 mm2", protection=fuse("60 A"))]
    plan = plan_of(runs, [lamp("lamp", "lamp", "40 A")], sources=[battery], cases=[{"name": "on"}],
                   points=[{"name": "bank", "kind": "busbar", "rating": "30 A"}])  # fmt: skip
    found = only(plan, RULE, "bank")
    assert found.value == pytest.approx(40)
    assert '40 A of "bank"' in found.working[0]


def test_a_return_through_the_chassis_does_not_pass_the_bar_it_started_from() -> None:
    """12 A leave the bar's feed and come back through the bond: 12 A in either pole, not 24 A."""
    runs = [
        cable("main", "bank", "bar", size="25 mm2", protection=fuse("60 A")),
        cable("bond", "bar", "chassis", "0.5 m", "25 mm2", purpose="bond"),
        cable("feed", "bar", "lamp", size="10 mm2", protection=fuse("20 A"), **{"return": "chassis"}),
    ]
    plan = plan_of(runs, [lamp("lamp", "lamp", "12 A")], rulebook="leisure-vehicle-eu", cases=[{"name": "on"}],
                   points=[{"name": "bar", "kind": "busbar", "rating": "10 A"}])  # fmt: skip
    assert only(plan, RULE, "bar").value == pytest.approx(12)
