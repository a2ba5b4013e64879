"""A choice of cables as text on a terminal, and as an object for machines."""

from collections.abc import Iterable
from typing import Any

from farvolt.choice_compared import Column, compared
from farvolt.choice_conflict import conflict
from farvolt.choice_curve import Point
from farvolt.choice_options import Option
from farvolt.choice_why import Why, why
from farvolt.choose import Choice
from farvolt.units import number
from farvolt_app.report_text import open_console, table

RUNS = (("run", False), ("one way m", True), ("present", False), ("run by run", False), ("chosen", False),
        ("protection", False), ("why", False))  # fmt: skip
COMPARED = (("", False), ("passes", False), ("copper kg", True), ("cost", True), ("cable m", True),
            ("worst drop %", True), ("at", False), ("lost kWh a year", True))  # fmt: skip


def show(choice: Choice) -> None:
    """Print the choice, what it is compared with, and why each run has its size."""
    out = open_console()
    out.print(verdict(choice), markup=False)
    found = conflict(choice)
    if found is not None:
        out.print("\nCannot be met together:", markup=False)
        for line in found.limits:
            out.print(f"- {line}", markup=False)
        out.print("What would open it:", markup=False)
        for line in found.openings or ("none of the changes that were tried",):
            out.print(f"- {line}", markup=False)
    if choice.picked is not None:
        table(out, "Cables chosen", RUNS, [run_row(choice, one) for one in why(choice)])
    table(out, "Compared", COMPARED, [column_row(one) for one in compared(choice)])
    for rule, subject in sorted(choice.aside):
        out.print(f'Not for cable to cure: {rule} of "{subject}"', markup=False)


def show_curve(points: Iterable[Point], unit: str) -> None:
    """Print what tighter and looser limits of drop cost, each as it is found."""
    out = open_console()
    out.print("\nWhat the limits of drop cost (times those of the rulebook)", markup=False)
    for one in points:
        cost = f"{number(one.cost, 4)} {unit}" if one.cost is not None else "nothing passes"
        out.print(f"x {number(one.factor):5} {cost}", markup=False)


def verdict(choice: Choice) -> str:
    """What came of it, with how far it is proven."""
    unit = choice.wishes.unit
    if choice.picked is None:
        if choice.impossible:
            return "No choice passes: the limits leave none."
        least = f"None costs less than {number(choice.bound)} {unit}."
        return f"No choice that passes was found ({_ended(choice)}). {least}"
    cost, gap = choice.cost or 0.0, 100 * (choice.gap or 0.0)
    head = f"{len(choice.runs)} runs chosen: {number(cost, 5)} {unit}, held against the exact solution and all checks."
    bound = f"None that passes costs less than {number(choice.bound, 5)} {unit}: within {number(gap, 2)} %."
    if not choice.proven:
        bound += " Not proven to be the least: " + UNPROVEN
    return f"{head}\n{bound} Ended: {_ended(choice)}."


UNPROVEN = (
    "the bound leaves out limits where several sources, loops or loads that draw more at a higher voltage are at work."
)


def _ended(choice: Choice) -> str:
    words = {"proven": "proven", "no better": "no better one turned up", "time": "out of time",
             "interrupted": "interrupted", "impossible": "no choice passes"}  # fmt: skip
    return words[choice.ended]


def built(option: Option) -> str:
    """A size, with how many lie in parallel."""
    return option.size.name if option.parallel == 1 else f"{option.parallel} x {option.size.name}"


def run_row(choice: Choice, one: Why) -> tuple[str, ...]:
    """One run as the cells of a table."""
    names = {run.name: place for place, run in enumerate(choice.plan.runs)}
    index = names[one.run]
    run, taken = choice.plan.runs[index], (choice.picked or {})[index]
    other = choice.run_by_run.options.get(index)
    device = f"{number(taken.rating_A)} A {taken.kind}" if taken.rating_A is not None else "as stated"
    return (
        one.run, number(run.length.si), run.size.name if run.size else "free", built(other) if other else "-",
        built(taken), device, one.text,
    )  # fmt: skip


def column_row(one: Column) -> tuple[str, ...]:
    """One of the plans compared as the cells of a table."""
    drop = "-" if one.worst_drop_percent is None else number(one.worst_drop_percent)
    lost = "-" if one.lost_kWh_per_year is None else number(one.lost_kWh_per_year)
    passes = "yes" if one.passes else f"no ({one.failing})"
    return (one.name, passes, number(one.copper_kg, 4), number(one.cost, 4), number(one.cable_m), drop, one.worst_load,
            lost)  # fmt: skip


def as_object(choice: Choice) -> dict[str, Any]:
    """The choice for machines: SI numbers or null."""
    reasons, found = {one.run: one for one in why(choice)}, conflict(choice)
    return {
        "choice": 1,
        "plan": choice.plan.plan.name,
        "objective": choice.wishes.objective,
        "found": choice.picked is not None,
        "cost": choice.cost,
        "bound": choice.bound,
        "gap": choice.gap,
        "bound_counts_every_limit": choice.proven,
        "ended": choice.ended,
        "seconds": choice.seconds,
        "runs": [_run_object(choice, run, option, reasons) for run, option in (choice.picked or {}).items()],
        "compared": [
            {"name": one.name, "passes": one.passes, "copper_kg": one.copper_kg, "cost": one.cost,
             "worst_drop_percent": one.worst_drop_percent, "lost_kWh_per_year": one.lost_kWh_per_year}
            for one in compared(choice)
        ],
        "conflict": None if found is None else {"limits": list(found.limits), "openings": list(found.openings)},
        "not_for_cable_to_cure": [{"rule": rule, "subject": subject} for rule, subject in sorted(choice.aside)],
    }  # fmt: skip


def _run_object(choice: Choice, run: int, option: Option, reasons: dict[str, Why]) -> dict[str, Any]:
    name = choice.plan.runs[run].name
    one = reasons[name]
    return {
        "run": name, "size": option.size.name, "parallel": option.parallel, "protection_type": option.kind or None,
        "protection_A": option.rating_A, "cost": option.cost, "rule": one.rule or None, "load": one.load or None,
        "case": one.case or None, "thinner": one.thinner or None, "saves": one.saves, "thicker": one.thicker or None,
        "adds": one.adds,
    }  # fmt: skip
