"""The report of a plan: one PDF with everything that is handed over, for paper, legible in black and white."""

from collections.abc import Callable
from datetime import date
from typing import Any

from farvolt.results import Finding, Study
from farvolt.units import number
from farvolt_app import drawing_file, report_bank, report_findings, report_tables, schedule, shown
from farvolt_app.graft import Graft, graft
from farvolt_app.paper import MARGIN_MM, Document, Paper, foot, line_mm
from farvolt_app.paper_table import Column, table
from farvolt_app.report_tables import Units

MOST_IN_SUMMARY = 14
"""Failing findings named in the summary; all are in the part Findings."""

Told = Callable[[float, str], None]
"""Is told the share of the work done and what comes next."""


def pdf(study: Study, paper: Paper, units: Units, day: date, told: Told = lambda share, what: None) -> bytes:
    """The whole report as the content of a file."""
    document = Document(paper, foot(study.plan.plan.name, day))
    document.set_title(study.plan.plan.name)
    grafts: list[Graft] = []
    told(0.05, "cover and summary")
    _cover(document, study, day)
    _summary(document, study, units)
    told(0.15, "drawing")
    grafts += drawing_file.pages(document, study, drawing_file.worst_case(study), units)
    told(0.35, "cable schedule")
    found = schedule.cables(study)
    report_tables.cables(document, study, found, units)
    report_tables.shopping(document, study, units)
    told(0.5, "protection")
    report_tables.protection(document, study)
    grafts += report_findings.charts(document, study)
    told(0.75, "loads and bank")
    report_tables.loads(document, study, found)
    report_bank.bank(document, study)
    told(0.85, "findings")
    report_findings.findings(document, study)
    report_findings.assumptions(document, study)
    told(0.95, "putting it together")
    return graft(bytes(document.output()), grafts)


def _cover(document: Document, study: Study, day: date) -> None:
    info, book = study.plan.plan, study.rulebook
    document.open_page()
    document.set_y(34)
    name = document.lines(info.name, document.across_mm, 24, bold=True)
    document.paragraph(" ".join(name[:3]) + (" …" if len(name) > 3 else ""), 24, bold=True, after_mm=4)
    document.paragraph("Low-voltage DC wiring: cables, protection, loads and bank", 13, after_mm=9)
    for label, text in (
        ("Date", f"{day.day} {day:%B %Y}"),
        ("Nominal voltage", info.nominal.text),
        ("Rulebook", f"{book.title}, {book.edition} ({book.name})"),
        ("Verdict", shown.verdict(study)),
    ):
        y = document.get_y()
        document.put(label, MARGIN_MM, y, 10, bold=True)
        document.paragraph(text, 10, indent_mm=38, after_mm=2)
    if not study.failing:
        document.paragraph("Nothing fails in the checks that were made. That is no proof of safety.", 10, indent_mm=38)
    document.set_y(document.get_y() + 4)
    _boxed(document, shown.CAUTION)
    document.set_y(document.get_y() + 7)
    document.paragraph("Contents", 12, bold=True, after_mm=2)
    document.insert_toc_placeholder(_contents, pages=1)


def _boxed(document: Document, text: str) -> None:
    lines = document.lines(text, document.across_mm - 8, 10.5, bold=True)
    y = document.get_y()
    document.set_draw_color(0)
    document.set_line_width(0.5)
    document.rect(MARGIN_MM, y, document.across_mm, len(lines) * line_mm(10.5) + 6)
    document.set_y(y + 3)
    for line in lines:
        document.put(line, MARGIN_MM + 4, document.get_y(), 10.5, bold=True)
        document.set_y(document.get_y() + line_mm(10.5))
    document.set_y(document.get_y() + 3)


def _contents(document: Any, outline: Any) -> None:
    """The list of parts with their pages; the library calls it when all pages are there."""
    for section in outline:
        if section.level:
            continue
        y = document.get_y()
        document.put(section.name, MARGIN_MM, y, 10)
        document.put(str(section.page_number), MARGIN_MM, y, 10, width=70, align="R")
        document.set_y(y + line_mm(10) + 0.8)


def _summary(document: Document, study: Study, units: Units) -> None:
    document.heading("Summary")
    document.paragraph(f"{shown.verdict(study)}. {_figures(study, units)}")
    failing = [one for one in study.findings if one.severity == "fail"]
    document.heading("What fails", 1)
    if not failing:
        document.paragraph("Nothing fails a stated limit in the checks that were made.")
    rows = [(f"! {one.subject}", one.message, one.case or "any") for one in _apart(failing)[:MOST_IN_SUMMARY]]
    if rows:
        table(document, (Column("Subject", 34), Column("What", 108), Column("Case", 40)), rows)
    if len(_apart(failing)) > len(rows):
        document.paragraph(f"{len(_apart(failing)) - len(rows)} more are in the part Findings.")
    document.heading("Cases", 1)
    columns = (Column("Case", 70), Column("Holds", 42), Column("Sources W", 22, "R"), Column("Loads W", 22, "R"),
               Column("Lost W", 22, "R"))  # fmt: skip
    table(document, columns, [
        (
            row["Case"], row["Holds"] if row["Holds"] == "yes" else f"! {row['Holds']}",
            *(report_tables.cell(row[name]) for name in ("Sources (W)", "Loads (W)", "Lost in the wiring (W)")),
        )
        for row in shown.case_rows(study)
    ])  # fmt: skip


def _apart(failing: list[Finding]) -> list[Finding]:
    """One finding for each subject and rule: the same in other cases is told in full further on."""
    return list({(one.kind, one.subject, one.rule): one for one in reversed(failing)}.values())[::-1]


def _figures(study: Study, units: Units) -> str:
    """What the plan is made of, in a sentence."""
    found = schedule.cables(study)
    total = report_tables.length(sum(cable.total_m for cable in found), units)
    drops = [(load.drop_percent, load.name) for case in study.cases for load in case.loads if load.drop_percent]
    worst = f' The largest drop is {number(max(drops)[0])} %, at "{max(drops)[1]}".' if drops else ""
    counts = len(study.plan.runs), len(study.plan.loads), len(study.plan.sources)
    return f"{counts[0]} runs with {total} of conductors, {counts[1]} loads, {counts[2]} sources.{worst}"
