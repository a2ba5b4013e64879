"""The cable itself: ampacity, smallest size, material, return path."""

from collections.abc import Iterator

import numpy as np

from farvolt.ampacity import ampacity
from farvolt.checks.registry import check
from farvolt.conductors import Size
from farvolt.context import CaseStudy, Context, basis_text, label, larger_sizes
from farvolt.network import insulation_degC
from farvolt.plan import Run
from farvolt.results import Finding, Severity
from farvolt.sections import sheathed
from farvolt.temperatures import run_ambient_degC
from farvolt.units import number


@check("conductor.ampacity", title="Current in each cable against its ampacity", reads=("ampacity", "ambient", "bundling"))
def over_ampacity(context: Context) -> Iterator[Finding]:
    """Each run whose current exceeds its ampacity, in the case where it exceeds it most (hot conductors)."""
    currents = np.array([_currents(one) for one in context.cases]).reshape(len(context.cases), -1)
    for run in range(len(context.plan.runs)):
        limits = [one.ampacities[run] for one in context.cases]
        worst = max(range(len(limits)), key=lambda i: _excess(currents[i, run], limits[i]))
        limit, amps = limits[worst], float(currents[worst, run])
        if limit is not None and limit.amps is None:
            yield _missing(context, run, limit.missing, limit.basis, limit.working)
        elif limit is not None and limit.amps is not None and amps > limit.amps * (1 + 1e-9):
            yield _over(context, run, worst, amps, limit.amps)


def _currents(one: CaseStudy) -> np.ndarray:
    """Larger conductor current of every run, with hot conductors: constant-power loads draw most then."""
    solution = one.solutions["hot"]
    if not solution.state.solved:
        return np.zeros(len(solution.network.plan.runs))
    return solution.largest_run_amps


def _excess(amps: float, limit: object) -> float:
    allowed = getattr(limit, "amps", None)
    if allowed is None:
        return -1.0
    return float("inf") if allowed == 0 and amps > 0 else amps / allowed if allowed else 0.0


def _over(context: Context, run: int, case: int, amps: float, limit: float) -> Finding:
    entry, one = context.plan.runs[run], context.cases[case]
    found = one.ampacities[run]
    assert found is not None
    return _finding(
        context, "conductor.ampacity", "fail", entry, one.name, amps, limit, "A",
        f"{label(entry)} carries {number(amps)} A; {number(limit)} A is its ampacity where it lies",
        found.basis, (*found.working, f"{number(amps, 4)} A > {number(limit, 4)} A"),
        _remedy(context, entry, one, amps),
    )  # fmt: skip


def _remedy(context: Context, run: Run, one: CaseStudy, amps: float) -> str:
    size = smallest_for(context, run, one, amps)
    return f"{label(run)}: {size.name} carries {number(amps)} A here" if size else "several cables in parallel, or less load"


def smallest_for(context: Context, run: Run, one: CaseStudy, amps: float) -> Size | None:
    """The smallest larger size of the same system whose ampacity where the run lies is at least `amps`."""
    zone = context.plan.zone_of(run)
    for size in larger_sizes(run.size) if run.size else []:
        found = ampacity(
            context.rulebook,
            size=size,
            material=run.material,
            insulation_degC=insulation_degC(run, context.rulebook),
            ambient_degC=run_ambient_degC(context.plan, run, one.case),
            engine_space=zone is not None and context.plan.zones[zone].engine_space,
            conductors=context.together[run.name],
            parallel=run.parallel,
        )
        if found.amps is not None and found.amps >= amps:
            return size
    return None


def _missing(context: Context, run: int, missing: str, basis: str, working: tuple[str, ...]) -> Finding:
    entry = context.plan.runs[run]
    message = f"{label(entry)}: ampacity cannot be checked: {missing}"
    remedy = "a size, material or insulation that the rulebook lists, or a rulebook of your own with this entry"
    return _finding(
        context, "conductor.ampacity", "warn", entry, None, None, None, None, message,
        basis or context.rulebook.title, working, remedy,
    )  # fmt: skip


@check("conductor.minimum-size", title="Smallest conductor allowed", reads=("minimum_size",))
def minimum_size(context: Context) -> Iterator[Finding]:
    """Runs thinner than the rulebook allows, with its exemptions in the remedy."""
    rule = context.rulebook.minimum_size
    if rule is None:
        return
    for run in context.plan.runs:
        if run.size is None or run.purpose == "bond":
            continue
        in_sheath = sheathed(context.plan, run)
        least = rule.least(run.size.system, in_sheath)
        if run.size.area_mm2 < least.area_mm2 * (1 - 1e-6):
            where = "in a sheath" if in_sheath else "laid singly"
            yield _finding(
                context, "conductor.minimum-size", "fail", run, None, run.size.area_mm2, least.area_mm2, "mm2",
                f"{label(run)} is {run.size.name}; {least.name} is the smallest conductor allowed {where}",
                basis_text(rule.basis), (f"{number(run.size.area_mm2)} mm2 < {number(least.area_mm2)} mm2",),
                f"{label(run)}: {least.name}" + (f". Exempt: {rule.exemption}" if rule.exemption else ""),
            )  # fmt: skip


@check("conductor.material", title="Conductor materials and strands the rulebook refuses", reads=("refused",))
def material(context: Context) -> Iterator[Finding]:
    """Runs of a material or strand that the rulebook does not accept."""
    rule = context.rulebook.refused
    if rule is None:
        return
    for run in context.plan.runs:
        strand = run.strand or context.rulebook.default_strand
        refused: list[str] = [run.material] if run.material in rule.materials else []
        refused += [f"{strand} conductors" for word in (strand,) if word in rule.strands]
        for what in refused:
            yield _finding(
                context, "conductor.material", "fail", run, None, None, None, None,
                f"{label(run)} is of {what}, which this rulebook does not accept", basis_text(rule.basis), (),
                "stranded copper, tinned where it is damp",
            )  # fmt: skip


@check("conductor.return", title="Return paths the rulebook forbids", reads=("returns",))
def return_path(context: Context) -> Iterator[Finding]:
    """Runs that return through the chassis where that is forbidden."""
    rule = context.rulebook.returns
    if rule is None or "chassis" not in rule.forbidden:
        return
    for run in context.plan.runs:
        if run.return_path == "chassis":
            yield _finding(
                context, "conductor.return", "fail", run, None, None, None, None,
                f"{label(run)} returns through the chassis, which this rulebook forbids", basis_text(rule.basis), (),
                f'{label(run)}: a return conductor of its own (return = "same")',
            )  # fmt: skip


def _finding(
    context: Context, rule: str, severity: Severity, run: Run, case: str | None, value: float | None,
    limit: float | None, unit: str | None, message: str, basis: str, working: tuple[str, ...], remedy: str,
) -> Finding:  # fmt: skip
    return Finding(rule, severity, run.name, "run", case, value, limit, unit, message, basis, working, remedy)
