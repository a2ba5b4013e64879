"""Sources side by side: batteries that charge each other with nothing on, and sources with nothing between them."""

from collections.abc import Iterator

import numpy as np

from farvolt.checks.joined import listed
from farvolt.checks.registry import check
from farvolt.context import CaseStudy, Context
from farvolt.network import Network
from farvolt.operating import components
from farvolt.plan import Battery, Case, SourceState
from farvolt.results import Finding
from farvolt.solution import Solution
from farvolt.units import number

LEAST_A = 1.0
"""Batteries that exchange less than this with nothing on are left alone."""

HOURS = 5.0
"""A battery that states no limit of charge is taken to stand its capacity over so many hours."""

STIFF_OHM = 1e-4
"""Sources with less than this between their set voltages share by what no plan knows."""

_TOGETHER = "common practice: batteries are joined at equal voltage, and of one kind and age"
_STIFF = "Ohm's law: sources side by side share by their set voltages and what lies between them"


@check("bank.circulating", title="Current between batteries side by side, with nothing on")
def circulating(context: Context) -> Iterator[Finding]:
    """Batteries of different voltage that are joined: what flows between them with loads and chargers off.

    Solved again for each set of voltages and closed devices among the cases, at cold conductors; the largest is told.
    """
    worst: tuple[float, CaseStudy, Solution, list[int]] | None = None
    done: set[tuple[bytes, ...]] = set()
    for one in context.cases:
        c = one.solutions["plan"].condition
        key = (c.branch_on.tobytes(), c.source_on.tobytes(), c.volts.tobytes(), c.low.tobytes())
        joined = _joined(context.network, one)
        if joined and key not in done:
            done.add(key)
            solution = context.solve_case(_alone(context, one), "cold")
            amps = min(_amps(solution, index) for index in joined)
            if solution.state.solved and -amps > (worst[0] if worst else LEAST_A):
                worst = (-amps, one, solution, joined)
    if worst is not None:
        yield from _circulating(context, *worst[1:])


def _ports(network: Network, source: int) -> list[int]:
    """The source ports of a source: those of its strings where they stand apart, else its own."""
    first = len(network.plan.sources)
    return [first + place for place, (index, _, _) in enumerate(network.strings) if index == source] or [source]


def _joined(network: Network, one: CaseStudy) -> list[int]:
    """The batteries of a case that stand in one part of the feeds with another of different voltage."""
    supply, c = one.solutions["plan"].supply, one.solutions["plan"].condition
    parts: dict[int, list[tuple[int, float]]] = {}
    for index, source in enumerate(network.plan.sources):
        port = _ports(network, index)[0]
        if isinstance(source, Battery) and supply.source_on[port]:
            parts.setdefault(int(supply.part[c.source_a[port]]), []).append((index, float(c.volts[port])))
    apart = [found for found in parts.values() if max(found, key=_volts)[1] - min(found, key=_volts)[1] > 1e-6]
    return [index for found in apart for index, _ in found]


def _volts(found: tuple[int, float]) -> float:
    return found[1]


def _alone(context: Context, one: CaseStudy) -> Case:
    """The case with its loads, chargers and converters off."""
    off = {source.name: SourceState(state="off") for source in context.plan.sources if not isinstance(source, Battery)}
    return one.case.model_copy(update={"loads": "none", "surge": (), "sources": {**one.case.sources, **off}})


def _amps(solution: Solution, source: int) -> float:
    """What a source delivers; negative where it is charged."""
    return float(sum(solution.state.delivered_A[_ports(solution.network, source)]))


def _limit(battery: Battery) -> tuple[float | None, str]:
    """The charging current that a battery stands, and where that comes from."""
    if battery.max_charge is not None:
        total = battery.max_charge.si * battery.strings
        return total, f"{battery.max_charge} x {battery.strings} = {number(total)} A, as the plan states it"
    if battery.capacity is not None:
        total = battery.capacity.si * battery.strings / HOURS
        return total, f"{battery.capacity} x {battery.strings} / {number(HOURS)} h = {number(total)} A, common practice"
    return None, ""


