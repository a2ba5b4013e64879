"""How far the voltages may lie from the plan when what is built differs from it within the tolerances of the plan.

Each uncertain quantity is a factor with two ends: the length and the joints of each run, its conductor's temperature,
the voltage of each source, the demand of each load. Bounds are called guaranteed only where `proof` proves them;
elsewhere all factors are drawn at random, evenly over their ranges and each on its own, and `coverage` says what the
samples can claim.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np

from farvolt import conductors, temperatures
from farvolt.context import CaseStudy, Context
from farvolt.fed import Fed
from farvolt.network import Floats, Network, insulation_degC, joints_ohm
from farvolt.operating import Operating
from farvolt.plan import Case, Plan
from farvolt.proof import Proof, proof
from farvolt.rulebook import Rulebook
from farvolt.solve import State
from farvolt.variants import Answers, Variants, solve_variant, solve_variants

Group = Literal["length", "joints", "temperature", "source voltage", "loads"]
GROUPS: tuple[Group, ...] = ("length", "joints", "temperature", "source voltage", "loads")
RESISTANCES: tuple[Group, ...] = ("length", "joints", "temperature")

LEAST_SHARE = 0.01
"""No length, voltage or demand comes below this share of what is planned."""

Progress = Callable[[str], None]
"""Told what is being worked on."""


@dataclass(frozen=True, slots=True)
class Factor:
    """One uncertain quantity: of which entry of its table, and its two ends.

    Lengths, joints, voltages and demands are times what is planned, temperatures °C. `lowers` is the end that lowers
    voltages where the network behaves as `proof` asks, `raises` the other.
    """

    group: Group
    name: str
    at: int
    lowers: float
    raises: float


@dataclass(frozen=True)
class Spread:
    """A case with its factors; arrays of values are over (variant, factor)."""

    rulebook: Rulebook
    network: Network
    case: Case
    condition: Operating
    supply: Fed
    factors: tuple[Factor, ...]

    @cached_property
    def lowers(self) -> Floats:
        """The ends that lower voltages."""
        return np.array([one.lowers for one in self.factors], dtype=float)

    @cached_property
    def raises(self) -> Floats:
        """The ends that raise voltages."""
        return np.array([one.raises for one in self.factors], dtype=float)

    def places(self, *groups: Group) -> np.ndarray:
        """Where the factors of some groups are."""
        return np.flatnonzero([one.group in groups for one in self.factors])

    def variants(self, values: Floats) -> Variants:
        """Resistances, source voltages and demands of the network at values of the factors."""
        network, condition, plan = self.network, self.condition, self.network.plan
        runs = {group: np.ones((len(values), len(plan.runs) + 1)) for group in RESISTANCES}
        runs["temperature"][:, :-1] = self._as_planned
        volts = np.tile(condition.volts, (len(values), 1))
        demand = np.ones((len(values), len(condition.load_a)))
        for place, one in enumerate(self.factors):
            if one.group == "source voltage":
                volts[:, self._ports(one.at)] *= values[:, place, None]
            elif one.group == "loads":
                demand[:, one.at] = values[:, place]
            else:
                runs[one.group][:, one.at] = values[:, place]
        hot = np.ones_like(runs["temperature"])
        hot[:, :-1] = 1 + self._alpha * (runs["temperature"][:, :-1] - 20)
        joints = self._joints * (runs["joints"][:, network.run] - 1)
        cable = network.cable_ohm_20 * (runs["length"] * hot)[:, network.run]
        return Variants(network.fixed_ohm + joints + cable, volts, demand)

    def solve(self, values: Floats) -> Answers:
        """Solve the case at values of the factors."""
        return solve_variants(self.network, self.condition, self.supply, self.variants(values))

    def corner(self, values: Floats) -> State:
        """Solve the case at one value of each factor, by itself."""
        return solve_variant(self.network, self.condition, self.supply, self.variants(values[None]), 0)

    def load_volts(self, state: State) -> Floats:
        """Volts at every load of the plan; NaN where it is not fed or the case gives way."""
        count, c = len(self.network.plan.loads), self.condition
        across = state.volts[c.load_a[:count]] - state.volts[c.load_b[:count]]
        return np.where(self.supply.load_on[:count] & state.solved, across, np.nan)

    def _ports(self, source: int) -> list[int]:
        """The ports of a source: its own, and those of its strings that stand apart."""
        first = len(self.network.plan.sources)
        return [source, *(first + place for place, (index, _, _) in enumerate(self.network.strings) if index == source)]

    @cached_property
    def _alpha(self) -> Floats:
        runs = self.network.plan.runs
        return np.array([conductors.temperature_coefficient(run.material).value for run in runs], dtype=float)

    @cached_property
    def _as_planned(self) -> Floats:
        """Temperature of the runs whose range is a single one."""
        ranges = [_range_degC(self.network.plan, self.rulebook, self.case, at) for at in range(len(self._alpha))]
        return np.array([least for least, _ in ranges], dtype=float)

    @cached_property
    def _joints(self) -> Floats:
        """Over branches: resistance of the joints in a run's own conductor; 0 in what is measured, and elsewhere."""
        network, runs = self.network, self.network.plan.runs
        each = np.array([0.0 if run.resistance is not None else joints_ohm(run) for run in runs] + [0.0])
        return np.where(network.cable_ohm_20 > 0, each[network.run], 0.0)


