"""The least currents of loads that draw more at a higher voltage, so that a bound can count on their cases too.

A heater, G·u, draws least where its voltage is lowest. In a choice that passes that is no lower than its limits let it
be, so that it draws no less than G times that. As a load of that constant current it makes a case of which all voltages
are highest with the thickest cables (see `proof`), and no current is less than in that one.
"""

from dataclasses import replace

import numpy as np

from farvolt.choice_limits import limits
from farvolt.context import CaseStudy, Context
from farvolt.network import Floats
from farvolt.operating import KNEE_SHARE
from farvolt.proof import proof
from farvolt.solution import Solution
from farvolt.solve import solve
from farvolt.temperatures import Mode

_TURNS = 6
"""Each makes the lowest voltages a little higher; all of them are good."""


def at_least(context: Context, factor: float) -> Context:
    """The plan at its thickest, heaters as what they draw at the least where that proves something."""
    if not any(np.any(one.solutions["basis"].condition.load_S > 0) for one in context.cases):
        return context
    drops = _allowed_V(context, factor)
    return replace(context, cases=tuple(_case(one, drops[case]) for case, one in enumerate(context.cases)))


def _allowed_V(context: Context, factor: float) -> list[Floats]:
    """Over cases and loads: the most volts that may be lost on the way; infinite without a limit."""
    found: list[Floats] = [np.full(len(context.plan.loads), np.inf) for _ in context.cases]
    for one in limits(context, factor):
        if one.rule == "drop.load":
            found[one.case][one.load] = one.volts
    return found


def _case(one: CaseStudy, drop_V: Floats) -> CaseStudy:
    solutions = dict(one.solutions)
    modes: tuple[Mode, ...] = ("basis", "hot")
    for mode in modes:
        solutions[mode] = _solution(one.solutions[mode], drop_V if mode == "basis" else np.full(len(drop_V), np.inf))
    return replace(one, solutions=solutions)


def _solution(solution: Solution, drop_V: Floats) -> Solution:
    c, loads = solution.condition, solution.network.plan.loads
    plain = replace(c, load_S=np.zeros_like(c.load_S))
    if not np.any(c.load_S > 0) or proof(solution.network, plain, solution.supply).reach != "all":
        return solution
    port = int(np.flatnonzero(solution.supply.source_on)[0])
    count = len(loads)
    watts, amps, siemens = c.load_W[:count], c.load_A[:count], c.load_S[:count]
    stated = np.array([one.min_volts.si if one.min_volts is not None else 0.0 for one in loads])
    on = np.array([c.case.share(one.name) > 0 for one in loads])
    lowest = np.where(on, np.maximum(KNEE_SHARE * solution.load_nominal_V, 0.0), np.inf)
    for _ in range(_TURNS):
        most_A = float(np.sum(np.where(on, watts / lowest + amps + siemens * c.volts[port], 0.0)))
        terminals_V = float(c.volts[port] - c.ohm[port] * most_A)
        floor = np.maximum(np.where(np.isfinite(drop_V), terminals_V - drop_V, 0.0), stated if _hot(drop_V) else 0.0)
        lowest = np.where(on, np.maximum(lowest, floor), np.inf)
    drawn = plain.load_A.copy()
    drawn[:count] += np.where(on, siemens * np.where(np.isfinite(lowest), lowest, 0.0), 0.0)
    least = replace(plain, load_A=drawn)
    state = solve(solution.network, least, solution.conductors.factor_of_20, solution.supply)
    return Solution(solution.network, least, solution.supply, solution.conductors, state)


def _hot(drop_V: Floats) -> bool:
    """Lowest voltages are limited with hot conductors, where drop is not."""
    return bool(np.all(np.isinf(drop_V)))
