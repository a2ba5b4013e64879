"""A plan as a list of circuit elements, worked out from its tables alone and not from `farvolt.network`.

What tests hold the solver against: the netlist for another simulator, Kirchhoff's laws element by element, and the
highest solution. At 20 °C throughout. Nodes are the numbers of (point, "+" or "-"); the chassis is ("chassis", "-").
"""

from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import TypeVar

from farvolt.plan import Battery, Case, Charger, Converter, Device, Load, Plan, ReturnConductor, Run, Solar

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
    """A converter: what `drain` takes is what `feeder` gives over its efficiency, and the standby."""

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
    feeders = [one for source in plan.sources if (one := _feeder(plan, source, case, pins, nominal)) is not None]
    feeders += [_diode(device, pins) for device, _ in devices if device.kind == "diode"]
    drains = [_drain(load, case.share(load.name), pins, nominal) for load in plan.loads]
    couplings = [_coupling(plan, source, feeder, pins, nominal) for source, feeder in _converters(plan, feeders)]
    return _at_work(Circuit(pins, resistors, feeders, drains, couplings))


# Nodes and conductors ----------------------------------------------------------------------------------------------


def _numbered(plan: Plan) -> dict[Pin, int]:
    """Nodes by pin; the pole that passes a device by is one node on both sides."""
    pins: list[Pin] = [(name, pole) for name in plan.point_names for pole in "+-"] + [("chassis", "-")]
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
    for run in plan.runs:
        found += [((run.from_point, pole), (run.to_point, pole), ohm) for pole, ohm in _run_ohm(run).items()]
        if run.return_path == "chassis":
            found.append((("chassis", "-"), (run.to_point, "-"), plan.plan.chassis_bond.si))
    for device, _ in devices:
        found += [] if device.kind == "diode" else _device_conductors(device)
    for source in plan.sources:
        if isinstance(source, Converter) and not source.isolated:
            found.append(((source.from_point, "-"), (source.at, "-"), source.return_bond.si))
    _bond_starts(plan, found)
    opened = [conductor for device, closed in devices if not closed for conductor in _device_conductors(device)]
    for conductor in opened:
        found.remove(conductor)
    return found


def _device_conductors(device: Device) -> list[tuple[Pin, Pin, float]]:
    assert device.resistance is not None
    poles = {"feed": "+", "return": "-", "both": "+-"}[device.pole]
    return [((device.from_point, pole), (device.to_point, pole), device.resistance.si) for pole in poles]


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


def _run_ohm(run: Run) -> dict[str, float]:
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


# Sources and loads ---------------------------------------------------------------------------------------------


def _nominals(plan: Plan, pins: dict[Pin, int]) -> dict[int, float]:
    """Nominal voltage at every feed node: a converter's own where only it delivers, else the plan's."""
    edges = [((run.from_point, "+"), (run.to_point, "+")) for run in plan.runs if "+" in _run_ohm(run)]
    edges += [((device.from_point, "+"), (device.to_point, "+")) for device in plan.devices]
    part = connected(pins, edges)
    own = {part[source.at, "+"]: source.nominal.si for source in plan.sources if isinstance(source, Converter)}
    for source in plan.sources:
        if not isinstance(source, Converter):
            own[part[source.at, "+"]] = plan.plan.nominal.si
    return {node: own.get(part[pin], plan.plan.nominal.si) for pin, node in pins.items() if pin[1] == "+"}


def _feeder(plan: Plan, source: object, case: Case, pins: dict[Pin, int], nominal: dict[int, float]) -> Feeder | None:
    assert isinstance(source, Battery | Charger | Solar | Converter)
    state = case.sources.get(source.name)
    if state is not None and state.state == "off":
        return None
    a, b = pins[source.at, "+"], pins[source.at, "-"]
    if isinstance(source, Battery):
        assert source.emf is not None
        emf = state.emf.si if state is not None and state.emf is not None else source.emf.si
        ohm = (
            source.resistance.si
            if source.resistance is not None
            else emf / (source.short_circuit.si if source.short_circuit else 0)
        )
        low = 0.0 if state is not None and state.state == "full" else float("-inf")
        return Feeder(source.name, a, b, emf, ohm / source.strings, low, float("inf"))
    if isinstance(source, Solar):
        watts = source.power.si * (state.irradiance.si if state is not None and state.irradiance is not None else 1.0)
        # The default output limit of a controller: its power at 40 % of nominal.
        limit, volts = source.power.si / (0.4 * nominal[a]), source.ceiling.si
        return Feeder(source.name, a, b, volts, 1e-3 * volts / limit, 0.0, limit, watts, 0.4 * nominal[a])
    volts, limit = source.volts.si, source.amps.si
    ohm = source.resistance.si if source.resistance is not None else 1e-3 * volts / limit
    return Feeder(source.name, a, b, volts, ohm, 0.0, limit)


def _diode(device: Device, pins: dict[Pin, int]) -> Feeder:
    assert device.drop is not None
    assert device.resistance is not None
    pole = "-" if device.pole == "return" else "+"
    a, b = pins[device.to_point, pole], pins[device.from_point, pole]
    upstream = a if device.pole == "return" else b
    drop, ohm = -device.drop.si, device.resistance.si
    return Feeder(device.name, a, b, drop, ohm, 0.0, float("inf"), leak_S=BLOCKED_S, upstream=upstream)


def _drain(load: Load, share: float, pins: dict[Pin, int], nominal: dict[int, float]) -> Drain:
    a, b = pins[load.at, "+"], pins[load.at, "-"]
    volts = load.rated_volts.si if load.rated_volts is not None else nominal[a]
    if load.power is not None:
        rated, watts = "power", load.power.si
    elif load.current is not None:
        rated, watts = "current", load.current.si * volts
    else:
        assert load.resistance is not None
        rated, watts = "resistance", volts**2 / load.resistance.si
    behaves, watts = load.behaves or rated, watts * share
    laws = {
        "power": (watts, 0.0, 0.0),
        "current": (0.0, watts / volts, 0.0),
        "resistance": (0.0, 0.0, watts / volts**2),
    }
    return Drain(load.name, a, b, *laws[behaves], 0.4 * nominal[a])


def _converters(plan: Plan, feeders: list[Feeder]) -> list[tuple[Converter, Feeder]]:
    by_name = {feeder.name: feeder for feeder in feeders}
    return [(one, by_name[one.name]) for one in plan.sources if isinstance(one, Converter) and one.name in by_name]


def _coupling(
    plan: Plan, source: Converter, feeder: Feeder, pins: dict[Pin, int], nominal: dict[int, float]
) -> Coupling:
    a, b = pins[source.from_point, "+"], pins[source.from_point, "-"]
    drain = Drain(source.name, a, b, 0.0, 0.0, 0.0, 0.4 * nominal[a])
    return Coupling(feeder, drain, source.efficiency.si, source.standby.si)


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
            one.feeder for one in whole.couplings
            if one.feeder not in working and part[one.drain.a] in fed and part[one.drain.a] == part[one.drain.b]
        ]  # fmt: skip
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
