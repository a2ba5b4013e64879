"""What must hold between the entries of a plan: names that exist, once each. Works on the raw tables.

Working on the raw tables lets one reading report every fault of a file, even where single fields are wrong too.
"""

import difflib
from collections.abc import Iterator
from itertools import islice
from typing import Any

from farvolt.errors import Fault
from farvolt.plan import CHASSIS, NAMED
from farvolt.protection_types import is_shipped, protection_type_names

_NAMED = ("points", "sources", "runs", "devices", "loads", "cases", "days")
_ENDS = {"sources": ("at", "from"), "runs": ("from", "to"), "devices": ("from", "to"), "loads": ("at",)}
_CASE_SOURCE_FIELDS = {
    "battery": ("state", "charge", "emf", "aged"),
    "charger": ("state", "volts", "amps"),
    "solar": ("state", "irradiance", "volts"),
    "converter": ("state", "volts", "amps"),
}

COMPARISONS = 200_000
"""Nearest names are looked for until about so many pairs were compared: a file may hold thousands of both."""

Path = tuple[str | int, ...]
Found = tuple[Path, Fault]
"""A fault with its path in the raw tables."""


def place(table: str, entry: Any, index: int) -> str:
    """How a message names an entry: its table and name, or its place in order."""
    name = entry.get("name") if isinstance(entry, dict) else None
    return f'{table} "{shorten(name)}"' if isinstance(name, str) and name else f"{table}, entry {index + 1}"


def shorten(text: str, limit: int = 60) -> str:
    """`text` cut for a message."""
    return text if len(text) <= limit else text[: limit - 1] + "…"


def plain(text: str) -> str:
    """`text` on one line, with a mark for what a terminal would obey or not show."""
    return "".join(one if one.isprintable() else "�" for one in text)


def shown(value: Any) -> str:
    """A value of the file as a message shows it; nothing for a table or a list."""
    if value is None or isinstance(value, dict | list):
        return ""
    if isinstance(value, str):
        return f'"{shorten(value)}"'
    if isinstance(value, int) and abs(value) >= 10**20:
        return "a number of more than 20 digits"
    return str(value).lower() if isinstance(value, bool) else str(value)


def nearest(word: str, known: Any) -> str:
    """The known name nearest to `word`, in quotes, or nothing."""
    texts = [name for name in known if isinstance(name, str)]
    close = [name for name in texts if name.casefold() == word.casefold()]
    close = close or difflib.get_close_matches(word, texts, n=1, cutoff=0.5)
    return f'"{close[0]}"' if close else ""


def faults(raw: dict[str, Any]) -> list[Found]:
    """Every fault between entries, each with its path in the raw tables (for its line)."""
    checks = (
        _duplicates, _self_joins, _chassis, _one_pole, _guards, _protection_types, _references, _case_names,
        _case_states, _sources, _days,
    )  # fmt: skip
    return [found for check in checks for found in check(raw)]


def entries(raw: dict[str, Any], table: str) -> list[tuple[int, dict[str, Any]]]:
    """The well-formed entries of an array of tables, with their index."""
    rows = raw.get(table, [])
    return [(i, row) for i, row in enumerate(rows) if isinstance(row, dict)] if isinstance(rows, list) else []


def names(raw: dict[str, Any], table: str) -> list[str]:
    """The names in a table."""
    if table in NAMED:
        return list(raw[table]) if isinstance(raw.get(table), dict) else []
    return [row["name"] for _, row in entries(raw, table) if isinstance(row.get("name"), str)]


def _duplicates(raw: dict[str, Any]) -> Iterator[Found]:
    for table in _NAMED:
        seen: set[str] = set()
        for index, row in entries(raw, table):
            name = row.get("name")
            if isinstance(name, str) and name in seen:
                yield _fault(table, index, row, "name", "this name is used twice; each needs its own", "another name")
            elif isinstance(name, str):
                seen.add(name)
    labels: dict[str, str] = {}
    for index, row in entries(raw, "runs"):
        label = row.get("label")
        if isinstance(label, str) and label in labels:
            problem = f'the label of run "{shorten(labels[label])}" too; a label marks one run'
            yield _fault("runs", index, row, "label", problem, "another label")
        elif isinstance(label, str):
            labels[label] = str(row.get("name", ""))


