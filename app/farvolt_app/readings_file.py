"""Readings from a file: CSV, or the sheet "Readings" of a workbook."""

import io
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from farvolt import reading_table
from farvolt.errors import Fault
from farvolt.plan import Plan
from farvolt.readings import ReadingsError, ReadingSet
from farvolt_app.textsafe import from_csv_text

SHEET = "Readings"


Rows = list[tuple[int, list[str]]]


def read(path: str, plan: Plan) -> tuple[ReadingSet, ...]:
    """The readings of a file; `-` is CSV from standard input. Raises ReadingsError."""
    return reading_table.from_rows(rows_in(path), plan, "standard input" if path == "-" else path)


def rows_in(path: str) -> Rows:
    """The numbered rows of a file; `-` is CSV from standard input. Raises ReadingsError."""
    if path == "-":
        import sys

        return rows_of("standard input.csv", sys.stdin.buffer.read())
    try:
        data = Path(path).read_bytes()
    except OSError as error:
        raise ReadingsError([Fault("", "", "", f"cannot be read ({error.strerror})")], path) from None
    return rows_of(path, data)


def rows_of(name: str, data: bytes) -> Rows:
    """The numbered rows of a file's bytes; the suffix of its name says which kind it is. Raises ReadingsError."""
    suffix = Path(name).suffix.lower()
    if suffix == ".xlsx":
        return _workbook(name, data)
    if suffix not in (".csv", ".tsv", ".txt"):
        raise ReadingsError([Fault("", "", f'"{suffix or name}"', "is not read", ".csv, .xlsx")], name)
    try:
        rows = reading_table.rows_of(data.decode("utf-8-sig"), name)
    except UnicodeDecodeError:
        raise ReadingsError([Fault("", "", "", "is not a text in UTF-8", "a CSV file in UTF-8")], name) from None
    return [(number, [from_csv_text(cell) for cell in row]) for number, row in rows]


def _workbook(name: str, data: bytes) -> Rows:
    from zipfile import BadZipFile

    from openpyxl import load_workbook
    from openpyxl.utils.exceptions import InvalidFileException

    try:
        book = load_workbook(io.BytesIO(data), read_only=True, data_only=True)
    except (BadZipFile, InvalidFileException, KeyError, ValueError, OSError):
        raise ReadingsError([Fault("", "", "", "is not a workbook", "an .xlsx file")], name) from None
    if SHEET not in book.sheetnames:
        given = ", ".join(f'"{one}"' for one in book.sheetnames)
        raise ReadingsError([Fault("", "", given, "there is no sheet of readings", f'a sheet "{SHEET}"')], name)
    return list(_rows(book[SHEET]))


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
