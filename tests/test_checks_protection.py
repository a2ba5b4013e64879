"""protection.*: by section, from every end that can feed a cable; distances, ratings, exemptions that are named."""

import random
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt.plan import Plan
from farvolt.results import Finding
from wiring import (
    bank,
    cable,
    charger,
    fails,
    findings,
    fuse,
    lamp,
    named_sizes,
    only,
    plan_of,
    rerated,
    resized,
)

US = "small-craft-us"
"""33 CFR 183.425 Table 5 at 105 degC, outside engine spaces: 14 AWG 35 A, 12 AWG 45 A, 10 AWG 60 A, 8 AWG 80 A,
6 AWG 120 A, 2/0 AWG 330 A. Protection within 7 in, 40 in sheathed, 72 in sheathed from a battery."""


def severities(plan: Plan, subject: str) -> set[tuple[str, str]]:
    """(rule, severity) of all that is said of the protection of one run."""
    rules = ("protection.missing", "protection.distance", "protection.over-conductor", "protection.under-load")
    return {(rule, one.severity) for rule in rules for one in findings(plan, rule, subject)}


def us(runs: list[Any], loads: list[Any], **more: Any) -> Plan:
    return plan_of(runs, loads, rulebook=US, **more)


# Missing -------------------------------------------------------------------------------------------------------


def test_a_cable_without_protection() -> None:
    """33 CFR 183.455: 2 m bare from the bank; 7 in (0.178 m) would be allowed if protection followed."""
    plan = us([cable("feed", "bank", "pump", "2 m", "14 AWG")], [lamp("pump", "pump", "10 A")])
    found = only(plan, "protection.missing", "feed")
    assert (found.severity, found.value, found.limit, found.unit) == ("fail", 2, 0.178, "m")
    assert 'where "bank" feeds it at "bank"' in found.message
    assert "33 CFR 183.455" in found.basis
    assert "0 m before + 2 m = 2 m; 0.178 m is allowed" in found.working[0]
    assert found.remedy == (
        'a fuse or breaker in the feed at "bank", rated between its load of 10 A and the 35 A the cable allows'
    )


@pytest.mark.parametrize("rating", ["10 A", "35 A"])
def test_the_ratings_it_offers_pass(rating: str) -> None:
    runs = [cable("feed", "bank", "pump", "2 m", "14 AWG", protection=fuse(rating))]
    assert severities(us(runs, [lamp("pump", "pump", "10 A")]), "feed") == set()


def test_one_flaw_is_one_finding() -> None:
    """A bare lead fed by the bank, and by a charger through a large fuse at the same point: missing, once."""
    runs = [
        cable("main", "charger", "bank", "1 m", "6 AWG", protection_to=fuse("100 A", kind="strip")),
        cable("gauge", "bank", "gauge", "2 m", "16 AWG"),
    ]
    plan = us(runs, [lamp("gauge", "gauge", "0.1 A")], sources=[bank(), charger(amps="100 A")])
    assert severities(plan, "gauge") == {("protection.missing", "fail")}


def test_protection_in_the_return_does_not_protect_the_feed() -> None:
    runs = [cable("feed", "bank", "pump", "2 m", "14 AWG", protection=fuse("15 A", pole="return"))]
    found = only(us(runs, [lamp("pump", "pump")]), "protection.missing", "feed")
    assert found.severity == "fail"
    assert "protection in the return does not protect the feed" in found.message


def test_a_measured_cable_of_unknown_size_still_needs_protection() -> None:
    runs = [cable("feed", "bank", "pump", size=None, resistance="5 mohm")]
    assert fails(us(runs, [lamp("pump", "pump")]), "protection.missing") == ["feed"]


def test_an_open_switch_protects_nothing() -> None:
    """Judged with every switch closed, though the only case has it open."""
    runs = [cable("feed", "switched", "pump", "2 m", "14 AWG")]
    devices = [{"name": "switch", "kind": "switch", "from": "bank", "to": "switched", "state": "open"}]
    plan = us(runs, [lamp("pump", "pump")], devices=devices, cases=[{"name": "off", "loads": "none"}])
    assert fails(plan, "protection.missing") == ["feed"]


