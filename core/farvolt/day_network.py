"""The network reduced to its ports, solved step after step: each step starts from the one before.

The conductors are factorised once for each set of working sources (`ports`). A step is settled by Newton's method
with slopes that many steps share: those of the sources on the straight part of their law, and the loads' at nominal
voltage. That iteration draws near only to the stable solution (at the other one, with a load far below its nominal
voltage, it grows). What does not settle in a few rounds, or lies below a knee, is for `solve.solve`.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from farvolt import solve
from farvolt.day_bank import BankUnit
from farvolt.equations import IMBALANCE_A
from farvolt.fed import Fed, fed, first_diode
from farvolt.network import Floats, Network
from farvolt.operating import KNEE_SHARE, Operating
from farvolt.ports import Ports

_ROUNDS = 40
_STEADY = 5e-14
_LEAST_V = 1e-9

@dataclass
class Laws:
    """The laws of one step, over all source ports and all load ports of the plan."""

    volts: Floats
    ohm: Floats
    low: Floats
    high: Floats
    power: Floats
    watts: Floats
    amps: Floats
    siemens: Floats


@dataclass(frozen=True)
class _Matrix:
    keep: Floats
    """Slope of every port: a source's current falls, a load's rises so fast with its voltage."""
    toward: Floats
    """Voltages at the ports by what each puts in beside its slope."""


@dataclass
class Settled:
    """One step: volts at the working ports (sources first), what they deliver and draw; whether it holds."""

    u: Floats
    delivered: Floats
    drawn: Floats
    solved: bool
    weakest: int | None = None


class StepNetwork:
    """The network of a set of working sources."""

    def __init__(self, network: Network, condition: Operating, factor_of_20: Floats, supply: Fed | None = None) -> None:
        self.network, self.condition, self.factor_of_20 = network, condition, factor_of_20
        self.supply = supply or fed(network, condition)
        self.ports = Ports(network, condition, factor_of_20, self.supply, {})
        e = self.ports.equations
        self.on, self.load_on = e.sources, e.loads
        self.split = len(self.on)
        self.every_load = len(self.load_on) == len(condition.load_a)
        self.leak = condition.leak[self.on]
        self.floor = KNEE_SHARE * condition.nominal[self.on]
        self.knee = condition.knee[self.load_on]
        self.nominal = np.append(condition.nominal[self.on], self.knee / KNEE_SHARE)
        self.held = self.ports.held_S
        at = {int(port): place for place, port in enumerate(self.on)}
        into = {int(port): place for place, port in enumerate(self.load_on)}
        self.place = at
        self.converters = [(at[s], into[c], share, idle) for s, c, share, idle in e.converters]
        self._matrices: dict[tuple[bytes, object], _Matrix] = {}

    def load_volts(self, u: Floats, loads: int) -> Floats:
        """Volts at the plan's loads; 0 where one is not fed."""
        found = np.zeros(len(self.condition.load_a))
        found[self.load_on] = u[self.split :]
        return found[:loads]

    def settle(
        self, laws: Laws, banks: Sequence[BankUnit], degC: float, hours: float, demand: object, start: Floats | None
    ) -> Settled:
        """Solve one step. `laws` of the banks' ports are filled in here; `demand` is a name for what the loads ask
        for (steps of one name share matrices), `start` the voltages of the step before, if it had the same ports."""
        on, split = self.on, self.split
        mine = [_BankLaw(one, self.place[one.port], one.resistance(one.charge, degC)) for one in banks
                if one.port in self.place]  # fmt: skip
        for law in mine:
            law.ohm, law.amps = float(laws.ohm[law.unit.port]), law.unit.amps
        volts, low, high, power = laws.volts[on], laws.low[on], laws.high[on], laws.power[on]
        per_ohm = 1 / laws.ohm[on]
        watts, amps, siemens = laws.watts, laws.amps, laws.siemens
        if not self.every_load:
            watts, amps, siemens = watts[self.load_on], amps[self.load_on], siemens[self.load_on]
        watts = watts.copy() if self.converters else watts
        u = self.nominal if start is None else start
        for law in mine:
            law.emf(volts, hours)
        steady = self._rounds(mine, u, hours, demand, (volts, per_ohm, low, high, power), (watts, amps, siemens))
        laws.volts[on] = volts
        if steady is None or bool(np.any((steady[split:] < self.knee) & (watts + amps > 0))):
            return self._alone(laws, mine, hours)
        us = steady[:split]
        most = np.minimum(high, power / np.maximum(us, self.floor))
        delivered = np.minimum(np.maximum((volts - us) * per_ohm, low), most)
        drawn = self._drawn(steady, delivered, watts, amps, siemens)
        return Settled(steady, delivered - self.leak * us, drawn, True)

    def _rounds(
        self, mine: Sequence["_BankLaw"], u: Floats, hours: float, demand: object,
        sources: tuple[Floats, ...], loads: tuple[Floats, Floats, Floats],
    ) -> Floats | None:  # fmt: skip
        """Iterate from `u`: the voltages at the ports, or None where they do not settle."""
        volts, per_ohm, low, high, power = sources
        split, leaks = self.split, bool(self.leak.any())
        tolerance = _STEADY * float(volts.max(initial=1.0))
        pattern, matrix, moved = b"", None, np.inf
        beyond = np.zeros(split)
        for count in range(_ROUNDS):
            us = u[:split]
            raw = (volts - us) * per_ohm
            delivered = np.minimum(np.maximum(raw, low), np.minimum(high, power / np.maximum(us, self.floor)))
            if count:
                # A source that leapt from one end of its law to the other lies between them: it is straight there.
                last, beyond = beyond, raw - delivered
                leapt = last * beyond < 0
                if leapt.any():
                    delivered = np.where(leapt, raw, delivered)
                    beyond = np.where(leapt, 0.0, beyond)
            straight = delivered == raw
            if matrix is None or straight.tobytes() != pattern:
                pattern = straight.tobytes()
                matrix = self._matrices.get((pattern, demand))
                if matrix is None:
                    matrix = self._matrices[pattern, demand] = self._matrix(straight, per_ohm, u[split:], loads)
            x = matrix.keep * u
            x[:split] += delivered - self.leak * us if leaks else delivered
            x[split:] -= self._drawn(u, delivered, *loads)
            after = matrix.toward @ x
            before, moved = moved, float(np.abs(after - u).max(initial=0.0))
            u = after
            for law in mine:
                if straight[law.place]:
                    law.towards(float((volts[law.place] - u[law.place]) / law.ohm), matrix.toward, hours)
                    # What the other voltages make of the bank's new one is known already.
                    u = u + matrix.toward[:, law.place] * (law.emf(volts, hours) / law.ohm)
                else:
                    law.amps = float(delivered[law.place])
                    law.emf(volts, hours)
            # Steps shrink by a steady factor: what is left to go is at most the next one.
            if moved <= tolerance or (before < np.inf and moved * min(moved / before, 1.0) <= tolerance):
                return u if np.isfinite(moved) else None
            if not moved < 1e6:
                return None
        return u if moved <= 20 * tolerance else None

    def _drawn(self, u: Floats, delivered: Floats, watts: Floats, amps: Floats, siemens: Floats) -> Floats:
        """What the loads draw; a converter's input follows its output."""
        load_u = u[self.split :]
        for source, load, efficiency, standby in self.converters:
            watts[load] = u[source] * delivered[source] / efficiency + standby
        return np.asarray(watts / np.maximum(load_u, _LEAST_V) + amps + siemens * load_u)

    def _matrix(self, straight: np.ndarray, per_ohm: Floats, u: Floats, loads: tuple[Floats, ...]) -> _Matrix:
        """Slopes of the sources that are on the straight part of their law, and of the loads about where they stand."""
        watts, _, siemens = loads
        load_S = siemens - watts / np.maximum(u, self.knee) ** 2
        keep = np.append(np.where(straight, per_ohm, 0.0) + self.leak, load_S)
        system = np.eye(len(keep)) - self.ports.impedance * (self.held - keep)
        try:
            return _Matrix(keep, np.linalg.solve(system, self.ports.impedance))
        except np.linalg.LinAlgError:
            return _Matrix(keep, np.full_like(system, np.nan))

    def _alone(self, laws: Laws, mine: Sequence["_BankLaw"], hours: float) -> Settled:
        """The step by `solve.solve`, again until the banks' EMF is that of their current."""
        found = None
        for law in mine:
            law.amps = 0.0
        for _ in range(30):
            volts = laws.volts[self.on]
            for law in mine:
                law.emf(volts, hours)
            laws.volts[self.on] = volts
            condition = replace(
                self.condition, volts=laws.volts, ohm=laws.ohm, low=laws.low, high=laws.high, power=laws.power,
                load_W=laws.watts, load_A=laws.amps, load_S=laws.siemens,
            )  # fmt: skip
            found = solve.solve(self.network, condition, self.factor_of_20, self.supply)
            now = [float(found.delivered_A[law.unit.port]) for law in mine]
            change = max((abs(amps - law.amps) for amps, law in zip(now, mine, strict=True)), default=0.0)
            if not found.solved or change <= 1e-12 * max(1.0, *map(abs, now)):
                break
            for amps, law in zip(now, mine, strict=True):
                law.amps = amps
        assert found is not None
        volts = np.nan_to_num(found.volts)
        u = volts[self.ports.a] - volts[self.ports.b]
        return Settled(u, found.delivered_A[self.on], found.drawn_A[self.load_on], found.solved, found.weakest)


