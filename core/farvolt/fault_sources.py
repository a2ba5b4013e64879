"""What each source gives into a fault: at the most it could be, and at the least.

Most: a new battery, full and warm, none that takes current from the fault; a limited source at its limit. Least: an
aged battery, cold and at low charge. A battery's electronics that open are no protection and are left out of account.
Motors that run back into a fault are not counted, nor what a capacitor gives in the first instant.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from farvolt import batteries
from farvolt.network import DIODE_DROP_V, LEAST_OHM, Network, device_ohm, linked
from farvolt.operating import DROOP_SHARE, KNEE_SHARE, Islands
from farvolt.plan import Battery, Case, Charger, Converter, Plan, Solar, SourceState
from farvolt.shorts import Ports
from farvolt.standard_cases import low_charge
from farvolt.units import number

LEAST_A = 1e-9
"""A source that is stated to give nothing has the droop of one that gives this."""

End = Literal["highest", "lowest"]

ARRAY_TIMES = 1.25
"""Short-circuit current of an array in bright sun over that of its data sheet (NEC 690.8(A))."""

COLDEST_DEGC = 20.0
"""Conductors are never taken warmer than this for the highest fault current."""


@dataclass(frozen=True, slots=True)
class FaultSource:
    """One port that feeds a fault: it delivers clip((volts − u)/ohm, 0 or without limit, limit_A)."""

    source: int
    """Index in the plan's sources; -1 for a diode."""
    name: str
    a: int
    b: int
    volts: float
    ohm: float
    limit_A: float
    one_way: bool
    estimated: bool
    """A battery whose resistance comes from a table of typical values."""
    text: str


def fault_sources(network: Network, islands: Islands, end: End) -> list[FaultSource]:
    """All that can feed a fault, each at its most or at its least; diodes last."""
    plan = network.plan
    found: list[FaultSource] = []
    for index, source in enumerate(plan.sources):
        a, b = network.feed(source.at), network.ret(source.at)
        if isinstance(source, Battery):
            found += _battery(network, index, source, islands.nominal(a), end)
        else:
            volts, ohm, amps = _limited(plan, source, islands.nominal(a), end)
            text = f'"{source.name}" limits itself to {number(amps, 4)} A'
            found.append(FaultSource(index, source.name, a, b, volts, ohm, amps, True, False, text))
    return found + list(_arrays(network)) + list(_diodes(network, end))


def ports(sources: Sequence[FaultSource]) -> Ports:
    """The same as arrays for the solution."""
    return Ports(
        a=np.array([one.a for one in sources], dtype=np.int64),
        b=np.array([one.b for one in sources], dtype=np.int64),
        volts=np.array([one.volts for one in sources], dtype=float),
        ohm=np.array([one.ohm for one in sources], dtype=float),
        low=np.array([0.0 if one.one_way else -np.inf for one in sources], dtype=float),
        high=np.array([one.limit_A for one in sources], dtype=float),
        alive=np.array([one.source >= 0 for one in sources], dtype=bool),
    )


def coldest_degC(plan: Plan) -> float:
    """The coldest conductor: the least ambient of any zone or case, and never above 20 °C."""
    stated = [one for one in (plan.plan.coldest, plan.tolerances.coldest) if one is not None]
    stated += [zone.ambient for zone in plan.zones.values()]
    stated += [case.ambient for case in plan.checked_cases if case.ambient is not None]
    return min(COLDEST_DEGC, plan.plan.ambient.si, *(one.si for one in stated))


def _states(plan: Plan, name: str) -> list[SourceState]:
    found = [case.sources.get(name) for case in plan.checked_cases]
    return [one for one in found if one is not None]


def _battery(network: Network, index: int, battery: Battery, nominal_V: float, end: End) -> Iterator[FaultSource]:
    plan = network.plan
    string = _most(plan, battery, nominal_V) if end == "highest" else _least(plan, battery, nominal_V)
    places = [(a, b) for source, a, b in network.strings if source == index]
    count = 1 if linked(battery) else battery.strings
    ohm = string.resistance_ohm / count
    each = f" ({count} strings)" if count > 1 else " (each string)" if linked(battery) else ""
    aged = f", {number(string.times)} times for cold, age and low charge" if string.times != 1 else ""
    text = (
        f'"{battery.name}"{each}: {number(string.emf_V, 4)} V ({string.emf_source}) behind '
        f"{number(1000 * ohm, 4)} mohm ({string.resistance_source}{aged})"
    )
    for a, b in places or [(network.feed(battery.at), network.ret(battery.at))]:
        estimated = string.resistance_is_estimated
        yield FaultSource(
            index, battery.name, a, b, string.emf_V, ohm, float("inf"), end == "highest", estimated, text
        )  # fmt: skip


