"""Insulation in places hotter than it may be, and cables that run hotter than their terminals may."""

import pytest

from farvolt import planfile
from farvolt.results import Finding
from farvolt.rulebook import load
from farvolt.study import study
from wiring import cable, findings, fuse, lamp, plan_of

PLAN = """format = 1
[plan]
nominal = "12 V"
[zones.engine]
ambient = "{ambient}"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "5 mohm"
[[runs]]
name = "feed"
from = "bank"
to = "lamp"
length = "1 m"
size = "4 mm2"
insulation = "70 degC"
zone = "engine"
[[loads]]
name = "lamp"
at = "lamp"
power = "12 W"
[[cases]]
name = "Idle"
loads = "none"
[[cases]]
name = "Hot day"
ambient = "{day}"
loads = "none"
"""


def told(ambient: str, day: str) -> list[Finding]:
    """The findings of this rule."""
    found = study(planfile.parse(PLAN.format(ambient=ambient, day=day))).findings
    return [one for one in found if one.rule == "conductor.temperature-rating"]


def test_an_ambient_at_the_rating_fails_even_without_current() -> None:
    """At 70 °C sqrt((Tc − Ta)/(Tc − 30)) is zero for 70 °C insulation: nothing may flow."""
    (one,) = told("70 degC", "40 degC")
    assert (one.severity, one.subject, one.case, one.value, one.limit) == ("fail", "feed", "Idle", 70.0, 70.0)


@pytest.mark.parametrize(("ambient", "day"), [("69.9 degC", "40 degC"), ("60 degC", "69 degC")])
def test_an_ambient_below_the_rating_passes(ambient: str, day: str) -> None:
    """The boundary is the rating itself."""
    assert told(ambient, day) == []


def test_the_hottest_case_is_named() -> None:
    """A case's own ambient replaces the zone's: 160 °F is 71.1 °C."""
    (one,) = told("60 degC", "160 degF")
    assert one.case == "Hot day"
    assert one.value == pytest.approx(71.11, abs=0.01)


def carried(amps: str, *, book: str = "cabin-nec", size: str = "12 AWG", **more: str) -> list[Finding]:
    """The findings on one cable of a constant current."""
    runs = [cable("feed", "bank", "lamp", size=size, protection=fuse("100 A"), **more)]
    plan = plan_of(runs, [lamp("lamp", "lamp", amps)], rulebook=book, info={"ambient": "30 degC"})
    return findings(plan, "conductor.temperature-rating")


@pytest.mark.parametrize(
    ("amps", "severity"), [("20 A", None), ("20.01 A", "warn"), ("25 A", "warn"), ("25.01 A", "fail")]
)
def test_boundaries_of_what_terminals_allow(amps: str, severity: str | None) -> None:
    """NEC 110.14(C)(1) with Table 310.16: 12 AWG copper is 20 A at 60 degC, 25 A at 75 degC, 30 A at 90 degC.

    Insulation of 90 degC serves for correction alone: the terminals hold the cable to 25 A.
    """
    found = carried(amps, insulation="90 degC")
    assert [one.severity for one in found] == ([severity] if severity else [])
    if severity == "warn":
        assert "marked for 75 degC" in (found[0].remedy or "")
        assert "110.14(C)" in found[0].basis


def test_a_start_warms_no_terminal() -> None:
    """18 A last, within the 20 A of 12 AWG at 60 degC; three times that in a start. At 21 A the case is over anyway."""
    runs = [cable("feed", "bank", "lamp", size="12 AWG", protection=fuse("100 A"))]
    for amps, told in (("18 A", []), ("21 A", [21.0])):
        loads = [lamp("pump", "lamp", amps, surge={"times": 3})]
        plan = plan_of(runs, loads, cases=[{"name": "Start", "surge": ["pump"]}], rulebook="cabin-nec")
        found = findings(plan, "conductor.temperature-rating")
        assert [one.value for one in found] == pytest.approx(told)


def test_thick_conductors_are_taken_at_marked_terminals() -> None:
    """NEC 110.14(C)(1)(b): above 1 AWG, 75 degC: 1/0 AWG is 125 A at 60 degC and 150 A at 75 degC (Table 310.16)."""
    assert carried("150 A", size="1/0 AWG") == []
    assert carried("150.1 A", size="1/0 AWG")[0].severity == "fail"


def test_cables_in_parallel_share_what_their_terminals_allow() -> None:
    runs = [cable("feed", "bank", "lamp", size="12 AWG", parallel=2, protection=fuse("100 A"))]
    for amps, told in (("40 A", 0), ("40.1 A", 1)):
        plan = plan_of(runs, [lamp("lamp", "lamp", amps)], rulebook="cabin-nec")
        assert len(findings(plan, "conductor.temperature-rating")) == told


def test_a_rulebook_without_a_rule_for_terminals_says_why() -> None:
    assert carried("29 A", book="small-craft-us", size="12 AWG") == []
    assert "rates terminals" in load("small-craft-us").missing["terminals"]
