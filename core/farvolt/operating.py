"""Operating conditions: what each source, load and device does in one case, as arrays beside the network.

Two laws cover every port. A source delivers clip((V − u)/r, lo, hi) at its voltage u, further held to a power p.
A load draws P/u + I + G·u above its knee and, below it, what a resistance would that draws the same at the knee.
A diode is a source law between its two nodes: it delivers at `to` when `from` stands more than the drop above.
"""

from dataclasses import dataclass, field

import numpy as np

from farvolt import batteries
from farvolt.network import DIODE_DROP_V, Floats, Ints, Network, bar_ends_ohm, device_ohm, linked
from farvolt.plan import Battery, Case, Charger, Converter, Load, Plan, Solar, Source, SourceState

KNEE_SHARE = 0.4
"""Below this share of the island's nominal voltage a constant-power or constant-current load is a resistance."""

DROOP_SHARE = 1e-3
"""Droop of a charger or converter at rated current, as a share of its voltage, unless its resistance is stated."""

DIODE_LEAK_S = 1e-6
"""What a blocking diode lets through, so that no part of a network floats."""


@dataclass(frozen=True)
class Operating:
    """One case on a network. Arrays are over ports unless said otherwise.

    Source ports: one for each source of the plan, then battery strings that stand apart (their battery's own port is
    idle), then solar arrays that the plan places, then diodes. Load ports: the loads, then the inputs of converters
    and of the controllers of such arrays."""

    case: Case
    branch_on: np.ndarray
    """Over branches: False where an open device breaks it."""
    source_a: Ints
    source_b: Ints
    source_on: np.ndarray
    volts: Floats
    ohm: Floats
    low: Floats
    high: Floats
    power: Floats
    leak: Floats
    load_a: Ints
    load_b: Ints
    load_W: Floats
    load_A: Floats
    load_S: Floats
    knee: Floats
    converters: tuple[tuple[int, int, float, float], ...]
    """(source port, load port, efficiency, standby W) of each converter, and of each controller with an array."""
    arrays: tuple[tuple[int, int, int, float], ...]
    """(controller's source port, array's source port, controller's load port, array's full current A)."""
    nominal: Floats
    """Nominal voltage of each source port's island."""
    islands: "Islands" = field(repr=False)


@dataclass(frozen=True)
class Islands:
    """The parts of a plan fed without passing a converter, with every device closed."""

    of_node: Ints
    nominal_V: dict[int, float]
    """Nominal voltage by island number; the plan's where no source states another."""

    def nominal(self, node: int) -> float:
        """Nominal voltage at a node."""
        return self.nominal_V[int(self.of_node[node])]


def components(count: int, a: Ints, b: Ints) -> Ints:
    """Connected parts of a graph of `count` nodes with edges (a, b): a part's number for each node."""
    parent = list(range(count))

    def root(node: int) -> int:
        while parent[node] != node:
            parent[node] = parent[parent[node]]
            node = parent[node]
        return node

    for one, other in zip(a.tolist(), b.tolist(), strict=True):
        parent[root(other)] = root(one)
    return np.array([root(node) for node in range(count)], dtype=np.int64)


SYSTEMS_V = (6.0, 12.0, 24.0, 32.0, 36.0, 48.0)
"""Usual nominal voltages of systems (common practice)."""


def system_nominal_V(battery_V: float) -> float:
    """Nominal voltage of the system that a battery's own nominal stands for: 12.8 V and 11.1 V mean 12 V."""
    near = min(SYSTEMS_V, key=lambda volts: abs(battery_V / volts - 1))
    return near if abs(battery_V / near - 1) <= 0.1 else battery_V


def islands(network: Network) -> Islands:
    """The islands of a plan and the nominal voltage of each."""
    plan = network.plan
    feed = network.pole == 0
    a, b = [network.a[feed]], [network.b[feed]]
    for _, start, end in network.diodes:
        a.append(np.array([start]))
        b.append(np.array([end]))
    part = components(network.node_count, np.concatenate(a), np.concatenate(b))
    nominal = {int(number): plan.plan.nominal.si for number in sorted(set(part.tolist()))}
    for index, node, _ in network.arrays:
        nominal[int(part[node])] = array_V(plan.sources[index])
    # Batteries first, so that a charger or converter, which states its system's nominal, has the last word.
    for source in sorted(plan.sources, key=lambda one: not isinstance(one, Battery)):
        if source.nominal is not None:
            stated = source.nominal.si
            volts = system_nominal_V(stated) if isinstance(source, Battery) else stated
            nominal[int(part[network.feed(source.at)])] = volts
    reference = next((source for source in plan.sources if source.name == plan.reference), None)
    if reference is not None:
        nominal[int(part[network.feed(reference.at)])] = plan.plan.nominal.si
    return Islands(part, nominal)