def _ambients(plan: Plan, battery: Battery) -> list[float]:
    zone = plan.zone_of_point(battery.at)
    cases: tuple[Case | None, ...] = (None, *plan.checked_cases)
    return [plan.ambient_degC(zone, case) for case in cases]


def _most(plan: Plan, battery: Battery, nominal_V: float) -> batteries.BatteryModel:
    """New, full and warm; the maker's short-circuit current goes before a stated resistance."""
    warm = max(batteries.REFERENCE_DEGC, *_ambients(plan, battery))
    stated = [state.emf.si for state in _states(plan, battery.name) if state.emf is not None]
    full = batteries.model(battery, 1.0, nominal_V, degC=warm)
    emf_V = max(full.emf_V, *stated) if stated else full.emf_V
    if battery.short_circuit is None:
        return batteries.BatteryModel(emf_V, full.resistance_ohm, full.emf_source, full.resistance_source)
    ohm, source = emf_V / battery.short_circuit.si, f"EMF over the maker's {battery.short_circuit}"
    return batteries.BatteryModel(emf_V, ohm, full.emf_source, source)


def _least(plan: Plan, battery: Battery, nominal_V: float) -> batteries.BatteryModel:
    """Aged, cold and at low charge, or what a case states below that."""
    cold = min(_ambients(plan, battery))
    low = low_charge(battery)
    charges = [low.si if low is not None else battery.charge.si]
    charges += [state.charge.si for state in _states(plan, battery.name) if state.charge is not None]
    least = batteries.model(battery, min(charges), nominal_V, degC=cold, aged=True, rises_at_low_charge=True)
    stated = [state.emf.si for state in _states(plan, battery.name) if state.emf is not None]
    emf_V, ohm = min([least.emf_V, *stated]), least.resistance_ohm
    if battery.resistance is None and battery.short_circuit is not None:
        # The maker's figure is that of a full battery: a low EMF over it would make the resistance too small.
        ohm = _most(plan, battery, nominal_V).resistance_ohm * least.times
    return batteries.BatteryModel(emf_V, ohm, least.emf_source, least.resistance_source, least.times)


def _limited(plan: Plan, source: Charger | Solar | Converter, nominal_V: float, end: End) -> tuple[float, float, float]:
    """Voltage, droop and limit of a source that limits itself, at the most or the least that any case sets."""
    pick = max if end == "highest" else min
    states = _states(plan, source.name)
    own_V = source.ceiling.si if isinstance(source, Solar) else source.volts.si
    volts = pick([own_V, *(state.volts.si for state in states if state.volts is not None)])
    own_A = _controller_A(source, nominal_V, end) if isinstance(source, Solar) else source.amps.si
    amps = pick([own_A, *(state.amps.si for state in states if state.amps is not None)])
    stated = None if isinstance(source, Solar) else source.resistance
    return volts, max(stated.si if stated else DROOP_SHARE * volts / max(amps, LEAST_A), LEAST_OHM), amps


def _controller_A(source: Solar, nominal_V: float, end: End) -> float:
    """Output limit of a controller; at the most also what its array gives straight through it."""
    own = source.amps.si if source.amps else None
    if end == "highest" and source.array is not None:
        return max(own or 0.0, _array_A(source))
    return own if own is not None else source.power.si / (KNEE_SHARE * nominal_V)


def _array_A(source: Solar) -> float:
    assert source.array is not None
    return ARRAY_TIMES * source.array.isc.si * source.array.modules / source.array.series


def _arrays(network: Network) -> Iterator[FaultSource]:
    """Solar arrays that the plan places, as the fault of their own cables sees them."""
    for index, a, b in network.arrays:
        source = network.plan.sources[index]
        assert isinstance(source, Solar)
        assert source.array is not None
        volts, amps = source.array.voc.si * source.array.series, _array_A(source)
        text = f'the array of "{source.name}" gives {number(ARRAY_TIMES)} x its Isc, {number(amps, 4)} A'
        yield FaultSource(
            index, f"array of {source.name}", a, b, volts, DROOP_SHARE * volts / amps, amps, True, False, text
        )


def _diodes(network: Network, end: End) -> Iterator[FaultSource]:
    """Diodes conduct one way; for the highest current without the drop and contact that the plan does not state."""
    for index, start, stop in network.diodes:
        device = network.plan.devices[index]
        unstated_V = 0.0 if end == "highest" else DIODE_DROP_V
        drop = device.drop.si if device.drop else unstated_V
        ohm = LEAST_OHM if end == "highest" and device.resistance is None else device_ohm(device)
        yield FaultSource(-1, device.name, stop, start, -drop, ohm, float("inf"), True, False, "")
