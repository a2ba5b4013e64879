"""A plan as a list of circuit elements, worked out from its tables alone and not from `farvolt.network`.

What tests hold the solver against: the netlist for another simulator, Kirchhoff's laws element by element, and the
highest solution. At 20 °C throughout. Nodes are the numbers of (point, "+" or "-"); the chassis is ("chassis", "-").
"""

from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from typing import TypeVar

import numpy as np

from farvolt.plan import Battery, Case, Charger, Converter, Device, Load, Plan, ReturnConductor, Run, Solar, SourceState

Pin = tuple[str, str]
Node = TypeVar("Node")

CLASS_5_OHM_PER_KM = {
    "1.5 mm2": 13.3, "2.5 mm2": 7.98, "4 mm2": 4.95, "6 mm2": 3.30,
    "10 mm2": 1.91, "16 mm2": 1.21, "25 mm2": 0.780, "35 mm2": 0.554,
}  # fmt: skip
"""Maximum resistance of plain copper, class 5, at 20 °C: IEC 60228 Table 3."""

COPPER_PER_K = 0.00393
"""Temperature coefficient of copper at 20 °C: IEC 60028."""

BLOCKED_S = 1e-6
"""What a diode lets through backwards, as the solver states it."""

CONTROLLER_BOND_OHM = 1e-3
"""Between the two negatives of a solar controller, which are common: as the solver states it."""


@dataclass(frozen=True)
class Resistor:
    """A conductor, device or bond."""

    a: int
    b: int
    ohm: float


@dataclass(frozen=True)
class Feeder:
    """Delivers clip((volts − u)/ohm, low, high) at `a`, back at `b`, and never more than `watts`."""

    name: str
    a: int
    b: int
    volts: float
    ohm: float
    low: float
    high: float
    watts: float = float("inf")
    floor: float = 1.0
    """Below this voltage a power is taken as the current it gives here."""
    leak_S: float = 0.0
    upstream: int = -1
    """The end at which a diode has to be fed to work; -1 for a source."""

    def amps(self, u: float) -> float:
        """Current delivered at the voltage u."""
        most = min(self.high, self.watts / max(u, self.floor))
        return min(max((self.volts - u) / self.ohm, self.low), most) - self.leak_S * u


@dataclass(frozen=True)
class Drain:
    """Draws watts/u + amps + siemens·u from `a` to `b`; the first two as a resistance below the knee."""

    name: str
    a: int
    b: int
    watts: float
    amps: float
    siemens: float
    knee: float

    def current(self, u: float, share: float = 1.0, watts: float | None = None) -> float:
        """Current drawn at the voltage u and a share of the load."""
        power = share * self.watts if watts is None else watts
        if u >= self.knee:
            return power / u + share * (self.amps + self.siemens * u)
        return u * (power / self.knee**2 + share * (self.amps / self.knee + self.siemens))


@dataclass(frozen=True)
class Coupling:
    """A converter or solar controller: `drain` takes what `feeder` gives over its efficiency, and the standby."""

    feeder: Feeder
    drain: Drain
    efficiency: float
    standby_W: float


@dataclass
class Circuit:
    """The elements that are at work in a case, and the nodes that are fed."""

    pins: dict[Pin, int]
    resistors: list[Resistor] = field(default_factory=list)
    feeders: list[Feeder] = field(default_factory=list)
    drains: list[Drain] = field(default_factory=list)
    couplings: list[Coupling] = field(default_factory=list)
    parts: list[set[int]] = field(default_factory=list)
    """Galvanic parts that are fed, as sets of nodes."""

    @property
    def live(self) -> set[int]:
        """All fed nodes."""
        return set().union(*self.parts)


def circuit_of(plan: Plan, case: Case) -> Circuit:
    """The circuit of a plan in a case."""
    devices = [(device, case.devices.get(device.name, device.state) == "closed") for device in plan.devices]
    pins = _numbered(plan)
    resistors = [Resistor(pins[a], pins[b], ohm) for a, b, ohm in _conductors(plan, devices)]
    nominal = _nominals(plan, pins)
    whole = Circuit(pins, resistors)
    for source in plan.sources:
        _add_source(whole, source, case.sources.get(source.name, SourceState()), nominal)
    whole.feeders += [_diode(device, pins, _half_bars(plan)) for device, _ in devices if device.kind == "diode"]
    whole.drains += [_drain(load, case, pins, nominal) for load in plan.loads]
    return _at_work(whole)


# Nodes and conductors ----------------------------------------------------------------------------------------------


