"""The bank of a plan as tables on a terminal."""

from typing import Any

from rich.text import Text

from farvolt.bank_study import BankStudy
from farvolt.energy import Budget
from farvolt.units import number
from farvolt_app import bank_rows
from farvolt_app.report_text import open_console, place, table
from farvolt_app.shown import CAUTION, Cells


def day_of(study: BankStudy, name: str | None) -> Budget:
    """The budget of a type of day, of the design day without a name. Raises FarvoltError for one that is not there."""
    if name is None:
        return study.design
    return study.budgets[place(name, [one.day for one in study.budgets], "type of day")]


def show(study: BankStudy, budget: Budget, *, working: bool) -> None:
    """Print the loads of a type of day, then the sizing, the charging, the feeders and what checks say."""
    out = open_console()
    _table(out, f'Loads on "{budget.day}"', bank_rows.load_rows(budget))
    _table(out, "Converters", bank_rows.converter_rows(budget))
    _table(out, "Energy of a day", bank_rows.system_rows(study))
    for line in budget.left_out:
        out.print(Text(line))
    _table(out, "Size of the bank", bank_rows.step_rows(study))
    _table(out, "Charging", bank_rows.charging_rows(study))
    _table(out, "Demand of feeders, in two columns", bank_rows.feeder_rows(study))
    for title, lines in bank_rows.workings(study) if working else ():
        out.print(Text(f"\n{title}", style="bold"))
        for line in lines:
            out.print(Text(f"  {line}"))
    out.print(Text("\nThe answer", style="bold"))
    for line in bank_rows.answer(study):
        out.print(Text(f"- {line}"))
    for one in study.findings:
        out.print(Text(f"{one.severity:4} {one.rule}  {one.message}"))
    out.print(Text(f"\n{CAUTION}"))


def _table(out: Any, title: str, rows: list[Cells]) -> None:
    """Rows as a table; nothing where there are none."""
    if rows:
        headings = [(name, not isinstance(value, str)) for name, value in rows[0].items()]
        table(out, title, headings, [[_cell(value) for value in row.values()] for row in rows])


def _cell(value: object) -> str:
    if value is None:
        return "-"
    return number(value) if isinstance(value, float | int) else str(value)
