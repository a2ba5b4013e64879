"""The rating of each protection against the cables it protects, sources that join and excuses included."""

from collections.abc import Iterator
from dataclasses import dataclass

from farvolt.checks.demand import Demands
from farvolt.checks.registry import apart, cannot_be_made, check, run_finding
from farvolt.checks.ways import PRACTICE, ampacity_A, exempt, failing, limited_A, near_enough, self_limited
from farvolt.conductors import Size
from farvolt.context import Context, basis_text, label, larger_sizes
from farvolt.network import FEED, return_size
from farvolt.plan import Run
from farvolt.protection_types import ProtectionType
from farvolt.results import Finding, Severity
from farvolt.rulebook import SmallConductor
from farvolt.sections import Exposure, Guard
from farvolt.temperatures import run_ampacity
from farvolt.units import number


@dataclass(frozen=True, slots=True)
class Limit:
    """The highest rating a run's cable allows, by its ampacity or by the rule for small conductors."""

    amps: float
    ampacity_A: float
    percent: float
    small: SmallConductor | None
    """The entry that binds, whatever the ampacity."""

    @property
    def why(self) -> str:
        """The limit as a line of working."""
        if self.small is not None:
            return f"{self.small.size.name}: at most {number(self.amps)} A"
        return f"{number(self.percent)} % of {number(self.ampacity_A)} A = {number(self.amps)} A"

    def basis(self, context: Context) -> str:
        """Where the limit stands."""
        rules = context.rulebook.protection
        rule = rules.over_conductor if self.small is None else rules.small_conductors
        return basis_text(rule.basis) if rule else PRACTICE


def limit_for(context: Context, run: Run, ampacity: float) -> Limit:
    """The highest rating of a protection for a run of this ampacity, before any allowance."""
    rules = context.rulebook.protection
    percent = rules.over_conductor.percent if rules.over_conductor else 100.0
    amps = ampacity * percent / 100
    if rules.small_conductors is not None and run.size is not None:
        thinnest = min((run.size, return_size(run) or run.size), key=lambda size: size.area_mm2)
        entry = rules.small_conductors.limit(thinnest, run.material)
        if entry is not None and entry.max_A < amps:
            return Limit(entry.max_A, ampacity, percent, entry)
    return Limit(amps, ampacity, percent, None)


@check(
    "protection.over-conductor",
    title="Rating of each protection against the thinnest cable of its section",
    reads=("protection", "ampacity"),
)
def over_conductor(context: Context) -> Iterator[Finding]:
    """Cables whose protection is rated above what they may carry, return conductors included."""
    if context.rulebook.protection.over_conductor is None:
        what = "how far a rating may exceed the ampacity; above 100 % is shown as a warning"
        yield cannot_be_made(context, "protection.over-conductor", "over_conductor", what)
    demands = Demands(context)
    for index, run in enumerate(context.plan.runs):
        amps = ampacity_A(context, index)
        if amps is None:
            continue
        ways, limit = _ways(context, index, amps), limit_for(context, run, amps)
        guards, excused = _guards(context, index, ways, amps)
        over = [guard for guard in (*guards, *excused) if guard.rating_A > limit.amps * (1 + 1e-9)]
        worst = max(guards, key=lambda guard: guard.rating_A, default=None)
        if over and (exempt(context, run) or worst not in over):
            yield _excused(context, run, max(over, key=lambda guard: guard.rating_A), limit)
        if exempt(context, run):
            continue
        if worst is not None and worst in over:
            yield _over(context, index, worst, limit, amps, demands)
            continue
        total, parts = _joint(context, run, ways)
        if len(parts) > 1 and total > amps * (1 + 1e-9):
            yield _jointly_over(context, index, total, parts, amps)
        if run.parallel > 1 and worst is not None and worst.rating_A > amps / run.parallel:
            yield _shared(run, worst, amps)


def _ways(context: Context, index: int, ampacity: float) -> list[Exposure]:
    """The ways a run is fed, without those into an end that nothing protects: protection.missing names that flaw."""
    ways = context.sections.by_run.get(index, [])
    unprotected = {one.end for one in failing(context, index, ampacity)}
    return [one for one in ways if one.end not in unprotected] if unprotected else ways


