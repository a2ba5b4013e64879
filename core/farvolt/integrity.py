"""What must hold between the entries of a plan: names that exist, once each. Works on the raw tables.

Working on the raw tables lets one reading report every fault of a file, even where single fields are wrong too.
"""

import difflib
from collections.abc import Iterator
from typing import Any

from farvolt.errors import Fault

_NAMED = ("points", "sources", "runs", "devices", "loads", "cases")
_CASE_SOURCE_FIELDS = {
    "battery": {"state", "charge", "emf"},
    "charger": {"state", "volts", "amps"},
    "solar": {"state", "irradiance", "volts"},
    "converter": {"state", "volts", "amps"},
}


def place(table: str, entry: Any, index: int) -> str:
    """How a message names an entry: its table and name, or its place in order."""
    name = entry.get("name") if isinstance(entry, dict) else None
    return f'{table} "{shorten(name)}"' if isinstance(name, str) and name else f"{table}[{index + 1}]"


def shorten(text: str, limit: int = 60) -> str:
    """`text` cut for a message."""
    return text if len(text) <= limit else text[: limit - 1] + "…"


def nearest(word: str, known: Any) -> str:
    """The known name nearest to `word`, in quotes, or nothing."""
    close = difflib.get_close_matches(word, [name for name in known if isinstance(name, str)], n=1, cutoff=0.5)
    return f'"{close[0]}"' if close else ""


def faults(raw: dict[str, Any]) -> list[tuple[tuple[str | int, ...], Fault]]:
    """Every fault between entries, each with its path in the raw tables (for its line)."""
    found: list[tuple[tuple[str | int, ...], Fault]] = []
    for check in (_duplicates, _self_runs, _chassis, _references, _case_names, _sources):
        found.extend(check(raw))
    return found


def entries(raw: dict[str, Any], table: str) -> list[tuple[int, dict[str, Any]]]:
    """The well-formed entries of an array of tables, with their index."""
    rows = raw.get(table, [])
    return [(i, row) for i, row in enumerate(rows) if isinstance(row, dict)] if isinstance(rows, list) else []


def names(raw: dict[str, Any], table: str) -> list[str]:
    """The names in a table."""
    if table in ("zones", "routes"):
        return list(raw[table]) if isinstance(raw.get(table), dict) else []
    return [row["name"] for _, row in entries(raw, table) if isinstance(row.get("name"), str)]


Found = Iterator[tuple[tuple[str | int, ...], Fault]]


def _duplicates(raw: dict[str, Any]) -> Found:
    for table in _NAMED:
        seen: set[str] = set()
        for index, row in entries(raw, table):
            name = row.get("name")
            if isinstance(name, str) and name in seen:
                problem = "this name is used twice; each needs its own"
                yield (table, index, "name"), Fault(place(table, row, index), "name", name, problem)
            elif isinstance(name, str):
                seen.add(name)
    labels: dict[str, str] = {}
    for index, row in entries(raw, "runs"):
        label = row.get("label")
        if isinstance(label, str) and label in labels:
            problem = f'the label of run "{shorten(labels[label])}" too; a label marks one run'
            yield ("runs", index, "label"), Fault(place("runs", row, index), "label", label, problem)
        elif isinstance(label, str):
            labels[label] = str(row.get("name", ""))


def _self_runs(raw: dict[str, Any]) -> Found:
    for table in ("runs", "devices"):
        for index, row in entries(raw, table):
            start, end = row.get("from"), row.get("to")
            if isinstance(start, str) and start == end:
                problem = "starts and ends at the same point"
                yield (table, index, "to"), Fault(place(table, row, index), "to", start, problem, "another point")


def _chassis(raw: dict[str, Any]) -> Found:
    for index, row in entries(raw, "runs"):
        if "chassis" not in (row.get("from"), row.get("to")):
            continue
        if row.get("carries", "return") != "return":
            yield (
                ("runs", index, "carries"),
                Fault(place("runs", row, index), "carries", str(row["carries"]), "a run to the chassis is a return", '"return"'),
            )
        if "return" in row:
            problem = "a run to the chassis is itself a return"
            yield ("runs", index, "return"), Fault(place("runs", row, index), "return", str(row["return"]), problem)
    for table, field in (("sources", "at"), ("sources", "from"), ("loads", "at"), ("devices", "from"), ("devices", "to")):
        for index, row in entries(raw, table):
            if row.get(field) == "chassis":
                problem = "the chassis is one node, a return; nothing can stand between its feed and its return"
                yield (table, index, field), Fault(place(table, row, index), field, "chassis", problem, "another point")


