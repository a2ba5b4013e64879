"""An installation as it might really be built, and what a meter would read in it: not by the solver.

The volts are those of `circuit`, a second account of the plan, by `circuit_volts`, of which a sample is held against
ngspice.

Sound parts differ from the plan evenly within its tolerances, each on its own; a bad joint is a resistance put into
the circuit's own list of elements. A meter is off evenly within ±(0.5 % + 2 digits) of the range it stands at.
"""

import math
import random
from dataclasses import dataclass, replace
from typing import Any

from circuit import CLASS_5_OHM_PER_KM, Circuit, Pin, circuit_of, run_ohm
from circuit_volts import circuit_volts
from farvolt import batteries, conductors, units
from farvolt.network import CONTACT_OHM, DIODE_DROP_V, strand
from farvolt.operating import system_nominal_V
from farvolt.plan import Battery, Case, Device, Plan, ReturnConductor, Run, SourceState
from farvolt.rulebook import Rulebook
from farvolt.temperatures import run_ambient_degC
from spice import Answer, answer, largest_difference_V, no_load

STAND_IN = "10 mm2"
"""A cable of a size that the second account has no table for becomes one of this size, of the same resistance."""

PERCENT, DIGITS = 0.005, 2
RANGES_V = ((0.4, 1e-4), (4.0, 1e-3), (40.0, 1e-2), (400.0, 0.1))
"""A meter of 4,000 counts: end of each range and its last digit."""


@dataclass(frozen=True)
class BadJoint:
    """So many ohms more in one conductor of a run, or in a device."""

    table: str
    name: str
    pole: str
    ohm: float


