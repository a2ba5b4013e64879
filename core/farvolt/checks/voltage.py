"""Voltages that do not go together: sources of another system, and protection made for less."""

from collections.abc import Iterator

from farvolt.checks.registry import check, run_finding
from farvolt.context import Context, label
from farvolt.plan import Battery, Solar, Source
from farvolt.results import Finding
from farvolt.units import number

LOWEST, HIGHEST = 0.8, 1.4
"""A source of a system stands within these shares of its nominal voltage (common practice: a 12 V lead-acid system
is charged at up to 15.5 V when cold, and an 11.1 V lithium battery serves it too)."""


@check("plan.volts-mismatch", title="Sources whose voltage is not that of their system")
def mismatch(context: Context) -> Iterator[Finding]:
    """Each source whose own voltage lies far from the nominal voltage of the island it feeds."""
    islands = context.cases[0].solutions["plan"].condition.islands
    for source in context.plan.sources:
        nominal = islands.nominal(context.network.feed(source.at))
        volts = _own_V(source)
        if volts is None or LOWEST * nominal * (1 - 1e-9) <= volts <= HIGHEST * nominal * (1 + 1e-9):
            continue
        yield Finding(
            rule="plan.volts-mismatch",
            severity="fail",
            subject=source.name,
            kind="source",
            case=None,
            value=volts,
            limit=nominal,
            unit="V",
            message=f'"{source.name}" stands at {number(volts)} V in a system of {number(nominal)} V',
            basis="common practice: all sources of a system are made for its nominal voltage",
            working=(f"{number(LOWEST)} to {number(HIGHEST)} times {number(nominal)} V is "
                     f"{number(LOWEST * nominal)} to {number(HIGHEST * nominal)} V",),
            remedy="a source of the system's voltage, a converter between the two, or another nominal for the plan",
        )  # fmt: skip


def _own_V(source: Source) -> float | None:
    if isinstance(source, Battery):
        own = source.nominal or source.emf
        return own.si if own else None
    return source.ceiling.si if isinstance(source, Solar) else source.volts.si


@check("protection.voltage-rating", title="Voltage rating of each protection against the highest voltage of its system")
def voltage_rating(context: Context) -> Iterator[Finding]:
    """Protection made for less than the highest voltage that any source of its system holds."""
    islands = context.cases[0].solutions["plan"].condition.islands
    highest: dict[int, float] = {}
    for one in context.cases:
        condition = one.solutions["plan"].condition
        for port, source in enumerate(context.plan.sources):
            island = int(islands.of_node[context.network.feed(source.at)])
            volts = max(float(condition.volts[port]), _own_V(source) or 0.0)
            highest[island] = max(highest.get(island, 0.0), volts)
    for run in context.plan.runs:
        island = int(islands.of_node[context.network.feed(run.from_point)]) if run.conducts != "return" else -1
        for guard in run.protections:
            kind = guard.kind
            rated = guard.volts.si if guard.volts else kind.volts
            if rated >= highest.get(island, 0.0):
                continue
            said = "stated" if guard.volts else f"typical of its type; {kind.basis}"
            basis = "common practice: protection clears no fault above its rated voltage"
            yield run_finding(
                "protection.voltage-rating", "fail" if guard.volts else "warn", run, highest[island], rated, "V",
                f"{label(run)}: its {guard.rating} {guard.type} is made for {number(rated)} V ({said}); "
                f"its system reaches {number(highest[island])} V",
                basis if guard.volts or not kind.provisional else f"{basis} (the type's rating is provisional)",
                (f"{number(highest[island])} V > {number(rated)} V",),
                "protection of a type made for this voltage; state volts from its data sheet if this one is",
            )  # fmt: skip
