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
    rings: float = 0.0
    """Plans whose points lie along one ring of runs."""
    doubled: float = 0.0
    """Plans with unequal cables side by side."""
    linked: float = 0.3
    """Of batteries with several strings: those that state the links between them."""
    aged: float = 0.0
    chained: float = 0.3
    """Of converters: those with a further one behind them."""
    arrays: float = 0.0
    """Of solar sources: those that state their array."""
    inverters: float = 0.0
    surges: float = 0.0
    busbars: float = 0.0
    """Points that state the resistance of a bar."""


ANYTHING = Wishes(
    rings=0.1, doubled=0.2, aged=0.3, arrays=0.5, inverters=0.3, surges=0.3, busbars=0.15
)  # fmt: skip
"""Plans of every element."""

LINEAR = Wishes(limited_sources=False, chargers=0.0, charger_only=0.0, solar=0.0, converters=0.0, diodes=0.0)
"""Batteries, conductors and devices only: sources that are linear."""


def random_draft(chance: random.Random, wishes: Wishes = Wishes()) -> Draft:
    """A random radial or meshed two-wire plan, with one case."""
    nominal = chance.choice(wishes.nominals)
    draft: Draft = {
        "format": 1,
        "plan": {"name": "Random", "nominal": f"{nominal} V", "chassis_bond": _ohm(chance, 0.3e-3, 3e-3)},
        "points": [], "sources": [], "runs": [], "devices": [], "loads": [], "cases": [],
    }  # fmt: skip
    points = [f"p{index}" for index in range(chance.randint(*wishes.points))]
    _sources(chance, wishes, draft, points, nominal)
    if chance.random() < wishes.rings:
        for start, end in zip(points, [*points[1:], points[0]], strict=True):
            _run(chance, draft, start, end, "same")
    else:
        _tree(chance, wishes, draft, points)
    for _ in range(chance.randint(0, wishes.loops)):
        start, end = chance.sample(points, 2)
        _run(chance, draft, start, end, "same")
    if chance.random() < wishes.doubled:
        _double(chance, draft)
    _loads(chance, wishes, draft, points, nominal)
    if chance.random() < wishes.converters:
        _converter(chance, wishes, draft, points)
    _arrays(chance, wishes, draft)
    _busbars(chance, wishes, draft)
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
        sources.append(_battery(chance, wishes, "house bank", points[0], scale))
        while chance.random() < wishes.extra_batteries and len(sources) < 3:
            sources.append(_battery(chance, wishes, f"bank {len(sources) + 1}", chance.choice(points), scale))
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


def _battery(chance: random.Random, wishes: Wishes, name: str, at: str, scale: float) -> Draft:
    battery = {"name": name, "kind": "battery", "at": at, "emf": _uniform(chance, 12.4 * scale, 13.3 * scale, "V")}
    linked = chance.random() < wishes.linked
    battery["strings"] = chance.randint(2, 4) if linked else chance.choice((1, 1, 2, 3))
    if linked:
        battery["take_off"] = chance.choice(("same end", "ends", "bar"))
        battery["link"] = {"length": _uniform(chance, 0.1, 1, "m"), "size": chance.choice(SIZES[-4:])}
    if chance.random() < 0.8:
        battery["resistance"] = _ohm(chance, 2e-3, 20e-3)
    else:
        battery["short_circuit"] = _uniform(chance, 600, 4000, "A")
    if chance.random() < wishes.aged:
        battery["aged_times"] = round(chance.uniform(1.2, 3), 3)
    return battery


def _arrays(chance: random.Random, wishes: Wishes, draft: Draft) -> None:
    """Arrays behind the solar controllers that there are, at the controller or at the end of runs of their own."""
    for source in draft["sources"]:
        if source["kind"] != "solar" or chance.random() >= wishes.arrays:
            continue
        series, side_by_side = chance.randint(1, 3), chance.randint(1, 2)
        vmp, imp = chance.uniform(17, 40), chance.uniform(2, 8)
        array = {"at": "roof box", "modules": series * side_by_side, "series": series}
        array |= {"vmp": f"{vmp:.5g} V", "voc": f"{1.2 * vmp:.5g} V"}
        source["array"] = array | {"imp": f"{imp:.5g} A", "isc": f"{1.1 * imp:.5g} A"}
        source["power"] = f"{series * side_by_side * vmp * imp * chance.uniform(0.6, 1.3):.5g} W"
        if chance.random() < 0.8:
            source["efficiency"] = _uniform(chance, 92, 99, "%")
        if chance.random() < 0.3:
            source["amps"] = _uniform(chance, 5, 40, "A")
        if chance.random() < 0.85:
            source["from"] = "controller input"
            _roof_runs(chance, wishes, draft)


def _roof_runs(chance: random.Random, wishes: Wishes, draft: Draft) -> None:
    """From the array to its controller: one run or two side by side, at times with a switch ahead of the input."""
    end = "controller input"
    if chance.random() < 0.5 * wishes.devices:
        end = "array switch"
        _device(chance, draft, end, "controller input")
    on_chassis = any(run.get("return") == "chassis" for run in draft["runs"])
    for _ in range(chance.choice((1, 1, 2))):
        back = "chassis" if on_chassis and chance.random() < 0.3 else "same"
        _run(chance, draft, *(("roof box", end) if chance.random() < 0.7 else (end, "roof box")), back)


def _double(chance: random.Random, draft: Draft) -> None:
    """A further cable, of its own size and length, beside one that there is, drawn either way round."""
    beside = [run for run in draft["runs"] if run.get("return") != "chassis" and run["to"] != "chassis"]
    if beside:
        run = chance.choice(beside)
        ends = [run["from"], run["to"]]
        chance.shuffle(ends)
        _run(chance, draft, *ends, "same", carries=run.get("carries"))


