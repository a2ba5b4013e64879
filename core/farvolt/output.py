"""The machine-readable output of a study: one object, names as in the file, SI numbers or null."""

from dataclasses import asdict
from typing import Any

from farvolt.results import CaseResult, Study

OUTPUT = 1
"""Version of the output's shape."""


def as_object(study: Study) -> dict[str, Any]:
    """The object that `farvolt check PLAN --json` prints."""
    return {
        "output": OUTPUT,
        "plan": study.plan.plan.name,
        "cases": [_case(case) for case in study.cases],
        "findings": [{**asdict(finding), "working": list(finding.working)} for finding in study.findings],
    }


def _case(case: CaseResult) -> dict[str, Any]:
    # Devices, strings and ways are for the views; they have no place in version 1 of the output.
    tables = {name: [asdict(one) for one in getattr(case, name)] for name in ("points", "sources", "runs", "loads")}
    numbers = ("name", "solved", "share_held", "margin", "imbalance_A", "power_in_W", "power_loads_W", "power_lost_W")
    return {**{name: getattr(case, name) for name in numbers}, **tables}
