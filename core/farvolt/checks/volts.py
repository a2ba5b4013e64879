"""The voltage at each load against what the load tolerates, and cases that give way."""

from collections.abc import Iterator

import numpy as np

from farvolt.checks.drop import loads_on, working
from farvolt.checks.enlarge import Aim, Remedies
from farvolt.checks.registry import apart, check
from farvolt.context import CaseStudy, Context, label
from farvolt.network import Floats
from farvolt.results import Finding
from farvolt.solution import Solution
from farvolt.units import number

_TOLERATED = "the load's own range, as the plan states it"
_PHYSICS = "Kirchhoff's laws; the highest power a source can deliver through a resistance is E²/4R"


@check("volts.low", title="Lowest voltage at each load, with hot conductors")
def low(context: Context) -> Iterator[Finding]:
    """Loads that see less than their `min_volts` with conductors at their insulation's rating."""
    limits = np.array([load.min_volts.si if load.min_volts else np.nan for load in context.plan.loads])
    table = np.array([np.where(loads_on(one.solutions["hot"]), one.solutions["hot"].load_volts, np.nan)
                      for one in context.cases]).reshape(len(context.cases), -1)  # fmt: skip
    remedies = Remedies(context)
    for load, cases in _beyond(limits - table):
        worst = cases[0]
        volts, limit = float(table[worst, load]), float(limits[load])
        yield _finding(context, "volts.low", load, worst, volts, limit, _thicker(context, load, cases, limit, remedies))


@check("volts.high", title="Highest voltage at each load, with cold conductors")
def high(context: Context) -> Iterator[Finding]:
    """Loads that see more than their `max_volts` with conductors at ambient; one that is off sees its voltage too."""
    limits = np.array([load.max_volts.si if load.max_volts else np.nan for load in context.plan.loads])
    solutions = [one.solutions["cold"] for one in context.cases]
    table = np.array([np.where(one.state.solved, one.load_volts, np.nan) for one in solutions]).reshape(
        len(context.cases), -1
    )
    for load, cases in _beyond(table - limits):
        worst = cases[0]
        volts, limit = float(table[worst, load]), float(limits[load])
        yield _finding(context, "volts.high", load, worst, volts, limit, _lower(solutions[worst], limit))


def _beyond(excess: Floats) -> Iterator[tuple[int, list[int]]]:
    """Each load beyond its limit, with the cases where it is, the worst first. `excess` is over (case, load)."""
    for load in np.flatnonzero(np.any(excess > 1e-9, axis=0)).tolist():
        cases = np.flatnonzero(excess[:, load] > 1e-9)
        yield load, cases[np.argsort(-excess[cases, load], kind="stable")].tolist()


def _thicker(context: Context, load: int, cases: list[int], limit: float, remedies: Remedies) -> str:
    """The cable that lifts a load to its lowest voltage, or what stands in the way."""
    solution = context.cases[cases[0]].solutions["hot"]
    way = solution.way(load)
    port = solution.references[load]
    if port is not None:
        c, volts = solution.condition, solution.state.volts
        at_source = float(volts[c.source_a[port]] - volts[c.source_b[port]])
        if at_source < limit:
            source = context.plan.sources[port].name
            told = f'"{source}" itself is at {number(at_source, 4)} V here: no cable cures that'
            return f"{told}; more charge in it, a larger source, or a load that works at less"
    aim = Aim(load, "hot", cases[0], tuple(cases), way, lambda found: _volts(found, load), limit, 1.0, "V")
    return remedies.for_load(aim)


def _volts(solution: Solution, load: int) -> float:
    """Volts at a load; minus infinity where the case gives way."""
    return float(solution.load_volts[load]) if solution.state.solved else float("-inf")


def _lower(solution: Solution, limit: float) -> str:
    """What lowers the voltage at a load: the source that stands above the limit, named."""
    c, volts, sources = solution.condition, solution.state.volts, solution.network.plan.sources
    at = volts[c.source_a[: len(sources)]] - volts[c.source_b[: len(sources)]]
    above = [f'"{source.name}"' for port, source in enumerate(sources) if at[port] > limit and solution.working(port)]
    lower = f"a lower voltage of {' or '.join(above)}" if above else "a lower charging voltage"
    return f"{lower}, a converter before this load, or a load that stands more; thinner cable is no cure"