@pytest.mark.parametrize(
    ("length", "sheath", "expected"),
    [
        ("52 in", True, set()),  # E-11 standards-body quiz (7/2015), question 1: 52 in of 8 AWG in loom, within 72 in
        ("52 in", False, {("protection.missing", "fail")}),
        ("72 in", True, set()),
        ("73 in", True, {("protection.missing", "fail")}),
        ("7 in", False, set()),
    ],
)
def test_battery_lead_whose_protection_is_at_its_far_end(
    length: str, sheath: bool, expected: set[tuple[str, str]]
) -> None:
    lead = cable("lead", "bank", "panel", length, "8 AWG", sheathed=sheath)
    lead["protection_to"] = fuse("50 A", "0 m", "thermal breaker")
    assert severities(us([lead], [lamp("pump", "panel", "20 A")]), "lead") == expected


def test_battery_lead_into_a_block_where_everything_is_protected() -> None:
    """7 in of bare lead to a fuse block: what leaves the block is protected there."""
    runs = [
        cable("lead", "bank", "block", "7 in", "6 AWG"),
        cable("one", "block", "lamp", "2 m", "14 AWG", protection=fuse("10 A", "0 m")),
        cable("two", "block", "fan", "2 m", "14 AWG", protection=fuse("10 A", "0 m")),
    ]
    loads = [lamp("lamp", "lamp"), lamp("fan", "fan")]
    assert findings(us(runs, loads), "protection.missing") == []
    # A load or a converter straight on the block draws through the bare lead alone.
    assert fails(us(runs, [*loads, lamp("light", "block")]), "protection.missing") == ["lead"]
    drawing = {
        "name": "supply", "kind": "converter", "from": "block", "at": "radio", "nominal": "12 V", "volts": "13.8 V",
        "amps": "5 A", "efficiency": "90 %",
    }  # fmt: skip
    assert fails(us(runs, loads, sources=[bank(), drawing]), "protection.missing") == ["lead"]


def test_protection_ahead_must_suit_the_bare_lead_too() -> None:
    """A 100 A breaker at the far end of 52 in of 8 AWG (80 A): near enough, but above what the lead may carry."""
    lead = cable("lead", "bank", "panel", "52 in", "8 AWG", sheathed=True)
    lead["protection_to"] = fuse("100 A", "0 m", "thermal breaker")
    found = only(us([lead], [lamp("pump", "panel", "20 A")]), "protection.over-conductor", "lead")
    assert (found.value, found.limit) == (100, pytest.approx(80))


def test_cranking_is_exempt_and_named() -> None:
    """E-11 11.10 exempts cranking-motor circuits; the same quiz, question 2: 76 in of starter cable, none required."""
    runs = [cable("starter", "bank", "starter", "76 in", "2/0 AWG", purpose="cranking")]
    plan = us(runs, [lamp("starter", "starter", "200 A")])
    found = only(plan, "protection.missing", "starter")
    assert found.severity == "note"
    assert "cranking run is exempt" in found.message
    assert "E-11" in found.basis
    indoors = plan_of(runs, [lamp("starter", "starter", "200 A")], rulebook="cabin-nec")
    assert fails(indoors, "protection.missing") == ["starter"]


def test_a_feed_is_not_exempt_for_being_called_a_bond() -> None:
    runs = [cable("feed", "bank", "pump", "2 m", "14 AWG", purpose="bond")]
    assert fails(us(runs, [lamp("pump", "pump")]), "protection.missing") == ["feed"]


# Every end that can feed ----------------------------------------------------------------------------------------


def charging(amps: str = "40 A", size: str = "10 AWG", **guards: Any) -> Plan:
    """An alternator's charging cable to a bus, the bank's main protection, one load."""
    runs = [
        cable("main", "bank", "bus", "0.5 m", "2/0 AWG", protection=fuse("200 A", kind="cartridge")),
        cable("charging", "charger", "bus", "3 m", size, **guards),
        cable("feed", "bus", "pump", "2 m", "14 AWG", protection=fuse("15 A")),
    ]
    return us(runs, [lamp("pump", "pump")], sources=[bank(), charger(amps=amps, self_limiting=True)])


def test_charging_cable_is_protected_where_the_bank_feeds_it() -> None:
    """At the bus end; the charger's own end is named as exempt (E-11 11.10: self-limiting outputs)."""
    plan = charging(protection_to=fuse("50 A", kind="strip"))
    assert severities(plan, "charging") == {("protection.missing", "note")}
    found = only(plan, "protection.missing", "charging")
    assert (found.value, found.limit) == (40, pytest.approx(60))
    assert "the source limits itself" in found.message
    assert "the plan states that it does" in found.basis


