"""Whether each protection opens in time for a short at the far end of what it protects, before the cable is damaged."""

import math
from collections.abc import Iterator
from dataclasses import dataclass

from farvolt.checks.registry import check, run_finding
from farvolt.checks.ways import PRACTICE, allowed_bare_m, ampacity_A, exempt
from farvolt.context import Context, basis_text, label
from farvolt.faults import FarEnd
from farvolt.network import insulation_degC, return_size
from farvolt.plan import Protection, Run
from farvolt.protection_types import ProtectionType
from farvolt.results import Finding
from farvolt.sections import Guard, Stretch
from farvolt.temperatures import run_ambient_degC
from farvolt.units import number
from farvolt.withstand import LONGEST_S, Withstand, withstand

BOLTED = "a bolted short only: an arc or a loose joint draws less"


@dataclass(frozen=True, slots=True)
class Opening:
    """A protection of some rating against a short at one far end."""

    far: FarEnd
    run: int
    """Index of the run whose conductor is at stake."""
    amps: float
    """What that conductor carries."""
    rating_A: float
    """Corrected for the coldest ambient, where it opens last."""
    opens_s: float
    """The greatest time it may take."""
    stands: Withstand
    """What the thinner conductor of the run withstands."""

    @property
    def allowed_s(self) -> float:
        """The time in which it has to open: until the conductor is at its limit, and within five seconds."""
        return min(self.stands.reaches_limit_s(self.amps), LONGEST_S)

    @property
    def damaging(self) -> bool:
        """Whether the conductor may be past its limit; what it stands for longer than five seconds counts as well,
        since some heat has left by then (common practice)."""
        return self.opens_s > self.stands.reaches_limit_s(self.amps) * (1 + 1e-9)

    @property
    def in_time(self) -> bool:
        """Whether it opens before the conductor is at its limit, within the time for which that is claimed."""
        return self.opens_s <= self.allowed_s * (1 + 1e-9)

    @property
    def times_late(self) -> float:
        """The time it takes over the time that is allowed; infinite where none is."""
        return self.opens_s / self.allowed_s if self.allowed_s > 0 else math.inf


def opening(context: Context, far: FarEnd, protection: Protection) -> Opening | None:
    """A protection at the seat of a far end's guard, of its type or of another, against that short.

    Of the run and the return conductors that the fault comes back by, the one that is first at its limit counts. None
    where nothing is at stake: exempt runs, those that carry the fault for good, within their ampacity, or the start of
    a run before its own protection where that may go without.
    """
    index = far.stretch.run if far.stretch.run >= 0 else far.stretch.guard.run
    if _bare_start(context, far.stretch):
        return None
    at_stake = [(one, amps) for one, amps in ((index, far.run_A), *far.returns) if _at_stake(context, one, amps)]
    if not at_stake:
        return None
    stands = [thinnest(context, context.plan.runs[one]) for one, _ in at_stake]
    first = min(range(len(stands)), key=lambda place: stands[place].reaches_limit_s(at_stake[place][1]))
    kind, seat = protection.kind, context.plan.runs[far.stretch.guard.run]
    coldest = min(run_ambient_degC(context.plan, seat, one.case) for one in context.cases)
    rating = kind.rating_at_A(protection.rating.si, min(coldest, kind.reference_degC))
    return Opening(far, *at_stake[first], rating, opens_s(kind, far.fault.amps, rating), stands[first])


def opens_s(kind: ProtectionType, amps: float, rating_A: float) -> float:
    """The greatest time that counts as heat in the cable: beyond its band a fuse needs no more than its I2t."""
    return min(kind.opens_within_s(amps, rating_A), kind.let_through_A2s(amps, rating_A) / amps**2)


def _at_stake(context: Context, index: int, amps: float) -> bool:
    """Whether a run needs the protection to open: it is not exempt, and does not carry the current for good."""
    run = context.plan.runs[index]
    return run.size is not None and not exempt(context, run) and amps > (ampacity_A(context, index) or 0.0)


def _bare_start(context: Context, stretch: Stretch) -> bool:
    """Whether a stretch is the start of a run before its own protection, within the length that may go without."""
    if stretch.run < 0 or stretch.run == stretch.guard.run:
        return False
    run = context.plan.runs[stretch.run]
    own = [one for one in context.sections.by_run[stretch.run] if one.own and one.end == stretch.end]
    allowed = [allowed_bare_m(context, run, one) for one in own if one.source == stretch.source]
    return any(length is not None and stretch.until_m <= length + 1e-9 for length in allowed)


