"""The report: everything is in it, nothing is lost at a page's edge, and it prints in black and white."""

import re
import shutil
import subprocess
from datetime import date
from functools import lru_cache
from pathlib import Path

import pytest
from click.testing import CliRunner

from farvolt import examples, planfile
from farvolt.results import Study
from farvolt.study import study
from farvolt_app import report_file, report_findings, time_current_chart
from farvolt_app.cli import main
from farvolt_app.paper import NO_GLYPH, PAPERS, Document, clean, line_mm
from farvolt_app.paper_table import MOST_LINES, Column, table
from farvolt_app.report_tables import Units
from farvolt_app.shown import CAUTION
from paper_plans import HEBREW, LONG, hostile, large

needs_poppler = pytest.mark.skipif(shutil.which("pdftotext") is None, reason="poppler is not installed")
VAN = examples.text("instrument-repair-van")
DAY = date(2026, 3, 9)
PARTS = ("Summary", "Drawing", "Cable schedule", "Shopping list", "Cut list", "Protection", "Loads", "Bank", "Findings",
         "Assumptions and sources")  # fmt: skip


@lru_cache
def studied(text: str) -> Study:
    return study(planfile.parse(text), margins=False)


@lru_cache
def report(text: str, paper: str = "a4", units: Units = "metric") -> bytes:
    return report_file.pdf(studied(text), PAPERS[paper], units, DAY)


def read(data: bytes, folder: Path, *arguments: str) -> str:
    """What a PDF says, by pdftotext."""
    file = folder / "read.pdf"
    file.write_bytes(data)
    return subprocess.run(["pdftotext", *arguments, file, "-"], capture_output=True, text=True, check=True).stdout


def pages(data: bytes, folder: Path) -> list[str]:
    return read(data, folder, "-layout").split("\f")[:-1]


def joined(text: str) -> str:
    """Text without its line breaks."""
    return " ".join(text.split())


def with_head(found: list[str], head: str) -> list[str]:
    return [page for page in found if any(line.strip() == head for line in page.splitlines()[:2])]


@needs_poppler
@pytest.mark.parametrize("paper", PAPERS)
def test_every_part_is_there_on_the_page_that_the_contents_name(paper: str, tmp_path: Path) -> None:
    found = pages(report(VAN, paper), tmp_path)
    listed = dict(re.findall(r"^ *(\S.*?) {3,}(\d+)$", found[0], re.MULTILINE))
    for part in PARTS:
        assert part in found[int(listed[part]) - 1], part
    size = subprocess.run(["pdfinfo", tmp_path / "read.pdf"], capture_output=True, text=True, check=True).stdout
    assert {"a4": "595.28 x 841.89 pts", "letter": "612 x 792 pts"}[paper] in size  # ISO 216; 8.5 in by 11 in


@needs_poppler
def test_the_cover_says_what_when_by_which_rules_and_with_what_caution(tmp_path: Path) -> None:
    cover = joined(pages(report(VAN), tmp_path)[0])
    book = studied(VAN).rulebook
    for text in ("Instrument-repair van", "9 March 2026", book.title, book.edition, "1 failing", CAUTION):
        assert joined(text) in cover


@needs_poppler
def test_every_run_load_and_finding_is_in_it(tmp_path: Path) -> None:
    found, whole = studied(VAN), joined(read(report(VAN), tmp_path))
    for name in (*(run.name for run in found.plan.runs), *(load.name for load in found.plan.loads)):
        assert name in whole
    for one in found.findings:
        for text in (one.message, one.basis, *one.working, *([one.remedy] if one.remedy else [])):
            assert joined(text) in whole
    for line in found.assumptions:
        assert joined(line) in whole
    assert "letters that the typeface of this report lacks" not in whole


@needs_poppler
def test_every_page_has_plan_date_and_number_at_its_foot(tmp_path: Path) -> None:
    found = pages(report(VAN), tmp_path)
    assert len(found) > 10
    for number, page in enumerate(found, start=1):
        assert re.search(rf"Instrument-repair van · 2026-03-09 .*page {number} of {len(found)}\s*$", page)


