"""Voltages that do not go together: sources and loads of another system, and protection made for less."""

from collections.abc import Iterator

from farvolt.checks.joined import listed, names_between
from farvolt.checks.registry import check, run_finding
from farvolt.context import Context, label
from farvolt.network import FEED
from farvolt.plan import Battery, Solar, Source
from farvolt.results import Finding
from farvolt.units import number

LOWEST, HIGHEST = 0.8, 1.4
"""A source of a system stands within these shares of its nominal voltage (common practice: a 12 V lead-acid system
is charged at up to 15.5 V when cold, and an 11.1 V lithium battery serves it too)."""


_MADE_FOR = "common practice: what is joined in a system is made for its nominal voltage"


@check("plan.volts-mismatch", title="Sources whose voltage is not that of their system")
def mismatch(context: Context) -> Iterator[Finding]:
    """Each source whose own voltage, or the system it is made for, lies far from the nominal voltage of its island."""
    islands = context.cases[0].solutions["plan"].condition.islands
    for port, source in enumerate(context.plan.sources):
        nominal = islands.nominal(context.network.feed(source.at))
        volts = _own_V(source)
        made_for = source.nominal.si if source.nominal is not None else None
        if volts is not None and not _fits(volts, nominal):
            told, value = f'"{source.name}" stands at {number(volts)} V', volts
        elif made_for is not None and not _fits(made_for, nominal):
            told, value = f'"{source.name}" is made for {number(made_for)} V', made_for
        else:
            continue
        joined = _joined(context, port)
        yield Finding(
            "plan.volts-mismatch", "fail", source.name, "source", None, value, nominal, "V",
            f"{told} in a system of {number(nominal)} V{joined}", _MADE_FOR, (_band(nominal),),
            "a source of the system's voltage, a converter between the two, or another nominal for the plan",
        )  # fmt: skip


def _fits(volts: float, nominal: float) -> bool:
    return LOWEST * nominal * (1 - 1e-9) <= volts <= HIGHEST * nominal * (1 + 1e-9)


def _band(nominal: float) -> str:
    ends = f"{number(LOWEST * nominal)} to {number(HIGHEST * nominal)} V"
    return f"{number(LOWEST)} to {number(HIGHEST)} times {number(nominal)} V is {ends}"


def _joined(context: Context, port: int) -> str:
    """What joins a source to the reference source, or to another source of its island: there the two systems meet."""
    network, sources = context.network, context.plan.sources
    islands = context.cases[0].solutions["plan"].condition.islands
    mine = network.feed(sources[port].at)
    others = [one for index, one in enumerate(sources) if index != port
              and islands.of_node[network.feed(one.at)] == islands.of_node[mine]]  # fmt: skip
    if not others:
        return ""
    other = next((one for one in others if one.name == context.plan.reference), others[0])
    way = names_between(network, network.feed(other.at), mine, FEED, every=True)
    by = f" by {listed(way)}" if way else f' at "{other.at}"'
    return f', joined to "{other.name}"{by}'


@check("plan.volts-mismatch", title="Loads that are rated for another system")
def load_mismatch(context: Context) -> Iterator[Finding]:
    """Each load whose rated voltage is far from its island's nominal, unless its own range takes that in.

    Too high a voltage burns a load; too low a one leaves it weak or dead.
    """
    islands = context.cases[0].solutions["plan"].condition.islands
    for load in context.plan.loads:
        nominal = islands.nominal(context.network.feed(load.at))
        if load.rated_volts is None or _fits(nominal, load.rated_volts.si):
            continue
        rated = load.rated_volts.si
        high = nominal > rated
        stands = load.max_volts is not None and load.max_volts.si >= nominal
        works = load.min_volts is not None and load.min_volts.si <= nominal
        if stands if high else works:
            continue
        what = "it burns or is destroyed" if high else "it does not work as rated"
        field = "max_volts" if high else "min_volts"
        yield Finding(
            "plan.volts-mismatch", "fail" if high else "warn", load.name, "load", None, nominal, rated, "V",
            f'"{load.name}" is rated for {number(rated)} V and stands in a system of {number(nominal)} V: {what}',
            _MADE_FOR, (_band(rated),),
            f"a load for {number(nominal)} V, or a converter before it; if it is made for both, state its {field}",
        )  # fmt: skip


def _own_V(source: Source) -> float | None:
    if isinstance(source, Battery):
        own = source.nominal or source.emf
        return own.si if own else None
    return source.ceiling.si if isinstance(source, Solar) else source.volts.si


def highest_V(context: Context) -> list[float]:
    """Over runs: the highest voltage that any source of its system holds; 0 where protection in it is not judged."""
    islands = context.cases[0].solutions["plan"].condition.islands
    highest: dict[int, float] = {}
    for one in context.cases:
        condition = one.solutions["plan"].condition
        for port, source in enumerate(context.plan.sources):
            island = int(islands.of_node[context.network.feed(source.at)])
            volts = max(float(condition.volts[port]), _own_V(source) or 0.0)
            highest[island] = max(highest.get(island, 0.0), volts)
    feeds = [context.network.feed(run.from_point) if run.conducts != "return" else -1 for run in context.plan.runs]
    return [highest.get(int(islands.of_node[node]), 0.0) if node >= 0 else 0.0 for node in feeds]


@check("protection.voltage-rating", title="Voltage rating of each protection against the highest voltage of its system")
def voltage_rating(context: Context) -> Iterator[Finding]:
    """Protection made for less than the highest voltage that any source of its system holds."""
    for run, highest in zip(context.plan.runs, highest_V(context), strict=True):
        for guard in run.protections:
            kind = guard.kind
            rated = guard.volts.si if guard.volts else kind.volts
            if rated >= highest:
                continue
            said = "stated" if guard.volts else f"typical of its type; {kind.basis}"
            basis = "common practice: protection clears no fault above its rated voltage"
            yield run_finding(
                "protection.voltage-rating", "fail" if guard.volts else "warn", run, highest, rated, "V",
                f"{label(run)}: its {guard.rating} {guard.type} is made for {number(rated)} V ({said}); "
                f"its system reaches {number(highest)} V",
                basis if guard.volts or not kind.provisional else f"{basis} (the type's rating is provisional)",
                (f"{number(highest)} V > {number(rated)} V",),
                "protection of a type made for this voltage; state volts from its data sheet if this one is",
            )  # fmt: skip