def _guards(context: Context, index: int, ways: list[Exposure], ampacity: float) -> tuple[list[Guard], list[Guard]]:
    """The protections that a run depends on, and those behind which only self-limited sources stand."""
    run, behind = context.plan.runs[index], dict[Guard, list[Exposure]]()
    for one in ways:
        for guard in one.ahead if near_enough(context, run, one) else (one.guard,):
            if guard is not None:
                behind.setdefault(guard, []).append(one)
    excused = [guard for guard, ways in behind.items() if self_limited(context, ways, ampacity)]
    guards = [guard for guard in behind if guard not in excused]
    guards += [guard for port, guard in context.sections.returns.get(index, []) if limited_A(context, port) is None]
    return guards, excused


def binding_guards(context: Context, index: int, ampacity: float) -> list[Guard]:
    """The protections that a run of this ampacity depends on: none may be rated above what it may carry."""
    if exempt(context, context.plan.runs[index]):
        return []
    return _guards(context, index, _ways(context, index, ampacity), ampacity)[0]


def _excused(context: Context, run: Run, guard: Guard, limit: Limit) -> Finding:
    """A rating that nothing is made of, and why."""
    rule = context.rulebook.protection.exempt
    if rule is not None and exempt(context, run):
        why, basis = f"a {run.purpose} run is exempt", basis_text(rule.basis)
    else:
        why, basis = "only sources that limit themselves stand behind it", PRACTICE
    return run_finding(
        "protection.over-conductor", "note", run, guard.rating_A, limit.amps, "A",
        f"{label(run)}: the {guard.protection.rating} on {label(context.plan.runs[guard.run])} is above the "
        f"{number(limit.amps)} A it may carry; {why}",
        basis, (limit.why, f"{apart(guard.rating_A, limit.amps)} A > {number(limit.amps)} A"), None,
    )  # fmt: skip


def _over(context: Context, index: int, guard: Guard, limit: Limit, amps: float, demands: Demands) -> Finding:
    run, rule = context.plan.runs[index], context.rulebook.protection.over_conductor
    where = label(context.plan.runs[guard.run])
    which = f"its own {guard.protection.rating}" if guard.run == index else f"the {guard.protection.rating} on {where}"
    message = f"{label(run)} is protected by {which}, above the {number(limit.amps)} A it may carry"
    tolerated = limit.small is None and _tolerated(context, guard, amps, limit.amps)
    if tolerated:
        message += "; within the allowance for the next standard rating"
    severity: Severity = "warn" if tolerated or (rule is None and limit.small is None) else "fail"
    found = context.lowest_ampacity[index]
    compared = f"{apart(guard.rating_A, limit.amps)} A > {number(limit.amps)} A"
    working = (*(found.working if found else ()), limit.why, compared)
    told = (rule.text,) if rule and tolerated else ()
    return run_finding(
        "protection.over-conductor", severity, run, guard.rating_A, limit.amps, "A", message, limit.basis(context),
        (*working, *told), _over_remedy(context, index, guard, limit, demands),
    )  # fmt: skip


def _tolerated(context: Context, guard: Guard, amps: float, limit_A: float) -> bool:
    """The next standard rating above the ampacity, within the rulebook's allowance for it."""
    rule = context.rulebook.protection.over_conductor
    if rule is None:
        return False
    next_up = min((one for one in _standard(context, guard.protection.kind) if one >= limit_A), default=None)
    is_next = next_up is not None and guard.rating_A <= next_up
    if rule.allowance_percent is not None:
        return is_next and guard.rating_A <= amps * rule.allowance_percent / 100
    return rule.next_standard_up_to_A is not None and is_next and guard.rating_A <= rule.next_standard_up_to_A


def _standard(context: Context, kind: ProtectionType) -> tuple[float, ...]:
    """The rulebook's own standard ratings, else those made of a type of protection."""
    standard = context.rulebook.protection.standard_ratings
    return standard.amps if standard else kind.ratings_A