def test_protection_at_the_chargers_end_alone_leaves_the_banks_end_to_the_main_fuse() -> None:
    """200 A of the main protection against 60 A of 10 AWG, fed from the bus."""
    plan = charging(protection=fuse("50 A", kind="strip"))
    found = only(plan, "protection.over-conductor", "charging")
    assert (found.severity, found.value, found.limit) == ("fail", 200, pytest.approx(60))
    assert 'the 200 A on "main"' in found.message


def test_a_charger_that_can_exceed_its_cable_limits_nothing() -> None:
    """40 A out of a charger into 14 AWG (35 A): its own limit is no protection."""
    plan = charging(size="14 AWG", protection_to=fuse("30 A", kind="strip"))
    assert ("protection.missing", "fail") in severities(plan, "charging")
    assert 'where "charger" feeds it at "charger"' in only(plan, "protection.missing", "charging").message


def test_a_case_may_raise_what_a_charger_delivers() -> None:
    """The limit that counts is the highest of any case: 70 A into 10 AWG (60 A)."""
    plan = charging(protection_to=fuse("50 A", kind="strip"))
    hard = plan.model_copy(update={"cases": _cases({"name": "hard", "sources": {"charger": {"amps": "70 A"}}})})
    assert ("protection.missing", "fail") in severities(hard, "charging")


def _cases(*rows: dict[str, Any]) -> Any:
    return plan_of([], sources=[bank(), charger()], cases=list(rows)).cases


def test_a_converters_output_is_limited_by_itself_and_says_so() -> None:
    supply = {
        "name": "supply", "kind": "converter", "from": "bank", "at": "radio bus", "nominal": "12 V",
        "volts": "13.8 V", "amps": "10 A", "efficiency": "90 %",
    }  # fmt: skip
    notes = {}
    for size in ("14 AWG", "18 AWG"):
        runs = [cable("feed", "radio bus", "radio", "2 m", size, insulation="60 degC")]
        plan = us(runs, [lamp("radio", "radio", "5 A")], sources=[bank(), supply | {"amps": "12 A"}])
        notes[size] = only(plan, "protection.missing", "feed").severity
    # Table 5 at 60 degC: 14 AWG 20 A, 18 AWG 10 A.
    assert notes == {"14 AWG": "note", "18 AWG": "fail"}


def test_two_batteries_feed_each_others_leads() -> None:
    """Both leads need protection at their own battery: what one lacks lays the other bare from the bus end."""
    both = [
        cable("lead a", "a", "bus", "1 m", "6 AWG", protection=fuse("100 A", kind="strip")),
        cable("lead b", "b", "bus", "1 m", "6 AWG", protection=fuse("100 A", kind="strip")),
        cable("feed", "bus", "pump", "2 m", "14 AWG", protection=fuse("15 A")),
    ]
    sources, loads = [bank("a"), bank("b")], [lamp("pump", "pump")]
    assert findings(us(both, loads, sources=sources), "protection.missing") == []
    one = [both[0], cable("lead b", "b", "bus", "1 m", "6 AWG"), both[2]]
    found = findings(us(one, loads, sources=sources), "protection.missing")
    assert {finding.subject: finding.message.split("where ")[1] for finding in found} == {
        "lead a": '"b" feeds it at "bus"; the next protection is 0.9 m on',
        "lead b": '"b" feeds it at "b"',
    }


def test_sources_that_join_count_together() -> None:
    """Two banks behind 100 A each: a trunk of 6 AWG (120 A) is safe from either, and may see 200 A of both."""
    runs = [
        cable("lead a", "a", "bus", "1 m", "6 AWG", protection=fuse("100 A", kind="strip")),
        cable("lead b", "b", "bus", "1 m", "6 AWG", protection=fuse("100 A", kind="strip")),
        cable("trunk", "bus", "block", "2 m", "6 AWG"),
        cable("feed", "block", "pump", "2 m", "14 AWG", protection=fuse("15 A")),
    ]
    plan = us(runs, [lamp("pump", "pump")], sources=[bank("a"), bank("b")])
    found = only(plan, "protection.over-conductor", "trunk")
    assert (found.severity, found.value, found.limit) == ("warn", 200, pytest.approx(120))
    assert found.working == ('100 A on "lead a" + 100 A on "lead b" = 200 A > 120 A',)
    assert found.remedy is not None
    assert findings(resized(plan, named_sizes(found.remedy)), "protection.over-conductor", "trunk") == []
    assert findings(resized(plan, {"trunk": "2/0 AWG"}), "protection.over-conductor", "trunk") == []


