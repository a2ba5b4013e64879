"""Offers of protection: what is offered passes every check of protection when it is put into the plan."""

import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import planfile, protection_choice
from farvolt.plan import Plan, Protection
from farvolt.protection_choice import RULES, Choice, Place, choices, fitting
from farvolt.protection_types import protection_type
from farvolt.results import Finding
from farvolt.study import prepared, study

TEXT = """
format = 1
[plan]
name = "two circuits"
nominal = "12 V"
rulebook = "cabin-iec"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "{ohm}"
short_circuit = "{short}"
aged_times = 1.2
[[runs]]
name = "main"
from = "bank"
to = "bus"
length = "0.5 m"
size = "25 mm2"
protection = {{ type = "cartridge", rating = "100 A", distance = "0.1 m" }}
[[runs]]
name = "feed"
from = "bus"
to = "end"
length = "{length}"
size = "{size}"
{protection}
[[loads]]
name = "load"
at = "end"
power = "{power}"
[[cases]]
name = "on"
"""


def plan(
    protection: str, *, length: str = "6 m", size: str = "2.5 mm2", power: str = "60 W", ohm: str = "15 mohm"
) -> Plan:
    """A bus and one circuit."""
    short = f"{12.8 / (float(ohm.split()[0]) / 1000):.6g} A"
    return planfile.parse(
        TEXT.format(protection=protection, length=length, size=size, power=power, ohm=ohm, short=short)
    )


def blade(rating: str) -> str:
    """A medium blade at the start."""
    return f'protection = {{ type = "blade", rating = "{rating}", distance = "0.1 m" }}'


def faults(one: Plan, run: str = "feed") -> list[Finding]:
    """What the checks of protection fail on a run."""
    found = study(one, margins=False).findings
    return [each for each in found if each.rule in RULES and each.severity == "fail" and each.subject == run]


def with_choice(one: Plan, choice: Choice) -> Plan:
    """The plan with an offer in its place."""
    return protection_choice._changed(prepared(one), [choice]).plan


FROM_BANK = {"from_point": "bank"}


@pytest.mark.parametrize(
    ("rule", "one"),
    [
        ("protection.missing", plan("").model_copy(update={"runs": (plan("").runs[1].model_copy(update=FROM_BANK),)})),
        ("protection.over-conductor", plan(blade("40 A"))),
        ("protection.under-load", plan(blade("2 A"))),
        ("protection.far-end", plan(blade("20 A"), length="14 m", size="1.5 mm2", power="20 W")),
        ("protection.interrupting", plan(blade("10 A"), ohm="3 mohm")),
    ],
)
def test_each_fault_gets_an_offer_that_passes(rule: str, one: Plan) -> None:
    found = [each for each in faults(one) if each.rule == rule]
    assert found, "the plan shows the fault"
    remedy = found[0].remedy or ""
    assert "passes all checks of protection" in remedy
    match = re.match(r"([\d.]+) A ([a-z ]+?)(?: in the feed|: passes)", remedy)
    assert match is not None
    offered = {"type": match[2], "rating": f"{match[1]} A", "distance": "0.1 m"}
    runs = [
        run.model_copy(update={"protection": (Protection.model_validate(offered),)}) if run.name == "feed" else run
        for run in one.runs
    ]
    mended = one.model_copy(update={"runs": tuple(runs)})
    assert faults(mended) == []


def test_ratings_that_fit_lie_between_the_load_and_the_cable() -> None:
    one = plan(blade("10 A"))
    # 60 W at some 12.5 V are 4.8 A; 2.5 mm2 in a zone at 30 degC carries more than 20 A.
    found = fitting(prepared(one), Place(1, "from"), [protection_type("blade")])["blade"]
    assert found
    assert min(found) == 5.0
    for rating in found:
        assert faults(plan(blade(f"{rating:g} A"))) == []
    for rating in set(protection_type("blade").ratings_A) - set(found):
        assert faults(plan(blade(f"{rating:g} A"))) != []


def test_a_window_that_no_rating_opens_asks_for_a_thicker_cable() -> None:
    # 250 W draw over 20 A, more than 1.5 mm2 may be protected at.
    one = plan(blade("10 A"), size="1.5 mm2", length="1 m", power="250 W")
    (choice,) = choices(prepared(one), [Place(1, "from")])
    assert choice.offer is not None
    assert choice.offer.size is not None
    assert choice.offer.size.area_mm2 > 1.5
    assert faults(with_choice(one, choice)) == []


def test_what_cannot_be_mended_says_what_stands_in_the_way() -> None:
    one = plan(blade("10 A"), ohm="0.2 mohm", length="60 m", size="0.75 mm2", power="40 W")
    found = faults(one)
    assert found
    assert all(each.remedy for each in found)


@settings(max_examples=25, deadline=None)
@given(
    st.sampled_from(["2 A", "7.5 A", "15 A", "30 A", "40 A"]),
    st.sampled_from(["1.5 mm2", "2.5 mm2", "6 mm2"]),
    st.floats(0.5, 25),
    st.floats(5, 200),
    st.sampled_from(["4 mohm", "15 mohm", "40 mohm"]),
)
def test_a_suggested_device_always_passes_every_check(
    rating: str, size: str, length: float, watts: float, ohm: str
) -> None:
    one = plan(blade(rating), size=size, length=f"{length:.3f} m", power=f"{watts:.3f} W", ohm=ohm)
    (choice,) = choices(prepared(one), [Place(1, "from")])
    if choice.offer is not None:
        assert [each for each in faults(with_choice(one, choice)) if "not verified" not in each.message] == []

