"""Whether a protection opens before the one upstream does, told from their time-current bands."""

import math
from collections.abc import Iterator

import numpy as np

from farvolt.checks.registry import check, run_finding
from farvolt.checks.ways import PRACTICE, exempt, limited_A
from farvolt.context import Context, label
from farvolt.plan import Protection
from farvolt.results import Finding
from farvolt.sections import Guard
from farvolt.units import number

SHORT_S = 0.1
"""Below so short a time the heat let through decides, above it the time itself (common practice)."""

_SHARES = np.linspace(0, 1, 60)
"""Currents looked at between the least and the largest, on a logarithmic scale."""


def selective_up_to_A(lower: Protection, upper: Protection, most_A: float) -> float:
    """The largest current up to which `lower` has surely opened before `upper` starts to, at most `most_A`.

    From the bands: the greatest time of the lower against the least time of the upper, and for openings faster
    than `SHORT_S` the I2t let through against the I2t that the upper holds. Infinite where they never meet. Zero where
    the bands overlap already just above the lower rating.
    """
    start = min(lower.rating.si, most_A) * 1.0001
    currents = start * (max(most_A, start) / start) ** _SHARES
    holds = upper.kind.band.least_over(currents / upper.rating.si)
    opens = lower.kind.band.greatest_over(currents / lower.rating.si)
    slow = (opens > SHORT_S) & (holds > SHORT_S)
    for place in np.flatnonzero(~np.isinf(holds) & (opens >= holds)).tolist():
        amps = float(currents[place])
        if slow[place] or not _lets_less_through(lower, upper, amps):
            return amps if place else 0.0
    return math.inf


def _lets_less_through(lower: Protection, upper: Protection, amps: float) -> bool:
    return lower.kind.let_through_A2s(amps, lower.rating.si) < upper.kind.holds_A2s(amps, upper.rating.si)


@check("protection.selectivity", title="Each protection against the one upstream of it")
def selectivity(context: Context) -> Iterator[Finding]:
    """One note for each protection that has others behind it: for which of them selectivity is not shown."""
    behind: dict[tuple[int, str], dict[tuple[int, str], tuple[Guard, Guard]]] = {}
    for ways in context.sections.by_run.values():
        for way in ways:
            strong = limited_A(context, way.source) is None
            if strong and way.own and way.guard is not None and way.upstream is not None:
                lower, upper = way.guard, way.upstream
                behind.setdefault(_seat(upper), {})[_seat(lower)] = (lower, upper)
    for pairs in behind.values():
        runs = context.plan.runs
        yield from _of(context, [pair for pair in pairs.values() if not exempt(context, runs[pair[0].run])])


def _seat(guard: Guard) -> tuple[int, str]:
    return guard.run, guard.protection.end


def _of(context: Context, pairs: list[tuple[Guard, Guard]]) -> Iterator[Finding]:
    shown, lines = [], []
    for lower, upper in pairs:
        most = _most_A(context, lower)
        reach = selective_up_to_A(lower.protection, upper.protection, most)
        name = f"the {lower.protection.rating} on {label(context.plan.runs[lower.run])}"
        if math.isinf(reach):
            shown.append(name)
        else:
            up_to = f"shown up to {number(reach)} A only" if reach else "not shown at any current"
            lines.append(f"{name}: {up_to}; up to {number(most)} A may flow")
    if not lines:
        return
    upper = pairs[0][1]
    run = context.plan.runs[upper.run]
    yield run_finding(
        "protection.selectivity", "note", run, None, None, None,
        f"{label(run)}: its {upper.protection.rating} may open before {len(lines)} of the {len(pairs)} protections "
        "behind it",
        f"{PRACTICE}: bands of time and current that do not overlap",
        (*lines, *((f"Shown for {', '.join(shown)}",) if shown else ())),
        "where only the faulty circuit is to go dark: slower or higher protection upstream, as far as its cable allows",
    )  # fmt: skip


def _most_A(context: Context, guard: Guard) -> float:
    """The largest fault current at a protection; ten times its rating where no source reaches it."""
    run = context.plan.runs[guard.run]
    places = [place for place, one in enumerate(run.protections) if one == guard.protection]
    found = [context.faults.devices.get((guard.run, place)) for place in places]
    return max((one.amps for one in found if one is not None), default=10 * guard.rating_A)
