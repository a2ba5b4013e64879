"""Interrupting ratings: whether each fuse or breaker clears the highest fault current that can reach it."""

from collections.abc import Iterator
from dataclasses import dataclass

from farvolt.checks.registry import apart, check, run_finding
from farvolt.context import Context, basis_text, label
from farvolt.faults import Fault
from farvolt.plan import Battery, Protection, Run
from farvolt.protection_types import ProtectionType, protection_type, protection_type_names
from farvolt.results import Finding
from farvolt.rulebook import InterruptingStep
from farvolt.sections import Exposure
from farvolt.units import number

RULE = "protection.interrupting"

PRACTICE = (
    "common practice: protection clears no fault above its interrupting rating (IEC 60947-2, IEC 60269-1: Icu, I1)"
)

SCOPE = (
    "A bolted short, with every source at its most and conductors cold; an arc or a loose joint draws less. Motors "
    "that run back into it and capacitors are not counted"
)


@dataclass(frozen=True, slots=True)
class Interrupts:
    """One protection with what it may have to interrupt, and what it can."""

    index: int
    run: Run
    one: Protection
    fault: Fault
    system_V: float
    rating_A: float | None
    least: InterruptingStep | None
    """What the rulebook asks for by the size of the bank."""
    least_A: float
    bank_Ah: float

    @property
    def needed_A(self) -> float:
        """The largest current that it may have to interrupt, or that the rulebook asks for."""
        return max(self.fault.amps, self.least_A)

    @property
    def too_weak(self) -> bool:
        """Whether it is known to interrupt less."""
        return self.rating_A is not None and self.rating_A < self.needed_A * (1 - 1e-9)

    @property
    def name(self) -> str:
        """How a text names it."""
        pole = " in the return" if self.one.pole == "return" else ""
        return f"its {self.one.rating} {self.one.type}{pole}"


@check(RULE, title="Interrupting rating of each protection against the highest fault current", reads=())
def interrupting(context: Context) -> Iterator[Finding]:
    """Protection that a bolted short would overcome; once for each battery, what its estimate leaves unverified."""
    unverified: dict[str, list[Interrupts]] = {}
    for device in devices(context):
        if device.rating_A is None:
            yield _unknown(device)
        elif device.too_weak:
            yield _failing(context, device)
        elif not device.fault.certified:
            yield _unsolved(device)
        elif device.fault.estimated:
            unverified.setdefault(_estimated(context, device.fault), []).append(device)
    for battery, several in unverified.items():
        yield _not_verified(battery, several)
    yield from _beyond_the_table(context)


def devices(context: Context) -> Iterator[Interrupts]:
    """Every protection that a fault current reaches."""
    islands = context.cases[0].solutions["plan"].condition.islands
    for (index, which), fault in sorted(context.faults.devices.items()):
        run = context.plan.runs[index]
        one = run.protections[which]
        feeds = [name for name in (run.from_point, run.to_point) if (name, 0) in context.network.nodes]
        system_V = islands.nominal(context.network.feed(feeds[0])) if feeds else context.plan.plan.nominal.si
        rating = one.interrupting.si if one.interrupting else one.kind.interrupting_at(system_V)
        least, least_A, bank_Ah = _asked(context, index, one, system_V)
        yield Interrupts(index, run, one, fault, system_V, rating, least, least_A, bank_Ah)


def _asked(
    context: Context, index: int, one: Protection, system_V: float
) -> tuple[InterruptingStep | None, float, float]:
    """What the rulebook asks for behind the batteries that feed this end of the run, else those that feed its other
    one; 0 where it asks for nothing."""
    rule = context.rulebook.protection.interrupting
    every = context.sections.by_run.get(index, [])
    ways = [way for way in every if way.end == one.end and _is_battery(context, way)] or every
    banks = {way.source: way for way in ways if _is_battery(context, way)}
    capacity = sum(_capacity_Ah(context, source) for source in banks)
    step = rule.step(system_V, capacity) if rule is not None and capacity > 0 else None
    if step is None:
        return None, 0.0, capacity
    first = any((way.upstream if way.end == one.end else way.guard) is None for way in banks.values())
    return step, step.main_A if first else step.branch_A, capacity


def _is_battery(context: Context, way: Exposure) -> bool:
    return isinstance(context.plan.sources[way.source], Battery)


def _capacity_Ah(context: Context, source: int) -> float:
    battery = context.plan.sources[source]
    assert isinstance(battery, Battery)
    return battery.capacity.si * battery.strings if battery.capacity else 0.0


def _failing(context: Context, device: Interrupts) -> Finding:
    assert device.rating_A is not None
    needed, rating = device.needed_A, device.rating_A
    shown, volts = apart(needed, rating, 4), f"{number(device.system_V)} V"
    rule, working = context.rulebook.protection.interrupting, (*device.fault.working,)
    if needed > device.fault.amps and rule is not None and device.least is not None:
        asks = f"{context.rulebook.title}: {shown} A is asked for behind a bank of {number(device.bank_Ah)} Ah"
        cca = f"{number(device.bank_Ah)} Ah x {number(rule.cca_per_Ah)} = {number(rule.cca(device.bank_Ah))} CCA"
        working = (*working, f"{cca}, up to {number(device.least.up_to_cca)}: {shown} A", rule.text)
        basis = basis_text(rule.basis)
    else:
        asks, basis = f"a bolted short drives {shown} A through it", _basis(device.one)
        working = (f"Short {device.fault.place}", *working, SCOPE)
    doubt = " The battery's resistance is an estimate: it may be more or less." if device.fault.estimated else ""
    return run_finding(
        RULE, "fail", device.run, needed, rating, "A",
        f"{label(device.run)}: {device.name} interrupts {number(rating, 4)} A at {volts}; {asks}.{doubt}".rstrip("."),
        basis, (*working, f"{shown} A > {number(rating, 4)} A at {volts}"), _remedy(context, device),
    )  # fmt: skip


