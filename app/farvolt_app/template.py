"""The workbook to fill in: a sheet for each table of the editor, under the same headings, with an example row."""

import io
from collections.abc import Sequence
from typing import Any

from openpyxl import Workbook
from openpyxl.styles import Alignment, Font, PatternFill
from openpyxl.utils import get_column_letter, quote_sheetname
from openpyxl.worksheet.datavalidation import DataValidation
from openpyxl.worksheet.worksheet import Worksheet

from farvolt import rulebook
from farvolt_app import columns, tables
from farvolt_app.columns import Column
from farvolt_app.shown import CAUTION

SKIP, EXAMPLE = "Skip", "example"
"""Heading of the first column; a row with any word in it is not read."""
SETTINGS, CASES, CHOICES = "Settings", "Cases", "Choices"
WHAT, NAME = "What", "Name"

PLAN_FIELDS = (
    Column(("name",), "Name of the plan", "What drawings and the cable schedule are headed with."),
    Column(("nominal",), "Nominal voltage", "Of the main battery system: 12 V, 24 V or 48 V."),
    Column(("rulebook",), "Rulebook", "The limits the plan is held against.", choices=rulebook.shipped()),
    Column(("reference",), "Reference source", "Drops are counted from it; the first battery unless stated."),
    Column(("conductor_temperature",), "Conductor temperature", "rulebook, rated, ambient, estimated, or 60 degC."),
    Column(("ambient",), "Ambient", "Highest air temperature where no zone says otherwise: 30 degC."),
    Column(("coldest",), "Coldest", "Lowest temperature where solar modules stand: -10 degC."),
    Column(("chassis_bond",), "Chassis bond", "Resistance of each bond to the chassis: 1 mohm."),
    Column(("notes",), "Notes", "For people; nothing is calculated from it."),
)
SETTING_FIELDS = {"plan": PLAN_FIELDS, "site": columns.SITE, "bank": columns.BANK}
"""The tables that are there once, and their fields on the sheet of settings."""

CASE_LINES = (
    "ambient", "all loads", "load", "starting", "source", "source charge", "source irradiance", "source emf",
    "source volts", "source amps", "device", "notes",
)  # fmt: skip
"""What a row of the sheet of cases can be about."""

_EXAMPLES: dict[str, dict[str, str]] = {
    "runs": {"label": "W01", "name": "galley feed", "from": "main bus", "to": "galley", "length": "4.5 m",
             "size": "6 mm2", "protection.type": "blade", "protection.rating": "20 A", "zone": "cabin"},
    "loads": {"name": "fridge", "at": "galley", "power": "60 W", "min_volts": "10.5 V", "hours_per_day": "10"},
    "batteries": {"name": "house bank", "at": "bank", "chemistry": "lfp", "nominal": "12.8 V", "capacity": "200 Ah",
                  "strings": "1", "charge": "80 %"},
    "chargers": {"name": "mains charger", "at": "main bus", "volts": "14.4 V", "amps": "30 A"},
    "solar": {"name": "roof", "at": "main bus", "power": "200 W", "ceiling": "14.4 V"},
    "converters": {"name": "radio supply", "from": "main bus", "at": "radio bus", "nominal": "12 V",
                   "volts": "13.8 V", "amps": "10 A", "efficiency": "90 %"},
    "devices": {"name": "battery switch", "kind": "switch", "from": "bank stud", "to": "main bus", "pole": "feed",
                "resistance": "0.3 mohm"},
    "zones": {"name": "cabin", "ambient": "30 degC"},
    "routes": {"name": "left loom", "zone": "cabin", "sheathed": "yes"},
    "points": {"name": "main bus", "kind": "busbar", "rating": "150 A", "stud": "M8"},
}  # fmt: skip
_CASE_EXAMPLES = (
    ("all loads", "", "all", ""), ("load", "fridge", "", "0.5"), ("source", "mains charger", "off", "on"),
    ("source charge", "house bank", "50 %", ""), ("device", "battery switch", "closed", "closed"),
)  # fmt: skip
_ABOUT = (
    "Fill in the sheets and read the workbook back: farvolt import FILE.xlsx -o plan.toml, or Open on the pages.",
    "Every quantity with its unit, as on its label: 4.5 m, 15 ft, 6 mm2, 10 AWG, 60 W, 30 A, 12 V, 80 %, 30 degC.",
    f'A row with a word under "{SKIP}", such as the examples, is not read. Empty cells are not stated.',
    "Click a cell for its meaning. Columns may be left out or moved; sheets that are not needed stay empty.",
    "Needed at least: the nominal voltage under Settings, a battery, a cable run, a load.",
    "Cases: a row is what a case decides, a column is a case. Without any, a standard set is checked.",
    CAUTION,
)
_HEADING, _HEADING_FILL = Font(bold=True, color="FFFFFF"), PatternFill("solid", fgColor="24495E")
_QUIET = Font(italic=True, color="6B6B6B")
_LAST_ROW = 1000


