"""The shopping list of a plan: cable in reels with what is cut from each, and everything on and between its ends.

Loads are left out: they are what the plan is for. What a price list lacks has no price, and the total says how many
such lines there are. Quantities follow from the plan; what is common practice says so in the line's note.
"""

import math
from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from farvolt import interim
from farvolt.cable_kinds import BoughtConductor, CableKind, bought
from farvolt.fittings import NOT_STATED, fittings, in_block, mounting, tube
from farvolt.plan import Battery, Charger, Converter, Plan, Solar, Source
from farvolt.prices import PriceList, Reel
from farvolt.reels import Cutting, Piece, cut
from farvolt.results import Study
from farvolt.rulebook import Rulebook
from farvolt.units import Quantity, number

SPARE = 0.1
"""What is added to every length unless stated otherwise, as a share (common practice)."""

NO_PRICE = "no price"


@dataclass(frozen=True, slots=True)
class Wanted:
    """How to buy: the share added to every length, a price list, and reels on offer where that has none of a cable."""

    spare: float = SPARE
    prices: PriceList | None = None
    reels_m: tuple[float, ...] = ()


@dataclass(frozen=True, slots=True)
class CablePiece:
    """A conductor as a length to be cut."""

    conductor: BoughtConductor
    cut_m: float


@dataclass(frozen=True, slots=True)
class CableBought:
    """One kind of cable: the metres needed, and what they are cut from; pieces are named by their place in `pieces`."""

    kind: CableKind
    needed_m: float
    pieces: tuple[CablePiece, ...]
    cutting: Cutting
    per_m: float | None
    """Price of a metre cut to length, where it is sold so."""

    def of(self, piece: Piece) -> CablePiece:
        """The conductor of a piece of the cutting."""
        return self.pieces[int(piece.name)]


@dataclass(frozen=True, slots=True)
class Line:
    """One line of the list."""

    item: str
    size: str
    """Size of a conductor, or rating."""
    kind: str
    """Material, type or stud."""
    colour: str
    quantity: float
    unit: str
    unit_price: float | None
    note: str = ""

    @property
    def price(self) -> float | None:
        """Of the whole quantity."""
        return None if self.unit_price is None else self.quantity * self.unit_price


@dataclass(frozen=True, slots=True)
class Bill:
    """Everything to buy for a plan."""

    wanted: Wanted
    cables: tuple[CableBought, ...]
    lines: tuple[Line, ...]

    @property
    def total(self) -> float:
        """Price of all lines that have one."""
        return math.fsum(line.price for line in self.lines if line.price is not None)

    @property
    def without_price(self) -> int:
        """How many lines have no price."""
        return sum(line.price is None for line in self.lines)


def of_study(study: Study, wanted: Wanted | None = None) -> Bill:
    """The list of a study's plan, with the interim sizes of runs that state none."""
    return bill(interim.with_sizes(study.plan, study.interim), study.rulebook, wanted)


def bill(plan: Plan, rulebook: Rulebook, wanted: Wanted | None = None, *, thorough: bool = True) -> Bill:
    """The shopping list of a plan; `thorough` False spares long searches for cheaper reels."""
    how = wanted or Wanted()
    conductors = bought(plan, rulebook)
    cables = tuple(_cable(kind, found, how, thorough) for kind, found in _by_kind(conductors))
    prices = how.prices
    lines = (
        *(line for cable in cables for line in _cable_lines(cable)), *_fitting_lines(plan, conductors, prices),
        *_protection_lines(plan, prices), *_device_lines(plan, prices), *_point_lines(plan, conductors, prices),
        *_source_lines(plan, prices), *_label_lines(conductors, prices),
    )  # fmt: skip
    return Bill(how, cables, lines)


def _by_kind(conductors: Sequence[BoughtConductor]) -> list[tuple[CableKind, list[BoughtConductor]]]:
    kinds: dict[tuple[float, str, str, str, float, str], tuple[CableKind, list[BoughtConductor]]] = {}
    for one in conductors:
        kinds.setdefault(one.kind.key, (one.kind, []))[1].append(one)
    return [kinds[key] for key in sorted(kinds)]


def _cable(kind: CableKind, conductors: Sequence[BoughtConductor], how: Wanted, thorough: bool) -> CableBought:
    pieces = [Piece(one.length_m * (1 + how.spare), str(place)) for place, one in enumerate(conductors)]
    reels, per_m = offered(kind, how)
    found = tuple(CablePiece(one, piece.cut_cm / 100) for one, piece in zip(conductors, pieces, strict=True))
    needed_m = math.fsum(one.length_m for one in conductors)
    return CableBought(kind, needed_m, found, cut(pieces, reels, per_m, thorough=thorough), per_m)


def offered(kind: CableKind, how: Wanted) -> tuple[tuple[Reel, ...], float | None]:
    """Reels on offer for a kind of cable, and its price by the metre."""
    if how.prices is not None and kind.size is not None:
        asked = kind.size, kind.material, kind.strand
        reels, per_m = how.prices.reels(*asked), how.prices.cable_by_the_metre(*asked)
        if reels or per_m is not None:
            return reels, per_m
    return tuple(Reel(length_m, None) for length_m in how.reels_m), None


