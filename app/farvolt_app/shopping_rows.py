"""The shopping list and the cut list as plain rows and as CSV, and hints in sentences.

Full precision; text as in the plan. In a CSV, text that a spreadsheet would take for a formula has an apostrophe before
it. Where a price stands, so does what its list says of itself.
"""

import csv
import io
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from farvolt import price_file, units
from farvolt.cable_kinds import CableKind
from farvolt.errors import FarvoltError, QuantityError
from farvolt.integrity import plain, shorten
from farvolt.prices import PriceList
from farvolt.results import Study
from farvolt.shopping import NO_PRICE, Bill, CablePiece, Line, Wanted
from farvolt.units import feet, number
from farvolt.upsizing import Hint
from farvolt_app.textsafe import csv_text

MOST_SPARE = 1.0

MEASURE = "Measure the way before you cut: a piece is never joined."

LIST_HEADINGS = (
    "Item", "Size or rating", "Material or type", "Colour", "Quantity", "Unit", "Quantity (ft)", "Unit price", "Price",
    "Currency", "Price list", "Note",
)  # fmt: skip
CUT_HEADINGS = (
    "Reel no.", "Cut from", "Reel (m)", "Size", "Material", "Strand", "Insulation (degC)", "Colour", "Label",
    "Run or battery", "From", "To", "Pole", "Cut to (m)", "Cut to (ft)", "Left on it (m)",
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Cut:
    """One cut: the piece, and the reel it comes from."""

    reel: int
    """Reels are numbered through all kinds of cable."""
    source: str
    reel_m: float
    kind: CableKind
    piece: CablePiece
    left_m: float
    """What is then left on the reel."""


def wanted(prices: str | None, spare: str, reels: Sequence[str] = (), *, example: bool = False) -> Wanted:
    """How to buy, from what a person wrote: a path, a share, lengths. Raises FarvoltError."""
    listed = price_file.example() if example else price_file.read(Path(prices)) if prices is not None else None
    lengths = tuple(sorted({_quantity(one, "length", "the length of a reel", 0.1, 10_000) for one in reels}))
    return Wanted(_quantity(spare, "share", "the spare", 0, MOST_SPARE), listed, lengths)


def _quantity(text: str, dimension: str, what: str, least: float, most: float) -> float:
    try:
        value = units.parse(text, dimension).si
    except QuantityError as error:
        near = f"; did you mean {error.nearest}?" if error.nearest else ""
        raise FarvoltError(
            f'{what}: "{plain(shorten(text))}" {error.problem}; accepted: {error.accepted}{near}'
        ) from None
    if not least <= value <= most:
        limits = "0 % to 100 %" if dimension == "share" else f"{least:g} m to {most:g} m"
        raise FarvoltError(f'{what}: "{plain(shorten(text))}" is out of range; accepted: {limits}')
    return value


def cuts(bill: Bill) -> list[Cut]:
    """Every cut, reel by reel, in order."""
    return list(_cuts(bill))


def _cuts(bill: Bill) -> Iterator[Cut]:
    reel_number = 0
    for cable in bill.cables:
        for reel in cable.cutting.reels:
            reel_number += 1
            source = "bought by the metre" if reel.by_the_metre else f"reel of {number(reel.length_m, 4)} m"
            left_m = reel.length_m
            for one in reel.pieces:
                piece = cable.of(one)
                left_m = round(left_m - piece.cut_m, 6)
                yield Cut(reel_number, source, reel.length_m, cable.kind, piece, left_m)
        for one in cable.cutting.too_long:
            reel_number += 1
            piece = cable.of(one)
            yield Cut(reel_number, "bought in one length", piece.cut_m, cable.kind, piece, 0.0)


def list_rows(bill: Bill) -> list[dict[str, Any]]:
    """The shopping list; where prices are given, a line without one says so in its note."""
    return [dict(zip(LIST_HEADINGS, _list_row(line, bill.wanted.prices), strict=True)) for line in bill.lines]


def _list_row(line: Line, prices: PriceList | None) -> tuple[Any, ...]:
    priced = prices if line.price is not None else None
    lacking = NO_PRICE if prices is not None and priced is None else ""
    return (
        line.item, line.size, line.kind, line.colour, line.quantity, line.unit,
        feet(line.quantity) if line.unit == "m" else None, line.unit_price, line.price,
        priced.currency if priced else "", priced.about if priced else "",
        "; ".join(filter(None, (lacking, line.note))),
    )  # fmt: skip


def cut_rows(bill: Bill) -> list[dict[str, Any]]:
    """The cut list: one row for each cut."""
    return [
        dict(zip(CUT_HEADINGS, (
            cut.reel, cut.source, cut.reel_m, cut.kind.size_name, cut.kind.material, cut.kind.strand,
            cut.kind.insulation_degC, cut.kind.colour, cut.piece.conductor.label, cut.piece.conductor.name,
            cut.piece.conductor.start, cut.piece.conductor.end, cut.piece.conductor.pole, cut.piece.cut_m,
            feet(cut.piece.cut_m), cut.left_m,
        ), strict=True))
        for cut in cuts(bill)
    ]  # fmt: skip


def list_csv(bill: Bill) -> str:
    """The shopping list as CSV."""
    return _csv(LIST_HEADINGS, list_rows(bill))


def cuts_csv(bill: Bill) -> str:
    """The cut list as CSV."""
    return _csv(CUT_HEADINGS, cut_rows(bill))


def _csv(headings: Sequence[str], rows: Sequence[dict[str, Any]]) -> str:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(headings)
    for row in rows:
        writer.writerow([csv_text(value) if isinstance(value, str) else value for value in row.values()])
    return out.getvalue()


def total_text(bill: Bill) -> str:
    """The total, what is not in it, and what the price list says of itself."""
    prices = bill.wanted.prices
    if prices is None:
        return "No price list is given, so there are no prices."
    lacking = f"; {bill.without_price} lines have no price" if bill.without_price else ""
    return f"Total {bill.total:.2f} {prices.currency}{lacking}. {prices.about}"


def to_choose(study: Study) -> str:
    """Which runs are on the list in a size that is not chosen yet, or nothing."""
    names = ", ".join(f'"{name}"' for name in study.interim)
    return f"Still to be chosen, and listed in the size taken meanwhile: {names}." if names else ""


def hint_text(hint: Hint, currency: str) -> str:
    """A hint in a sentence."""
    names = ", ".join(f'"{name}"' for name in hint.runs)
    which = f"run {names}" if len(hint.runs) == 1 else f"runs {names}"
    return (
        f"{hint.size.name} in place of {hint.present.name} for {which} saves {hint.saves:.2f} {currency}. "
        "Change it in the plan and check again."
    )
