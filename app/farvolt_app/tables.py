"""Between the plan's text and the editor's tables: entries to rows of cells, and changed cells back to steps.

A cell holds the text as it was written. What is typed is kept even where it makes no sense, so that nothing typed is
lost; the fault is then the plan's to name.
"""

import csv
import re
from collections.abc import Mapping, Sequence
from typing import Any

from farvolt import integrity
from farvolt.errors import FarvoltError
from farvolt.plan import NAMED
from farvolt_app import edits
from farvolt_app.blocks import Entry
from farvolt_app.columns import Column, Sheet
from farvolt_app.edits import Add, Remove, Set, Step

Row = dict[str, str | None]
Raw = dict[str, Any]
Delta = Mapping[str, Any]
"""What the table editor reports: `edited_rows`, `added_rows`, `deleted_rows`, all since it was first shown."""

YES, NO = "yes", "no"


def keys(raw: Raw, sheet: Sheet) -> list[Entry]:
    """The entries that a sheet shows, in its order."""
    found = raw.get(sheet.table)
    if sheet.table in NAMED:
        return list(found) if isinstance(found, dict) else []
    rows = found if isinstance(found, list) else []
    return [index for index, row in enumerate(rows) if not sheet.kind or _entry(row).get("kind") == sheet.kind]


def columns(raw: Raw, sheet: Sheet, *, everything: bool) -> tuple[Column, ...]:
    """The columns to show: all, or the main ones and those that any entry fills in."""
    entries = [_entry(raw[sheet.table][key]) for key in keys(raw, sheet)]
    return tuple(
        column
        for column in sheet.columns
        if everything or column.main or any(_cell(entry, column) is not None for entry in entries)
    )


def rows(raw: Raw, sheet: Sheet) -> list[Row]:
    """One row of cells for each entry; None where a field is not given."""
    found = []
    for key in keys(raw, sheet):
        entry = _entry(raw[sheet.table][key])
        if sheet.table in NAMED:
            entry = {"name": key, **entry}
        found.append({column.id: _cell(entry, column) for column in sheet.columns})
    return found


def choices(raw: Raw, column: Column, classes: Sequence[str]) -> tuple[str, ...]:
    """What a column offers; empty where it takes any text. `classes` are those of the rulebook."""
    if column.kind == "flag":
        return (YES, NO)
    if column.names_of == "classes":
        return tuple(classes)
    if column.names_of:
        found = raw.get(column.names_of)
        return (*column.choices, *(found if isinstance(found, dict) else ()))
    return column.choices


POINT_FIELDS = ("from", "to", "at", "array.at")
"""The columns that name a point."""


def points(raw: Raw) -> list[str]:
    """Every point that the plan names anywhere, in the order of the alphabet."""
    named = [_entry(row).get("name") for row in _list(raw, "points")]
    for table in ("runs", "devices", "loads", "sources"):
        for row in _list(raw, table):
            entry = _entry(row)
            named += [entry.get("from"), entry.get("to"), entry.get("at"), _entry(entry.get("array")).get("at")]
    return sorted({name for name in named if isinstance(name, str) and name.strip()}, key=str.casefold)


def neighbours(raw: Raw, sheet: Sheet, row: int) -> tuple[Entry, Entry]:
    """The entries above and below a row of a sheet, None where it is the first or the last."""
    shown = keys(raw, sheet)
    return shown[row - 1] if row > 0 else None, shown[row + 1] if row + 1 < len(shown) else None


def hidden_protection(raw: Raw) -> list[str]:
    """The runs with more protection at hand than the table of runs has columns for."""
    return [
        str(_entry(run).get("name", ""))
        for run in _list(raw, "runs")
        if isinstance(_entry(run).get("protection"), list) and len(run["protection"]) > 1
    ]


def steps(raw: Raw, sheet: Sheet, delta: Delta) -> list[Step]:
    """The steps that turn the plan the editor was shown into the one it shows now."""
    shown = keys(raw, sheet)
    by_id = {column.id: column for column in sheet.columns}
    deleted = sorted((int(row) for row in delta.get("deleted_rows", ())), reverse=True)
    found: list[Step] = []
    renames: list[Step] = []
    for row, cells in delta.get("edited_rows", {}).items():
        if int(row) in deleted:
            continue
        key = shown[int(row)]
        entry = _entry(raw[sheet.table][key])
        for name, value in cells.items():
            if name == "name" and str(value or "").strip():
                # A name moves what calls it; it goes last, since zones and routes are known by it.
                renames += edits.renaming(raw, sheet.table, key, str(value))
            elif name != "name" or isinstance(key, int):
                found.append(Set(sheet.table, key, _path(entry, by_id[name]), typed(value, by_id[name])))
    found += renames
    found += [Remove(sheet.table, shown[row]) for row in deleted]
    return found + additions(raw, sheet, delta.get("added_rows", ()))


