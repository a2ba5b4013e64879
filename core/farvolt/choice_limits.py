"""The limits of a choice as sums over its options: drop, lowest and highest voltage of each load in each case.

With currents held, the volts lost on the way to a load are a sum of current times resistance, and each option of a run
adds its own share. Where the currents come from decides what the sum is good for. Those of a solution make a model
to be verified. Where one source feeds trees of conductors, and no load draws more at a higher voltage, the least
currents that any choice can have make a bound: no choice that passes costs less than the cheapest one within it.

The load's own current is taken at the voltage where its limit is reached. That leaves nothing out: E − Z·P/u ≥ u at the
limit says the same as the load standing above it.
"""

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from farvolt.checks.branch import branch_steps
from farvolt.checks.drop import drop_class, exceptional
from farvolt.choice_options import Options
from farvolt.context import Context
from farvolt.network import joints_ohm, protection_ohm
from farvolt.proof import proof
from farvolt.results import Step
from farvolt.solution import Solution
from farvolt.temperatures import Mode


@dataclass(frozen=True, slots=True)
class Limit:
    """One limit of one load in one case."""

    rule: str
    """drop.load, drop.branch, volts.low or volts.high."""
    load: int
    case: int
    mode: Mode
    volts: float
    """Most volts that may be lost on the way; for volts.high the least that have to be."""
    own_V: float
    """The load's own voltage at the limit."""
    proven: bool
    """Whether it may stand in a bound."""
    at_most: bool = True


@dataclass(frozen=True, slots=True)
class Shared:
    """What a conductor carries in a case beyond its least, by the loads beyond it."""

    case: int
    mode: Mode
    loads: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Carried:
    """What a shared conductor carries beyond its least where it is built in one way, and nothing where it is not."""

    by: Shared
    option: int
    """Place among all options."""


@dataclass(slots=True)
class Row:
    """Sum over options of coefficient times choice, and over shared conductors likewise, at most `most`."""

    coefficients: dict[int, float]
    """By place among all options."""
    most: float
    limit: Limit | None = None
    text: str = ""
    proven: bool = True
    shared: dict[Shared | Carried, float] = field(default_factory=dict)


def limits(context: Context, factor: float = 1.0) -> list[Limit]:
    """Every limit on volts of a plan whose runs all have a size; `factor` is on the limits of drop."""
    found: list[Limit] = []
    for case, one in enumerate(context.cases):
        basis, hot, cold = one.solutions["basis"], one.solutions["hot"], one.solutions["cold"]
        if not (basis.state.solved and hot.state.solved and cold.state.solved):
            continue
        proven = proof(basis.network, basis.condition, basis.supply).reach == "all"
        for load, entry in enumerate(context.plan.loads):
            on = one.case.share(entry.name) > 0
            if on and not exceptional(basis, load):
                found += _drops(context, basis, load, case, proven, factor)
            if on and entry.min_volts is not None and np.isfinite(hot.load_volts[load]):
                most = terminals_V(hot, load) - entry.min_volts.si
                found.append(Limit("volts.low", load, case, "hot", most, entry.min_volts.si, proven))
            volts = cold.load_volts[load]
            if entry.max_volts is not None and np.isfinite(volts) and terminals_V(cold, load) > entry.max_volts.si:
                least = terminals_V(cold, load) - entry.max_volts.si
                found.append(Limit("volts.high", load, case, "cold", least, entry.max_volts.si, False, False))
    return found


def _drops(
    context: Context, solution: Solution, load: int, case: int, proven: bool, factor: float
) -> Iterator[Limit]:  # fmt: skip
    rule, nominal = drop_class(context, load), float(solution.load_nominal_V[load])
    if not np.isfinite(solution.load_drop_V[load]):
        return
    for name, percent in (("drop.load", rule.limit_percent), ("drop.branch", rule.branch_limit_percent)):
        if percent is not None:
            volts = factor * percent / 100 * nominal
            own = terminals_V(solution, load) - volts if name == "drop.load" else float("nan")
            yield Limit(name, load, case, "basis", volts, own, proven and name == "drop.load")


def terminals_V(solution: Solution, load: int) -> float:
    """Volts at the source that a load's drop is counted from."""
    return float(solution.load_volts[load] + solution.load_drop_V[load])


@dataclass(slots=True)
class Currents:
    """The currents of a case in one mode, by load and step of its way."""

    solution: Solution
    ways: dict[int, tuple[Step, ...]] = field(default_factory=dict)
    beyond: dict[tuple[str, str, str], dict[int, None]] = field(default_factory=dict)
    """The loads beyond each conductor."""
    _totals: dict[tuple[str, str, str], float] = field(default_factory=dict)

    @classmethod
    def of(cls, solution: Solution) -> "Currents":
        """Of a solution: for trees, where each conductor carries the loads beyond it."""
        found = cls(solution)
        for load in range(len(solution.network.plan.loads)):
            found.ways[load] = solution.way(load)
            for step in found.ways[load]:
                found.beyond.setdefault(step_key(step), {})[load] = None
        return found

    def load_amps(self, load: int, volts: float | None = None) -> float:
        """Current of a load, at other volts than those of the solution where they are given."""
        c = self.solution.condition
        if volts is None or not np.isfinite(volts):
            return float(self.solution.state.drawn_A[load])
        return float(c.load_W[load] / volts + c.load_A[load] + c.load_S[load] * volts)

    def in_step(self, step: Step, own: int, own_V: float | None) -> float:
        """Current in a step of a tree: of all loads beyond it, one of them at volts of its own where they are given."""
        total = self._totals.get(step_key(step))
        if total is None:
            total = self._totals[step_key(step)] = sum(self.load_amps(load) for load in self.beyond[step_key(step)])
        return total if own_V is None else total - self.load_amps(own) + self.load_amps(own, own_V)


