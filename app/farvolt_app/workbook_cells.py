"""The cells of a workbook from somewhere else, as text: within limits, without its macros, links and formulas.

A workbook is a ZIP archive of XML. Its size, the number of its parts and what they unpack to are held to limits before
anything is read; entities in its XML are refused (by defusedxml, which openpyxl uses where it is installed). Of a
formula the stored result is read, nothing is calculated.
"""

import datetime as dt
import io
import zipfile
from collections.abc import Collection
from dataclasses import dataclass, field, replace
from typing import Any

from farvolt.errors import FarvoltError, Fault

FILE_LIMIT_BYTES = 10_000_000
UNPACKED_LIMIT_BYTES = 60_000_000
PARTS_LIMIT = 500
ROWS_LIMIT, COLUMNS_LIMIT = 20_000, 80
SHEETS_LIMIT = 60
MOST_TOLD = 40
_ACCEPTED = "an .xlsx workbook, such as the template filled in"
_OLD_FORMAT = b"\xd0\xcf\x11\xe0"


class WorkbookError(FarvoltError):
    """A workbook that cannot be used; `faults` holds what is wrong, by sheet, row and column."""

    def __init__(self, faults: list[Fault], source: str = "") -> None:
        self.faults = faults
        head = f"{source}: " if source else ""
        told = [f"{head}{fault}" for fault in faults[:MOST_TOLD]]
        more = [f"… and {len(faults) - MOST_TOLD} more"] if len(faults) > MOST_TOLD else []
        super().__init__("\n".join([*told, *more]))


@dataclass(frozen=True, slots=True)
class Row:
    """One row that holds something: its number from 1, and its cells as text, the first being column A."""

    number: int
    cells: tuple[str, ...]
    faults: dict[int, Fault] = field(default_factory=dict)
    """What keeps a cell from being read, by its column from 0: an error, or a formula never calculated."""


def read(
    data: bytes, wanted: Collection[str], source: str = "", *, exact: Collection[str] = ()
) -> dict[str, list[Row]]:
    """The rows of the wanted sheets, by the names they have in `wanted`. Raises WorkbookError.

    The names of sheets are compared without regard to capitals; sheets that are not wanted are not looked at. Blanks
    around a text are left out, but for sheets that are to be read `exact`.
    """
    _within_limits(data, source)
    values, formulas = (_opened(data, source, stored=stored) for stored in (True, False))
    names = {name.strip().casefold(): name for name in values.sheetnames[:SHEETS_LIMIT]}
    found = {}
    for title in wanted:
        name = names.get(title.casefold())
        if name is None or not hasattr(values[name], "iter_rows"):  # a sheet may be a chart
            continue
        rows = _rows(title, values[name], formulas[name], source)
        found[title] = rows if title in exact else [
            replace(row, cells=tuple(cell.strip() for cell in row.cells)) for row in rows
        ]  # fmt: skip
    return found


def place(sheet: str, row: int) -> str:
    """How a message names a row."""
    return f'sheet "{sheet}", row {row}'


def letter(column: int) -> str:
    """The letter of a column counted from 0."""
    from openpyxl.utils import get_column_letter

    return str(get_column_letter(column + 1))


def _refused(problem: str, accepted: str, source: str) -> WorkbookError:
    return WorkbookError([Fault("", "", "", problem, accepted)], source)


def _within_limits(data: bytes, source: str) -> None:
    if len(data) > FILE_LIMIT_BYTES:
        raise _refused("the file is larger than 10 MB", "a workbook of up to 10 MB", source)
    if data.startswith(_OLD_FORMAT):
        raise _refused("is a workbook of the old format, or one with a password", _ACCEPTED + ", without one", source)
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            parts = archive.infolist()
    except (zipfile.BadZipFile, OSError, ValueError, NotImplementedError, EOFError):
        raise _refused("is not a workbook", _ACCEPTED, source) from None
    if len(parts) > PARTS_LIMIT:
        raise _refused(f"has {len(parts)} parts", f"up to {PARTS_LIMIT}", source)
    # What a part says it unpacks to is more than zipfile ever unpacks of it, so the sum can be trusted.
    if sum(part.file_size for part in parts) > UNPACKED_LIMIT_BYTES:
        raise _refused("unpacks to more than 60 MB", "a workbook of that size at most", source)
    if len({part.filename for part in parts}) != len(parts):
        raise _refused("holds two parts of one name", _ACCEPTED, source)


def _opened(data: bytes, source: str, *, stored: bool) -> Any:
    from openpyxl import load_workbook

    try:
        return load_workbook(io.BytesIO(data), read_only=True, data_only=stored, keep_links=False, keep_vba=False)
    except Exception:
        # Whatever a damaged or hostile archive makes the library raise, to a person it is one thing.
        raise _refused("cannot be read as a workbook", _ACCEPTED, source) from None


def _rows(title: str, values: Any, formulas: Any, source: str) -> list[Row]:
    from openpyxl.cell.read_only import EMPTY_CELL

    limits = {"max_row": ROWS_LIMIT + 1, "max_col": COLUMNS_LIMIT}
    where = f'sheet "{title}"'
    found = []
    try:
        for number, pair in enumerate(zip(values.iter_rows(**limits), formulas.iter_rows(**limits), strict=False), 1):
            if all(cell is EMPTY_CELL for row in pair for cell in row):
                continue
            faults: dict[int, Fault] = {}
            both = enumerate(zip(*pair, strict=False))
            cells = tuple(_cell(title, number, at, one, other, faults) for at, (one, other) in both)
            if any(cells) or faults:
                found.append(Row(number, cells, faults))
    except Exception:
        # As in opening it: the library reads a sheet only now.
        raise WorkbookError([Fault(where, "", "", "cannot be read", _ACCEPTED)], source) from None
    if found and found[-1].number > ROWS_LIMIT:
        raise WorkbookError([Fault(where, "", "", f"has more than {ROWS_LIMIT} rows", "fewer rows")], source)
    return found


def _cell(title: str, number: int, at: int, cell: Any, written: Any, faults: dict[int, Fault]) -> str:
    problem = accepted = ""
    if cell.data_type == "e":
        problem, accepted = "is an error of a formula", "a text or a number"
    elif cell.value is None and written.data_type == "f":
        problem = "is a formula without a stored result"
        accepted = "the value itself, or a workbook saved by a spreadsheet program"
    if problem:
        given = str(written.value or cell.value)[:40]
        faults[at] = Fault(place(title, number), f"column {letter(at)}", given, problem, accepted)
        return ""
    return "" if cell.value is None else text_of(cell.value, str(cell.number_format or ""))


def text_of(value: Any, number_format: str = "") -> str:
    """A value as text: numbers without an exponent, a share shown in percent with its sign, yes and no."""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | float):
        if "%" in number_format:
            return f"{100 * value:.12g} %"
        return format(value, ".12g") if value == 0 or 1e-4 <= abs(value) < 1e12 else format(value, ".12f").rstrip("0")
    if isinstance(value, dt.time):
        return value.strftime("%H:%M")
    return str(value)
