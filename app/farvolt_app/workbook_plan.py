"""A plan out of a workbook: the template filled in, or an exported one that carries the plan's own text.

Every fault is told by sheet, row and column, as it stands in the workbook.
"""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from farvolt import integrity, planfile
from farvolt.errors import FarvoltError, Fault
from farvolt.plan import NAMED
from farvolt_app import case_grid, columns, edits, tables, workbook_cells
from farvolt_app import draft as drafts
from farvolt_app.columns import Column, Sheet
from farvolt_app.edits import Add, Set, Step
from farvolt_app.plan_text import TITLE as PLAN_TEXT
from farvolt_app.template import CASE_LINES, CASES, NAME, SETTING_FIELDS, SETTINGS, SKIP, WHAT, setting_label
from farvolt_app.workbook_cells import Row, WorkbookError, letter, place

CABLES = "Cables"
"""The sheet of an exported workbook whose lengths are read back."""
_RUN, _LENGTH = "Run", "Length one way (m)"


@dataclass(slots=True)
class _Origin:
    """Where an entry of the plan stands in the workbook, and the column (or row) of each of its fields."""

    where: str
    cells: dict[str, str] = field(default_factory=dict)


@dataclass(slots=True)
class _Reading:
    """What has been read so far."""

    steps: list[Step] = field(default_factory=list)
    origins: dict[str, _Origin] = field(default_factory=dict)
    """By how a message of the plan names the entry."""
    faults: list[Fault] = field(default_factory=list)
    counts: dict[str, int] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Found:
    """The text of a plan read from a workbook, what is wrong with it by row, and what else is to be said."""

    text: str
    faults: tuple[Fault, ...]
    notes: tuple[str, ...] = ()


def read(data: bytes, source: str = "") -> Found:
    """The plan in a workbook. Raises WorkbookError where there is none to be had, or a cell cannot be understood."""
    titles = [PLAN_TEXT, CABLES, SETTINGS, CASES, *(sheet.title for sheet in columns.SHEETS)]
    sheets = workbook_cells.read(data, titles, source, exact=(PLAN_TEXT,))
    if sheets.get(PLAN_TEXT):
        return _exported(sheets, source)
    if not sheets.get(SETTINGS) and not sheets.get(columns.RUNS.title):
        accepted = f'the template filled in, or an exported workbook with its sheet "{PLAN_TEXT}"'
        raise WorkbookError([Fault("", "", "", "holds no plan", accepted)], source)
    told = [fault for title, rows in sheets.items() if title != CABLES for row in rows for fault in row.faults.values()]
    reading = _Reading(origins={"plan": _Origin(f'sheet "{SETTINGS}"')}, faults=told)
    _settings(reading, sheets.get(SETTINGS, []))
    for sheet in columns.SHEETS:
        _entries(reading, sheet, sheets.get(sheet.title, []))
    _cases(reading, sheets.get(CASES, []))
    if reading.faults:
        raise WorkbookError(reading.faults, source)
    try:
        text = edits.apply("format = 1\n", reading.steps)
    except FarvoltError as error:
        raise WorkbookError([Fault("", "", "", str(error))], source) from None
    found = drafts.examine(text, None)[1]
    return Found(text, tuple(_in_workbook(reading, one) for one in found))


def _in_workbook(reading: _Reading, fault: Fault) -> Fault:
    """A fault of the plan's text, told where its cell stands."""
    if (fault.place, fault.field) == ("", "plan"):
        return Fault(f'sheet "{SETTINGS}"', "", "", "is empty", "at least the nominal voltage, such as 12 V")
    origin = reading.origins.get(fault.place)
    if origin is None:
        return replace(fault, line=None)
    parts = [part for part in fault.field.split(".") if not part.isdigit()]
    told = next((origin.cells[".".join(parts[:n])] for n in range(len(parts), 0, -1)
                 if ".".join(parts[:n]) in origin.cells), fault.field)  # fmt: skip
    return replace(fault, place=origin.where, field=told, line=None)


def _settings(reading: _Reading, rows: Sequence[Row]) -> None:
    known = {setting_label(table, one).casefold(): (table, one) for table, ones in SETTING_FIELDS.items()
             for one in ones}  # fmt: skip
    for row in rows:
        label, value = (*row.cells, "", "")[:2]
        if label.casefold() == "setting" or not value:
            continue
        found = known.get(label.casefold())
        if found is None:
            labels = [setting_label(one, column) for one, ones in SETTING_FIELDS.items() for column in ones]
            reading.faults.append(Fault(place(SETTINGS, row.number), "column A", f'"{integrity.shorten(label)}"',
                                        "is no setting", "", integrity.nearest(label, labels)))  # fmt: skip
            continue
        table, column = found
        reading.steps.append(Set(table, None, column.path, tables.typed(value, column)))
        origin = reading.origins.setdefault(table, _Origin(f'sheet "{SETTINGS}"'))
        origin.cells[column.id] = f"{label} (B{row.number})"