def _self_joins(raw: dict[str, Any]) -> Iterator[Found]:
    for table in ("runs", "devices"):
        for index, row in entries(raw, table):
            if isinstance(row.get("from"), str) and row["from"] == row.get("to"):
                yield _fault(table, index, row, "to", "starts and ends at the same point", "another point")
    for index, row in entries(raw, "sources"):
        if row.get("kind") == "converter" and isinstance(row.get("from"), str) and row["from"] == row.get("at"):
            yield _fault("sources", index, row, "at", "draws and delivers at the same point", "another point")
        array = row.get("array")
        inlets = (array.get("at"), row.get("from")) if isinstance(array, dict) else ()
        if isinstance(row.get("at"), str) and row["at"] in inlets:
            problem = "the controller delivers where its array stands"
            yield _fault("sources", index, row, "at", problem, "two points: the array's side and the other")


def _chassis(raw: dict[str, Any]) -> Iterator[Found]:
    for table, fields in _ENDS.items():
        for index, row in entries(raw, table):
            for field in fields:
                given = row.get(field)
                if given == CHASSIS and table != "runs":
                    problem = "the chassis is one node, a return; nothing can stand between its feed and its return"
                    yield _fault(table, index, row, field, problem, "another point")
                elif isinstance(given, str) and given != CHASSIS and given.lower() == CHASSIS:
                    yield _fault(table, index, row, field, "the metal body has one spelling", f'"{CHASSIS}"')


def _one_pole(raw: dict[str, Any]) -> Iterator[Found]:
    """Runs of one conductor that speak of the other; a drop where nothing drops."""
    for index, row in entries(raw, "runs"):
        to_chassis = CHASSIS in (row.get("from"), row.get("to"))
        if to_chassis and row.get("carries", "return") != "return":
            yield _fault("runs", index, row, "carries", "a run to the chassis is a return", '"return"')
        if to_chassis and "return" in row:
            yield _fault("runs", index, row, "return", "a run to the chassis is itself a return", "no return field")
        elif row.get("carries") in ("feed", "return") and row.get("return", "same") != "same":
            problem = f"a run that carries the {row['carries']} alone has no second conductor"
            yield _fault("runs", index, row, "return", problem, 'no return field, or carries = "both"')
    for index, row in entries(raw, "devices"):
        if "drop" in row and row.get("kind") in ("switch", "selector", "relay", "shunt", "connector"):
            yield _fault("devices", index, row, "drop", f"a {row['kind']} has a resistance, not a drop", "resistance")


def _guards(raw: dict[str, Any]) -> Iterator[Found]:
    """Protection in a conductor that the run does not have, or at an end other than its field says."""
    for index, row in entries(raw, "runs"):
        if CHASSIS in (row.get("from"), row.get("to")):
            poles = ["return"]
        elif row.get("carries") in ("feed", "return"):
            poles = [row["carries"]]
        else:
            poles = ["feed"] if row.get("return") == CHASSIS else ["feed", "return"]
        given = row.get("protection")
        guards = [("protection", one) for one in (given if isinstance(given, list) else [given])]
        for field, guard in [*guards, ("protection_to", row.get("protection_to"))]:
            pole = guard.get("pole", "feed") if isinstance(guard, dict) else poles[0]
            if pole in ("feed", "return") and pole not in poles:
                problem = f"protection in the {pole}, of which this run has no conductor"
                where = place("runs", row, index)
                yield (
                    ("runs", index, field),
                    Fault(where, f"{field}.pole", shown(pole), problem, f'pole = "{poles[0]}"'),
                )
            if field == "protection_to" and isinstance(guard, dict) and guard.get("end") == "from":
                problem = "protection_to is at the other end of the run"
                where = place("runs", row, index)
                yield ("runs", index, field), Fault(where, f"{field}.end", '"from"', problem, 'no end, or "to"')


