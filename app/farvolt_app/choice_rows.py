"""A choice of cables as rows of tables on a page."""

from collections.abc import Iterable

from farvolt.choice_compared import Column
from farvolt.choice_curve import Point
from farvolt.choice_why import why
from farvolt.choose import Choice
from farvolt_app.choice_text import built
from farvolt_app.shown import Cells


def run_rows(choice: Choice) -> list[Cells]:
    """Every run chosen: as it is, run by run, as chosen, and why."""
    found: list[Cells] = []
    names = {run.name: place for place, run in enumerate(choice.plan.runs)}
    for one in why(choice):
        index = names[one.run]
        run, taken = choice.plan.runs[index], (choice.picked or {})[index]
        other = choice.run_by_run.options.get(index)
        found.append({
            "Cable run": one.run,
            "One way (m)": run.length.si,
            "Present": run.size.name if run.size else "free",
            "Run by run": built(other) if other else "",
            "Chosen": built(taken),
            "Protection (A)": taken.rating_A,
            "Why": one.text,
            "A size less saves": one.saves,
            "A size more adds": one.adds,
        })  # fmt: skip
    return found


def compared_rows(columns: Iterable[Column]) -> list[Cells]:
    """The plans compared."""
    return [
        {
            "Plan": one.name,
            "Passes": "yes" if one.passes else "no",
            "Metal (kg)": one.copper_kg,
            "Cost": one.cost,
            "Cable (m)": one.cable_m,
            "Worst drop (%)": one.worst_drop_percent,
            "At": one.worst_load,
            "Lost in a year (kWh)": one.lost_kWh_per_year,
        }
        for one in columns
    ]


def curve_rows(points: Iterable[Point]) -> list[Cells]:
    """What tighter and looser limits of drop cost."""
    return [{"Times the limits of drop": one.factor, "Cost": one.cost, "None below": one.bound} for one in points]