def operating(network: Network, case: Case, found: Islands | None = None) -> Operating:
    """The arrays of one case."""
    found = found or islands(network)
    plan = network.plan
    laws = [_source_law(plan, source, case, found.nominal(network.feed(source.at))) for source in plan.sources]
    laws += [_string_law(plan, index, case, found.nominal(a)) for index, a, _ in network.strings]
    laws += [_array_law(plan.sources[index], case) for index, _, _ in network.arrays]
    bars = bar_ends_ohm(plan)
    laws += [_diode_law(plan, index, bars) for index, _, _ in network.diodes]
    inner = (*network.strings, *network.arrays)
    at = [network.feed(source.at) for source in plan.sources]
    at += [a for _, a, _ in inner] + [end for _, _, end in network.diodes]
    back = [network.ret(source.at) for source in plan.sources]
    back += [b for _, _, b in inner] + [start for _, start, _ in network.diodes]
    draws = [_load_law(plan, load, case, found.nominal(network.feed(load.at))) for load in plan.loads]
    load_a = [network.feed(load.at) for load in plan.loads]
    load_b = [network.ret(load.at) for load in plan.loads]
    knee = [KNEE_SHARE * found.nominal(node) for node in load_a]
    converters, arrays = [], []
    array_ports = {index: len(plan.sources) + len(network.strings) + i for i, (index, *_) in enumerate(network.arrays)}
    for port, source in enumerate(plan.sources):
        if isinstance(source, Converter):
            inlet, standby = source.from_point, source.standby.si if laws[port][0] else 0.0
        elif isinstance(source, Solar) and port in array_ports:
            inlet, standby = source.input_point, 0.0
            arrays.append((port, array_ports[port], len(load_a), array_A(source, case)))
        else:
            continue
        converters.append((port, len(load_a), source.efficiency.si, standby))
        node = network.feed(inlet)
        load_a.append(node)
        load_b.append(network.ret(inlet))
        knee.append(KNEE_SHARE * found.nominal(node))
        draws.append((0.0, 0.0, 0.0))
    columns = np.array(laws, dtype=float).reshape(len(laws), 7).T
    load_columns = np.array(draws, dtype=float).reshape(len(draws), 3).T
    return Operating(
        case=case,
        branch_on=_branches_on(network, case),
        source_a=np.array(at, dtype=np.int64),
        source_b=np.array(back, dtype=np.int64),
        source_on=columns[0].astype(bool),
        volts=columns[1],
        ohm=columns[2],
        low=columns[3],
        high=columns[4],
        power=columns[5],
        leak=columns[6],
        load_a=np.array(load_a, dtype=np.int64),
        load_b=np.array(load_b, dtype=np.int64),
        load_W=load_columns[0],
        load_A=load_columns[1],
        load_S=load_columns[2],
        knee=np.array(knee, dtype=float),
        converters=tuple(converters),
        arrays=tuple(arrays),
        nominal=np.array([found.nominal(node) for node in at], dtype=float),
        islands=found,
    )


def device_closed(plan: Plan, index: int, case: Case) -> bool:
    """Whether a device conducts in a case."""
    device = plan.devices[index]
    return case.devices.get(device.name, device.state) == "closed"


def _branches_on(network: Network, case: Case) -> np.ndarray:
    closed = np.array([device_closed(network.plan, index, case) for index in range(len(network.plan.devices))] + [True])
    return closed[network.device]


Law = tuple[float, float, float, float, float, float, float]
"""on, V, r, lo, hi, power, leak."""


def _source_law(plan: Plan, source: Source, case: Case, nominal_V: float) -> Law:
    state = case.sources.get(source.name, SourceState())
    on = float(state.state != "off")
    inf = float("inf")
    if isinstance(source, Battery):
        if linked(source):
            return _IDLE
        return _battery_law(plan, source, case, nominal_V, source.strings)
    if isinstance(source, Solar):
        on = float(array_A(source, case) > 0) if source.array is not None else on
        power = source.power.si * (state.irradiance.si if state.irradiance else 1.0)
        volts = state.volts.si if state.volts else source.ceiling.si
        amps = source.amps.si if source.amps else source.power.si / (KNEE_SHARE * nominal_V)
        return on, volts, DROOP_SHARE * volts / max(amps, 1e-9), 0.0, amps, power, 0.0
    volts = state.volts.si if state.volts else source.volts.si
    amps = state.amps.si if state.amps else source.amps.si
    ohm = source.resistance.si if source.resistance else DROOP_SHARE * volts / amps
    return on, volts, ohm, 0.0, amps, inf, 0.0


_IDLE: Law = (0.0, 1.0, 1.0, 0.0, 0.0, float("inf"), 0.0)


