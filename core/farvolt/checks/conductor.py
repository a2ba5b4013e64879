"""The cable itself: ampacity, material, return path."""

from collections.abc import Iterator

import numpy as np

from farvolt import interim, network
from farvolt.ampacity import Ampacity, at_current
from farvolt.checks.demand import Demands
from farvolt.checks.registry import apart, cannot_be_made, check, run_finding
from farvolt.conductors import Size
from farvolt.context import CaseStudy, Context, basis_text, label, larger_sizes
from farvolt.network import Floats, return_size, strand
from farvolt.plan import CHASSIS, Run
from farvolt.results import Finding
from farvolt.started import solved_hot
from farvolt.temperatures import run_ambient_degC, run_ampacity
from farvolt.units import number

_TRIALS = 20
"""Remedies tried on the network; those beyond are estimated at the current found."""

_NO_CURRENT_A = 1e-3
"""A bond that carries less than this serves as no return."""


@check(
    "conductor.ampacity",
    title="Current in each cable against its ampacity",
    reads=("ampacity", "ambient", "bundling"),
)
def over_ampacity(context: Context) -> Iterator[Finding]:
    """Each run whose lasting current exceeds its ampacity, in the case where it exceeds it most (hot conductors)."""
    currents = np.max(Demands(context).amps, axis=0)  # over feed and return; a start is too short to warm a cable
    trials = _TRIALS if context.remedies_are_exact else 0
    for index, run in enumerate(context.plan.runs):
        found = context.lowest_ampacity[index]
        if found is None:
            yield _no_size(context, run)
            continue
        if found.amps is None:
            yield _missing(context, run, found)
        over = [case for case in range(len(context.cases)) if _excess(context, index, case, currents) > 1 + 1e-9]
        if over:
            worst = max(over, key=lambda case: _excess(context, index, case, currents))
            yield _over(context, index, worst, over, currents[:, index], trials > 0)
            trials -= 1


def _currents(one: CaseStudy) -> Floats:
    """Larger conductor current of every run, with hot conductors: constant-power loads draw most then."""
    solution = one.solutions["hot"]
    if not solution.state.solved:
        return np.zeros(len(solution.network.plan.runs))
    return solution.largest_run_amps


def _excess(context: Context, run: int, case: int, currents: Floats) -> float:
    """Current over ampacity; 0 in a case where the ampacity is not known."""
    found, amps = context.cases[case].ampacities[run], float(currents[case, run])
    if found is None or found.amps is None:
        return 0.0
    return amps / found.amps if found.amps > 0 else float("inf") if amps > 0 else 0.0


def _over(context: Context, index: int, worst: int, over: list[int], currents: Floats, exact: bool) -> Finding:
    entry, one, amps = context.plan.runs[index], context.cases[worst], float(currents[worst])
    found = one.ampacities[index]
    assert found is not None
    assert found.amps is not None
    size = _large_enough(context, index, over, currents, exact)
    carries = f"{label(entry)}: {size.name} carries this where it lies" if size else ""
    return run_finding(
        "conductor.ampacity", "fail", entry, amps, found.amps, "A",
        f"{label(entry)} carries {apart(amps, found.amps)} A; {number(found.amps)} A is its ampacity where it lies",
        found.basis,
        (_place(context, entry, one), *found.working, f"{apart(amps, found.amps, 4)} A > {number(found.amps, 4)} A",
         _warmth(context, entry, found, amps, one)),
        carries or "several cables in parallel, cables laid apart or in a cooler place, or less load", one.name,
    )  # fmt: skip


def _place(context: Context, run: Run, one: CaseStudy) -> str:
    """Where a run lies and what lies with it: what ambient and bundling are taken from."""
    plan, count = context.plan, context.together[run.name]
    zone, route = plan.zone_of(run), plan.routes[run.route] if run.route is not None else None
    degC = f"{number(run_ambient_degC(plan, run, one.case))} degC"
    stated = "of the case" if one.case.ambient is not None else f'of the zone "{zone}"' if zone else "of the plan"
    if run.bundled is not None:
        why = "as the run states"
    elif route is not None:
        why = f'{"as stated for" if route.conductors is not None else "all that pass"} the route "{run.route}"'
    else:
        why = "its own"
    return f"Ambient {degC}, that {stated}; {count} conductor{'s' if count != 1 else ''} laid together, {why}"


def _warmth(context: Context, run: Run, found: Ampacity, amps: float, one: CaseStudy) -> str:
    """What the thinner of a run's conductors reaches at its current."""
    sizes = [size for size in (run.size, return_size(run)) if size is not None]
    size = min(sizes, key=lambda each: each.area_mm2)
    ambient = run_ambient_degC(context.plan, run, one.case)
    return at_current(found, amps, ambient, size, run.material, strand(run, context.rulebook))


