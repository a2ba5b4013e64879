"""The starts of loads against the opening time of each protection that they pass."""

from collections.abc import Iterator
from dataclasses import dataclass

from farvolt.checks.demand import Demands
from farvolt.checks.derating import carried_share, derated
from farvolt.checks.registry import check, run_finding
from farvolt.checks.under_load import protected_by, rating_for
from farvolt.checks.ways import PRACTICE
from farvolt.context import Context, label
from farvolt.network import FEED, RETURN, Floats
from farvolt.plan import Case, Load, Protection
from farvolt.results import Finding
from farvolt.started import MOST
from farvolt.units import number

ASSUMED_S = 1.0
"""How long a start is taken to last where the plan does not say (common practice: motors are up to speed by then)."""


@dataclass(frozen=True, slots=True)
class _Start:
    """Loads that start in a case, and the current of each run meanwhile, by pole."""

    case: Case
    loads: tuple[Load, ...]
    amps: tuple[Floats, Floats]

    @property
    def seconds(self) -> float:
        """How long it lasts: as the longest of its loads."""
        return max(_seconds(load) for load in self.loads)

    @property
    def assumed(self) -> bool:
        """Whether its length is not the plan's."""
        return any(load.surge is not None and load.surge.seconds is None for load in self.loads)


@dataclass(frozen=True, slots=True)
class _Test:
    """One protection in one start."""

    run: int
    one: Protection
    start: _Start
    amps: float
    rating_A: float
    """In its ambient."""

    @property
    def holds_s(self) -> float:
        """How long it surely holds."""
        return self.one.kind.holds_for_s(self.amps, self.rating_A)

    @property
    def opens_s(self) -> float:
        """By when it has surely opened."""
        return self.one.kind.opens_within_s(self.amps, self.rating_A)


@check("protection.under-load", title="Opening time of each protection against the starts of loads")
def starts(context: Context) -> Iterator[Finding]:
    """Protection that may open while a load starts, in any case that has the load on."""
    yield from _not_tried(context)
    yield from _not_solved(context)
    found, demands, behind = list(_starts(context)), Demands(context), protected_by(context)
    for index, run in enumerate(context.plan.runs):
        for one in run.protections:
            pole = FEED if one.pole == "feed" else RETURN
            if demands.worst(index, pole)[0] > one.rating.si * (1 + 1e-9):
                continue  # it carries not even what lasts: said already
            tests = [_test(context, index, one, start, float(start.amps[pole][index])) for start in found]
            worst = min(tests, key=lambda each: each.holds_s / each.start.seconds, default=None)
            if worst is not None and worst.holds_s < worst.start.seconds * (1 - 1e-9):
                yield _may_open(context, worst, behind[id(one)])


def _starts(context: Context) -> Iterator[_Start]:
    """Every start that was solved, with the current of each run."""
    surging = [load for load in context.plan.loads if load.surge is not None]
    for case, solution in context.starts.solved:
        if solution.state.solved:
            loads = tuple(load for load in surging if load.name in case.surge)
            yield _Start(case, loads, (abs(solution.run_amps(FEED)), abs(solution.run_amps(RETURN))))


def _not_tried(context: Context) -> Iterator[Finding]:
    """Of a large plan, or one with very many starts: those that no case asks for, where they were left out."""
    left = context.starts.left_out
    if left:
        names = ", ".join(f'"{name}"' for name in left[:8]) + (", …" if len(left) > 8 else "")
        large = "more than 300 runs" if not context.remedies_are_exact else f"more than {MOST} starts in its cases"
        yield Finding(
            "protection.under-load", "note", context.plan.plan.name, "plan", None, None, None, None,
            f"Not checked against opening times: the start of {names}, which no case asks for",
            f"what this version does in a plan of {large}", (), "a case with surge naming them",
        )  # fmt: skip


def _not_solved(context: Context) -> Iterator[Finding]:
    """Starts alone that the network gives way in, so that no current is known; cases that do are named as such."""
    told = {one.name for one in context.cases if not one.solutions["hot"].state.solved}
    failed = [case for case, one in context.starts.solved if not one.state.solved and case.name not in told]
    lost = {name: case.name for case in reversed(failed) for name in case.surge}
    if lost:
        told_of = [f'"{name}" in "{case}"' for name, case in lost.items()]
        names = ", ".join(told_of[:8]) + (", …" if len(told_of) > 8 else "")
        yield Finding(
            "protection.under-load", "warn", context.plan.plan.name, "plan", None, None, None, None,
            f"Not verified against opening times: the start of {names}, in which the network gives way",
            f"{PRACTICE}: a start is over before its protection may open", (),
            "thicker cables or a stronger battery, so that the start can be fed",
        )  # fmt: skip


def _test(context: Context, index: int, one: Protection, start: _Start, amps: float) -> _Test:
    share = carried_share(context.plan, context.plan.runs[index], one, start.case)
    return _Test(index, one, start, amps, one.rating.si * share)


def _seconds(load: Load) -> float:
    stated = load.surge.seconds if load.surge is not None else None
    return ASSUMED_S if stated is None else stated


def _may_open(context: Context, test: _Test, behind: list[int]) -> Finding:
    run, one, start, kind = context.plan.runs[test.run], test.one, test.start, test.one.kind
    names, opens = " and ".join(f'"{load.name}"' for load in start.loads), test.opens_s <= start.seconds
    lasts = f"{number(start.seconds)} s" + (", assumed" if start.assumed else "")
    share = test.rating_A / one.rating.si
    what = f"{number(test.amps)} A for {number(start.seconds)} s"
    remedy = rating_for(
        context, behind, one, what, lambda rating: kind.holds_for_s(test.amps, rating * share) >= start.seconds
    )
    unsure = " (provisional)" if kind.provisional else ""
    return run_finding(
        "protection.under-load", "fail" if opens and not start.assumed else "warn", run,
        start.seconds, test.holds_s, "s",
        f"{label(run)}: its {one.rating} {one.type} {'opens' if opens else 'may open'} while {names} starts",
        f"{PRACTICE}: a start is over before its protection may open; {kind.times_basis}{unsure}",
        (derated(context.plan, run, one, start.case),
         f"{number(test.amps, 4)} A / {number(test.rating_A, 4)} A = {number(test.amps / test.rating_A)} times "
         "its rating, with hot conductors",
         f"Holds for {_time(test.holds_s)}, opens within {_time(test.opens_s)}; the start lasts {lasts}"),
        f"{remedy}; or a type that opens more slowly" + ("; state how long the start lasts" if start.assumed else ""),
        start.case.name,
    )  # fmt: skip


def _time(seconds: float) -> str:
    """A time as a working shows it: no end and nothing stated in words."""
    if seconds == 0:
        return "no time that is stated"
    return f"{number(seconds)} s" if seconds < float("inf") else "no time that is stated"