def _circulating(context: Context, one: CaseStudy, solution: Solution, joined: list[int]) -> Iterator[Finding]:
    c, sources = solution.condition, context.plan.sources
    found = sorted((_amps(solution, index), index) for index in joined)
    amps, low = found[0]
    high = found[-1][1]
    battery = sources[low]
    assert isinstance(battery, Battery)
    limit, why = _limit(battery)
    over = limit is None or -amps > limit * (1 + 1e-9)
    good = "nothing states what it is good for" if limit is None else f"it is good for {number(limit)} A"
    stands = f"; {good}" if over else ""
    emf = {index: float(c.volts[_ports(context.network, index)[0]]) for index in joined}
    working = [f'"{sources[index].name}" at {number(emf[index], 4)} V: {number(one_A)} A' for one_A, index in found]
    if len(found) == 2:
        ohm = (emf[high] - emf[low]) / -amps
        volts = f"({number(emf[high], 4)} V - {number(emf[low], 4)} V)"
        working.append(f"{volts} / {number(1000 * ohm)} mohm, of both and the way between = {number(-amps)} A")
    yield Finding(
        "bank.circulating", "warn" if over else "note", battery.name, "source", one.name, -amps, limit, "A",
        f'With nothing on, "{battery.name}" takes {number(-amps)} A from "{sources[high].name}": they stand at '
        f"{number(emf[low], 4)} V and {number(emf[high], 4)} V{stands}",
        _TOGETHER, (*working, *((why,) if why else ())),
        "bring them to one voltage before they are joined, join batteries of one kind, or let a relay, a diode or a "
        "converter stand between them",
    )  # fmt: skip


@check("plan.stiff-sources", title="Sources side by side with nothing between them")
def stiff(context: Context) -> Iterator[Finding]:
    """Sources that are on together with next to no resistance between their set voltages. Each group is said once."""
    told: set[tuple[int, ...]] = set()
    for one in context.cases:
        for group in _stiff_groups(context, one):
            if tuple(group) not in told:
                told.add(tuple(group))
                yield _stiff(context, one, group)


def _stiff_groups(context: Context, one: CaseStudy) -> Iterator[list[int]]:
    network, solution = context.network, one.solutions["plan"]
    c, supply = solution.condition, solution.supply
    count = len(network.plan.sources)
    ports = [
        port for port in range(count + len(network.strings)) if supply.source_on[port] and c.ohm[port] < STIFF_OHM / 2
    ]
    if len(ports) < 2:
        return
    close = c.branch_on & (solution.ohm < STIFF_OHM / 10)
    point = components(network.node_count, network.a[close], network.b[close])
    owner = {count + place: index for place, (index, _, _) in enumerate(network.strings)}
    groups: dict[tuple[int, int], dict[int, None]] = {}
    for port in ports:
        key = (int(point[c.source_a[port]]), int(point[c.source_b[port]]))
        groups.setdefault(key, {})[owner.get(port, port)] = None
    yield from (list(group) for group in groups.values() if len(group) > 1)


def _stiff(context: Context, one: CaseStudy, group: list[int]) -> Finding:
    c = one.solutions["plan"].condition
    names = [context.plan.sources[index].name for index in group]
    ports = [_ports(context.network, index)[0] for index in group]
    ohm = max(float(np.sum(c.ohm[ports][[place, place - 1]])) for place in range(len(ports)))
    return Finding(
        "plan.stiff-sources", "note", names[0], "source", one.name, ohm, STIFF_OHM, "ohm",
        f"{listed(names)} stand side by side with {number(1e6 * ohm)} microohm between their set voltages: which of "
        "them carries the current is decided by millivolts of their settings",
        _STIFF,
        tuple(
            f'"{name}": {number(float(c.volts[port]), 4)} V behind {number(1e6 * float(c.ohm[port]))} microohm'
            for name, port in zip(names, ports, strict=True)
        ),
        "state the droop or resistance from a data sheet, and the cables between them; do not rely on how they share",
    )  # fmt: skip
