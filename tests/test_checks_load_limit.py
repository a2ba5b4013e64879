"""protection.over-load-limit: the protection that really stands before a load against what its maker allows."""

import pytest

from farvolt.plan import Plan
from wiring import bank, cable, charger, fails, findings, fuse, lamp, only, plan_of

RULE = "protection.over-load-limit"


def branch(rating: str | None, limit: str = "15 A", **more: object) -> Plan:
    """A bank behind 100 A, a bus, and a load whose own run has a fuse or not."""
    own = {"protection": fuse(rating)} if rating else {}
    runs = [cable("main", "bank", "bus", size="25 mm2", protection=fuse("100 A")), cable("feed", "bus", "pump", **own)]
    return plan_of(runs, [lamp("pump", "pump", max_protection=limit)], **more)  # type: ignore[arg-type]


@pytest.mark.parametrize(("rating", "limit", "over"), [("15 A", "15 A", False), ("15.01 A", "15 A", True)])
def test_boundary_is_what_the_maker_allows(rating: str, limit: str, over: bool) -> None:
    assert (fails(branch(rating, limit), RULE) == ["pump"]) is over


def test_the_nearest_protection_counts_and_is_named() -> None:
    """No fuse in the branch: the 100 A at the bank is what protects the load. 15 A is the next made at or below."""
    found = only(branch(None), RULE, "pump")
    assert (found.severity, found.value, found.limit) == ("fail", 100.0, 15.0)
    assert '100 A on "main"' in found.message
    assert found.remedy is not None
    assert found.remedy.startswith('15 A on "main"')


def test_no_protection_at_all_breaks_the_makers_limit() -> None:
    plan = plan_of([cable("feed", "bank", "pump")], [lamp("pump", "pump", max_protection="15 A")])
    found = only(plan, RULE, "pump")
    assert found.value is None
    assert "nothing protects it" in found.message


def test_every_way_that_feeds_a_load_counts() -> None:
    """A second bank feeds the bus past no lower fuse than 40 A: the higher of both ways decides."""
    runs = [
        cable("one", "bank", "pump", protection=fuse("10 A")),
        cable("two", "spare", "pump", protection=fuse("40 A")),
    ]
    plan = plan_of(runs, [lamp("pump", "pump", max_protection="15 A")], sources=[bank(), bank("spare")])
    assert only(plan, RULE, "pump").value == 40


def test_a_source_that_limits_itself_is_no_more_than_its_limit() -> None:
    """A 10 A charger behind a 30 A fuse cannot feed more than 10 A for long."""
    runs = [cable("feed", "charger", "pump", protection=fuse("30 A"))]
    loads = [lamp("pump", "pump", max_protection="15 A")]
    assert findings(plan_of(runs, loads, sources=[charger(amps="10 A")]), RULE) == []
    found = only(plan_of(runs, loads, sources=[charger(amps="20 A")]), RULE, "pump")
    assert found.value == 20


def test_protection_before_a_switch_counts_behind_it() -> None:
    runs = [cable("feed", "bank", "switch in", protection=fuse("20 A"))]
    devices = [{"name": "switch", "kind": "switch", "from": "switch in", "to": "pump"}]
    plan = plan_of(runs, [lamp("pump", "pump", max_protection="15 A")], devices=devices)
    assert only(plan, RULE, "pump").value == 20


def test_loads_without_a_stated_limit_are_left_alone() -> None:
    assert findings(plan_of([cable("feed", "bank", "pump")], [lamp("pump", "pump")]), RULE) == []
