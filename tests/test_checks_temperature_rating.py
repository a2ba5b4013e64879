"""Insulation in places hotter than it may be."""

import pytest

from farvolt import planfile
from farvolt.results import Finding
from farvolt.study import study

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