def _numbered(plan: Plan) -> dict[Pin, int]:
    """Nodes by pin; the pole that passes a device by is one node on both sides."""
    pins: list[Pin] = [(name, pole) for name in plan.point_names for pole in "+-"] + [("chassis", "-")]
    pins += [pin for source in plan.sources for pin in _string_pins(source)]
    passing = [
        ((device.from_point, pole), (device.to_point, pole))
        for device in plan.devices
        for pole, word in (("+", "return"), ("-", "feed"))
        if device.pole == word
    ]
    part_of = connected(pins, passing)
    return {pin: part_of[pin] for pin in pins}


def connected(nodes: Iterable[Node], edges: Iterable[tuple[Node, Node]]) -> dict[Node, int]:
    """The number of the connected part of every node, by walking the graph."""
    beside: dict[Node, list[Node]] = {node: [] for node in nodes}
    for a, b in edges:
        beside[a].append(b)
        beside[b].append(a)
    found: dict[Node, int] = {}
    for number, start in enumerate(beside):
        stack = [start] if start not in found else []
        while stack:
            node = stack.pop()
            if node not in found:
                found[node] = number
                stack.extend(beside[node])
    return found


def _conductors(plan: Plan, devices: list[tuple[Device, bool]]) -> list[tuple[Pin, Pin, float]]:
    found: list[tuple[Pin, Pin, float]] = []
    bars = _half_bars(plan)
    for run in plan.runs:
        ends = bars.get(run.from_point, 0.0) + bars.get(run.to_point, 0.0)
        found += [((run.from_point, pole), (run.to_point, pole), ohm + ends) for pole, ohm in run_ohm(run).items()]
        if run.return_path == "chassis":
            found.append((("chassis", "-"), (run.to_point, "-"), plan.plan.chassis_bond.si))
    for device, _ in devices:
        found += [] if device.kind == "diode" else _device_conductors(device, bars)
    for source in plan.sources:
        if isinstance(source, Converter) and not source.isolated:
            found.append(((source.from_point, "-"), (source.at, "-"), source.return_bond.si))
        if isinstance(source, Solar) and source.array is not None and source.input_point != source.at:
            found.append(((source.input_point, "-"), (source.at, "-"), CONTROLLER_BOND_OHM))
        found += _links(source)
    _bond_starts(plan, found)
    opened = [conductor for device, closed in devices if not closed for conductor in _device_conductors(device, bars)]
    for conductor in opened:
        found.remove(conductor)
    return found


def _half_bars(plan: Plan) -> dict[str, float]:
    """What a bar adds to each conductor that ends at it: half of its resistance from end to end."""
    return {point.name: point.resistance.si / 2 for point in plan.points if point.resistance is not None}


def _device_conductors(device: Device, bars: dict[str, float]) -> list[tuple[Pin, Pin, float]]:
    assert device.resistance is not None
    ohm = device.resistance.si + bars.get(device.from_point, 0.0) + bars.get(device.to_point, 0.0)
    poles = {"feed": "+", "return": "-", "both": "+-"}[device.pole]
    return [((device.from_point, pole), (device.to_point, pole), ohm) for pole in poles]


def _bond_starts(plan: Plan, found: list[tuple[Pin, Pin, float]]) -> None:
    """Where the return of a run's start has no other way to the chassis, its source is bonded to it."""
    pins = _numbered(plan)
    for run in plan.runs:
        if run.return_path == "chassis":
            part = connected(pins.values(), ((pins[a], pins[b]) for a, b, _ in found))
            start = part[pins[run.from_point, "-"]]
            if start != part[pins["chassis", "-"]]:
                reference = [source for source in plan.sources if source.name == plan.reference]
                sources = [one.at for one in (*reference, *plan.sources) if part[pins[one.at, "-"]] == start]
                at = (*sources, run.from_point)[0]
                found.append(((at, "-"), ("chassis", "-"), plan.plan.chassis_bond.si))


