"""Random plans for tests: drafts of a plan file as plain tables, from a seed or from hypothesis, and their text.

A draft is what tomllib would read: tables of strings, numbers and tables. `random_draft` takes any source of
chance with the methods of `random.Random`, so that `st.randoms()` shrinks what a seed would only repeat.
Resistances, voltages and lengths are everyday ones of a van, a boat or a cabin.
"""

import copy
import json
import random
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from hypothesis import strategies as st

from farvolt import planfile
from farvolt.plan import Plan

Draft = dict[str, Any]

SIZES = ("1.5 mm2", "2.5 mm2", "4 mm2", "6 mm2", "10 mm2", "16 mm2", "25 mm2", "35 mm2")


@dataclass(frozen=True)
class Wishes:
    """What a random draft may hold; shares are chances from 0 to 1."""

    points: tuple[int, int] = (3, 10)
    loops: int = 3
    """At most so many runs beyond a tree."""
    behaviours: tuple[str, ...] = ("power", "current", "resistance")
    load_share: float = 0.35
    """Power of all loads, over what one load at the end of an ordinary feed could draw at most."""
    nominals: tuple[int, ...] = (12, 24, 48)
    extra_batteries: float = 0.4
    chargers: float = 0.5
    limited_sources: bool = True
    """Batteries that are full, chargers, sources that are off."""
    charger_only: float = 0.15
    solar: float = 0.25
    converters: float = 0.25
    diodes: float = 0.15
    devices: float = 0.5
    chassis: float = 0.4
    bonded: float = 0.7
    """Of plans with a chassis: those that show its way back to the first point."""
    open_devices: float = 0.1


LINEAR = Wishes(limited_sources=False, chargers=0.0, charger_only=0.0, solar=0.0, converters=0.0, diodes=0.0)
"""Batteries, conductors and devices only: sources that are linear."""


def random_draft(chance: random.Random, wishes: Wishes = Wishes()) -> Draft:
    """A random radial or meshed two-wire plan, with one case."""
    nominal = chance.choice(wishes.nominals)
    draft: Draft = {
        "format": 1,
        "plan": {"name": "Random", "nominal": f"{nominal} V", "chassis_bond": _ohm(chance, 0.3e-3, 3e-3)},
        "sources": [], "runs": [], "devices": [], "loads": [], "cases": [],
    }  # fmt: skip
    points = [f"p{index}" for index in range(chance.randint(*wishes.points))]
    _sources(chance, wishes, draft, points, nominal)
    _tree(chance, wishes, draft, points)
    for _ in range(chance.randint(0, wishes.loops)):
        start, end = chance.sample(points, 2)
        _run(chance, draft, start, end, "same")
    _loads(chance, wishes, draft, points, nominal)
    if chance.random() < wishes.converters:
        _converter(chance, draft, points, nominal)
    draft["cases"].append(_case(chance, wishes, draft))
    return draft


@st.composite
def drafts(draw: st.DrawFn, wishes: Wishes = Wishes()) -> Draft:
    """Random drafts that hypothesis can shrink."""
    return random_draft(draw(st.randoms(use_true_random=False)), wishes)


def _uniform(chance: random.Random, low: float, high: float, unit: str) -> str:
    return f"{chance.uniform(low, high):.5g} {unit}"


def _ohm(chance: random.Random, low: float, high: float) -> str:
    return f"{low * (high / low) ** chance.random():.5g} ohm"


def _sources(chance: random.Random, wishes: Wishes, draft: Draft, points: list[str], nominal: int) -> None:
    scale, sources = nominal / 12, draft["sources"]
    charger_only = chance.random() < wishes.charger_only
    if not charger_only:
        sources.append(_battery(chance, "house bank", points[0], scale))
        while chance.random() < wishes.extra_batteries and len(sources) < 3:
            sources.append(_battery(chance, f"bank {len(sources) + 1}", chance.choice(points), scale))
    if charger_only or chance.random() < wishes.chargers:
        at = points[0] if charger_only else chance.choice(points)
        volts = _uniform(chance, 13.6 * scale, 14.8 * scale, "V")
        amps = (40, 120) if charger_only else (2, 40)
        charger = {"name": "charger", "kind": "charger", "at": at, "volts": volts, "amps": _uniform(chance, *amps, "A")}
        if chance.random() < 0.3:
            charger["resistance"] = _ohm(chance, 1e-3, 20e-3)
        sources.append(charger)
    if not charger_only and chance.random() < wishes.solar:
        power, ceiling = _uniform(chance, 20, 400, "W"), _uniform(chance, 14 * scale, 14.6 * scale, "V")
        sources.append(
            {"name": "roof", "kind": "solar", "at": chance.choice(points), "power": power, "ceiling": ceiling}
        )


