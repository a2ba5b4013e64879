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
    grounds: tuple[int, ...]
    source_on: np.ndarray
    load_on: np.ndarray


def first_diode(network: Network) -> int:
    """Where the diodes begin among the source ports."""
    return len(network.plan.sources) + len(network.strings)


def fed(network: Network, condition: Operating) -> Fed:
    """Graph search before solving: live nodes, the ports that work, the ground of each galvanic part."""
    on = condition.branch_on
    ports = first_diode(network)
    converters = {source: load for source, load, _, _ in condition.converters}
    active = condition.source_on.copy()
    for port in converters:
        active[port] = False
    while True:
        group = _groups(network, condition, active, on)
        alive = {int(group[condition.source_a[port]]) for port in np.flatnonzero(active[:ports])}
        live = np.isin(group, list(alive))
        joined = [
            port
            for port, load in converters.items()
            if condition.source_on[port] and not active[port] and live[condition.load_a[load]]
            and group[condition.load_a[load]] == group[condition.load_b[load]]
        ]  # fmt: skip
        if not joined:
            break
        active[joined] = True
    load_on = live[condition.load_a] & (group[condition.load_a] == group[condition.load_b])
    for port, load in converters.items():
        load_on[load] &= active[port]
    active[ports:] &= live[condition.source_a[ports:]] & live[condition.source_b[ports:]]
    return Fed(live, group, _grounds(network, condition, active, group, live), active, load_on)


def _groups(network: Network, condition: Operating, active: np.ndarray, on: np.ndarray) -> np.ndarray:
    a = np.concatenate([network.a[on], condition.source_a[active]])
    b = np.concatenate([network.b[on], condition.source_b[active]])
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
    return tuple(grounds.values())
