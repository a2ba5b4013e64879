"""protection.*: what a rulebook lacks, sets no limit to, or excuses is said in words."""

from typing import Any

import pytest

from farvolt.plan import Plan
from wiring import (
    bank,
    cable,
    charger,
    findings,
    fuse,
    lacking,
    lamp,
    only,
    plan_of,
)

US = "small-craft-us"
"""33 CFR 183.425 Table 5 at 105 degC, outside engine spaces: 14 AWG 35 A, 12 AWG 45 A, 10 AWG 60 A, 8 AWG 80 A,
6 AWG 120 A, 2/0 AWG 330 A. Protection within 7 in, 40 in sheathed, 72 in sheathed from a battery."""


def us(runs: list[Any], loads: list[Any], **more: Any) -> Plan:
    return plan_of(runs, loads, rulebook=US, **more)


@pytest.mark.parametrize(
    ("rule", "entry"),
    [("protection.over-conductor", "over_conductor"), ("protection.distance", "unprotected_length"),
     ("protection.under-load", "continuous")],
)  # fmt: skip
def test_a_missing_entry_is_said_once_with_its_name(rule: str, entry: str) -> None:
    runs = [cable(name, "bank", name, "2 m", "14 AWG", protection=fuse("15 A")) for name in ("a", "b")]
    plan = us(runs, [lamp("a", "a", continuous=True), lamp("b", "b")])
    (found,) = findings(plan, rule, book=lacking(US, **{entry: None}))
    assert (found.severity, found.kind) == ("warn", "plan")
    assert f'no entry "{entry}"' in found.message


def test_without_a_limit_on_ratings_the_ampacity_still_warns() -> None:
    runs = [cable("feed", "bank", "pump", "2 m", "14 AWG", protection=fuse("60 A", kind="strip"))]
    book = lacking(US, over_conductor=None)
    found = only(us(runs, [lamp("pump", "pump")]), "protection.over-conductor", "feed", book)
    assert (found.severity, found.limit, found.basis) == ("warn", pytest.approx(35), "common practice")


def test_without_an_allowed_length_bare_cable_fails_all_the_same() -> None:
    book = lacking(US, unprotected_length=None)
    plan = us([cable("feed", "bank", "pump", "0.1 m", "14 AWG")], [lamp("pump", "pump")])
    found = only(plan, "protection.missing", "feed", book)
    assert (found.severity, found.limit) == ("fail", None)
    assert "the rulebook states no allowed length" in found.working[0]


def test_a_length_without_a_limit_is_told_in_words() -> None:
    """ISO 10133:2012 clause 8: in a sheath the whole way to the protection, any length; here none follows."""
    runs = [cable("feed", "bank", "pump", "2 m", "4 mm2", sheathed=True)]
    found = only(plan_of(runs, [lamp("pump", "pump", "0 A")]), "protection.missing", "feed")
    assert (found.severity, found.limit) == ("fail", None)
    assert "any length is allowed if protection follows" in found.working[0]
    assert found.remedy == 'a fuse or breaker in the feed at "bank", rated at no more than the 45 A the cable allows'
    followed = [runs[0] | {"protection_to": fuse("15 A")}]
    assert findings(plan_of(followed, [lamp("pump", "pump")]), "protection.missing") == []


def test_a_rating_that_is_excused_is_named() -> None:
    """A cranking cable behind 500 A (2/0 AWG: 330 A), and a charger of 20 A behind 100 A on 10 AWG (60 A)."""
    runs = [
        cable("starter", "bank", "starter", "1 m", "2/0 AWG", purpose="cranking",
              protection=fuse("500 A", kind="open-link strip")),
        cable("charging", "charger", "bank", "1 m", "10 AWG", protection=fuse("100 A", kind="strip"),
              protection_to=fuse("30 A")),
    ]  # fmt: skip
    plan = us(runs, [lamp("starter", "starter", "200 A")], sources=[bank(), charger()])
    found = {one.subject: one for one in findings(plan, "protection.over-conductor")}
    assert {name: one.severity for name, one in found.items()} == {"starter": "note", "charging": "note"}
    assert "a cranking run is exempt" in found["starter"].message
    assert "only sources that limit themselves stand behind it" in found["charging"].message
    assert (found["charging"].value, found["charging"].limit) == (100, pytest.approx(60))