def _battery(chance: random.Random, name: str, at: str, scale: float) -> Draft:
    battery = {"name": name, "kind": "battery", "at": at, "emf": _uniform(chance, 12.4 * scale, 13.3 * scale, "V")}
    battery["strings"] = chance.choice((1, 1, 2, 3))
    if chance.random() < 0.8:
        battery["resistance"] = _ohm(chance, 2e-3, 20e-3)
    else:
        battery["short_circuit"] = _uniform(chance, 600, 4000, "A")
    return battery


def _tree(chance: random.Random, wishes: Wishes, draft: Draft, points: list[str]) -> None:
    """Join every point to an earlier one: by a run, by two runs of one conductor, through the chassis, by a device."""
    uses_chassis = chance.random() < wishes.chassis
    if uses_chassis and chance.random() < wishes.bonded:
        _run(chance, draft, points[0], "chassis", None)
    for index, point in enumerate(points[1:], start=1):
        before = chance.choice(points[:index])
        kind = chance.random()
        if kind < 0.15 * wishes.devices:
            _device(chance, draft, before, point)
        elif kind < 0.3 * wishes.devices:
            _run(chance, draft, before, f"{point} stud", "same")
            _device(chance, draft, f"{point} stud", point)
        elif kind > 1 - 0.2 * wishes.diodes:
            _diode(chance, draft, before, point)
        elif uses_chassis and kind > 0.6:
            _run(chance, draft, before, point, "chassis")
        elif kind > 0.5:
            _run(chance, draft, before, point, "same", carries="feed")
            back = chance.choice(points[:index])
            _run(chance, draft, *((back, point) if chance.random() < 0.5 else (point, back)), "same", carries="return")
        else:
            _run(chance, draft, before, point, "same")


def _run(
    chance: random.Random, draft: Draft, start: str, end: str, back: str | None, carries: str | None = None
) -> None:
    run: Draft = {"name": f"run {len(draft['runs']) + 1}", "from": start, "to": end}
    run["length"] = _uniform(chance, 0.3, 6, "m")
    run["size"], run["strand"] = chance.choice(SIZES), "flexible"
    run["parallel"] = chance.choice((1, 1, 1, 2, 3))
    run["joints"], run["joint_resistance"] = chance.choice((0, 0, 2, 4)), _ohm(chance, 0.05e-3, 1e-3)
    if carries is not None:
        run["carries"] = carries
    elif back == "same" and chance.random() < 0.25:
        run["return"] = {"size": chance.choice(SIZES), "length": _uniform(chance, 0.3, 6, "m")}
    elif back == "chassis":
        run["return"] = back
    if chance.random() < 0.15:
        run["resistance"], run["resistance_temperature"] = (
            _ohm(chance, 2e-3, 60e-3),
            chance.choice(("20 degC", "50 degC")),
        )
    pole = "return" if end == "chassis" else "feed" if back == "chassis" else carries
    if chance.random() < 0.3:
        run["protection"] = [_protection(chance, pole) for _ in range(chance.choice((1, 1, 2)))]
    draft["runs"].append(run)


def _protection(chance: random.Random, only: str | None) -> Draft:
    pole = only or chance.choice(("feed", "feed", "return"))
    end = chance.choice(("from", "to"))
    return {"type": "blade", "rating": "30 A", "end": end, "pole": pole, "resistance": _ohm(chance, 0.5e-3, 5e-3)}


def _device(chance: random.Random, draft: Draft, start: str, end: str) -> None:
    device = {"name": f"device {len(draft['devices']) + 1}", "from": start, "to": end}
    device["kind"] = chance.choice(("switch", "selector", "relay", "shunt", "connector"))
    device["pole"] = chance.choice(("feed", "feed", "return", "both"))
    device["resistance"] = _ohm(chance, 0.1e-3, 3e-3)
    draft["devices"].append(device)


def _diode(chance: random.Random, draft: Draft, start: str, end: str) -> None:
    device = {"name": f"device {len(draft['devices']) + 1}", "kind": "diode"}
    if chance.random() < 0.25:
        device |= {"from": end, "to": start, "pole": "return"}
    else:
        device |= {"from": start, "to": end}
    device |= {"drop": _uniform(chance, 0.2, 0.7, "V"), "resistance": _ohm(chance, 1e-3, 5e-3)}
    draft["devices"].append(device)