@needs_poppler
@pytest.mark.parametrize("paper", PAPERS)
def test_a_table_of_a_hundred_runs_repeats_its_head_and_cuts_no_row(paper: str, tmp_path: Path) -> None:
    found = pages(report(large(100), paper), tmp_path)
    held = [page for page in found if re.search(r"W\d{3} .* blade at block", page)]
    assert len(held) > 2
    assert all("Protection" in page.split("W0")[0] for page in held)
    rows = [line for page in held for line in page.splitlines() if re.match(r" *W\d{3}  ", line)]
    assert len(rows) == 100


@needs_poppler
def test_american_units_are_feet_and_gauges(tmp_path: Path) -> None:
    """W01 is 0.4 m long: 0.4 / 0.3048 = 1.31 ft."""
    metric, american = (joined(read(report(VAN, "a4", units), tmp_path, "-layout")) for units in ("metric", "american"))
    assert re.search(r"W01 bank main bank switch stud 0.4 m 0.8 m 50 mm²", metric)
    assert re.search(r"W01 bank main bank switch stud 1.31 ft 2.62 ft 50 mm² \(~1/0", american)


@needs_poppler
def test_names_of_any_kind_are_text_and_stay_on_the_page(tmp_path: Path) -> None:
    data = report(hostile())
    whole = read(data, tmp_path)
    for text in ("<script>alert(1)</script>", "=HYPERLINK(1)", "<b>fridge</b> &amp; *x* {nb}", f"{NO_GLYPH * 3} □"):
        assert text in joined(whole)
    assert HEBREW.split()[0] in whole
    assert "letters that the typeface of this report lacks" in joined(whole)
    boxes = read(data, tmp_path, "-bbox")
    for page in boxes.split("<page ")[1:]:
        width, height = (float(page.split(f'{name}="')[1].split('"')[0]) for name in ("width", "height"))
        edges = re.findall(r'xMin="([-\d.]+)" yMin="([-\d.]+)" xMax="([-\d.]+)" yMax="([-\d.]+)"', page)
        words = [tuple(map(float, edge)) for edge in edges]
        if ">Drawing," not in page[:600]:  # parts of a drawing are cut at the edge of their box
            assert all(0 <= left < right <= width and 0 <= top < bottom <= height for left, top, right, bottom in words)


@needs_poppler
def test_tables_and_findings_need_no_colour(tmp_path: Path) -> None:
    """Each pixel of the schedule and the findings is a grey; what fails shows by a sign and by its weight."""
    data = report(VAN)
    found = pages(data, tmp_path)
    numbers = [
        number for number, page in enumerate(found, start=1)
        if page.strip().startswith(("Cable schedule", "Findings", "Protection", "Loads", "Summary"))
    ]  # fmt: skip
    assert len(numbers) == 5
    for number in numbers:
        command = ["pdftoppm", "-r", "40", "-f", str(number), "-l", str(number), tmp_path / "read.pdf"]
        picture = subprocess.run(command, capture_output=True, check=True).stdout
        pixels = picture.split(b"\n", 3)[3]
        assert pixels[0::3] == pixels[1::3] == pixels[2::3]
        assert min(pixels) < 60
    summary = next(page for page in found if page.strip().startswith("Summary"))
    assert "! bank gauge lead" in summary


def test_lines_of_a_chart_differ_without_colour() -> None:
    dashes = [tuple(dash) for _, dash in time_current_chart.ROLES.values()]
    assert len(set(dashes)) == len(dashes)


@needs_poppler
def test_charts_are_those_of_runs_with_findings_on_their_protection(tmp_path: Path) -> None:
    """A 60 A fuse before 1.5 mm2 fails; its run gets a chart, a run whose protection passes gets none."""
    sound = VAN.replace('resistance = "12 mohm"', 'resistance = "9 mohm"')  # so that its main fuse opens in time
    changed = sound.replace('rating = "2 A"', 'rating = "60 A"')
    assert VAN != sound != changed
    found = studied(changed)
    failing = {one.subject for one in found.findings if one.severity != "note" and one.rule.startswith("protection.")}
    told = " ".join(page for page in pages(report(changed), tmp_path) if "Time over current" in page)
    guarded = [run for run in found.plan.runs if run.protections]
    assert {run.name for run in guarded} & failing == {"gas alarm feed"}
    assert [run.label for run in guarded if f'Time over current: {run.label} "' in told] == ["W19"]
    assert "Time over current" not in "".join(pages(report(sound), tmp_path))
    assert report_findings.MOST_CHARTS >= 1