def step_key(step: Step) -> tuple[str, str, str]:
    """What tells one conductor from others."""
    return step.kind, step.name, step.pole


class Rows:
    """Makes rows of limits for some options."""

    def __init__(self, options: Options) -> None:
        self.options = options
        places = iter(range(len(options.every)))
        self.places = {run: [next(places) for _ in mine] for run, mine in options.by_run.items()}

    def row(
        self, limit: Limit, solution: Solution, currents: Currents | None, tighter_V: float = 0.0,
        own_at_limit: Literal["everywhere", "alone"] = "everywhere",
    ) -> Row:  # fmt: skip
        """A limit as a row: with `currents` for trees, the load's own current at its limit, everywhere on its way or
        where it flows alone; without, currents are those of the solution as they are."""
        steps = branch_steps(solution, limit.load) if limit.rule == "drop.branch" else solution.way(limit.load)

        def amps(step: Step) -> float:
            if currents is None:
                return step.amps
            shared = len(currents.beyond[step_key(step)]) > 1
            at_limit = own_at_limit == "everywhere" or not shared
            return currents.in_step(step, limit.load, limit.own_V if at_limit else None)

        coefficients, fixed_V = self._sum(steps, solution, amps)
        most, proven = limit.volts - tighter_V - fixed_V, limit.proven and currents is not None
        if not limit.at_most:
            coefficients = {place: -value for place, value in coefficients.items()}
            most = fixed_V - limit.volts - tighter_V
        return Row(coefficients, most, limit, proven=proven)

    def drop(self, load: int, solution: Solution, currents: Currents) -> tuple[dict[int, float], float]:
        """The volts lost on the way of a load at given currents: by option, and in what is not chosen."""
        return self._sum(solution.way(load), solution, lambda step: currents.in_step(step, load, None))

    def shared(
        self, limit: Limit, solution: Solution, currents: Currents, kept: frozenset[int]
    ) -> dict[Shared | Carried, float]:  # fmt: skip
        """The resistance on the way of a limit of each shared conductor, by how it may be built."""
        found: dict[Shared | Carried, float] = {}
        for step in solution.way(limit.load):
            loads = currents.beyond[step_key(step)]
            if len(loads) > 1 and step.kind != "diode":
                coefficients, ohm = self._sum((step,), solution, lambda one: 1.0)
                key = Shared(limit.case, limit.mode, tuple(loads))
                found[key] = found.get(key, 0.0) + ohm
                for place, one in coefficients.items():
                    if place in kept:
                        carried = Carried(key, place)
                        found[carried] = found.get(carried, 0.0) + one
        return found

    def _sum(
        self, steps: Iterable[Step], solution: Solution, amps: Callable[[Step], float]
    ) -> tuple[dict[int, float], float]:
        coefficients: dict[int, float] = {}
        fixed_V, factors = 0.0, solution.conductors.factor_of_20
        for step in steps:
            current = amps(step)
            mine = self.options.by_run.get(step.run) if step.run >= 0 and step.kind == "run" else None
            if mine is None:
                fixed_V += step.drop_V if step.kind == "diode" else current * step.ohm
                continue
            pole = 0 if step.pole == "feed" else 1
            bars = step.fixed_ohm - self._present(solution, step)
            for place, option in zip(self.places[step.run], mine, strict=True):
                ohm = option.cable_ohm_20[pole] * float(factors[step.run]) + option.fixed_ohm[pole] + bars
                coefficients[place] = coefficients.get(place, 0.0) + current * ohm
        return coefficients, fixed_V

    def _present(self, solution: Solution, step: Step) -> float:
        """Joints and protection of a run as it stands in the solution: what else is fixed in it are bars."""
        run = solution.network.plan.runs[step.run]
        return joints_ohm(run) + protection_ohm(run, step.pole)


def lost_V(limit: Limit, context: Context) -> float:
    """What is lost on the way of a limit in a solved plan; infinite where the case gives way."""
    solution = context.cases[limit.case].solutions[limit.mode]
    if not solution.state.solved:
        return float("inf")
    if limit.rule == "drop.branch":
        return sum(step.drop_V for step in branch_steps(solution, limit.load))
    return float(solution.load_drop_V[limit.load])


def allowed_V(limit: Limit, context: Context) -> float:
    """What may be lost, or has to be, in a solved plan: voltages count from its own source's terminals."""
    solution, entry = context.cases[limit.case].solutions[limit.mode], context.plan.loads[limit.load]
    if limit.rule == "volts.low" and entry.min_volts is not None:
        return terminals_V(solution, limit.load) - entry.min_volts.si
    if limit.rule == "volts.high" and entry.max_volts is not None:
        return terminals_V(solution, limit.load) - entry.max_volts.si
    return limit.volts


def excess_V(limit: Limit, context: Context) -> float:
    """By how much a solved plan breaks a limit; below zero where it keeps it."""
    lost, allowed = lost_V(limit, context), allowed_V(limit, context)
    return lost - allowed if limit.at_most else allowed - lost
