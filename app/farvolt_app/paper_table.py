"""Tables on paper: cells wrapped, heads repeated on every page, rows never cut in two."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Literal

from farvolt_app.paper import MARGIN_MM, Document, line_mm

MOST_LINES = 6
"""Lines of one cell; what is longer ends with an ellipsis, so that one name cannot fill a page."""

_PAD_MM = 1.1


@dataclass(frozen=True, slots=True)
class Column:
    """A column: its heading, its share of the width, and where its text stands."""

    heading: str
    share: float
    align: Literal["L", "R"] = "L"


def table(
    page: Document, columns: Sequence[Column], rows: Iterable[Sequence[str]], *, size: float = 8, empty: str = "None."
) -> None:
    """A table across the page. A cell that begins with "!" marks its row: bold, so that it shows without colour."""
    whole = sum(one.share for one in columns)
    widths = [one.share / whole * page.across_mm for one in columns]
    head = _wrapped(page, [one.heading for one in columns], widths, size, bold=True)
    first = True
    for row in rows:
        marked = any(cell.startswith("!") for cell in row)
        cells = _wrapped(page, row, widths, size, bold=marked)
        height = _height(cells, size)
        if first or page.room_mm < height:
            page.need(height + (_height(head, size) if first else 0.0))
            _head(page, columns, head, widths, size)
            first = False
        _row(page, columns, cells, widths, size, bold=marked)
    if first:
        page.paragraph(empty, size + 1)
    page.set_y(page.get_y() + 2.5)


def _wrapped(
    page: Document, row: Sequence[str], widths: Sequence[float], size: float, *, bold: bool
) -> list[list[str]]:
    cells = []
    for text, width in zip(row, widths, strict=True):
        lines = page.lines(text, width - 2 * _PAD_MM, size, bold=bold)
        if len(lines) > MOST_LINES:
            last = page.fitted(f"{lines[MOST_LINES - 1]} …", width - 2 * _PAD_MM, size, bold=bold)
            lines = [*lines[: MOST_LINES - 1], last]
        cells.append(lines)
    return cells


def _height(cells: Sequence[Sequence[str]], size: float) -> float:
    return max(map(len, cells)) * line_mm(size) + 2 * _PAD_MM


def _head(
    page: Document, columns: Sequence[Column], head: Sequence[Sequence[str]], widths: Sequence[float], size: float
) -> None:
    page.set_fill_color(228)
    page.rect(MARGIN_MM, page.get_y(), page.across_mm, _height(head, size), style="F")
    _row(page, columns, head, widths, size, bold=True, rule_mm=0.35)


def _row(
    page: Document, columns: Sequence[Column], cells: Sequence[Sequence[str]], widths: Sequence[float], size: float,
    *, bold: bool, rule_mm: float = 0.1,
) -> None:  # fmt: skip
    x, y = MARGIN_MM, page.get_y()
    for column, lines, width in zip(columns, cells, widths, strict=True):
        for number, line in enumerate(lines):
            if line:
                page.put(line, x + _PAD_MM, y + _PAD_MM + number * line_mm(size), size, bold=bold,
                         width=width - 2 * _PAD_MM, align=column.align)  # fmt: skip
        x += width
    y += _height(cells, size)
    page.set_draw_color(110)
    page.set_line_width(rule_mm)
    page.line(MARGIN_MM, y, page.w - MARGIN_MM, y)
    page.set_y(y)
