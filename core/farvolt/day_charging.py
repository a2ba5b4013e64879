"""Chargers and solar controllers over days: what they may give in each step, and at which voltage they charge.

One with a float voltage charges at its own voltage until the banks take no more than their tail current, or are
full; then it falls back, until the banks have given a tenth or it starts anew. Without one it stays at its voltage.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from farvolt import batteries, battery_figures
from farvolt.day_bank import BankUnit
from farvolt.day_course import Course
from farvolt.day_network import Laws, StepNetwork
from farvolt.day_settle import Settled
from farvolt.day_setup import Ready
from farvolt.day_supply import movable
from farvolt.equations import Equations
from farvolt.fed import fed
from farvolt.network import Floats
from farvolt.operating import array_A
from farvolt.plan import Battery, Case, Charger, Solar

FULL = 0.999
"""A bank this full is taken as charged."""

RESTART = 0.9
"""A charger that has fallen back charges again when the bank has given a tenth: common practice, from memory."""

_LIMITED = 0.98
"""A charger that gives this share of what it may is held by its current, not by its voltage."""


@dataclass
class _Stage:
    """A charger with a float voltage: whether it has fallen back to it."""

    source: int
    fall_V: float
    floating: bool = False
    was_on: bool = False


class Charging:
    """All chargers and solar controllers of a plan over a course, piece by piece: a step is cut where a charger starts
    or ends within it. `steps` and `hours` are over pieces, `running` over (piece, source)."""

    def __init__(self, ready: Ready, course: Course, banks: Sequence[BankUnit]) -> None:
        self.banks = banks
        chargers = [index for index, one in enumerate(ready.plan.sources) if isinstance(one, Charger)]
        self.steps, self.hours, on = _pieces(course, chargers)
        self.running = course.sources[self.steps] > 0
        self.running[:, chargers] = on
        self._sources = movable(ready)
        volts = ready.condition.volts[: len(ready.plan.sources)] + _compensation(ready, course)
        self._volts = volts[self.steps][:, self._sources]
        high, power = (one[self.steps] for one in _limits(ready, course))
        high[:, chargers] *= on
        self._high, self._power = high[:, self._sources], power[:, self._sources]
        self._degC = course.bank_degC[self.steps].tolist()
        self._tail_A = sum(one.tail_A for one in banks)
        self._stages = [
            _Stage(index, float(ready.condition.volts[index]) - one.float_volts.si)
            for index, one in enumerate(ready.plan.sources)
            if isinstance(one, Charger | Solar) and one.float_volts is not None
        ]

    def set(self, laws: Laws, piece: int, hours: float) -> None:
        """Put in the laws of a piece: chargers at their voltage, banks with the room that they have."""
        mine = self._sources
        laws.high[mine], laws.power[mine], laws.volts[mine] = self._high[piece], self._power[piece], self._volts[piece]
        for stage in self._stages:
            if stage.floating:
                laws.volts[stage.source] -= stage.fall_V
        for one in self.banks:
            cold = self._degC[piece] < one.least_degC
            laws.low[one.port] = 0.0 if cold else -one.room_A(hours)

    def after(self, laws: Laws, piece: int, network: StepNetwork, settled: Settled) -> None:
        """Chargers that fall back or start anew for the next piece."""
        for stage in self._stages:
            on = bool(self.running[piece, stage.source])
            if on and not stage.was_on:
                stage.floating = False
            elif on:
                self._turn(stage, laws, network, settled)
            stage.was_on = on

    def _turn(self, stage: _Stage, laws: Laws, network: StepNetwork, settled: Settled) -> None:
        charge = min(one.charge for one in self.banks)
        place = network.place.get(stage.source)
        if stage.floating:
            stage.floating = charge > RESTART
        elif place is not None:
            amps, volts = float(settled.delivered[place]), float(settled.u[place])
            most = min(laws.high[stage.source], laws.power[stage.source] / max(volts, 1e-3))
            taken = -sum(one.amps for one in self.banks)
            ended = charge >= FULL or 0 <= taken <= self._tail_A
            stage.floating = ended and amps < _LIMITED * most


def _pieces(course: Course, chargers: Sequence[int]) -> tuple[np.ndarray, Floats, np.ndarray]:
    """Steps cut where a charger starts or ends in them: over pieces, their step and hours, and which chargers run.

    A charger that runs on into the next step does so from within this one; any other runs from its beginning.
    """
    shares = course.sources[:, chargers]
    steps, hours, on = [], [], []
    partial = np.any((shares > 0) & (shares < 1), axis=1)
    goes_on = np.append(shares[1:] > 0, np.zeros((1, len(chargers)), dtype=bool), axis=0)
    came = np.append(np.zeros((1, len(chargers)), dtype=bool), shares[:-1] > 0, axis=0)
    for step in range(len(course)):
        if not partial[step]:
            steps.append(step)
            hours.append(course.hours)
            on.append(shares[step] > 0)
            continue
        late = goes_on[step] & ~came[step]
        start, end = np.where(late, 1 - shares[step], 0.0), np.where(late, 1.0, shares[step])
        edges = np.unique(np.round([0.0, 1.0, *start, *end], 9))
        for one, other in pairwise(edges.tolist()):
            middle = (one + other) / 2
            steps.append(step)
            hours.append(float(other - one) * course.hours)
            on.append((start < middle) & (middle < end))
    return np.array(steps), np.array(hours), np.array(on, dtype=bool).reshape(len(steps), len(chargers))


def _compensation(ready: Ready, course: Course) -> Floats:
    """Over (step, source): by how much the voltage of a temperature-compensated charger is moved."""
    plan = ready.plan
    found = np.zeros((len(course), len(plan.sources)))
    battery = next(one for one in plan.sources if isinstance(one, Battery))
    if battery.chemistry is None:
        return found
    fall = battery_figures.typical(battery.chemistry, "charge_fall").middle
    nominal = battery.nominal.si if battery.nominal else plan.plan.nominal.si
    per_K = fall * batteries.cells(battery.chemistry, nominal)
    for index, one in enumerate(plan.sources):
        if isinstance(one, Charger | Solar) and one.temperature_compensated:
            found[:, index] = -per_K * (course.bank_degC - batteries.REFERENCE_DEGC)
    return found


def _limits(ready: Ready, course: Course) -> tuple[Floats, Floats]:
    """Over (step, source): the greatest current and power of chargers and solar sources."""
    plan, c = ready.plan, ready.condition
    count = len(plan.sources)
    high, power = np.tile(c.high[:count], (len(course), 1)), np.tile(c.power[:count], (len(course), 1))
    for index, one in enumerate(plan.sources):
        if isinstance(one, Charger):
            high[:, index] = (one.hot_amps or one.amps).si
        elif isinstance(one, Solar):
            power[:, index] = course.sources[:, index] * one.power.si
    if c.arrays:
        _array_limits(ready, course, power)
    return high, power


def _array_limits(ready: Ready, course: Course, power: Floats) -> None:
    """Hold controllers to what their arrays give at their input, less what their cables lose, as `equations` does."""
    c = ready.condition
    free = replace(c, power=np.full_like(c.power, np.inf))
    full = Equations(ready.network, free, ready.factor_of_20, fed(ready.network, free)).power
    for port, array, _, _ in c.arrays:
        source = ready.plan.sources[port]
        assert isinstance(source, Solar)
        amps, efficiency = array_A(source, Case(name="full sun")), source.efficiency.si
        ohm = (c.volts[array] - full[port] / (efficiency * amps)) / amps
        given = course.sources[:, port] * amps
        at_input_V = np.maximum(c.volts[array] - given * ohm, 0.0)
        power[:, port] = np.minimum(power[:, port], efficiency * given * at_input_V)
