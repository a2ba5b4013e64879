"""Cables that lie where it is hotter than their insulation may be, and that run hotter than terminals are rated for."""

from collections.abc import Iterator

import numpy as np

from farvolt.ampacity import Ampacity, ampacity
from farvolt.checks.registry import apart, check, run_finding
from farvolt.conductors import Size
from farvolt.context import Context, basis_text, label
from farvolt.network import insulation_degC, return_size
from farvolt.plan import Run
from farvolt.results import Finding
from farvolt.rulebook import Terminals
from farvolt.temperatures import run_ambient_degC
from farvolt.units import number

_BASIS = "common practice: insulation is not used where the ambient alone reaches its rating"
_TABLE_AMBIENT_DEGC = 30.0


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


@check(
    "conductor.temperature-rating", title="Current in each cable against what its terminals allow",
    reads=("terminals",),
)  # fmt: skip
def terminals(context: Context) -> Iterator[Finding]:
    """Runs that carry more than the table's figure at the terminals' rating, in the case where they carry most; a start
    is too short to warm a terminal."""
    rule = context.rulebook.terminals
    if rule is None:
        return  # a rulebook without one says in its own words how to judge terminals
    every = zip(context.cases, context.lasting, strict=True)
    solved = [(one, lasting.largest_run_amps) for one, lasting in every if lasting.state.solved]
    currents = np.array([amps for _, amps in solved])
    for index, run in enumerate(context.plan.runs if solved else ()):
        if run.size is None:
            continue
        size = min((run.size, return_size(run) or run.size), key=lambda one: one.area_mm2)
        worst = int(np.argmax(currents[:, index]))
        found = _beyond(context, run, size, float(currents[worst, index]), rule)
        if found is not None:
            yield _terminals(run, float(currents[worst, index]), found, rule, solved[worst][0].name)


def _beyond(
    context: Context, run: Run, size: Size, amps: float, rule: Terminals
) -> tuple[float, float, Ampacity, bool] | None:  # fmt: skip
    """(rating in degC, figure in A, its working, whether marked terminals would do) of the limit that is broken."""
    small = size.area_mm2 <= rule.unmarked_up_to.area_mm2 * (1 + 1e-9)
    for degC, marked_would_do in ((rule.marked_degC, False), (rule.unmarked_degC, True)):
        if marked_would_do and not small:
            continue
        found = ampacity(
            context.rulebook, size=size, material=run.material, insulation_degC=degC,
            ambient_degC=_TABLE_AMBIENT_DEGC, engine_space=False, conductors=2,
        )  # fmt: skip
        figure = (found.table_amps or 0.0) * run.parallel
        if found.amps is not None and amps > figure * (1 + 1e-9):
            return degC, figure, found, marked_would_do
    return None


def _terminals(
    run: Run, amps: float, found: tuple[float, float, Ampacity, bool], rule: Terminals, case: str
) -> Finding:  # fmt: skip
    degC, figure, table, marked_would_do = found
    told = f"{label(run)} carries {apart(amps, figure)} A; {number(figure)} A is its figure at terminals of "
    told += f"{number(degC)} degC, which terminals are taken at unless marked" if marked_would_do else (
        f"{number(degC)} degC, the highest that is usually marked"
    )  # fmt: skip
    marked = f"terminals marked for {number(rule.marked_degC)} degC at both ends; or " if marked_would_do else ""
    sums = f"{number(table.table_amps or 0, 4)} A x {run.parallel} in parallel" if run.parallel > 1 else ""
    return run_finding(
        "conductor.temperature-rating", "warn" if marked_would_do else "fail", run, amps, figure, "A", told,
        f"{basis_text(rule.basis)}; {table.basis}",
        (table.working[0], sums, f"{apart(amps, figure, 4)} A > {number(figure, 4)} A"),
        f"{marked}a thicker cable, or several in parallel", case,
    )  # fmt: skip
