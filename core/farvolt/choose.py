"""The choice of cables for a whole plan: the least copper or cost with which every load and every check is satisfied.

In turn: the cheapest choice within limits that no passing choice can break gives a bound; the cheapest one at the
currents of the last solution gives a choice, which the exact solution and all checks are asked about. What they find
is put into the model, until a choice passes and costs no more than the bound but for a stated share, or no better one
turns up. A choice is never given out without having passed.
"""

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from farvolt import interim, study
from farvolt.choice_bounds import Sharper, Within, kept_only, raised
from farvolt.choice_faults import FaultRows
from farvolt.choice_least import at_least
from farvolt.choice_limits import Currents, Limit, Row, Rows, limits
from farvolt.choice_model import Answer, Model, links
from farvolt.choice_options import (
    Builder,
    Option,
    Options,
    Wishes,
    cable_cost,
    chosen_runs,
    guards_to_choose,
    sizes_for,
    with_options,
)
from farvolt.choice_seats import seated, seats
from farvolt.choice_verify import Cuts, Failure, Verdict, failures
from farvolt.conductors import Size
from farvolt.context import Context
from farvolt.errors import ChoiceError
from farvolt.plan import Plan
from farvolt.rulebook import Rulebook
from farvolt.temperatures import Mode

_ROUNDS = 25
_RAISES = 2
_ROUNDING = 1e-9
_INTERRUPTING = "protection.interrupting"
_OVER = 1.001
"""A limit that the exact solution breaks is tightened by this much more than it is broken by."""


@dataclass(frozen=True, slots=True)
class Progress:
    """How far a choice has come; costs in the unit of the objective, None where none is known yet."""

    doing: str
    cost: float | None
    bound: float | None


Report = Callable[[Progress], None]


@dataclass(frozen=True)
class Choice:
    """What was chosen. `options` and `verdict` are None where nothing passes, or nothing was found in time."""

    plan: Plan
    """As it was given."""
    wishes: Wishes
    options: Options
    runs: list[int]
    picked: Mapping[int, Option] | None
    verdict: Verdict | None
    cost: float | None
    bound: float
    proven: bool
    """Whether the bound counts every limit on volts (see `choice_limits`)."""
    impossible: bool
    ended: str
    """Why the search ended: proven, no better, time, interrupted or impossible."""
    run_by_run: Verdict
    run_by_run_cost: float
    aside: frozenset[Failure]
    """What fails whatever is chosen: rule and subject."""
    seconds: float
    rounds: int
    problem: "Problem" = field(repr=False)

    @property
    def gap(self) -> float | None:
        """Share of the cost by which a passing choice could be cheaper at the very most."""
        if self.cost is None:
            return None
        return max(0.0, 1 - self.bound / self.cost) if self.cost > 0 else 0.0


