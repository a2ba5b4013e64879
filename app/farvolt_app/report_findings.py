"""The findings of the report in full, the time-current charts of runs that have some, and what all of it rests on."""

from collections.abc import Iterator

from farvolt.results import Finding, Study
from farvolt_app import shown
from farvolt_app.graft import MM_POINTS, Graft
from farvolt_app.paper import MARGIN_MM, NO_GLYPH, Document, line_mm

MOST_CHARTS = 4
"""Charts of time over current; the page "Protection" and the command `protection` draw any run's."""

_CHART_GAP_MM = 6.0
_MARK_MM = 18.0


def charts(document: Document, study: Study) -> Iterator[Graft]:
    """Two charts to a page, of the runs whose protection has findings, worst first; they come with `graft`."""
    if study.time_current is None:
        return
    from farvolt_app import time_current_chart

    names = _charted(study)
    for place, name in enumerate(names[:MOST_CHARTS]):
        data = time_current_chart.pdf(study.time_current(name))
        if place % 2 == 0:
            document.open_page("landscape")
            document.heading(_chart_title(place, len(names)), 1, keep_mm=0)
        room = (document.across_mm - _CHART_GAP_MM) / 2
        wide, high = _size(data)
        scale = min(room / wide, document.room_mm / high)
        x = MARGIN_MM + place % 2 * (room + _CHART_GAP_MM)
        yield Graft(document.page - 1, data, x, document.get_y(), wide * scale, high * scale)


def _charted(study: Study) -> list[str]:
    """Runs that carry protection and have a failing or doubtful finding on it, in the order of the findings."""
    guarded = {one.run for one in study.protections}
    told = [one for one in study.findings if one.severity != "note" and one.rule.startswith("protection.")]
    return list(dict.fromkeys(one.subject for one in told if one.kind == "run" and one.subject in guarded))


def _chart_title(place: int, count: int) -> str:
    more = f" (the first {MOST_CHARTS} of {count} runs with findings on protection)" if count > MOST_CHARTS else ""
    return f"Time over current{more}" if place == 0 else "Time over current, further runs"


def _size(picture: bytes) -> tuple[float, float]:
    """Width and height of a picture's page in mm."""
    import io

    from pypdf import PdfReader

    box = PdfReader(io.BytesIO(picture)).pages[0].mediabox
    return float(box.width) / MM_POINTS, float(box.height) / MM_POINTS


def findings(document: Document, study: Study) -> None:
    """Every finding with its working, basis and remedy, worst first."""
    document.open_page()
    document.heading("Findings")
    document.paragraph(
        f"{shown.verdict(study)}. Held against {study.rulebook.title}, {study.rulebook.edition}. FAIL breaks a stated "
        "limit; doubtful is lawful but beyond a recommendation, or could not be shown to hold; a note informs.", 9,
    )  # fmt: skip
    if not study.findings:
        document.paragraph("The checks that were made found nothing. That is no proof of safety.")
    for one in study.findings:
        _finding(document, one)


def _finding(document: Document, one: Finding) -> None:
    parts = [(one.message, 9.0, one.severity == "fail")]
    parts += [(f"Case: {one.case}", 8.0, False)] if one.case else []
    parts += [(line, 8.0, False) for line in one.working]
    parts += [(f"Basis: {one.basis}", 8.0, False)]
    parts += [(f"Remedy: {one.remedy}", 8.0, True)] if one.remedy else []
    width = document.across_mm - _MARK_MM
    height = sum(len(document.lines(text, width, size, bold=bold)) * line_mm(size) for text, size, bold in parts)
    document.need(min(height + line_mm(8), 90.0))
    _mark(document, one)
    document.put(document.fitted(one.rule, width, 8), MARGIN_MM + _MARK_MM, document.get_y(), 8)
    document.set_y(document.get_y() + line_mm(8))
    for text, size, bold in parts:
        document.paragraph(text, size, bold=bold, indent_mm=_MARK_MM, after_mm=0.2)
    document.set_y(document.get_y() + 2.2)


def _mark(document: Document, one: Finding) -> None:
    """The severity in a box: white on black where it fails, framed where it is doubtful, bare where it only informs."""
    x, y = MARGIN_MM, document.get_y()
    if one.severity != "note":
        document.set_draw_color(0)
        document.set_fill_color(0)
        document.set_line_width(0.3)
        document.rect(x, y, _MARK_MM - 2.5, line_mm(8) + 0.6, style="F" if one.severity == "fail" else "D")
    document.set_text_color(255 if one.severity == "fail" else 0)
    document.put(shown.SEVERITIES[one.severity], x, y + 0.3, 8, bold=True, width=_MARK_MM - 2.5, align="C")
    document.set_text_color(0)
    document.set_y(y)


def assumptions(document: Document, study: Study) -> None:
    """What the numbers rest on: what was taken as given, the rulebook, and the sources of the limits."""
    book, info = study.rulebook, study.plan.plan
    document.open_page()
    document.heading("Assumptions and sources")
    document.heading("Taken as given", 1)
    document.points(study.assumptions)
    document.heading("Rulebook", 1)
    document.paragraph(f"{book.name}: {book.title}, {book.edition}", 9, bold=True)
    document.paragraph(book.text, 9)
    document.heading("Sources of the limits in the findings", 1)
    document.points(list(dict.fromkeys(one.basis for one in study.findings)) or ["None were found against."])
    if info.notes.strip():
        document.heading("Notes of the plan", 1)
        for line in filter(str.strip, info.notes.splitlines()):
            document.paragraph(line, 9)
    document.heading("Caution", 1)
    document.points((
        shown.CAUTION,
        "Fuse every cable at its source, work with the bank disconnected, and cover its terminals.",
        *([f"Some names hold letters that the typeface of this report lacks; {NO_GLYPH} stands for each. The "
           "workbook and the plan itself have them."] if document.lacking else []),
        "A calculation shows what would happen in the installation as planned: measure what has been built.",
    ))  # fmt: skip
