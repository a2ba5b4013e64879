"""What joins two nodes of a network, in the plan's own words."""

from collections import deque

import numpy as np

from farvolt.checks.rings import edges_at
from farvolt.network import FEED, RETURN, Network


def names_between(
    network: Network, start: int, end: int, pole: int, *, without: int = -1, every: bool = False
) -> list[str]:
    """The runs and devices on the shortest way between two nodes in one pole; none where nothing joins them.

    Devices are as the plan states them, or `every` one closed; `without` one device. Bonds count among the returns.
    """
    plan = network.plan
    closed = np.array([every or one.state == "closed" for one in plan.devices] + [True])
    on = ((network.pole == FEED) == (pole == FEED)) & closed[network.device]
    places = np.flatnonzero(on & ((network.device != without) | (network.device < 0))).tolist()
    edges = list(zip(network.a[places].tolist(), network.b[places].tolist(), strict=True))
    names = [_name(network, place) for place in places]
    for index, a, b in network.diodes:
        if index != without and (plan.devices[index].pole == "return") == (pole == RETURN):
            edges.append((a, b))
            names.append(plan.devices[index].name)
    return [names[edge] for edge in _shortest(edges, start, end)]


def listed(names: list[str], most: int = 6) -> str:
    """Names in quotes, the first few of many."""
    shown = ", ".join(f'"{name}"' for name in names[:most])
    return shown + (f" and {len(names) - most} more" if len(names) > most else "")


def _name(network: Network, branch: int) -> str:
    run, device = int(network.run[branch]), int(network.device[branch])
    if run >= 0:
        return network.plan.runs[run].name
    return network.plan.devices[device].name if device >= 0 else "a bond or link"


def _shortest(edges: list[tuple[int, int]], start: int, end: int) -> list[int]:
    """The shortest way from one node to another, as places in `edges`."""
    at, came = edges_at(edges), {start: (-1, start)}
    waiting = deque([start])
    while waiting and end not in came:
        node = waiting.popleft()
        for edge, other in at.get(node, ()):
            if other not in came:
                came[other] = (edge, node)
                waiting.append(other)
    found, node = [], end
    while node != start and node in came:
        edge, node = came[node]
        found.append(edge)
    return found[::-1]
