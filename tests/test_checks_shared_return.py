"""plan.shared-return: returns that carry another current than their feed, by Kirchhoff's laws on small plans."""

from typing import Any

import pytest

from farvolt.plan import Plan
from wiring import bank, cable, charger, findings, lamp, only, plan_of

RULE = "plan.shared-return"
FEED = cable("feed", "bank", "pump")
LAMP = [cable("lamp feed", "bank", "lamp", carries="feed"), cable("lamp return", "lamp", "pump", carries="return")]


def borrowed(amps: str = "2 A") -> Plan:
    """A lamp with a feed of its own, whose return was taken to the pump."""
    return plan_of([FEED, *LAMP], [lamp("pump", "pump", "10 A"), lamp("lamp", "lamp", amps)])


def test_a_return_borrowed_by_another_circuit() -> None:
    """10 A out, 10 + 2 A back."""
    found = only(borrowed(), RULE, "feed")
    assert found.severity == "warn"
    assert found.value == pytest.approx(12, rel=1e-9)
    assert found.limit == pytest.approx(10, rel=1e-9)
    assert 'carries that of "lamp" as well' in found.message
    assert found.working == ("12 A - 10 A = 2 A",)


@pytest.mark.parametrize(("amps", "named"), [("0.52 A", False), ("0.54 A", True), ("0.05 A", False)])
def test_the_boundary_is_five_percent_of_the_larger(amps: str, named: bool) -> None:
    """0.52/10.52 = 4.94 %, 0.54/10.54 = 5.12 %."""
    assert bool(findings(borrowed(amps), RULE)) == named


def test_a_tenth_of_an_ampere_is_left_alone() -> None:
    for amps, named in (("0.09 A", False), ("0.11 A", True)):
        plan = plan_of([FEED, *LAMP], [lamp("pump", "pump", "0 A"), lamp("lamp", "lamp", amps)])
        assert bool(findings(plan, RULE)) == named


def test_circuits_with_returns_of_their_own() -> None:
    plan = plan_of([FEED, cable("onward", "pump", "lamp")], [lamp("pump", "pump", "9 A"), lamp("lamp", "lamp", "3 A")])
    assert findings(plan, RULE) == []


def test_a_run_that_feeds_what_returns_by_the_chassis_is_as_meant() -> None:
    """The feeder carries more out than back: the work lamp returns through the chassis, and has one way back."""
    runs = [FEED, cable("work lamp", "pump", "rear", **{"return": "chassis"}), cable("bond", "bank", "chassis")]
    assert findings(plan_of(runs, [lamp("pump", "pump", "3 A"), lamp("rear", "rear", "5 A")]), RULE) == []


def test_a_common_negative_of_its_own_is_as_meant() -> None:
    """Two feeds and one return conductor that carries no feed: it is laid out as a common return."""
    runs = [
        cable("a", "bank", "box", carries="feed"), cable("b", "bank", "lamp", carries="feed"),
        cable("common", "bank", "box", carries="return"), cable("tail", "box", "lamp", carries="return"),
    ]  # fmt: skip
    assert findings(plan_of(runs, [lamp("pump", "box", "3 A"), lamp("lamp", "lamp", "5 A")]), RULE) == []


def test_a_second_way_back_through_the_chassis() -> None:
    """The pump's case is bonded too: 2 m of 10 mm2 against two bonds of 2 m, so two thirds come back by the wire."""
    runs = [FEED, cable("bond", "bank", "chassis"), cable("case bond", "pump", "chassis")]
    found = only(plan_of(runs, [lamp("pump", "pump", "30 A")]), RULE, "feed")
    assert found.value == pytest.approx(20, rel=1e-9)
    assert found.limit == pytest.approx(30, rel=1e-9)
    assert found.message.endswith("the rest comes back another way")


def test_a_chassis_return_beside_a_wire() -> None:
    """A circuit that returns through the chassis, and a wire laid beside it all the same."""
    runs = [
        cable("lamp", "bank", "rear", **{"return": "chassis"}), cable("wire", "rear", "bank", carries="return"),
        cable("bond", "bank", "chassis"),
    ]  # fmt: skip
    found = only(plan_of(runs, [lamp("rear", "rear", "5 A")]), RULE, "lamp")
    assert found.limit == pytest.approx(5, rel=1e-9)
    assert found.value is not None
    assert 0 < found.value < 5


def test_two_circuits_bonded_at_one_point_are_as_meant() -> None:
    """Their bonds share what both carry: that is no second way back."""
    runs = [
        cable("one", "bank", "rear", **{"return": "chassis"}), cable("bond", "bank", "chassis"),
        cable("two", "bank", "side", **{"return": "chassis"}), cable("tail", "side", "rear", carries="feed"),
    ]  # fmt: skip
    assert findings(plan_of(runs, [lamp("rear", "rear", "5 A"), lamp("side", "side", "1 A")]), RULE) == []


def test_one_finding_for_all_runs_on_the_same_way() -> None:
    """The lamp's return comes back through three runs of the pump's circuit."""
    runs = [cable("1", "bank", "a"), cable("2", "a", "b"), cable("3", "b", "pump"), *LAMP]
    (found,) = findings(plan_of(runs, [lamp("pump", "pump", "10 A"), lamp("lamp", "lamp", "2 A")]), RULE)
    assert found.working[-1] == 'on the same way: "2", "3"'


def test_cables_in_parallel_share_in_each_pole_by_themselves() -> None:
    """A fuse in one feed shifts some current between the feeds, and none between the returns."""
    guard = {"type": "blade", "rating": "50 A", "distance": "0.1 m", "resistance": "0.5 mohm"}
    runs = [FEED | {"protection": guard}, cable("again", "bank", "pump")]
    assert findings(plan_of(runs, [lamp("pump", "pump", "60 A")]), RULE) == []


def test_the_current_of_a_charger_comes_back_through_its_own_run() -> None:
    runs = [FEED, cable("charging", "charger", "pump")]
    assert findings(plan_of(runs, [lamp("pump", "pump", "3 A")], sources=[bank(), charger()]), RULE) == []


def test_a_charger_s_return_through_another_circuit_has_no_load_to_name() -> None:
    runs: list[dict[str, Any]] = [
        FEED, cable("charging", "charger", "bank", carries="feed"), cable("back", "charger", "pump", carries="return"),
    ]  # fmt: skip
    found = only(plan_of(runs, [lamp("pump", "pump", "1 A")], sources=[bank(), charger()]), RULE, "feed")
    assert "current of another circuit or source as well" in found.message
