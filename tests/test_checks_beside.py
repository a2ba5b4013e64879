"""bank.circulating and plan.stiff-sources: sources side by side, by Ohm's law."""

from typing import Any

import pytest

from farvolt.plan import Plan
from wiring import COPPER_PER_K, bank, cable, charger, findings, lamp, only, plan_of

RULE = "bank.circulating"
WAY_OHM = 2 * 1.91e-3 * (1 + COPPER_PER_K * 10)
"""1 m of 10 mm2 there and back, IEC 60228 Table 3, at the plan's ambient of 30 degC."""


def two_banks(emf: str = "12.4 V", cases: Any = (), **more: Any) -> Plan:
    """A bank of 12.8 V and another, 1 mohm each, joined by 1 m of cable."""
    runs = [cable("tie", "bank", "second", "1 m"), cable("feed", "bank", "pump")]
    sources = [bank(), bank("second", emf=emf, **more), charger(at="bank")]
    return plan_of(runs, [lamp("pump", "pump", "15 A")], sources=sources, cases=cases)


def test_the_lower_bank_is_charged_by_the_higher_one_with_nothing_on() -> None:
    """(12.8 - 12.4) V / (2 mohm + way), loads and chargers off."""
    found = only(two_banks(), RULE, "second")
    assert found.value == pytest.approx(0.4 / (2e-3 + WAY_OHM), rel=1e-3)
    # Nothing states what the second bank stands, so nothing shows that this is harmless.
    assert (found.severity, found.limit) == ("warn", None)
    assert "mohm, of both and the way between" in found.working[-1]


def test_banks_of_one_voltage_exchange_nothing() -> None:
    assert findings(two_banks("12.8 V"), RULE) == []


@pytest.mark.parametrize(
    ("more", "limit", "severity"),
    [
        ({"max_charge": "60 A"}, 60, "warn"),
        ({"max_charge": "70 A"}, 70, "note"),
        ({"max_charge": "35 A", "strings": 2, "resistance": "2 mohm"}, 70, "note"),
        ({"capacity": "100 Ah"}, 20, "warn"),
        ({"capacity": "400 Ah"}, 80, "note"),
    ],
)
def test_the_limit_is_what_the_charged_bank_stands(more: dict[str, Any], limit: float, severity: str) -> None:
    """About 67 A flow; the limit is as stated for every string, or the capacity over 5 hours (common practice)."""
    found = only(two_banks(**more), RULE, "second")
    assert found.limit == pytest.approx(limit, rel=1e-9)
    assert found.severity == severity


@pytest.mark.parametrize(("emf", "named"), [("12.795 V", False), ("12.79 V", True)])
def test_less_than_an_ampere_is_left_alone(emf: str, named: bool) -> None:
    """0.005 V and 0.010 V over about 5.97 mohm: 0.84 A and 1.67 A."""
    assert bool(findings(two_banks(emf), RULE)) == named


@pytest.mark.parametrize("states", [{"second": "off"}, {"second": {"emf": "12.8 V"}}])
def test_the_case_decides(states: dict[str, Any]) -> None:
    assert findings(two_banks(cases=[{"name": "c", "sources": states}]), RULE) == []
    worse = {"name": "low", "sources": {"second": {"emf": "12 V"}}}
    found = only(two_banks(cases=[{"name": "c", "sources": states}, worse]), RULE, "second")
    assert found.case == "low"


def test_a_diode_between_them_stops_it() -> None:
    """The bank behind a diode that lets current out only: nothing charges it."""
    diode = {"name": "d", "kind": "diode", "from": "second", "to": "bank"}
    plan = plan_of(
        [cable("feed", "bank", "pump")], [lamp("pump", "pump")], sources=[bank(), bank("second", emf="12.4 V")],
        devices=[diode],
    )  # fmt: skip
    assert findings(plan, RULE) == []


def test_strings_with_links_count_as_one_bank() -> None:
    link = {"length": "0.1 m", "size": "50 mm2"}
    found = only(two_banks(strings=2, link=link, resistance="2 mohm"), RULE, "second")
    assert found.value == pytest.approx(0.4 / (2e-3 + WAY_OHM), rel=0.02)


def stiff(ohm: str, other: str = "bus") -> list[str]:
    sources = [charger("one", "bus", resistance=ohm), charger("two", other, resistance=ohm, volts="14.2 V")]
    runs = [cable("feed", "bus", "pump"), cable("more", "far", "bus")]
    plan = plan_of(runs, [lamp("pump", "pump")], sources=sources)
    return [one.message for one in findings(plan, "plan.stiff-sources")]


def test_two_regulators_with_nothing_between_them() -> None:
    """20 + 20 microohm between 14.4 and 14.2 V; 60 + 60 are over the 100 that count as next to nothing."""
    (message,) = stiff("0.02 mohm")
    assert "with 40 microohm between" in message
    assert stiff("0.06 mohm") == []


def test_a_cable_between_them_is_enough() -> None:
    assert stiff("0.02 mohm", "far") == []
