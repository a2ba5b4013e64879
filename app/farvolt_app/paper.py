"""Pages of paper: sizes, a typeface that every machine has, feet with page numbers, and text that stays text."""

import unicodedata
from collections.abc import Callable, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import date
from functools import lru_cache
from pathlib import Path
from typing import TYPE_CHECKING, Literal

from fpdf import FPDF

if TYPE_CHECKING:
    from collections.abc import Iterator

FONTS = Path(__file__).parent / "fonts"
FACE = "DejaVu Sans Condensed"

Orientation = Literal["portrait", "landscape"]


@dataclass(frozen=True, slots=True)
class Paper:
    """A size of paper, upright."""

    name: str
    width_mm: float
    height_mm: float


PAPERS = {"a4": Paper("a4", 210.0, 297.0), "letter": Paper("letter", 215.9, 279.4)}
"""ISO 216, and ANSI/ASME Y14.1 size A."""

MARGIN_MM, FOOT_MM = 14.0, 16.0
LONGEST_WORD = 400
"""Letters of one text that are set in a line or a cell; what is longer ends with an ellipsis."""

NO_GLYPH = "□"
"""Stands for a letter that the typeface lacks: it has Latin, Greek, Cyrillic, Armenian, Hebrew and Arabic."""

_FILES = ("DejaVuSansCondensed.ttf", "DejaVuSansCondensed-Bold.ttf")
_PAGES = "\ue000" * 4
"""Stands for the number of pages until they are all there: of private use, so `clean` never leaves one in a text."""

_POINT_MM = 25.4 / 72
_LEADING = 1.28


def clean(text: str) -> str:
    """`text` on one line as paper can show it: nothing invisible, no character that turns its neighbours about."""
    kept = (
        " " if one.isspace() else "" if unicodedata.category(one) == "Cf" else one
        for one in text
    )  # fmt: skip
    return " ".join("".join(one if not one or ord(one) in _letters() else NO_GLYPH for one in kept).split())


@lru_cache(maxsize=1)
def _letters() -> frozenset[int]:
    """Characters that the typeface has in both weights."""
    from fontTools.ttLib import TTFont

    return frozenset.intersection(*(frozenset(TTFont(FONTS / name, lazy=True).getBestCmap()) for name in _FILES))


def foot(plan: str, day: date) -> str:
    """What stands at the foot of every page: the plan's name and the day."""
    return f"{plan} · {day.isoformat()}"