def spread(context: Context, case: CaseStudy) -> Spread:
    """The factors of a case: of what is fed and on, with a range that is more than one value."""
    solution = case.solutions["plan"]
    network, condition, supply = solution.network, solution.condition, solution.supply
    every = (
        *_run_factors(context, case.case, network, condition, supply),
        *_source_factors(context.plan, supply, network),
        *_load_factors(context.plan, condition, supply),
    )
    factors = tuple(one for one in every if one.lowers != one.raises)
    return Spread(context.rulebook, network, case.case, condition, supply, factors)


def _run_factors(context: Context, case: Case, network: Network, condition: Operating, supply: Fed) -> Iterator[Factor]:
    wide, joints = context.plan.tolerances.length.si, context.plan.tolerances.joints
    on = condition.branch_on & supply.live[network.a] & supply.live[network.b] & (network.cable_ohm_20 > 0)
    for at in sorted(set(network.run[on].tolist())):
        run = context.plan.runs[at]
        least, most = _range_degC(context.plan, context.rulebook, case, at)
        if run.resistance is None:
            # A measured resistance holds for the length and the joints as they are.
            yield Factor("length", run.name, at, 1 + wide, max(1 - wide, LEAST_SHARE))
            if joints_ohm(run) > 0:
                yield Factor("joints", run.name, at, max(joints, 1.0), min(joints, 1.0))
        yield Factor("temperature", run.name, at, most, least)


def _range_degC(plan: Plan, rulebook: Rulebook, case: Case, at: int) -> tuple[float, float]:
    """Least and greatest conductor temperature of a run: as stated, else the case's ambient and the insulation."""
    run, stated = plan.runs[at], plan.tolerances
    coldest = stated.coldest.si if stated.coldest else temperatures.run_ambient_degC(plan, run, case)
    hottest = stated.hottest.si if stated.hottest else insulation_degC(run, rulebook)
    return min(coldest, hottest), max(coldest, hottest)


def _source_factors(plan: Plan, supply: Fed, network: Network) -> Iterator[Factor]:
    wide = plan.tolerances.source_volts.si
    strings = {index for place, (index, _, _) in enumerate(network.strings)
               if supply.source_on[len(plan.sources) + place]}  # fmt: skip
    for at, source in enumerate(plan.sources):
        if supply.source_on[at] or at in strings:
            yield Factor("source voltage", source.name, at, max(1 - wide, LEAST_SHARE), 1 + wide)


def _load_factors(plan: Plan, condition: Operating, supply: Fed) -> Iterator[Factor]:
    wide = plan.tolerances.loads.si
    for at in loads_on(condition, supply, len(plan.loads)):
        yield Factor("loads", plan.loads[at].name, at, 1 + wide, max(1 - wide, LEAST_SHARE))


def loads_on(condition: Operating, supply: Fed, count: int) -> list[int]:
    """The loads of the plan that are fed and draw something."""
    demand = condition.load_W + condition.load_A + condition.load_S
    return np.flatnonzero((demand[:count] > 0) & supply.load_on[:count]).tolist()


