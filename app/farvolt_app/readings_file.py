"""Readings from a file: CSV, or the sheet "Readings" of a workbook."""

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from farvolt import reading_table
from farvolt.errors import Fault
from farvolt.plan import Plan
from farvolt.readings import ReadingsError, ReadingSet

SHEET = "Readings"


def read(path: str, plan: Plan) -> tuple[ReadingSet, ...]:
    """The readings of a file; its suffix says which kind it is, `-` is CSV from standard input.

    Raises ReadingsError.
    """
    if path == "-":
        import sys

        text = sys.stdin.buffer.read().decode("utf-8-sig", errors="replace")
        return reading_table.from_text(text, plan, "standard input")
    suffix = Path(path).suffix.lower()
    if suffix not in (".csv", ".xlsx", ".tsv", ".txt"):
        raise ReadingsError([Fault("", "", f'"{suffix or path}"', "is not read", ".csv, .xlsx")], path)
    return _workbook(path, plan) if suffix == ".xlsx" else reading_table.read(Path(path), plan)


def _workbook(path: str, plan: Plan) -> tuple[ReadingSet, ...]:
    from zipfile import BadZipFile

    from openpyxl import load_workbook
    from openpyxl.utils.exceptions import InvalidFileException

    try:
        book = load_workbook(path, read_only=True, data_only=True)
    except OSError as error:
        raise ReadingsError([Fault("", "", "", f"cannot be read ({error.strerror or error})")], path) from None
    except (BadZipFile, InvalidFileException, KeyError, ValueError):
        raise ReadingsError([Fault("", "", "", "is not a workbook", "an .xlsx file")], path) from None
    if SHEET not in book.sheetnames:
        given = ", ".join(f'"{name}"' for name in book.sheetnames)
        raise ReadingsError([Fault("", "", given, "there is no sheet of readings", f'a sheet "{SHEET}"')], path)
    return reading_table.from_rows(list(_rows(book[SHEET])), plan, path)


def _rows(sheet: Any) -> Iterator[tuple[int, list[str]]]:
    """Rows that hold something, with their numbers; those above the heading are left out."""
    begun = False
    for number, row in enumerate(sheet.iter_rows(values_only=True), start=1):
        cells = [_text(value) for value in row]
        begun = begun or bool({"volts", "amps"} & {cell.strip().lower() for cell in cells})
        if begun and any(cells):
            yield number, cells


def _text(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, float):
        return format(value, ".12g") if abs(value) >= 1e-4 or value == 0 else format(value, ".12f").rstrip("0")
    return str(value)
