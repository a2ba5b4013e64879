"""The ways a cable is fed, as the checks of protection see them: what limits itself, what is exempt, what is bare."""

from farvolt.context import Context
from farvolt.plan import CHASSIS, Battery, Charger, Converter, Run
from farvolt.sections import Exposure, sheathed

PRACTICE = "common practice"


def limited_A(context: Context, port: int) -> float | None:
    """The most a source can ever deliver in any case, where its own electronics limit it; None for a battery."""
    source = context.plan.sources[port]
    if isinstance(source, Battery):
        return None
    settings = [one.case.sources.get(source.name) for one in context.cases]
    raised = [state.amps.si for state in settings if state is not None and state.amps is not None]
    if isinstance(source, Charger | Converter):
        return max([source.amps.si, *raised])
    nominal = float(context.cases[0].solutions["plan"].condition.nominal[port])
    return max([source.amps.si if source.amps else source.power.si / (0.4 * nominal), *raised])


def self_limited(context: Context, exposures: list[Exposure], ampacity_A: float) -> bool:
    """All the sources behind these ways together cannot exceed the cable's ampacity."""
    limits = [limited_A(context, port) for port in {one.source for one in exposures}]
    return bool(limits) and all(one is not None for one in limits) and sum(one or 0.0 for one in limits) <= ampacity_A


def exempt(context: Context, run: Run) -> bool:
    """Whether the rulebook asks no protection of a run; a bond that serves as a return is no mere bond."""
    rule = context.rulebook.protection.exempt
    if rule is None or run.purpose not in rule.purposes:
        return False
    return run.purpose != "bond" or (run.conducts == "return" and not _serves_as_return(context, run))


def _serves_as_return(context: Context, run: Run) -> bool:
    to_chassis = CHASSIS in (run.from_point, run.to_point)
    return to_chassis and any(other.return_path == "chassis" for other in context.plan.runs)


def ampacity_A(context: Context, index: int) -> float | None:
    """Ampacity of a run in the case where it is lowest; None where it is not known."""
    found = context.lowest_ampacity[index]
    return found.amps if found is not None else None


def allowed_bare_m(context: Context, run: Run, exposure: Exposure) -> float | None:
    """Length that may run without protection from what feeds it; None where the rulebook does not say."""
    rule = context.rulebook.protection.unprotected_length
    if rule is None:
        return None
    in_sheath = sheathed(context.plan, run)
    at_battery = exposure.direct and isinstance(context.plan.sources[exposure.source], Battery)
    if in_sheath and at_battery and rule.sheathed_at_battery_m is not None:
        return rule.sheathed_at_battery_m
    return rule.sheathed_m if in_sheath else rule.plain_m


def reach_m(exposure: Exposure) -> float:
    """Length without protection on one way, up to the run's own first protection or its end."""
    return exposure.bare_m + (exposure.before_m if exposure.upstream is None else 0.0)


def near_enough(context: Context, run: Run, exposure: Exposure) -> bool:
    """The run starts without protection of its own, but ends in some within the length that may go without."""
    allowed = allowed_bare_m(context, run, exposure)
    within = allowed is not None and reach_m(exposure) <= allowed + 1e-9
    return within and not exposure.own and bool(exposure.ahead)


def bare(context: Context, index: int) -> list[Exposure]:
    """The ways on which nothing protects a run, near enough protection ahead left out."""
    run = context.plan.runs[index]
    ways = [one for one in context.sections.by_run.get(index, []) if one.guard is None]
    return [one for one in ways if not near_enough(context, run, one)]


def failing(context: Context, index: int, ampacity: float | None) -> list[Exposure]:
    """The ways on which a run lacks protection that it needs: neither exempt nor limited by the sources themselves."""
    ways = bare(context, index)
    if not ways or exempt(context, context.plan.runs[index]):
        return []
    return [] if self_limited(context, ways, ampacity or 0.0) else ways
