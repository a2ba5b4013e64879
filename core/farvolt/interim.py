"""Interim sizes for runs whose size is still free, so that the rest of a plan can be solved meanwhile.

The method of the trade, run by run: the smallest size that carries the current, the run's own protection and the
rulebook's minimum, and stays within the run's share of the drop, shared out by length along the way. It is not
the cheapest choice for the whole plan, and the plan file is not changed.
"""

from collections.abc import Mapping

import numpy as np

from farvolt import network, operating, solve, temperatures
from farvolt.conductors import Size, made_sizes, resistance_20_ohm_per_m
from farvolt.network import conductor_lengths_m, strand
from farvolt.plan import Case, Plan, Run
from farvolt.rulebook import Rulebook
from farvolt.sections import sheathed
from farvolt.solution import Solution
from farvolt.temperatures import Mode

_PASSES = 2
"""The second pass uses the currents that the first one's cables lead to."""


def free(run: Run) -> bool:
    """Whether a run's size is still to be chosen."""
    return run.size is None and run.resistance is None


def sizes(plan: Plan, rulebook: Rulebook) -> dict[str, Size]:
    """An interim size for every free run, by its name; empty when none is free."""
    names = [run.name for run in plan.runs if free(run)]
    if not names:
        return {}
    chosen = {name: made_sizes(rulebook.default_system)[-1] for name in names}
    for _ in range(_PASSES):
        trial = with_sizes(plan, chosen)
        amps = np.max([one.largest_run_amps for one in _solutions(trial, rulebook, "hot")], axis=0)
        budgets = _budgets(plan, rulebook, _solutions(trial, rulebook, "basis"))
        for index, run in enumerate(plan.runs):
            if free(run):
                chosen[run.name] = _smallest(plan, rulebook, run, float(amps[index]), budgets.get(index))
    return chosen


def with_sizes(plan: Plan, chosen: Mapping[str, Size]) -> Plan:
    """The plan with sizes for some of its runs."""
    runs = tuple(run.model_copy(update={"size": chosen[run.name]}) if run.name in chosen else run for run in plan.runs)
    return plan.model_copy(update={"runs": runs})


def _lasting(plan: Plan) -> list[Case]:
    """The cases without their starts, which last too short to size a cable for; each once."""
    found: list[Case] = []
    for case in plan.checked_cases:
        after = case.model_copy(update={"surge": ()})
        if not any(one.model_copy(update={"name": after.name}) == after for one in found):
            found.append(after)
    return found


def _solutions(plan: Plan, rulebook: Rulebook, mode: Mode) -> list[Solution]:
    net = network.build(plan, rulebook)
    found = []
    for case in _lasting(plan):
        condition = operating.operating(net, case)
        supply = solve.fed(net, condition)
        wanted = temperatures.at(plan, rulebook, case, mode)
        found.append(Solution(net, condition, supply, wanted, solve.solve(net, condition, wanted.factor_of_20, supply)))
    return found


def _budgets(plan: Plan, rulebook: Rulebook, solutions: list[Solution]) -> dict[int, float]:
    """Over free runs: the least share of drop in V that any load beyond leaves to it."""
    budgets: dict[int, float] = {}
    for solution in solutions:
        for index, load in enumerate(plan.loads):
            steps = solution.way(index)
            mine = {step.run for step in steps if step.run >= 0 and free(plan.runs[step.run])}
            length = sum(plan.runs[run].length.si for run in mine)
            if not mine or solution.condition.case.share(load.name) == 0:
                continue
            rule = rulebook.classes[load.drop_class or rulebook.default_class]
            allowed = rule.limit_percent / 100 * float(solution.load_nominal_V[index])
            left = allowed - sum(step.drop_V for step in steps if step.run not in mine)
            for run in mine:
                share = max(left, 0.1 * allowed) * plan.runs[run].length.si / length
                budgets[run] = min(share, budgets.get(run, share))
    return budgets


def _smallest(plan: Plan, rulebook: Rulebook, run: Run, amps: float, budget_V: float | None) -> Size:
    """The smallest made size that carries `amps` and the run's protection, and drops at most `budget_V`."""
    together = temperatures.laid_together(plan)[run.name]
    least = (
        rulebook.minimum_size.least(rulebook.default_system, sheathed(plan, run)).area_mm2
        if rulebook.minimum_size
        else 0.0
    )
    carried = max([amps, *(one.rating.si for one in run.protections)])
    made = made_sizes(rulebook.default_system)
    for size in made:
        sized = run.model_copy(update={"size": size})
        found = temperatures.run_ampacity(plan, rulebook, sized, None, together)
        enough = found is not None and found.amps is not None and found.amps >= carried
        if size.area_mm2 >= least and enough and (budget_V is None or _drop_V(rulebook, sized, amps) <= budget_V):
            return size
    return made[-1]


def _drop_V(rulebook: Rulebook, run: Run, amps: float) -> float:
    """Drop over both conductors of a run at the rulebook's basis."""
    assert run.size is not None
    factor = temperatures.basis_factor(rulebook, run)
    per_m = resistance_20_ohm_per_m(run.size, run.material, strand(run, rulebook)).value * factor
    return amps * per_m * sum(conductor_lengths_m(run)) / run.parallel
