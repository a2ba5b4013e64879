"""Plan texts that the tests of plan files start from, and what a text comes to."""

from pathlib import Path

from farvolt import planfile
from farvolt.errors import PlanError
from farvolt.plan import Plan

EVERY_FIELD = Path(__file__).parent / "plans" / "every_field.toml"

BASE = """\
format = 1

[plan]
name = "Test"
nominal = "12 V"

[zones.cabin]
ambient = "30 degC"

[routes.loom]
zone = "cabin"

[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "13 V"
resistance = "5 mohm"

[[runs]]
name = "feed"
from = "bank"
to = "galley"
length = "4 m"
size = "6 mm2"

[[devices]]
name = "switch"
kind = "switch"
from = "galley"
to = "far"

[[loads]]
name = "pump"
at = "far"
power = "60 W"

[[cases]]
name = "All on"
"""


def outcome(text: str) -> Plan | PlanError:
    """The plan of a text, or why there is none."""
    try:
        return planfile.parse(text, "plan.toml")
    except PlanError as error:
        return error
