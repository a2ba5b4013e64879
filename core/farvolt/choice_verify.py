"""A choice held against the exact solution and all checks, and what a failing one teaches the model.

Every failing check becomes a cut: at least one of the options that could cure it has to be taken. Fault currents fall
with every resistance on their way and a conductor withstands more the thicker it is, so that what fails far out fails
with all thinner cables too, and what fails close by fails with all thicker ones before it.
"""

from collections import deque
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import cast

from farvolt import checks
from farvolt.checks.far_end import opening, opens_s
from farvolt.checks.let_through import near_faults
from farvolt.choice_limits import Currents, Limit, Row, Rows, excess_V, limits
from farvolt.choice_options import Option
from farvolt.context import Context
from farvolt.network import FEED, RETURN, Network
from farvolt.results import Finding

RULES = (
    "conductor.ampacity", "conductor.minimum-size", "conductor.fit", "conductor.temperature-rating",
    "protection.missing", "protection.distance", "protection.over-conductor", "protection.under-load",
    "protection.over-load-limit", "protection.interrupting", "protection.voltage-rating", "protection.far-end",
    "protection.let-through",
)  # fmt: skip
"""Rules on which the choice has a bearing, beside those on volts."""

_ALLOWED_V = 1e-9

_MORE = 1.05

_OTHERWISE = ("protection.far-end", "protection.let-through", "conductor.ampacity")
"""Rules that other changes may cure too: harm may rise and fall with the fault current, and a current falls where the
voltage rises."""

_TREES: dict[object, object] = {}

Failure = tuple[str, str]
"""A rule and its subject."""


@dataclass(frozen=True)
class Verdict:
    """A choice with what the exact solution and the checks say of it."""

    context: Context
    options: Mapping[int, Option]
    aside: frozenset[Failure]
    drop_factor: float = 1.0

    @cached_property
    def excess(self) -> dict[Limit, float]:
        """Limits on volts that are broken, with by how many volts."""
        found = {one: excess_V(one, self.context) for one in limits(self.context, self.drop_factor)}
        return {one: volts for one, volts in found.items() if volts > _ALLOWED_V}

    @cached_property
    def fails(self) -> tuple[Finding, ...]:
        """Findings of the other checks that fail, without what no choice cures."""
        return tuple(one for one in failing(self.context) if (one.rule, one.subject) not in self.aside)

    @property
    def holds(self) -> bool:
        """Whether the choice passes."""
        solved = all(found.state.solved for one in self.context.cases for found in one.solutions.values())
        return solved and not self.excess and not self.fails


def failing(context: Context) -> list[Finding]:
    """What fails under the rules that a choice has a bearing on; a rating above the cable's ampacity also where it
    is only warned of."""
    found = checks.run_some(context, RULES)
    return [
        one
        for one in found
        if one.severity == "fail" or (one.severity == "warn" and one.rule == "protection.over-conductor"
                                      and "together" not in one.message)
    ]  # fmt: skip


def failures(context: Context) -> frozenset[Failure]:
    """The same as rule and subject."""
    return frozenset((one.rule, one.subject) for one in failing(context))


