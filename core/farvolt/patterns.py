"""Which reels to buy and what to cut from each: the cutting-stock problem in whole centimetres, at the least cost.

First-fit decreasing, and filled sets of reels (`filling`), give a start; where it costs no more than the total length
must, it is the cheapest. Else patterns, what is cut from one reel, are looked at. Where all can be listed, an integer
programme over them gives the least cost. For more, Gilmore and Gomory's column generation (Operations Research 9, 1961)
finds those that matter and bounds the cost from below (Farley, Operations Research 38, 1990); the answer then says how
far above the least cost it may be.
"""

import math
from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from farvolt.filling import Covering, Offer, ReelSet, best_filled

Counts = tuple[int, ...]
"""How many pieces of each length a pattern has."""

LISTED_LIMIT = 300
"""More patterns than these are not listed but generated."""

_NODES, _FEW_NODES = 300, 50
_ROUNDS = 150
_LENGTHS = 120
_NEAR = 0.01
"""Where patterns are too many to list, an answer this near its bound, as a share of the cost, is not sought further.
With more than `_LENGTHS` different lengths none is."""

_UNIT = 1e-6
"""Costs are compared in whole millionths."""


@dataclass(frozen=True, slots=True)
class Bought:
    """One reel, by the place of its offer (None: cut to length, bought by the metre), and the lengths cut from it."""

    offer: int | None
    lengths_cm: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Answer:
    """What to buy, what it costs, and the least that anything could cost: equal where the answer is proven."""

    bought: tuple[Bought, ...]
    cost: float
    bound: float

    @property
    def gap(self) -> float:
        """Share of the cost by which something cheaper is not excluded; 0 where the answer is the cheapest."""
        return max(0.0, 1 - self.bound / self.cost) if self.cost > 0 else 0.0


@dataclass(frozen=True, slots=True)
class _Problem:
    lengths: tuple[int, ...]
    """Distinct, longest first."""
    demand: tuple[int, ...]
    offers: tuple[Offer, ...]
    per_cm: float | None

    @property
    def total_cm(self) -> int:
        return sum(length * count for length, count in zip(self.lengths, self.demand, strict=True))


@dataclass(frozen=True, slots=True)
class _Pattern:
    offer: int | None
    counts: Counts
    cost: float


@lru_cache(maxsize=4096)
def least_cost(
    lengths_cm: tuple[int, ...], offers: tuple[Offer, ...], per_cm: float | None, thorough: bool = True
) -> Answer:
    """The cheapest reels for pieces of these lengths; each piece must fit a reel, or be bought by the metre.

    `per_cm` is the cost of a centimetre cut to length, None where it is not sold so. Not `thorough`, it leaves out
    the search through patterns.
    """
    counted = Counter(lengths_cm)
    lengths = tuple(sorted(counted, reverse=True))
    problem = _Problem(lengths, tuple(counted[one] for one in lengths), offers, per_cm)
    if not lengths:
        return Answer((), 0.0, 0.0)
    start = min(_first_fit_starts(problem), key=_cost)
    covering = Covering(problem.total_cm, offers, per_cm)
    filled = best_filled(sorted(lengths_cm), covering, _cost(start))
    start = start if filled is None else _as_patterns(problem, filled)
    if not thorough or _cost(start) <= _next_attainable(problem, covering.bound) + _UNIT:
        return _answer(problem, start, covering.bound)
    patterns = _listed(problem)
    if patterns is not None:
        found, bound = _whole(problem, patterns, _NODES)
    elif len(lengths) > _LENGTHS or covering.bound >= (1 - _NEAR) * _cost(start):
        return _answer(problem, start, covering.bound)
    else:
        patterns, bound = _generated(problem, start)
        found = (
            _whole(problem, patterns, _FEW_NODES)[0]
            if _cost(start) > _next_attainable(problem, bound) + _UNIT
            else None
        )
    best = min([start, *([found] if found is not None else [])], key=_cost)
    return _answer(problem, best, max(bound, covering.bound))


def _as_patterns(problem: _Problem, filled: ReelSet) -> list[_Pattern]:
    singles = dict(zip(problem.lengths, _singles(problem), strict=False))
    found = [singles[length] for length in filled.loose]
    for place, held in filled.reels:
        counted = Counter(held)
        counts = tuple(counted[length] for length in problem.lengths)
        found.append(_Pattern(place, counts, problem.offers[place].cost))
    return found


