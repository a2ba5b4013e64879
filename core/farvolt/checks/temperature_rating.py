"""Cables that lie where it is hotter than their insulation may be, whatever current they carry."""

from collections.abc import Iterator

from farvolt.checks.registry import check, run_finding
from farvolt.context import Context, label
from farvolt.network import insulation_degC
from farvolt.results import Finding
from farvolt.temperatures import run_ambient_degC
from farvolt.units import number

_BASIS = "common practice: insulation is not used where the ambient alone reaches its rating"


@check("conductor.temperature-rating", title="Insulation against the ambient where each cable lies")
def temperature_rating(context: Context) -> Iterator[Finding]:
    """Runs whose insulation's rating is reached by the ambient itself, in the case where it is hottest."""
    for run in context.plan.runs:
        hottest = max(context.cases, key=lambda one: run_ambient_degC(context.plan, run, one.case))
        ambient, rating = run_ambient_degC(context.plan, run, hottest.case), insulation_degC(run, context.rulebook)
        if ambient < rating:
            continue
        stated = f"{number(rating)} degC" + ("" if run.insulation else ", the rulebook's default")
        yield run_finding(
            "conductor.temperature-rating", "fail", run, ambient, rating, "degC",
            f"{label(run)} lies at {number(ambient)} degC; its insulation is rated {stated}", _BASIS,
            (f"{number(ambient)} degC is not below {number(rating)} degC: no current is left to carry",),
            "insulation of a higher rating, or another way for this cable", hottest.name,
        )  # fmt: skip