@dataclass(slots=True)
class Problem:
    """A plan made ready for choosing: its options, what bounds them, and what was learnt so far."""

    plan: Plan
    rulebook: Rulebook
    wishes: Wishes
    runs: list[int]
    options: Options
    best: Context
    """Every run to choose at its thickest: the highest voltages and least currents there can be."""
    least: Context
    """The same with heaters as what they draw at the least (see `choice_least`)."""
    model: Model
    rows: Rows
    cuts: Cuts
    aside: frozenset[Failure]
    learnt: list[Row] = field(default_factory=list)
    """Cuts from what the checks found."""
    tighter: dict[tuple[str, int, int], float] = field(default_factory=dict)
    """By rule, load and case: volts by which a limit is held tighter in the model, as the exact solution asks."""

    def built(self, picked: Mapping[int, Option]) -> Context:
        """The plan with a choice, solved."""
        return study.build_context(with_options(self.plan, picked), self.rulebook)

    def verdict(self, picked: Mapping[int, Option]) -> Verdict:
        """What the exact solution and the checks say of a choice."""
        return Verdict(self.built(picked), picked, self.aside, self.wishes.drop_factor)

    def bound_rows(self) -> list[Row]:
        """Limits that every passing choice keeps, at the least currents."""
        return [row for row in (*self._rows(self.least, tree=True), *self.learnt) if row.proven]

    def holding_rows(self, context: Context) -> list[Row]:
        """All limits at the currents of a solved choice."""
        return [*self._rows(context, tree=False), *self.learnt]

    def _rows(self, context: Context, *, tree: bool) -> list[Row]:
        currents: dict[tuple[int, Mode], Currents] = {}
        found = []
        for limit in limits(context, self.wishes.drop_factor):
            solution = context.cases[limit.case].solutions[limit.mode]
            if not limit.proven:
                if not tree:
                    found.append(self.rows.row(limit, solution, None, self._tighter(limit)))
                continue
            key = limit.case, limit.mode
            if key not in currents:
                currents[key] = Currents.of(solution)
            found.append(self.rows.row(limit, solution, currents[key], 0.0 if tree else self._tighter(limit)))
        return found

    def _tighter(self, limit: Limit) -> float:
        return self.tighter.get((limit.rule, limit.load, limit.case), 0.0)

    def without(self, rule: str) -> bool:
        """Take a rule out of the model and out of the verdicts; False where the model had no row of it."""
        kept = [row for row in self.model.rows if row.text != rule]
        changed, self.model.rows = len(kept) < len(self.model.rows), kept
        self.aside |= {(rule, run.name) for run in self.plan.runs} if changed else set()
        return changed

    def learn(self, verdict: Verdict, *, tighten: bool) -> bool:
        """Put into the model what failed; False where nothing new could be learnt.

        Limits are tightened only for a choice made at currents close to its own: others come out at new currents.
        """
        for limit, volts in verdict.excess.items() if tighten else ():
            key = limit.rule, limit.load, limit.case
            self.tighter[key] = self.tighter.get(key, 0.0) + _OVER * volts + 1e-7
        cuts = self.cuts.of(verdict)
        self.learnt += cuts
        return bool(verdict.excess) or bool(cuts)


def prepare(plan: Plan, rulebook: Rulebook, wishes: Wishes) -> Problem:
    """Make a plan ready for choosing. Raises ChoiceError where there is nothing to choose."""
    runs = chosen_runs(plan, wishes)
    if not runs:
        raise ChoiceError(
            "every run of the plan states its size", 'size = "free" for a run, or no size; or choose all runs (--all)'
        )
    sizes = sizes_for(plan, rulebook, wishes)
    thick = interim.with_sizes(plan, {plan.runs[index].name: _thickest(plan, index, sizes) for index in runs})
    places = seats(study.build_context(thick, rulebook), plan, runs, wishes)
    best = study.build_context(seated(thick, places), rulebook)
    least = at_least(best, wishes.drop_factor)
    options = Builder(least, wishes, runs, sizes).options(plan, places)
    behind: dict[int, list[int]] = {}
    for index in runs:
        for guard in guards_to_choose(best, index, places):
            behind.setdefault(guard.run, []).append(index)
    fixed = frozenset(run.size.name for i, run in enumerate(plan.runs) if run.size is not None and i not in runs)
    rows = Rows(options)
    model = Model(options, links(options, behind), wishes.most_sizes, wishes.size_cost, fixed)
    problem = Problem(plan, rulebook, wishes, runs, options, best, least, model, rows, Cuts(rows), frozenset())
    if all(options.by_run.values()):
        problem.aside = _aside(problem)
        model.rows += FaultRows(best, options, rows.places, problem.aside, frozenset(places)).rows()
    return problem


def _thickest(plan: Plan, index: int, sizes: tuple[Size, ...]) -> Size:
    ends = (plan.runs[index].from_point, plan.runs[index].to_point)
    most = [one.largest_size.area_mm2 for one in plan.points if one.name in ends and one.largest_size is not None]
    return max((size for size in sizes if size.area_mm2 <= min(most, default=size.area_mm2) * (1 + 1e-9)),
               key=lambda size: size.area_mm2, default=sizes[0])  # fmt: skip