def _answer(problem: _Problem, best: Sequence[_Pattern], bound: float) -> Answer:
    bought = tuple(_with_pieces(problem, best))
    cost = sum(_paid(problem, one) for one in bought)
    return Answer(bought, cost, min(cost, _next_attainable(problem, bound)))


def _cost(patterns: Sequence[_Pattern]) -> float:
    return sum(one.cost for one in patterns)


def _paid(problem: _Problem, one: Bought) -> float:
    if one.offer is None:
        return sum(one.lengths_cm) * (problem.per_cm or 0.0)
    return problem.offers[one.offer].cost


def _singles(problem: _Problem) -> list[_Pattern]:
    """A piece of each length, cut to length where that is sold."""
    if problem.per_cm is None:
        return []
    kinds = range(len(problem.lengths))
    return [_Pattern(None, _unit(kinds, at), problem.per_cm * problem.lengths[at]) for at in kinds]


def _unit(kinds: range, at: int) -> Counts:
    return tuple(int(place == at) for place in kinds)


def _first_fit_starts(problem: _Problem) -> Iterator[list[_Pattern]]:
    """First-fit decreasing on reels of one length (a longer one for pieces that it cannot hold), for each length."""
    if problem.per_cm is not None:
        yield [one for one, count in zip(_singles(problem), problem.demand, strict=True) for _ in range(count)]
    for offer in problem.offers:
        if problem.per_cm is not None or max(one.length_cm for one in problem.offers) >= problem.lengths[0]:
            yield _first_fit(problem, offer.length_cm)


def _first_fit(problem: _Problem, usual_cm: int) -> list[_Pattern]:
    room: list[int] = []
    held: list[list[int]] = []
    singles, alone = _singles(problem), list[_Pattern]()
    for at, (length, count) in enumerate(zip(problem.lengths, problem.demand, strict=True)):
        for _ in range(count):
            place = next((place for place, left in enumerate(room) if left >= length), None)
            if place is None:
                long_enough = [one.length_cm for one in problem.offers if one.length_cm >= length]
                if not long_enough:
                    alone.append(singles[at])
                    continue
                room.append(usual_cm if usual_cm >= length else min(long_enough))
                held.append([0] * len(problem.lengths))
                place = len(room) - 1
            room[place] -= length
            held[place][at] += 1
    return alone + [_cheapest_holding(problem, tuple(counts)) for counts in held]


def _cheapest_holding(problem: _Problem, counts: Counts) -> _Pattern:
    used = sum(length * count for length, count in zip(problem.lengths, counts, strict=True))
    fits = [place for place, one in enumerate(problem.offers) if one.length_cm >= used]
    place = min(fits, key=lambda one: problem.offers[one].cost)
    return _Pattern(place, counts, problem.offers[place].cost)


def _listed(problem: _Problem) -> list[_Pattern] | None:
    """Every pattern to which no piece can be added, or None where there are too many."""
    found = _singles(problem)
    for place, offer in enumerate(problem.offers):
        for counts in _maximal(problem.lengths, problem.demand, offer.length_cm):
            found.append(_Pattern(place, counts, offer.cost))
            if len(found) > LISTED_LIMIT:
                return None
    return found


