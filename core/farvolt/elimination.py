"""Gaussian elimination of many matrices of one pattern at once, each step over all of them.

The networks of variants of a plan differ in their numbers only, so the order of elimination and the places that fill
up are worked out once (least degree first: Tinney and Walker 1967, from memory). The matrices are those of nodal
analysis: no pivoting is needed where they are positive definite, and the signs of the pivots say whether they are
(Sylvester's law of inertia).
"""

import heapq
from dataclasses import dataclass

import numpy as np

from farvolt.network import Floats, Ints


@dataclass(frozen=True, slots=True)
class _Step:
    """One unknown eliminated: its diagonal, its `rest` (later unknowns beside it), and places of their entries."""

    pivot: int
    diagonal: int
    rest: Ints
    right: Ints
    below: Ints
    square: Ints


class Elimination:
    """The steps for all matrices with entries at (rows, columns); places are counted as `place` gives them."""

    def __init__(self, size: int, rows: Ints, columns: Ints) -> None:
        self.size = size
        beside: list[set[int]] = [set() for _ in range(size)]
        for a, b in set(zip(rows.tolist(), columns.tolist(), strict=True)):
            if a != b:
                beside[a].add(b)
                beside[b].add(a)
        self._places: dict[tuple[int, int], int] = {}
        for unknown in range(size):
            self._place(unknown, unknown)
        self._steps = [self._step(unknown, sorted(rest)) for unknown, rest in _order(beside)]
        self.places = len(self._places)
        codes = np.array([row * size + column for row, column in self._places], dtype=np.int64)
        self._rank = np.argsort(codes)
        self._codes = codes[self._rank]

    def _place(self, row: int, column: int) -> int:
        return self._places.setdefault((row, column), len(self._places))

    def _step(self, pivot: int, rest: list[int]) -> _Step:
        whole = [self._place(row, column) for row in rest for column in rest]
        return _Step(
            pivot,
            self._place(pivot, pivot),
            np.array(rest, dtype=np.int64),
            np.array([self._place(pivot, other) for other in rest], dtype=np.int64),
            np.array([self._place(other, pivot) for other in rest], dtype=np.int64),
            np.array(whole, dtype=np.int64),
        )

    def place(self, rows: Ints, columns: Ints) -> Ints:
        """Where each entry (row, column) is among the `places` of a matrix."""
        found: Ints = self._rank[np.searchsorted(self._codes, rows * self.size + columns)]
        return found

    def solve(self, matrices: Floats, right: Floats) -> tuple[Floats, np.ndarray]:
        """Solutions over (unknown, matrix), and for each matrix whether all its pivots are positive.

        `matrices` is over (place, matrix), `right` over (unknown, matrix); both are used up.
        """
        count = matrices.shape[1]
        positive = np.ones(count, dtype=bool)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            for one in self._steps:
                pivots = matrices[one.diagonal]
                positive &= pivots > 0
                if len(one.rest):
                    times = matrices[one.below] / pivots
                    right[one.rest] -= times * right[one.pivot]
                    matrices[one.square] -= (times[:, None, :] * matrices[one.right]).reshape(-1, count)
            for one in reversed(self._steps):
                known = (matrices[one.right] * right[one.rest]).sum(axis=0)
                right[one.pivot] = (right[one.pivot] - known) / matrices[one.diagonal]
        return right, positive


def _order(beside: list[set[int]]) -> list[tuple[int, set[int]]]:
    """Unknowns by least degree, each with those still beside it when its turn comes."""
    queue = [(len(others), unknown) for unknown, others in enumerate(beside)]
    heapq.heapify(queue)
    found: list[tuple[int, set[int]]] = []
    done = [False] * len(beside)
    while queue:
        degree, unknown = heapq.heappop(queue)
        if done[unknown] or degree != len(beside[unknown]):
            continue
        done[unknown] = True
        rest = beside[unknown]
        found.append((unknown, rest))
        for other in rest:
            beside[other] = (beside[other] | rest) - {other, unknown}
            heapq.heappush(queue, (len(beside[other]), other))
    return found