def _finding(context: Context, rule: str, load: int, case: int, volts: float, limit: float, remedy: str) -> Finding:
    entry, one = context.plan.loads[load], context.cases[case]
    low = rule == "volts.low"
    solution = one.solutions["hot" if low else "cold"]
    told = apart(volts, limit, 4)
    bound, sign = ("at least", "<") if low else ("at most", ">")
    return Finding(
        rule=rule,
        severity="fail",
        subject=entry.name,
        kind="load",
        case=one.name,
        value=volts,
        limit=limit,
        unit="V",
        message=f'"{entry.name}" sees {told} V; it needs {bound} {number(limit, 4)} V',
        basis=_TOLERATED,
        working=(*working(one, solution, load), f"{told} V {sign} {number(limit, 4)} V"),
        remedy=remedy,
    )


@check("volts.collapse", title="Cases in which the network gives way")
def collapse(context: Context) -> Iterator[Finding]:
    """Cases whose loads ask for more than can be delivered, at any of the conductor temperatures."""
    for one in context.cases:
        failed = [mode for mode, solution in one.solutions.items() if not solution.state.solved]
        if failed:
            mode = "plan" if "plan" in failed else failed[0]
            yield _collapse(context, one, mode)


def _collapse(context: Context, one: CaseStudy, mode: str) -> Finding:
    solution = one.solutions[mode]  # type: ignore[index]  # a mode of this very mapping
    state = solution.state
    weakest = context.plan.loads[state.weakest].name if state.weakest is not None else None
    named = f'; "{weakest}" falls first{_narrowest(solution)}' if weakest else ""
    when = f" with conductors {solution.conductors.text}" if mode != "plan" else ""
    return Finding(
        rule="volts.collapse",
        severity="fail",
        subject=one.name,
        kind="case",
        case=one.name,
        value=state.share_held,
        limit=1.0,
        unit=None,
        message=f"The case gives way at {number(100 * state.share_held)} % of its loads{when}{named}",
        basis=_PHYSICS,
        working=(
            f"Loads raised together from zero: the last share that holds is {number(state.share_held, 4)}.",
            "Above it no voltage satisfies all loads at once; no voltages are reported for this case.",
        ),
        remedy="fewer loads at once, thicker cable to the load named, more source capacity, or a higher system voltage",
    )


def _narrowest(solution: Solution) -> str:
    """The run that takes most of the weakest load's voltage where the case gives way."""
    steps = [step for step in solution.way(solution.state.weakest or 0) if step.run >= 0]
    if not steps:
        return ""
    drops: dict[int, float] = {}
    for step in steps:
        drops[step.run] = drops.get(step.run, 0.0) + step.drop_V
    run = solution.network.plan.runs[max(drops, key=lambda index: drops[index])]
    return f", most of its drop in {label(run)}"


@check("volts.range-unstated", title="Loads whose tolerated range is not stated")
def unstated(context: Context) -> Iterator[Finding]:
    """Says once for how many loads volts.low or volts.high could not be made."""
    lows = [load.name for load in context.plan.loads if load.min_volts is None]
    highs = [load.name for load in context.plan.loads if load.max_volts is None]
    if not lows and not highs:
        return
    yield Finding(
        rule="volts.range-unstated",
        severity="note",
        subject=context.plan.plan.name,
        kind="plan",
        case=None,
        value=None,
        limit=None,
        unit=None,
        message=f"Not checked: the lowest voltage of {len(lows)} and the highest of {len(highs)} "
        f"of {len(context.plan.loads)} loads, which state no min_volts or max_volts",
        basis=_TOLERATED,
        working=(f"No min_volts: {_some(lows)}", f"No max_volts: {_some(highs)}"),
        remedy="state min_volts and max_volts from each load's data sheet",
    )


def _some(names: list[str]) -> str:
    listed = ", ".join(f'"{name}"' for name in names[:12])
    return (listed + (f" and {len(names) - 12} more" if len(names) > 12 else "")) or "none"