def _protection_types(raw: dict[str, Any]) -> Iterator[Found]:
    """Protection of a type that is neither shipped nor the plan's own; own types that take a shipped one's name."""
    own = names(raw, "protection_types")
    for name in [one for one in own if is_shipped(one)]:
        where = f'protection_types "{shorten(name)}"'
        yield ("protection_types", name), Fault(where, "", "", "a type of this name is shipped", "another name")
    known = _Names("type of protection", [*own, *protection_type_names()])
    for index, row in entries(raw, "runs"):
        for path, guard in _protection_of(row):
            kind = guard.get("type")
            if isinstance(kind, str) and not is_shipped(kind):
                parts = (f"entry {part + 1}" if isinstance(part, int) else part for part in path)
                field = ".".join((*parts, "type"))
                yield from known.unknown(("runs", index, *path, "type"), place("runs", row, index), field, kind)


def _protection_of(row: dict[str, Any]) -> Iterator[tuple[Path, dict[str, Any]]]:
    """The well-formed protections of a run with their paths in it, whichever way the file writes them."""
    given = row.get("protection")
    found: list[tuple[Path, Any]] = [(("protection",), given), (("protection_to",), row.get("protection_to"))]
    if isinstance(given, list):
        found += [(("protection", number), one) for number, one in enumerate(given)]
    return ((path, one) for path, one in found if isinstance(one, dict))


class _Names:
    """The names of one kind that a plan defines, for many look-ups."""

    def __init__(self, what: str, known: list[str]) -> None:
        self._what = what
        self._known = dict.fromkeys(known)
        self._near: dict[str, str] = {}
        self._comparisons_left = COMPARISONS

    def unknown(self, path: Path, where: str, field: str, given: Any) -> Iterator[Found]:
        """A fault if `given` is a name that is not there."""
        if not isinstance(given, str) or given in self._known:
            return
        if given not in self._near:
            self._near[given] = nearest(given, self._known) if self._comparisons_left > 0 else ""
            self._comparisons_left -= len(self._known)
        some = [f'"{shorten(name, 30)}"' for name in islice(self._known, 8)]
        accepted = ", ".join(some) + (", …" if len(self._known) > 8 else "")
        accepted = accepted or f"the plan defines none; define it, or leave {field} out"
        yield path, Fault(where, field, shown(given), f"there is no such {self._what}", accepted, self._near[given])


def _references(raw: dict[str, Any]) -> Iterator[Found]:
    zones, routes = _Names("zone", names(raw, "zones")), _Names("route", names(raw, "routes"))
    for table in ("runs", "points"):
        for index, row in entries(raw, table):
            where = place(table, row, index)
            yield from zones.unknown((table, index, "zone"), where, "zone", row.get("zone"))
            yield from routes.unknown((table, index, "route"), where, "route", row.get("route"))
    if isinstance(raw.get("routes"), dict):
        for name, row in raw["routes"].items():
            zone = row.get("zone") if isinstance(row, dict) else None
            yield from zones.unknown(("routes", name, "zone"), f'routes "{shorten(name)}"', "zone", zone)
    yield from _inverters(raw)
    plan = raw.get("plan")
    reference = plan.get("reference") if isinstance(plan, dict) else None
    sources = _Names("source", names(raw, "sources"))
    yield from sources.unknown(("plan", "reference"), "plan", "reference", reference)
    converters = [row.get("name") for _, row in entries(raw, "sources") if row.get("kind") == "converter"]
    if reference in converters and isinstance(reference, str):
        problem = "a converter cannot be the reference: it is fed by the plan itself"
        yield ("plan", "reference"), Fault("plan", "reference", shown(reference), problem, "a battery or charger")


def _inverters(raw: dict[str, Any]) -> Iterator[Found]:
    kinds = [row.get("name") for _, row in entries(raw, "sources") if row.get("kind") == "charger"]
    chargers = _Names("charger", [name for name in kinds if isinstance(name, str)])
    for index, row in entries(raw, "loads"):
        path = ("loads", index, "inverter_of")
        yield from chargers.unknown(path, place("loads", row, index), "inverter_of", row.get("inverter_of"))


