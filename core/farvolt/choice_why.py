"""Why each run has the size it has: what the next thinner one would break, and what a size more or less comes to."""

from collections.abc import Iterator
from dataclasses import dataclass

from farvolt.choice_limits import Row
from farvolt.choice_options import Option
from farvolt.choose import Choice

_KEPT = 1e-9


@dataclass(frozen=True, slots=True)
class Why:
    """What forces the size of one run."""

    run: str
    rule: str
    """The rule that the next thinner size breaks; empty where none is thinner, or nothing breaks."""
    load: str
    """The load whose limit that is, for a rule on volts."""
    case: str
    thinner: str
    """The next thinner size; empty where there is none."""
    saves: float | None
    """What it would save, in the unit of the objective."""
    thicker: str
    adds: float | None
    """What the next thicker size would add."""

    @property
    def text(self) -> str:
        """The reason in words."""
        if not self.thinner:
            return "no thinner size to choose from"
        if not self.rule:
            return f"{self.thinner} would pass alone; the number of sizes or the proof's share decides"
        told = f' of "{self.load}" in "{self.case}"' if self.load else ""
        return f"{self.thinner} would break {self.rule}{told}"


def why(choice: Choice) -> list[Why]:
    """The reason for each run that was chosen. At the currents of the choice, as its model has them."""
    if choice.picked is None or choice.verdict is None:
        return []
    rows = _Rows(choice)
    return [_of_run(choice, rows, run, choice.picked[run]) for run in choice.runs]


def _of_run(choice: Choice, rows: "_Rows", run: int, taken: Option) -> Why:
    entry, mine = choice.plan.runs[run], choice.options.by_run[run]
    thinner = _nearest(choice, mine, taken, -1)
    thicker = _nearest(choice, mine, taken, 1)
    rule, load, case, name = "", "", "", ""
    if thinner is not None:
        name = thinner.size.name
        row = rows.broken_by(taken, thinner)
        if row is not None:
            rule, load, case = _said(choice, row)
    refused = {size: why for size, why in choice.options.refused[run].items() if thinner is None}
    if refused:
        name, rule = list(refused.items())[-1]
    saves = taken.cost - thinner.cost if thinner is not None else None
    adds = thicker.cost - taken.cost if thicker is not None else None
    return Why(entry.name, rule, load, case, name, saves, thicker.size.name if thicker else "", adds)


def _nearest(choice: Choice, mine: list[Option], taken: Option, sign: int) -> Option | None:
    """The next thinner or thicker option, with the rating nearest to what was taken."""
    there = [one for one in mine if sign * (one.area_mm2 - taken.area_mm2) > _KEPT and one.cost != taken.cost]
    rating = taken.rating_A or 0.0
    return min(there, key=lambda one: (abs(one.area_mm2 - taken.area_mm2), abs((one.rating_A or 0.0) - rating)),
               default=None)  # fmt: skip


def _said(choice: Choice, row: Row) -> tuple[str, str, str]:
    if row.limit is None:
        return row.text, "", ""
    assert choice.verdict is not None
    context = choice.verdict.context
    return row.limit.rule, context.plan.loads[row.limit.load].name, context.cases[row.limit.case].name


class _Rows:
    """The rows of a choice's model with what is left in each, for asking what one change breaks."""

    def __init__(self, choice: Choice) -> None:
        assert choice.verdict is not None
        assert choice.picked is not None
        problem = choice.problem
        every = problem.options.every
        self.place = {id(one): place for place, one in enumerate(every)}
        taken = {self.place[id(one)] for one in choice.picked.values()}
        self.by_option: dict[int, list[tuple[Row, float]]] = {}
        for row in (*problem.holding_rows(choice.verdict.context), *problem.model.rows):
            left = row.most - sum(value for place, value in row.coefficients.items() if place in taken)
            for place in row.coefficients:
                self.by_option.setdefault(place, []).append((row, left))

    def broken_by(self, taken: Option, other: Option) -> Row | None:
        """The row that a change of one run breaks by most of what is left in it."""
        now, then = self.place[id(taken)], self.place[id(other)]
        worst: tuple[float, Row] | None = None
        for row, left in self._of(now, then):
            over = row.coefficients.get(then, 0.0) - row.coefficients.get(now, 0.0) - left
            scale = max(map(abs, row.coefficients.values()))
            if over > _KEPT * scale and (worst is None or over / scale > worst[0]):
                worst = over / scale, row
        return worst[1] if worst is not None else None

    def _of(self, now: int, then: int) -> Iterator[tuple[Row, float]]:
        seen: set[int] = set()
        for row, left in (*self.by_option.get(then, ()), *self.by_option.get(now, ())):
            if id(row) not in seen:
                seen.add(id(row))
                yield row, left
