"""Where protection sits: on every way that a source can feed a cable, and near enough to what feeds it."""

import math
from collections.abc import Iterator

from farvolt.checks.demand import Demands
from farvolt.checks.rating import limit_for
from farvolt.checks.registry import cannot_be_made, check, run_finding
from farvolt.checks.ways import (
    PRACTICE,
    allowed_bare_m,
    ampacity_A,
    bare,
    exempt,
    failing,
    limited_A,
    reach_m,
    self_limited,
)  # fmt: skip
from farvolt.context import Context, basis_text, label
from farvolt.network import FEED
from farvolt.plan import Charger, Run
from farvolt.results import Finding
from farvolt.sections import Exposure
from farvolt.units import number


@check("protection.missing", title="Cables that a source feeds with no protection on the way", reads=("protection",))
def missing(context: Context) -> Iterator[Finding]:
    """Runs without protection from some end that can feed them; exemptions are named as notes."""
    demands = Demands(context)
    for index, run in enumerate(context.plan.runs):
        ways = bare(context, index)
        if not ways:
            continue
        if exempt(context, run):
            yield _exemption(context, run)
        elif not failing(context, index, ampacity_A(context, index)):
            yield _limited(context, run, ways, ampacity_A(context, index) or 0.0)
        else:
            yield _unprotected(context, index, ways, demands)


def _exemption(context: Context, run: Run) -> Finding:
    rule = context.rulebook.protection.exempt
    assert rule is not None
    message = f"{label(run)}: a {run.purpose} run is exempt from protection"
    return run_finding(
        "protection.missing", "note", run, None, None, None, message, basis_text(rule.basis), (rule.text,), None
    )


def _limited(context: Context, run: Run, ways: list[Exposure], ampacity: float) -> Finding:
    ports = sorted({one.source for one in ways})
    parts = [f'"{context.plan.sources[port].name}" {number(limited_A(context, port) or 0)} A' for port in ports]
    total = sum(limited_A(context, port) or 0.0 for port in ports)
    sources = [context.plan.sources[port] for port in ports]
    stated = all(isinstance(source, Charger) and source.self_limiting for source in sources)
    # An alternator that does not limit itself is the dangerous case; a controller or converter is electronic.
    unsaid = any(isinstance(source, Charger) and not source.self_limiting for source in sources)
    return run_finding(
        "protection.missing", "warn" if unsaid else "note", run, total, ampacity, "A",
        f"{label(run)} has no protection against {' and '.join(parts)}: taken as exempt, the source limits itself",
        f"{PRACTICE}; " + ("the plan states that it does" if stated else "the plan does not state that it does"),
        (f"{' + '.join(parts)} = {number(total)} A, not above the cable's ampacity of {number(ampacity)} A",),
        None if stated else "confirm in its data sheet that the output is limited in a fault, or protect it there",
    )  # fmt: skip


def _unprotected(context: Context, index: int, ways: list[Exposure], demands: Demands) -> Finding:
    """The end that is worst off: fed by what does not limit itself, over the longest way."""
    run, rule = context.plan.runs[index], context.rulebook.protection.unprotected_length
    unlimited = [one for one in ways if limited_A(context, one.source) is None] or ways
    worst = max(unlimited, key=reach_m)
    feeding = ", ".join(dict.fromkeys(f'"{context.plan.sources[one.source].name}"' for one in unlimited))
    places = " and ".join(dict.fromkeys(f'"{_point(run, one)}"' for one in unlimited))
    allowed = allowed_bare_m(context, run, worst)
    told = _told(allowed)
    ahead = f"; the next protection is {number(worst.bare_m)} m on" if worst.ahead else ""
    if any(one.pole == "return" for one in run.protections):
        ahead += "; protection in the return does not protect the feed"
    sums = f"{number(worst.before_m)} m before + {number(worst.bare_m)} m = {number(reach_m(worst))} m"
    return run_finding(
        "protection.missing", "fail", run, reach_m(worst), allowed if allowed != math.inf else None, "m",
        f"{label(run)}: nothing protects it where {feeding} feeds it at {places}{ahead}",
        basis_text(rule.basis) if rule else PRACTICE,
        (f"Unprotected from the source: {sums}; {told}", *((rule.text,) if rule else ())),
        f"a fuse or breaker in the feed at {places}, {_rating_range(context, index, demands)}",
    )  # fmt: skip


