"""A sharper bound, once a passing choice is known: currents can be as low as nowhere near all at once.

The first bound takes every load at the highest voltage that any choice could give it. A choice within the cost of the
one known cannot give that to all of them: what it saves on one way it lacks on others. So the current of every shared
conductor gets a variable, what it carries beyond its least. A load's demand P/u is convex in its voltage: it lies above
its tangent at the known choice, and its voltage is a sum over options. What that current loses counts at the
resistance of the option that is taken. Options that cannot occur within the
known cost, by the reduced costs of the relaxed model, are left out.
"""

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np

from farvolt.choice_limits import Carried, Currents, Limit, Row, Rows, Shared, limits, terminals_V
from farvolt.choice_model import Model
from farvolt.choice_options import Options
from farvolt.context import Context
from farvolt.network import Floats, Ints
from farvolt.operating import KNEE_SHARE
from farvolt.solution import Solution
from farvolt.temperatures import Mode

_ROUNDING = 1e-7
_PRICES = 60
_NEAR = 0.2
"""Share of a rating: currents further below it than this never reach it by what a voltage can do to them."""


@dataclass(slots=True)
class Sharper:
    """Makes the rows of the sharper bound. `best` and `known` are solved: the thickest plan, and the choice known."""

    rows: Rows
    best: Context
    known: Context
    kept: frozenset[int]
    """Places of the options that can occur within the known cost."""
    drop_factor: float = 1.0
    _currents: dict[tuple[int, Mode], Currents] = field(default_factory=dict)

    def every(self) -> Iterator[Row]:
        """The rows: of what is carried beyond the least, and of every limit with it."""
        mine = [one for one in limits(self.best, self.drop_factor) if one.proven]
        hot: list[tuple[int, Mode]] = [(case, "hot") for case in dict.fromkeys(one.case for one in mine)]
        for case, mode in dict.fromkeys([*((one.case, one.mode) for one in mine), *hot]):
            solution = self.best.cases[case].solutions[mode]
            currents = self._currents[case, mode] = Currents.of(solution)
            yield from self._beyond(case, mode, solution, currents)
        found = [self._of_limit(limit, self.best.cases[limit.case].solutions[limit.mode]) for limit in mine]
        yield from found
        yield from self._carried(mine, {key for row in found for key in row.shared if isinstance(key, Carried)})

    def _carried(self, mine: list[Limit], keys: set[Carried]) -> Iterator[Row]:
        """What is carried beyond the least is carried by the option taken, and is no more than the limits let be."""
        lowest: dict[tuple[int, Mode, int], float] = {}
        for one in mine:
            key = one.case, one.mode, one.load
            lowest[key] = max(lowest.get(key, 0.0), one.own_V)
        runs = {place: run for run, places in self.rows.places.items() for place in places}
        together: dict[tuple[Shared, int], list[Shared | Carried]] = {}
        for carried in sorted(keys, key=lambda one: (one.option, one.by.case, one.by.mode, one.by.loads)):
            together.setdefault((carried.by, runs[carried.option]), []).append(carried)
            yield Row({carried.option: -self._most_A(carried.by, lowest)}, 0.0, shared={carried: 1.0})
        for (by, _), several in together.items():
            yield Row({}, 0.0, shared={by: 1.0, **dict.fromkeys(several, -1.0)})

    def _most_A(self, by: Shared, lowest: dict[tuple[int, Mode, int], float]) -> float:
        """The most that a shared conductor carries beyond its least: with each load at its lowest voltage."""
        currents = self._currents[by.case, by.mode]
        found = 0.0
        for load in by.loads:
            volts = lowest.get((by.case, by.mode, load), 0.0)
            nominal = float(currents.solution.load_nominal_V[load])
            found += currents.load_amps(load, volts or KNEE_SHARE * nominal) - currents.load_amps(load)
        return found

    def _beyond(self, case: int, mode: Mode, solution: Solution, currents: Currents) -> Iterator[Row]:
        """For each shared conductor: what it carries beyond its least is no less than the tangents of its loads say."""
        tangents: dict[int, tuple[dict[int, float], float]] = {}
        groups = {key: tuple(loads) for key, loads in currents.beyond.items() if len(loads) > 1}
        done: set[tuple[int, ...]] = set()
        root = _root(case, mode, currents)
        sag_ohm = _source_ohm(solution)
        for loads in [root.loads, *groups.values()]:
            if loads in done or not loads:
                continue
            done.add(loads)
            for load in set(loads) - set(tangents):
                tangents[load] = self._tangent(case, mode, load, solution, currents)
            total, least = _together([tangents[load] for load in loads])
            shared: dict[Shared | Carried, float] = {root: sag_ohm * self._slopes(case, mode, loads, solution)}
            key = Shared(case, mode, loads)
            shared[key] = shared.get(key, 0.0) - 1.0
            yield Row(total, -least, shared=shared)
        if mode == "hot" and not self.best.cases[case].case.surge:
            yield from self._within_ratings(case, tangents, currents)

    def _within_ratings(
        self, case: int, tangents: dict[int, tuple[dict[int, float], float]], currents: Currents
    ) -> Iterator[Row]:
        """No protection that stays as it is carries more than its rating."""
        for run in self.best.plan.runs:
            loads = currents.beyond.get(("run", run.name, "feed"), {})
            index = self.best.run_index(run.name)
            chosen = any(one.rating_A is not None for one in self.rows.options.by_run.get(index, ()))
            ratings = [one.rating.si for one in run.protections if one.pole == "feed"]
            if not ratings or chosen or not set(loads) <= set(tangents):
                continue
            total, least = _together([tangents[load] for load in loads])
            now_A = sum(currents.load_amps(load) for load in loads)
            if (min(ratings) - now_A) < _NEAR * min(ratings):
                solution = currents.solution
                sag = _source_ohm(solution) * self._slopes(case, "hot", tuple(loads), solution)
                most = min(ratings) - now_A - least
                yield Row(total, most, text="protection.under-load", shared={_root(case, "hot", currents): sag})

    def _tangent(
        self, case: int, mode: Mode, load: int, solution: Solution, currents: Currents
    ) -> tuple[dict[int, float], float]:
        """What a load draws beyond its least, from below: coefficients of options, and what stands alone."""
        watts = float(solution.condition.load_W[load])
        if watts <= 0:
            return {}, 0.0
        known_V = float(self.known.cases[case].solutions[mode].load_volts[load])
        slope = watts / known_V**2
        alone = watts / known_V - slope * (terminals_V(solution, load) - known_V)
        alone += float(solution.condition.load_A[load]) - currents.load_amps(load)
        coefficients, fixed_V = self.rows.drop(load, solution, currents)
        return {place: slope * volts for place, volts in coefficients.items()}, alone + slope * fixed_V

    def _slopes(self, case: int, mode: Mode, loads: Iterable[int], solution: Solution) -> float:
        """By how much the loads draw more, together, for each volt that their source's terminals stand lower, A/V."""
        volts = self.known.cases[case].solutions[mode].load_volts
        return sum(float(solution.condition.load_W[load] / volts[load] ** 2) for load in loads
                   if solution.condition.load_W[load] > 0)  # fmt: skip

    def _of_limit(self, limit: Limit, solution: Solution) -> Row:
        currents = self._currents[limit.case, limit.mode]
        row = self.rows.row(limit, solution, currents, own_at_limit="alone")
        shared = self.rows.shared(limit, solution, currents, self.kept)
        if limit.rule == "volts.low":
            root = _root(limit.case, limit.mode, currents)
            if limit.load in root.loads:
                shared[root] = shared.get(root, 0.0) + _source_ohm(solution)
        row.shared = shared
        return row