def _entries(reading: _Reading, sheet: Sheet, rows: Sequence[Row]) -> None:
    order, body = _under_headings(reading, sheet, rows)
    names: set[str] = set()
    for row in body:
        cells = {one.id: cell for one, cell in zip(order, row.cells, strict=False) if one is not None and cell}
        skipped = any(cell for one, cell in zip(order, row.cells, strict=False) if one is _SKIPPED)
        if not cells or skipped:
            continue
        where = place(sheet.title, row.number)
        name = cells.get("name", "")
        if sheet.table in NAMED and (not name or name in names):
            problem = "this name is used twice; each needs its own" if name else "has no name"
            reading.faults.append(Fault(where, "Name", f'"{name}"' if name else "", problem, "a name of its own"))
            continue
        names.add(name)
        reading.steps += tables.additions({}, sheet, [cells])
        count = reading.counts[sheet.table] = reading.counts.get(sheet.table, 0) + 1
        called = integrity.place(sheet.table, {"name": name}, count - 1)
        origin = reading.origins[called] = _Origin(where)
        for at, one in enumerate(order):
            if one is not None and one is not _SKIPPED:
                origin.cells[one.id] = f"{one.label} ({letter(at)}{row.number})"


_SKIPPED = Column((SKIP,), SKIP, "")


def _under_headings(
    reading: _Reading, sheet: Sheet, rows: Sequence[Row]
) -> tuple[list[Column | None], Sequence[Row]]:
    """The columns that a sheet's headings name, in its order, and the rows below them."""
    for index, row in enumerate(rows):
        order = [_SKIPPED if cell.casefold() == SKIP.casefold() else tables.heading(sheet, cell) for cell in row.cells]
        if sum(one is not None for one in order) < 2:
            continue
        for at, (one, cell) in enumerate(zip(order, row.cells, strict=True)):
            if one is None and cell:
                near = integrity.nearest(cell, [column.label for column in sheet.columns])
                reading.faults.append(
                    Fault(place(sheet.title, row.number), f"column {letter(at)}", f'"{integrity.shorten(cell)}"',
                          "is no heading of this sheet", "the headings of the template, or an empty one", near)
                )  # fmt: skip
        return order, rows[index + 1 :]
    if rows:
        reading.faults.append(Fault(f'sheet "{sheet.title}"', "", "", "has no row of headings",
                                    ", ".join(column.label for column in sheet.columns if column.main)))  # fmt: skip
    return [], []


def _cases(reading: _Reading, rows: Sequence[Row]) -> None:
    """The cases, from one column each; a case with any share of a load is off in all others."""
    if not rows:
        return
    heads = [cell.casefold() for cell in rows[0].cells]
    if WHAT.casefold() not in heads or NAME.casefold() not in heads:
        reading.faults.append(Fault(place(CASES, rows[0].number), "", "", "has no headings", f"{WHAT}, {NAME}, cases"))
        return
    what, name = heads.index(WHAT.casefold()), heads.index(NAME.casefold())
    skip = heads.index(SKIP.casefold()) if SKIP.casefold() in heads else None
    for at, case in enumerate(rows[0].cells):
        if at in (what, name, skip) or not case:
            continue
        lines = [(row, _at(row, what), _at(row, name), _at(row, at)) for row in rows[1:] if not _at(row, skip)]
        if any(value for _, _, _, value in lines):
            _case(reading, case, letter(at), lines)


def _at(row: Row, column: int | None) -> str:
    return row.cells[column] if column is not None and column < len(row.cells) else ""


