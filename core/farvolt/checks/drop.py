"""Voltage drop from the source to each load, against the rulebook's limit for the load's class."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from farvolt.checks.registry import check
from farvolt.context import CaseStudy, Context, label, larger_sizes
from farvolt.results import Finding
from farvolt.rulebook import DropClass
from farvolt.solution import Solution, Step
from farvolt.units import number

_RULED_OUT = "no single cable on the way brings this within the limit; shorten the way, raise the voltage, or enlarge several"


@dataclass(frozen=True, slots=True)
class _Worst:
    case: int
    percent: float
    others: int
    """In how many other cases the limit is exceeded too."""


def drop_class(context: Context, load: int) -> DropClass:
    """The rulebook's class of a load."""
    name = context.plan.loads[load].drop_class or context.rulebook.default_class
    return context.rulebook.classes[name]


def percents(solution: Solution) -> np.ndarray:
    """Drop of every load in percent of its island's nominal; NaN where it is off, unfed or unsolved."""
    case, plan = solution.condition.case, solution.network.plan
    on = np.array([case.share(load.name) > 0 for load in plan.loads], dtype=bool)
    usable = on & solution.state.solved
    return np.where(usable, 100 * solution.load_drop_V / solution.load_nominal_V, np.nan)


@check("drop.load", title="Voltage drop from the source to each load", reads=("classes", "drop_basis"))
def drop_to_load(context: Context) -> Iterator[Finding]:
    """The worst case of every load over its limit, at the rulebook's own conductor temperature."""
    table = np.array([percents(one.solutions["basis"]) for one in context.cases]).reshape(len(context.cases), -1)
    for load in range(len(context.plan.loads)):
        limit = drop_class(context, load).limit_percent
        over = np.flatnonzero(table[:, load] > limit * (1 + 1e-9))
        if len(over):
            worst = int(over[np.argmax(table[over, load])])
            yield _finding(context, load, _Worst(worst, float(table[worst, load]), len(over) - 1))


def _finding(context: Context, load: int, worst: _Worst) -> Finding:
    rule, one = drop_class(context, load), context.cases[worst.case]
    solution = one.solutions["basis"]
    name, nominal = context.plan.loads[load].name, float(solution.load_nominal_V[load])
    message = (
        f'"{name}" loses {number(worst.percent)} % of {number(nominal)} V on the way; '
        f'{number(rule.limit_percent)} % is the limit of the class "{rule.name}"'
    )
    message += f" (and in {worst.others} other case{'s' if worst.others > 1 else ''})" if worst.others else ""
    return Finding(
        rule="drop.load",
        severity="warn" if rule.severity == "warn" else "fail",
        subject=name,
        kind="load",
        case=one.name,
        value=worst.percent,
        limit=rule.limit_percent,
        unit="%",
        message=message,
        basis=f"{rule.basis}; conductor temperature: {context.rulebook.drop_basis.basis}",
        working=tuple(working(one, solution, load)),
        remedy=_remedy(context, load, worst.case, rule.limit_percent),
    )


def working(one: CaseStudy, solution: Solution, load: int) -> Iterator[str]:
    """The drop step by step, so that it can be added up by hand."""
    port = solution.references[load]
    assert port is not None
    source = solution.network.plan.sources[port].name
    yield f"Resistances {solution.conductors.text}; case \"{one.name}\"."
    for step in solution.way(load):
        yield _line(step)
    drop, nominal = float(solution.load_drop_V[load]), float(solution.load_nominal_V[load])
    at_load = float(solution.load_volts[load])
    yield f"{number(at_load + drop, 5)} V at \"{source}\" - {number(at_load, 5)} V at the load = {number(drop, 4)} V"
    yield f"{number(drop, 4)} V / {number(nominal)} V = {number(100 * drop / nominal, 4)} %"


def _line(step: Step) -> str:
    name = f"{step.name} ({step.pole})"
    if step.kind == "diode":
        return f"{name}: {number(step.drop_V, 4)} V"
    return f"{name}: {number(step.amps, 4)} A x {number(1000 * step.ohm, 4)} mohm = {number(step.drop_V, 4)} V"


def _remedy(context: Context, load: int, case: int, limit: float) -> str:
    """The one cable to enlarge that brings the drop within the limit with the fewest steps of size."""
    solution = context.cases[case].solutions["basis"]
    by_run: dict[int, float] = {}
    for step in solution.way(load):
        if step.run >= 0:
            by_run[step.run] = by_run.get(step.run, 0.0) + step.drop_V
    for run in sorted(by_run, key=lambda index: -by_run[index])[:3]:
        found = _enlarged(context, load, case, run, limit)
        if found:
            return found
    return _RULED_OUT


def _enlarged(context: Context, load: int, case: int, run: int, limit: float) -> str | None:
    entry = context.plan.runs[run]
    if entry.size is None or entry.resistance is not None:
        return None
    for size in larger_sizes(entry.size):
        percent = _estimate(context, load, case, run, size.area_mm2)
        about = "about "
        if context.remedies_are_exact and percent <= limit * 1.1:
            percent = float(percents(context.resolve({entry.name: size}, case, "basis"))[load])
            about = ""
        if percent <= limit:
            return f"{label(entry)}: {size.name} brings this to {about}{number(percent)} %"
    return None


def _estimate(context: Context, load: int, case: int, run: int, area_mm2: float) -> float:
    """Drop in percent with one run's cable resistance scaled by its area and the currents held."""
    solution = context.cases[case].solutions["basis"]
    size = context.plan.runs[run].size
    assert size is not None
    network, factors = solution.network, solution.conductors.factor_of_20
    saved = 0.0
    for step in solution.way(load):
        if step.run == run:
            branch = solution.run_branches[0 if step.pole == "feed" else 1][run]
            cable = float(network.cable_ohm_20[branch] * factors[run])
            saved += step.amps * cable * (1 - size.area_mm2 / area_mm2)
    return float(100 * (solution.load_drop_V[load] - saved) / solution.load_nominal_V[load])
