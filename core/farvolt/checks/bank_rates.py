"""What a battery's strings give and take at once, against what its maker allows or its chemistry usually stands."""

from collections.abc import Iterator

from farvolt import bank_charging
from farvolt.battery_figures import Figure
from farvolt.checks.registry import apart, at_least, check
from farvolt.context import CaseStudy, Context
from farvolt.operating import islands
from farvolt.plan import Battery
from farvolt.results import Finding, Severity
from farvolt.units import number

_TYPICAL = "common practice: what batteries of this chemistry usually stand; their makers differ"
_NEAR = 1 + 1e-9


@check("bank.discharge-rate", title="Current of each string of a battery against its greatest discharge")
def discharge_rate(context: Context) -> Iterator[Finding]:
    """Batteries of which a string gives more than it may, in the case where it gives most; starts are told apart."""
    for index, battery in enumerate(context.plan.sources):
        if not isinstance(battery, Battery):
            continue
        for starting in (False, True):
            cases = [one for one in context.cases if bool(one.case.surge) == starting]
            worst = max(_largest(context, index, cases), key=lambda found: found[0], default=None)
            if worst is not None and worst[0] > 0.01:
                yield from _discharge(battery, *worst, starting)


def _largest(context: Context, index: int, cases: list[CaseStudy]) -> Iterator[tuple[float, CaseStudy]]:
    """Over cases: the largest current of one string of a battery."""
    battery = context.plan.sources[index]
    assert isinstance(battery, Battery)
    first = len(context.plan.sources)
    ports = [first + place for place, (owner, _, _) in enumerate(context.network.strings) if owner == index]
    for one in cases:
        for solution in one.solutions.values():
            if solution.state.solved and solution.working(index):
                given = solution.state.delivered_A
                strings = [float(given[port]) for port in ports] or [float(given[index]) / battery.strings]
                yield max(strings), one


def _discharge(battery: Battery, amps: float, one: CaseStudy, starting: bool) -> Iterator[Finding]:
    found = bank_charging.rate_limit(battery, "discharge")
    if found is None:
        yield _unknown(battery, one, amps)
        return
    limit = found.high / battery.strings
    low = found.low / battery.strings
    severity = _severity(amps, low, limit, found.stated)
    if severity is None:
        return
    what = "at a start" if starting else "lasting"
    if starting and severity == "fail":
        severity = "warn"
    bound = limit if severity != "note" else low
    allowed = "its greatest discharge is" if found.stated else f"{battery.chemistry} usually stands"
    span = f"{number(low)} to {number(limit)} A" if low != limit else f"{number(limit)} A"
    yield Finding(
        "bank.discharge-rate", severity, battery.name, "source", one.name, amps, bound, "A",
        f'A string of "{battery.name}" gives {apart(amps, bound)} A {what}; {allowed} {span}',
        found.basis if found.stated else _TYPICAL,
        (f"{apart(amps, bound, 4)} A > {number(bound, 4)} A",
         *(("A start is short: compare it with the maker's limit for seconds.",) if starting else ())),
        f"more strings, or blocks that stand {at_least(amps)} A, or less load at once; state max_discharge",
    )  # fmt: skip


def _severity(amps: float, low: float, high: float, stated: bool) -> Severity | None:
    """Beyond a stated limit fails; beyond a typical range is doubtful; within the range is noted."""
    if amps > high * _NEAR:
        return "fail" if stated else "warn"
    return "note" if amps > low * _NEAR else None


def _unknown(battery: Battery, one: CaseStudy, amps: float) -> Finding:
    return Finding(
        "bank.discharge-rate", "note", battery.name, "source", one.name, amps, None, "A",
        f'Nothing says how much "{battery.name}" may give; its strings give up to {number(amps)} A', _TYPICAL, (),
        "state max_discharge from its data sheet",
    )  # fmt: skip


@check("bank.charge-rate", title="All that charges a battery at once against its greatest charging current")
def charge_rate(context: Context) -> Iterator[Finding]:
    """Batteries that all their chargers together, or one alone, can charge faster than they may be."""
    found = islands(context.network)
    homes: dict[int, list[Battery]] = {}
    for source in context.plan.sources:
        if isinstance(source, Battery):
            homes.setdefault(int(found.of_node[context.network.feed(source.at)]), []).append(source)
    for home, several in homes.items():
        limits = [bank_charging.rate_limit(one, "charge") for one in several]
        charging = bank_charging.limit(context.network, several[0], found.nominal_V[home])
        known = [one for one in limits if one is not None]
        if known and len(known) == len(limits) and charging.parts:
            basis = known[0].basis if all(one.stated for one in known) else _TYPICAL
            yield from _charge(several, charging.parts, Figure(
                sum(one.low for one in known), sum(one.high for one in known), basis, all(one.stated for one in known)
            ))  # fmt: skip


def _charge(batteries: list[Battery], parts: tuple[tuple[str, float], ...], limit: Figure) -> Iterator[Finding]:
    total, alone = sum(amps for _, amps in parts), max(parts, key=lambda part: part[1])
    severity = _severity(total, limit.low, limit.high, limit.stated)
    if severity is None:
        return
    if severity == "fail" and alone[1] <= limit.high * _NEAR:
        severity = "warn"  # only together: they may never run at once
    bound = limit.high if severity != "note" else limit.low
    named = " and ".join(f'"{one.name}"' for one in batteries)
    span = f"{number(limit.low)} to {number(limit.high)} A" if limit.low != limit.high else f"{number(limit.high)} A"
    allowed = "may be charged with" if limit.stated else "is usually charged with at most"
    yield Finding(
        "bank.charge-rate", severity, batteries[0].name, "source", None, total, bound, "A",
        f"All that charges {named} gives up to {apart(total, bound)} A at once; it {allowed} {span}",
        limit.basis,
        (
            f"{' + '.join(number(amps, 4) for _, amps in parts)} = {number(total, 4)} A "
            f"({', '.join(name for name, _ in parts)})",
            f"{apart(total, bound, 4)} A > {number(bound, 4)} A",
        ),
        "a lower current limit on the chargers, not all of them at once, or a larger bank; state max_charge",
    )  # fmt: skip
