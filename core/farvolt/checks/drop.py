"""Voltage drop from the source to each load, against the rulebook's limit for the load's class."""

from collections.abc import Iterator, Sequence
from dataclasses import replace

import numpy as np

from farvolt.checks.enlarge import Aim, Remedies
from farvolt.checks.registry import apart, check
from farvolt.context import CaseStudy, Context
from farvolt.network import Floats
from farvolt.plan import Battery
from farvolt.results import Finding
from farvolt.rulebook import DropClass
from farvolt.solution import Solution, Step
from farvolt.units import number


def drop_class(context: Context, load: int) -> DropClass:
    """The rulebook's class of a load."""
    name = context.plan.loads[load].drop_class or context.rulebook.default_class
    return context.rulebook.classes[name]


def percents(solution: Solution) -> Floats:
    """Drop of every load in percent of its island's nominal; NaN where it is off, unfed or unsolved."""
    on = loads_on(solution)
    found: Floats = np.where(on, 100 * solution.load_drop_V / solution.load_nominal_V, np.nan)
    return found


def percent(solution: Solution, load: int) -> float:
    """Drop of one load in percent of its island's nominal; infinite where the case gives way."""
    if not solution.state.solved:
        return float("inf")
    return float(100 * solution.load_drop_V[load] / solution.load_nominal_V[load])


def loads_on(solution: Solution) -> np.ndarray:
    """Which loads are on in a case that holds."""
    case, loads = solution.condition.case, solution.network.plan.loads
    return np.array([case.share(load.name) > 0 for load in loads], dtype=bool) & solution.state.solved


@check("drop.load", title="Voltage drop from the source to each load", reads=("classes", "drop_basis"))
def drop_to_load(context: Context) -> Iterator[Finding]:
    """The worst case of every load over its limit, at the rulebook's own conductor temperature.

    A start, or what stands in for lost batteries, only warns: the limit means the rated load and the source in service.
    """
    count = len(context.plan.loads)
    table = np.array([percents(one.solutions["basis"]) for one in context.cases]).reshape(len(context.cases), count)
    remedies = Remedies(context)
    for load in range(count):
        limit = drop_class(context, load).limit_percent
        over = np.flatnonzero(table[:, load] > limit * (1 + 1e-9))
        if len(over):
            in_service = [case for case in over if not exceptional(context.cases[case].solutions["basis"], load)]
            first = np.array(in_service or over)
            worst = int(first[np.argmax(table[first, load])])
            yield _to_load(context, load, worst, over.tolist(), remedies)


def exceptional(solution: Solution, load: int) -> str:
    """Why a case is none that a limit on drop means: a start, or a source that stands in for its island's batteries."""
    port, condition, sources = solution.references[load], solution.condition, solution.network.plan.sources
    if condition.case.surge:
        return "while a load starts"
    if port is None or isinstance(sources[port], Battery):
        return ""
    of_source = condition.islands.of_node[condition.source_a[: len(sources)]]
    banks = [isinstance(source, Battery) for source in sources]
    lost = bool(np.any(banks & (of_source == of_source[port])))
    return f'counted from "{sources[port].name}", with no bank on' if lost else ""


def _to_load(context: Context, load: int, worst: int, over: Sequence[int], remedies: Remedies) -> Finding:
    rule, one = drop_class(context, load), context.cases[worst]
    solution = one.solutions["basis"]
    value, nominal = percent(solution, load), float(solution.load_nominal_V[load])
    name = context.plan.loads[load].name
    message = (
        f'"{name}" loses {apart(value, rule.limit_percent)} % of {number(nominal)} V on the way; '
        f'{number(rule.limit_percent)} % is the limit of the class "{rule.name}"'
    )
    special = exceptional(solution, load)
    message += f"; {special}" if special else ""
    aim = Aim(
        load, "basis", worst, tuple(over), solution.way(load), lambda found: percent(found, load), rule.limit_percent,
        -100 / nominal, "%",
    )  # fmt: skip
    shown = tuple(working(one, solution, load))
    found = over_limit(context, "drop.load", aim, value, message, shown, remedies.for_load(aim))
    return replace(found, severity="warn") if special else found


def over_limit(
    context: Context, rule: str, aim: Aim, value: float, message: str, shown: tuple[str, ...], remedy: str
) -> Finding:
    """A finding of a drop over its class's limit."""
    limits = drop_class(context, aim.load)
    others = len(aim.cases) - 1
    message += f" (and in {others} other case{'s' if others > 1 else ''})" if others else ""
    return Finding(
        rule=rule,
        severity="warn" if limits.severity == "warn" else "fail",
        subject=context.plan.loads[aim.load].name,
        kind="load",
        case=context.cases[aim.case].name,
        value=value,
        limit=aim.limit,
        unit="%",
        message=message,
        basis=f"{limits.basis}; conductor temperature: {context.rulebook.drop_basis.basis}",
        working=shown,
        remedy=remedy,
    )


def working(one: CaseStudy, solution: Solution, load: int) -> Iterator[str]:
    """The drop step by step, so that it can be added up by hand."""
    port = solution.references[load]
    source = solution.network.plan.sources[port].name if port is not None else "no source"
    yield f'Resistances {solution.conductors.text}; case "{one.name}".'
    for step in solution.way(load):
        yield line(step)
    drop, nominal = float(solution.load_drop_V[load]), float(solution.load_nominal_V[load])
    at_load = float(solution.load_volts[load])
    yield f'{number(at_load + drop, 5)} V at "{source}" - {number(at_load, 5)} V at the load = {number(drop, 4)} V'
    yield f"{number(drop, 4)} V / {number(nominal)} V = {number(100 * drop / nominal, 4)} %"


def line(step: Step) -> str:
    """One conductor or device of a working: current x resistance = drop."""
    name = f"{step.name} ({step.pole})"
    if step.kind == "diode":
        return f"{name}: {number(step.drop_V, 4)} V"
    ohm = f"{number(1000 * step.ohm, 4)} mohm"
    if step.fixed_ohm and step.fixed_ohm != step.ohm:
        cable, fixed = number(1000 * (step.ohm - step.fixed_ohm), 4), number(1000 * step.fixed_ohm, 4)
        ohm = f"({cable} cable + {fixed} joints and protection) mohm"
    return f"{name}: {number(step.amps, 4)} A x {ohm} = {number(step.drop_V, 4)} V"
