"""The choice as a mixed-integer programme: one option for each run, at the least cost, within linear limits.

x of an option is 1 where it is taken. Each run takes one. With a limit on how many sizes are bought, or a cost for
each, y of a size is 1 where it is in use.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from farvolt.choice_limits import Carried, Row, Shared
from farvolt.choice_options import Option, Options
from farvolt.network import Floats

_SLACK = 1e-9


@dataclass(frozen=True, slots=True)
class Answer:
    """What a model came to: the option taken for each run, its cost, and a cost that no choice undercuts."""

    picked: dict[int, Option] | None
    """None where nothing was found in time, or nothing is within the limits."""
    cost: float
    bound: float
    impossible: bool


@dataclass(slots=True)
class Model:
    """Options with the rows that hold for all of them."""

    options: Options
    rows: list[Row] = field(default_factory=list)
    most_sizes: int | None = None
    size_cost: float = 0.0
    present: frozenset[str] = frozenset()
    """Sizes that are in use by runs that are not to choose."""

    @property
    def every(self) -> list[Option]:
        """All options in the order of their places."""
        return self.options.every

    def cost_of(self, picked: dict[int, Option]) -> float:
        """Cost of a choice, with what its sizes cost."""
        sizes = {one.size.name for one in picked.values()} | self.present
        return sum(one.cost for one in picked.values()) + self.size_cost * len(sizes)

    def solve(self, extra: Sequence[Row], gap: float, time_limit_s: float, below: float = np.inf) -> Answer:
        """The cheapest choice within the model's rows and `extra`, and within a cost, to a share of its cost."""
        from scipy.optimize import Bounds, LinearConstraint, milp

        costs, low, high, arrays, shared = self._programme(extra)
        if np.isfinite(below):
            arrays.add(dict(enumerate(costs.tolist())), -np.inf, below)
        matrix, least, most = arrays.matrix(len(costs))
        whole = np.array([1.0] * (len(costs) - shared) + [0.0] * shared)
        found = milp(
            costs, integrality=whole, bounds=Bounds(low, high), constraints=LinearConstraint(matrix, least, most),
            options={"mip_rel_gap": gap, "time_limit": max(time_limit_s, 0.05), "presolve": True},
        )  # fmt: skip
        return self._answer(found, self.every)

    def relaxed(self, extra: Sequence[Row]) -> tuple[float, Floats]:
        """The optimum where options may be taken in parts, and by how much taking each whole would raise it."""
        from scipy.optimize import linprog

        costs, low, high, arrays, _ = self._programme(extra)
        matrix, least, most = arrays.matrix(len(costs))
        equal = least == most
        above = np.isfinite(least) & ~equal
        upper = np.isfinite(most) & ~equal
        from scipy.sparse import vstack

        found = linprog(
            costs, A_ub=vstack([matrix[upper], -matrix[above]]), b_ub=np.concatenate([most[upper], -least[above]]),
            A_eq=matrix[equal], b_eq=most[equal], bounds=np.column_stack([low, high]), method="highs",
        )  # fmt: skip
        if found.x is None:
            return np.inf, np.zeros(len(self.every))
        reduced: Floats = found.lower.marginals[: len(self.every)]
        return float(found.fun), reduced

    def _programme(self, extra: Sequence[Row]) -> tuple[Floats, Floats, Floats, "_Arrays", int]:
        """Costs and ranges of all variables, the rows, and how many of the variables, the last ones, are no choices."""
        every, arrays = self.every, _Arrays(len(self.every))
        self._one_each(arrays)
        names = self._sizes(arrays)
        count = len(every) + len(names)
        shared: dict[Shared | Carried, int] = {}
        for row in (*self.rows, *extra):
            if row.shared or _binds(row, self.options, every):
                more = {shared.setdefault(key, count + len(shared)): value for key, value in row.shared.items()}
                arrays.add({**row.coefficients, **more}, -np.inf, row.most)
        costs = np.array([one.cost for one in every] + [self.size_cost] * len(names) + [0.0] * len(shared))
        sold = [float(np.isfinite(one.cost)) for one in every]
        high = np.array([*sold, *([1.0] * len(names)), *([np.inf] * len(shared))])
        low = np.array([0.0] * len(every) + [float(name in self.present) for name in names] + [0.0] * len(shared))
        return np.where(np.isfinite(costs), costs, 0.0), low, high, arrays, len(shared)

    def _one_each(self, arrays: "_Arrays") -> None:
        place = 0
        for options in self.options.by_run.values():
            arrays.add({place + step: 1.0 for step in range(len(options))}, 1.0, 1.0, exact=True)
            place += len(options)

    def _sizes(self, arrays: "_Arrays") -> list[str]:
        """A y for each size, where sizes count: no option is taken whose size is not."""
        if self.most_sizes is None and self.size_cost == 0:
            return []
        names = sorted({one.size.name for one in self.every} | self.present)
        at, place = {name: len(self.every) + step for step, name in enumerate(names)}, 0
        for options in self.options.by_run.values():
            for name in dict.fromkeys(one.size.name for one in options):
                mine = {place + step: 1.0 for step, one in enumerate(options) if one.size.name == name}
                arrays.add({**mine, at[name]: -1.0}, -np.inf, 0.0)
            place += len(options)
        if self.most_sizes is not None:
            arrays.add(dict.fromkeys(at.values(), 1.0), -np.inf, float(self.most_sizes))
        return names

    def _answer(self, found: Any, every: list[Option]) -> Answer:
        bound = float(found.mip_dual_bound) if found.mip_dual_bound is not None else -np.inf
        if found.x is None:
            return Answer(None, np.inf, bound if np.isfinite(bound) else 0.0, found.status == 2)
        picked = {one.run: one for one, taken in zip(every, found.x, strict=False) if taken > 0.5}
        return Answer(picked, self.cost_of(picked), bound, False)