def _basis(one: Protection) -> str:
    if one.interrupting is not None:
        return f"{PRACTICE}; the rating is stated in the plan"
    provisional = " (provisional)" if one.kind.provisional else ""
    return f"{PRACTICE}; the rating is typical of its type: {one.kind.basis}{provisional}"


def _remedy(context: Context, device: Interrupts) -> str:
    known = [*context.plan.own_types.values(), *(protection_type(name) for name in protection_type_names())]
    enough = [one for one in known if (one.interrupting_at(device.system_V) or 0.0) >= device.needed_A]
    fitting = [one for one in enough if device.one.rating.si in one.ratings_A] or enough
    types = ", ".join(f"{one.name} ({_interrupts(one, device.system_V)} A)" for one in fitting[:3])
    offer = f": {types}, typical" if types else ", which no type known here has"
    volts = number(device.system_V)
    return (
        f"protection that interrupts at least {number(device.needed_A, 4)} A at {volts} V{offer}; or a fuse "
        "before it that limits the current, with which its maker allows that much"
    )


def _interrupts(one: ProtectionType, system_V: float) -> str:
    return number(one.interrupting_at(system_V) or 0.0, 4)


def _unknown(device: Interrupts) -> Finding:
    volts = number(device.system_V)
    return run_finding(
        RULE, "warn", device.run, device.fault.amps, None, "A",
        f"{label(device.run)}: not verified what {device.name} interrupts at {volts} V: its type is rated up to "
        f"{number(device.one.kind.volts)} V; a bolted short drives {number(device.fault.amps, 4)} A through it",
        _basis(device.one), (*device.fault.working, SCOPE),
        f"protection made for {volts} V, or state interrupting from its data sheet",
    )  # fmt: skip


def _unsolved(device: Interrupts) -> Finding:
    return run_finding(
        RULE, "warn", device.run, None, device.rating_A, "A",
        f"{label(device.run)}: not verified what {device.name} has to interrupt: its fault current was not found to "
        f"balance (by {device.fault.imbalance_A:.1e} A)",
        PRACTICE, device.fault.working, "judge it by hand; very small resistances beside large ones may be the cause",
    )  # fmt: skip


def _estimated(context: Context, fault: Fault) -> str:
    """The first battery of a fault whose resistance is an estimate."""
    stated = {
        one.name
        for one in context.plan.sources
        if isinstance(one, Battery) and (one.resistance is not None or one.short_circuit is not None)
    }
    batteries = {one.name for one in context.plan.sources if isinstance(one, Battery)}
    return next(name for name, _ in fault.by_source if name in batteries - stated)


def _not_verified(battery: str, devices: list[Interrupts]) -> Finding:
    worst = max(devices, key=lambda one: one.needed_A / (one.rating_A or 1.0))
    count = f"{len(devices)} fuses and breakers" if len(devices) > 1 else "one fuse or breaker"
    lines = tuple(
        f"{label(one.run)}: {one.name}, {number(one.rating_A or 0.0, 4)} A; a bolted short drives some "
        f"{number(one.fault.amps, 3)} A through it"
        for one in devices
    )
    return Finding(
        RULE, "warn", battery, "source", None, worst.fault.amps, worst.rating_A, "A",
        f'Not verified: whether {count} can interrupt a bolted short. The resistance of "{battery}" is an estimate, '
        "and the fault current with it",
        PRACTICE, (*worst.fault.working, *lines, SCOPE),
        f'state short_circuit or resistance of "{battery}" from its data sheet',
    )  # fmt: skip


def _beyond_the_table(context: Context) -> Iterator[Finding]:
    """Batteries for which the rulebook's table by size of bank has no line, or whose size is not known."""
    rule = context.rulebook.protection.interrupting
    if rule is None:
        return
    islands = context.cases[0].solutions["plan"].condition.islands
    for source, battery in enumerate(context.plan.sources):
        if not isinstance(battery, Battery):
            continue
        capacity, volts = _capacity_Ah(context, source), islands.nominal(context.network.feed(battery.at))
        if capacity > 0 and rule.step(volts, capacity) is not None:
            continue
        size = f"its {number(capacity)} Ah at {number(volts)} V" if capacity else "it states no capacity"
        beyond = f"{size} is beyond the table" if capacity else size
        yield Finding(
            RULE, "note", battery.name, "source", None, capacity or None, None, "Ah",
            f'"{battery.name}": the least interrupting ratings by size of bank were not applied, as {beyond}; '
            "the fault current alone was",
            basis_text(rule.basis), (rule.text,), "state capacity" if not capacity else None,
        )  # fmt: skip