def run_ohm(run: Run) -> dict[str, float]:
    """Resistance at 20 °C of the conductors of a run by pole: ρ-table × length / parallel, joints, protection."""
    assert run.size is not None
    lengths, sizes = {"+": run.length.si, "-": run.length.si}, {"+": run.size.name, "-": run.size.name}
    if isinstance(run.return_path, ReturnConductor):
        assert run.return_path.size is not None
        assert run.return_path.length is not None
        lengths["-"], sizes["-"] = run.return_path.length.si, run.return_path.size.name
    only = {"feed": "+", "return": "-"}.get(
        run.carries or "", "-" if "chassis" in (run.from_point, run.to_point) else "+-"
    )
    poles = only.replace("-", "") if run.return_path == "chassis" else only
    cable = {pole: CLASS_5_OHM_PER_KM[sizes[pole]] / 1000 * lengths[pole] / run.parallel for pole in poles}
    if run.resistance is not None:
        whole = run.resistance.si / (1 + COPPER_PER_K * (run.resistance_temperature.si - 20))
        return {pole: whole * ohm / sum(cable.values()) for pole, ohm in cable.items()}
    joints = run.joints * run.joint_resistance.si / run.parallel
    words = {"+": "feed", "-": "return"}
    return {pole: ohm + joints + _protection_ohm(run, words[pole]) for pole, ohm in cable.items()}


def _protection_ohm(run: Run, pole: str) -> float:
    return sum(one.resistance.si for one in run.protections if one.pole == pole and one.resistance is not None)


# The strings of a battery -------------------------------------------------------------------------------------------


def string_name(battery: str, number: int) -> str:
    """A string's own node, as the network names it too; the control character is in no name of a plan."""
    return f"\x1f{battery}\x1f{number}"


def _apart(source: object) -> bool:
    return isinstance(source, Battery) and source.strings > 1 and source.link is not None


def _string_ends(battery: Battery, number: int) -> tuple[Pin, Pin]:
    """Where the feed and the return of a string are: at the battery's point where a main cable is on it."""
    last = battery.strings - 1
    main_feed, main_return = {"same end": (0, 0), "ends": (0, last), "bar": (None, None)}[battery.take_off]
    own = string_name(battery.name, number)
    feed = battery.at if number == main_feed else own
    back = battery.at if number == main_return else own
    return (feed, "+"), (back, "-")


def _string_pins(source: object) -> list[Pin]:
    if not _apart(source):
        return []
    assert isinstance(source, Battery)
    ends = [pin for number in range(source.strings) for pin in _string_ends(source, number)]
    return [pin for pin in ends if pin[0] != source.at]


def _links(source: object) -> list[tuple[Pin, Pin, float]]:
    """Link cables, always at 20 °C: to the neighbour in each pole, or from every string to the bar."""
    if not _apart(source):
        return []
    assert isinstance(source, Battery)
    assert source.link is not None
    ohm = CLASS_5_OHM_PER_KM[source.link.size.name] / 1000 * source.link.length.si
    ends = [_string_ends(source, number) for number in range(source.strings)]
    if source.take_off == "bar":
        return [((source.at, pin[1]), pin, ohm) for pair in ends for pin in pair]
    return [(a, b, ohm) for i in range(source.strings - 1) for a, b in zip(ends[i], ends[i + 1], strict=True)]


def _strings(battery: Battery, state: SourceState, pins: dict[Pin, int]) -> list[Feeder]:
    """The strings of a battery, each behind its own resistance; as one where no link between them is stated."""
    assert battery.emf is not None
    emf = state.emf.si if state.emf is not None else battery.emf.si
    if battery.resistance is not None:
        ohm = battery.resistance.si
    else:
        assert battery.short_circuit is not None
        ohm = emf / battery.short_circuit.si
    if state.aged:
        assert battery.aged_times is not None
        ohm *= battery.aged_times
    low = 0.0 if state.state == "full" else float("-inf")
    if not _apart(battery):
        a, b = pins[battery.at, "+"], pins[battery.at, "-"]
        return [Feeder(battery.name, a, b, emf, ohm / battery.strings, low, float("inf"))]
    ends = [_string_ends(battery, number) for number in range(battery.strings)]
    return [
        Feeder(string_name(battery.name, number), pins[a], pins[b], emf, ohm, low, float("inf"))
        for number, (a, b) in enumerate(ends)
    ]


# Sources and loads ---------------------------------------------------------------------------------------------


def _nominals(plan: Plan, pins: dict[Pin, int]) -> dict[int, float]:
    """Nominal voltage at every feed node: a converter's or an array's own where only it delivers, else the plan's."""
    edges = [((run.from_point, "+"), (run.to_point, "+")) for run in plan.runs if "+" in run_ohm(run)]
    edges += [((device.from_point, "+"), (device.to_point, "+")) for device in plan.devices]
    part = connected(pins, edges)
    own: dict[int, float] = {}
    for source in plan.sources:
        if isinstance(source, Solar) and source.array is not None:
            own[part[source.array.at, "+"]] = source.array.vmp.si * source.array.series
    own |= {part[source.at, "+"]: source.nominal.si for source in plan.sources if isinstance(source, Converter)}
    for source in plan.sources:
        if not isinstance(source, Converter):
            own[part[source.at, "+"]] = plan.plan.nominal.si
    return {node: own.get(part[pin], plan.plan.nominal.si) for pin, node in pins.items() if pin[1] == "+"}