@dataclass
class _BankLaw:
    """A bank in one step: its law has the resistance of its bin's matrix, and the voltage that makes it exact at the
    current found last."""

    unit: BankUnit
    place: int
    real_ohm: float
    ohm: float = 1.0
    amps: float = 0.0

    def emf(self, volts: Floats, hours: float) -> float:
        """Put in the voltage; returns by how much it rose."""
        one = self.unit
        wanted = one.mean_emf(one.change(self.amps, hours)) + (self.ohm - self.real_ohm) * self.amps
        rise = float(wanted - volts[self.place])
        volts[self.place] = wanted
        return rise

    def towards(self, found_A: float, toward: Floats, hours: float) -> None:
        """Newton's step for the current: the law gave `found_A` with the voltage of the current assumed."""
        per_V = (1 - toward[self.place, self.place] / self.ohm) / self.ohm
        share = (self.ohm - self.real_ohm - self.unit.fall_ohm(self.amps, hours)) * per_V
        self.amps += (found_A - self.amps) / max(1.0 - float(share), 0.05)


@dataclass(frozen=True)
class Certificate:
    """Steps of one network held to Kirchhoff's laws on all of its nodes, over steps."""

    lost_W: Floats
    """In conductors, protection, devices and diodes."""
    imbalance_A: Floats
    holds: np.ndarray