def to_bytes() -> bytes:
    """The template as a file's content."""
    book = Workbook()
    book.properties.creator = "Farvolt"
    about = book.active
    about.title = "Read me"
    for number, line in enumerate(_ABOUT, start=1):
        about.cell(number, 1, line).alignment = Alignment(wrap_text=True, vertical="top")
    about.column_dimensions["A"].width = 110
    lists = _Lists(book.create_sheet(CHOICES))
    _settings(book.create_sheet(SETTINGS), lists)
    for sheet in columns.SHEETS:
        _table(book.create_sheet(sheet.title), sheet.columns, _EXAMPLES[sheet.id], lists)
    _cases(book.create_sheet(CASES), lists)
    book.move_sheet(CHOICES, len(book.sheetnames))
    lists.sheet.sheet_state = "hidden"
    out = io.BytesIO()
    book.save(out)
    return out.getvalue()


class _Lists:
    """The choices of drop-down cells, each list in a column of a sheet of its own: in a cell they may be too long."""

    def __init__(self, sheet: Worksheet) -> None:
        self.sheet = sheet
        self.ranges: dict[tuple[str, ...], str] = {}

    def of(self, choices: tuple[str, ...]) -> str:
        """The formula of a list."""
        if choices not in self.ranges:
            column = len(self.ranges) + 1
            for row, word in enumerate(choices, start=1):
                self.sheet.cell(row, column, word)
            letter = get_column_letter(column)
            self.ranges[choices] = f"{quote_sheetname(CHOICES)}!${letter}$1:${letter}${len(choices)}"
        return self.ranges[choices]


def _table(sheet: Worksheet, shown: Sequence[Column], example: dict[str, str], lists: _Lists) -> None:
    _headings(sheet, [SKIP, *(column.label for column in shown)])
    _quiet_row(sheet, 2, [EXAMPLE, *(example.get(column.id) for column in shown)])
    for place, column in enumerate(shown, start=2):
        _explained(sheet, place, column, lists)


def _explained(sheet: Worksheet, place: int, column: Column, lists: _Lists) -> None:
    """Cells that say what belongs in them when they are clicked, with a list where there are choices."""
    choices = (tables.YES, tables.NO) if column.kind == "flag" else column.choices
    cells = f"{get_column_letter(place)}2:{get_column_letter(place)}{_LAST_ROW}"
    _validated(sheet, cells, column.label, column.hint, choices, lists)
    sheet.column_dimensions[get_column_letter(place)].width = max(11, len(column.label) + 2)


def _validated(
    sheet: Worksheet, cells: str, title: str, hint: str, choices: tuple[str, ...], lists: _Lists
) -> None:
    rule = DataValidation(type="list", formula1=lists.of(choices)) if choices else DataValidation()
    # What is no choice may still be meant, such as a type of protection of one's own; reading it back says so if not.
    rule.showErrorMessage, rule.showInputMessage, rule.allow_blank = False, True, True
    rule.promptTitle, rule.prompt = title[:32], hint[:250]
    rule.add(cells)
    sheet.add_data_validation(rule)


def _settings(sheet: Worksheet, lists: _Lists) -> None:
    _headings(sheet, ["Setting", "Value", "Meaning"])
    row = 1
    for table, fields in SETTING_FIELDS.items():
        for column in fields:
            row += 1
            sheet.cell(row, 1, setting_label(table, column))
            sheet.cell(row, 3, column.hint).font = _QUIET
            sheet.cell(row, 2).number_format = "@"
            _validated(sheet, f"B{row}", column.label, column.hint, column.choices, lists)
    for letter, width in (("A", 30), ("B", 30), ("C", 80)):
        sheet.column_dimensions[letter].width = width


def setting_label(table: str, column: Column) -> str:
    """How the sheet of settings calls a field."""
    return column.label if table == "plan" else f"{table.capitalize()}: {column.label}"


def _cases(sheet: Worksheet, lists: _Lists) -> None:
    _headings(sheet, [SKIP, WHAT, NAME, "Evening", "Charging"])
    for row, cells in enumerate(_CASE_EXAMPLES, start=2):
        _quiet_row(sheet, row, [EXAMPLE, *cells])
    hint = "What the row decides; Name says for which load, source or device. A load: its share, such as 0.5 or 50 %."
    _validated(sheet, f"B2:B{_LAST_ROW}", WHAT, hint, CASE_LINES, lists)
    for letter in "BCDE":
        sheet.column_dimensions[letter].width = 22


def _headings(sheet: Worksheet, words: Sequence[str]) -> None:
    for place, word in enumerate(words, start=1):
        cell = sheet.cell(1, place, word)
        cell.font, cell.fill = _HEADING, _HEADING_FILL
    sheet.freeze_panes = "B2"


def _quiet_row(sheet: Worksheet, row: int, values: Sequence[Any]) -> None:
    for place, value in enumerate(values, start=1):
        if value:
            cell = sheet.cell(row, place, value)
            cell.font = _QUIET
            cell.data_type = "s"
