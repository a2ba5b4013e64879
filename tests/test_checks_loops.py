"""plan.converter-loop and plan.zero-ohm-ring."""

from typing import Any

import pytest

from farvolt.plan import Plan
from wiring import bank, cable, findings, lamp, only, plan_of

Row = dict[str, Any]
LOOP, ZERO = "plan.converter-loop", "plan.zero-ohm-ring"


def converter(name: str, start: str, at: str) -> Row:
    return {
        "name": name, "kind": "converter", "from": start, "at": at, "nominal": "12 V", "volts": "13 V",
        "amps": "10 A", "efficiency": "90 %", "isolated": True,
    }  # fmt: skip


FEED = cable("feed", "bank", "pump")


def looped(*sources: Row, runs: Any = (), **rows: Any) -> Plan:
    return plan_of([FEED, *runs], [lamp("pump", "pump"), lamp("radio", "y")], sources=[bank(), *sources], **rows)


def test_converters_behind_one_another_are_no_loop() -> None:
    assert findings(looped(converter("a", "bank", "x"), converter("b", "x", "y")), LOOP) == []


def test_a_ring_that_no_source_starts_fails() -> None:
    """a feeds b by way of a cable, and b feeds a: neither has a source."""
    plan = looped(converter("a", "x", "y"), converter("b", "z", "x"), runs=[cable("onward", "y", "z")])
    (found,) = findings(plan, LOOP)
    assert (found.severity, found.subject) == ("fail", "a")
    assert found.message == 'A ring of converters: "a" feeds "b" feeds "a"; no source starts it, so it is dead'
    assert only(plan, "plan.unfed", "radio").severity == "fail"


def test_a_ring_with_a_source_in_it_is_doubtful_while_all_are_on() -> None:
    """Converters both ways between two parts, one with the bank; not where a case has one of them off."""
    both = (converter("out", "bank", "y"), converter("back", "y", "bank"))
    (found,) = findings(looped(*both), LOOP)
    assert found.severity == "warn"
    assert "power goes round and is lost" in found.message
    assert findings(looped(*both, cases=[{"name": "c", "sources": {"back": "off"}}]), LOOP) == []


def test_a_converter_on_its_own_output() -> None:
    (found,) = findings(looped(converter("a", "x", "y"), runs=[cable("slip", "y", "x")]), LOOP)
    assert found.severity == "fail"
    assert found.message.startswith('"a" draws from what it feeds itself')


@pytest.mark.parametrize(("ends", "named"), [(("y", "x"), True), (("x", "y"), False)])
def test_a_diode_closes_a_ring_in_its_own_direction_only(ends: tuple[str, str], named: bool) -> None:
    diode = {"name": "d", "kind": "diode", "from": ends[0], "to": ends[1]}
    assert bool(findings(looped(converter("a", "x", "y"), devices=[diode]), LOOP)) == named


def switch(name: str, start: str, end: str, ohm: str = "0 ohm", **more: Any) -> Row:
    return {"name": name, "kind": "switch", "from": start, "to": end, "resistance": ohm, **more}


@pytest.mark.parametrize(
    ("devices", "named"),
    [
        ([switch("a", "bank", "bus")], ()),
        ([switch("a", "bank", "bus"), switch("b", "bank", "bus")], ('"a", "b"',)),
        ([switch("a", "bank", "bus", pole="both"), switch("b", "bank", "bus", pole="both")], ('"a", "b"',)),
        ([switch("a", "bank", "bus"), switch("b", "bank", "bus", "0.1 mohm")], ()),
        ([switch("a", "bank", "bus"), switch("b", "bus", "c"), switch("c", "c", "bank")], ('"a", "b", "c"',)),
        ([switch("a", "bank", "bus"), switch("b", "bus", "c")], ()),
    ],
)
def test_a_ring_without_resistance(devices: list[Row], named: tuple[str, ...]) -> None:
    found = findings(plan_of([cable("feed", "bus", "pump")], [lamp("pump", "pump")], devices=devices), ZERO)
    assert tuple(one.message.split(" lie in")[0] for one in found) == named


def test_the_numbers_of_such_a_ring_are_finite() -> None:
    """Never crashed on: the case is solved, with least resistances in place of none."""
    devices = [switch("a", "bank", "bus"), switch("b", "bank", "bus")]
    found = findings(plan_of([cable("feed", "bus", "pump")], [lamp("pump", "pump")], devices=devices), "volts.collapse")
    assert found == []
