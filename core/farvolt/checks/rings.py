"""Rings and ways of a graph: which edges lie on a ring, and which chains of edges stand side by side."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

Edge = tuple[int, int]
_Step = tuple[int, int]
"""An edge's place, and the node at its other end."""


def ring_numbers(edges: Sequence[Edge]) -> list[int]:
    """The number of the mesh each edge lies in; -1 for an edge on no ring.

    Two edges share a number when some ring passes through both. By depth-first search (Hopcroft and Tarjan, 1973).
    """
    search = _Search(edges_at(edges), [-1] * len(edges))
    for root in search.at:
        if root not in search.entered:
            search.from_root(root)
    return search.number


def edges_at(edges: Sequence[Edge]) -> dict[int, list[_Step]]:
    """The edges at every node, each with the node at its other end; without those that lead back to their own."""
    at: dict[int, list[_Step]] = {}
    for place, (a, b) in enumerate(edges):
        if a != b:
            at.setdefault(a, []).append((place, b))
            at.setdefault(b, []).append((place, a))
    return at


@dataclass(slots=True)
class _Search:
    at: dict[int, list[_Step]]
    number: list[int]
    entered: dict[int, int] = field(default_factory=dict)
    low: dict[int, int] = field(default_factory=dict)
    """By node, the earliest node that what lies beyond it leads back to."""
    waiting: list[int] = field(default_factory=list)
    """Edges passed whose mesh is not known yet."""
    count: int = 0

    def from_root(self, root: int) -> None:
        stack: list[tuple[int, int, Iterator[_Step]]] = [self._enter(root, -1)]
        while stack:
            node, came, ahead = stack[-1]
            edge, other = next(ahead, (-1, -1))
            if edge < 0:
                stack.pop()
                if stack:
                    self._back(stack[-1][0], node, came)
            elif other not in self.entered:
                self.waiting.append(edge)
                stack.append(self._enter(other, edge))
            elif edge != came and self.entered[other] < self.entered[node]:
                self.waiting.append(edge)
                self.low[node] = min(self.low[node], self.entered[other])

    def _enter(self, node: int, came: int) -> tuple[int, int, Iterator[_Step]]:
        self.entered[node] = self.low[node] = len(self.entered)
        return node, came, iter(self.at[node])

    def _back(self, before: int, node: int, came: int) -> None:
        """Back over the edge by which a node was reached; where nothing beyond leads further back, a mesh is whole."""
        self.low[before] = min(self.low[before], self.low[node])
        if self.low[node] < self.entered[before]:
            return
        mesh = [self.waiting.pop()]
        while mesh[-1] != came:
            mesh.append(self.waiting.pop())
        if len(mesh) > 1:
            for edge in mesh:
                self.number[edge] = self.count
            self.count += 1


@dataclass(frozen=True, slots=True)
class Way:
    """A chain of edges from one junction to another, in order; nothing joins or leaves it in between."""

    start: int
    end: int
    edges: tuple[int, ...]


def ways(edges: Sequence[Edge], junctions: set[int]) -> list[Way]:
    """The chains a graph falls into: they end at `junctions`, and where other than two edges meet."""
    at = edges_at(edges)
    ends = {node for node, near in at.items() if len(near) != 2 or node in junctions}
    found: list[Way] = []
    used: set[int] = set()
    for start in [node for node in at if node in ends]:
        for first, other in at[start]:
            if first in used:
                continue
            chain, node = [first], other
            while node not in ends:
                edge, node = next(step for step in at[node] if step[0] != chain[-1])
                chain.append(edge)
            used.update(chain)
            found.append(Way(start, node, tuple(chain)))
    return found
