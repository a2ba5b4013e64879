"""The rating of each protection against the current it carries."""

import operator
from collections.abc import Callable, Iterator
from functools import partial

from farvolt.checks.demand import Demands
from farvolt.checks.derating import ambient_degC, carried_share, derated
from farvolt.checks.rating import limit_for, size_for_rating
from farvolt.checks.registry import apart, cannot_be_made, check, run_finding
from farvolt.checks.ways import PRACTICE, ampacity_A, exempt
from farvolt.context import Context, basis_text, label
from farvolt.network import FEED, RETURN
from farvolt.plan import Protection
from farvolt.results import Finding
from farvolt.units import number


@check("protection.under-load", title="Rating of each protection against the load it carries", reads=("protection",))
def under_load(context: Context) -> Iterator[Finding]:
    """Protection rated below its current; continuous loads with the rulebook's factor."""
    if context.rulebook.protection.continuous is None and any(load.continuous for load in context.plan.loads):
        what = "a factor on continuous loads; they are counted once"
        yield cannot_be_made(context, "protection.under-load", "continuous", what)
    demands, behind = Demands(context), protected_by(context)
    for index, run in enumerate(context.plan.runs):
        for one in run.protections:
            pole = FEED if one.pole == "feed" else RETURN
            demand, case = demands.worst(index, pole)
            shares = [carried_share(context.plan, run, one, each.case) for each in context.cases]
            asked = [float(demands.counted[pole, each, index]) / share for each, share in enumerate(shares)]
            warmest = max(range(len(asked)), key=lambda each: asked[each])
            if asked[warmest] <= one.rating.si * (1 + 1e-9):
                continue
            what = f"{number(asked[warmest])} A"
            remedy = rating_for(context, behind[id(one)], one, what, partial(operator.le, asked[warmest]))
            if demand > one.rating.si * (1 + 1e-9):
                yield _under(context, index, one, (demand, case), demands, remedy)
            else:
                yield _derated(context, index, one, (asked[warmest] * shares[warmest], warmest), remedy)


def _derated(context: Context, index: int, one: Protection, worst: tuple[float, int], remedy: str) -> Finding:
    """A protection that carries its load in the cool, but not where it sits."""
    run, (demand, case), kind = context.plan.runs[index], worst, one.kind
    found = context.cases[case]
    left = one.rating.si * carried_share(context.plan, run, one, found.case)
    warm = number(ambient_degC(context.plan, run, one, found.case))
    unsure = "" if kind.own else " (provisional)"
    return run_finding(
        "protection.under-load", "fail" if kind.own else "warn", run, demand, left, "A",
        f"{label(run)}: at {warm} degC its {one.rating} {one.type} carries {number(left)} A; it is to carry "
        f"{apart(demand, left)} A",
        f"{PRACTICE}: a protection carries its load without opening, wherever it sits; {kind.times_basis}{unsure}",
        (derated(context.plan, run, one, found.case), f"{apart(demand, left, 4)} A > {number(left, 4)} A"),
        f"{remedy}; or the protection in a cooler place", found.name,
    )  # fmt: skip


def _under(
    context: Context, index: int, one: Protection, worst: tuple[float, int], demands: Demands, remedy: str
) -> Finding:
    run, pole, (demand, case) = context.plan.runs[index], FEED if one.pole == "feed" else RETURN, worst
    amps, lasting = float(demands.amps[pole, case, index]), float(demands.continuous[pole, case, index])
    rule, factor = context.rulebook.protection.continuous, demands.factor
    counted = demand > amps * (1 + 1e-9)
    told = number(amps) if counted else apart(amps, one.rating.si)
    working = f"{number(amps, 4)} A"
    if counted:
        working += f", of which {number(lasting, 4)} A continuous: {number(amps - lasting, 4)} + {number(factor)} x "
        working += f"{number(lasting, 4)} = {number(demand, 4)} A"
    return run_finding(
        "protection.under-load", "fail", run, demand, one.rating.si, "A",
        f"{label(run)}: its {one.rating} {one.type} carries {told} A"
        + (f", to be counted as {apart(demand, one.rating.si)} A" if counted else ""),
        basis_text(rule.basis) if rule and counted else f"{PRACTICE}: a protection carries its load without opening",
        (f"{working}; conductors {context.cases[case].solutions['hot'].conductors.text}",
         f"{apart(demand, one.rating.si, 4)} A > {number(one.rating.si, 4)} A"),
        remedy, context.cases[case].name,
    )  # fmt: skip


def rating_for(context: Context, behind: list[int], one: Protection, what: str, fits: Callable[[float], bool]) -> str:
    """The lowest rating that `fits` and that every cable behind it allows; else what stands in the way."""
    rating = min(filter(fits, one.kind.ratings_A), default=None)
    if rating is None:
        return f"no {one.type} is made for {what}: another type of protection, or the load on two circuits"
    for index in behind:
        run, amps = context.plan.runs[index], ampacity_A(context, index)
        if not exempt(context, run) and (amps is None or limit_for(context, run, amps).amps < rating):
            size = size_for_rating(context, index, rating)
            cable = f"{label(run)}: {size.name}" if size else f"{label(run)}: a thicker cable"
            return f"{cable}, which may carry it, and then a rating of {number(rating)} A"
    return f"a rating of {number(rating)} A, which the cable may carry"


def protected_by(context: Context) -> dict[int, list[int]]:
    """By the identity of a protection, the runs it protects: up to the next protection, returns included."""
    found: dict[int, dict[int, None]] = {}
    for index, run in enumerate(context.plan.runs):
        guards = [one.guard for one in context.sections.by_run.get(index, []) if one.guard is not None]
        guards += [guard for _, guard in context.sections.returns.get(index, [])]
        for protection in (*run.protections, *(guard.protection for guard in guards)):
            found.setdefault(id(protection), {})[index] = None
    return {key: list(runs) for key, runs in found.items()}
