"""The bank in the report: batteries with their largest currents, the energy of the days, size and charging."""

from collections.abc import Sequence

from farvolt.bank_study import BankStudy, bank_study
from farvolt.plan import Battery
from farvolt.results import Study
from farvolt_app import bank_rows
from farvolt_app.paper import Document
from farvolt_app.paper_table import Column, table
from farvolt_app.report_tables import cell
from farvolt_app.shown import Cells

BATTERIES = (
    Column("Battery", 34), Column("At", 24), Column("Chemistry", 18), Column("Capacity of a string", 20, "R"),
    Column("Strings", 12, "R"), Column("Largest out A", 18, "R"), Column("May give", 16, "R"),
    Column("Largest in A", 18, "R"), Column("May take", 16, "R"),
)  # fmt: skip
_WIDE = {"Working": 82.0, "Sources": 70.0, "Step": 44.0, "Basis": 42.0, "Load": 40.0}
_TEXT, _NUMBER = 28.0, 15.0
"""Shares of the width by what a column holds; the rows themselves say which columns there are."""


def bank(document: Document, study: Study) -> None:
    """The part of the report on the bank; a plan without a battery says so."""
    document.open_page("landscape")
    document.heading("Bank")
    batteries = [_battery(study, one) for one in study.plan.sources if isinstance(one, Battery)]
    if not batteries:
        document.paragraph("The plan has no battery.")
        return
    table(document, BATTERIES, batteries)
    found = bank_study(study)
    used = [one for one in found.budgets if one.bank.Wh > 0]
    if not used:
        document.paragraph("No load states hours or a schedule, so nothing can be said of its days.")
        return
    for budget in used:
        document.heading(f"Energy of a day: {budget.day}", 1)
        _table(document, bank_rows.load_rows(budget))
        total = f"In all {cell(budget.bank.Wh)} Wh, {cell(budget.bank.Ah)} Ah at {cell(budget.bank.nominal_V)} V."
        document.paragraph(total, 9, bold=True)
        document.points(budget.left_out, 8)
    _size_and_charging(document, found)


def _battery(study: Study, one: Battery) -> tuple[str, ...]:
    place = [source.name for source in study.plan.sources].index(one.name)
    amps = [case.sources[place].amps or 0.0 for case in study.cases]
    return (
        one.name, one.at, one.chemistry or "", str(one.capacity or ""), str(one.strings), cell(max(*amps, 0.0)),
        str(one.max_discharge or ""), cell(-min(*amps, 0.0)), str(one.max_charge or ""),
    )  # fmt: skip


def _size_and_charging(document: Document, found: BankStudy) -> None:
    document.heading("Size and charging", 1)
    document.points(bank_rows.answer(found))
    _table(document, bank_rows.step_rows(found))
    _table(document, bank_rows.charging_rows(found))
    for title, lines in bank_rows.workings(found):
        document.heading(title, 1, keep_mm=12)
        document.points(lines, 8)


def _table(document: Document, rows: Sequence[Cells]) -> None:
    """Rows as they are, under their own headings; numbers rounded for reading."""
    if not rows:
        return
    texts = {name for row in rows for name, value in row.items() if isinstance(value, str)}
    columns = [
        Column(name, _WIDE.get(name, _TEXT if name in texts else _NUMBER), "L" if name in texts else "R")
        for name in rows[0]
    ]
    table(document, columns, [[one if isinstance(one, str) else cell(one) for one in row.values()] for row in rows],
          size=7.5)  # fmt: skip