# Results ---------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class LoadSpread:
    """Voltages at a load in a case: as planned, the lowest and the highest, and those with all factors at one end.

    Where the bounds are guaranteed those at one end are the bounds; None where the network gives way.
    """

    name: str
    planned_V: float | None
    lowest_V: float | None
    highest_V: float | None
    ends_low_V: float | None
    ends_high_V: float | None


@dataclass(frozen=True)
class CaseSpread:
    """A case under tolerances. `guaranteed` holds for all its loads or for none.

    Where it does not, the lowest and highest are those of `samples` drawn at random, of which `gave_way` have none,
    and `one_by_one` were too near to giving way to be solved together. With a proof that reaches the loads, each
    sample of the resistances was solved at the worst and at the best of loads and source voltage.
    """

    name: str
    proof: Proof
    guaranteed: bool
    ends_share_held: float
    """Share of its loads that the case holds with all factors at the ends that lower voltages."""
    samples: int
    gave_way: int
    one_by_one: int
    largest_imbalance_A: float
    loads: tuple[LoadSpread, ...]


SAMPLES = 10_000


def usual_samples(runs: int) -> int:
    """Samples unless told otherwise: fewer of a large plan, each of which takes longer."""
    return SAMPLES if runs <= 300 else 1_000 if runs <= 1_500 else 300


def case_spread(context: Context, index: int, samples: int, seed: int) -> CaseSpread:
    """Lowest and highest voltage of every load that is on in a case."""
    found = spread(context, context.cases[index])
    reach = proof(found.network, found.condition, found.supply)
    low, high = found.corner(found.lowers), found.corner(found.raises)
    if reach.reach == "all" and low.solved and high.solved:
        volts = found.load_volts(low), found.load_volts(high)
        return _result(context, index, found, reach, True, (low, high), volts, None)
    chance = np.random.default_rng([seed, index])
    drawn = chance.uniform(
        np.minimum(found.lowers, found.raises), np.maximum(found.lowers, found.raises), (samples, len(found.factors))
    )
    answers = _sampled(found, drawn, reach)
    least, most = (_extreme(one.load_volts, pick) for one, pick in zip(answers, (np.min, np.max), strict=True))
    return _result(context, index, found, reach, False, (low, high), (least, most), answers)


def _sampled(found: Spread, drawn: Floats, reach: Proof) -> tuple[Answers, Answers]:
    """Answers to take the lowest and the highest from: the same, unless loads and EMF may stand at their ends."""
    if reach.reach == "none":
        answers = found.solve(drawn)
        return answers, answers
    proven = found.places("source voltage", "loads")
    worst, best = drawn.copy(), drawn.copy()
    worst[:, proven], best[:, proven] = found.lowers[proven], found.raises[proven]
    return found.solve(worst), found.solve(best)


def _extreme(volts: Floats, pick: Callable[..., Floats]) -> Floats:
    """The least or the greatest over the variants that hold; NaN where none does."""
    held = volts[~np.all(np.isnan(volts), axis=1)]
    return pick(held, axis=0) if len(held) else np.full(volts.shape[1], np.nan)


def _result(
    context: Context, index: int, found: Spread, reach: Proof, guaranteed: bool,
    ends: tuple[State, State], volts: tuple[Floats, Floats], answers: tuple[Answers, Answers] | None,
) -> CaseSpread:  # fmt: skip
    planned = context.cases[index].solutions["plan"]
    as_planned = planned.load_volts if planned.state.solved else np.full(len(context.plan.loads), np.nan)
    table = np.stack([as_planned, *volts, *(found.load_volts(state) for state in ends)])
    on = loads_on(found.condition, found.supply, len(context.plan.loads))
    loads = [LoadSpread(context.plan.loads[at].name, *(_number(value) for value in table[:, at])) for at in on]
    imbalance = [state.imbalance_A for state in ends]
    gave_way = one_by_one = samples = 0
    if answers is not None:
        samples = len(answers[0].solved)
        gave_way = int(np.count_nonzero(~answers[0].solved))
        one_by_one = int(np.count_nonzero(~answers[0].together))
        imbalance += [float(one.imbalance_A.max(initial=0.0)) for one in answers]
    return CaseSpread(
        context.cases[index].name, reach, guaranteed, ends[0].share_held,
        samples, gave_way, one_by_one, max(imbalance), tuple(loads),
    )  # fmt: skip


def _number(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None
