"""The days, simulated: hours or minutes one after another, each solved on the plan's own network.

Quasi-static: within a step, loads and sources stand still. What is carried from step to step: the charge of every
bank, which loads have cut out, which banks are empty, and at which voltage each charger charges.

- A load that stands below its cut-out lets go at once (the one farthest below first); it comes back with the step
  after one in which its terminals stood above its recovery. Without a recovery voltage it stays off.
- An empty bank feeds nothing until it holds a twentieth again, and what only it would feed waits.
- A charger charges at its voltage until the bank takes no more than its tail current; then it falls back to its float
  voltage, where it states one, until the bank has given a tenth or the charger starts anew.
- Below the least temperature for charging, a bank takes nothing.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from farvolt import day_setup
from farvolt.day_bank import EMPTY, BankPart, BankUnit
from farvolt.day_charging import Charging
from farvolt.day_course import Course
from farvolt.day_network import StepNetwork
from farvolt.day_record import Record, Sums
from farvolt.day_settle import Settled, settle
from farvolt.day_setup import Ready, Start
from farvolt.day_supply import Supply
from farvolt.network import Floats

_REST = 1e-9
"""What is left of a step when less than this share of it is, is nothing."""

_TIMES = 8
_TELL = 256

Progress = Callable[[float], None]
"""Told the share of the work that is done, 0..1."""


@dataclass(frozen=True)
class Outcome:
    """What happened, for `day_results` to sum up."""

    ready: Ready
    course: Course
    banks: tuple[BankUnit, ...]
    first_charge: tuple[float, ...]
    sums: Sums
    off: np.ndarray
    """(step, load): share of the step in which a load that was asked for was off."""
    times_off: np.ndarray
    """(load): how often it let go."""
    cut_hours: Floats
    """(bank): hours empty."""
    cold_hours: Floats
    """(bank): hours in which it was too cold to be charged."""
    wanted_W: Floats
    """(step, load): what it asks for, at nominal voltage."""
    unsolved: int
    """Parts of steps in which the network gave way with all loads off."""


def simulate(
    ready: Ready, course: Course, start: Start | None = None, progress: Progress | None = None
) -> Outcome:
    """Work through a course."""
    return _Run(ready, course, start or Start()).all(progress)


class _Run:
    """A course at work: what is carried from step to step."""

    def __init__(self, ready: Ready, course: Course, start: Start) -> None:
        plan = ready.plan
        self.ready, self.course = ready, course
        self.banks = day_setup.units(ready, course, start)
        self.first_charge = tuple(one.charge for one in self.banks)
        self.record = Record(ready.network, len(course), len(self.banks), ready.load_nominal_V)
        self.charging = Charging(ready, course, self.banks)
        self.supply = Supply(ready, self.banks, self.charging.running)
        self.demand = day_setup.demand(ready, course)
        self.wanted = np.sum(self.demand, axis=0) > 0
        names: dict[bytes, int] = {}
        rows = np.concatenate(self.demand, axis=1)
        self.demand_names = [names.setdefault(row.tobytes(), len(names)) for row in rows]
        self.cut_V = np.array([one.cut_out.si if one.cut_out else -np.inf for one in plan.loads])
        self.back_V = np.array([one.recovery.si if one.recovery else np.inf for one in plan.loads])
        self.off = np.zeros(len(plan.loads), dtype=bool)
        self.laws = day_setup.laws(ready, course, self.banks)
        self.degC = course.bank_degC.tolist()
        self.last: tuple[StepNetwork, Floats] | None = None
        self.trend: Floats | None = None
        self.off_share = np.zeros((len(course), len(plan.loads)))
        self.times_off = np.zeros(len(plan.loads), dtype=int)
        self.cut_hours, self.cold_hours = np.zeros((2, len(self.banks)))
        self.unsolved = 0

    def all(self, progress: Progress | None) -> Outcome:
        """Every step, one after another."""
        hours = self.charging.hours.tolist()
        for piece, step in enumerate(self.charging.steps.tolist()):
            left = hours[piece]
            while left > _REST * self.course.hours:
                left -= self._part(piece, step, left)
            if progress is not None and piece % _TELL == 0:
                progress(piece / len(hours))
        watts, amps, siemens = self.demand
        volts = self.ready.load_nominal_V
        return Outcome(
            self.ready, self.course, tuple(self.banks), self.first_charge, self.record.finish(self.course.hours),
            self.off_share, self.times_off, self.cut_hours, self.cold_hours,
            watts + volts * (amps + volts * siemens), self.unsolved,
        )  # fmt: skip

    def _part(self, piece: int, step: int, hours: float) -> float:
        """Solve what is left of a piece, or less where a bank is empty before; returns the hours that it took."""
        cut = tuple(one.cut for one in self.banks)
        network = self.supply.network(piece, cut)
        without = self.wanted[step] & ~self.supply.fed_by_banks(cut)
        if network is None:
            return self._rest(step, hours, self.wanted[step])
        settled, silent = self._settle(piece, step, hours, network, without)
        for _ in range(_TIMES):
            empty = self._first_empty(network, settled, hours) if settled is not None else None
            if empty is None:
                break
            hours *= empty
            settled, silent = self._settle(piece, step, hours, network, without)
        if settled is None:
            self.unsolved += 1
            return self._rest(step, hours, self.wanted[step])
        self._count(step, hours, silent)
        self.trend = settled.u - self.last[1] if self.last is not None and self.last[0] is network else None
        self.last = (network, settled.u)
        self.record.keep(step, hours, network, settled, self._charge(step, network, settled, hours))
        if self.off.any():
            self.off &= ~(network.load_volts(settled.u, len(self.off)) > self.back_V)
        self.charging.after(self.laws, piece, network, settled)
        return hours

    def _settle(
        self, piece: int, step: int, hours: float, network: StepNetwork, without: np.ndarray
    ) -> tuple[Settled | None, np.ndarray]:
        """The step with every load off that lets go, and which are silent; None where nothing holds."""
        self.charging.set(self.laws, piece, hours)
        wanted, silent = self.wanted[step], without | (self.off & self.wanted[step])
        start = self._before(step, network)
        while True:
            self._ask(step, silent)
            name = (self.demand_names[step], silent.tobytes()) if silent.any() else self.demand_names[step]
            settled = settle(network, self.laws, self.banks, self.degC[step], hours, name, start)
            if settled.solved:
                index = self._lets_go(network, settled, wanted & ~silent)
                if index is None:
                    return settled, silent
                self.off[index] = True
                self.times_off[index] += 1
            else:
                index = self._gives_way(step, settled, wanted & ~silent)
                if index is None:
                    return None, silent
            silent[index] = True

    def _before(self, step: int, network: StepNetwork) -> Floats | None:
        """Voltages at the ports of a network after the step before; as they went on, where nothing else changes."""
        if self.last is None:
            return None
        before, u = self.last
        if before is not network:
            return before.known(u)[network.everywhere]
        names = self.demand_names
        alike = self.trend is not None and step > 1 and names[step] == names[step - 1] == names[step - 2]
        return u + self.trend if alike and self.trend is not None else u

    def _ask(self, step: int, silent: np.ndarray) -> None:
        """Put in what the loads ask for."""
        count, quiet = len(silent), bool(silent.any())
        for target, values in zip((self.laws.watts, self.laws.amps, self.laws.siemens), self.demand, strict=True):
            target[:count] = np.where(silent, 0.0, values[step]) if quiet else values[step]

    def _lets_go(self, network: StepNetwork, settled: Settled, on: np.ndarray) -> int | None:
        """The load that stands farthest below its cut-out, if any does."""
        volts = network.load_volts(settled.u, len(on))
        below = on & (volts < self.cut_V)
        return int(np.argmin(np.where(below, volts / self.cut_V, np.inf))) if below.any() else None

    def _gives_way(self, step: int, settled: Settled, on: np.ndarray) -> int | None:
        """The load to leave out of a step that gives way: the one that falls fastest, else the largest."""
        if settled.weakest is not None and on[settled.weakest]:
            return settled.weakest
        return int(np.argmax(np.where(on, self.demand[0][step] + 1e-9, 0.0))) if on.any() else None

    def _first_empty(self, network: StepNetwork, settled: Settled, hours: float) -> float | None:
        """Share of the time after which the first bank is empty, where one is before the end."""
        shares = []
        for one in self.banks:
            if one.port in network.place and not one.cut:
                change = one.change(float(settled.delivered[network.place[one.port]]), hours)
                if one.charge + change < -EMPTY:
                    shares.append(max(one.charge, 0.0) / -change)
        return max(min(shares), _REST) if shares else None

    def _charge(self, step: int, network: StepNetwork, settled: Settled, hours: float) -> tuple[BankPart, ...]:
        """Bring the banks to the end of a part of a step."""
        self._bank_hours(step, hours)
        parts = []
        for one in self.banks:
            place = network.place.get(one.port)
            if place is None:
                parts.append(one.part(0.0, None, self.degC[step], hours))
            else:
                amps, volts = float(settled.delivered[place]), float(settled.u[place])
                parts.append(one.part(amps, volts, self.degC[step], hours))
        return tuple(parts)

    def _rest(self, step: int, hours: float, silent: np.ndarray) -> float:
        """A part of a step in which nothing flows."""
        self._count(step, hours, silent)
        self.last = None
        self._bank_hours(step, hours)
        self.record.rest(step, hours, tuple(one.part(0.0, None, self.degC[step], hours) for one in self.banks))
        return hours

    def _bank_hours(self, step: int, hours: float) -> None:
        for index, one in enumerate(self.banks):
            self.cut_hours[index] += hours if one.cut else 0.0
            self.cold_hours[index] += hours if self.degC[step] < one.least_degC else 0.0

    def _count(self, step: int, hours: float, silent: np.ndarray) -> None:
        if silent.any():
            self.off_share[step] += np.where(silent, hours / self.course.hours, 0.0)