def _large_enough(context: Context, index: int, over: list[int], currents: Floats, exact: bool) -> Size | None:
    """The smallest larger size of the same system that carries the current of every case that is over.

    Tried on the network where that is allowed: a thicker cable may draw more than the thin one did.
    """
    run = context.plan.runs[index]
    for size in larger_sizes(run.size) if run.size else []:
        limits = [_ampacity_with(context, run, size, case) for case in over]
        if any(limit < currents[case] for case, limit in zip(over, limits, strict=True)):
            continue
        if not exact:
            return size
        drawn = [_drawn(context, run, size, index, case) for case in over]
        if all(amps <= limit * (1 + 1e-9) for amps, limit in zip(drawn, limits, strict=True)):
            return size
    return None


def _ampacity_with(context: Context, run: Run, size: Size, case: int) -> float:
    changed = run.model_copy(update={"size": size})
    found = run_ampacity(context.plan, context.rulebook, changed, context.cases[case].case, context.together[run.name])
    return (found.amps or 0.0) if found is not None else 0.0


def _drawn(context: Context, run: Run, size: Size, index: int, case: int) -> float:
    """The lasting current of a run with another size, in a case as it is after any start."""
    one = context.cases[case].case
    if one.surge:
        changed = network.build(interim.with_sizes(context.plan, {run.name: size}), context.rulebook)
        (solution,) = solved_hot(changed, context.rulebook, [one.model_copy(update={"surge": ()})])
    else:
        solution = context.resolve({run.name: size}, case, "hot")
    return float(solution.largest_run_amps[index]) if solution.state.solved else float("inf")


def _missing(context: Context, run: Run, found: Ampacity) -> Finding:
    return run_finding(
        "conductor.ampacity", "warn", run, None, None, None,
        f"{label(run)}: neither its ampacity nor its protection can be checked: {found.missing}",
        found.basis or context.rulebook.title, found.working,
        "a size, material or insulation that the rulebook lists, or a rulebook of your own with this entry",
    )  # fmt: skip


def _no_size(context: Context, run: Run) -> Finding:
    return run_finding(
        "conductor.ampacity", "warn", run, None, None, None,
        f"{label(run)} states a resistance but no size: its ampacity, its protection and the smallest size allowed "
        "cannot be checked",
        context.rulebook.title, (), "state the size of the cable beside its resistance",
    )  # fmt: skip


@check("conductor.material", title="Conductor materials and strands the rulebook refuses", reads=("refused",))
def material(context: Context) -> Iterator[Finding]:
    """Runs of a material or strand that the rulebook does not accept."""
    rule = context.rulebook.refused
    if rule is None:
        # A stated reason here is the answer: there is nothing that such a rulebook refuses.
        if "refused" not in context.rulebook.missing:
            yield cannot_be_made(context, "conductor.material", "refused", "which materials and strands are refused")
        return
    for run in context.plan.runs:
        made = strand(run, context.rulebook)
        refused = [str(run.material)] * (run.material in rule.materials)
        refused += [f"{made} conductors"] * (made in rule.strands)
        if refused:
            yield run_finding(
                "conductor.material", "fail", run, None, None, None,
                f"{label(run)} is of {' in '.join(refused)}, which this rulebook does not accept",
                basis_text(rule.basis), (), "stranded copper, tinned where it is damp",
            )  # fmt: skip


@check("conductor.return", title="Return paths the rulebook forbids", reads=("returns",))
def return_path(context: Context) -> Iterator[Finding]:
    """Runs that return through the chassis where that is forbidden."""
    rule = context.rulebook.returns
    if rule is None:
        if "returns" not in context.rulebook.missing:
            yield cannot_be_made(context, "conductor.return", "returns", "which return paths are forbidden")
        return
    for index, run in enumerate(context.plan.runs if "chassis" in rule.forbidden else ()):
        if run.return_path == "chassis" or _returns_by_chassis(context, index, run):
            yield run_finding(
                "conductor.return", "fail", run, None, None, None,
                f"{label(run)} returns through the chassis, which this rulebook forbids", basis_text(rule.basis), (),
                f'{label(run)}: a return conductor of its own (return = "same")',
            )  # fmt: skip


def _returns_by_chassis(context: Context, index: int, run: Run) -> bool:
    """A run to the chassis that is no bond and carries current in some case."""
    if CHASSIS not in (run.from_point, run.to_point) or run.purpose == "bond":
        return False
    return any(float(_currents(one)[index]) > _NO_CURRENT_A for one in context.cases)