def _cable_lines(cable: CableBought) -> Iterator[Line]:
    kind = cable.kind
    what = (
        kind.size_name or "size not stated",
        f"{kind.material}, {kind.strand}, {kind.insulation_degC:g} degC",
        kind.colour,
    )
    gap = cable.cutting.gap
    note = f"may be up to {number(100 * gap, 2)} % above the cheapest" if gap > 1e-9 else ""
    reels = Counter((reel.length_m, reel.price) for reel in cable.cutting.reels if not reel.by_the_metre)
    for (length_m, price), count in sorted(reels.items(), key=lambda one: -one[0][0]):
        yield Line(f"cable, reel of {number(length_m, 4)} m", *what, count, "reels", price, note)
    for reel in cable.cutting.reels:
        if reel.by_the_metre:
            yield Line("cable by the metre", *what, reel.length_m, "m", cable.per_m, note)
    for piece in cable.cutting.too_long:
        name = cable.of(piece).conductor.label
        yield Line(
            "cable in one length", *what, piece.cut_cm / 100, "m", None, f"{name}: longer than any reel on offer"
        )


def _fitting_lines(plan: Plan, conductors: list[BoughtConductor], prices: PriceList | None) -> Iterator[Line]:
    order = ("lug", "terminal", "splice")
    counted = Counter(fittings(plan, conductors))
    found = sorted(counted, key=lambda one: (order.index(one.item), one.size.area_mm2, one.size.name, one.stud or ""))
    words = {"lug": "", "terminal": "ferrule or terminal", "splice": "splice connector"}
    for one in found:
        price = None
        if prices is not None:
            price = (prices.lug(one.size, one.stud) if one.item == "lug" else
                     prices.terminal(one.size) if one.item == "terminal" else prices.splice(one.size))  # fmt: skip
        kind = (f"stud {one.stud}" if one.stud else NOT_STATED) if one.item == "lug" else ""
        yield Line(words[one.item] or "lug", one.size.name, kind, "", counted[one], "pieces", price)
    for size in dict.fromkeys(one.size for one in found if one.item == "lug"):
        lugs = sum(counted[one] for one in found if one.item == "lug" and one.size == size)
        over = tube(size)
        price = prices.heat_shrink_per_m(size) if prices is not None else None
        note = f"{over.length_mm:g} mm over each of {lugs} lugs (common practice)"
        length_m = lugs * over.length_mm / 1000
        yield Line("heat-shrink", size.name, f"{over.width_mm:g} mm wide before", "", length_m, "m", price, note)


def _protection_lines(plan: Plan, prices: PriceList | None) -> Iterator[Line]:
    """Fuses and breakers, a spare of each fuse, and holders for what no fuse block holds."""
    guards = [(run, one) for run in plan.runs for one in run.protections]
    counted = Counter((one.kind.kind, one.kind.name, one.rating.si) for _, one in guards)
    held = Counter(
        (mounting(one).holder, one.kind.name, one.rating.si)
        for run, one in guards
        if mounting(one).holder and not in_block(plan, run, one)
    )
    for (kind, name, amps), count in sorted(counted.items()):
        price = prices.protection(name, amps) if prices is not None else None
        yield Line(kind, f"{amps:g} A", name, "", count, "pieces", price)
    for (kind, name, amps), _ in sorted(counted.items()):
        if kind == "fuse":
            price = prices.protection(name, amps) if prices is not None else None
            yield Line(
                "spare fuse",
                f"{amps:g} A",
                name,
                "",
                1,
                "pieces",
                price,
                "one of each type, common practice",
            )
    for (holder, name, amps), count in sorted(held.items()):
        price = prices.holder(name, amps) if prices is not None else None
        yield Line(holder, f"{amps:g} A", name, "", count, "pieces", price)


def _device_lines(plan: Plan, prices: PriceList | None) -> Iterator[Line]:
    for one in plan.devices:
        amps = one.continuous.si if one.continuous else None
        price = prices.device(one.kind, amps) if prices is not None else None
        poles = " both poles" if one.pole == "both" else ""
        yield Line(one.kind, _rated(one.continuous, one.volts), one.kind + poles, "", 1, "pieces", price, one.name)


def _point_lines(plan: Plan, conductors: Sequence[BoughtConductor], prices: PriceList | None) -> Iterator[Line]:
    """Busbars and studs, one for each pole that has conductors there, and fuse blocks."""
    poles = {(end, one.pole) for one in conductors for end in (one.start, one.end)}
    for one in plan.points:
        if one.kind not in ("busbar", "stud", "fuse block"):
            continue
        count = 1 if one.kind == "fuse block" else max(1, sum((one.name, pole) in poles for pole in ("feed", "return")))
        price = prices.device(one.kind, one.rating.si if one.rating else None) if prices is not None else None
        stud = f"stud {one.stud}" if one.stud else ""
        yield Line(one.kind, _rated(one.rating), stud, "", count, "pieces", price, one.name)


def _source_lines(plan: Plan, prices: PriceList | None) -> Iterator[Line]:
    for source in plan.sources:
        for item, count, rated, amps in _apparatus(source):
            price = prices.device(item, amps) if prices is not None else None
            yield Line(item, rated, "", "", count, "pieces", price, source.name)


def _apparatus(source: Source) -> Iterator[tuple[str, int, str, float | None]]:
    """What a source is bought as: item, number, rating, and the amperes a price list would go by."""
    if isinstance(source, Battery):
        yield "battery string", source.strings, _rated(source.capacity, source.nominal), None
    elif isinstance(source, Charger | Converter):
        yield source.kind, 1, _rated(source.amps, source.volts), source.amps.si
    elif isinstance(source, Solar):
        yield "solar controller", 1, _rated(source.amps, source.ceiling), source.amps.si if source.amps else None
        if source.array is not None:
            yield "solar module", source.array.modules, _rated(source.array.imp, source.array.vmp), None


def _rated(*values: Quantity | None) -> str:
    return ", ".join(str(one) for one in values if one is not None)


def _label_lines(conductors: Sequence[BoughtConductor], prices: PriceList | None) -> Iterator[Line]:
    if conductors:
        price = prices.label() if prices is not None else None
        yield Line("wire label", "", "", "", 2 * len(conductors), "pieces", price, "one at each end of every conductor")