class Built:
    """One installation. `spread` 0 builds every sound part exactly as planned."""

    def __init__(self, plan: Plan, rulebook: Rulebook, chance: random.Random, spread: float = 1.0) -> None:
        self.chance, self.spread = chance, spread
        self.plan, self.rulebook = plan, rulebook
        self.joints: tuple[BadJoint, ...] = ()
        self._volts: dict[str, dict[int, float] | None] = {}
        case = plan.checked_cases[0]
        self._runs = [self._run(run, case) for run in plan.runs]
        self._devices = [self._device(device) for device in plan.devices]
        self._demand = {load.name: self._even(plan.tolerances.loads.si) for load in plan.loads}
        self._source = {one.name: self._even(plan.tolerances.source_volts.si) for one in plan.sources}
        self._inner = {one.name: self._even(0.25) for one in plan.sources}

    def with_joints(self, *joints: BadJoint) -> "Built":
        """The same installation with other bad joints."""
        other = object.__new__(Built)
        other.__dict__ |= self.__dict__ | {"joints": joints}
        return other

    def _even(self, share: float) -> float:
        return 1 + self.spread * self.chance.uniform(-share, share)

    def _run(self, run: Run, case: Case) -> Run:
        """The run with the cable it has: of another length, at some temperature, with joints of its own."""
        stated = self.plan.tolerances
        coldest = stated.coldest.si if stated.coldest else run_ambient_degC(self.plan, run, case)
        rated = run.insulation.si if run.insulation else self.rulebook.default_insulation_degC
        hottest = stated.hottest.si if stated.hottest else rated
        degC = (coldest + hottest) / 2 + self.spread * self.chance.uniform(-1, 1) * (hottest - coldest) / 2
        hot = 1 + conductors.temperature_coefficient(run.material).value * (degC - 20)
        times = hot * self._even(stated.length.si)
        joints = 1 + self.spread * self.chance.uniform(0, stated.joints - 1)
        changes: dict[str, Any] = {"length": _length(run.length.si * times * self._stand_in(run, run.size))}
        changes["size"] = self._size(run.size)
        changes["joint_resistance"] = _ohm(run.joint_resistance.si * joints)
        if isinstance(run.return_path, ReturnConductor):
            back = run.return_path
            size, length = back.size or run.size, back.length or run.length
            changes["return_path"] = back.model_copy(
                update={"size": self._size(size), "length": _length(length.si * times * self._stand_in(run, size))}
            )
        if run.resistance is not None:
            changes["resistance"] = _ohm(run.resistance.si * hot)
        changes["protection"] = tuple(
            one.model_copy(update={"resistance": _ohm(self._even(0.2) * _protection_ohm(one))})
            for one in run.protections
        )
        changes["protection_to"] = None
        return Run.model_construct(**{**dict(run), **changes})

    _stand_in_size = conductors.parse_size(STAND_IN)

    def _size(self, size: Any) -> Any:
        return size if size.name in CLASS_5_OHM_PER_KM else self._stand_in_size

    def _stand_in(self, run: Run, size: Any) -> float:
        if size.name in CLASS_5_OHM_PER_KM:
            return 1.0
        per_m = conductors.resistance_20_ohm_per_m(size, run.material, strand(run, self.rulebook)).value
        return per_m * 1000 / CLASS_5_OHM_PER_KM[STAND_IN]

    def _device(self, device: Device) -> Device:
        ohm = device.resistance.si if device.resistance else CONTACT_OHM[device.kind]
        drop = device.drop.si if device.drop else DIODE_DROP_V
        changes = {"resistance": _ohm(max(ohm, 1e-6) * self._even(0.2))}
        if device.kind == "diode":
            changes["drop"] = _volt(drop * self._even(0.2))
        return device.model_copy(update=changes)

    # What a meter sees ----------------------------------------------------------------------------------------------

    def _as_built(self, case: Case) -> tuple[Plan, Case]:
        states = dict(case.sources)
        sources = tuple(self._as_is(one, case, states) for one in self.plan.sources)
        loads = {load.name: case.share(load.name) * self._demand[load.name]
                 for load in self.plan.loads if case.names(load.name)}  # fmt: skip
        plan = self.plan.model_copy(
            update={"sources": sources, "runs": tuple(self._runs), "devices": tuple(self._devices)}
        )
        return plan, case.model_copy(update={"loads": loads, "sources": states})

    def _as_is(self, one: Any, case: Case, states: dict[str, SourceState]) -> Any:
        """A source with the voltage and the inner resistance it has in a case, whose own say on these goes."""
        state = case.sources.get(one.name, SourceState())
        if isinstance(one, Battery):
            model = self._battery(one, state, case)
            states[one.name] = state.model_copy(update={"emf": None, "charge": None})
            changes: dict[str, Any] = {"link": self._link(one), "aged_times": 1.0}
            changes["emf"] = _volt(model.emf_V * self._source[one.name])
            changes["resistance"] = _ohm(model.resistance_ohm * self._inner[one.name])
            return one.model_copy(update=changes)
        if one.kind in ("charger", "converter"):
            states[one.name] = state.model_copy(update={"volts": None})
            volts = state.volts or one.volts
            return one.model_copy(update={"volts": _volt(volts.si * self._source[one.name])})
        return one

    def _link(self, one: Battery) -> Any:
        link = one.link
        if link is None or link.size is None:
            return link
        per_m = conductors.resistance_20_ohm_per_m(link.size, "copper", self.rulebook.default_strand).value
        length = _length(link.length.si * per_m * 1000 / CLASS_5_OHM_PER_KM[STAND_IN])
        return link.model_copy(update={"size": self._stand_in_size, "length": length})

    def _battery(self, one: Battery, state: SourceState, case: Case) -> batteries.BatteryModel:
        full = state.state == "full"
        charge = 1.0 if full else state.charge.si if state.charge else one.charge.si
        degC = self.plan.ambient_degC(self.plan.zone_of_point(one.at), case)
        emf = state.emf.si if state.emf else None
        nominal = system_nominal_V(one.nominal.si) if one.nominal else self.plan.plan.nominal.si
        return batteries.model(one, charge, nominal, emf, degC=degC, aged=state.aged)

    def circuit(self, case: Case) -> Circuit:
        """The circuit with its bad joints."""
        plan, state = self._as_built(case)
        found = circuit_of(plan, state)
        for joint in self.joints:
            a, b, ohm = self._place(plan, joint, found)
            at = [index for index, one in enumerate(found.resistors)
                  if (one.a, one.b) == (a, b) and math.isclose(one.ohm, ohm, rel_tol=1e-9)]  # fmt: skip
            if at:
                one = found.resistors[at[0]]
                found.resistors[at[0]] = replace(one, ohm=one.ohm + joint.ohm)
        return found

    def _place(self, plan: Plan, joint: BadJoint, circuit: Circuit) -> tuple[int, int, float]:
        sign = "+" if joint.pole == "feed" else "-"
        bars = {point.name: point.resistance.si / 2 for point in plan.points if point.resistance is not None}
        entry: Any = next(one for one in getattr(plan, joint.table) if one.name == joint.name)
        start: Pin = (entry.from_point, sign)
        ends = bars.get(entry.from_point, 0.0) + bars.get(entry.to_point, 0.0)
        if joint.table == "devices":
            ohm = entry.resistance.si + ends
        elif sign == "-" and entry.return_path == "chassis":
            start, ohm = ("chassis", "-"), plan.plan.chassis_bond.si
        else:
            ohm = run_ohm(entry)[sign] + ends
        return circuit.pins[start], circuit.pins[entry.to_point, sign], ohm

    def volts(self, case: Case) -> dict[int, float] | None:
        """Node volts of the second account; None where there are none, or a load is below its knee."""
        key = f"{self.joints} {case.model_dump_json()}"
        if key not in self._volts:
            circuit = self.circuit(case)
            found = circuit_volts(circuit, no_load(circuit)) if circuit.live else None
            if found is not None and any(found[one.a] - found[one.b] < one.knee for one in circuit.drains
                                         if one.watts or one.amps):  # fmt: skip
                found = None
            self._volts[key] = found
            self._pins = circuit.pins
        return self._volts[key]

    def against_spice_V(self, case: Case) -> float | None:
        """The largest difference of these volts from those of ngspice; None where either has no answer."""
        volts, circuit = self.volts(case), self.circuit(case)
        if volts is None:
            return None
        found: Answer = answer(circuit)
        return largest_difference_V(circuit, volts, found.volts[-1]) if found.complete else None

    def true_V(self, case: Case, start: tuple[str, int], end: tuple[str, int]) -> float | None:
        """The voltage between two nodes."""
        volts = self.volts(case)
        if volts is None:
            return None
        a, b = (self._pins[point, "+-"[pole]] for point, pole in (start, end))
        return volts[a] - volts[b] if a in volts and b in volts else None


def metered(chance: random.Random, true_V: float) -> str:
    """What the display of a meter shows of a voltage, in V."""
    step = next(digit for most, digit in RANGES_V if abs(true_V) < most)
    # Half a digit of the two is the rounding of the display itself.
    shown = true_V + chance.uniform(-1, 1) * (PERCENT * abs(true_V) + (DIGITS - 0.5) * step)
    return f"{round(shown / step) * step:.{round(-math.log10(step))}f}"


def _protection_ohm(one: Any) -> float:
    return float(one.resistance.si if one.resistance is not None else one.kind.resistance_ohm(one.rating.si))


def _volt(value: float) -> units.Quantity:
    return units.parse(f"{value:.12g} V", "voltage")


def _ohm(value: float) -> units.Quantity:
    return units.parse(f"{value:.12g} ohm", "resistance")


def _length(value: float) -> units.Quantity:
    return units.parse(f"{value:.12g} m", "length")
