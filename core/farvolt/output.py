"""The machine-readable output of a study: one object, names as in the file, SI numbers or null."""

import math
from dataclasses import asdict
from typing import Any

from farvolt.results import CaseResult, Study

OUTPUT = 1
"""Version of the output's shape."""

_OWN = ("name", "solved", "share_held", "margin", "imbalance_A", "power_in_W", "power_loads_W", "power_lost_W")
_TABLES = ("points", "sources", "runs", "loads")


def as_object(study: Study) -> dict[str, Any]:
    """The object that `farvolt check PLAN --json` prints."""
    whole: dict[str, Any] = plain(
        {
            "output": OUTPUT,
            "plan": study.plan.plan.name,
            "cases": [_case(case) for case in study.cases],
            "findings": [asdict(finding) for finding in study.findings],
        }
    )
    return whole


def _case(case: CaseResult) -> dict[str, Any]:
    # What else a case carries is for the views and has no place in version 1 of the output.
    own = {name: getattr(case, name) for name in _OWN}
    return own | {name: [asdict(one) for one in getattr(case, name)] for name in _TABLES}


def plain(node: Any) -> Any:
    """Lists for tuples, and null for a number that JSON does not have."""
    if isinstance(node, dict):
        return {key: plain(one) for key, one in node.items()}
    if isinstance(node, list | tuple):
        return [plain(one) for one in node]
    return None if isinstance(node, float) and not math.isfinite(node) else node