def ring(last: str) -> Plan:
    """A ring from the bank: two sides of 8 AWG behind 50 A, and one of `last` behind 10 A at the bank only."""
    runs = [
        cable("one", "bank", "x", "1 m", "8 AWG", protection=fuse("50 A", kind="strip")),
        cable("two", "x", "y", "1 m", "8 AWG"),
        cable("three", "y", "bank", "1 m", last, protection_to=fuse("10 A")),
    ]
    return us(runs, [lamp("pump", "y")])


def test_a_ring_is_fed_from_both_ends() -> None:
    """The thin side has its own 10 A at the bank, but round the ring the 50 A of the other side feeds it."""
    found = only(ring("16 AWG"), "protection.over-conductor", "three")
    assert (found.severity, found.value, found.limit) == ("fail", 50, pytest.approx(25))
    assert 'the 50 A on "one"' in found.message
    assert findings(ring("8 AWG"), "protection.over-conductor", "three") == []


def test_two_unequal_runs_between_the_same_points() -> None:
    """A thin cable with its own 10 A, beside a thick one with 60 A: at the far end the thick one feeds the thin."""
    runs = [
        cable("thin", "bank", "block", "1 m", "16 AWG", protection=fuse("10 A")),
        cable("thick", "bank", "block", "1 m", "8 AWG", protection=fuse("60 A", kind="strip")),
    ]
    plan = us(runs, [lamp("pump", "block")])
    assert only(plan, "protection.over-conductor", "thin").value == 60
    assert findings(plan, "protection.over-conductor", "thick") == []


# Taps ----------------------------------------------------------------------------------------------------------


def tap(length: str = "2 m", size: str = "14 AWG", **more: Any) -> Plan:
    """A tap behind a feeder's 100 A."""
    runs = [
        cable("feeder", "bank", "bus", "1 m", "6 AWG", protection=fuse("100 A", kind="strip")),
        cable("tap", "bus", "pump", length, size, **more),
    ]
    return us(runs, [lamp("pump", "pump", "5 A")])


def test_a_tap_thinner_than_its_feeders_protection() -> None:
    plan = tap()
    found = only(plan, "protection.over-conductor", "tap")
    assert (found.severity, found.value, found.limit) == ("fail", 100, pytest.approx(35))
    assert "100 A > 35 A" in found.working
    assert severities(plan, "feeder") == set()
    assert found.remedy is not None
    assert severities(resized(plan, named_sizes(found.remedy)), "tap") == set()


@pytest.mark.parametrize(
    ("inches", "sheath", "far"),
    [(7, False, False), (8, False, True), (40, True, False), (41, True, True)],
)
def test_distance_of_a_taps_own_protection(inches: int, sheath: bool, far: bool) -> None:
    """33 CFR 183.455(b): 7 in; 40 in where sheathed or enclosed the whole way."""
    found = findings(tap(sheathed=sheath, protection=fuse("15 A", f"{inches} in")), "protection.distance", "tap")
    assert bool(found) is far
    if far:
        assert found[0].value == pytest.approx(inches * 0.0254)
        assert found[0].limit == (1.016 if sheath else 0.178)
        assert "33 CFR 183.455(b)" in found[0].basis


def test_distance_does_not_matter_where_the_feeders_protection_suits_the_tap() -> None:
    plan = tap(size="6 AWG", protection=fuse("15 A", "1 m"))
    assert findings(plan, "protection.distance", "tap") == []


def test_distance_from_the_bank_is_seventy_two_inches_in_a_sheath() -> None:
    """E-11 11.10: 72 in (1.83 m) directly from a battery terminal, sheathed."""
    for inches, far in ((72, False), (73, True)):
        guard = fuse("15 A", f"{inches} in")
        runs = [cable("feed", "bank", "pump", "3 m", "14 AWG", sheathed=True, protection=guard)]
        assert bool(fails(us(runs, [lamp("pump", "pump")]), "protection.distance")) is far


