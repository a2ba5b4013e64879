"""Two plans side by side: as rows for the pages, as tables on a terminal, as an object for machines."""

from collections.abc import Sequence
from dataclasses import asdict
from typing import Any

from rich.text import Text

from farvolt.differences import Comparison, LoadSeen, Summary
from farvolt.output import plain
from farvolt.results import Finding
from farvolt.units import number
from farvolt_app import report_text
from farvolt_app.shown import CAUTION, SEVERITIES, Cells

TABLES = {
    "runs": "cable run", "loads": "load", "sources": "source", "devices": "device", "points": "point",
    "zones": "zone", "routes": "route", "cases": "case", "days": "type of day", "protection_types": "protection type",
    "plan": "settings", "tolerances": "tolerances", "site": "site", "bank": "bank",
}  # fmt: skip
"""The tables of a plan, in the words of a row about one of its entries."""


def summary_rows(named: Sequence[tuple[str, Summary]]) -> list[Cells]:
    """One row for each plan."""
    return [
        {
            "Plan": name,
            "Failing": one.failing,
            "Doubtful": one.doubtful,
            "Largest drop (%)": one.lowest[1].drop_percent if one.lowest else None,
            "Its load": one.lowest[0] if one.lowest else "",
            "Volts there (V)": one.lowest[1].volts if one.lowest else None,
            "Conductors (m)": one.cable_m,
            "Metal (kg)": one.metal_kg,
            "Runs not weighed": one.without_size,
        }
        for name, one in named
    ]


def difference_rows(found: Comparison) -> list[Cells]:
    """Every entry and field that differs."""
    return [
        {
            "What": TABLES.get(one.table, one.table),
            "Name": one.entry,
            "Change": one.change,
            "Field": one.field,
            "Before": one.before or "",
            "After": one.after or "",
        }
        for one in found.differences
    ]


def load_rows(found: Comparison) -> list[Cells]:
    """What every load sees in the case where its drop is largest."""
    return [
        {
            "Load": one.name,
            "Volts before (V)": _volts(one.before),
            "Volts after (V)": _volts(one.after),
            "Gain (V)": _gain(one.before, one.after),
            "Drop before (%)": one.before.drop_percent if one.before else None,
            "Drop after (%)": one.after.drop_percent if one.after else None,
            "Case before": one.before.case if one.before else "not in it",
            "Case after": one.after.case if one.after else "not in it",
        }
        for one in found.loads
    ]


def finding_rows(found: Comparison) -> list[Cells]:
    """Findings that only one of the two has."""
    return [
        {"": word, "Severity": SEVERITIES[one.severity], "What": one.message, "Rule": one.rule}
        for word, findings in (("new", found.new), ("gone", found.gone))
        for one in findings
    ]


def _volts(seen: LoadSeen | None) -> float | None:
    return seen.volts if seen else None


def _gain(before: LoadSeen | None, after: LoadSeen | None) -> float | None:
    one, other = _volts(before), _volts(after)
    return other - one if one is not None and other is not None else None


def as_object(found: Comparison, before: str, after: str) -> dict[str, Any]:
    """The object that `farvolt compare --json` prints."""
    whole: dict[str, Any] = plain({
        "output": 1,
        "before": {"plan": before, **_summary(found.before)},
        "after": {"plan": after, **_summary(found.after)},
        "differences": [asdict(one) for one in found.differences],
        "loads": [asdict(one) for one in found.loads],
        "findings_new": [_finding(one) for one in found.new],
        "findings_gone": [_finding(one) for one in found.gone],
    })  # fmt: skip
    return whole


def _summary(one: Summary) -> dict[str, Any]:
    largest = {"name": one.lowest[0], **asdict(one.lowest[1])} if one.lowest else None
    return {"failing": one.failing, "doubtful": one.doubtful, "largest_drop": largest, "cable_m": one.cable_m,
            "metal_kg": one.metal_kg, "runs_without_size": one.without_size}  # fmt: skip


def _finding(one: Finding) -> dict[str, Any]:
    return {name: getattr(one, name) for name in ("rule", "severity", "kind", "subject", "case", "message")}


def show(found: Comparison, before: str, after: str) -> None:
    """Print the comparison."""
    console = report_text.open_console()
    _table("Side by side", summary_rows([(before, found.before), (after, found.after)]))
    for title, rows, nothing in (
        ("What differs", difference_rows(found), "The two plans say the same."),
        ("Loads, each where its drop is largest", load_rows(found), "Neither plan has loads."),
        ("Findings that come and go", finding_rows(found), "The checks find the same in both."),
    ):
        if rows:
            _table(title, rows)
        else:
            console.print(Text(f"\n{title}: {nothing}"))
    console.print(Text(f"\n{CAUTION}"))


def _table(title: str, rows: Sequence[Cells]) -> None:
    columns = [(name, any(isinstance(row[name], float) for row in rows)) for name in rows[0]]
    cells = [[_cell(one) for one in row.values()] for row in rows]
    report_text.table(report_text.open_console(), title, columns, cells)


def _cell(value: Any) -> str:
    if value is None:
        return "–"
    return number(value, 4) if isinstance(value, float) else str(value)