def _busbars(chance: random.Random, wishes: Wishes, draft: Draft) -> None:
    """Bars that have a resistance at some of the points."""
    names = {row[key] for table in ("runs", "devices") for row in draft[table] for key in ("from", "to")}
    for name in sorted(names - {"chassis"}):
        if chance.random() < wishes.busbars:
            draft["points"].append({"name": name, "kind": "busbar", "resistance": _ohm(chance, 0.05e-3, 2e-3)})


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
        _inverter(chance, wishes, draft, load)
        if chance.random() < wishes.surges:
            load["surge"] = _surge(chance, watts, nominal, inverter="efficiency" in load or "standby" in load)
        draft["loads"].append(load)


def _inverter(chance: random.Random, wishes: Wishes, draft: Draft, load: Draft) -> None:
    """Makes an inverter of some loads that are rated by their power."""
    if "power" not in load or chance.random() >= wishes.inverters:
        return
    if chance.random() < 0.8:
        load["efficiency"] = _uniform(chance, 80, 96, "%")
    if chance.random() < 0.7:
        load["standby"] = _uniform(chance, 0.5, 20, "W")
    chargers = [source["name"] for source in draft["sources"] if source["kind"] == "charger"]
    if chargers and chance.random() < 0.4:
        load["inverter_of"] = chance.choice(chargers)


def _surge(chance: random.Random, watts: float, nominal: int, *, inverter: bool) -> Draft:
    times = chance.uniform(1.2, 5)
    kind = "times" if inverter else chance.choice(("times", "current", "resistance"))
    if kind == "times":
        return {"times": round(times, 3)}
    if kind == "current":
        return {"current": f"{times * watts / nominal:.5g} A"}
    return {"resistance": f"{nominal**2 / (times * watts):.5g} ohm"}


def _converter(chance: random.Random, wishes: Wishes, draft: Draft, points: list[str]) -> None:
    """Converters up or down, at times a chain: behind each an island of its own, of two points, a run and a load."""
    watts, number = chance.uniform(25, 200), 1
    before = chance.choice(points)
    while True:
        mark = "" if number == 1 else f" {number}"
        own = chance.choice((12, 24, 48))
        converter = {"name": f"converter{mark}", "kind": "converter", "from": before, "at": f"far bus{mark}"}
        converter |= {"nominal": f"{own} V", "volts": _uniform(chance, own, 1.15 * own, "V")}
        converter |= {"amps": f"{watts / own:.5g} A"}
        converter |= {"efficiency": _uniform(chance, 80, 97, "%"), "standby": _uniform(chance, 0, 3, "W")}
        converter |= {"isolated": chance.random() < 0.5, "return_bond": _ohm(chance, 0.5e-3, 5e-3)}
        draft["sources"].append(converter)
        _run(chance, draft, f"far bus{mark}", f"far end{mark}", "same")
        power, behaves = watts * chance.uniform(0.1, 0.6), chance.choice(("power", "current", "resistance"))
        draft["loads"].append(
            {"name": f"far load{mark}", "at": f"far end{mark}", "power": f"{power:.5g} W", "behaves": behaves}
        )
        if number == 3 or chance.random() >= wishes.chained:
            return
        # Behind it, or beside it: what both may draw together is within what the first can give.
        if chance.random() < 0.8:
            before = chance.choice((f"far bus{mark}", f"far end{mark}"))
            watts *= chance.uniform(0.1, 0.3)
        else:
            before = chance.choice(points)
        number += 1


def _case(chance: random.Random, wishes: Wishes, draft: Draft) -> Draft:
    case: Draft = {"name": "Random case", "sources": {}, "devices": {}}
    if chance.random() < 0.3:
        case["loads"] = {
            load["name"]: round(chance.uniform(0, 1.2), 3) for load in draft["loads"] if chance.random() < 0.8
        }
        case["loads"] |= {name: 0.0 for name in case["loads"] if chance.random() < 0.1}
    for source in draft["sources"]:
        state = _source_state(chance, source, draft["sources"]) if wishes.limited_sources else None
        if "aged_times" in source and state != "off" and chance.random() < 0.7:
            state = {"state": state or "on", "aged": True}
        if state is not None:
            case["sources"][source["name"]] = state
    for device in draft["devices"]:
        if device["kind"] in ("switch", "relay") and chance.random() < wishes.open_devices:
            case["devices"][device["name"]] = "open"
    shares = case.get("loads", {load["name"]: 1.0 for load in draft["loads"]})
    surging = [
        load["name"]
        for load in draft["loads"]
        if "surge" in load and shares.get(load["name"], 0.0) > 0 and chance.random() < 0.4
    ]
    if surging:
        case["surge"] = surging
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
    if source["kind"] == "solar" and state < 0.55:
        return chance.choice(("off", {"irradiance": "0 %"}))
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
    """A copy with every field of every point, source, run, device and load put through `change(table, field, value)`.

    Fields of tables within them are put through it too.
    """

    def through(table: str, key: str, value: Any) -> Any:
        if isinstance(value, dict):
            return {inner: through(table, inner, one) for inner, one in value.items()}
        if isinstance(value, list):
            return [through(table, key, one) for one in value]
        return change(table, key, value)

    result = copy.deepcopy(draft)
    for table in ("points", "sources", "runs", "devices", "loads"):
        result[table] = [through(table, "", row) for row in result[table]]
    return result


def times(quantity: str, factor: float) -> str:
    """A quantity's text with its number multiplied."""
    number, unit = quantity.split(" ", 1)
    return f"{float(number) * factor!r} {unit}"