def _told(allowed_m: float | None) -> str:
    if allowed_m is None:
        return "the rulebook states no allowed length"
    if allowed_m == math.inf:
        return "any length is allowed if protection follows"
    return f"{number(allowed_m)} m is allowed"


def _point(run: Run, way: Exposure) -> str:
    return run.from_point if way.end == "from" else run.to_point


def _rating_range(context: Context, index: int, demands: Demands) -> str:
    """What a protection of a run may be rated at: from its load to what the cable may carry."""
    amps, (demand, _) = ampacity_A(context, index), demands.worst(index, FEED)
    if amps is None:
        return "not above the cable's ampacity, which is not known"
    limit = limit_for(context, context.plan.runs[index], amps)
    if demand > limit.amps:
        return f"and a thicker cable: its load is {number(demand)} A, and it allows a rating of {number(limit.amps)} A"
    if demand == 0:
        return f"rated at no more than the {number(limit.amps)} A the cable allows"
    return f"rated between its load of {number(demand)} A and the {number(limit.amps)} A the cable allows"


@check("protection.distance", title="Length of cable before its own protection", reads=("protection",))
def distance(context: Context) -> Iterator[Finding]:
    """Runs whose own protection sits too far from what feeds them, unless the one upstream protects them too."""
    rule, unknown, unstated = context.rulebook.protection.unprotected_length, False, 0
    if rule is None:
        what = "how far from the source protection may sit"
        yield cannot_be_made(context, "protection.distance", "unprotected_length", what)
        return
    for index, run in enumerate(context.plan.runs):
        unstated += sum(one.distance is None for one in run.protections)
        ways = [one for one in context.sections.by_run.get(index, []) if one.own and not exempt(context, run)]
        unknown |= any(allowed_bare_m(context, run, one) is None for one in ways)
        worst = max((one for one in ways if _too_far(context, index, one)), key=lambda one: one.bare_m, default=None)
        if worst is not None:
            yield _distance(context, run, worst)
    if unknown:
        what = "how far from the source the protection of cables that lie as some of these do may sit"
        yield cannot_be_made(context, "protection.distance", "unprotected_length", what)
    if unstated:
        yield _unstated(context, unstated)


def _too_far(context: Context, index: int, way: Exposure) -> bool:
    """The bare start is longer than allowed, and neither upstream protection nor the source's own limit covers it."""
    run = context.plan.runs[index]
    allowed, amps = allowed_bare_m(context, run, way), ampacity_A(context, index) or 0.0
    if allowed is None or way.bare_m <= allowed + 1e-9:
        return False
    if way.upstream is not None:
        return way.upstream.rating_A > amps
    return not self_limited(context, [way], amps)


def _distance(context: Context, run: Run, way: Exposure) -> Finding:
    rule, allowed = context.rulebook.protection.unprotected_length, allowed_bare_m(context, run, way)
    assert rule is not None
    assert allowed is not None
    sheathed_m = rule.sheathed_m if rule.sheathed_m is not None else 0.0
    sheath = ", or a sheath or conduit over the whole of that length" if way.bare_m <= sheathed_m else ""
    return run_finding(
        "protection.distance", "fail", run, way.bare_m, allowed, "m",
        f"{label(run)}: its protection sits {number(way.bare_m)} m along the cable; {number(allowed)} m is allowed",
        basis_text(rule.basis),
        (f"From \"{_point(run, way)}\": {number(way.bare_m, 4)} m > {number(allowed, 4)} m", rule.text),
        f'the protection within {number(allowed)} m of "{_point(run, way)}"{sheath}',
    )  # fmt: skip


def _unstated(context: Context, count: int) -> Finding:
    return Finding(
        "protection.distance", "note", context.plan.plan.name, "plan", None, None, None, None,
        f"{count} protection{'s state' if count > 1 else ' states'} no distance: taken to sit at the very end",
        "what the plan leaves open", (), "state the distance of each from its end of the cable",
    )  # fmt: skip
