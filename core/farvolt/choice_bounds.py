"""A sharper bound, once a passing choice is known: currents can be as low as nowhere near all at once.

The first bound takes every load at the highest voltage that any choice could give it. A choice within the cost of the
one known cannot give that to all of them: what it saves on one way it lacks on others. So the current of every shared
conductor gets a variable, what it carries beyond its least. A load's demand P/u is convex in its voltage: it lies above
its tangent at the known choice, and its voltage is a sum over options. What that current loses counts at the
resistance of the option that is taken. Options that cannot occur within the
known cost, by the reduced costs of the relaxed model, are left out.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np

from farvolt.choice_limits import Carried, Currents, Limit, Row, Rows, Shared, limits, terminals_V
from farvolt.choice_model import Model
from farvolt.choice_options import Options
from farvolt.context import Context
from farvolt.operating import KNEE_SHARE
from farvolt.solution import Solution
from farvolt.temperatures import Mode

_ROUNDING = 1e-7


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
        for case, mode in dict.fromkeys((one.case, one.mode) for one in mine):
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
        for loads in [tuple(sorted({load for mine in groups.values() for load in mine})), *groups.values()]:
            if loads in done or not loads:
                continue
            done.add(loads)
            total, least = dict[int, float](), 0.0
            for load in loads:
                if load not in tangents:
                    tangents[load] = self._tangent(case, mode, load, solution, currents)
                slopes, start = tangents[load]
                least += start
                for place, slope in slopes.items():
                    total[place] = total.get(place, 0.0) + slope
            yield Row(total, -least, shared={Shared(case, mode, loads): -1.0})

    def _tangent(
        self, case: int, mode: Mode, load: int, solution: Solution, currents: Currents
    ) -> tuple[dict[int, float], float]:
        """What a load draws beyond its least, from below: coefficients of options, and what stands alone."""
        watts = float(solution.condition.load_W[load])
        if watts <= 0:
            return {}, 0.0
        top = terminals_V(solution, load)
        drop_V = float(self.known.cases[case].solutions[mode].load_drop_V[load])
        slope = watts / (top - drop_V) ** 2
        alone = watts / (top - drop_V) - slope * drop_V
        alone += float(solution.condition.load_A[load]) - currents.load_amps(load)
        coefficients, fixed_V = self.rows.drop(load, solution, currents)
        return {place: slope * volts for place, volts in coefficients.items()}, alone + slope * fixed_V

    def _of_limit(self, limit: Limit, solution: Solution) -> Row:
        currents = self._currents[limit.case, limit.mode]
        row = self.rows.row(limit, solution, currents, own_at_limit="alone")
        shared = self.rows.shared(limit, solution, currents, self.kept)
        if limit.rule == "volts.low":
            port = solution.references[limit.load]
            loads = tuple(sorted({load for mine in currents.beyond.values() if len(mine) > 1 for load in mine}))
            if port is not None and limit.load in loads:
                key = Shared(limit.case, limit.mode, loads)
                shared[key] = shared.get(key, 0.0) + float(solution.condition.ohm[port])
        row.shared = shared
        return row


def worth(model: Model, rows: list[Row], below: float) -> frozenset[int]:
    """Places of the options that can occur in a choice that costs no more than `below`.

    By linear programming: taking an option raises the relaxed optimum by its reduced cost at least.
    """
    value, reduced = model.relaxed(rows)
    if not np.isfinite(value):
        return frozenset(range(len(reduced)))
    return frozenset(np.flatnonzero(value + reduced <= below * (1 + _ROUNDING) + _ROUNDING).tolist())


def kept_only(options: Options, kept: frozenset[int], places: Mapping[int, list[int]]) -> list[Row]:
    """Rows that leave out the options that are not worth looking at."""
    gone = {place: 1.0 for run in options.by_run for place in places[run] if place not in kept}
    return [Row(gone, 0.0)] if gone else []
