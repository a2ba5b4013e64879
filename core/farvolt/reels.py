"""Cable bought in reels and cut to length: what to buy and what to cut from each, no piece ever joined."""

import math
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass

from farvolt import patterns
from farvolt.filling import Offer
from farvolt.prices import Reel

_COUNTS_M = 1e-4
"""Where no prices are known the least length is bought, and of equal lengths in the fewest reels."""


@dataclass(frozen=True, slots=True)
class Piece:
    """A length to be cut, and what it is for."""

    length_m: float
    name: str

    @property
    def cut_cm(self) -> int:
        """The length it is cut to: up to the next full centimetre."""
        return math.ceil(self.length_m * 100 - 1e-6)


@dataclass(frozen=True, slots=True)
class CutReel:
    """A reel and the pieces cut from it in order, the longest first; or what is bought by the metre, cut to length."""

    length_m: float
    price: float | None
    by_the_metre: bool
    pieces: tuple[Piece, ...]

    @property
    def offcut_m(self) -> float:
        """What is left of it."""
        return round(self.length_m - sum(one.cut_cm for one in self.pieces) / 100, 6)


@dataclass(frozen=True, slots=True)
class Cutting:
    """All pieces of one kind of cable on what they are cut from."""

    reels: tuple[CutReel, ...]
    too_long: tuple[Piece, ...] = ()
    """Longer than anything on offer: to be asked for in one length."""
    gap: float = 0.0
    """Share of the cost by which something cheaper is not excluded; 0 where this is the cheapest."""

    @property
    def price(self) -> float | None:
        """Of everything, or None where a price is missing."""
        found = [one.price for one in self.reels]
        known = [price for price in found if price is not None]
        return None if self.too_long or len(known) < len(found) else sum(known)


def cut(
    pieces: Sequence[Piece], reels: Sequence[Reel], per_m: float | None = None, *, thorough: bool = True
) -> Cutting:
    """The cheapest way to buy these pieces from reels on offer and, where `per_m` is a price, by the metre.

    With nothing on offer all is taken to be sold by the metre at a price not known; with reels whose prices are not
    known the least length is bought. `thorough` False spares the search for cheaper ones than a good start.
    """
    if not reels and per_m is None:
        return Cutting((_by_the_metre(pieces, None),) if pieces else ())
    priced = all(reel.price is not None for reel in reels)
    offers = tuple(
        Offer(math.floor(reel.length_m * 100 + 1e-6), max(reel.price, 1e-6) if priced and reel.price is not None
              else reel.length_m + _COUNTS_M)
        for reel in reels
    )  # fmt: skip
    longest = max((offer.length_cm for offer in offers), default=0)
    fitting = [one for one in pieces if per_m is not None or one.cut_cm <= longest]
    too_long = tuple(one for one in pieces if per_m is None and one.cut_cm > longest)
    per_cm = None if per_m is None else (max(per_m, 1e-6) if priced else 1.0) / 100
    found = patterns.least_cost(tuple(sorted(one.cut_cm for one in fitting)), offers, per_cm, thorough)
    waiting: defaultdict[int, list[Piece]] = defaultdict(list)
    for one in reversed(fitting):
        waiting[one.cut_cm].append(one)
    bought = []
    for reel in found.bought:
        held = tuple(waiting[length].pop() for length in reel.lengths_cm)
        chosen = None if reel.offer is None else reels[reel.offer]
        bought.append(_by_the_metre(held, per_m) if chosen is None
                      else CutReel(chosen.length_m, chosen.price, False, held))  # fmt: skip
    return Cutting(tuple(bought), too_long, found.gap)


def _by_the_metre(pieces: Sequence[Piece], per_m: float | None) -> CutReel:
    length_m = sum(one.cut_cm for one in pieces) / 100
    ordered = tuple(sorted(pieces, key=lambda one: -one.cut_cm))
    return CutReel(length_m, None if per_m is None else length_m * per_m, True, ordered)
