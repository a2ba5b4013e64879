"""Sets of reels by rising cost, and pieces packed into them: good answers to the cutting-stock problem, and a bound.

Reels that hold the total length of the pieces cost at least as much as the cheapest set of that length. Where pieces
are short beside a reel, that set, or one a little dearer, can usually be filled.
"""

import heapq
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

_CELLS = 20_000
_STEPS = 3000
_SETS = 60


@dataclass(frozen=True, slots=True)
class Offer:
    """A reel on offer: its length in cm and its cost."""

    length_cm: int
    cost: float


@dataclass(frozen=True, slots=True)
class ReelSet:
    """Reels by the place of their offer, with the lengths cut from each, and the lengths bought by the metre."""

    reels: tuple[tuple[int, tuple[int, ...]], ...]
    loose: tuple[int, ...]
    cost: float


class Covering:
    """What the total length of the pieces costs at least, whatever the pieces, in reels and by the metre."""

    def __init__(self, total_cm: int, offers: Sequence[Offer], per_cm: float | None) -> None:
        self.total_cm, self.offers, self.per_cm = total_cm, offers, per_cm
        self.step_cm = math.gcd(*(one.length_cm for one in offers)) or 1
        cells = -(-total_cm // self.step_cm)
        self.coarse = cells > _CELLS or not offers
        self._left = [] if self.coarse else self._costs_left(cells)

    @property
    def bound(self) -> float:
        """A lower bound on the cost of everything."""
        if not self.coarse:
            return self._left[0]
        rates = [one.cost / one.length_cm for one in self.offers]
        return self.total_cm * min([*rates, *([self.per_cm] if self.per_cm is not None else [])])

    def _costs_left(self, cells: int) -> list[float]:
        """The least cost of what is still missing, by the length held already in steps."""
        sizes = [(one.length_cm // self.step_cm, one.cost) for one in self.offers]
        left = [0.0] * (cells + 1)
        for held in range(cells - 1, -1, -1):
            left[held] = min(cost + left[min(cells, held + size)] for size, cost in sizes)
            if self.per_cm is not None:
                left[held] = min(left[held], self._by_the_metre(held))
        return left

    def _by_the_metre(self, held: int) -> float:
        return (self.per_cm or 0.0) * max(0, self.total_cm - held * self.step_cm)

    def sets(self, below: float) -> Iterator[tuple[int, ...]]:
        """Sets of reels that hold the total length, with what is bought by the metre: the first by cost."""
        if self.coarse:
            return
        cells = len(self._left) - 1
        waiting: list[tuple[float, tuple[int, ...], int, float, bool]] = [(self._left[0], (), 0, 0.0, False)]
        given = 0
        for _ in range(_STEPS):
            if not waiting or given >= _SETS or waiting[0][0] >= below:
                return
            _, chosen, held, cost, whole = heapq.heappop(waiting)
            if whole:
                given += 1
                yield chosen
                continue
            if held >= cells or self.per_cm is not None:
                heapq.heappush(waiting, (cost + self._by_the_metre(held), chosen, held, cost, True))
            for place in range(chosen[-1] if chosen else 0, len(self.offers)) if held < cells else ():
                more = min(cells, held + self.offers[place].length_cm // self.step_cm)
                spent = cost + self.offers[place].cost
                heapq.heappush(waiting, (spent + self._left[more], (*chosen, place), more, spent, False))


def best_filled(lengths_cm: Sequence[int], covering: Covering, below: float) -> ReelSet | None:
    """The cheapest packing met, of the cheaper sets of reels, that costs less than `below`; None where none is."""
    best: ReelSet | None = None
    for chosen in covering.sets(below):
        for downwards in (False, True):
            packed = _packed(lengths_cm, chosen, covering, downwards)
            if packed is not None and packed.cost < (best.cost if best else below) - 1e-9:
                best = packed
        if best is not None and best.cost <= covering.bound + 1e-9:
            break
    return best


def _packed(lengths_cm: Sequence[int], chosen: Sequence[int], covering: Covering, downwards: bool) -> ReelSet | None:
    """Fill reel after reel as full as the pieces left allow; what remains is bought by the metre."""
    left = sorted(lengths_cm)
    reels, cost = [], 0.0
    for place in sorted(chosen, key=lambda one: covering.offers[one].length_cm, reverse=downwards):
        held = fullest(left, covering.offers[place].length_cm)
        for one in held:
            left.remove(one)
        if held:
            reels.append((place, tuple(held)))
            cost += covering.offers[place].cost
    if left and covering.per_cm is None:
        return None
    return ReelSet(tuple(reels), tuple(reversed(left)), cost + (covering.per_cm or 0.0) * sum(left))


def fullest(lengths_cm: Sequence[int], room_cm: int) -> list[int]:
    """Of lengths that rise, those that fill `room_cm` as far as any can; the longest before shorter ones."""
    mask = (1 << (room_cm + 1)) - 1
    sums = [1]  # bit n: the lengths so far can sum to n
    for one in lengths_cm:
        sums.append((sums[-1] | sums[-1] << one) & mask)
    rest = sums[-1].bit_length() - 1
    held = []
    for at in range(len(lengths_cm) - 1, -1, -1):
        one = lengths_cm[at]
        if one <= rest and sums[at] >> (rest - one) & 1:
            held.append(one)
            rest -= one
    return held