def test_a_distance_that_is_not_stated_is_said_once() -> None:
    guard = {"type": "blade", "rating": "15 A"}
    runs = [cable(name, "bank", name, "2 m", "14 AWG", protection=guard) for name in ("a", "b")]
    (found,) = findings(us(runs, [lamp("a", "a"), lamp("b", "b")]), "protection.distance")
    assert (found.severity, found.kind) == ("note", "plan")
    assert "2 protections state no distance" in found.message


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 10**6))
def test_moving_protection_nearer_makes_no_new_distance(seed: int) -> None:
    """Distances are from the source: at the run's far end, 3 m away, they are what is left of it."""
    chance = random.Random(seed)
    far, sheath = chance.uniform(0, 2.5), chance.random() < 0.5
    near = chance.uniform(0, far)
    book = chance.choice((US, "small-craft-iso", "cabin-nec", "cabin-iec", "leisure-vehicle-us"))
    main, end = chance.choice(("20 A", "60 A", "200 A")), chance.choice(("protection", "protection_to"))

    def told(from_source: float) -> set[tuple[str, str]]:
        distance = from_source if end == "protection" else 3 - from_source
        runs = [
            cable("main", "bank", "bus", "1 m", "35 mm2", protection=fuse(main, kind="strip")),
            cable("tap", "bus", "pump", "3 m", "4 mm2", sheathed=sheath, **{end: fuse("15 A", f"{distance:.6f} m")}),
        ]
        return severities(plan_of(runs, [lamp("pump", "pump")], rulebook=book), "tap")

    assert told(near) <= told(far)


# Ratings -------------------------------------------------------------------------------------------------------


def own(rating: str, size: str, book: str = US, kind: str = "strip", **more: Any) -> list[Finding]:
    """What is said of the rating of a cable's own protection."""
    runs = [cable("feed", "bank", "pump", "2 m", size, protection=fuse(rating, kind=kind), **more)]
    return findings(plan_of(runs, [lamp("pump", "pump", "5 A")], rulebook=book), "protection.over-conductor", "feed")


@pytest.mark.parametrize(
    ("rating", "kind", "expected"),
    [
        ("300 A", "cartridge", None),
        ("330 A", "cartridge", None),
        ("350 A", "cartridge", "warn"),  # the next standard rating, not above 150 % = 495 A
        ("400 A", "cartridge", "fail"),  # not the next: E-11, the stricter of the two
        ("500 A", "open-link strip", "fail"),  # above 150 % as well
    ],
)
def test_published_ceiling_of_two_aught(rating: str, kind: str, expected: str | None) -> None:
    """Marine electrician's article on E-11: 2/0 AWG, 105 degC, outside engine spaces: 330 A; 150 % = 495 A."""
    assert 1.5 * 330 == 495
    found = own(rating, "2/0 AWG", kind=kind)
    assert [one.severity for one in found] == ([] if expected is None else [expected])
    if found:
        assert found[0].limit == pytest.approx(330)
        assert "100 % of 330 A = 330 A" in found[0].working


@pytest.mark.parametrize(
    ("rating", "size", "expected"),
    [
        ("15 A", "14 AWG", None),  # NEC 240.4(D): 15, 20, 30 A at most for 14, 12, 10 AWG copper
        ("20 A", "14 AWG", "fail"),
        ("20 A", "12 AWG", None),
        ("25 A", "12 AWG", "fail"),
        ("30 A", "10 AWG", None),
        ("35 A", "10 AWG", "fail"),
        ("50 A", "8 AWG", None),
        ("70 A", "6 AWG", "warn"),  # NEC 240.4(B): 65 A is no standard rating, 70 A the next
        ("80 A", "6 AWG", "fail"),
    ],
)
def test_nec_small_conductors_and_next_standard_rating(rating: str, size: str, expected: str | None) -> None:
    found = own(rating, size, "cabin-nec", "magnetic breaker")
    assert [one.severity for one in found] == ([] if expected is None else [expected])


def test_the_small_conductor_rule_names_itself() -> None:
    (found,) = own("25 A", "12 AWG", "cabin-nec", "magnetic breaker")
    assert "NEC 240.4(D)" in found.basis
    assert "12 AWG: at most 20 A" in found.working
    assert found.remedy == '"feed": 10 AWG may carry 25 A; or 20 A instead of 25 A on "feed"'