def _over_remedy(context: Context, index: int, guard: Guard, limit: Limit, demands: Demands) -> str:
    """A thicker cable for this rating, and a lower rating where one is made that still carries the load."""
    run = context.plan.runs[index]
    size = size_for_rating(context, index, guard.rating_A)
    thicker = f"{label(run)}: {size.name} may carry {number(guard.rating_A)} A" if size else ""
    demand, _ = demands.worst(guard.run, FEED)
    lower = max((one for one in guard.protection.kind.ratings_A if demand <= one <= limit.amps), default=None)
    on = label(context.plan.runs[guard.run])
    less = f"{number(lower)} A instead of {guard.protection.rating} on {on}" if lower else ""
    return "; or ".join(filter(None, (thicker, less))) or "less load on this cable, or its load shared among several"


def size_for_rating(context: Context, index: int, rating_A: float) -> Size | None:
    """The smallest larger size of the same system that a protection of this rating may protect where the run lies."""
    run, case = context.plan.runs[index], context.cases[_hottest(context, index)].case
    for size in larger_sizes(run.size) if run.size else []:
        changed = run.model_copy(update={"size": size})
        found = run_ampacity(context.plan, context.rulebook, changed, case, context.together[run.name])
        if found is not None and found.amps is not None and limit_for(context, changed, found.amps).amps >= rating_A:
            return size
    return None


def _hottest(context: Context, index: int) -> int:
    """The case in which a run's ampacity is lowest."""
    amps = [found.amps if (found := one.ampacities[index]) else None for one in context.cases]
    return min(range(len(amps)), key=lambda case: amps[case] or 0.0)


def _joint(context: Context, run: Run, ways: list[Exposure]) -> tuple[float, list[str]]:
    """The most that sources joining before an end of a run can feed into it, and through what.

    A battery counts with its protection, any other source with its own limit.
    """
    worst = (0.0, list[str]())
    if len(ways) < 2:
        return worst
    joining = [one for one in ways if not one.own and not near_enough(context, run, one)]
    for end in ("from", "to"):
        ways = [one for one in joining if one.end == end]
        limits = {one.source: limited_A(context, one.source) for one in ways}
        guards = dict.fromkeys(one.guard for one in ways if one.guard is not None and limits[one.source] is None)
        behind = {one.source for one in ways if one.guard in guards}
        limited = {port: amps for port, amps in limits.items() if amps is not None and port not in behind}
        parts = [f"{guard.protection.rating} on {label(context.plan.runs[guard.run])}" for guard in guards]
        parts += [f'{number(amps)} A of "{context.plan.sources[port].name}"' for port, amps in limited.items()]
        total = sum(guard.rating_A for guard in guards) + sum(limited.values())
        worst = max(worst, (total, parts))
    return worst


def _jointly_over(context: Context, index: int, total: float, parts: list[str], ampacity: float) -> Finding:
    run = context.plan.runs[index]
    size = size_for_rating(context, index, total)
    thicker = f"{label(run)}: {size.name} may carry {number(total)} A; or " if size else ""
    return run_finding(
        "protection.over-conductor", "warn", run, total, ampacity, "A",
        f"{label(run)} is within its ampacity of each source, but together they can feed {number(total)} A into it",
        f"{PRACTICE}: what several sources can feed together counts",
        (f"{' + '.join(parts)} = {number(total)} A > {number(ampacity)} A",),
        f"{thicker}a protection of its own, not above {number(ampacity)} A, where they join",
    )  # fmt: skip


def _shared(run: Run, guard: Guard, ampacity: float) -> Finding:
    each = ampacity / run.parallel
    return run_finding(
        "protection.over-conductor", "note", run, guard.rating_A, each, "A",
        f"{label(run)}: one protection of {guard.protection.rating} for {run.parallel} cables in parallel counts on "
        "equal sharing; where one comes loose, the others carry it all without protection",
        f"{PRACTICE}, as IEC 60364-4-43 433.4 has it (provisional): cables alike in size, length and path",
        (f"{number(ampacity)} A / {run.parallel} = {number(each)} A in each cable",),
        "equal cables and lugs, checked for equal current under load; or a protection in each cable",
    )  # fmt: skip