def _references(raw: dict[str, Any]) -> Found:
    zones, routes = names(raw, "zones"), names(raw, "routes")
    for table in ("runs", "points"):
        for index, row in entries(raw, table):
            for field, known in (("zone", zones), ("route", routes)):
                yield from _unknown((table, index, field), place(table, row, index), row.get(field), known, field)
    if isinstance(raw.get("routes"), dict):
        for name, row in raw["routes"].items():
            zone = row.get("zone") if isinstance(row, dict) else None
            yield from _unknown(("routes", name, "zone"), f'routes "{shorten(name)}"', zone, zones, "zone")
    plan = raw.get("plan")
    if isinstance(plan, dict):
        sources = names(raw, "sources")
        yield from _unknown(("plan", "reference"), "plan", plan.get("reference"), sources, "source", "reference")


def _unknown(
    path: tuple[str | int, ...], where: str, given: Any, known: list[str], what: str, field: str | None = None
) -> Found:
    if isinstance(given, str) and given not in known:
        listed = ", ".join(f'"{shorten(name, 30)}"' for name in known[:8]) + (", …" if len(known) > 8 else "")
        accepted = listed or f"none is defined; add one to the plan or leave {what} out"
        field = what if field is None else field
        yield path, Fault(where, field, given, f"there is no such {what}", accepted, nearest(given, known))


def _case_names(raw: dict[str, Any]) -> Found:
    for index, row in entries(raw, "cases"):
        where = place("cases", row, index)
        for field, what in (("loads", "load"), ("sources", "source"), ("devices", "device")):
            given = row.get(field)
            if isinstance(given, dict):
                for name in given:
                    yield from _unknown(("cases", index, field), where, name, names(raw, field), what, field)
        yield from _case_states(raw, index, row, where)


def _case_states(raw: dict[str, Any], index: int, row: dict[str, Any], where: str) -> Found:
    kinds = {source.get("name"): source.get("kind") for _, source in entries(raw, "sources")}
    states = row.get("sources")
    for name, state in states.items() if isinstance(states, dict) else ():
        kind = kinds.get(name)
        path = ("cases", index, "sources")
        if kind not in _CASE_SOURCE_FIELDS:
            continue
        if (state == "full" or (isinstance(state, dict) and state.get("state") == "full")) and kind != "battery":
            yield path, Fault(where, "sources", f'"{name}" = "full"', "only a battery can be full", '"on" or "off"')
        if isinstance(state, dict):
            known = _CASE_SOURCE_FIELDS[kind]
            for field in state.keys() - known:
                problem = f'"{field}" is not a setting of a {kind}'
                accepted = ", ".join(sorted(known))
                yield path, Fault(where, "sources", f'"{name}"', problem, accepted, nearest(field, known))


def _sources(raw: dict[str, Any]) -> Found:
    if not any(row.get("kind") != "converter" for _, row in entries(raw, "sources")):
        problem = "the plan has no source: nothing feeds the loads"
        yield ("sources",), Fault("sources", "", "", problem, 'at least one source, such as kind = "battery"')
    for index, row in entries(raw, "sources"):
        if row.get("kind") == "converter" and row.get("from") is not None and row.get("from") == row.get("at"):
            where = place("sources", row, index)
            problem = "draws and delivers at the same point"
            yield ("sources", index, "at"), Fault(where, "at", str(row["at"]), problem, "another point")
        if row.get("kind") == "converter" and isinstance(raw.get("plan"), dict):
            if raw["plan"].get("reference") == row.get("name") and row.get("name") is not None:
                problem = "a converter cannot be the reference: it is fed by the plan itself"
                yield ("plan", "reference"), Fault("plan", "reference", str(row["name"]), problem, "a battery or charger")
