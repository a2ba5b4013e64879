"""The voltage at each load against what the load tolerates, and cases that give way."""

from collections.abc import Iterator

import numpy as np

from farvolt.checks.drop import working
from farvolt.checks.registry import check
from farvolt.context import CaseStudy, Context
from farvolt.results import Finding
from farvolt.units import number

_TOLERATED = "the load's own range, as the plan states it"
_PHYSICS = "Kirchhoff's laws; the highest power a source can deliver through a resistance is E²/4R"


@check("volts.low", title="Lowest voltage at each load, with hot conductors")
def low(context: Context) -> Iterator[Finding]:
    """Loads that see less than their `min_volts` with conductors at their insulation's rating."""
    limits = np.array([load.min_volts.si if load.min_volts else np.nan for load in context.plan.loads])
    for load, case, volts in _worst(context, "hot", limits, sign=1.0):
        yield _finding(context, "volts.low", load, case, volts, float(limits[load]))


@check("volts.high", title="Highest voltage at each load, with cold conductors")
def high(context: Context) -> Iterator[Finding]:
    """Loads that see more than their `max_volts` with conductors at ambient."""
    limits = np.array([load.max_volts.si if load.max_volts else np.nan for load in context.plan.loads])
    for load, case, volts in _worst(context, "cold", limits, sign=-1.0):
        yield _finding(context, "volts.high", load, case, volts, float(limits[load]))


def _worst(context: Context, mode: str, limits: np.ndarray, sign: float) -> Iterator[tuple[int, int, float]]:
    """For each load beyond its limit, the case where it is farthest beyond. High volts count for loads that are off."""
    rows = []
    for one in context.cases:
        solution = one.solutions[mode]  # type: ignore[index]  # the two callers name modes
        on = np.array([sign < 0 or one.case.share(load.name) > 0 for load in context.plan.loads], dtype=bool)
        rows.append(np.where(on & solution.state.solved, solution.load_volts, np.nan))
    table = np.array(rows).reshape(len(rows), -1)
    for load in range(table.shape[1]):
        short = sign * (limits[load] - table[:, load])
        if np.any(short > 1e-9):
            case = int(np.nanargmax(short))
            yield load, case, float(table[case, load])


def _finding(context: Context, rule: str, load: int, case: int, volts: float, limit: float) -> Finding:
    entry, one = context.plan.loads[load], context.cases[case]
    low = rule == "volts.low"
    solution = one.solutions["hot" if low else "cold"]
    bound = "at least" if low else "at most"
    remedy = (
        "thicker or shorter cable on its way, or a load that works at less"
        if low
        else "a lower charging voltage, a converter before this load, or a load that stands more; thinner cable is no cure"
    )
    return Finding(
        rule=rule,
        severity="fail",
        subject=entry.name,
        kind="load",
        case=one.name,
        value=volts,
        limit=limit,
        unit="V",
        message=f'"{entry.name}" sees {number(volts, 4)} V; it needs {bound} {number(limit, 4)} V',
        basis=_TOLERATED,
        working=tuple(working(one, solution, load)),
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
    named = f'; "{weakest}" falls first' if weakest else ""
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
