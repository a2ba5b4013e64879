"""One step of the days solved on the ports of its network, from the step before.

Newton's method with slopes that many steps share: those of the sources on the straight part of their law, and the
loads' about the voltage they stood at. That iteration draws near only to the stable solution (at the other one, with
a load far below its nominal voltage, it grows). What does not settle in a few rounds is tried again with exact
slopes, no source stepping over its straight part; what does not settle then either is for `solve.solve`.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from farvolt import solve
from farvolt.day_bank import BankUnit
from farvolt.day_network import Laws, Matrix, StepNetwork
from farvolt.network import Floats

_ROUNDS = 40
_STEADY = 1.5e-14
"""A step has settled when no port moves by more than this share of the highest voltage."""

_HAIR_V = 1e-9
_NO_LIMIT = float("inf")


@dataclass(slots=True)
class Settled:
    """One step: volts at the working ports (sources first), what they deliver and draw; whether it holds."""

    u: Floats
    delivered: Floats
    drawn: Floats
    solved: bool
    weakest: int | None = None


def settle(
    network: StepNetwork, laws: Laws, banks: Sequence[BankUnit], degC: float, hours: float, demand: object,
    start: Floats | None,
) -> Settled:  # fmt: skip
    """Solve one step. The voltages of the banks' `laws` are filled in here. `demand` is a name for what the loads ask
    for: steps of one name share matrices. `start` is the voltages of the step before, NaN where it had none."""
    return _Step(network, laws, banks, degC, hours, demand).settle(start)


@dataclass(slots=True)
class _BankLaw:
    """A bank in one step: its law has the resistance that matrices are made for, and the voltage that makes it exact
    at the current found last."""

    unit: BankUnit
    place: int
    ohm: float
    real_ohm: float
    hours: float
    amps: float = 0.0

    def emf(self) -> float:
        """The voltage of the law."""
        one = self.unit
        return one.mean_emf(one.change(self.amps, self.hours)) + (self.ohm - self.real_ohm) * self.amps

    def towards(self, found_A: float, toward_ohm: float) -> None:
        """Newton's step for the current: the law gave `found_A` with the voltage of the current assumed."""
        per_V = (1 - toward_ohm / self.ohm) / self.ohm
        share = (self.ohm - self.real_ohm - self.unit.fall_ohm(self.amps, self.hours)) * per_V
        self.amps += (found_A - self.amps) / max(1.0 - share, 0.05)


