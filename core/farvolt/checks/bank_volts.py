"""Charging: set voltages against what the chemistry asks for at the temperature of the battery, and the cold."""

from collections.abc import Iterator

from farvolt import bank_charging, battery_figures
from farvolt.batteries import REFERENCE_DEGC
from farvolt.battery_figures import Figure
from farvolt.checks.registry import apart, check
from farvolt.context import Context
from farvolt.operating import islands
from farvolt.plan import Battery, Charger, Plan, Solar
from farvolt.results import Finding, Severity
from farvolt.units import number

_COLD = "common practice: as makers of this chemistry ask; its own data sheet goes before"
_LEAST_A = 0.01
_ROUNDED = 1e-4
"""Voltages of cells stand in the table with four decimals: 14.6 V for 6 cells is 2.4333 V each."""

Source = Charger | Solar


@check("bank.charging-volts", title="Set voltages of chargers against what the battery's chemistry asks for")
def charging_volts(context: Context) -> Iterator[Finding]:
    """Chargers set higher than the battery stands where it is warmest, or too low to fill it; each said once."""
    found = islands(context.network)
    for battery in context.plan.sources:
        if not isinstance(battery, Battery) or battery.chemistry is None:
            continue
        nominal_V = found.nominal(context.network.feed(battery.at))
        degrees = _degrees(context.plan, battery)
        for source in bank_charging.feeding(context.network, battery):
            # A compensated charger is set for 25 °C and follows from there.
            at = [REFERENCE_DEGC] if source.temperature_compensated else degrees
            yield from _set_volts(battery, nominal_V, source, at)


def _degrees(plan: Plan, battery: Battery) -> list[float]:
    """Temperatures of the battery in all cases, and its coldest, rising."""
    zone = plan.zone_of_point(battery.at)
    found = {plan.ambient_degC(zone, case) for case in plan.checked_cases}
    return sorted(found | ({plan.bank.coldest.si} if plan.bank.coldest is not None else set()))


def _set_volts(battery: Battery, nominal_V: float, source: Source, degrees: list[float]) -> Iterator[Finding]:
    volts = source.ceiling.si if isinstance(source, Solar) else source.volts.si
    held = [("absorption", volts, "absorption_V")]
    if source.float_volts is not None:
        held.append(("float", source.float_volts.si, "float_V"))
    for name, value, figure in held:
        for degC, above in ((degrees[-1], True), (degrees[-1], False), (degrees[0], False)):
            wanted = battery_figures.charging_V(battery, nominal_V, degC, figure)
            assert wanted is not None
            if value > wanted.high * (1 + _ROUNDED) if above else value < wanted.low * (1 - _ROUNDED):
                # Too low on the warmest day is too low on all; on the coldest alone, the rest of the year fills it.
                severity: Severity = "warn" if above or degC == degrees[-1] else "note"
                yield _off(battery, source, name, value, wanted, degC, above, severity)
                break


def _off(
    battery: Battery, source: Source, name: str, volts: float, wanted: Figure, degC: float, above: bool,
    severity: Severity,
) -> Finding:  # fmt: skip
    limit = wanted.high if above else wanted.low
    harm = "it is overcharged" if above else "it is never quite full"
    compared = f"{apart(volts, limit, 4)} V {'>' if above else '<'} {number(limit, 4)} V"
    way = f"{number(wanted.low, 4)} to {number(wanted.high, 4)} V"
    return Finding(
        "bank.charging-volts", severity, source.name, "source", None, volts, limit, "V",
        f'"{source.name}" is set to {apart(volts, limit)} V ({name}); {battery.chemistry} asks for {way} at '
        f'{number(degC)} degC, so that "{battery.name}" {harm.removeprefix("it ")}',
        f"common practice: {wanted.basis}; the battery's data sheet goes before",
        (f"{battery.chemistry} at {number(degC)} degC: {way}", compared),
        f"set {way} as the data sheet asks" + ("" if wanted.low == wanted.high or source.temperature_compensated else
                                               ", or let the charger follow the battery's temperature"),
    )  # fmt: skip


@check("bank.low-temperature-charging", title="Charging a battery that is colder than it may be charged")
def low_temperature(context: Context) -> Iterator[Finding]:
    """Batteries charged in a case that is colder than they may be, or that can be on their coldest day."""
    plan = context.plan
    for index, battery in enumerate(plan.sources):
        limit = battery_figures.figure(battery, "min_charge_temperature") if isinstance(battery, Battery) else None
        if not isinstance(battery, Battery) or limit is None:
            continue
        zone = plan.zone_of_point(battery.at)
        cold = [(plan.ambient_degC(zone, one.case), one) for one in context.cases]
        charged = [(degC, one.name) for degC, one in cold if degC < limit.low and _charged(context, one.name, index)]
        sources = bank_charging.feeding(context.network, battery)
        if charged:
            degC, case = min(charged)
            yield _too_cold(battery, limit, degC, case, "fail" if limit.stated else "warn")
        elif plan.bank.coldest is not None and plan.bank.coldest.si < limit.low and sources:
            yield _too_cold(battery, limit, plan.bank.coldest.si, None, "warn")


def _charged(context: Context, case: str, index: int) -> bool:
    """Whether a battery takes current in a case."""
    solution = next(one for one in context.cases if one.name == case).solutions["plan"]
    if not solution.state.solved or not solution.working(index):
        return False
    first = len(context.plan.sources)
    ports = [first + place for place, (owner, _, _) in enumerate(context.network.strings) if owner == index] or [index]
    return bool(min(solution.state.delivered_A[ports]) < -_LEAST_A)


def _too_cold(battery: Battery, limit: Figure, degC: float, case: str | None, severity: Severity) -> Finding:
    when = "is charged" if case is not None else "can be charged on its coldest day"
    return Finding(
        "bank.low-temperature-charging", severity, battery.name, "source", case, degC, limit.low, "degC",
        f'"{battery.name}" {when} at {apart(degC, limit.low)} degC; charging it below {number(limit.low)} degC does '
        "lasting harm",
        limit.basis if limit.stated else _COLD, (f"{apart(degC, limit.low, 4)} degC < {number(limit.low, 4)} degC",),
        "a warmer place or a heater for it, or charging that stops by its temperature",
    )  # fmt: skip
