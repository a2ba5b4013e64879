"""What the pages show of a study, as plain rows and sentences. Nothing here draws; figures keep full precision."""

import math
import re
from collections.abc import Sequence
from typing import Any

from farvolt.conductors import other_system
from farvolt.errors import Fault
from farvolt.results import CaseResult, Finding, Kind, Severity, Study
from farvolt.units import number

Cells = dict[str, Any]

CAUTION = (
    "For planning only: check local codes, have the work inspected, and leave to licensed people what the law "
    "reserves to them."
)
SEVERITIES: dict[Severity, str] = {"fail": "FAIL", "warn": "doubtful", "note": "note"}
"""The word each severity is shown by; colour never says it alone."""

_MARKDOWN = re.compile(r"([\\`*_{}\[\]()#+\-.!|~$:<>&@^=\"'/])")


def plain(text: str) -> str:
    """`text` written so that a page that reads Markdown shows it as it is, on one line."""
    printable = "".join(one if one.isprintable() else " " for one in text)
    return _MARKDOWN.sub(r"\\\1", " ".join(printable.split()))


def verdict(study: Study) -> str:
    """The findings in a few words."""
    counts = {severity: sum(one.severity == severity for one in study.findings) for severity in SEVERITIES}
    return f"{counts['fail']} failing, {counts['warn']} doubtful, {counts['note']} noted"


def load_rows(study: Study, case: int | None) -> list[Cells]:
    """Each load in one case, or (None) in the case where its drop is largest."""
    found = []
    for index, load in enumerate(study.plan.loads):
        chosen = _worst_load(study.cases, index) if case is None else study.cases[case]
        result = chosen.loads[index]
        found.append({
            "Load": load.name,
            "Findings": _about(study, "load", load.name),
            "Volts (V)": result.volts,
            "Drop (V)": result.drop_V,
            "Drop (%)": result.drop_percent,
            "Current (A)": result.amps,
            "Case": chosen.name,
        })  # fmt: skip
    return found


def run_rows(study: Study, case: int | None) -> list[Cells]:
    """Each cable run in one case, or (None) in the case where its current is largest."""
    found = []
    for index, run in enumerate(study.plan.runs):
        chosen = max(study.cases, key=lambda one: _amps(one, index)) if case is None else study.cases[case]
        result = chosen.runs[index]
        found.append({
            "Label": run.label or "",
            "Run": run.name,
            "Findings": _about(study, "run", run.name),
            "Current (A)": _amps(chosen, index) if result.feed_A is not None or result.return_A is not None else None,
            "May carry (A)": result.ampacity_A,
            "Drop (V)": result.drop_V,
            "Loss (W)": result.loss_W,
            "Size": f"{run.size.name} (~{other_system(run.size).name})" if run.size else "to be chosen",
            "Case": chosen.name,
        })  # fmt: skip
    return found


def source_rows(case: CaseResult) -> list[Cells]:
    """Each source in one case; a current is positive when it delivers."""
    return [
        {"Source": one.name, "Volts (V)": one.volts, "Current (A)": one.amps, "Power (W)": one.watts}
        for one in case.sources
    ]


PROTECTION_NOTES = (
    "Cable allows: the highest rating that all cables behind it allow. Fault currents are of bolted shorts; an arc or "
    "a loose joint draws less. Opens within, cable stands: at the least fault current, at the far end that is worst "
    "off; a cable without a time carries that current for good, is exempt or states no size."
)


def protection_rows(study: Study) -> list[Cells]:
    """Each protection beside its load, its cables and its fault currents."""
    labels = {run.name: run.label or "" for run in study.plan.runs}
    return [
        {
            "Label": labels[one.run],
            "Run": one.run,
            "Protection": f"{number(one.rating_A)} A {one.type}",
            "End": one.end if one.pole == "feed" else f"{one.end}, return",
            "Findings": _about(study, "run", one.run),
            "Load (A)": one.load_A,
            "Cable allows (A)": one.cable_A,
            "Highest fault (A)": one.highest_A,
            "Interrupts (A)": one.interrupts_A,
            "Least fault (A)": one.lowest_A,
            "Opens within (s)": one.opens_s if one.opens_s is not None and math.isfinite(one.opens_s) else None,
            "Cable stands (s)": one.allowed_s,
            "Least fault is": one.far_end,
        }
        for one in study.protections
    ]


def point_rows(case: CaseResult) -> list[Cells]:
    """Each point in one case: the voltage between feed and return, and of each against the reference."""
    return [
        {"Point": one.name, "Volts (V)": one.volts, "Feed (V)": one.feed_V, "Return (V)": one.return_V}
        for one in case.points
    ]


def case_rows(study: Study) -> list[Cells]:
    """Each case: whether it holds, and where its power goes."""
    return [
        {
            "Case": one.name,
            "Holds": "yes" if one.solved else f"gives way at {number(100 * one.share_held)} % of its loads",
            "Sources (W)": one.power_in_W if one.solved else None,
            "Loads (W)": one.power_loads_W if one.solved else None,
            "Lost in the wiring (W)": one.power_lost_W if one.solved else None,
        }
        for one in study.cases
    ]


def finding_rows(findings: Sequence[Finding]) -> list[Cells]:
    """Each finding on one line, in the order given."""
    return [
        {
            "Severity": SEVERITIES[one.severity],
            "What": one.message,
            "Case": one.case or "any",
            "Remedy": one.remedy or "",
            "Rule": one.rule,
            "Basis": one.basis,
        }
        for one in findings
    ]


def finding_text(one: Finding) -> str:
    """A finding in full, with its working, for showing as it stands."""
    lines = [one.message, "", *one.working, "", f"Basis: {one.basis}"]
    if one.case:
        lines.insert(1, f"Case: {one.case}")
    return "\n".join([*lines, f"Remedy: {one.remedy}"] if one.remedy else lines)


def fault_rows(faults: Sequence[Fault]) -> list[Cells]:
    """Each fault of a draft on one line."""
    return [
        {
            "Where": one.place or "the text",
            "Field": one.field,
            "Given": one.given,
            "What is wrong": one.problem,
            "Did you mean": one.nearest,
            "Accepted": one.accepted,
            "Line": one.line,
        }
        for one in faults
    ]


def _worst_load(cases: Sequence[CaseResult], index: int) -> CaseResult:
    def drop(case: CaseResult) -> float:
        result = case.loads[index]
        return (result.drop_percent or 0.0) if result.amps else float("-inf")

    return max(cases, key=drop)


def _amps(case: CaseResult, index: int) -> float:
    result = case.runs[index]
    return max(abs(result.feed_A or 0.0), abs(result.return_A or 0.0))


def _about(study: Study, kind: Kind, name: str) -> str:
    """The findings about one subject, worst first, in words; notes are left to their own page."""
    found = [one for one in study.findings if one.kind == kind and one.subject == name and one.severity != "note"]
    return ", ".join(dict.fromkeys(f"{SEVERITIES[one.severity]}: {one.rule}" for one in found)) or "none"