def _battery_law(plan: Plan, battery: Battery, case: Case, nominal_V: float, strings: int) -> Law:
    """`strings` equal strings in parallel. A full battery takes no current: it stands at whatever voltage the
    chargers hold, and helps below its own EMF."""
    state = case.sources.get(battery.name, SourceState())
    full = state.state == "full"
    charge = 1.0 if full else state.charge.si if state.charge else battery.charge.si
    stated = state.emf.si if state.emf else None
    degC = plan.ambient_degC(plan.zone_of_point(battery.at), case)
    model = batteries.model(battery, charge, nominal_V, stated, degC=degC, aged=state.aged)
    inf = float("inf")
    on = float(state.state != "off")
    return on, model.emf_V, model.resistance_ohm / strings, 0.0 if full else -inf, inf, inf, 0.0


def _string_law(plan: Plan, index: int, case: Case, nominal_V: float) -> Law:
    battery = plan.sources[index]
    assert isinstance(battery, Battery)
    return _battery_law(plan, battery, case, nominal_V, 1)


def array_V(source: Source) -> float:
    """Voltage of an array at its greatest power: that of its modules in series."""
    assert isinstance(source, Solar)
    assert source.array is not None
    return source.array.vmp.si * source.array.series


def array_A(source: Source, case: Case) -> float:
    """Current of an array at its greatest power in a case: that of its strings under the case's sun."""
    assert isinstance(source, Solar)
    assert source.array is not None
    state = case.sources.get(source.name, SourceState())
    sun = 0.0 if state.state == "off" else state.irradiance.si if state.irradiance else 1.0
    return sun * source.array.imp.si * source.array.modules / source.array.series


def _array_law(source: Source, case: Case) -> Law:
    """An array held by its controller at the voltage of greatest power, one way.

    Its current needs no limit here: the controller takes no more power than it has (see `Equations.power`).
    """
    bright = Case(name="full sun")
    ohm = DROOP_SHARE * array_V(source) / array_A(source, bright)
    return float(array_A(source, case) > 0), array_V(source), ohm, 0.0, float("inf"), float("inf"), 0.0


def _diode_law(plan: Plan, index: int, bars: dict[str, float]) -> Law:
    device = plan.devices[index]
    drop = device.drop.si if device.drop else DIODE_DROP_V
    ohm = device_ohm(device) + bars.get(device.from_point, 0.0) + bars.get(device.to_point, 0.0)
    return 1.0, -drop, ohm, 0.0, float("inf"), float("inf"), DIODE_LEAK_S


def rated(load: Load, nominal_V: float, *, idling: bool = True) -> tuple[float, float, float]:
    """Constant power W, constant current A and conductance S of a load at its full share, by how it behaves.

    An inverter draws what it delivers over its efficiency, and while `idling` what it draws doing nothing.
    """
    watts = _rated_W(load, nominal_V)
    if idling and load.standby is not None:
        watts += load.standby.si
    return _by_behaviour(load, watts, nominal_V)


def _rated_W(load: Load, nominal_V: float) -> float:
    volts = load.rated_volts.si if load.rated_volts else nominal_V
    if load.power is not None:
        return load.power.si / (load.efficiency.si if load.efficiency else 1.0)
    if load.current is not None:
        return load.current.si * volts
    assert load.resistance is not None
    return volts**2 / load.resistance.si


def _by_behaviour(load: Load, watts: float, nominal_V: float) -> tuple[float, float, float]:
    volts = load.rated_volts.si if load.rated_volts else nominal_V
    behaves = load.behaves or load.rated_as
    return {"power": (watts, 0.0, 0.0), "current": (0.0, watts / volts, 0.0)}.get(behaves, (0.0, 0.0, watts / volts**2))


def _load_law(plan: Plan, load: Load, case: Case, nominal_V: float) -> tuple[float, float, float]:
    """What a load draws in a case: its share of what it is rated at, or of its surge; an inverter idles at share 0."""
    if fed_by_mains(plan, load, case):
        return 0.0, 0.0, 0.0
    share = case.share(load.name)
    idle_W = load.standby.si if load.standby is not None and case.names(load.name) else 0.0
    surge = load.surge if load.name in case.surge else None
    if surge is not None and surge.current is not None:
        return 0.0, share * surge.current.si, 0.0
    if surge is not None and surge.resistance is not None:
        return 0.0, 0.0, share / surge.resistance.si
    times = surge.times if surge is not None and surge.times is not None else 1.0
    return _by_behaviour(load, share * times * _rated_W(load, nominal_V) + idle_W, nominal_V)


def fed_by_mains(plan: Plan, load: Load, case: Case) -> bool:
    """Whether an inverter rests because the charger that is one apparatus with it is at work."""
    if load.inverter_of is None:
        return False
    return case.sources.get(load.inverter_of, SourceState()).state != "off"


__all__ = [
    "Charger", "Islands", "Operating", "array_A", "array_V", "components", "device_closed", "fed_by_mains", "islands",
    "operating", "rated",
]  # fmt: skip
