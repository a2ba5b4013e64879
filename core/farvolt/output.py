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
    whole = asdict(case)
    # Devices and strings are for the views; they have no place in version 1 of the output.
    del whole["devices"], whole["strings"]
    return {name: list(value) if isinstance(value, tuple) else value for name, value in whole.items()}
