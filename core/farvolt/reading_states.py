"""The state of loads, sources and devices that a set of readings was taken in, from the cells of its rows."""

from collections.abc import Mapping, Sequence
from typing import Any

from pydantic import ValidationError

from farvolt.errors import Fault, QuantityError
from farvolt.integrity import nearest, shorten
from farvolt.plan import Battery, Case, Plan, SourceState
from farvolt.units import parse

STATE_COLUMNS = ("case", "loads", "sources", "devices")

Rows = Sequence[tuple[int, Mapping[str, str]]]


def case_of(name: str, rows: Rows, plan: Plan, faults: list[Fault]) -> Case:
    """The case of a set: the plan's that `case` names (the first unless it does), changed by what the other columns
    say. Adds what is wrong to `faults`."""
    cells = {column: _said(name, column, rows, faults) for column in STATE_COLUMNS}
    base = _base(cells["case"], plan, faults)
    changes: dict[str, Any] = {}
    if cells["loads"] is not None:
        changes["loads"] = _loads(*cells["loads"], plan, faults)
    if cells["sources"] is not None:
        changes["sources"] = base.sources | _sources(*cells["sources"], plan, faults)
    if cells["devices"] is not None:
        changes["devices"] = base.devices | _devices(*cells["devices"], plan, faults)
    return base.model_copy(update=changes | ({"surge": ()} if "loads" in changes else {}))


Cell = tuple[int, str]


def _said(name: str, column: str, rows: Rows, faults: list[Fault]) -> Cell | None:
    """What the rows of a set say in a column: once, or the same each time."""
    said = [(number, row[column]) for number, row in rows if row.get(column)]
    for number, text in said[1:]:
        if text != said[0][1]:
            problem = f'set "{shorten(name)}" was in another state in row {said[0][0]}'
            faults.append(Fault(f"row {number}", column, f'"{shorten(text)}"', problem, "a set of its own for it"))
    return said[0] if said else None


def _base(cell: Cell | None, plan: Plan, faults: list[Fault]) -> Case:
    cases = {case.name: case for case in plan.checked_cases}
    if cell is None:
        return plan.checked_cases[0]
    number, text = cell
    if text not in cases:
        accepted = ", ".join(f'"{one}"' for one in cases)
        _unknown(number, "case", text, "case", accepted, cases, faults)
        return plan.checked_cases[0]
    return cases[text]


def _unknown(
    number: int, column: str, name: str, what: str, accepted: str, known: Mapping[str, Any], faults: list[Fault]
) -> None:
    faults.append(Fault(f"row {number}", column, f'"{shorten(name)}"', f"there is no such {what} in the plan", accepted,
                        nearest(name, known)))  # fmt: skip


def _pairs(text: str) -> list[tuple[str, str]]:
    """Names with what is said of each, of "name = state; name = state"."""
    parts = [one.strip() for one in text.split(";") if one.strip()]
    return [(name.strip(), state.strip()) for name, _, state in (part.partition("=") for part in parts)]


def _loads(number: int, text: str, plan: Plan, faults: list[Fault]) -> Any:
    """Which loads are on: all, none, or names parted by semicolons, each perhaps with a share."""
    if text.lower() in ("all", "none"):
        return text.lower()
    known = {load.name: load for load in plan.loads}
    found: dict[str, float] = {}
    for name, state in _pairs(text):
        if name not in known:
            _unknown(number, "loads", name, "load", '"all", "none", or names of loads parted by ";"', known, faults)
            continue
        try:
            share = {"": 1.0, "on": 1.0, "off": 0.0}.get(state.lower())
            found[name] = parse(state, "share").si if share is None else share
        except QuantityError as error:
            _bad_state(number, "loads", name, state, 'on, off or a share such as "50 %"', error.nearest, faults)
    return found


def _bad_state(
    number: int, column: str, name: str, state: str, accepted: str, near: str, faults: list[Fault]
) -> None:
    problem = f'"{shorten(name)}" cannot be in this state'
    faults.append(Fault(f"row {number}", column, f'"{shorten(state)}"', problem, accepted, near))


def _sources(number: int, text: str, plan: Plan, faults: list[Fault]) -> dict[str, SourceState]:
    """The state of some sources: on, off, full, a state of charge, or a voltage."""
    known = {source.name: source for source in plan.sources}
    found: dict[str, SourceState] = {}
    for name, state in _pairs(text):
        if name not in known:
            _unknown(number, "sources", name, "source", "names of sources", known, faults)
            continue
        battery = isinstance(known[name], Battery)
        field = "state" if state in ("on", "off", "full") else _field(state, battery)
        try:
            found[name] = SourceState.model_validate({field: state})
        except ValidationError:
            accepted = 'on, off, full, "60 %" or "12.9 V"' if battery else 'on, off, or "14.2 V"'
            _bad_state(number, "sources", name, state, accepted, nearest(state, ("on", "off", "full")), faults)
    return found


def _field(state: str, battery: bool) -> str:
    if state.endswith("%"):
        return "charge" if battery else "irradiance"
    return "emf" if battery else "volts"


def _devices(number: int, text: str, plan: Plan, faults: list[Fault]) -> dict[str, str]:
    known = {device.name: device for device in plan.devices}
    found: dict[str, str] = {}
    for name, state in _pairs(text):
        if name not in known:
            _unknown(number, "devices", name, "device", "names of devices", known, faults)
        elif state not in ("open", "closed"):
            _bad_state(number, "devices", name, state, "open, closed", nearest(state, ("open", "closed")), faults)
        else:
            found[name] = state
    return found
