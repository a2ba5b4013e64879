"""The table of cases: a column for each case, a row for each thing that a case decides; the standard cases as entries.

Loads show the share of their rating at which they are on (empty: off), sources and devices their state.
"""

import re
from dataclasses import dataclass
from typing import Any

from farvolt.plan import Case, Plan, SourceState
from farvolt_app import edits
from farvolt_app.edits import Set, Step
from farvolt_app.tables import Delta, Raw, Row, written

WHAT = "what"
"""Identifier of the column that names each row; the cases' columns are called by `column_id`."""

_SOURCE_FIELDS = {
    "battery": ("state", "charge"),
    "charger": ("state",),
    "solar": ("state", "irradiance"),
    "converter": ("state",),
}
_ASKS = {
    "state": "on, off",
    "charge": "charge, such as 50 %",
    "irradiance": "sun, such as 100 %",
    "emf": "rest voltage",
    "volts": "volts",
    "amps": "amps",
}


@dataclass(frozen=True, slots=True)
class Line:
    """One row of the table: its words, and the field of a case that it shows."""

    label: str
    path: tuple[str, ...]


def column_id(case: int) -> str:
    """The identifier of a case's column."""
    return f"case{case}"


def case_names(raw: Raw) -> list[str]:
    """The cases' names in order, the nameless ones numbered."""
    return [str(case.get("name", f"case {number}")) for number, case in enumerate(_rows(raw, "cases"), start=1)]


def lines(raw: Raw) -> list[Line]:
    """The rows: name and ambient, each load, what starts, each source, each device."""
    found = [Line("Name of the case", ("name",)), Line("Ambient instead of the zones'", ("ambient",))]
    found += [Line(f"Load: {name}", ("loads", name)) for name in names(raw, "loads")]
    found += [Line("Starting: loads that draw their surge (with commas)", ("surge",))]
    for source in _rows(raw, "sources"):
        name = source.get("name")
        if isinstance(name, str):
            for field in _source_fields(raw, name, str(source.get("kind"))):
                asks = (
                    "on, off, full" if (field, source.get("kind")) == ("state", "battery") else _ASKS.get(field, field)
                )
                found.append(Line(f"Source: {name} ({asks})", ("sources", name, field)))
    found += [Line(f"Device: {name} (closed, open)", ("devices", name)) for name in names(raw, "devices")]
    return [*found, Line("Notes", ("notes",))]


def rows(raw: Raw) -> list[Row]:
    """One row of cells for each line, in the order of `lines`."""
    cases = _rows(raw, "cases")
    return [
        {WHAT: line.label, **{column_id(i): _cell(case, line.path) for i, case in enumerate(cases)}}
        for line in lines(raw)
    ]


def steps(raw: Raw, delta: Delta) -> list[Step]:
    """The steps that write the changed cells into the plan."""
    shown, cases = lines(raw), _rows(raw, "cases")
    listed: set[int] = set()
    found: list[Step] = []
    for row, cells in delta.get("edited_rows", {}).items():
        path = shown[int(row)].path
        for column, value in cells.items():
            index = next((i for i in range(len(cases)) if column_id(i) == column), None)
            if index is None:
                continue
            if path[0] == "loads" and index not in listed and not isinstance(cases[index].get("loads"), dict):
                # A case in a word ("all", "none") becomes a list before one of its loads can differ.
                found.append(Set("cases", index, ("loads",), _listed(raw, cases[index])))
                listed.add(index)
            found.append(Set("cases", index, path, typed(path, value)))
    return found


def _listed(raw: Raw, case: dict[str, Any]) -> dict[str, float]:
    return dict.fromkeys(names(raw, "loads"), 1.0) if case.get("loads", "all") == "all" else {}


def typed(path: tuple[str, ...], value: Any) -> Any:
    """What is typed about a field of a case as the file holds it; None for nothing, and for a load that is off."""
    text = "" if value is None else str(value).strip()
    if path[0] == "surge":
        return [part.strip() for part in text.split(",") if part.strip()] or None
    if path[0] != "loads":
        return text or None
    if text.lower() in ("", "off", "0"):
        return None
    if text.lower() == "on":
        return 1.0
    percent = re.fullmatch(r"(\d+(?:\.\d+)?)\s*%", text)
    if percent:
        return float(percent[1]) / 100
    return float(text) if re.fullmatch(r"\d+(\.\d+)?|\.\d+", text) else text


def _cell(case: dict[str, Any], path: tuple[str, ...]) -> str | None:
    value: Any = case
    if path[0] == "loads" and not isinstance(case.get("loads"), dict):
        return {"all": "1", "none": None}.get(str(case.get("loads", "all")), str(case.get("loads")))
    for part in path:
        if isinstance(value, str) and part == "state":
            return value  # a source's state in a bare word
        if not isinstance(value, dict) or part not in value:
            return None
        value = value[part]
    return None if isinstance(value, dict) else _share(value) if path[0] == "loads" else written(value)


def _share(value: Any) -> str:
    return f"{value:g}" if isinstance(value, float) else written(value)


def _source_fields(raw: Raw, name: str, kind: str) -> list[str]:
    """What a case can say of a source: the usual, and whatever a case of this plan does say."""
    fields = dict.fromkeys(_SOURCE_FIELDS.get(kind, ("state",)))
    for case in _rows(raw, "cases"):
        sources = case.get("sources")
        state = sources.get(name) if isinstance(sources, dict) else None
        fields |= dict.fromkeys(state) if isinstance(state, dict) else {}
    return list(fields)


def _rows(raw: Raw, table: str) -> list[dict[str, Any]]:
    found = raw.get(table)
    return [row if isinstance(row, dict) else {} for row in found] if isinstance(found, list) else []


def names(raw: Raw, table: str) -> list[str]:
    """The names in one of the plan's arrays of tables."""
    return [row["name"] for row in _rows(raw, table) if isinstance(row.get("name"), str)]


def standard(plan: Plan) -> list[Step]:
    """The standard set of cases, added to the plan as cases of its own."""
    from farvolt.standard_cases import standard_cases

    return [edits.Add("cases", fields(case)) for case in standard_cases(plan)]


def fields(case: Case) -> dict[str, Any]:
    """A case of the standard set as the file holds it."""
    sources = {name: _state(state) for name, state in case.sources.items()}
    found: dict[str, Any] = {"name": case.name, "loads": case.loads, "sources": sources}
    return found | ({"surge": list(case.surge)} if case.surge else {})


def _state(state: SourceState) -> str | dict[str, Any]:
    """In a bare word where it says no more than on, off or full."""
    said = {name: getattr(state, name) for name in ("charge", "irradiance") if getattr(state, name) is not None}
    return {name: str(value) for name, value in said.items()} or state.state


def new_case(raw: Raw) -> Step:
    """A further case, with all loads on."""
    from farvolt_app.tables import free_name

    return edits.Add("cases", {"name": free_name(raw, "cases", "New case"), "loads": "all"})
