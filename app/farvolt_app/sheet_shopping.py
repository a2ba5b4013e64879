"""The sheets "Shopping" and "Cut list": what to buy, with prices if a list is given, and what to cut from each reel.

Metres of cable and the number of fuses follow what is changed on the sheets Cables and Protection. Reels and cuts do
not: they are worked out for the plan as it is.
"""

from collections.abc import Mapping, Sequence
from typing import Any

from openpyxl.worksheet.worksheet import Worksheet

from farvolt.shopping import NO_PRICE, Bill, CableBought, Line
from farvolt_app import sheet_cables, shopping_rows
from farvolt_app.schedule import Cable, ProtectionLine
from farvolt_app.sheet_cables import FOOT_M, live, pretty, size_key
from farvolt_app.sheets import FIRST, Column, Formula, Header, fill, letters, setting

NEEDED, TO_BUY = "Needed (m or number)", "To buy (m or number)"
UNIT_PRICE, PRICE = "Unit price", "Price"

_SPARE = "$K$2"
_UNIT_AT, _PRICE_AT = 8, 12
"""Places of the unit and of the price in a row."""


def _columns(currency: str) -> tuple[Column, ...]:
    return (
        Column("Item", 27), Column("Size or rating", 15), Column("Material or type", 27), Column("Strand", 10),
        Column("Insulation (°C)", 10, "0"), Column("Colour", 11), Column(NEEDED, 10, "0.00"),
        Column(TO_BUY, 10, "0.00"), Column("Unit", 8), Column("To buy (ft)", 9, "0.0"),
        Column("Metal (kg)", 9, "0.000"), Column(f"{UNIT_PRICE}{currency}", 10, "0.00", input=True),
        Column(f"{PRICE}{currency}", 10, "0.00"), Column("Note", 34),
    )  # fmt: skip


_S = letters(_columns(""))


def write_list(
    sheet: Worksheet, plan: str, bill: Bill, found: Sequence[Cable], guards: Sequence[ProtectionLine],
    protection: Mapping[str, str],
) -> None:  # fmt: skip
    """Fill the sheet "Shopping"; `protection` are the columns of the sheet Protection."""
    prices = bill.wanted.prices
    # Where neither prices nor reels are known, the metres of each kind are all there is to say of its cable.
    metres = prices is None and not bill.wanted.reels_m
    bought = [line for line in bill.lines if not (metres and line.item.startswith("cable"))]
    rows = [_cable_row(one, FIRST + place, len(found), metres) for place, one in enumerate(bill.cables)]
    for line in bought:
        rows.append(_line_row(line, FIRST + len(rows), len(guards), protection, NO_PRICE if prices else ""))
    about = "Metres and fuses follow the sheets Cables and Protection; reels and cuts do not."
    note = prices.about if prices is not None else "No price list: unit prices of your own may be written in."
    currency = f" ({prices.currency})" if prices is not None else " (own currency)"
    fill(sheet, Header(plan, "shopping", about, note), _columns(currency), rows)
    for place, row in enumerate(rows, start=FIRST):
        if row[_UNIT_AT] != "m":
            sheet[f"{_S[NEEDED]}{place}"].number_format = sheet[f"{_S[TO_BUY]}{place}"].number_format = "0"
    _settings(sheet, bill, rows, len(found))


def _settings(sheet: Worksheet, bill: Bill, rows: Sequence[Sequence[Any]], cables: int) -> None:
    """Spare, what no row counts, the total and how many lines lack a price: above the table."""
    last = FIRST + max(len(rows), 1) - 1

    def cells(heading: str) -> str:
        return f"${_S[heading]}${FIRST}:${_S[heading]}${last}"

    setting(sheet, "J2", "Spare on cable:", "K2", bill.wanted.spare, "0 %")
    links_m = sum(_links_m(one) for one in bill.cables)
    every_m = f"SUM({sheet_cables.column('All conductors (m)', cables)})+{links_m:.9g}"
    counted = f'SUMIFS({cells(NEEDED)},{cells("Item")},"cable")'
    setting(sheet, "J3", "Cable in no row below, after a change of colour (m):", "K3",
            Formula(f"=ROUND({every_m}-{counted},6)"), "0.00")  # fmt: skip
    setting(sheet, "L2", "Total:", "M2", Formula(f"=SUM({cells(PRICE)})"), "0.00")
    to_price = sum(row[_PRICE_AT] is not None for row in rows)
    setting(sheet, "L3", "No price:", "M3", Formula(f"={to_price}-COUNT({cells(PRICE)})"), "0")


def _links_m(one: CableBought) -> float:
    """Metres of the links between a battery's strings, which the sheet Cables does not have."""
    return sum(piece.conductor.length_m for piece in one.pieces if piece.conductor.run is None)


