"""A table of readings, as a file or a sheet has it, held against the names of its plan."""

import csv
import io
from collections.abc import Sequence

from farvolt import reading_cells, reading_states
from farvolt.errors import Fault
from farvolt.integrity import nearest, shorten
from farvolt.plan import Plan
from farvolt.readings import COLUMNS, ReadingsError, ReadingSet

MOST_ROWS = 2_000


def from_text(text: str, plan: Plan, source: str = "") -> tuple[ReadingSet, ...]:
    """Readings of a CSV text. Raises ReadingsError."""
    return from_rows(rows_of(text, source), plan, source)


def rows_of(text: str, source: str = "") -> list[tuple[int, list[str]]]:
    """The rows of a CSV text with their numbers: a heading row with names of `COLUMNS`, then one for each reading.

    Commas, semicolons or tabs part the columns; `#` begins a note. Raises ReadingsError.
    """
    lines = ["" if line.lstrip().startswith("#") else line for line in text.lstrip("\ufeff").splitlines()]
    head = next((line for line in lines if line.strip()), "")
    reader = csv.reader(io.StringIO("\n".join(lines)), delimiter=max(",;\t", key=head.count))
    found, before = [], 0
    try:
        for row in reader:
            if any(cell.strip() for cell in row):
                found.append((before + 1, row))
            before = reader.line_num
    except csv.Error as error:
        fault = Fault("", "", "", f"this is no table of readings ({error})", ", ".join(COLUMNS))
        raise ReadingsError([fault], source) from None
    return found


def from_rows(rows: Sequence[tuple[int, Sequence[str]]], plan: Plan, source: str = "") -> tuple[ReadingSet, ...]:
    """Readings of numbered rows of cells, the first of which is the heading. Raises ReadingsError."""
    faults: list[Fault] = []
    if not rows:
        faults.append(Fault("", "", "", "there is no heading row", f"columns {', '.join(COLUMNS)}"))
    elif len(rows) > MOST_ROWS:
        faults.append(Fault("", "", str(len(rows)), "there are too many rows", f"at most {MOST_ROWS}"))
    else:
        faults += _heading_faults(rows[0])
    if faults:
        raise ReadingsError(faults, source)
    names = [cell.strip().lower() for cell in rows[0][1]]
    table = [
        (number, {name: cell.strip() for name, cell in zip(names, row, strict=False) if name})
        for number, row in rows[1:]
    ]
    faults += [Fault(f"row {number}", "", shorten(" ".join(row[len(names):])), "has more cells than the heading",
                     f"{len(names)} cells") for number, row in rows[1:]
               if any(cell.strip() for cell in row[len(names):])]  # fmt: skip
    found = _sets(table, plan, faults)
    if not faults and not any(one.readings for one in found):
        faults.append(Fault("", "", "", "there is no reading", 'a row such as from "bank", volts 12.84'))
    if faults:
        raise ReadingsError(faults, source)
    return tuple(found)


def _heading_faults(row: tuple[int, Sequence[str]]) -> list[Fault]:
    number, cells = row
    names = [cell.strip().lower() for cell in cells]
    accepted = ", ".join(COLUMNS)
    place = f"row {number}"
    found = [
        Fault(place, shorten(name), "", "there is no such column", accepted, nearest(name, COLUMNS))
        for name in names
        if name and name not in COLUMNS
    ]
    found += [Fault(place, name, "", "this column is there twice") for name in COLUMNS if names.count(name) > 1]
    if not found and not {"volts", "amps"} & set(names):
        found.append(Fault(place, "", "", "there is no column of readings", "volts, amps"))
    return found


def _named(table: list[tuple[int, dict[str, str]]]) -> bool:
    return any(row.get("set") for _, row in table)


def _sets(
    table: list[tuple[int, dict[str, str]]], plan: Plan, faults: list[Fault]
) -> list[ReadingSet]:
    """The sets in order of appearance; a row that names none belongs to the one before it, or to that of its case."""
    groups: dict[str, list[tuple[int, dict[str, str]]]] = {}
    name = ""
    for number, row in table:
        name = row.get("set") or (name if not row.get("case") or _named(table) else f"case {row['case']}")
        groups.setdefault(name, []).append((number, row))
    digit = reading_cells.digits(table)
    filled = any(_is_filled(row) for _, row in table)
    found = []
    for name, rows in groups.items():
        case = reading_states.case_of(name, rows, plan, faults)
        taken = [one for one in rows if _is_filled(one[1])] if filled else rows[:1]
        each = (reading_cells.reading(number, row, plan, digit, faults) for number, row in taken)
        readings = tuple(one for one in each if one is not None)
        times = tuple(row["time"] for _, row in rows if row.get("time"))
        found.append(ReadingSet(name, case, readings, times))
    return found


def _is_filled(row: dict[str, str]) -> bool:
    return bool(row.get("volts") or row.get("amps"))