def _aside(problem: Problem) -> frozenset[Failure]:
    """What fails with the thinnest options and with the thickest, at the lowest and at the highest ratings."""
    by_run = problem.options.by_run
    thinnest = {run: min(mine, key=lambda one: (one.area_mm2, one.rating_A or 0.0)) for run, mine in by_run.items()}
    found = failures(problem.built(thinnest))
    if not found:
        return found
    thickest = {run: max(mine, key=lambda one: (one.area_mm2, -(one.rating_A or 0.0))) for run, mine in by_run.items()}
    return found & failures(problem.built(thickest))


def choose(plan: Plan, rulebook: Rulebook, wishes: Wishes, report: Report = lambda progress: None) -> Choice:
    """Choose the cables of a plan. Ends early, with the best so far, when interrupted. Raises as `prepare` does."""
    begun = time.monotonic()
    report(Progress("Finding what may be chosen", None, None))
    search = _Search(prepare(plan, rulebook, wishes), begun, report)
    try:
        search.run()
    except KeyboardInterrupt:
        search.ended = "interrupted"
    return search.choice()


class _Search:
    """The turns of a search, with the best that was found."""

    def __init__(self, problem: Problem, begun: float, report: Report) -> None:
        self.problem, self.begun, self.report = problem, begun, report
        self.picked: Mapping[int, Option] | None = None
        self.verdict: Verdict | None = None
        self.cost, self.bound, self.rounds = float("inf"), 0.0, 0
        self.ended, self.impossible = "no better", False
        self.sharp: list[Row] = []
        self.exact = False
        self.run_by_run, self.run_by_run_cost = self._run_by_run()

    @property
    def left_s(self) -> float:
        """Time that is left."""
        return self.problem.wishes.time_limit_s - (time.monotonic() - self.begun)

    def _run_by_run(self) -> tuple[Verdict, float]:
        """The method of the trade, run by run, from the same sizes; it is the answer to begin with where it passes."""
        problem = self.problem
        bare = with_free(problem.plan, problem.runs)
        sizes = interim.sizes(bare, problem.rulebook)
        picked = {}
        for index in problem.runs:
            mine, wanted = problem.options.by_run[index], sizes[bare.runs[index].name]
            enough = [one for one in mine if one.size.area_mm2 >= wanted.area_mm2 * (1 - 1e-9)]
            if mine:
                picked[index] = min(enough, key=lambda one: one.cost) if enough else mine[-1]
        verdict = problem.verdict(picked)
        cost = problem.model.cost_of(picked)
        if all(problem.options.by_run.values()) and self._many_enough(picked) and verdict.holds:
            self._keep(picked, verdict, cost)
        return verdict, cost

    def _many_enough(self, picked: Mapping[int, Option]) -> bool:
        most = self.problem.wishes.most_sizes
        names = {one.size.name for one in picked.values()} | self.problem.model.present
        return most is None or len(names) <= most

    def _keep(self, picked: Mapping[int, Option], verdict: Verdict, cost: float) -> bool:
        """Keep a choice that passes where it is the best so far; whether it is."""
        better = cost < self.cost
        if better:
            self.picked, self.verdict, self.cost = picked, verdict, cost
        return better

    def run(self) -> None:
        """Turn by turn until proven, or no better choice turns up."""
        problem = self.problem
        answer = self._bound() if all(problem.options.by_run.values()) else None
        if answer is not None and answer.impossible and problem.without(_INTERRUPTING):
            answer = self._bound()
        if answer is None or answer.impossible:
            self.impossible, self.ended = True, "impossible"
            return
        picked: Mapping[int, Option] | None = answer.picked
        while picked is not None and self.rounds < _ROUNDS and not self._done():
            picked = self._turn(picked)
        self._done()

    def _turn(self, picked: Mapping[int, Option]) -> Mapping[int, Option] | None:
        """Ask about a choice; the next one to ask about, or None where there is none."""
        self.rounds += 1
        verdict = self.problem.verdict(picked)
        if not verdict.holds:
            learnt = self.problem.learn(verdict, tighten=self.rounds > 1)
            return self._holding(verdict) if learnt else None
        better = self._keep(picked, verdict, self.problem.model.cost_of(dict(picked)))
        self._tell("Checked a choice that passes")
        if self._done():
            return None
        return self._sharper() if better or self.rounds == 1 else self._exactly()

    def _done(self) -> bool:
        if self.cost < float("inf") and 1 - self.bound / max(self.cost, 1e-12) <= self.problem.wishes.gap + _ROUNDING:
            self.ended = "proven"
            return True
        if self.left_s <= 0:
            self.ended = "time"
        return self.left_s <= 0

    def _bound(self) -> Answer:
        """The cheapest choice within what every passing choice keeps."""
        self._tell("Looking for a bound")
        answer = self.problem.model.solve(self.problem.bound_rows(), self.problem.wishes.gap / 4, self.left_s)
        self.bound = max(self.bound, answer.bound)
        return answer

    def _sharper(self) -> Mapping[int, Option] | None:
        """A bound that counts on the choice known, and the choice that it comes from, which may pass as well."""
        problem, verdict = self.problem, self.verdict
        assert verdict is not None
        self._tell("Looking for a sharper bound")
        rows, gap = problem.bound_rows(), problem.wishes.gap
        starts = np.cumsum([0, *map(len, problem.options.by_run.values())])[:-1]
        within = Within.of(problem.model, rows, self.cost)
        for _ in range(_RAISES):
            sharper = Sharper(problem.rows, problem.least, verdict.context, within.kept, problem.wishes.drop_factor)
            every = list(sharper.every())
            higher = [*rows, *raised(every, within, starts)]
            within = Within.of(problem.model, higher, self.cost)
        out = kept_only(problem.options, within.kept, problem.rows.places)
        self.sharp = [*higher, *out, *every]
        answer = problem.model.solve([*higher, *out], gap / 4, self.left_s)
        self.bound = max(self.bound, self.cost if answer.impossible else min(answer.bound, self.cost))
        return answer.picked

    def _exactly(self) -> Mapping[int, Option] | None:
        """The last bound, with the currents themselves as variables: slower, and all but exact. Looked for once."""
        if self.exact or not self.sharp:
            return None
        self.exact = True
        self._tell("Looking for the last bound")
        target = self.cost * (1 - self.problem.wishes.gap)
        answer = self.problem.model.solve(self.sharp, self.problem.wishes.gap / 2, self.left_s, below=target)
        # Nothing costs so little: then none is cheaper than that.
        self.bound = max(self.bound, target if answer.impossible else min(answer.bound, target))
        return answer.picked

    def _holding(self, verdict: Verdict) -> Mapping[int, Option] | None:
        """The cheapest choice at the currents of the last one, held to what was learnt."""
        self._tell("Looking for the cheapest choice")
        rows = self.problem.holding_rows(verdict.context)
        return self.problem.model.solve(rows, self.problem.wishes.gap / 4, self.left_s).picked

    def _tell(self, doing: str) -> None:
        cost = self.cost if self.cost < float("inf") else None
        self.report(Progress(doing, cost, self.bound or None))

    def choice(self) -> Choice:
        """What the search came to."""
        problem, found = self.problem, self.picked is not None
        every = limits(problem.least, problem.wishes.drop_factor)
        return Choice(
            problem.plan, problem.wishes, problem.options, problem.runs, self.picked, self.verdict,
            self.cost if found else None, min(self.bound, self.cost), all(one.proven for one in every),
            self.impossible, self.ended, self.run_by_run, self.run_by_run_cost, self._left_failing(),
            time.monotonic() - self.begun, self.rounds, problem,
        )  # fmt: skip

    def _left_failing(self) -> frozenset[Failure]:
        """What fails in the choice, or run by run where there is none, and is not for a choice to cure."""
        shown = self.verdict or self.run_by_run
        return failures(shown.context) & self.problem.aside if self.problem.aside else frozenset()


def with_free(plan: Plan, runs: list[int]) -> Plan:
    """The plan with the sizes of some runs left open."""
    changed = (run.model_copy(update={"size": None}) if i in runs else run for i, run in enumerate(plan.runs))
    return plan.model_copy(update={"runs": tuple(changed)})


def metal_kg(plan: Plan, rulebook: Rulebook) -> float:
    """Metal in all conductors of a plan."""
    return sum(cable_cost(run, rulebook, Wishes()) for run in plan.runs if run.size is not None)
