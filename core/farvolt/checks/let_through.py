"""What each protection lets through in the largest fault, against what the cables it protects withstand."""

import math
from collections.abc import Iterator
from dataclasses import dataclass

from farvolt.checks.far_end import thinnest
from farvolt.checks.registry import check, run_finding
from farvolt.checks.ways import PRACTICE, ampacity_A, exempt, limited_A
from farvolt.context import Context, basis_text, label, larger_sizes
from farvolt.plan import Protection
from farvolt.results import Finding
from farvolt.sections import Guard
from farvolt.units import number
from farvolt.withstand import LONGEST_S, Withstand


@dataclass(frozen=True, slots=True)
class NearFault:
    """The largest fault that a conductor has to stand until the protection before it opens."""

    guard: Guard
    run: int
    """Index of the run whose conductor is at stake."""
    amps: float
    place: str
    estimated: bool
    stands: Withstand
    before: tuple[Guard, ...]
    """Those upstream through which all of the fault current comes too: whichever opens first ends it."""

    def through(self, protection: Protection) -> tuple[float, Protection]:
        """What a protection at the guard's place, or one upstream that is quicker, lets through, and which that is.

        Infinite where none of them need open for so little.
        """
        every = (protection, *(one.protection for one in self.before))
        found = [(one.kind.let_through_A2s(self.amps, one.rating.si), place) for place, one in enumerate(every)]
        joule, place = min(found)
        return joule, every[place]

    def holds(self, protection: Protection) -> bool:
        """Whether the conductor withstands it; a fault that is cleared after 5 s or more is the far end's, but none is
        where no opening time is stated at all."""
        late = protection.kind.opens_within_s(self.amps, protection.rating.si) > LONGEST_S
        stated = bool(protection.kind.band.greatest)
        return (late and stated) or self.through(protection)[0] <= self.stands.joule_A2s * (1 + 1e-9)


def near_faults(context: Context) -> Iterator[NearFault]:
    """For each protection and each run it protects, the fault at the start of that run, or at the protection."""
    seats = {
        (index, one.end): place
        for index, run in enumerate(context.plan.runs)
        for place, one in reversed(list(enumerate(run.protections)))
        if one.pole == "feed"
    }
    seen: set[tuple[int, str, int]] = set()
    for index, ways in context.sections.by_run.items():
        run = context.plan.runs[index]
        if run.size is None or exempt(context, run):
            continue
        for way in ways:
            guard = way.guard
            if limited_A(context, way.source) is not None:
                continue  # its own limit is what the cable has to carry
            if guard is None or (key := (guard.run, guard.protection.end, index)) in seen:
                continue
            seen.add(key)
            fault = context.faults.devices.get((guard.run, seats[key[:2]]))
            if fault is None:
                continue
            start = context.faults.points.get(run.from_point if way.end == "from" else run.to_point)
            if guard.run != index and start is not None and start.amps < fault.amps:
                fault = start
            if fault.amps > (ampacity_A(context, index) or 0.0):
                stands = thinnest(context, run, near=True)
                yield NearFault(guard, index, fault.amps, fault.place, fault.estimated, stands, _before(context, guard))


def _before(context: Context, guard: Guard) -> tuple[Guard, ...]:
    """The protections upstream of one, where a single battery feeds it and they stand in its only way."""
    found: list[Guard] = []
    while True:
        ways = [one for one in context.sections.by_run[guard.run] if one.own and one.end == guard.protection.end]
        strong = [one for one in ways if limited_A(context, one.source) is None]
        if len(strong) != 1 or strong[0].upstream is None or len(found) > len(context.plan.runs):
            return tuple(found)
        guard = strong[0].upstream
        found.append(guard)


@check("protection.let-through", title="What each protection lets through in the largest fault")
def let_through(context: Context) -> Iterator[Finding]:
    """Cables that a near fault overheats before their protection has cleared it, or for which nothing shows that."""
    worst: dict[tuple[int, str], NearFault] = {}
    for one in near_faults(context):
        key = one.guard.run, one.guard.protection.end
        if not one.holds(one.guard.protection) and (
            key not in worst or one.stands.joule_A2s < worst[key].stands.joule_A2s
        ):
            worst[key] = one
    for one in worst.values():
        yield _finding(context, one)


def _finding(context: Context, one: NearFault) -> Finding:
    rule, guard = context.rulebook.protection.fault_damage, one.guard
    joule, quickest = one.through(guard.protection)
    kind = quickest.kind
    run, behind = context.plan.runs[guard.run], context.plan.runs[one.run]
    unsure = one.estimated or kind.provisional
    through = f"lets through {number(joule)} A2s" if math.isfinite(joule) else "may let through more than is known"
    which = "its own cable" if one.run == guard.run else label(behind)
    upstream = "" if quickest is guard.protection else f", ended by the {quickest.rating} {quickest.type} upstream"
    return run_finding(
        "protection.let-through", rule.severity if rule and not unsure else "warn", run,
        joule if math.isfinite(joule) else None, one.stands.joule_A2s, "A2s",
        f"{label(run)}: its {guard.protection.rating} {guard.protection.type} {through} in a short {one.place}"
        f"{upstream}; "
        f"{which} withstands {number(one.stands.joule_A2s)} A2s"
        + (" (not verified: typical figures of the type, or an estimated battery)" if unsure else ""),
        basis_text(rule.basis) if rule else f"{PRACTICE}, after {one.stands.basis}",
        (f"Largest fault current, a bolted short: {number(one.amps, 4)} A",
         f"{number(one.amps, 4)} A in a rating of {number(quickest.rating.si)} A: "
         f"{number(joule, 4) if math.isfinite(joule) else 'not stated'} A2s ({kind.times_basis})",
         *one.stands.working),
        _remedy(context, one, joule),
    )  # fmt: skip


def _remedy(context: Context, one: NearFault, joule: float) -> str:
    """A cable that stands it, or a fuse that limits the current."""
    run = context.plan.runs[one.run]
    stands = (
        size
        for size in (larger_sizes(run.size) if run.size else [])
        if thinnest(context, run.model_copy(update={"size": size, "return_path": "same"}), near=True).joule_A2s >= joule
    )
    size = next(stands, None)
    thicker = f"{label(run)}: {size.name} stands that; or " if size is not None else ""
    return f"{thicker}a fuse that limits the current, upstream or in its place, with its maker's let-through"
