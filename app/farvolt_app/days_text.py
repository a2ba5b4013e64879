"""The days of a plan as tables on a terminal."""

from typing import Any

from rich.text import Text

from farvolt.day_results import DaysStudy
from farvolt.units import number
from farvolt_app import days_rows
from farvolt_app.report_text import open_console, table
from farvolt_app.shown import CAUTION, Cells


def show(study: DaysStudy) -> None:
    """Print the loads, the banks, the sources, the account of energy, and what happened in sentences."""
    out = open_console()
    course = study.outcome.course
    last = course.clock(len(course) - 1)
    out.print(Text(f"{study.plan}: {course.clock(0):%Y-%m-%d} to {last:%Y-%m-%d}, {len(course)} steps of "
                   f"{number(course.hours * 60)} min", style="bold"))  # fmt: skip
    _table(out, "Loads", days_rows.load_rows(study))
    _table(out, "Banks", days_rows.bank_rows(study))
    _table(out, "Sources", days_rows.source_rows(study))
    _table(out, "Account of energy", days_rows.account_rows(study))
    for line in study.notes:
        out.print(Text(f"- {line}"))
    out.print(Text(days_rows.certificate(study)))
    out.print(Text("\nThe answer", style="bold"))
    for line in days_rows.answer(study):
        out.print(Text(f"- {line}"))
    out.print(Text(f"\n{CAUTION}"))


def _table(out: Any, title: str, rows: list[Cells]) -> None:
    if rows:
        headings = [(name, not isinstance(value, str)) for name, value in rows[0].items()]
        table(out, title, headings, [[_cell(value) for value in row.values()] for row in rows])


def _cell(value: object) -> str:
    if value is None:
        return "-"
    return number(value) if isinstance(value, float | int) else str(value)