def _case_names(raw: dict[str, Any]) -> Iterator[Found]:
    known = [_Names(table[:-1], names(raw, table)) for table in ("loads", "sources", "devices")]
    for index, row in entries(raw, "cases"):
        for field, defined in zip(("loads", "sources", "devices"), known, strict=True):
            given = row.get(field)
            for name in given if isinstance(given, dict) else ():
                yield from defined.unknown(("cases", index, field, name), place("cases", row, index), field, name)
        given = row.get("surge")
        for name in given if isinstance(given, list) else ():
            yield from known[0].unknown(("cases", index, "surge"), place("cases", row, index), "surge", name)
            yield from _no_surge(raw, index, row, name)


def _no_surge(raw: dict[str, Any], index: int, row: dict[str, Any], name: Any) -> Iterator[Found]:
    """A case that asks for the surge of a load which states none."""
    path, where = ("cases", index, "surge"), place("cases", row, index)
    if any(load.get("name") == name and "surge" not in load for _, load in entries(raw, "loads")):
        stating = [load["name"] for _, load in entries(raw, "loads") if "surge" in load and "name" in load]
        some = ", ".join(f'"{shorten(str(one), 30)}"' for one in stating[:8]) + (", …" if len(stating) > 8 else "")
        yield path, Fault(where, "surge", shown(name), "this load states no surge", some or "none: no load states one")


def _case_states(raw: dict[str, Any]) -> Iterator[Found]:
    kinds = {row["name"]: row.get("kind") for _, row in entries(raw, "sources") if isinstance(row.get("name"), str)}
    anywhere = set().union(*_CASE_SOURCE_FIELDS.values())
    for index, row in entries(raw, "cases"):
        given, where = row.get("sources"), place("cases", row, index)
        for name, state in given.items() if isinstance(given, dict) else ():
            kind, path, field = kinds.get(name), ("cases", index, "sources", name), f"sources.{shorten(name)}"
            if not isinstance(kind, str) or kind not in _CASE_SOURCE_FIELDS:
                continue
            state = state if isinstance(state, dict) else {"state": state}
            if state.get("state") == "full" and kind != "battery":
                yield path, Fault(where, field, '"full"', "only a battery can be full", '"on" or "off"')
            if state.get("state") == "full" and "charge" in state:
                problem = "a full battery has its charge already"
                yield path, Fault(where, f"{field}.charge", shown(state["charge"]), problem, "full, or a charge")
            known = _CASE_SOURCE_FIELDS[kind]
            for setting in [one for one in state if one in anywhere and one not in known]:
                problem = f"is not a setting of a {kind}"
                yield path, Fault(where, f"{field}.{setting}", shown(state[setting]), problem, ", ".join(known))


def _days(raw: dict[str, Any]) -> Iterator[Found]:
    """Types of day that name what is not there; a bank sized for such a type."""
    loads, days = _Names("load", names(raw, "loads")), _Names("type of day", names(raw, "days"))
    kinds = [row.get("name") for _, row in entries(raw, "sources") if row.get("kind") == "charger"]
    chargers = _Names("charger", [name for name in kinds if isinstance(name, str)])
    for index, row in entries(raw, "days"):
        for field, defined in (("loads", loads), ("sources", chargers)):
            given = row.get(field)
            for name in given if isinstance(given, dict) else ():
                yield from defined.unknown(("days", index, field, name), place("days", row, index), field, name)
    bank = raw.get("bank")
    wanted = bank.get("design_day") if isinstance(bank, dict) else None
    yield from days.unknown(("bank", "design_day"), "bank", "design_day", wanted)


def _sources(raw: dict[str, Any]) -> Iterator[Found]:
    rows = raw.get("sources", [])
    if isinstance(rows, list) and all(isinstance(row, dict) and row.get("kind") == "converter" for row in rows):
        problem = "the plan has no source: nothing feeds the loads"
        if rows:
            problem = "the plan has converters alone: nothing feeds what they draw"
        yield ("sources",), Fault("sources", "", "", problem, 'at least one source, such as kind = "battery"')


def _fault(table: str, index: int, row: dict[str, Any], field: str, problem: str, accepted: str) -> Found:
    """A fault of one field of an entry."""
    return (table, index, field), Fault(place(table, row, index), field, shown(row.get(field)), problem, accepted)