def _add_source(whole: Circuit, source: object, state: SourceState, nominal: dict[int, float]) -> None:
    """The elements that a source is, unless it is off."""
    assert isinstance(source, Battery | Charger | Solar | Converter)
    if state.state == "off":
        return
    pins = whole.pins
    a, b = pins[source.at, "+"], pins[source.at, "-"]
    if isinstance(source, Battery):
        whole.feeders += _strings(source, state, pins)
    elif isinstance(source, Solar):
        _add_solar(whole, source, state, nominal[a])
    else:
        volts, limit = source.volts.si, source.amps.si
        ohm = source.resistance.si if source.resistance is not None else 1e-3 * volts / limit
        feeder = Feeder(source.name, a, b, volts, ohm, 0.0, limit)
        whole.feeders.append(feeder)
        if isinstance(source, Converter):
            a, b = pins[source.from_point, "+"], pins[source.from_point, "-"]
            drain = Drain(source.name, a, b, 0.0, 0.0, 0.0, 0.4 * nominal[a])
            whole.couplings.append(Coupling(feeder, drain, source.efficiency.si, source.standby.si))


def _add_solar(whole: Circuit, source: Solar, state: SourceState, nominal: float) -> None:
    """A controller and, where its array is stated, the array ahead of it."""
    irradiance = state.irradiance.si if state.irradiance is not None else 1.0
    # The default output limit of a controller: its power at 40 % of nominal.
    limit = source.amps.si if source.amps is not None else source.power.si / (0.4 * nominal)
    volts = source.ceiling.si
    a, b = whole.pins[source.at, "+"], whole.pins[source.at, "-"]
    watts = source.power.si * irradiance
    feeder = Feeder(source.name, a, b, volts, 1e-3 * volts / limit, 0.0, limit, watts, 0.4 * nominal)
    if source.array is None:
        whole.feeders.append(feeder)
    elif irradiance > 0:
        amps, best = source.array.imp.si * source.array.modules / source.array.series, source.array.vmp.si
        best *= source.array.series
        pins = [whole.pins[at, pole] for at in (source.array.at, source.input_point) for pole in "+-"]
        array = Feeder(f"{source.name} array", pins[0], pins[1], best, 1e-3 * best / amps, 0.0, float("inf"))
        amps *= irradiance
        arriving = best - amps * (array.ohm + _ohm_between(whole.resistors, pins))
        feeder = replace(feeder, watts=min(watts, source.efficiency.si * arriving * amps))
        drain = Drain(source.name, pins[2], pins[3], 0.0, 0.0, 0.0, 0.4 * best)
        whole.feeders += [array, feeder]
        whole.couplings.append(Coupling(feeder, drain, source.efficiency.si, 0.0))


def _ohm_between(resistors: list[Resistor], pins: list[int]) -> float:
    """Fall from the first pair of nodes to the second for each ampere that goes there by one and back by the other."""
    rows = {node: row for row, node in enumerate({*pins, *(node for one in resistors for node in (one.a, one.b))})}
    matrix, injected = np.zeros((len(rows), len(rows))), np.zeros(len(rows))
    for one in resistors:
        ends = [rows[one.a], rows[one.b]]
        np.add.at(matrix, (ends, ends), 1 / one.ohm)
        np.add.at(matrix, (ends, ends[::-1]), -1 / one.ohm)
    signs = np.array([1.0, -1.0, -1.0, 1.0])
    at = [rows[node] for node in pins]
    np.add.at(injected, at, signs)
    volts = np.linalg.lstsq(matrix, injected, rcond=None)[0]
    return float(signs @ volts[at])


def _diode(device: Device, pins: dict[Pin, int], bars: dict[str, float]) -> Feeder:
    assert device.drop is not None
    assert device.resistance is not None
    pole = "-" if device.pole == "return" else "+"
    a, b = pins[device.to_point, pole], pins[device.from_point, pole]
    upstream = a if device.pole == "return" else b
    ohm = device.resistance.si + bars.get(device.from_point, 0.0) + bars.get(device.to_point, 0.0)
    return Feeder(device.name, a, b, -device.drop.si, ohm, 0.0, float("inf"), leak_S=BLOCKED_S, upstream=upstream)


