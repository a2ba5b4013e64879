"""What cable, lugs, fuses and the rest cost and which reels there are, as a price list (`price_file`) says."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from farvolt.conductors import Size


@dataclass(frozen=True, slots=True)
class Reel:
    """A length of cable that is sold as one; `price` None: not known."""

    length_m: float
    price: float | None


@dataclass(frozen=True, slots=True)
class Offer:
    """One row: what describes the thing (None: any), and its price."""

    row: int
    item: str
    size: str | None
    material: str | None
    strand: str | None
    type: str | None
    rating_A: float | None
    stud: str | None
    reel_m: float | None
    price: float

    @property
    def key(self) -> tuple[object, ...]:
        """What it prices."""
        return (self.item, self.size, self.material, self.strand, self.type, self.rating_A, self.stud, self.reel_m)

    def fit(self, wanted: Mapping[str, object]) -> int | None:
        """How many descriptions agree, or None where one does not."""
        own = {name: value for name in wanted if (value := getattr(self, name)) is not None}
        return len(own) if all(wanted[name] == value for name, value in own.items()) else None


class PriceList:
    """What things cost. Every answer is None (or empty) where the list has no row for it."""

    def __init__(self, offers: Sequence[Offer], currency: str, notice: str, source: str) -> None:
        self.currency, self.notice, self.source = currency, notice, source
        self._offers: dict[str, list[Offer]] = {}
        for offer in offers:
            self._offers.setdefault(offer.item, []).append(offer)
        self._found: dict[tuple[object, ...], list[Offer]] = {}

    @property
    def about(self) -> str:
        """What to say beside a price: the list's notice, else where it is from."""
        return self.notice or f"Prices as in {self.source}."

    def cable_by_the_metre(self, size: Size, material: str, strand: str) -> float | None:
        """Price of a metre, cut to length."""
        return next((one.price for one in self._cable(size, material, strand) if one.reel_m is None), None)

    def reels(self, size: Size, material: str, strand: str) -> tuple[Reel, ...]:
        """The reels on offer, shortest first."""
        rows = self._cable(size, material, strand)
        return tuple(sorted((Reel(one.reel_m, one.price) for one in rows if one.reel_m is not None),
                            key=lambda reel: reel.length_m))  # fmt: skip

    def cable_per_m(self, size: Size, material: str, strand: str) -> float | None:
        """What a metre costs at least: cut to length, or on the reel that is cheapest by the metre."""
        rows = self._cable(size, material, strand)
        return min((one.price / (one.reel_m or 1.0) for one in rows), default=None)

    def protection(self, kind: str, rating_A: float) -> float | None:
        """A fuse or breaker of a type and rating."""
        return self._price("protection", type=as_word(kind), rating_A=rating_A)

    def holder(self, kind: str, rating_A: float) -> float | None:
        """A holder for a fuse of that type and rating."""
        return self._price("holder", type=as_word(kind), rating_A=rating_A)

    def device(self, kind: str, rating_A: float | None) -> float | None:
        """A switch, busbar or the like: the smallest listed rating not below `rating_A`."""
        listed = {one.rating_A for one in self._offers.get("device", ()) if one.type == as_word(kind) and one.rating_A}
        enough = min((amps for amps in listed if rating_A is not None and amps >= rating_A), default=None)
        return self._price("device", type=as_word(kind), rating_A=enough)

    def lug(self, size: Size, stud: str | None) -> float | None:
        """A lug or ring terminal for a conductor and a stud (None: not known; a row for any stud answers)."""
        return self._price("lug", size=size.name, stud=stud)

    def terminal(self, size: Size) -> float | None:
        """A ferrule, receptacle or the like for a conductor that ends at no stud."""
        return self._price("terminal", size=size.name)

    def splice(self, size: Size) -> float | None:
        """A connector between two conductors."""
        return self._price("splice", size=size.name)

    def heat_shrink_per_m(self, size: Size) -> float | None:
        """A metre of heat-shrink tubing that goes over a lug of that size."""
        return self._price("heat-shrink", size=size.name)

    def label(self) -> float | None:
        """A wire label."""
        return self._price("label")

    def _cable(self, size: Size, material: str, strand: str) -> list[Offer]:
        return self._best("cable", size=size.name, material=material, strand=strand)

    def _price(self, item: str, **wanted: object) -> float | None:
        found = self._best(item, **wanted)
        return found[0].price if found else None

    def _best(self, item: str, **wanted: object) -> list[Offer]:
        """The rows that describe the thing most closely: one, or of a cable one for each length."""
        key = (item, *wanted.values())
        if key not in self._found:
            fits = [(fit, one) for one in self._offers.get(item, ()) if (fit := one.fit(wanted)) is not None]
            closest = max((fit for fit, _ in fits), default=0)
            self._found[key] = [one for fit, one in fits if fit == closest]
        return self._found[key]


def as_word(text: str) -> str:
    """A type as it is compared: capitals and spaces make no other."""
    return " ".join(text.lower().split())