def _loads(chance: random.Random, wishes: Wishes, draft: Draft, points: list[str], nominal: int) -> None:
    count = chance.randint(1, min(8, len(points)))
    # An ordinary feed has some 40 milliohm: E²/4R is the most that one load at its end can draw.
    whole = wishes.load_share * chance.uniform(0.02, 1) * nominal**2 / (4 * 0.04)
    for index in range(count):
        watts, behaves = whole / count * chance.uniform(0.3, 1.5), chance.choice(wishes.behaviours)
        load = {"name": f"load {index + 1}", "at": chance.choice(points[1:])}
        rated = chance.choice(("as behaves", "power"))
        if behaves == "power" or rated == "power":
            load |= {"power": f"{watts:.5g} W", "behaves": behaves}
        elif behaves == "current":
            load["current"] = f"{watts / nominal:.5g} A"
        else:
            load["resistance"] = f"{nominal**2 / watts:.5g} ohm"
        if chance.random() < 0.3:
            load["rated_volts"] = _uniform(chance, nominal, 1.15 * nominal, "V")
        draft["loads"].append(load)


def _converter(chance: random.Random, draft: Draft, points: list[str], nominal: int) -> None:
    """A converter with an island of its own behind it: two points, a run and a load."""
    own = chance.choice((12, 24))
    amps = chance.uniform(2, 10)
    converter = {"name": "converter", "kind": "converter", "from": chance.choice(points), "at": "far bus"}
    converter |= {"nominal": f"{own} V", "volts": _uniform(chance, own, 1.15 * own, "V"), "amps": f"{amps:.5g} A"}
    converter |= {"efficiency": _uniform(chance, 80, 97, "%"), "standby": _uniform(chance, 0, 3, "W")}
    converter |= {"isolated": chance.random() < 0.5, "return_bond": _ohm(chance, 0.5e-3, 5e-3)}
    draft["sources"].append(converter)
    _run(chance, draft, "far bus", "far end", "same")
    watts = own * amps * chance.uniform(0.1, 0.7)
    behaves = chance.choice(("power", "current", "resistance"))
    draft["loads"].append({"name": "far load", "at": "far end", "power": f"{watts:.5g} W", "behaves": behaves})


def _case(chance: random.Random, wishes: Wishes, draft: Draft) -> Draft:
    case: Draft = {"name": "Random case", "sources": {}, "devices": {}}
    if chance.random() < 0.3:
        case["loads"] = {
            load["name"]: round(chance.uniform(0, 1.2), 3) for load in draft["loads"] if chance.random() < 0.8
        }
    if wishes.limited_sources:
        for source in draft["sources"]:
            state = _source_state(chance, source, draft["sources"])
            if state is not None:
                case["sources"][source["name"]] = state
    for device in draft["devices"]:
        if device["kind"] in ("switch", "relay") and chance.random() < wishes.open_devices:
            case["devices"][device["name"]] = "open"
    return case


def _source_state(chance: random.Random, source: Draft, sources: list[Draft]) -> Any:
    others = [one for one in sources if one is not source and one["kind"] in ("battery", "charger")]
    state = chance.random()
    if source["kind"] == "battery" and state < 0.25:
        return "full"
    if source["kind"] in ("battery", "charger") and state < 0.35 and others:
        return "off"
    if source["kind"] == "solar" and state < 0.5:
        return {"irradiance": f"{chance.uniform(0, 100):.4g} %"}
    return None


# Text and changes ------------------------------------------------------------------------------------------------


def text_of(draft: Draft) -> str:
    """A draft as the text of a plan file."""
    lines = [f"format = {draft['format']}", "[plan]"]
    lines += [f"{key} = {_value(value)}" for key, value in draft["plan"].items()]
    for table in ("points", "sources", "runs", "devices", "loads", "cases"):
        for row in draft.get(table, ()):
            lines += [f"[[{table}]]", *(f"{json.dumps(key)} = {_value(value)}" for key, value in row.items())]
    return "\n".join(lines) + "\n"


def plan_of(draft: Draft) -> Plan:
    """A draft read as a plan file would be."""
    return planfile.parse(text_of(draft))


def _value(value: Any) -> str:
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{json.dumps(key)} = {_value(one)}" for key, one in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(map(_value, value)) + "]"
    return json.dumps(value)


def changed(draft: Draft, change: Callable[[str, str, Any], Any]) -> Draft:
    """A copy with every field of every source, run, device and load put through `change(table, field, value)`."""
    result = copy.deepcopy(draft)
    for table in ("sources", "runs", "devices", "loads"):
        for row in result[table]:
            for key in row:
                row[key] = change(table, key, row[key])
    return result


def times(quantity: str, factor: float) -> str:
    """A quantity's text with its number multiplied."""
    number, unit = quantity.split(" ", 1)
    return f"{float(number) * factor!r} {unit}"
