"""Protection by section: present, near enough to what feeds it, not above the cable, not below the load."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from farvolt.checks.conductor import smallest_for
from farvolt.checks.registry import check
from farvolt.context import CaseStudy, Context, basis_text, label
from farvolt.errors import QuantityError
from farvolt.plan import Battery, Charger, Converter, Run, Solar
from farvolt.protection_types import protection_type
from farvolt.results import Finding, Severity
from farvolt.sections import Exposure, Guard, sheathed
from farvolt.solution import Solution
from farvolt.units import number

_PRACTICE = "common practice"


def limited_A(context: Context, port: int) -> float | None:
    """The most a source can ever deliver, where its own electronics limit it; None for a battery."""
    source = context.plan.sources[port]
    if isinstance(source, Charger | Converter):
        return source.amps.si
    if isinstance(source, Solar):
        return source.amps.si if source.amps else source.power.si / (0.4 * context.plan.plan.nominal.si)
    return None


def _self_limited(context: Context, exposures: list[Exposure], ampacity_A: float) -> bool:
    """All the sources behind these ways together cannot exceed the cable's ampacity."""
    limits = [limited_A(context, port) for port in {one.source for one in exposures}]
    return bool(limits) and all(one is not None for one in limits) and sum(one or 0.0 for one in limits) <= ampacity_A


def _exempt(context: Context, run: Run) -> bool:
    rule = context.rulebook.protection.exempt
    return rule is not None and run.purpose in rule.purposes


def _allowed_bare_m(context: Context, run: Run, exposure: Exposure) -> float | None:
    """Length that may run without protection from what feeds it; None where the rulebook does not say."""
    rule = context.rulebook.protection.unprotected_length
    if rule is None:
        return None
    in_sheath = sheathed(context.plan, run)
    at_battery = exposure.direct and isinstance(context.plan.sources[exposure.source], Battery)
    if in_sheath and at_battery and rule.sheathed_at_battery_m is not None:
        return rule.sheathed_at_battery_m
    return rule.sheathed_m if in_sheath else rule.plain_m


def _near_enough(context: Context, run: Run, exposure: Exposure) -> bool:
    """The unprotected start of a run is short enough, and protection follows it."""
    allowed = _allowed_bare_m(context, run, exposure)
    reach = exposure.bare_m + (exposure.before_m if exposure.upstream is None else 0.0)
    return exposure.ends_protected and allowed is not None and reach <= allowed + 1e-9


def _own(exposure: Exposure) -> bool:
    return exposure.guard is not None and exposure.guard.run == exposure.run


@check("protection.missing", title="Cables that a source feeds with no protection on the way", reads=("protection",))
def missing(context: Context) -> Iterator[Finding]:
    """Runs without protection from some end that can feed them; exemptions are named as notes."""
    for index, run in enumerate(context.plan.runs):
        bare = [one for one in context.sections.by_run.get(index, []) if one.guard is None]
        bare = [one for one in bare if not _near_enough(context, run, one)]
        if not bare:
            continue
        found = context.lowest_ampacity[index]
        ampacity = found.amps if found is not None and found.amps is not None else 0.0
        if _exempt(context, run):
            yield _exemption(context, run, f"a {run.purpose} run is exempt from protection")
        elif _self_limited(context, bare, ampacity):
            yield _limited(context, run, bare, ampacity)
        else:
            yield _unprotected(context, run, bare)


def _exemption(context: Context, run: Run, why: str) -> Finding:
    rule = context.rulebook.protection.exempt
    basis, text = (basis_text(rule.basis), rule.text) if rule else (_PRACTICE, "")
    return _finding("protection.missing", "note", run, None, None, None, f"{label(run)}: {why}", basis, (text,), None)


def _limited(context: Context, run: Run, bare: list[Exposure], ampacity_A: float) -> Finding:
    ports = sorted({one.source for one in bare})
    parts = [f'"{context.plan.sources[port].name}" {number(limited_A(context, port) or 0)} A' for port in ports]
    total = sum(limited_A(context, port) or 0.0 for port in ports)
    return _finding(
        "protection.missing", "note", run, total, ampacity_A, "A",
        f"{label(run)} has no protection against {' and '.join(parts)}: taken as exempt, the source limits itself",
        f"{_PRACTICE}; confirm that the source's output is limited in a fault",
        (f"{' + '.join(parts)} = {number(total)} A, not above the cable's ampacity of {number(ampacity_A)} A",), None,
    )  # fmt: skip


def _unprotected(context: Context, run: Run, bare: list[Exposure]) -> Finding:
    feeding = ", ".join(dict.fromkeys(f'"{context.plan.sources[one.source].name}"' for one in bare))
    first = bare[0]
    point = run.from_point if first.end == "from" else run.to_point
    reach = first.before_m + first.bare_m
    allowed = _allowed_bare_m(context, run, first)
    rule = context.rulebook.protection.unprotected_length
    told = f"{number(allowed)} m is allowed" if allowed is not None else "the rulebook states no allowed length"
    return _finding(
        "protection.missing", "fail", run, reach, allowed, "m",
        f"{label(run)}: nothing protects it where {feeding} feeds it at \"{point}\"",
        basis_text(rule.basis) if rule else _PRACTICE,
        (
            f"Unprotected from the source: {number(first.before_m)} m before + {number(first.bare_m)} m = {number(reach)} m; {told}",
            *((rule.text,) if rule else ()),
        ),
        f'a fuse or breaker in the feed at "{point}", within the allowed length, not above the cable\'s ampacity',
    )  # fmt: skip


