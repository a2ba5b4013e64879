"""A worksheet from columns and rows: headings, formats, print set-up, and text that can only ever be text."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from openpyxl.cell.cell import ILLEGAL_CHARACTERS_RE, Cell
from openpyxl.formatting.rule import FormulaRule
from openpyxl.styles import Alignment, Border, Font, PatternFill, Side
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.worksheet import Worksheet

HEADING_ROW = 4
"""Rows above it: title, what the sheet is, and an empty one; data starts below."""

_LINE_POINTS = 14.0

_TITLE = Font(bold=True, size=14)
_QUIET = Font(italic=True, color="555555")
_HEADING = Font(bold=True, color="FFFFFF")
_HEADING_FILL = PatternFill("solid", fgColor="24495E")
_INPUT_FILL = PatternFill("solid", fgColor="FFF6D6")
_OVER_FILL = PatternFill("solid", bgColor="F6C6BE")
_LINE = Border(bottom=Side(style="hair", color="BBBBBB"))


@dataclass(frozen=True, slots=True)
class Formula:
    """A formula of our own making, such as `=E5*2`; everything else that is written is text or a number."""

    text: str


@dataclass(frozen=True, slots=True)
class Column:
    """A column: heading, width in characters, number format, and whether its cells are meant to be changed."""

    heading: str
    width: float = 12.0
    format: str = "General"
    input: bool = False


def put(cell: Cell, value: Any) -> None:
    """Write a value; text stays text whatever it begins with."""
    if isinstance(value, Formula):
        cell.value = value.text
    elif isinstance(value, str):
        cell.value = ILLEGAL_CHARACTERS_RE.sub(" ", value)
        cell.data_type = "s"
        if value.lstrip()[:1] in ("=", "+", "-", "@"):
            cell.quotePrefix = True
    else:
        cell.value = value


def fill(sheet: Worksheet, title: str, about: str, columns: Sequence[Column], rows: Sequence[Sequence[Any]]) -> None:
    """Fill a sheet with a table under a title."""
    put(sheet["A1"], title)
    sheet["A1"].font = _TITLE
    put(sheet["A2"], about)
    sheet["A2"].font = _QUIET
    for place, column in enumerate(columns, start=1):
        cell = sheet.cell(HEADING_ROW, place)
        put(cell, column.heading)
        cell.font, cell.fill = _HEADING, _HEADING_FILL
        cell.alignment = Alignment(wrap_text=True, vertical="center")
        sheet.column_dimensions[get_column_letter(place)].width = column.width
    sheet.row_dimensions[HEADING_ROW].height = 45
    for number, row in enumerate(rows, start=HEADING_ROW + 1):
        for place, (column, value) in enumerate(zip(columns, row, strict=True), start=1):
            _write(sheet.cell(number, place), column, value)
        sheet.row_dimensions[number].height = _LINE_POINTS * max(
            _lines(*pair) for pair in zip(columns, row, strict=True)
        )
    _print_setup(sheet, title, len(columns), len(rows))


def _write(cell: Cell, column: Column, value: Any) -> None:
    put(cell, value)
    cell.number_format = column.format
    cell.border = _LINE
    text = isinstance(value, str)
    cell.alignment = Alignment(wrap_text=text, vertical="top", indent=1 if text else 0)
    if column.input and value is not None:
        cell.fill = _INPUT_FILL


def _lines(column: Column, value: Any) -> int:
    """Lines that a text takes in its column; not every program grows a row by itself."""
    if not isinstance(value, str):
        return 1
    return sum(max(1, math.ceil(len(line) / max(column.width - 1, 1))) for line in value.splitlines() or [""])


def _print_setup(sheet: Worksheet, title: str, columns: int, rows: int) -> None:
    last = get_column_letter(columns)
    sheet.freeze_panes = f"C{HEADING_ROW + 1}"
    sheet.auto_filter.ref = f"A{HEADING_ROW}:{last}{HEADING_ROW + max(rows, 1)}"
    sheet.page_setup.orientation = "landscape"
    sheet.page_setup.paperSize = sheet.PAPERSIZE_A4
    sheet.page_setup.fitToWidth, sheet.page_setup.fitToHeight = 1, 0
    sheet.sheet_properties.pageSetUpPr.fitToPage = True
    sheet.print_title_rows = f"{HEADING_ROW}:{HEADING_ROW}"
    # "&" starts a code in headers and footers; doubled, it is the character.
    sheet.oddFooter.left.text = title.replace("&", "&&")[:80]
    sheet.oddFooter.right.text = "&A, page &P of &N"


def mark_where(sheet: Worksheet, columns: int, rows: int, condition: str) -> None:
    """Mark rows where a formula holds (written for the first data row), by fill and bold as well as by their text."""
    if rows:
        first, last = HEADING_ROW + 1, HEADING_ROW + rows
        rule = FormulaRule(formula=[condition], fill=_OVER_FILL, font=Font(bold=True, color="7A1B0C"))
        sheet.conditional_formatting.add(f"A{first}:{get_column_letter(columns)}{last}", rule)


def letters(columns: Sequence[Column]) -> dict[str, str]:
    """Heading to column letter."""
    return {column.heading: get_column_letter(place) for place, column in enumerate(columns, start=1)}