class Document(FPDF):
    """A document on one paper: text wrapped to a width, headings with bookmarks, a foot on every page."""

    def __init__(self, paper: Paper, foot: str = "") -> None:
        super().__init__(format=(paper.width_mm, paper.height_mm))
        self.paper, self.foot = paper, clean(foot)
        self.lacking = False
        """Whether some letter so far is one that the typeface does not have."""
        for style, name in zip(("", "B"), _FILES, strict=True):
            self.add_font(FACE, style, FONTS / name)
        self.alias_nb_pages(_PAGES)
        self.set_creator("Farvolt")
        self.set_lang("en")
        self.set_auto_page_break(False)
        self.set_margin(MARGIN_MM)
        self.c_margin = 0.0
        self.set_font(FACE, "", 10)
        self._widths = lru_cache(maxsize=8192)(self._letter_mm)

    # Pages -----------------------------------------------------------------------------------------------------------

    def open_page(self, orientation: Orientation = "portrait") -> None:
        """A new page."""
        self.add_page(orientation=orientation)

    @property
    def room_mm(self) -> float:
        """What is left of the page above its foot."""
        return self.h - FOOT_MM - self.get_y()

    @property
    def across_mm(self) -> float:
        """Between the margins."""
        return self.w - 2 * MARGIN_MM

    def need(self, height_mm: float) -> None:
        """A new page, as the last one lay, where the rest of this one is too short."""
        if self.room_mm < height_mm:
            self.add_page(same=True)

    def footer(self) -> None:
        """Plan and date at the left, the page's number at the right; called for each page by the library."""
        if not self.foot:
            return
        y = self.h - FOOT_MM + 5
        self.set_draw_color(90)
        self.set_line_width(0.2)
        self.line(MARGIN_MM, y - 1.5, self.w - MARGIN_MM, y - 1.5)
        fitted = self.fitted(self.foot, self.across_mm - 30, 8)
        self.put(fitted, MARGIN_MM, y, 8)
        # Never shaped: the library puts the number of pages in afterwards.
        self.set_font(FACE, "", 8)
        self.set_xy(self.w - MARGIN_MM - 30, y)
        self.cell(30, 4, f"page {self.page_no()} of {_PAGES}", align="R")

    # Text ------------------------------------------------------------------------------------------------------------

    def put(
        self, text: str, x: float, y: float, size: float, *, bold: bool = False, width: float = 0.0, align: str = "L"
    ) -> None:
        """One line of text with its top left corner at (x, y), or set within a width."""
        self.set_font(FACE, "B" if bold else "", size)
        self.set_xy(x, y)
        height = line_mm(size)
        with self._shaped(text):
            self.cell(width or None, height, text, align=align)

    @contextmanager
    def _shaped(self, text: str) -> "Iterator[None]":
        """Letters that join or run from right to left need shaping; for all others it only takes time."""
        if text.isascii() or max(text, default="") < "\u0590":
            yield
            return
        self.set_text_shaping(use_shaping_engine=True)
        try:
            yield
        finally:
            self.set_text_shaping(use_shaping_engine=False)

    def width_mm(self, text: str, size: float, *, bold: bool = False) -> float:
        """Width of a text on one line."""
        return sum(self._widths(one, bold) for one in text) * size

    def _letter_mm(self, letter: str, bold: bool) -> float:
        """Width of a letter at a size of one point."""
        font = self.fonts[f"{FACE.lower()}{'B' if bold else ''}"]
        return float(font.get_text_width(letter, 1, None)[1]) * _POINT_MM

    def fitted(self, text: str, width_mm: float, size: float, *, bold: bool = False) -> str:
        """`text` on one line, cut with an ellipsis where it is too wide."""
        text = self._cleaned(text)
        if self.width_mm(text, size, bold=bold) <= width_mm:
            return text
        return _cut(text, width_mm - self.width_mm("…", size, bold=bold),
                    lambda one: self._widths(one, bold) * size).rstrip() + "…"  # fmt: skip

    def lines(self, text: str, width_mm: float, size: float, *, bold: bool = False) -> list[str]:
        """`text` wrapped to a width, broken between words, and within a word that is wider than all of it."""
        whole = self._cleaned(text)
        words = (whole if len(whole) <= 10 * LONGEST_WORD else whole[: 10 * LONGEST_WORD] + "…").split(" ")
        found, line, used = [], "", 0.0
        space = self._widths(" ", bold) * size
        for word in words:
            wide = self.width_mm(word, size, bold=bold)
            if line and used + space + wide <= width_mm:
                line, used = f"{line} {word}", used + space + wide
                continue
            if line:
                found.append(line)
            while wide > width_mm and len(word) > 1:
                part = _at_a_joint(_cut(word, width_mm, lambda one: self._widths(one, bold) * size) or word[0])
                found.append(part)
                word = word[len(part) :]
                wide = self.width_mm(word, size, bold=bold)
            line, used = word, wide
        return [*found, line] if line or not found else found

    def _cleaned(self, text: str) -> str:
        shown = clean(text)
        self.lacking = self.lacking or NO_GLYPH in shown
        return shown

    def paragraph(
        self, text: str, size: float = 10, *, bold: bool = False, indent_mm: float = 0.0, after_mm: float = 1.5
    ) -> None:
        """A text across the page, going on over the next one where it must."""
        for line in self.lines(text, self.across_mm - indent_mm, size, bold=bold):
            self.need(line_mm(size))
            y = self.get_y()
            self.put(line, MARGIN_MM + indent_mm, y, size, bold=bold)
            self.set_y(y + line_mm(size))
        self.set_y(self.get_y() + after_mm)

    def points(self, texts: Sequence[str], size: float = 9) -> None:
        """A list, each entry with a dot before it."""
        for text in texts:
            self.need(line_mm(size))
            self.put("•", MARGIN_MM, self.get_y(), size)
            self.paragraph(text, size, indent_mm=4, after_mm=0.8)

    def heading(self, text: str, level: int = 0, *, keep_mm: float = 30.0) -> None:
        """A heading with its bookmark; `keep_mm` of what follows stay with it."""
        size = (15, 11.5)[level]
        self.need(line_mm(size) + keep_mm)
        if self.get_y() > MARGIN_MM + 1:
            self.set_y(self.get_y() + (5, 3)[level])
        self.start_section(clean(text), level)
        self.paragraph(text, size, bold=True, after_mm=(2.5, 1.5)[level])


def line_mm(size: float) -> float:
    """Height of a line of text of so many points."""
    return size * _POINT_MM * _LEADING


def _at_a_joint(part: str) -> str:
    """The start of a word up to its last joint, where that is not too near its beginning."""
    joint = max(part.rfind(one) for one in ".-/_,;:") + 1
    return part[:joint] if joint > len(part) / 3 else part


def _cut(text: str, width_mm: float, wide: Callable[[str], float]) -> str:
    """As much of the start of `text` as fits into a width."""
    used = 0.0
    for place, one in enumerate(text):
        used += wide(one)
        if used > width_mm:
            return text[:place]
    return text