@check("protection.distance", title="Length of cable before its own protection", reads=("protection",))
def distance(context: Context) -> Iterator[Finding]:
    """Runs whose own protection sits too far from what feeds them, unless the one upstream protects them too."""
    rule = context.rulebook.protection.unprotected_length
    if rule is None:
        return
    for index, run in enumerate(context.plan.runs):
        for one in context.sections.by_run.get(index, []):
            allowed = _allowed_bare_m(context, run, one)
            if not _own(one) or allowed is None or _exempt(context, run) or one.bare_m <= allowed + 1e-9:
                continue
            found = context.lowest_ampacity[index]
            ampacity = found.amps if found is not None and found.amps is not None else 0.0
            if one.upstream is not None and one.upstream.rating_A <= ampacity:
                continue
            if one.upstream is None and _self_limited(context, [one], ampacity):
                continue
            yield _finding(
                "protection.distance", "fail", run, one.bare_m, allowed, "m",
                f"{label(run)}: its protection sits {number(one.bare_m)} m along the cable; {number(allowed)} m is allowed",
                basis_text(rule.basis), (rule.text,), "move the protection towards the source, or sheath that length",
            )  # fmt: skip
            break


@dataclass(frozen=True, slots=True)
class _Judged:
    """A protection set against the cable it protects."""

    guard: Guard
    rating_A: float
    ampacity_A: float
    limit_A: float
    why: str
    allowance: bool
    """Within what the rulebook tolerates above the ampacity."""


@check("protection.over-conductor", title="Rating of each protection against the thinnest cable of its section", reads=("protection", "ampacity"))
def over_conductor(context: Context) -> Iterator[Finding]:
    """Cables whose protection is rated above what they may carry, return conductors included."""
    for index, run in enumerate(context.plan.runs):
        found = context.lowest_ampacity[index]
        if found is None or found.amps is None or _exempt(context, run):
            continue
        guards = _guards(context, index, run, found.amps)
        if not guards:
            continue
        judged = _judge(context, index, max(guards, key=lambda guard: guard.rating_A), found.amps)
        if judged is not None:
            yield _over(context, run, judged, found.working)


def _guards(context: Context, index: int, run: Run, ampacity_A: float) -> list[Guard]:
    """The protections that a run depends on, without those behind which only self-limited sources stand."""
    behind: dict[Guard, list[Exposure]] = {}
    for one in context.sections.by_run.get(index, []):
        if one.guard is not None and not (not _own(one) and _near_enough(context, run, one)):
            behind.setdefault(one.guard, []).append(one)
    guards = [guard for guard, ways in behind.items() if not _self_limited(context, ways, ampacity_A)]
    guards += [guard for port, guard in context.sections.returns.get(index, []) if limited_A(context, port) is None]
    return guards


def _judge(context: Context, index: int, guard: Guard, ampacity_A: float) -> _Judged | None:
    rules, run = context.rulebook.protection, context.plan.runs[index]
    small = rules.small_conductors.limit(run.size, run.material) if rules.small_conductors and run.size else None
    if small is not None and guard.rating_A > small.max_A:
        why = f"{small.size.name}: at most {number(small.max_A)} A"
        return _Judged(guard, guard.rating_A, ampacity_A, small.max_A, why, allowance=False)
    rule = rules.over_conductor
    percent = rule.percent if rule else 100.0
    limit = ampacity_A * percent / 100
    if guard.rating_A <= limit * (1 + 1e-9):
        return None
    why = f"{number(percent)} % of {number(ampacity_A)} A = {number(limit)} A"
    allowed = rule is not None and _tolerated(context, guard, ampacity_A, limit)
    return _Judged(guard, guard.rating_A, ampacity_A, limit, why, allowed)


def _tolerated(context: Context, guard: Guard, ampacity_A: float, limit_A: float) -> bool:
    """The next standard rating above the ampacity, within the rulebook's allowance for it."""
    rule = context.rulebook.protection.over_conductor
    assert rule is not None
    standard = context.rulebook.protection.standard_ratings
    try:
        made = standard.amps if standard else protection_type(guard.protection.type).ratings_A
    except QuantityError:
        return False
    next_up = min((rating for rating in made if rating >= limit_A), default=None)
    is_next = next_up is not None and guard.rating_A <= next_up
    if rule.allowance_percent is not None:
        return is_next and guard.rating_A <= ampacity_A * rule.allowance_percent / 100
    return rule.next_standard_up_to_A is not None and is_next and guard.rating_A <= rule.next_standard_up_to_A


