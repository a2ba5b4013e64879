"""A choice beside the plan as it stands and beside the method of the trade, run by run."""

from dataclasses import dataclass

import numpy as np

from farvolt import study
from farvolt.checks.drop import percents
from farvolt.choice_options import cable_cost
from farvolt.choice_verify import Verdict
from farvolt.choose import Choice, metal_kg
from farvolt.context import Context
from farvolt.network import conductor_lengths_m

DAYS = 365


@dataclass(frozen=True, slots=True)
class Column:
    """One of the plans compared. None stands for no answer."""

    name: str
    passes: bool
    cost: float
    """Of the runs to choose and all others, in the unit of the objective."""
    copper_kg: float
    cable_m: float
    worst_drop_percent: float | None
    worst_load: str
    lost_kWh_per_year: float | None
    """Lost in cables, joints, protection and devices; None where no load says how long it runs."""
    failing: int


def compared(choice: Choice) -> list[Column]:
    """The columns: the present plan where it states all its sizes, run by run, and the choice."""
    found = []
    present = choice.plan
    if all(run.size is not None or run.resistance is not None for run in present.runs):
        context = study.build_context(present, choice.problem.rulebook)
        found.append(column("present", Verdict(context, {}, choice.aside, choice.wishes.drop_factor), choice))
    found.append(column("run by run", choice.run_by_run, choice))
    if choice.verdict is not None:
        found.append(column("chosen", choice.verdict, choice))
    return found


def column(name: str, verdict: Verdict, choice: Choice) -> Column:
    """One plan in figures."""
    context = verdict.context
    plan, book = context.plan, context.rulebook
    cost = sum(cable_cost(run, book, choice.wishes) for run in plan.runs if run.size is not None)
    metres = sum(sum(conductor_lengths_m(run)) * run.parallel for run in plan.runs)
    worst, load = worst_drop(context)
    failing = len(verdict.excess) + len(verdict.fails)
    return Column(name, verdict.holds, cost, metal_kg(plan, book), metres, worst, load, lost_kWh(context), failing)


def worst_drop(context: Context) -> tuple[float | None, str]:
    """The largest drop of any load in any case, in percent of nominal at the rulebook's temperature, and the load."""
    table = np.array([percents(one.solutions["basis"]) for one in context.cases])
    if table.size == 0 or np.all(np.isnan(table)):
        return None, ""
    load = int(np.nanargmax(np.nanmax(np.where(np.isnan(table), -np.inf, table), axis=0)))
    return float(np.nanmax(table)), context.plan.loads[load].name


def lost_kWh(context: Context) -> float | None:
    """Energy lost in a year on the way to the loads that say how many hours they run, each as drawn in the first case.

    What a load loses at its current is counted in every conductor on its way, with what else flows there in that case.
    """
    solution = context.cases[0].solutions["plan"]
    total, known = 0.0, False
    for index, load in enumerate(context.plan.loads):
        if load.hours_per_day is None or not np.isfinite(solution.load_drop_V[index]) or not solution.state.solved:
            continue
        known = True
        duty = load.duty.si if load.duty is not None else 1.0
        watts = float(solution.load_drop_V[index] * solution.state.drawn_A[index])
        total += watts * load.hours_per_day * duty * DAYS / 1000
    return total if known else None
