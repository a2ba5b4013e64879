"""plan.uneven-sharing and bank.sharing: currents of ways side by side, by hand (conductances add, currents divide)."""

from typing import Any

import pytest

from farvolt.plan import Plan
from farvolt.results import Finding
from wiring import bank, cable, context_of, findings, lamp, only, plan_of

RULE = "plan.uneven-sharing"


def side_by_side(far_m: str, amps: str = "50 A", **more: Any) -> Plan:
    """Two cables between the same points: one of 1 m, another of `far_m`."""
    runs = [cable("near", "bank", "pump", "1 m"), cable("far", "bank", "pump", far_m, **more)]
    return plan_of(runs, [lamp("pump", "pump", amps)])


def allowed(plan: Plan, index: int) -> float:
    """Ampacity of a run as the rulebook has it (its own tests check it)."""
    found = context_of(plan).lowest_ampacity[index]
    assert found is not None
    assert found.amps is not None
    return found.amps


def test_a_cable_four_times_as_long_carries_a_fifth() -> None:
    """Conductances 4 : 1, so 40 A and 10 A of 50 A; the even share is 25 A, and 10 % above is 27.5 A."""
    plan = side_by_side("4 m")
    found = only(plan, RULE, "near")
    assert found.value == pytest.approx(40, rel=1e-9)
    assert found.limit == pytest.approx(27.5, rel=1e-9)
    ampacity = allowed(plan, 0)
    assert found.severity == ("warn" if ampacity < 80 else "note")
    assert f"{50 * ampacity / 40:.3g} A in all" in found.working[-1]


def test_equal_cables_share_alike() -> None:
    assert findings(side_by_side("1 m"), RULE) == []


@pytest.mark.parametrize(("far_m", "named"), [("1.22 m", False), ("1.23 m", True)])
def test_the_boundary_is_ten_percent_above_even(far_m: str, named: bool) -> None:
    """Share of the shorter: 1.22/2.22 = 0.5495 and 1.23/2.23 = 0.5516 of the current; the limit is 1.1 x 0.5."""
    assert bool(findings(side_by_side(far_m), RULE)) == named


def test_a_small_current_is_noted_and_none_is_not() -> None:
    assert only(side_by_side("4 m", "5 A"), RULE, "near").severity == "note"
    assert findings(side_by_side("4 m", "0.01 A"), RULE) == []


def test_the_even_share_goes_with_ampacity() -> None:
    """A thicker cable that carries more in the same proportion as it may is not uneven."""
    plan = side_by_side("1 m", size="16 mm2")
    thin, thick = allowed(plan, 0), allowed(plan, 1)
    share = 1.91 / (1.91 + 1.21)  # IEC 60228 Table 3: the thick cable's part of the current
    even = thick / (thin + thick)
    assert bool(findings(plan, RULE)) == (max(share / even, (1 - share) / (1 - even)) > 1.1)


def test_chains_through_other_points_stand_side_by_side_too() -> None:
    """By way of a splice: 1 m against 2 m + 2 m."""
    runs = [cable("near", "bank", "pump", "1 m"), cable("a", "bank", "splice"), cable("b", "splice", "pump")]
    found = only(plan_of(runs, [lamp("pump", "pump", "50 A")]), RULE, "near")
    assert 'shares with "a" + "b"' in found.message
    # With a load at the splice it is a ring, and its parts are judged as one.
    ring = plan_of(runs, [lamp("pump", "pump", "50 A"), lamp("light", "splice", "0.1 A")])
    assert findings(ring, RULE) == []


def test_a_ring_with_its_load_near_one_end() -> None:
    """Ring bank - a - b - bank of 1, 4 and 4 m, all of it at a: 8/9 of the current by the short end."""
    runs = [
        cable("short", "bank", "a", "1 m"), cable("middle", "a", "b", "4 m"), cable("long", "b", "bank", "4 m"),
    ]  # fmt: skip
    free = plan_of(runs, [lamp("heater", "a", "1 A")])
    nearly = allowed(free, 0) * 9 / 8
    plan = plan_of(runs, [lamp("heater", "a", f"{0.82 * nearly} A"), lamp("light", "b", "0.01 A")])
    found = only(plan, RULE, "short")
    assert found.severity == "warn"
    assert found.value == pytest.approx(0.82 * allowed(free, 0), rel=1e-3)
    assert 'while "long", the other end of its ring' in found.message
    below = plan_of(runs, [lamp("heater", "a", f"{0.78 * nearly} A"), lamp("light", "b", "0.01 A")])
    assert findings(below, RULE) == []


def test_a_bond_to_the_chassis_is_no_cable_to_share_by() -> None:
    """Two circuits that return through the chassis: their bonds stand side by side, but have no ampacity."""
    runs = [
        cable("one", "bank", "pump", "1 m", **{"return": "chassis"}), cable("tie", "pump", "light", "1 m"),
        cable("two", "bank", "light", "1 m", **{"return": "chassis"}), cable("bond", "bank", "chassis"),
    ]  # fmt: skip
    plan = plan_of(runs, [lamp("pump", "pump", "20 A"), lamp("light", "light", "20 A")])
    assert findings(plan, RULE) == []


def strung(strings: int, take_off: str, link_m: str = "0.3 m", size: str = "10 mm2") -> list[Finding]:
    link = {"length": link_m, "size": size}
    source = bank(strings=strings, take_off=take_off, link=link, resistance="1 mohm")
    runs = [cable("feed", "bank", "pump", "1 m", "50 mm2")]
    return findings(plan_of(runs, [lamp("pump", "pump", "60 A")], sources=[source]), "bank.sharing")


def test_two_strings_taken_off_at_the_same_end() -> None:
    """Links of 0.3 m x 1.91 mohm/m (IEC 60228) in both poles: 1 mohm against 1 + 2 x 0.573 = 2.146 mohm, so the first
    string carries 2.146/3.146 of 60 A = 40.93 A; even is 30 A."""
    (found,) = strung(2, "same end")
    assert found.severity == "warn"
    assert found.value == pytest.approx(60 * 2.146 / 3.146, rel=0.02)  # the plan's conductors are warmer than 20 degC
    assert found.limit == pytest.approx(33, rel=1e-6)
    assert found.working[0].startswith("string 1: ")
    assert found.remedy is not None
    assert found.remedy.startswith("a take-off at opposite ends")


@pytest.mark.parametrize(("strings", "take_off"), [(2, "ends"), (2, "bar"), (4, "bar")])
def test_strings_that_share_alike(strings: int, take_off: str) -> None:
    """Two strings taken off at opposite ends have one link each; at a bar all cables are of one length."""
    assert strung(strings, take_off) == []


def test_four_strings_at_opposite_ends_still_differ_with_thin_links() -> None:
    """The outer two carry more than the inner two; thick short links bring them within 10 %."""
    (found,) = strung(4, "ends")
    assert "String 1" in found.message
    assert found.remedy is not None
    assert found.remedy.startswith("every string to a bar")
    assert strung(4, "ends", "0.1 m", "120 mm2") == []


def test_a_bank_that_is_off_has_nothing_to_share() -> None:
    link = {"length": "0.3 m", "size": "10 mm2"}
    sources = [bank(strings=2, take_off="same end", link=link), bank("other")]
    runs = [cable("feed", "other", "pump"), cable("tie", "bank", "other")]
    case = {"name": "off", "sources": {"bank": "off"}}
    plan = plan_of(runs, [lamp("pump", "pump")], sources=sources, cases=[case])
    assert findings(plan, "bank.sharing") == []