def _case(reading: _Reading, case: str, column: str, lines: Sequence[tuple[Row, str, str, str]]) -> None:
    origin = reading.origins[integrity.place("cases", {"name": case}, 0)] = _Origin(
        f'sheet "{CASES}", column {column}'
    )  # fmt: skip
    fields: dict[str, Any] = {"name": case}
    added = [step for step in reading.steps if isinstance(step, Add) and step.table == "loads"]
    loads = [str(step.fields["name"]) for step in added if "name" in step.fields]
    for row, what, name, value in lines:
        if not value:
            continue
        if what.casefold() not in CASE_LINES:
            near = integrity.nearest(what, list(CASE_LINES))
            reading.faults.append(Fault(place(CASES, row.number), WHAT, f'"{integrity.shorten(what)}"',
                                        "is nothing that a case decides", ", ".join(CASE_LINES), near))  # fmt: skip
            return
        path = _case_path(what.casefold(), name)
        if path is None:
            reading.faults.append(Fault(place(CASES, row.number), NAME, "", f"says not which {what.split()[0]}"))
            return
        origin.cells[".".join(path)] = f"{what} {name} (row {row.number})".replace("  ", " ")
        _put(fields, path, case_grid.typed(path, value) if len(path) > 1 or path[0] == "surge" else value, loads)
    reading.steps.append(Add("cases", fields))


def _case_path(what: str, name: str) -> tuple[str, ...] | None:
    """The field of a case that a row is about; None where it needs a name and has none."""
    words = {"ambient": ("ambient",), "all loads": ("loads",), "starting": ("surge",), "notes": ("notes",)}
    if what in words:
        return words[what]
    if not name:
        return None
    table, _, said = what.partition(" ")
    return (f"{table}s", name, said or "state") if table == "source" else (f"{table}s", name)


def _put(fields: dict[str, Any], path: tuple[str, ...], value: Any, loads: Sequence[str]) -> None:
    if path[0] == "loads" and len(path) > 1 and not isinstance(fields.get("loads"), dict):
        # A case in a word becomes a list before one of its loads can differ.
        fields["loads"] = dict.fromkeys(loads, 1.0) if fields.get("loads") == "all" else {}
    holder = fields
    for part in path[:-1]:
        holder = holder.setdefault(part, {})
    if value is not None:
        holder[path[-1]] = value
    else:
        holder.pop(path[-1], None)  # a load that is off


def _exported(sheets: dict[str, list[Row]], source: str) -> Found:
    """The plan's own text from an exported workbook, with the lengths that were changed on its sheet of cables."""
    text = "\n".join(_lines(sheets[PLAN_TEXT])) + "\n"
    try:
        edits.read(text)
    except FarvoltError as error:
        raise WorkbookError([Fault(f'sheet "{PLAN_TEXT}"', "", "", str(error))], source) from None
    pairs = list(_lengths(text, sheets.get(CABLES, [])))
    steps, faults = [step for step, _ in pairs if step], [fault for _, fault in pairs if fault]
    if faults:
        raise WorkbookError(faults, source)
    text = edits.apply(text, steps)
    said = f'{len(steps)} changed length{"s" if len(steps) != 1 else ""} taken from the sheet "{CABLES}".'
    other = f'Other changes on the sheets are not read back: the plan is that of the sheet "{PLAN_TEXT}".'
    return Found(text, drafts.examine(text, None)[1], (said, other) if steps else (other,))


def _lines(rows: Sequence[Row]) -> Iterator[str]:
    """The lines below the heading; a row stands for each, so that rows left out were empty ones."""
    expected = None
    for row in rows:
        if expected is None:
            expected = row.number + 1  # the heading
            continue
        yield from [""] * (row.number - expected)
        expected = row.number + 1
        # A text like the workbook's own escape for a character was written with its first underscore escaped.
        yield "".join(row.cells).replace("_x005F_x", "_x")


def _lengths(text: str, rows: Sequence[Row]) -> Iterator[tuple[Set | None, Fault | None]]:
    """The lengths that differ on the sheet of cables, and those there that are none."""
    head = next((row for row in rows if _RUN in row.cells and _LENGTH in row.cells), None)
    try:
        runs = {run.name: (index, run) for index, run in enumerate(planfile.parse(text).runs)}
    except FarvoltError:
        return
    for row in rows if head is not None else ():
        assert head is not None
        found = runs.get(_at(row, head.cells.index(_RUN)))
        value = _at(row, head.cells.index(_LENGTH))
        if found is not None and head.cells.index(_LENGTH) in row.faults:
            yield None, row.faults[head.cells.index(_LENGTH)]
        if found is None or not value:
            continue
        index, run = found
        try:
            length_m = float(value)
        except ValueError:
            length_m = math.nan
        if not (math.isfinite(length_m) and length_m > 0):
            given = f'"{integrity.shorten(value)}"'
            yield None, Fault(place(CABLES, row.number), _LENGTH, given, "is no length", "a number of metres above 0")
        elif not math.isclose(length_m, run.length.si, rel_tol=1e-6):
            yield Set("runs", index, ("length",), f"{length_m:.10g} m"), None