def _maximal(lengths: tuple[int, ...], demand: tuple[int, ...], room: int) -> Iterator[Counts]:
    """Patterns of one reel to which nothing can be added, most of the longest pieces first."""
    stack: list[tuple[Counts, int]] = [((), room)]
    while stack:
        counts, left = stack.pop()
        at = len(counts)
        if at == len(lengths):
            added = any(
                length <= left and count < most
                for length, count, most in zip(lengths, counts, demand, strict=True)
            )  # fmt: skip
            if not added:
                yield counts
            continue
        most = min(demand[at], left // lengths[at])
        # With the last length, fewer than the most can always be added to.
        least = most if at == len(lengths) - 1 else 0
        stack.extend(((*counts, count), left - count * lengths[at]) for count in range(least, most + 1))


def _matrix(patterns: Sequence[_Pattern]) -> NDArray[np.float64]:
    return np.array([one.counts for one in patterns], dtype=float).T


def _whole(problem: _Problem, patterns: Sequence[_Pattern], nodes: int) -> tuple[list[_Pattern] | None, float]:
    """The cheapest whole numbers of these patterns that hold all pieces, and a lower bound over these patterns."""
    from scipy.optimize import LinearConstraint, milp

    costs = np.array([one.cost for one in patterns])
    # Patterns may hold more of a length than there is: what is over is simply not cut.
    answer: Any = milp(
        costs, integrality=np.ones(len(patterns)), constraints=LinearConstraint(_matrix(patterns), problem.demand),
        options={"node_limit": nodes, "mip_rel_gap": 0.0},
    )  # fmt: skip
    bound = answer.mip_dual_bound or 0.0
    if answer.x is None:
        return None, bound
    times = np.round(answer.x).astype(int)
    return [one for one, count in zip(patterns, times, strict=True) for _ in range(count)], bound


def _generated(problem: _Problem, start: Sequence[_Pattern]) -> tuple[list[_Pattern], float]:
    """Patterns that the continuous problem needs, and the best lower bound on the cost met on the way."""
    from scipy.optimize import linprog

    patterns = list(dict.fromkeys([*start, *_singles(problem)]))
    known, bound = set(patterns), 0.0
    for _ in range(_ROUNDS):
        answer: Any = linprog(
            [one.cost for one in patterns], A_ub=-_matrix(patterns), b_ub=-np.array(problem.demand, dtype=float)
        )
        worth = -answer.ineqlin.marginals
        best = _most_worth(problem, worth)
        # Worths shrunk until no pattern is worth more than it costs bound the cost of every plan (Farley).
        over = max((value / problem.offers[one.offer or 0].cost for value, one in best), default=1.0)
        bound = max(bound, answer.fun / max(over, 1.0))
        new = [one for value, one in best if value > one.cost * (1 + 1e-9) and one not in known]
        if not new:
            break
        patterns += new
        known.update(new)
    return patterns, bound


def _most_worth(problem: _Problem, worth: NDArray[np.float64]) -> list[tuple[float, _Pattern]]:
    """For each offer the pattern whose pieces are worth most in all: a bounded knapsack by dynamic programming."""
    widest = min(max(one.length_cm for one in problem.offers), problem.total_cm)
    best = np.zeros(widest + 1)
    taken: list[tuple[int, int, NDArray[np.bool_]]] = []
    for at, (length, demand) in enumerate(zip(problem.lengths, problem.demand, strict=True)):
        for count in _binary_split(min(demand, widest // length)):
            size = count * length
            if worth[at] <= 0 or size > widest:
                continue
            with_it = best[: widest + 1 - size] + count * worth[at]
            take = np.zeros(widest + 1, dtype=bool)
            take[size:] = with_it > best[size:] + 1e-12
            best[size:] = np.where(take[size:], with_it, best[size:])
            taken.append((at, count, take))
    found = []
    for place, offer in enumerate(problem.offers):
        room = min(offer.length_cm, widest)
        counts, left = [0] * len(problem.lengths), room
        for at, count, take in reversed(taken):
            if take[left]:
                counts[at] += count
                left -= count * problem.lengths[at]
        found.append((float(best[room]), _Pattern(place, tuple(counts), offer.cost)))
    return found


def _binary_split(count: int) -> list[int]:
    """Numbers whose sums are 0 to `count`: 1, 2, 4 and so on, and the rest."""
    parts, part = [], 1
    while count > 0:
        parts.append(min(part, count))
        count -= part
        part *= 2
    return parts


def _next_attainable(problem: _Problem, bound: float) -> float:
    """The bound rounded up to a multiple of what all costs are multiples of."""
    costs = [one.cost for one in problem.offers] + [one.cost for one in _singles(problem)]
    step = math.gcd(*(round(cost / _UNIT) for cost in costs)) * _UNIT
    return math.ceil(bound / step - 1e-6) * step if step > 0 else bound


def _with_pieces(problem: _Problem, patterns: Sequence[_Pattern]) -> Iterator[Bought]:
    """Share the pieces out to the patterns, which may have room for more of a length than there are."""
    left = list(problem.demand)
    loose: list[int] = []
    reels = []
    for one in sorted(patterns, key=lambda pattern: (pattern.offer is None, -pattern.cost)):
        counts = tuple(min(count, rest) for count, rest in zip(one.counts, left, strict=True))
        left = [rest - count for count, rest in zip(counts, left, strict=True)]
        cut = [length for length, count in zip(problem.lengths, counts, strict=True) for _ in range(count)]
        if one.offer is None:
            loose += cut
        elif cut:
            reels.append(Bought(_cheapest_holding(problem, counts).offer, tuple(cut)))
    order = sorted(
        reels, key=lambda reel: (-problem.offers[reel.offer or 0].length_cm, [-one for one in reel.lengths_cm])
    )
    yield from order
    if loose:
        yield Bought(None, tuple(sorted(loose, reverse=True)))
