"""The drawing as a file: SVG, PNG, or PDF pages of paper, on one page where it stays legible, else in parts.

The picture is the same everywhere. On paper its smallest letters are at least `LEAST_POINTS` high; a drawing that is
larger than the page at that scale goes over several, after one that shows all of it and where the parts lie.
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

from farvolt.results import CaseResult, Study
from farvolt_app import drawing
from farvolt_app.captions import DETAIL_SIZE
from farvolt_app.graft import MM_POINTS, Graft, graft

if TYPE_CHECKING:
    from farvolt_app.paper import Document, Orientation, Paper

SUFFIXES = (".svg", ".png", ".pdf")
LEAST_POINTS = 5.0
"""Height of the smallest letters of captions on paper."""

MOST_PIXELS = 60_000_000
"""Of a PNG: twice the size of the drawing, less where that would be more."""

_LEAST_SCALE, _MOST_SCALE = LEAST_POINTS / DETAIL_SIZE, 0.75
"""Points of paper to a unit of the drawing."""

_OVERLAP = (120.0, 64.0)
"""What neighbouring parts both show, across and down: what one cuts, the other has whole."""

_EDGE_MM, _HEAD_MM, _FEET_MM = 10.0, 7.0, 14.0


@dataclass(frozen=True, slots=True)
class Part:
    """A part of a drawing: left, top, width and height in its own units."""

    x: float
    y: float
    width: float
    height: float


@dataclass(frozen=True, slots=True)
class Tiling:
    """How a drawing lies on paper: the way the pages lie, points to a unit, and the parts in reading order."""

    orientation: "Orientation"
    scale: float
    parts: tuple[Part, ...]


def worst_case(study: Study) -> CaseResult:
    """The case in which some load has the largest drop; the first where none holds."""
    held = [one for one in study.cases if one.solved]

    def most(case: CaseResult) -> float:
        return max((load.drop_percent or 0.0 for load in case.loads), default=0.0)

    return max(held, key=most) if held else study.cases[0]


def svg(study: Study, case: CaseResult, units: str = "metric") -> str:
    """The drawing of one case on white."""
    return drawing.svg(study.plan, case, study.findings, units=units)


def png(picture: str) -> bytes:
    """An SVG drawing as a picture of twice its size, or as large as `MOST_PIXELS` allow."""
    import vl_convert

    width, height = size(picture)
    return bytes(vl_convert.svg_to_png(_lettered(picture), scale=min(2.0, math.sqrt(MOST_PIXELS / (width * height)))))


def pdf(study: Study, case: CaseResult, paper: "Paper", units: str = "metric", foot: str = "") -> bytes:
    """The drawing of one case as a PDF of pages of paper."""
    from farvolt_app.paper import Document

    document = Document(paper, foot)
    document.set_title(study.plan.plan.name)
    grafts = tuple(pages(document, study, case, units))
    return graft(bytes(document.output()), grafts)


def pages(document: "Document", study: Study, case: CaseResult, units: str) -> Iterator[Graft]:
    """Add the pages of a drawing to a document; what is to be drawn on them comes with `graft`."""
    import vl_convert

    picture = svg(study, case, units)
    data = bytes(vl_convert.svg_to_pdf(_lettered(picture)))
    width, height = size(picture)
    found = tiling(width, height, document.paper)
    if len(found.parts) > 1:
        yield _overview(document, data, (width, height), found, case.name)
    for number, part in enumerate(found.parts, start=1):
        which = f", part {number} of {len(found.parts)}" if len(found.parts) > 1 else ""
        _open(document, f"Drawing{which}: {case.name}", found.orientation, bookmark=number == 1 and not which)
        box = part.width * found.scale / MM_POINTS, part.height * found.scale / MM_POINTS
        yield Graft(document.page - 1, data, _EDGE_MM, _EDGE_MM + _HEAD_MM, *box,
                    (part.x, part.y, part.width, part.height))  # fmt: skip


def size(picture: str) -> tuple[float, float]:
    """Width and height of a drawing in its own units."""
    import re

    found = re.search(r'<svg [^>]*viewBox="0 0 ([\d.]+) ([\d.]+)"', picture)
    if found is None:
        raise ValueError("an SVG without a viewBox")
    return float(found[1]), float(found[2])


def tiling(width: float, height: float, paper: "Paper") -> Tiling:
    """The fewest pages on which the letters stay legible, at the largest scale that needs no more; upright if equal."""
    options = []
    ways: tuple[Orientation, ...] = ("portrait", "landscape")
    for way in ways:
        room = _room(paper, way)
        count = _count(width, height, room, _LEAST_SCALE)
        steps = (_MOST_SCALE - step * (_MOST_SCALE - _LEAST_SCALE) / 40 for step in range(41))
        scale = next(one for one in steps if math.prod(_count(width, height, room, one)) <= math.prod(count))
        options.append((math.prod(count), -scale, way, room))
    _, minus, way, room = min(options, key=lambda one: one[:2])
    return Tiling(way, -minus, tuple(_parts(width, height, room, -minus)))


def _room(paper: "Paper", way: "Orientation") -> tuple[float, float]:
    """Points across and down that a page has for a drawing."""
    across, down = paper.width_mm, paper.height_mm
    if way == "landscape":
        across, down = down, across
    return (across - 2 * _EDGE_MM) * MM_POINTS, (down - _EDGE_MM - _HEAD_MM - _FEET_MM) * MM_POINTS


def _count(width: float, height: float, room: tuple[float, float], scale: float) -> tuple[int, int]:
    """Pages across and down."""
    counts = []
    for whole, points, overlap in zip((width, height), room, _OVERLAP, strict=True):
        one = points / scale
        counts.append(1 if whole <= one else 1 + math.ceil((whole - one) / (one - overlap) - 1e-9))
    return counts[0], counts[1]


def _parts(width: float, height: float, room: tuple[float, float], scale: float) -> Iterator[Part]:
    across, down = _count(width, height, room, scale)
    wide, tall = min(width, room[0] / scale), min(height, room[1] / scale)
    for row in range(down):
        for column in range(across):
            x = (width - wide) * column / (across - 1) if across > 1 else 0.0
            y = (height - tall) * row / (down - 1) if down > 1 else 0.0
            yield Part(x, y, wide, tall)


def _open(document: "Document", title: str, way: "Orientation", *, bookmark: bool) -> None:
    """A page with its title line."""
    document.open_page(way)
    if bookmark:
        document.start_section("Drawing")
    document.put(document.fitted(title, document.w - 2 * _EDGE_MM, 10, bold=True), _EDGE_MM, _EDGE_MM, 10, bold=True)


def _overview(
    document: "Document", data: bytes, whole: tuple[float, float], found: Tiling, case: str
) -> Graft:  # fmt: skip
    """A page with all of a drawing, and frames with the numbers of the parts that follow."""
    way: Orientation = "landscape" if whole[0] > whole[1] else "portrait"
    _open(document, f"Drawing, where its {len(found.parts)} parts lie: {case}", way, bookmark=True)
    room = _room(document.paper, way)
    scale = min(room[0] / whole[0], room[1] / whole[1]) / MM_POINTS
    document.set_draw_color(60)
    document.set_line_width(0.3)
    left, top = _EDGE_MM, _EDGE_MM + _HEAD_MM
    for number, part in enumerate(found.parts, start=1):
        x, y = left + part.x * scale, top + part.y * scale
        document.rect(x, y, part.width * scale, part.height * scale)
        document.put(str(number), x + part.width * scale - 8, y + 1.5, 16, bold=True, width=7, align="R")
    return Graft(document.page - 1, data, left, top, whole[0] * scale, whole[1] * scale)


def _lettered(picture: str) -> str:
    """The drawing set in the typeface that comes with the program, which not every machine has."""
    import vl_convert

    from farvolt_app.paper import FONTS

    vl_convert.register_font_directory(str(FONTS))
    return picture.replace('font-family="sans-serif"', 'font-family="DejaVu Sans" font-stretch="condensed"', 1)
