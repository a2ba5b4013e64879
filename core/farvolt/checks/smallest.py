"""The smallest conductor that a rulebook allows, with the exemptions it makes."""

from collections.abc import Iterator

from farvolt.checks.registry import cannot_be_made, check, run_finding
from farvolt.conductors import Size
from farvolt.context import Context, basis_text, label
from farvolt.network import conductor_lengths_m, return_size
from farvolt.plan import Run
from farvolt.results import Finding
from farvolt.rulebook import MinimumSize, SizeExemption
from farvolt.sections import sheathed
from farvolt.units import number


@check("conductor.minimum-size", title="Smallest conductor allowed", reads=("minimum_size",))
def minimum_size(context: Context) -> Iterator[Finding]:
    """Runs with a conductor thinner than the rulebook allows, and those that its exemptions excuse."""
    rule = context.rulebook.minimum_size
    if rule is None:
        yield cannot_be_made(context, "conductor.minimum-size", "minimum_size", "the smallest size of a conductor")
        return
    by_sheath: list[Run] = []
    for index, run in enumerate(context.plan.runs):
        sizes = [size for size in (run.size, return_size(run)) if size is not None]
        if not sizes or run.purpose == "bond":
            continue
        size, in_sheath = min(sizes, key=lambda one: one.area_mm2), sheathed(context.plan, run)
        least = rule.least(size.system, in_sheath, run.material)
        if size.area_mm2 < least.area_mm2 * (1 - 1e-6):
            yield _small(context, index, size, least, rule)
        elif size.area_mm2 < rule.least(size.system, False, run.material).area_mm2 * (1 - 1e-6):
            by_sheath.append(run)
    if by_sheath and rule.outside_sheath_m is not None:
        yield _in_sheath(context, by_sheath, rule, rule.outside_sheath_m)


def small_allowed(context: Context, index: int, run: Run) -> bool:
    """Whether the rulebook allows the sizes of `run`, which stands for the run at that place of the plan."""
    rule, sizes = context.rulebook.minimum_size, [size for size in (run.size, return_size(run)) if size is not None]
    if rule is None or not sizes or run.purpose == "bond":
        return True
    size = min(sizes, key=lambda one: one.area_mm2)
    least = rule.least(size.system, sheathed(context.plan, run), run.material)
    enough = size.area_mm2 >= least.area_mm2 * (1 - 1e-6)
    return enough or any(not one.used_for and _holds(context, index, one) for one in rule.exempt)


def _small(context: Context, index: int, size: Size, least: Size, rule: MinimumSize) -> Finding:
    """A fail, unless an exemption holds by what the plan tells: then a note. One that goes by use is only named."""
    run = context.plan.runs[index]
    where = "in a sheath" if sheathed(context.plan, run) else "laid singly"
    which = "" if size == run.size else "the return of "
    measured = [(one, _holds(context, index, one)) for one in rule.exempt]
    holds = next((one for one, yes in measured if yes and not one.used_for), None)
    may = next((one for one, yes in measured if yes and one.used_for), None)
    message = f"{which}{label(run)} is {size.name}; {least.name} is the smallest conductor allowed {where}"
    if holds is not None:
        message += f"; exempt: {holds.text}"
    elif may is not None:
        message += f"; exempt only if it serves {may.used_for}"
    bases = [rule.basis, *(one.basis for one in (holds, may) if one is not None)]
    return run_finding(
        "conductor.minimum-size", "note" if holds else "fail", run, size.area_mm2, least.area_mm2,
        "mm2", message, "; ".join(dict.fromkeys(basis_text(one) for one in bases)),
        (f"{number(size.area_mm2)} mm2 < {number(least.area_mm2)} mm2",
         *(_told(context, index, one, yes) for one, yes in measured)),
        None if holds else f"{which}{label(run)}: {least.name}",
    )  # fmt: skip


def _holds(context: Context, index: int, one: SizeExemption) -> bool:
    """Whether a run keeps to an exemption's measures; False where it has none, since the plan then cannot tell."""
    measures = [(one.up_to_m, _length_m(context.plan.runs[index])), (one.up_to_A, _amps(context, index))]
    given = [value <= most * (1 + 1e-9) for most, value in measures if most is not None]
    return bool(given) and all(given)


def _told(context: Context, index: int, one: SizeExemption, holds: bool) -> str:
    """An exemption as a line of working: its words, its measures, and whether they hold."""
    sums = []
    if one.up_to_m is not None:
        sums.append(f"{number(_length_m(context.plan.runs[index]))} m here, at most {number(one.up_to_m)} m")
    if one.up_to_A is not None:
        sums.append(f"{number(_amps(context, index))} A here, at most {number(one.up_to_A)} A")
    judged = "holds" if holds else "does not hold"
    if one.used_for and (holds or not sums):
        judged = "to be judged by its use"
    return f"Exempt: {one.text} ({basis_text(one.basis)}); {'; '.join((*sums, judged))}"


def _length_m(run: Run) -> float:
    return max(conductor_lengths_m(run))


def _amps(context: Context, index: int) -> float:
    """The largest current of a run in any case that holds, with hot conductors."""
    solutions = [one.solutions["hot"] for one in context.cases]
    return max((float(one.largest_run_amps[index]) for one in solutions if one.state.solved), default=0.0)


def _in_sheath(context: Context, runs: list[Run], rule: MinimumSize, outside_m: float) -> Finding:
    """One note on the cables that are large enough only in their sheath."""
    names = ", ".join(label(run) for run in runs)
    return Finding(
        "conductor.minimum-size", "note", context.plan.plan.name, "plan", None, None, outside_m, "m",
        f"Large enough only in a sheath, which they may leave by at most {number(outside_m)} m: {names}",
        basis_text(rule.basis), (), None,
    )  # fmt: skip
