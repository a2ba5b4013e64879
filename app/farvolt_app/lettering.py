"""Text of a drawing: how wide it is, cut to a width, and as an SVG element. Text from a plan stays text."""

import re
import unicodedata
from dataclasses import dataclass
from functools import lru_cache
from xml.sax.saxutils import escape, quoteattr

_NOT_XML = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")
_FAMILIAR = re.compile("[\x20-\u052f\u0590-\u06ff\u2010-\u2027\u2190-\u2193\u2212]*")
"""Letters and signs whose widths are known well enough: Latin, Greek, Cyrillic, Hebrew, Arabic."""

_EM_WIDTHS = (
    ("iljI.,:;'|!", 0.36),
    ('ftr()[]{}-/\\ "·', 0.42),
    ("mwMW@%→←…шщжмШЩЖМЮюФ\u0633\u0634\u0635\u0636", 1.05),
    ("0123456789", 0.64),
)
_BOLD = 1.12


@dataclass(frozen=True, slots=True)
class Words:
    """A text as it fits in a drawing: what is shown, and its width at its size; `whole` is what was asked for."""

    shown: str
    whole: str
    width: float
    size: float
    bold: bool = False


def words(text: str, size: float, *, limit: float | None = None, bold: bool = False) -> Words:
    """`text` at a font size, cut with an ellipsis where it is wider than `limit`."""
    whole = clean(text)
    width = _width(whole, size, bold)
    if limit is None or width <= limit:
        return Words(whole, whole, width, size, bold)
    room = limit - _width("…", size, bold)
    end, used = 0, 0.0
    while end < len(whole) and used + _width(whole[end], size, bold) <= room:
        used += _width(whole[end], size, bold)
        end += 1
    shown = whole[:end].rstrip() + "…"
    return Words(shown, whole, _width(shown, size, bold), size, bold)


def clean(text: str) -> str:
    """`text` without the characters that an XML document cannot hold."""
    return _NOT_XML.sub("\N{REPLACEMENT CHARACTER}", text)


def escaped(text: str) -> str:
    """`text` as the content of an element."""
    return escape(clean(text))


def attribute(text: str) -> str:
    """`text` as an attribute's value, in its quotes."""
    return quoteattr(clean(text))


def isolated(text: str) -> str:
    """`text` for use inside a sentence: the direction it is written in does not turn what is around it."""
    return f"\N{FIRST STRONG ISOLATE}{text}\N{POP DIRECTIONAL ISOLATE}" if _turns(text) else text


def element(piece: Words, x: float, y: float, fill: str, anchor: str = "start") -> str:
    """A text element; one in letters of unknown width is fitted to the width it was given."""
    given = [f'x="{x:.1f}" y="{y:.1f}" font-size="{piece.size:g}" fill="{fill}"']
    if anchor != "start":
        given.append(f'text-anchor="{anchor}"')
    if piece.bold:
        given.append('font-weight="bold"')
    if not _FAMILIAR.fullmatch(piece.shown):
        given.append(f'textLength="{piece.width:.1f}" lengthAdjust="spacingAndGlyphs"')
    content = escaped(piece.shown)
    if _turns(piece.shown):
        content = f'<tspan unicode-bidi="isolate">{content}</tspan>'
    hint = f"<title>{escaped(piece.whole)}</title>" if piece.shown != piece.whole else ""
    return f"<text {' '.join(given)}>{hint}{content}</text>"


def _turns(text: str) -> bool:
    return any(unicodedata.bidirectional(one) in _TURNING for one in text if one > "\u0590")


_TURNING = frozenset(("R", "AL", "AN", "RLE", "RLO", "LRE", "LRO", "PDF", "RLI", "LRI", "FSI", "PDI"))


def _width(text: str, size: float, bold: bool) -> float:
    return sum(map(_em, text)) * size * (_BOLD if bold else 1.0)


@lru_cache(maxsize=4096)
def _em(letter: str) -> float:
    """Width of a letter in ems, at the upper end of what common sans-serif faces have."""
    for letters, width in _EM_WIDTHS:
        if letter in letters:
            return width
    if unicodedata.category(letter) in ("Mn", "Me", "Cf"):
        return 0.0
    if unicodedata.east_asian_width(letter) in ("W", "F"):
        return 1.1
    return 0.77 if letter.isupper() or letter in "&+=<>−~#_" else 0.63