def _over(context: Context, run: Run, judged: _Judged, working: tuple[str, ...]) -> Finding:
    rules = context.rulebook.protection
    where = label(context.plan.runs[judged.guard.run])
    own = context.plan.runs[judged.guard.run].name == run.name
    which = f"its own {judged.guard.protection.rating}" if own else f"the {judged.guard.protection.rating} on {where}"
    message = f"{label(run)} is protected by {which}, above the {number(judged.limit_A)} A it may carry"
    severity: Severity = "warn" if judged.allowance else "fail"
    if judged.allowance:
        message += "; within the allowance for the next standard rating"
    rule = rules.over_conductor
    basis = basis_text(rule.basis) if rule else _PRACTICE
    if rules.small_conductors is not None and "at most" in judged.why:
        basis = basis_text(rules.small_conductors.basis)
    text = (rule.text,) if rule and judged.allowance else ()
    return _finding(
        "protection.over-conductor", severity, run, judged.rating_A, judged.limit_A, "A", message, basis,
        (*working, judged.why, f"{number(judged.rating_A)} A > {number(judged.limit_A)} A", *text),
        _over_remedy(context, run, judged),
    )  # fmt: skip


def _over_remedy(context: Context, run: Run, judged: _Judged) -> str:
    size = smallest_for(context, run, _hottest(context, run), judged.rating_A)
    thicker = f"{label(run)}: {size.name} may carry {number(judged.rating_A)} A" if size else "a thicker cable"
    try:
        made = protection_type(judged.guard.protection.type).ratings_A
    except QuantityError:
        made = ()
    lower = max((rating for rating in made if rating <= judged.limit_A), default=None)
    return f"{thicker}; or a rating of {number(lower)} A, if the load allows it" if lower else thicker


def _hottest(context: Context, run: Run) -> CaseStudy:
    index = context.plan.runs.index(run)
    amps = [one.ampacities[index] for one in context.cases]
    best = min(range(len(amps)), key=lambda i: (found.amps or 0.0) if (found := amps[i]) else 0.0)
    return context.cases[best]


@check("protection.under-load", title="Rating of each protection against the load it carries", reads=("protection",))
def under_load(context: Context) -> Iterator[Finding]:
    """Protection rated below its current; continuous loads with the rulebook's factor."""
    rule = context.rulebook.protection.continuous
    factor = rule.factor if rule else 1.0
    basis = basis_text(rule.basis) if rule and factor != 1 else f"{_PRACTICE}: a protection carries its load without opening"
    for index, run in enumerate(context.plan.runs):
        for one in run.protections:
            worst = max(context.cases, key=lambda case: _demand(context, case, index, one.pole, factor)[0])
            demand, amps, continuous = _demand(context, worst, index, one.pole, factor)
            if demand > one.rating.si * (1 + 1e-9):
                yield _finding(
                    "protection.under-load", "fail", run, demand, one.rating.si, "A",
                    f"{label(run)}: its {one.rating} {one.type} carries {number(amps)} A"
                    + (f", to be counted as {number(demand)} A" if demand > amps * 1.001 else ""),
                    basis,
                    (
                        f"{number(amps, 4)} A, of which {number(continuous, 4)} A continuous: "
                        f"{number(amps - continuous, 4)} + {number(factor)} x {number(continuous, 4)} = {number(demand, 4)} A",
                        f"{number(demand, 4)} A > {number(one.rating.si, 4)} A",
                    ),
                    _rating_for(one.type, demand), worst.name,
                )  # fmt: skip


def _rating_for(kind: str, demand_A: float) -> str:
    try:
        made = protection_type(kind).ratings_A
    except QuantityError:
        made = ()
    rating = min((one for one in made if one >= demand_A), default=None)
    text = f"a rating of {number(rating)} A" if rating else f"a protection of at least {number(demand_A)} A of another type"
    return f"{text}, with a cable that may carry it"


def _demand(context: Context, one: CaseStudy, run: int, pole: str, factor: float) -> tuple[float, float, float]:
    """Current to be counted, actual current, and its continuous part, through a pole of a run (hot conductors)."""
    solution = one.solutions["hot"]
    if not solution.state.solved:
        return 0.0, 0.0, 0.0
    amps = float(np.nan_to_num(abs(solution.run_amps(0 if pole == "feed" else 1)[run])))
    continuous = amps * _continuous_share(solution, run) if factor != 1 else 0.0
    return amps + (factor - 1) * continuous, amps, continuous


def _continuous_share(solution: Solution, run: int) -> float:
    """Share of a run's current that goes to continuous loads: of the loads beyond it, by their current."""
    every, continuous = solution.feed_demand
    return float(continuous[run] / every[run]) if every[run] > 0 else 0.0


def _finding(
    rule: str, severity: Severity, run: Run, value: float | None, limit: float | None, unit: str | None,
    message: str, basis: str, working: tuple[str, ...], remedy: str | None, case: str | None = None,
) -> Finding:  # fmt: skip
    shown = tuple(line for line in working if line)
    return Finding(rule, severity, run.name, "run", case, value, limit, unit, message, basis, shown, remedy)