@needs_poppler
def test_a_plan_with_almost_nothing_makes_a_report(tmp_path: Path) -> None:
    text = (
        'format = 1\n[plan]\nname = "Bare"\nnominal = "12 V"\n'
        '[[sources]]\nname = "mains"\nkind = "charger"\nat = "a"\nvolts = "13 V"\namps = "5 A"\n'
    )
    whole = joined(read(report(text), tmp_path))
    for told in ("The plan has no runs.", "The plan has no loads.", "The plan states no protection.", "no battery"):
        assert told in whole


class TestPaper:
    """Text on pages."""

    @pytest.mark.parametrize(
        ("text", "shown"),
        [
            ("a\tb\n c", "a b c"),
            ("\u202eevil\u2069\u200b", "evil"),
            ("\ue000\ue000\ue000\ue000", NO_GLYPH * 4),
            ("中\x07\ud800", NO_GLYPH * 3),
            (HEBREW, HEBREW),
            ("", ""),
        ],
    )
    def test_what_cannot_be_shown_is_a_box_or_nothing(self, text: str, shown: str) -> None:
        assert clean(text) == shown

    def test_lines_are_no_wider_than_asked_and_lose_nothing(self) -> None:
        document = Document(PAPERS["a4"])
        for text in (LONG, "x" * 500, f"short {'W' * 90} short", CAUTION):
            lines = document.lines(text, 40, 9)
            assert all(document.width_mm(line, 9) <= 40 for line in lines)
            assert "".join(lines).replace(" ", "") == text.replace(" ", "")

    def test_a_long_word_is_broken_at_its_joints_where_it_has_some(self) -> None:
        document = Document(PAPERS["a4"])
        width = document.width_mm("protection.interr", 9)
        assert document.lines("protection.interrupting", width, 9) == ["protection.", "interrupting"]
        assert document.lines("a.interruptinglyyy", document.width_mm("a.interruptingl", 9), 9)[0] != "a."

    def test_a_fitted_text_ends_with_an_ellipsis_only_where_it_is_cut(self) -> None:
        document = Document(PAPERS["a4"])
        assert document.fitted("short", 40, 9) == "short"
        cut = document.fitted("x" * 500, 40, 9)
        assert cut.endswith("…")
        assert document.width_mm(cut, 9) <= 40

    @needs_poppler
    def test_one_endless_cell_cannot_fill_a_page(self, tmp_path: Path) -> None:
        document = Document(PAPERS["letter"])
        document.open_page()
        table(document, (Column("A", 1), Column("B", 9)), [("x" * 4000, "first"), ("y", "second")])
        assert document.page == 1
        assert document.get_y() < (MOST_LINES + 4) * line_mm(8) + 40
        assert {"first", "second"} < set(read(bytes(document.output()), tmp_path).split())


class TestCommand:
    """`farvolt report`."""

    def test_writes_a_pdf_and_keeps_the_one_before(self, tmp_path: Path) -> None:
        plan, out = tmp_path / "plan.toml", tmp_path / "report.pdf"
        plan.write_text(examples.starter_text())
        out.write_bytes(b"before")
        arguments = ["report", str(plan), "-o", str(out), "--paper", "letter", "--units", "american"]
        done = CliRunner().invoke(main, arguments)
        assert done.exit_code == 0, done.output
        assert out.read_bytes().startswith(b"%PDF")
        assert (tmp_path / "report.pdf.previous").read_bytes() == b"before"

    @pytest.mark.parametrize(
        ("arguments", "told"),
        [
            (["plan.pdf", "-o", "report.docx"], '".docx" is not written; accepted: .pdf'),
            (["plan.pdf", "-o", "plan.pdf"], "is the plan itself"),
            (["bad.toml", "-o", "report.pdf"], "nominal"),
            (["plan.pdf", "-o", "report.pdf", "--paper", "a3"], "'a4', 'letter'"),
        ],
    )
    def test_refuses_and_writes_nothing(
        self, arguments: list[str], told: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        monkeypatch.chdir(tmp_path)
        (tmp_path / "plan.pdf").write_text(examples.starter_text())
        (tmp_path / "bad.toml").write_text('format = 1\n[plan]\nname = "Bad"\n')
        done = CliRunner().invoke(main, ["report", *arguments])
        assert done.exit_code == 2
        assert told in " ".join(done.output.split())
        assert sorted(one.name for one in tmp_path.iterdir()) == ["bad.toml", "plan.pdf"]
