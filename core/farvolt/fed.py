"""Which parts of a network have a source behind them in a case: a graph search before solving."""

from dataclasses import dataclass

import numpy as np

from farvolt.network import Network
from farvolt.operating import Operating, components


@dataclass(frozen=True)
class Fed:
    """Which nodes have a source behind them in a case, and where each galvanic part is grounded."""

    live: np.ndarray
    group: np.ndarray
    """Galvanic part of each node: joined by conductors, working sources and diodes."""
    part: np.ndarray
    """The same without the sources: the feeds of a part stand at nearly one voltage."""
    grounds: tuple[int, ...]
    source_on: np.ndarray
    load_on: np.ndarray


def first_diode(network: Network) -> int:
    """Where the diodes begin among the source ports."""
    return len(network.plan.sources) + len(network.strings) + len(network.arrays)


def fed(network: Network, condition: Operating) -> Fed:
    """Graph search before solving: live nodes, the ports that work, the ground of each galvanic part.

    A converter feeds on what its input has; a diode feeds in its own direction only, so what stands on the blocked
    side of one alone is not fed.
    """
    sources = first_diode(network)
    converters = {source: load for source, load, _, _ in condition.converters}
    active = condition.source_on.copy()
    active[sources:] = False
    active[list(converters)] = False
    while True:
        group = _groups(network, condition, active)
        alive = {int(group[condition.source_a[port]]) for port in np.flatnonzero(active[:sources])}
        live = np.isin(group, list(alive))
        joined = [
            port
            for port, load in converters.items()
            if condition.source_on[port] and not active[port] and live[condition.load_a[load]]
            and group[condition.load_a[load]] == group[condition.load_b[load]]
        ]  # fmt: skip
        joined += [
            sources + place
            for place, diode in enumerate(network.diodes)
            if not active[sources + place] and live[_upstream(network, *diode)]
        ]
        if not joined:
            break
        active[joined] = True
    load_on = live[condition.load_a] & (group[condition.load_a] == group[condition.load_b])
    for port, load in converters.items():
        load_on[load] &= active[port]
    conducting = np.zeros_like(active)
    conducting[sources:] = active[sources:]
    part = _groups(network, condition, conducting)
    return Fed(live, group, part, _grounds(network, condition, active, group, live), active, load_on)


def _upstream(network: Network, device: int, start: int, end: int) -> int:
    """The node at which a diode is fed: current leaves a source through the feed, and comes back in the return."""
    return end if network.plan.devices[device].pole == "return" else start


def _groups(network: Network, condition: Operating, joining: np.ndarray) -> np.ndarray:
    """Nodes joined by conductors, and by the source ports of `joining`."""
    on = condition.branch_on
    a = np.concatenate([network.a[on], condition.source_a[joining]])
    b = np.concatenate([network.b[on], condition.source_b[joining]])
    return components(network.node_count, a, b)


def _grounds(
    network: Network, condition: Operating, active: np.ndarray, group: np.ndarray, live: np.ndarray
) -> tuple[int, ...]:
    """The return of the reference source, or of the first working source, in each live galvanic part."""
    grounds: dict[int, int] = {}
    sources = network.plan.sources
    working = set(np.flatnonzero(active).tolist()) | {index for index, _, _ in network.strings}
    order = sorted(
        range(len(sources)),
        key=lambda i: (sources[i].name != network.plan.reference, i not in working, sources[i].kind != "battery"),
    )
    for port in order:
        node = network.ret(sources[port].at)
        if live[node]:
            grounds.setdefault(int(group[node]), node)
    for _, _, node in network.arrays:
        if live[node]:
            grounds.setdefault(int(group[node]), node)
    return tuple(grounds.values())