def pasted(text: str, sheet: Sheet, shown: Sequence[Column]) -> list[Row]:
    """Rows copied from a spreadsheet, or CSV; their first may be headings, else they are in the order shown.

    Raises FarvoltError for a row with more cells than there are columns.
    """
    delimiter = "\t" if "\t" in text else max(";,", key=text.count)
    lines = [row for row in csv.reader(text.strip("\n").splitlines(), delimiter=delimiter) if any(map(str.strip, row))]
    named = [heading(sheet, cell) for cell in lines[0]] if lines else []
    if sum(one is not None for one in named) * 2 > len(named):
        unknown = [cell for cell, one in zip(lines[0], named, strict=True) if one is None and cell.strip()]
        if unknown:
            raise FarvoltError(f'"{unknown[0].strip()}" is no column here{_nearest_heading(sheet, unknown[0])}')
        order, lines = named, lines[1:]
    else:
        order = list(shown)
    for number, row in enumerate(lines, start=1):
        if len(row) > len(order):
            raise FarvoltError(f"row {number} has {len(row)} cells; accepted: up to {len(order)}, in the order "
                               f"{', '.join(one.label for one in order if one)}")  # fmt: skip
    return [
        {one.id: cell.strip() for one, cell in zip(order, row, strict=False) if one and cell.strip()} for row in lines
    ]


def heading(sheet: Sheet, text: str) -> Column | None:
    """The column that a heading means: its label or its field's name, in any case; None where it is none."""
    wanted = " ".join(text.split()).casefold()
    return next((one for one in sheet.columns if wanted in (one.label.casefold(), one.id.casefold())), None)


def _nearest_heading(sheet: Sheet, text: str) -> str:
    near = integrity.nearest(text.strip(), [one.label for one in sheet.columns])
    return f"; did you mean {near}?" if near else f"; accepted: {', '.join(one.label for one in sheet.columns)}"


def renames(sheet: Sheet, delta: Delta) -> bool:
    """Whether the editor changed a name, which changes other tables as well."""
    return any("name" in cells for cells in delta.get("edited_rows", {}).values())


def typed(value: Any, column: Column) -> Any:
    """A cell's text as the file holds it: counts, numbers and flags bare, the rest in quotes; None where empty."""
    text = "" if value is None else str(value)
    if not text.strip():
        return None
    if column.kind == "flag":
        return {YES: True, NO: False}.get(text, text)
    if column.kind == "list":
        return [part.strip() for part in text.split(",") if part.strip()]
    if column.kind in ("count", "number") and (number := _number(text)) is not None:
        return number
    return text


def free_name(raw: Raw, table: str, name: str) -> str:
    """`name`, or the first that no entry of the table has when its number is counted on: "pump 2" after "pump"."""
    found = raw.get(table, ())
    taken = set(found) if isinstance(found, dict) else {_entry(row).get("name") for row in found}
    counted = re.fullmatch(r"(.*\S)( )(\d{1,6})", name)
    stem, number = (counted[1], int(counted[3])) if counted else (name, 1)
    tried = name
    while tried in taken:
        number += 1
        tried = f"{stem} {number}"
    return tried


def additions(raw: Raw, sheet: Sheet, added: Sequence[Mapping[str, Any]]) -> list[Step]:
    """The steps that add rows of cells, by the columns' identifiers, at the end of a sheet."""
    by_id = {column.id: column for column in sheet.columns}
    found: list[Step] = []
    taken = {sheet.table: dict.fromkeys(raw.get(sheet.table, ()))} if sheet.table in NAMED else {}
    for cells in added:
        fields: dict[str, Any] = {}
        for column_id, value in cells.items():
            if column_id in by_id and (one := typed(value, by_id[column_id])) is not None:
                _put(fields, by_id[column_id].path, one)
        if not fields:
            continue  # a row that was only just opened
        if sheet.kind:
            fields["kind"] = sheet.kind
        key = None
        if sheet.table in NAMED:
            wanted = fields.pop("name", f"new {sheet.table.removesuffix('s')}")
            key = free_name(taken, sheet.table, str(wanted))
            taken[sheet.table][key] = None
        found.append(Add(sheet.table, fields, key))
    return found


def _put(fields: dict[str, Any], path: tuple[str, ...], value: Any) -> None:
    for part in path[:-1]:
        inner = fields.get(part)
        fields[part] = inner if isinstance(inner, dict) else {}
        fields = fields[part]
    fields[path[-1]] = value


def _list(raw: Raw, table: str) -> list[Any]:
    found = raw.get(table)
    return found if isinstance(found, list) else []


def _entry(row: Any) -> dict[str, Any]:
    return row if isinstance(row, dict) else {}


def _path(entry: dict[str, Any], column: Column) -> edits.Path:
    """The column's path; of several protections on one run the table shows the first."""
    first = column.path[0]
    return (first, 0, *column.path[1:]) if isinstance(entry.get(first), list) and column.path[1:] else column.path


def _cell(entry: dict[str, Any], column: Column) -> str | None:
    value: Any = entry
    for part in _path(entry, column):
        try:
            value = value[part]
        except (KeyError, IndexError, TypeError):
            return None
    return None if isinstance(value, dict) else written(value)


def written(value: Any) -> str:
    """A value of the file as a cell shows it."""
    if isinstance(value, bool):
        return YES if value else NO
    if isinstance(value, list):
        return ", ".join(written(one) for one in value)
    return str(value)


def _number(text: str) -> int | float | None:
    text = text.strip()
    if re.fullmatch(r"[+-]?\d{1,15}", text):
        return int(text)
    return float(text) if re.fullmatch(r"[+-]?(\d+\.\d*|\.\d+)", text) else None
