"""The second pass: which loads let go when each below its cut-out does, and which hunt between on and off."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from farvolt.plan import Case, Plan
from farvolt.solution import Solution

Solve = Callable[[Case], Solution]
"""Solve the network with the loads of a changed case."""


@dataclass(frozen=True, slots=True)
class LettingGo:
    """Where a case settles: `shed` stay off, `hunting` switch off and on without end."""

    shed: tuple[str, ...]
    hunting: tuple[str, ...]
    rounds: int


def letting_go(plan: Plan, case: Case, solve: Solve) -> LettingGo:
    """Let the load that is farthest below its cut-out go, bring one back that stands above its recovery, and so on.

    One load changes at a time, as the first to act changes what the others see. A state that comes again means that
    the loads which changed since then hunt. A load without a recovery voltage stays off.
    """
    on = frozenset(load.name for load in plan.loads if case.share(load.name) > 0)
    off: frozenset[str] = frozenset()
    history: list[frozenset[str]] = []
    while off not in history:
        history.append(off)
        shares = {name: case.share(name) for name in on - off}
        changed = _change(plan, solve(case.model_copy(update={"loads": shares})), on, off)
        if changed is None:
            return LettingGo(tuple(sorted(off)), (), len(history))
        off = off ^ {changed}
    cycle = history[history.index(off) :]
    always = frozenset.intersection(*cycle)
    return LettingGo(tuple(sorted(always)), tuple(sorted(frozenset.union(*cycle) - always)), len(history))


def _change(plan: Plan, solution: Solution, on: frozenset[str], off: frozenset[str]) -> str | None:
    """The next load to let go or to come back, or None where all stay as they are."""
    volts = np.nan_to_num(solution.load_volts)
    below, above = {}, {}
    for index, load in enumerate(plan.loads):
        if load.name not in on or load.cut_out is None:
            continue
        if load.name not in off and volts[index] < load.cut_out.si:
            below[load.name] = volts[index] / load.cut_out.si
        elif (
            load.name in off and load.recovery is not None and solution.state.solved and volts[index] > load.recovery.si
        ):
            above[load.name] = volts[index] / load.recovery.si
    if below:
        return min(below, key=lambda name: float(below[name]))
    return max(above, key=lambda name: float(above[name])) if above else None