def _root(case: int, mode: Mode, currents: Currents) -> Shared:
    """All loads that share any conductor with another: what they draw passes through the source."""
    return Shared(case, mode, tuple(sorted({load for mine in currents.beyond.values() if len(mine) > 1
                                            for load in mine})))  # fmt: skip


def _source_ohm(solution: Solution) -> float:
    """Resistance of the one source that feeds a case."""
    port = next((one for one in solution.references if one is not None), None)
    return float(solution.condition.ohm[port]) if port is not None else 0.0


def _together(tangents: Iterable[tuple[dict[int, float], float]]) -> tuple[dict[int, float], float]:
    total, least = dict[int, float](), 0.0
    for slopes, start in tangents:
        least += start
        for place, slope in slopes.items():
            total[place] = total.get(place, 0.0) + slope
    return total, least


@dataclass(frozen=True, slots=True)
class Within:
    """What can occur in a choice that costs no more than a known one.

    By linear programming: each option taken raises the relaxed optimum by its reduced cost at least, so that the
    reduced costs of all that are taken sum to no more than what lies between that and the known cost.
    """

    reduced: Floats
    spare: float
    kept: frozenset[int]
    """Places of the options that can occur."""

    @classmethod
    def of(cls, model: Model, rows: list[Row], cost: float) -> "Within":
        """Relax the model with these rows."""
        value, reduced = model.relaxed(rows)
        if not np.isfinite(value):
            return cls(np.zeros(len(reduced)), np.inf, frozenset(range(len(reduced))))
        spare = max(0.0, cost * (1 + _ROUNDING) - value) + _ROUNDING
        return cls(reduced, spare, frozenset(np.flatnonzero(reduced <= spare).tolist()))

    def least(self, row: Row, starts: Ints) -> float:
        """The least that a sum over options can come to, where each run takes one of those that can occur.

        A Lagrangian bound: for any price on reduced cost, the cheapest option of each run less the price of what is
        spare. `starts` are the places at which the runs' options begin.
        """
        sums = np.zeros(len(self.reduced))
        sums[list(row.coefficients)] = list(row.coefficients.values())
        out = np.full(len(sums), np.inf)
        out[list(self.kept)] = 0.0
        if not np.isfinite(self.spare):
            return float(np.minimum.reduceat(sums, starts).sum())
        scale = max(float(np.abs(sums).sum()), _ROUNDING) / max(self.spare, _ROUNDING)
        prices = np.concatenate([[0.0], scale * np.geomspace(1e-5, 1.0, _PRICES)])
        every = sums + out + prices[:, None] * self.reduced
        found = np.minimum.reduceat(every, starts, axis=1).sum(axis=1) - prices * self.spare
        return float(found.max())


