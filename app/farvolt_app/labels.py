"""Labels for the ends of every conductor: what stands on each, and their sheet or strip as a PDF."""

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from farvolt.errors import FarvoltError
from farvolt.plan import Run
from farvolt.results import Study
from farvolt_app import schedule
from farvolt_app.paper import Document, Paper, line_mm
from farvolt_app.schedule import Cable, Conductor
from farvolt_app.sheet_cables import pretty
from farvolt_app.textsafe import cell_text

DEFAULT_SIZE = "62x12mm"
SIZES = ("62x12mm", "50x20mm", "40x10mm", "90x29mm", "2x0.5in", "3x1in")
"""Sizes offered; any other may be given."""

LEAST_MM, MOST_MM = (15.0, 6.0), (190.0, 120.0)
_SIZE = re.compile(r"\s*(\d+(?:\.\d+)?)\s*(?:mm|in)?\s*[x×*]\s*(\d+(?:\.\d+)?)\s*(mm|in)\s*", re.IGNORECASE)
_SHEET_EDGE_MM = 9.0
_PAD_MM = 1.0
_SMALLEST = 4.5
"""Points: a text that does not fit at this size is cut with an ellipsis."""


@dataclass(frozen=True, slots=True)
class Label:
    """What stands on one label: whose conductor, which pole, from where to where, and at which end it goes."""

    mark: str
    pole: str
    name: str
    way: str
    here: str
    data: str


@dataclass(frozen=True, slots=True)
class LabelSize:
    """Width and height of a label."""

    width_mm: float
    height_mm: float


def parse_size(text: str) -> LabelSize:
    """A size such as 62x12mm or 2.5x0.5in. Raises FarvoltError with what is accepted."""
    found = _SIZE.fullmatch(text)
    accepted = (
        f"width x height with a unit, as 62x12mm or 2.5x0.5in, from {LEAST_MM[0]:g}x{LEAST_MM[1]:g} mm "
        f"to {MOST_MM[0]:g}x{MOST_MM[1]:g} mm"
    )
    if found is None:
        raise FarvoltError(f'label size "{cell_text(text)[:40]}" is not a size; accepted: {accepted}')
    times = 25.4 if found[3].lower() == "in" else 1.0
    size = LabelSize(float(found[1]) * times, float(found[2]) * times)
    for value, least, most in zip((size.width_mm, size.height_mm), LEAST_MM, MOST_MM, strict=True):
        if not least <= value <= most:
            raise FarvoltError(f'label size "{cell_text(text)[:40]}" is too small or too large; accepted: {accepted}')
    return size


def labels(study: Study) -> list[Label]:
    """The labels of every run in the order of the plan: at its start and its end, each pole, each parallel cable."""
    return [label for cable in schedule.cables(study) for label in _of_cable(cable)]


def _of_cable(cable: Cable) -> Iterator[Label]:
    run = cable.run
    for at in (run.from_point, run.to_point):
        for pole, sign, conductor in (("feed", "+", cable.feed), ("return", "−", cable.back)):
            if not conductor.length_m:
                continue  # through the chassis, or no such conductor
            for number in range(1, cable.parallel + 1):
                which = f" {number}/{cable.parallel}" if cable.parallel > 1 else ""
                yield Label(
                    mark=f"{run.label or run.name}{which}", pole=sign, name=run.name if run.label else "",
                    way=f"{run.from_point} → {run.to_point}", here=f"at {at}", data=_data(cable, conductor, pole),
                )  # fmt: skip


def _data(cable: Cable, conductor: Conductor, pole: str) -> str:
    size = pretty(conductor.size.name) if conductor.size is not None else "size not stated"
    colour = conductor.colour
    return " · ".join([f"{size}{', to be chosen' if cable.interim else ''}", colour, *_protection(cable.run, pole)])


def _protection(run: Run, pole: str) -> list[str]:
    return [f"{one.rating} {one.type}" for one in run.protections if one.pole == pole]


def pdf(study: Study, size: LabelSize, sheet: Paper | None = None) -> bytes:
    """All labels, on sheets of paper with thin lines to cut along, or (without a sheet) each on a page of its size."""
    return _sheets(study, size, sheet) if sheet is not None else _strip(study, size)


def _strip(study: Study, size: LabelSize) -> bytes:
    document = _document(study, Paper("label", size.width_mm, size.height_mm))
    for label in labels(study):
        document.open_page()
        _write(document, label, 0.0, 0.0, size)
    return _finished(document)


def _sheets(study: Study, size: LabelSize, paper: Paper) -> bytes:
    document = _document(study, paper)
    across = int((paper.width_mm - 2 * _SHEET_EDGE_MM) / size.width_mm + 1e-9)
    down = int((paper.height_mm - 2 * _SHEET_EDGE_MM) / size.height_mm + 1e-9)
    left = (paper.width_mm - across * size.width_mm) / 2
    for number, label in enumerate(labels(study)):
        place = number % (across * down)
        if place == 0:
            document.open_page()
        x = left + place % across * size.width_mm
        y = _SHEET_EDGE_MM + place // across * size.height_mm
        document.set_draw_color(150)
        document.set_line_width(0.1)
        document.rect(x, y, size.width_mm, size.height_mm)
        _write(document, label, x, y, size)
    return _finished(document)


def _document(study: Study, paper: Paper) -> Document:
    document = Document(paper)
    document.set_margin(0)
    document.set_title(f"Wire labels: {study.plan.plan.name}")
    return document


def _finished(document: Document) -> bytes:
    if not document.pages:
        document.open_page()
    return bytes(document.output())


def _write(document: Document, label: Label, x: float, y: float, size: LabelSize) -> None:
    """One label: its pole large at the left, its mark beside it, and as many lines below as its height has room for."""
    high = size.height_mm - 2 * _PAD_MM
    wanted = [(label.mark, 1.5, True), (label.name, 1.0, False), (label.way, 1.0, False), (label.here, 1.0, True),
              (label.data, 1.0, False)]  # fmt: skip
    lines = [one for one in wanted if one[0]]
    if high / sum(share for _, share, _ in lines) < line_mm(_SMALLEST):
        # Too low for a line each: the run's name gives way, and the end shares the first line.
        lines = [(f"{label.mark} · {label.here}", 1.2, True), (label.way, 1.0, False), (label.data, 1.0, False)]
    unit = min(high / sum(share for _, share, _ in lines), line_mm(14))
    sign = min(high * 0.8, size.width_mm / 6)
    points = sign / line_mm(1.0)
    document.put(label.pole, x + _PAD_MM, y + _PAD_MM + (high - sign) / 2, points, bold=True, width=sign, align="C")
    _lines(document, lines, (x + 2 * _PAD_MM + sign, y + _PAD_MM), size.width_mm - 3 * _PAD_MM - sign, unit)


def _lines(
    document: Document, lines: Sequence[tuple[str, float, bool]], corner: tuple[float, float], width: float, unit: float
) -> None:
    left, top = corner
    for text, share, bold in lines:
        points = share * unit / line_mm(1.0)
        wide = document.width_mm(text, points, bold=bold)
        fitting = max(min(points, points * width / wide if wide else points), min(points, _SMALLEST))
        fitted = document.fitted(text, width, fitting, bold=bold)
        document.put(fitted, left, top + (share * unit - line_mm(fitting)) / 2, fitting, bold=bold)
        top += share * unit