def certificate(step: StepNetwork, u: Floats, delivered: Floats, drawn: Floats) -> Certificate:
    """Node voltages, currents and losses of settled steps, (port, step), recomputed on the full network."""
    ports, e, live = step.ports, step.ports.equations, step.supply.live
    inward = step.held[:, None] * u
    inward[: step.split] += delivered
    inward[step.split :] -= drawn
    volts = ports.spread @ inward
    along = volts[e.a] - volts[e.b]
    flow = e.siemens[:, None] * along
    out = np.zeros((step.network.node_count, u.shape[1]))
    for nodes, amps, sign in (
        (e.a, flow, 1.0), (e.b, flow, -1.0),
        (ports.a[: step.split], delivered, -1.0), (ports.b[: step.split], delivered, 1.0),
        (ports.a[step.split :], drawn, 1.0), (ports.b[step.split :], drawn, -1.0),
    ):  # fmt: skip
        np.add.at(out, nodes, sign * amps)
    imbalance = np.abs(out[live])
    highest = np.abs(volts).max(axis=0, initial=0.0)
    allowed = np.maximum(IMBALANCE_A, e.scale[live, None] * highest)
    across = volts[ports.a] - volts[ports.b]
    # The currents are those of the laws at the ports' voltages: these must be the network's.
    consistent = np.abs(across - u).max(axis=0, initial=0.0) <= 1e-10 * np.maximum(1.0, highest)
    diodes = e.sources >= first_diode(step.network)
    lost = (along * flow).sum(axis=0) - (u[: step.split] * delivered)[diodes].sum(axis=0)
    return Certificate(lost, imbalance.max(axis=0, initial=0.0), consistent & np.all(imbalance <= allowed, axis=0))
