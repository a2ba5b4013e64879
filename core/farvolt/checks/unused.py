"""What this version does not do: fields of a plan that nothing uses, and checks that are not made."""

from collections.abc import Iterator

from farvolt.checks.registry import check
from farvolt.context import Context
from farvolt.plan import Battery, Charger, Load, Plan, Solar
from farvolt.results import Finding

_NOT_CHECKED = ("fresh air and the risk of fire where batteries stand",)


@check("plan.not-used-yet", title="Fields that are read and kept, but that nothing uses yet")
def not_used(context: Context) -> Iterator[Finding]:
    """One note naming the fields of the plan that no calculation of this version uses."""
    counts = {name: count for name, count in _conditional(context.plan).items() if count}
    if counts:
        listed = ", ".join(f"{name} ({count})" for name, count in sorted(counts.items()))
        yield _note(
            context, "plan.not-used-yet", f"Kept in the file, but used by nothing in this version: {listed}",
            "judge these by hand",
        )  # fmt: skip


def _conditional(plan: Plan) -> dict[str, int]:
    """Fields that mean nothing beside what else their entry states, and how often that is so."""
    batteries = [source for source in plan.sources if isinstance(source, Battery)]
    timed: list[Load | Charger] = [*plan.loads, *(one for one in plan.sources if isinstance(one, Charger))]
    fixed = {battery.name for battery in batteries if battery.emf is not None}
    placed = {battery.at for battery in batteries}
    placed |= {run.from_point if one.end == "from" else run.to_point for run in plan.runs for one in run.protections}
    states = [(name, state) for case in plan.cases for name, state in case.sources.items()]
    return {
        "charge of batteries that state emf": sum(
            battery.name in fixed and "charge" in battery.model_fields_set for battery in batteries
        ) + sum(name in fixed and state.charge is not None for name, state in states),
        "joints and protection resistance of runs that state a measured resistance": sum(
            run.joints > 0 or any(one.resistance is not None for one in run.protections)
            for run in plan.runs
            if run.resistance is not None
        ),
        "take_off without link": sum("take_off" in one.model_fields_set and one.link is None for one in batteries),
        "hours_per_day beside a schedule": sum(
            bool(one.schedule) and one.hours_per_day is not None for one in timed
        ),
        "recovery without cut_out": sum(one.recovery is not None and one.cut_out is None for one in plan.loads),
        "surge of loads that no case names, for volts and drop": sum(
            load.surge is not None and not any(load.name in case.surge for case in plan.checked_cases)
            for load in plan.loads
        ),
        "zones of points without battery or protection": sum(
            point.zone is not None and point.name not in placed for point in plan.points
        ),
        "max_input of solar without array": sum(
            isinstance(one, Solar) and one.max_input is not None and one.array is None for one in plan.sources
        ),
    }  # fmt: skip


@check("plan.not-checked-yet", title="What this version does not check")
def not_checked(context: Context) -> Iterator[Finding]:
    """A standing note, so that a plan without other findings is not taken for a safe one."""
    linked = any(isinstance(one, Battery) and one.link is not None for one in context.plan.sources)
    listed = (*_NOT_CHECKED, *(("ampacity and protection of the links between battery strings",) if linked else ()))
    yield _note(
        context, "plan.not-checked-yet", f"Not checked by this version: {'; '.join(listed)}", "judge these by hand"
    )


def _note(context: Context, rule: str, message: str, remedy: str) -> Finding:
    name = context.plan.plan.name
    return Finding(rule, "note", name, "plan", None, None, None, None, message, "what this version does", (), remedy)
