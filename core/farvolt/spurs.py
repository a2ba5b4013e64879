"""Spurs of a network: what hangs on it by single conductors and holds no source, down to its last ends.

Nothing flows in a spur but the current of a short in it, and that in the one way to the short. A short in a spur is
therefore one at its root, behind the resistance of that way: what is left to solve is the rest of the network, which
in a radial plan is little more than the ways between its sources.
"""

from dataclasses import dataclass

import numpy as np

from farvolt.network import Floats, Ints


@dataclass(frozen=True)
class Spurs:
    """Over nodes: the root of the spur that each hangs in, itself where it hangs in none, and the way to it."""

    root: Ints
    ohm: Floats
    """Resistance of the way to the root."""
    parent: Ints
    """The next node on that way, itself at a root."""
    branch: Ints
    """The conductor to it, -1 at a root."""
    child: Ints
    """Over branches: the node at the far end of a conductor in a spur; -1 for one that is in none."""
    first: Ints
    """Nodes numbered so that all that hang beyond one follow it."""
    count: Ints
    """How many hang beyond each, itself included."""

    def beyond(self, branches: Ints, node: int) -> np.ndarray:
        """Which of some conductors, each in a spur, lie on the way from a node to its root."""
        ends = self.child[branches]
        place = self.first[node] - self.first[ends]
        found: np.ndarray = (place >= 0) & (place < self.count[ends]) & (self.root[ends] == self.root[node])
        return found

    def holds(self, end: int, node: int) -> bool:
        """Whether the way from a node to its root passes another, or begins at it."""
        place = self.first[node] - self.first[end]
        return bool(0 <= place < self.count[end] and self.root[end] == self.root[node])

    def way(self, node: int) -> list[int]:
        """The nodes from one towards its root, the root left out."""
        found = []
        while self.branch[node] >= 0:
            found.append(node)
            node = int(self.parent[node])
        return found


def spurs(node_count: int, a: Ints, b: Ints, ohm: Floats, kept: Ints) -> Spurs:
    """The spurs of a network whose `kept` nodes, those of sources, are in none. Runs in proportion to its size."""
    order, parent, branch = _taken_off(node_count, a.tolist(), b.tolist(), set(kept.tolist()))
    root, way, first, count = list(range(node_count)), [0.0] * node_count, [0] * node_count, [1] * node_count
    child, ohms = [-1] * len(a), ohm.tolist()
    for node in order:
        count[parent[node]] += count[node]
    following = [1] * node_count
    for node in reversed(order):
        above = parent[node]
        root[node], way[node] = root[above], way[above] + ohms[branch[node]]
        first[node] = first[above] + following[above]
        following[above] += count[node]
        child[branch[node]] = node
    whole = [np.array(one, dtype=np.int64) for one in (root, parent, branch, child, first, count)]
    return Spurs(whole[0], np.array(way), *whole[1:])


def _taken_off(node_count: int, a: list[int], b: list[int], kept: set[int]) -> tuple[list[int], list[int], list[int]]:
    """Nodes at the end of a single conductor, taken off one after the other, with what each hung on and by what.

    For every node the conductors that are left at it are kept as their number and the exclusive or of their indices:
    of the last one, that is its index.
    """
    left, mixed = [0] * node_count, [0] * node_count
    for index, (one, other) in enumerate(zip(a, b, strict=True)):
        for node in (one, other):
            left[node] += 1
            mixed[node] ^= index
    order, parent, branch = [], list(range(node_count)), [-1] * node_count
    for start in range(node_count):
        node = start
        while left[node] == 1 and node not in kept:
            index = mixed[node]
            above = a[index] ^ b[index] ^ node
            order.append(node)
            parent[node], branch[node] = above, index
            left[node] = 0
            left[above] -= 1
            mixed[above] ^= index
            node = above
    return order, parent, branch