def _drain(load: Load, case: Case, pins: dict[Pin, int], nominal: dict[int, float]) -> Drain:
    a, b = pins[load.at, "+"], pins[load.at, "-"]
    volts = load.rated_volts.si if load.rated_volts is not None else nominal[a]
    return Drain(load.name, a, b, *_draw(load, case, volts), 0.4 * nominal[a])


def _draw(load: Load, case: Case, volts: float) -> tuple[float, float, float]:
    """Watts, amps and siemens of a load in a case."""
    share, surge = case.share(load.name), load.surge if load.name in case.surge else None
    if load.inverter_of is not None and case.sources.get(load.inverter_of, SourceState()).state != "off":
        return 0.0, 0.0, 0.0
    if surge is not None and surge.current is not None:
        return 0.0, share * surge.current.si, 0.0
    if surge is not None and surge.resistance is not None:
        return 0.0, 0.0, share / surge.resistance.si
    times = surge.times if surge is not None and surge.times is not None else 1.0
    rated, watts = _rated(load, volts)
    watts *= share * times
    named = case.loads if isinstance(case.loads, dict) else ()
    if load.standby is not None and (case.loads == "all" or load.name in named):
        watts += load.standby.si
    behaves = load.behaves or rated
    if behaves == "power":
        return watts, 0.0, 0.0
    return (0.0, watts / volts, 0.0) if behaves == "current" else (0.0, 0.0, watts / volts**2)


def _rated(load: Load, volts: float) -> tuple[str, float]:
    """How a load is rated, and what it draws at its rated volts; an inverter without its standby."""
    if load.power is not None:
        return "power", load.power.si / (load.efficiency.si if load.efficiency is not None else 1.0)
    if load.current is not None:
        return "current", load.current.si * volts
    assert load.resistance is not None
    return "resistance", volts**2 / load.resistance.si


def _at_work(whole: Circuit) -> Circuit:
    """Leave out what is not fed: parts without a source that works, and loads between two parts."""
    fed_by_converter = {coupling.feeder.name: coupling for coupling in whole.couplings}
    # A converter works where its input is fed, a diode where its upstream end is.
    working = [one for one in whole.feeders if one.name not in fed_by_converter and not one.leak_S]
    diodes = [one for one in whole.feeders if one.leak_S]
    nodes = set(whole.pins.values())
    while True:
        edges = [(one.a, one.b) for one in (*whole.resistors, *working)]
        part = connected(nodes, edges)
        fed = {part[one.a] for one in working if not one.leak_S}
        joined = [
            one.feeder
            for one in whole.couplings
            if one.feeder not in working and part[one.drain.a] in fed and part[one.drain.a] == part[one.drain.b]
        ]
        joined += [one for one in diodes if one not in working and part[one.upstream] in fed]
        if not joined:
            break
        working += joined
    numbers = sorted(fed)
    return Circuit(
        whole.pins,
        [one for one in whole.resistors if part[one.a] in fed],
        [one for one in whole.feeders if one in working and part[one.a] in fed],
        [one for one in whole.drains if part[one.a] in fed and part[one.a] == part[one.b]],
        [one for one in whole.couplings if one.feeder in working],
        [{node for node in nodes if part[node] == number} for number in numbers],
    )


# Kirchhoff ---------------------------------------------------------------------------------------------------------


def imbalance(circuit: Circuit, volts: dict[int, float], share: float = 1.0) -> dict[int, float]:
    """Current that leaves every fed node less what arrives, A: zero by Kirchhoff's current law."""
    out = dict.fromkeys(circuit.live, 0.0)
    for a, b, amps in currents(circuit, volts, share):
        out[a] += amps
        out[b] -= amps
    return out


def currents(circuit: Circuit, volts: dict[int, float], share: float = 1.0) -> list[tuple[int, int, float]]:
    """(from, to, A) of every element at work."""
    found = [(one.a, one.b, (volts[one.a] - volts[one.b]) / one.ohm) for one in circuit.resistors]
    found += [(one.b, one.a, one.amps(volts[one.a] - volts[one.b])) for one in circuit.feeders]
    found += [(one.a, one.b, one.current(volts[one.a] - volts[one.b], share)) for one in circuit.drains]
    for one in circuit.couplings:
        given = volts[one.feeder.a] - volts[one.feeder.b]
        watts = given * one.feeder.amps(given) / one.efficiency + share * one.standby_W
        found.append(
            (one.drain.a, one.drain.b, one.drain.current(volts[one.drain.a] - volts[one.drain.b], watts=watts))
        )
    return found