class _Arrays:
    """Rows of a sparse matrix as they are put together."""

    def __init__(self, columns: int) -> None:
        self.columns = columns
        self._rows: list[int] = []
        self._at: list[int] = []
        self._values: list[float] = []
        self._low: list[float] = []
        self._high: list[float] = []

    def add(self, coefficients: dict[int, float], low: float, high: float, *, exact: bool = False) -> None:
        """One more row. Each is scaled to its largest coefficient: volts and kilograms differ by orders."""
        scale = max((abs(value) for value in coefficients.values() if np.isfinite(value)), default=0.0) or 1.0
        for place, value in coefficients.items():
            if value != 0 and np.isfinite(value):
                self._rows.append(len(self._low))
                self._at.append(place)
                self._values.append(value / scale)
        self._low.append(low / scale)
        self._high.append(high / scale + (0.0 if exact else _SLACK))

    def matrix(self, columns: int) -> tuple[Any, Floats, Floats]:
        """The matrix with its limits below and above."""
        from scipy.sparse import csr_array

        shape = (len(self._low), columns)
        whole = csr_array((self._values, (self._rows, self._at)), shape=shape)
        return whole, np.array(self._low), np.array(self._high)


def _binds(row: Row, options: Options, every: list[Option]) -> bool:
    """Whether a row can be broken at all: the largest its sum can come to is above its limit."""
    largest: dict[int, float] = {}
    for place, value in row.coefficients.items():
        run = every[place].run
        largest[run] = max(value, largest.get(run, -np.inf))
    counts: dict[int, int] = {}
    for place in row.coefficients:
        counts[every[place].run] = counts.get(every[place].run, 0) + 1
    # A run that takes an option outside the row adds nothing to it.
    total = sum(value if counts[run] == len(options.by_run[run]) else max(value, 0.0) for run, value in largest.items())
    return total > row.most


def links(options: Options, behind: dict[int, list[int]]) -> list[Row]:
    """A protection that is chosen with one run, and every run behind it: none is rated above what they may carry.

    `behind` gives for each run that chooses its protection the other runs to choose that depend on it.
    """
    places, rows = {}, []
    count = iter(range(len(options.every)))
    for run, mine in options.by_run.items():
        places[run] = [next(count) for _ in mine]
    for guard, runs in behind.items():
        ratings = sorted({one.rating_A for one in options.by_run[guard] if one.rating_A is not None})
        for run in runs:
            for rating in ratings:
                pairs = zip(places[guard], options.by_run[guard], strict=True)
                high = {place: 1.0 for place, one in pairs if (one.rating_A or 0.0) >= rating}
                pairs = zip(places[run], options.by_run[run], strict=True)
                enough = {place: -1.0 for place, one in pairs if one.limit_A >= rating * (1 - 1e-9)}
                if len(enough) < len(options.by_run[run]):
                    rows.append(Row({**high, **enough}, 0.0, text="protection.over-conductor"))
    return rows
