"""A worksheet from columns and rows: headings, formats, print set-up, and text that can only ever be text."""

import copy
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from openpyxl.cell.cell import Cell
from openpyxl.formatting.rule import FormulaRule
from openpyxl.styles import Alignment, Border, Font, PatternFill, Side
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.worksheet import Worksheet

from farvolt_app.textsafe import begins_like_formula, cell_text

HEADING_ROW = 4
"""Rows above it: the plan, what the sheet is, and notes or cells for the whole sheet; data starts below."""

FIRST = HEADING_ROW + 1
"""The first row of data."""

_LINE_POINTS = 13.5
_FACE = "Calibri"

_PLAIN = Font(name=_FACE, size=10)
_BOLD = Font(name=_FACE, size=10, bold=True)
_TITLE = Font(name=_FACE, size=15, bold=True, color="24495E")
_QUIET = Font(name=_FACE, size=10, italic=True, color="555555")
_HEADING = Font(name=_FACE, size=10, bold=True, color="FFFFFF")
_HEADING_FILL = PatternFill("solid", fgColor="24495E")
_ASIDE_FILL = PatternFill("solid", fgColor="66757E")
_INPUT_FILL = PatternFill("solid", fgColor="FFF6D6")
_OVER_FILL = PatternFill("solid", bgColor="F6C6BE")
_OVER_FONT = Font(bold=True, color="7A1B0C")
_LINE = Border(bottom=Side(style="hair", color="BBBBBB"))


@dataclass(frozen=True, slots=True)
class Formula:
    """A formula of our own making, such as `=E5*2`; everything else that is written is text or a number."""

    text: str


@dataclass(frozen=True, slots=True)
class Column:
    """A column: heading, width in characters, number format; whether its cells are meant to be changed, and printed."""

    heading: str
    width: float = 12.0
    format: str = "General"
    input: bool = False
    printed: bool = True


@dataclass(frozen=True, slots=True)
class Header:
    """What stands above a table: the plan's name, what the sheet is, and a note."""

    plan: str
    what: str
    about: str
    note: str = ""


def put(cell: Cell, value: Any) -> None:
    """Write a value; text stays text whatever it begins with."""
    if isinstance(value, Formula):
        cell.value = value.text
    elif isinstance(value, str):
        cell.value = cell_text(value)
        cell.data_type = "s"
        if begins_like_formula(value):
            cell.quotePrefix = True
    else:
        cell.value = value


def fill(sheet: Worksheet, header: Header, columns: Sequence[Column], rows: Sequence[Sequence[Any]]) -> None:
    """Fill a sheet with a table under a title."""
    titles = ((f"{header.plan}: {header.what}", _TITLE), (header.about, _QUIET), (header.note, _BOLD))
    for place, (text, font) in enumerate(titles, start=1):
        put(sheet.cell(place, 1), text or None)
        sheet.cell(place, 1).font = font
    _headings(sheet, columns)
    styles: dict[Any, Any] = {}
    for number, row in enumerate(rows, start=FIRST):
        for place, (column, value) in enumerate(zip(columns, row, strict=True), start=1):
            _write(sheet.cell(number, place), column, value, styles)
        sheet.row_dimensions[number].height = _LINE_POINTS * max(map(_lines, columns, row))
    _print_setup(sheet, header, columns, len(rows))


def _headings(sheet: Worksheet, columns: Sequence[Column]) -> None:
    for place, column in enumerate(columns, start=1):
        cell = sheet.cell(HEADING_ROW, place)
        put(cell, column.heading)
        cell.font, cell.fill = _HEADING, _HEADING_FILL if column.printed else _ASIDE_FILL
        cell.alignment = Alignment(wrap_text=True, vertical="center", horizontal="center")
        wide = sheet.column_dimensions[get_column_letter(place)]
        wide.width, wide.outlineLevel = column.width, 0 if column.printed else 1
    sheet.row_dimensions[HEADING_ROW].height = 44


def _write(cell: Cell, column: Column, value: Any, styles: dict[Any, Any]) -> None:
    put(cell, value)
    kind = column, value is None, bool(cell.quotePrefix)
    if kind in styles:
        # Each setting of a style compares it with all others; a sheet of 90 000 cells took most of its time there.
        cell._style = copy.copy(styles[kind])
        return
    cell.number_format = column.format
    cell.font, cell.border = _PLAIN, _LINE
    if column.format == "General":
        cell.alignment = Alignment(wrap_text=column.printed, vertical="top", horizontal="left", indent=1)
    else:
        cell.alignment = Alignment(vertical="top", horizontal="right")
    if column.input and value is not None:
        cell.fill = _INPUT_FILL
    styles[kind] = cell._style


def _lines(column: Column, value: Any) -> int:
    """Lines that a text takes in its column; not every program grows a row by itself."""
    if not isinstance(value, str) or not column.printed:
        return 1
    return sum(max(1, math.ceil(len(line) / max(column.width - 1.5, 1))) for line in value.splitlines() or [""])


def setting(sheet: Worksheet, label: str, text: str, cell: str, value: Any, number_format: str) -> None:
    """A cell for the whole sheet, above its table, with its label; a number in it is meant to be changed."""
    put(sheet[label], text)
    sheet[label].font, sheet[label].alignment = _BOLD, Alignment(horizontal="right")
    put(sheet[cell], value)
    sheet[cell].font, sheet[cell].number_format = _BOLD, number_format
    if not isinstance(value, Formula):
        sheet[cell].fill = _INPUT_FILL


def _print_setup(sheet: Worksheet, header: Header, columns: Sequence[Column], rows: int) -> None:
    last = FIRST + max(rows, 1) - 1
    sheet.freeze_panes = f"C{FIRST}"
    sheet.auto_filter.ref = f"A{HEADING_ROW}:{get_column_letter(len(columns))}{last}"
    sheet.print_area = f"A1:{get_column_letter(sum(column.printed for column in columns))}{last}"
    sheet.page_setup.orientation = "landscape"
    sheet.page_setup.paperSize = sheet.PAPERSIZE_A4
    sheet.page_setup.fitToWidth, sheet.page_setup.fitToHeight = 1, 0
    sheet.sheet_properties.pageSetUpPr.fitToPage = True
    sheet.print_title_rows = f"{HEADING_ROW}:{HEADING_ROW}"
    margins = sheet.page_margins
    margins.left = margins.right = 0.4
    margins.top, margins.bottom, margins.footer = 0.5, 0.75, 0.35
    # "&" starts a code in headers and footers; doubled, it is the character.
    sheet.oddFooter.left.text = cell_text(header.plan)[:80].replace("&", "&&")
    sheet.oddFooter.center.text = "For planning only"
    sheet.oddFooter.right.text = "&A, page &P of &N"


def mark_where(sheet: Worksheet, columns: int, rows: int, condition: str) -> None:
    """Mark rows where a formula holds (written for the first data row), by fill and bold as well as by their text."""
    if rows:
        area = f"A{FIRST}:{get_column_letter(columns)}{FIRST + rows - 1}"
        sheet.conditional_formatting.add(area, FormulaRule(formula=[condition], fill=_OVER_FILL, font=_OVER_FONT))


def letters(columns: Sequence[Column]) -> dict[str, str]:
    """Heading to column letter."""
    return {column.heading: get_column_letter(place) for place, column in enumerate(columns, start=1)}