class Cuts:
    """Makes cuts of what fails, for some options."""

    def __init__(self, rows: Rows) -> None:
        self.rows, self.options, self.places = rows, rows.options, rows.places

    def of(self, verdict: Verdict) -> list[Row]:
        """A cut for each check that fails, as far as the choice has a bearing on it."""
        context, runs = verdict.context, {run.name: place for place, run in enumerate(verdict.context.plan.runs)}
        found: list[Row | None] = []
        rules = {one.rule for one in verdict.fails}
        if "protection.far-end" in rules:
            found += self._far_ends(verdict)
        if "protection.let-through" in rules:
            found += self._near(verdict)
        for one in verdict.fails:
            run = runs.get(one.subject, -1)
            if one.rule == "protection.interrupting":
                found.append(self._thinner_before(verdict, context, run))
            elif one.rule == "protection.under-load":
                found.append(self._less_current(verdict, one, run))
            elif one.rule not in ("protection.far-end", "protection.let-through"):
                found.append(self._row(one.rule, [(run, _thicker), (run, _less_rating)], verdict.options))
        return [one for one in found if one is not None]

    def _far_ends(self, verdict: Verdict) -> Iterator[Row | None]:
        context = verdict.context
        rule = context.rulebook.protection.fault_damage
        for far in context.faults.far_ends:
            found = opening(context, far, far.stretch.guard.protection)
            seat = context.plan.runs[far.stretch.guard.run].name
            if found is None or found.in_time or not found.damaging or rule is None or rule.severity != "fail":
                continue
            if ("protection.far-end", seat) in verdict.aside:
                continue
            way = [run for run in runs_on_way(context, far.stretch.source, found.run) if run != found.run]
            kind, larger = far.stretch.guard.protection.kind, _MORE * far.fault.amps
            # Whether a larger fault current does less harm: it opens the protection so much sooner.
            sooner = opens_s(kind, larger, found.rating_A) * _MORE**2 < found.opens_s
            upstream = _thicker if sooner else _thinner
            better = [(found.run, _thicker), (far.stretch.guard.run, _less_rating), *((run, upstream) for run in way)]
            yield self._row("protection.far-end", better, verdict.options)

    def _near(self, verdict: Verdict) -> Iterator[Row | None]:
        context = verdict.context
        for one in near_faults(context):
            seat = context.plan.runs[one.guard.run].name
            out = one.estimated or ("protection.let-through", seat) in verdict.aside
            if out or one.holds(one.guard.protection):
                continue
            before = [run for run in self._before(context, one.guard.run) if run != one.run]
            better = [(one.run, _thicker), (one.guard.run, _less_rating), *((run, _thinner) for run in before)]
            yield self._row("protection.let-through", better, verdict.options)

    def _less_current(self, verdict: Verdict, finding: Finding, run: int) -> Row | None:
        """What brings a current down to a rating: a higher rating, or less drop on the way of those that draw it.

        A load of constant power draws P/u, so P/u² less for each volt that it sees more.
        """
        context = verdict.context
        case = next((one for one in context.cases if one.name == finding.case), None)
        if case is None or finding.value is None or finding.limit is None or not finding.value > finding.limit:
            return None
        solution = case.solutions["hot"]
        currents, coefficients, now_A = Currents.of(solution), dict[int, float](), 0.0
        taken = {place for mine, one in verdict.options.items() for place in self._place_of(mine, one)}
        name = context.plan.runs[run].name
        for load in currents.beyond.get(("run", name, "feed"), {}):
            slope = float(solution.condition.load_W[load] / solution.load_volts[load] ** 2)
            for place, volts in self.rows.drop(load, solution, currents)[0].items():
                coefficients[place] = coefficients.get(place, 0.0) + slope * volts
                now_A += slope * volts if place in taken else 0.0
        over_A = finding.value - finding.limit
        for place, one in zip(self.places.get(run, []), self.options.by_run.get(run, []), strict=True):
            if one.rating_A is not None and one.rating_A >= finding.value:
                coefficients[place] = coefficients.get(place, 0.0) - now_A - over_A
        most = now_A - _MORE * over_A
        return Row(coefficients, most, text=finding.rule, proven=False) if coefficients else None

    def _place_of(self, run: int, option: Option) -> list[int]:
        pairs = zip(self.places.get(run, []), self.options.by_run.get(run, []), strict=True)
        return [place for place, one in pairs if one is option]

    def _thinner_before(self, verdict: Verdict, context: Context, run: int) -> Row | None:
        before = [(other, _thinner) for other in self._before(context, run)]
        return self._row("protection.interrupting", before, verdict.options) if run >= 0 else None

    def _before(self, context: Context, run: int) -> list[int]:
        """The runs to choose between the sources that feed a run and the run, itself included."""
        sources = {one.source for one in context.sections.by_run.get(run, [])}
        every = dict.fromkeys(other for source in sources for other in runs_on_way(context, source, run))
        return list(every)

    def _row(self, rule: str, better: Iterable[tuple[int, "Better"]], now: Mapping[int, Option]) -> Row | None:
        """At least one of these runs takes a better option than it has now; None where none has a say."""
        coefficients: dict[int, float] = {}
        for run, is_better in better:
            for place, option in zip(self.places.get(run, []), self.options.by_run.get(run, []), strict=True):
                if is_better(option, now[run]):
                    coefficients[place] = -1.0
        mine = any(run in self.options.by_run for run, _ in better)
        proven = rule not in _OTHERWISE
        return Row(coefficients, -1.0, text=rule, proven=proven) if mine else None


Better = Callable[[Option, Option], bool]


def _thicker(one: Option, now: Option) -> bool:
    return one.area_mm2 > now.area_mm2 * (1 + 1e-9)


def _thinner(one: Option, now: Option) -> bool:
    return one.area_mm2 < now.area_mm2 * (1 - 1e-9)


def _less_rating(one: Option, now: Option) -> bool:
    return one.rating_A is not None and now.rating_A is not None and one.rating_A < now.rating_A


def runs_on_way(context: Context, source: int, run: int) -> list[int]:
    """The runs on the shortest way from a source to the far end of a run and back, the run itself included."""
    network, entry = context.network, context.plan.runs[run]
    at, found = context.plan.sources[source].at, dict[int, None]()
    for pole, node in ((FEED, network.feed), (RETURN, network.ret)):
        parents = _tree(network, node(at), pole)
        ends = [node(name) for name in (entry.from_point, entry.to_point) if (name, pole) in network.nodes]
        ways = sorted((_back(parents, node(at), end) for end in ends), key=len)
        found |= dict.fromkeys(ways[-1] if ways else [])
    found[run] = None
    return list(found)


def _tree(network: Network, start: int, pole: int) -> Mapping[int, tuple[int, int]]:
    """The tree of `_grown`, kept for the network asked about last: many runs are asked about in turn."""
    if _TREES.get("of") is not network:
        _TREES.clear()
        _TREES["of"] = network
    found = _TREES.get((start, pole))
    if found is None:
        found = _TREES[start, pole] = _grown(network, start, pole)
    return cast(Mapping[int, tuple[int, int]], found)


def _grown(network: Network, start: int, pole: int) -> dict[int, tuple[int, int]]:
    """Breadth-first tree of one pole: node to (run or -1, node before)."""
    at: dict[int, list[tuple[int, int]]] = {}
    for a, b, run, of in zip(network.a.tolist(), network.b.tolist(), network.run.tolist(), network.pole.tolist(),
                             strict=True):  # fmt: skip
        if of == pole or of not in (FEED, RETURN):
            at.setdefault(a, []).append((run, b))
            at.setdefault(b, []).append((run, a))
    parents: dict[int, tuple[int, int]] = {start: (-1, start)}
    queue = deque([start])
    while queue:
        node = queue.popleft()
        for run, other in at.get(node, ()):
            if other not in parents:
                parents[other] = (run, node)
                queue.append(other)
    return parents


def _back(parents: Mapping[int, tuple[int, int]], start: int, node: int) -> list[int]:
    runs: list[int] = []
    while node != start and node in parents:
        run, node = parents[node]
        if run >= 0:
            runs.append(run)
    return runs