def thinnest(context: Context, run: Run, *, near: bool = False) -> Withstand:
    """What the thinner of a run's conductors withstands: all in parallel at its far end, where they share the fault;
    one alone where it is `near`, of which that carries most."""
    sizes = [size for size in (run.size, return_size(run)) if size is not None]
    if run.conducts != "both" or run.return_path == "chassis":
        sizes = sizes[:1]
    area = min(size.area_mm2 for size in sizes)
    return withstand(run.material, area, insulation_degC(run, context.rulebook), 1 if near else run.parallel)


@check("protection.far-end", title="Opening in time for a short at the far end of what each protection protects")
def far_end(context: Context) -> Iterator[Finding]:
    """For each protection the far end that is worst off: the conductor at its limit before the protection opens."""
    by_guard: dict[tuple[int, str], list[FarEnd]] = {}
    for far in context.faults.far_ends:
        by_guard.setdefault((far.stretch.guard.run, far.stretch.guard.protection.end), []).append(far)
    for ends in by_guard.values():
        found = [opening(context, far, far.stretch.guard.protection) for far in ends]
        late = [one for one in found if one is not None and not one.in_time]
        if late:
            yield _finding(context, max(late, key=lambda one: (one.damaging, one.times_late)), len(late))


def _finding(context: Context, worst: Opening, count: int) -> Finding:
    far, guard, run = worst.far, worst.far.stretch.guard, context.plan.runs[worst.run]
    rule = context.rulebook.protection.fault_damage
    amps, percent = far.fault.amps, 100 * far.fault.amps / guard.rating_A
    source = context.plan.sources[far.stretch.source].name
    soon = f"may take {_time(worst.opens_s)}" if math.isfinite(worst.opens_s) else "may never open"
    behind = "" if guard.run == worst.run else f" for {label(run)}"
    more = f"; so are {count - 1} more of its far ends" if count > 1 else ""
    allowed = f"{_time(worst.allowed_s)} is allowed"
    if not worst.damaging:
        allowed = f"the cable stands that, but the proof is meant for {_time(LONGEST_S)} at most"
    limited = f'; "{source}" limits itself and cannot open it' if far.fault.limited else ""
    return run_finding(
        "protection.far-end", rule.severity if rule and worst.damaging else "warn", context.plan.runs[guard.run],
        worst.opens_s if math.isfinite(worst.opens_s) else None, worst.allowed_s, "s",
        f"{label(context.plan.runs[guard.run])}: its {guard.protection.rating} {guard.protection.type} {soon}{behind} "
        f"in a short {far.fault.place}, in which {number(amps)} A flow; {allowed}{limited}{more}",
        basis_text(rule.basis) if rule else f"{PRACTICE}, after {worst.stands.basis}", _working(worst, guard, percent),
        None,
    )  # fmt: skip


def _working(worst: Opening, guard: Guard, percent: float) -> tuple[str, ...]:
    far, kind = worst.far, guard.protection.kind
    rated = number(guard.rating_A)
    if abs(worst.rating_A - guard.rating_A) > 1e-9:
        rated += f" A, in the cold as {number(worst.rating_A)}"
    opens = f"opens within {_time(worst.opens_s)}" if math.isfinite(worst.opens_s) else "need not open at all"
    if worst.opens_s < kind.opens_within_s(far.fault.amps, worst.rating_A) * (1 - 1e-9):
        opens += f", letting through {number(kind.let_through_A2s(far.fault.amps, worst.rating_A), 4)} A2s at most"
    limit_s = worst.stands.reaches_limit_s(worst.amps)
    return (
        f"Least fault current, {BOLTED}: {far.fault.working[0]}" if far.fault.working else BOLTED,
        *far.fault.working[1:],
        f"{number(far.fault.amps, 4)} A is {number(percent)} % of {rated} A: {opens} ({kind.times_basis})",
        *worst.stands.working,
        f"t = k² S² / I² = {number(worst.stands.joule_A2s, 4)} / {number(worst.amps, 4)}² = {_time(limit_s)}; "
        f"and within {number(LONGEST_S)} s",
    )


def _time(time_s: float) -> str:
    return f"{number(time_s)} s"