@pytest.mark.parametrize(("rating", "over"), [("90 A", False), ("91 A", True)])
def test_boundary_of_the_rating(rating: str, over: bool) -> None:
    """ISO 10133 Table A.1 (from memory): 10 mm2, 105 degC: 90 A; clause 8 allows no more."""
    assert bool(own(rating, "10 mm2", "small-craft-iso")) is over


def test_the_thinner_return_decides() -> None:
    """Feed 8 AWG (80 A), return 14 AWG (35 A), protection 60 A."""
    (found,) = own("60 A", "8 AWG", **{"return": {"size": "14 AWG"}})
    assert (found.severity, found.limit) == ("fail", pytest.approx(35))


def test_a_return_run_is_judged_by_the_protection_of_its_circuit() -> None:
    runs = [
        cable("out", "bank", "pump", "2 m", "8 AWG", carries="feed", protection=fuse("60 A", kind="strip")),
        cable("back", "pump", "bank", "2 m", "14 AWG", carries="return"),
    ]
    plan = us(runs, [lamp("pump", "pump", "20 A")])
    found = only(plan, "protection.over-conductor", "back")
    assert (found.severity, found.value, found.limit) == ("fail", 60, pytest.approx(35))
    assert found.remedy is not None
    assert findings(resized(plan, named_sizes(found.remedy)), "protection.over-conductor", "back") == []


def test_a_bond_that_serves_as_the_return_is_judged_as_one() -> None:
    """The lamp's 30 A returns through the chassis: a bond of 0.75 mm2 is part of its way back."""
    found = {}
    for size in ("0.75 mm2", "6 mm2"):
        runs = [
            cable("bond", "bank", "chassis", "0.5 m", size, purpose="bond"),
            cable("feed", "bank", "lamp", "2 m", "6 mm2", protection=fuse("30 A"), **{"return": "chassis"}),
        ]
        plan = plan_of(runs, [lamp("lamp", "lamp", "5 A")], rulebook="leisure-vehicle-eu")
        found[size] = fails(plan, "protection.over-conductor")
    assert found == {"0.75 mm2": ["bond"], "6 mm2": []}


def test_parallel_cables_behind_one_protection() -> None:
    """Two of 8 AWG, four conductors together (E-11 x 0.60): 2 x 80 x 0.60 = 96 A; 90 A passes, and is remarked on."""
    (found,) = own("90 A", "8 AWG", kind="terminal fuse", parallel=2)
    assert (found.severity, found.value, found.limit) == ("note", 90, pytest.approx(48))
    assert "equal sharing" in found.message
    (found,) = own("110 A", "8 AWG", kind="cartridge", parallel=2)
    assert found.limit == pytest.approx(96)
    assert found.severity == "fail"  # 100 A is the next standard rating above 96 A
    assert own("40 A", "8 AWG", parallel=2) == []


def test_a_lower_rating_is_offered_only_where_it_carries_the_load() -> None:
    """14 AWG allows 35 A: 35 A carries 33 A, nothing below 35 A carries 35.5 A."""
    runs = [cable("feed", "bank", "pump", "1 m", "14 AWG", protection=fuse("40 A"))]
    remedies = {amps: only(us(runs, [lamp("pump", "pump", amps)]), "protection.over-conductor", "feed").remedy
                for amps in ("33 A", "35.5 A")}  # fmt: skip
    assert remedies == {
        "33 A": '"feed": 12 AWG may carry 40 A; or 35 A instead of 40 A on "feed"',
        "35.5 A": '"feed": 12 AWG may carry 40 A',
    }
    plan = us(runs, [lamp("pump", "pump", "33 A")])
    assert severities(rerated(plan, "feed", 35), "feed") == set()


# Under load ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("amps", "under"), [("15 A", False), ("15.001 A", True)])
def test_boundary_of_the_load(amps: str, under: bool) -> None:
    runs = [cable("feed", "bank", "pump", "1 m", "10 AWG", protection=fuse("15 A"))]
    assert bool(findings(us(runs, [lamp("pump", "pump", amps)]), "protection.under-load")) is under


