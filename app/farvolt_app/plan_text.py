"""The sheet "Plan text" of an exported workbook: the plan's file, line by line, to be read back as the plan."""

from openpyxl.styles import Font
from openpyxl.worksheet.worksheet import Worksheet

from farvolt_app.textsafe import cell_text

TITLE = "Plan text"
HEADING = "The plan itself, line by line. It is read back from here: farvolt import FILE.xlsx -o plan.toml"
CELL_CHARACTERS = 30_000
"""A longer line goes on in the next cell of its row."""


def write(sheet: Worksheet, text: str) -> None:
    """Fill the sheet."""
    sheet.cell(1, 1, HEADING).font = Font(bold=True)
    sheet.column_dimensions["A"].width = 120
    for row, line in enumerate(text.splitlines(), start=2):
        for place, start in enumerate(range(0, len(line), CELL_CHARACTERS), start=1):
            cell = sheet.cell(row, place)
            cell.value = cell_text(line[start : start + CELL_CHARACTERS])
            # Never a formula, however the line begins.
            cell.data_type, cell.quotePrefix = "s", True