class _Step:
    """A step at work. Sources are few: their laws are plain numbers, those of the loads arrays."""

    def __init__(
        self, network: StepNetwork, laws: Laws, banks: Sequence[BankUnit], degC: float, hours: float, demand: object
    ) -> None:
        on = network.on
        self.network, self.laws, self.demand = network, laws, demand
        self.volts: list[float] = laws.volts[on].tolist()
        self.per_ohm: list[float] = (1 / laws.ohm[on]).tolist()
        self.low: list[float] = laws.low[on].tolist()
        self.high: list[float] = laws.high[on].tolist()
        self.power: list[float] = laws.power[on].tolist()
        self.watts, self.amps, self.siemens = laws.watts, laws.amps, laws.siemens
        if not network.every_load:
            load_on = network.load_on
            self.watts, self.amps, self.siemens = self.watts[load_on], self.amps[load_on], self.siemens[load_on]
        if network.converters:
            self.watts = self.watts.copy()
        self.banks = [
            _BankLaw(one, network.place[one.port], float(laws.ohm[one.port]), one.resistance(one.charge, degC), hours)
            for one in banks
            if one.port in network.place
        ]

    def settle(self, start: Floats | None) -> Settled:
        """The step, by rounds, else by `solve.solve`."""
        split = self.network.split
        for exact, u in self._starts(start):
            for law in self.banks:
                law.amps = law.unit.amps
                self.volts[law.place] = law.emf()
            found = self._rounds(u, exact=exact)
            if found is not None and not self._below_knee(found[split:]):
                self.laws.volts[self.network.on] = self.volts
                delivered, _ = self._currents(found[:split].tolist(), None)
                self._follow(found, delivered)
                net = np.array(delivered) - self.network.leak * found[:split]
                load_u = found[split:]
                return Settled(found, net, self.watts / load_u + self.amps + self.siemens * load_u, True)
        self.laws.volts[self.network.on] = self.volts
        return self._alone()

    def _below_knee(self, u: Floats) -> bool:
        """Whether a constant-power or constant-current load stands below its knee."""
        low = u < self.network.knee
        return bool(low.any()) and bool(np.any((low & (self.watts + self.amps > 0)) | (u <= 0)))

    def _starts(self, start: Floats | None) -> Iterator[tuple[bool, Floats]]:
        """Where to iterate from, and whether with exact slopes: the step before, the banks at rest, the highest
        voltage set. Full banks and a sun that just falls short of the loads lie far apart in voltage, near in time."""
        network = self.network
        if start is not None:
            yield False, np.where(np.isnan(start), self._highest(), start) if np.isnan(start).any() else start
        highest = self._highest()
        share = np.ones(int(network.part.max(initial=0)) + 1)
        for law in self.banks:
            share[network.part[law.place]] = law.unit.emf(law.unit.charge) / highest[law.place]
        yield start is not None, highest * share[network.part]
        yield True, highest
        yield True, highest * share[network.part]

    def _highest(self) -> Floats:
        return self.network.highest(np.array(self.volts))

    # Rounds -----------------------------------------------------------------------------------------------

    def _currents(self, us: list[float], before: list[int] | None) -> tuple[list[float], list[int]]:
        """What the sources deliver, and where each is: 0 on its straight part, 1 at its upper end, -1 at its lower.

        A source that leapt from one end to the other lies between them: it is taken as straight there.
        """
        delivered, sides = [], []
        volts, per_ohm, low, high, power = self.volts, self.per_ohm, self.low, self.high, self.power
        for k, u in enumerate(us):
            amps, most = (volts[k] - u) * per_ohm[k], high[k]
            if power[k] != _NO_LIMIT:
                most = min(most, power[k] / max(u, self.network.floor[k]))
            side = 1 if amps > most else -1 if amps < low[k] else 0
            if side and (before is None or before[k] != -side):
                amps = most if side > 0 else low[k]
            else:
                side = 0
            delivered.append(amps)
            sides.append(side)
        return delivered, sides

    def _follow(self, u: Floats, delivered: list[float]) -> None:
        """A converter's input follows its output."""
        for source, load, efficiency, standby in self.network.converters:
            self.watts[load] = u[source] * delivered[source] / efficiency + standby

    def _rounds(self, u: Floats, *, exact: bool) -> Floats | None:
        """Iterate from `u`: the voltages at the ports, or None where they do not settle. Slopes are those that steps
        share, or worked out anew in each round (`exact`): that is slower and settles nearer to an end of a law."""
        split = self.network.split
        tolerance = _STEADY * max(1.0, *self.volts)
        moved, sides = np.inf, None
        for _ in range(_ROUNDS):
            us = u[:split].tolist()
            delivered, sides = self._currents(us, sides)
            self._follow(u, delivered)
            held = self._all_held(sides)
            own = held or exact
            matrix = self._own_matrix(u, us, delivered, sides, held) if own else self._shared_matrix(u, sides)
            x = np.empty_like(u)
            x[:split] = [slope * v + amps for slope, v, amps in zip(matrix.source_S, us, delivered, strict=True)]
            load_u = u[split:]
            x[split:] = matrix.pull_S * load_u + self.watts / load_u + self.amps
            after = matrix.toward @ x
            length = self._length(us, delivered, sides, after) if own else 1.0
            if length < 1.0:
                after = u + length * (after - u)
            brought = self._with_banks(after, delivered, sides, matrix)
            # With one bank what it brings along is exact at once; several settle among themselves.
            before, moved = moved, float(np.abs((after if len(self.banks) < 2 else brought) - u).max())
            u = brought
            if length < 1.0:
                moved = np.inf
            elif moved <= tolerance or (before < np.inf and moved * min(moved / before, 1.0) <= tolerance):
                return u
            elif not moved < 1e6:
                return None
        return u if moved <= 20 * tolerance else None

    def _with_banks(self, u: Floats, delivered: list[float], sides: list[int], matrix: Matrix) -> Floats:
        """Bring the banks' EMF to the current found, and the voltages along: what they make of it is known already."""
        for law in self.banks:
            k = law.place
            if sides[k] == 0:
                law.towards((self.volts[k] - float(u[k])) / law.ohm, float(matrix.toward[k, k]))
            else:
                law.amps = delivered[k]
            emf = law.emf()
            if sides[k] == 0:
                u = u + matrix.toward[:, k] * ((emf - self.volts[k]) / law.ohm)
            self.volts[k] = emf
        return u

    def _shared_matrix(self, u: Floats, sides: list[int]) -> Matrix:
        """The matrix of steps that ask for the same, with the same sources straight."""
        pattern = 0
        for side in sides:
            pattern = 2 * pattern + (side == 0)
        key = pattern, self.demand
        found = self.network.matrices.get(key)
        if found is None:
            slopes = [0.0 if side else slope for side, slope in zip(sides, self.per_ohm, strict=True)]
            load_u = u[self.network.split :]
            found = self.network.matrices[key] = self.network.matrix(slopes, load_u, self.watts, self.siemens)
        return found

    # Near the ends of laws --------------------------------------------------------------------------------

    def _all_held(self, sides: list[int]) -> bool:
        """Whether a part has all of its sources at an end of their law: then nothing holds its voltage."""
        if self.network.parts == 1:
            return 0 not in sides
        parts = zip(self.network.source_part, sides, strict=True)
        return len({part for part, side in parts if side == 0}) < self.network.parts

    def _own_matrix(self, u: Floats, us: list[float], delivered: list[float], sides: list[int], held: bool) -> Matrix:
        """The matrix of this round alone; frees a source first where a part is `held` by none."""
        slopes = []
        for k, side in enumerate(sides):
            by_power = side > 0 and delivered[k] < self.high[k]
            slopes.append(self.per_ohm[k] if side == 0 else delivered[k] / us[k] if by_power else 0.0)
        load_u = u[self.network.split :]
        if held:
            self._free(load_u, delivered, sides, slopes, us)
        return self.network.matrix(slopes, load_u, self.watts, self.siemens)

    def _free(
        self, load_u: Floats, delivered: list[float], sides: list[int], slopes: list[float], us: list[float]
    ) -> None:
        """Let a source take over in each part that none holds.

        A source held by its power gives less at more volts: where those outweigh the loads, that holds the voltage.
        Else the source that comes to its straight part first takes over: upwards, to where a charger holds it, where
        more comes in than is drawn, else downwards, to where a bank gives way.
        """
        network = self.network
        drawn = self.watts / load_u + self.amps + self.siemens * load_u
        load_S = self.siemens - self.watts / load_u**2
        for part in range(network.parts):
            mine = [k for k, own in enumerate(network.source_part) if own == part]
            ours = network.load_part == part
            if any(sides[k] == 0 for k in mine) or sum(slopes[k] for k in mine) + float(load_S[ours].sum()) > 0:
                continue
            surplus = sum(delivered[k] for k in mine) - float(drawn[ours].sum())
            side = 1 if surplus > 0 else -1
            free = [k for k in mine if sides[k] == side]
            if free:
                first = min(free, key=lambda k: side * self._knee_V(k, delivered[k]))
                delivered[first] = (self.volts[first] - us[first]) * self.per_ohm[first]
                slopes[first], sides[first] = self.per_ohm[first], 0

    def _knee_V(self, k: int, amps: float) -> float:
        """The voltage at which a source that is held comes to its straight part."""
        return self.volts[k] - amps / self.per_ohm[k]

    def _length(self, us: list[float], delivered: list[float], sides: list[int], after: Floats) -> float:
        """The longest part of a step in which no source that is held passes right through its straight part."""
        length = 1.0
        for k, side in enumerate(sides):
            change = float(after[k]) - us[k]
            ahead = self._knee_V(k, delivered[k]) - us[k]
            if side and ahead * change > 0 and abs(change) > abs(ahead) + _HAIR_V:
                length = min(length, (abs(ahead) + _HAIR_V) / abs(change))
        return length

    # By the solver ----------------------------------------------------------------------------------------

    def _alone(self) -> Settled:
        """The step by `solve.solve`; if it gives way, again with banks that take nothing: a full bank then counts as
        a source that joins in, as the solver knows it."""
        found = self._by_solver()
        if not found.solved and self.banks:
            for law in self.banks:
                self.laws.low[law.unit.port] = 0.0
            found = self._by_solver()
        return found

    def _by_solver(self) -> Settled:
        """The step by `solve.solve`, again until the banks' EMF is that of their current."""
        laws, network, found = self.laws, self.network, None
        for law in self.banks:
            law.amps = 0.0
        for _ in range(_ROUNDS):
            for law in self.banks:
                laws.volts[law.unit.port] = law.emf()
            condition = replace(
                network.condition, volts=laws.volts, ohm=laws.ohm, low=laws.low, high=laws.high, power=laws.power,
                load_W=laws.watts, load_A=laws.amps, load_S=laws.siemens,
            )  # fmt: skip
            found = solve.solve(network.network, condition, network.factor_of_20, network.supply)
            now = [float(found.delivered_A[law.unit.port]) for law in self.banks]
            change = max((abs(amps - law.amps) for amps, law in zip(now, self.banks, strict=True)), default=0.0)
            if not found.solved or change <= 1e-12 * max(1.0, *map(abs, now)):
                break
            for amps, law in zip(now, self.banks, strict=True):
                law.amps = amps
        assert found is not None
        volts = np.nan_to_num(found.volts)
        u = volts[network.ports.a] - volts[network.ports.b]
        return Settled(u, found.delivered_A[network.on], found.drawn_A[network.load_on], found.solved, found.weakest)