def test_continuous_loads_count_a_quarter_more_under_the_nec() -> None:
    """NEC 210.20: 8 A + 1.25 x 6 A = 15.5 A, above a breaker of 15 A, though 14 A flow."""
    runs = [
        cable("feed", "bank", "block", "1 m", "10 AWG", protection=fuse("15 A", kind="magnetic breaker")),
        cable("one", "block", "lights", "1 m", "12 AWG"),
        cable("two", "block", "pump", "1 m", "12 AWG"),
    ]
    loads = [lamp("lights", "lights", "6 A", continuous=True), lamp("pump", "pump", "8 A")]
    found = only(plan_of(runs, loads, rulebook="cabin-nec"), "protection.under-load", "feed")
    assert found.value == pytest.approx(8 + 1.25 * 6)
    assert "8 + 1.25 x 6 = 15.5 A" in found.working[0]
    assert "NEC 210.19, 210.20" in found.basis
    assert findings(us(runs, loads), "protection.under-load", "feed") == []


def test_protection_in_the_return_carries_the_return_current() -> None:
    guards = [fuse("15 A"), fuse("5 A", pole="return")]
    runs = [cable("feed", "bank", "pump", "1 m", "10 AWG", protection=guards)]
    found = only(us(runs, [lamp("pump", "pump", "10 A")]), "protection.under-load", "feed")
    assert (found.value, found.limit) == (pytest.approx(10), 5)


def test_the_rating_offered_passes_both_ways() -> None:
    runs = [cable("feed", "bank", "pump", "1 m", "10 AWG", protection=fuse("15 A"))]
    plan = us(runs, [lamp("pump", "pump", "22 A")])
    assert only(plan, "protection.under-load", "feed").remedy == "a rating of 25 A, which the cable may carry"
    assert severities(rerated(plan, "feed", 25), "feed") == set()


def test_a_rating_that_a_cable_behind_does_not_allow_is_not_offered_alone() -> None:
    """A feeder of 10 AWG (60 A) with a tap of 16 AWG (25 A): 30 A would suit the one and burn the other."""
    runs = [
        cable("feed", "bank", "block", "1 m", "10 AWG", protection=fuse("20 A")),
        cable("tap", "block", "lamp", "1 m", "16 AWG"),
    ]
    plan = us(runs, [lamp("pump", "block", "26 A"), lamp("lamp", "lamp", "1 A")])
    found = only(plan, "protection.under-load", "feed")
    assert found.remedy == '"tap": 14 AWG, which may carry it, and then a rating of 30 A'
    mended = rerated(resized(plan, {"tap": "14 AWG"}), "feed", 30)
    assert severities(mended, "feed") | severities(mended, "tap") == set()


def test_a_load_beyond_the_type_asks_for_another_type() -> None:
    runs = [cable("feed", "bank", "pump", "0.5 m", "6 AWG", protection=fuse("40 A"))]
    found = only(us(runs, [lamp("pump", "pump", "60 A")]), "protection.under-load", "feed")
    assert (found.remedy or "").startswith("no blade is made for 60 A")


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 10**6))
def test_what_is_offered_passes(seed: int) -> None:
    """On random chains of feeder, tap and load: sizes and ratings named by a remedy pass when they are applied."""
    chance = random.Random(seed)
    sizes, ratings = ("16 AWG", "14 AWG", "12 AWG", "10 AWG", "8 AWG"), ("5 A", "10 A", "20 A", "30 A", "40 A")
    runs = [
        cable("feed", "bank", "block", "0.5 m", chance.choice(sizes), protection=fuse(chance.choice(ratings))),
        cable("tap", "block", "lamp", "0.5 m", chance.choice(sizes)),
    ]
    draws = {"block": chance.uniform(1, 30), "lamp": chance.uniform(0, 9)}
    loads = [lamp(f"at {point}", point, f"{amps:.2f} A") for point, amps in draws.items()]
    plan = plan_of(runs, loads, rulebook=chance.choice((US, "cabin-nec", "small-craft-iso")))
    for rule in ("protection.over-conductor", "protection.under-load"):
        for found in findings(plan, rule):
            remedy = found.remedy or ""
            changed = resized(plan, named_sizes(remedy))
            if "then a rating of " in remedy or remedy.startswith("a rating of "):
                changed = rerated(changed, found.subject, float(remedy.split("rating of ")[1].split(" A")[0]))
            if changed is not plan:
                assert (rule, found.severity) not in severities(changed, found.subject), (seed, remedy)