def raised(rows: Iterable[Row], within: Within, starts: Ints) -> Iterator[Row]:
    """The rows of a `Sharper` with what each shared conductor carries beyond its least put in as a number, the least
    that it can be."""
    every = list(rows)
    least: dict[Shared, float] = {}
    for row in every:
        defines = [key for key, value in row.shared.items() if value < 0]
        if row.coefficients and len(defines) == 1 and isinstance(defines[0], Shared):
            key = defines[0]
            known = sum(value * least.get(one, 0.0) for one, value in row.shared.items()
                        if isinstance(one, Shared) and one != key)  # fmt: skip
            least[key] = max(0.0, within.least(row, starts) + known - row.most) / -row.shared[key]
    for row in every:
        if all(value >= 0 for value in row.shared.values()) and (row.limit is not None or row.text):
            coefficients, most = dict(row.coefficients), row.most
            for one, value in row.shared.items():
                if isinstance(one, Carried):
                    more = value * least.get(one.by, 0.0)
                    coefficients[one.option] = coefficients.get(one.option, 0.0) + more
                else:
                    most -= value * least.get(one, 0.0)
            yield Row(coefficients, most, row.limit, row.text)


def kept_only(options: Options, kept: frozenset[int], places: Mapping[int, list[int]]) -> list[Row]:
    """Rows that leave out the options that are not worth looking at."""
    gone = {place: 1.0 for run in options.by_run for place in places[run] if place not in kept}
    return [Row(gone, 0.0)] if gone else []
