"""The shopping list and the cut list as tables on a terminal."""

from collections.abc import Sequence

from rich.text import Text

from farvolt.results import Study
from farvolt.shopping import NO_PRICE, Bill, Line
from farvolt.units import number
from farvolt.upsizing import Hint
from farvolt_app import shopping_rows
from farvolt_app.report_text import open_console, table
from farvolt_app.shown import CAUTION

LIST = (
    ("item", False), ("size or rating", False), ("material or type", False), ("colour", False), ("quantity", True),
    ("unit", False), ("unit price", True), ("price", True), ("note", False),
)  # fmt: skip
CUTS = (
    ("reel", True), ("cut from", False), ("size", False), ("colour", False), ("label", False), ("run", False),
    ("pole", False), ("cut to m", True), ("left m", True),
)  # fmt: skip


def show(study: Study, bill: Bill, hints: Sequence[Hint]) -> None:
    """Print what to buy, the total, where a thicker size would cost less, and the cuts."""
    out = open_console()
    out.print(Text(study.plan.plan.name, style="bold"))
    table(out, "Shopping list", LIST, [_line(line, bill) for line in bill.lines])
    out.print(Text(shopping_rows.total_text(bill), style="bold"))
    if study.interim:
        out.print(Text(shopping_rows.to_choose(study)))
    if bill.wanted.prices is not None:
        for hint in hints:
            out.print(Text(f"- {shopping_rows.hint_text(hint, bill.wanted.prices.currency)}"))
    table(
        out,
        f"\nCut list, with a spare of {bill.wanted.spare:.0%}",
        CUTS,
        [_cut(cut) for cut in shopping_rows.cuts(bill)],
    )
    out.print(Text(f"{shopping_rows.MEASURE} {CAUTION}"))


def _line(line: Line, bill: Bill) -> tuple[str, ...]:
    missing = NO_PRICE if bill.wanted.prices is not None else ""
    return (
        line.item, line.size, line.kind, line.colour, number(line.quantity, 4), line.unit,
        _money(line.unit_price, missing), _money(line.price, ""), line.note,
    )  # fmt: skip


def _money(value: float | None, missing: str) -> str:
    return missing if value is None else f"{value:.2f}"


def _cut(cut: shopping_rows.Cut) -> tuple[str, ...]:
    piece = cut.piece.conductor
    return (
        str(cut.reel), cut.source, cut.kind.size_name, cut.kind.colour, piece.label, piece.name, piece.pole,
        f"{cut.piece.cut_m:.2f}", f"{cut.left_m:.2f}",
    )  # fmt: skip