def _cable_row(one: CableBought, row: int, cables: int, to_price: bool) -> list[Any]:
    """Metres of one kind of cable: the feed conductors of that size and colour, and the return conductors."""
    kind = one.kind

    def cells(heading: str) -> str:
        return sheet_cables.column(heading, cables)

    # SUMPRODUCT compares text as it is; SUMIFS would read * and > in a colour as its own signs.
    kinds = "*".join(
        f"({cells(there)}=[{here}])"
        for there, here in (
            ("Material", "Material or type"), ("Strand", "Strand"), ("Insulation (°C)", "Insulation (°C)"),
        )
    )  # fmt: skip
    poles = "+".join(
        f"({cells(f'{pole} size')}=[Size or rating])*({cells(f'{pole} colour')}=[Colour])*{cells(f'{pole} length (m)')}"
        for pole in ("Feed", "Return")
    )
    links_m = _links_m(one)
    links = f"+{links_m:.9g}" if links_m else ""
    return [
        "cable", size_key(kind.size_name), kind.material, kind.strand, kind.insulation_degC, kind.colour,
        live(_S, row, f"=SUMPRODUCT({kinds}*{cells('Parallel')}*({poles})){links}"),
        live(_S, row, f"=[{NEEDED}]*(1+{_SPARE})"), "m", live(_S, row, f"=[{TO_BUY}]/{FOOT_M}"),
        live(_S, row, f"=[{TO_BUY}]*{kind.kg_per_m:.9g}") if kind.kg_per_m is not None else None,
        None, _price(row, "") if to_price else None, "" if to_price else "bought as listed below",
    ]  # fmt: skip


def _price(row: int, missing: str) -> Formula:
    return live(_S, row, f'=IF([{UNIT_PRICE}]="","{missing}",[{TO_BUY}]*[{UNIT_PRICE}])')


def _line_row(line: Line, row: int, guards: int, protection: Mapping[str, str], missing: str) -> list[Any]:
    """Any other line: fuses and breakers counted on the sheet Protection, the rest as the list has it."""
    needed: Any = None if line.item.startswith("cable") else line.quantity
    if line.item in ("fuse", "breaker"):
        needed = _counted(line, row, guards, protection)
    return [
        line.item, pretty(line.size), pretty(line.kind), "", None, line.colour, needed,
        live(_S, row, f"=[{NEEDED}]") if needed is not None else line.quantity, line.unit,
        live(_S, row, f"=[{TO_BUY}]/{FOOT_M}") if line.unit == "m" else None, None, line.unit_price,
        _price(row, missing), line.note,
    ]  # fmt: skip


def _counted(line: Line, row: int, guards: int, protection: Mapping[str, str]) -> Formula:
    types, ratings = (
        f"Protection!${protection[heading]}${FIRST}:${protection[heading]}${FIRST + guards - 1}"
        for heading in ("Type", "Rating (A)")
    )
    amps = line.size.removesuffix(" A")
    return live(_S, row, f"=SUMPRODUCT(({types}=[Material or type])*({ratings}={amps}))")


CUTS = (
    Column("Cut no.", 6, "0"), Column("Reel no.", 6, "0"), Column("Cut from", 24), Column("Size", 11),
    Column("Material", 10), Column("Strand", 10), Column("Insulation (°C)", 10, "0"), Column("Colour", 10),
    Column("Reel (m)", 9, "0.00"), Column("Label", 12), Column("Run or battery", 24), Column("From", 20),
    Column("To", 20), Column("Pole", 8), Column("Cut to (m)", 9, "0.00"), Column("Cut to (ft)", 9, "0.0"),
    Column("Left on it (m)", 9, "0.00"),
)  # fmt: skip
_C = letters(CUTS)


def write_cuts(sheet: Worksheet, plan: str, bill: Bill) -> None:
    """Fill the sheet "Cut list": each reel with its pieces in order, and what is left of it after each."""
    cuts = shopping_rows.cuts(bill)
    rows = [_cut_row(cut, number, len(cuts)) for number, cut in enumerate(cuts, start=1)]
    about = f"Lengths have the spare of {bill.wanted.spare:.0%} in them. The last cut of a reel says what is left over."
    fill(sheet, Header(plan, "cut list", about, shopping_rows.MEASURE), CUTS, rows)


def _cut_row(cut: shopping_rows.Cut, number: int, count: int) -> list[Any]:
    row, last = FIRST + number - 1, FIRST + count - 1
    kind, conductor = cut.kind, cut.piece.conductor
    reels, numbers, lengths = (
        f"${_C[heading]}${FIRST}:${_C[heading]}${last}" for heading in ("Reel no.", "Cut no.", "Cut to (m)")
    )
    left = f'=ROUND([Reel (m)]-SUMIFS({lengths},{reels},[Reel no.],{numbers},"<="&[Cut no.]),6)'
    return [
        number, cut.reel, cut.source, size_key(kind.size_name), kind.material, kind.strand, kind.insulation_degC,
        kind.colour, cut.reel_m, conductor.label, conductor.name, conductor.start, conductor.end, conductor.pole,
        cut.piece.cut_m, live(_C, row, f"=[Cut to (m)]/{FOOT_M}"), live(_C, row, left),
    ]  # fmt: skip
