"""The drawing as a file: the same picture in SVG, PNG and PDF, legible and whole on paper."""

import itertools
import shutil
import struct
import subprocess
from functools import lru_cache
from pathlib import Path

import pytest
from click.testing import CliRunner
from fpdf import FPDF
from hypothesis import given
from hypothesis import strategies as st

from farvolt import examples, planfile
from farvolt.results import Study
from farvolt.study import study
from farvolt_app import drawing, drawing_file
from farvolt_app.captions import DETAIL_SIZE
from farvolt_app.cli import main
from farvolt_app.drawing_file import LEAST_POINTS, tiling
from farvolt_app.graft import MM_POINTS, Graft, graft
from farvolt_app.paper import PAPERS
from paper_plans import hostile, large

needs_poppler = pytest.mark.skipif(shutil.which("pdftotext") is None, reason="poppler is not installed")
VAN = "instrument-repair-van"


@lru_cache
def studied(text: str) -> Study:
    return study(planfile.parse(text), margins=False)


def text_of(data: bytes, folder: Path, *arguments: str) -> str:
    """What a PDF says, by pdftotext."""
    file = folder / "read.pdf"
    file.write_bytes(data)
    return subprocess.run(["pdftotext", *arguments, file, "-"], capture_output=True, text=True, check=True).stdout


@given(st.floats(100, 20_000), st.floats(100, 20_000), st.sampled_from(list(PAPERS)))
def test_parts_cover_a_drawing_at_a_legible_scale_and_fit_the_page(width: float, height: float, name: str) -> None:
    paper = PAPERS[name]
    found = tiling(width, height, paper)
    assert found.scale * DETAIL_SIZE >= LEAST_POINTS - 1e-9
    sides = sorted((paper.width_mm * MM_POINTS, paper.height_mm * MM_POINTS), reverse=found.orientation == "landscape")
    for part in found.parts:
        assert part.width * found.scale < sides[0]
        assert part.height * found.scale < sides[1]
        assert -1e-6 <= part.x <= width - part.width + 1e-6
        assert -1e-6 <= part.y <= height - part.height + 1e-6
    for start, size, whole in (("x", "width", width), ("y", "height", height)):
        places = sorted({(getattr(one, start), getattr(one, size)) for one in found.parts})
        assert places[0][0] == 0
        assert sum(places[-1]) == pytest.approx(whole)
        assert all(first + length > then for (first, length), (then, _) in itertools.pairwise(places))


def test_a_small_drawing_takes_one_page_and_is_never_blown_up() -> None:
    found = tiling(900, 400, PAPERS["a4"])
    assert len(found.parts) == 1
    assert found.scale == 0.75  # 72 points over 96 units to the inch (CSS): the size that the drawing states


@needs_poppler
@pytest.mark.parametrize("name", PAPERS)
def test_a_hundred_runs_are_all_in_the_parts(name: str, tmp_path: Path) -> None:
    found = studied(large(100))
    data = drawing_file.pdf(found, found.cases[0], PAPERS[name], foot="Long hall")
    parts = text_of(data, tmp_path).split("\f")[1:-1]  # after the page that shows where they lie
    whole = "".join(parts)
    for run in found.plan.runs:
        assert f"{run.label} {run.name}" in whole
    assert len(parts) == len(tiling(*drawing_file.size(drawing_file.svg(found, found.cases[0])), PAPERS[name]).parts)
    assert all(f"part {number} of {len(parts)}" in part for number, part in enumerate(parts, start=1))


def test_a_png_is_twice_the_drawing_and_no_more_than_can_be_handled(monkeypatch: pytest.MonkeyPatch) -> None:
    found = studied(examples.starter_text())
    picture = drawing_file.svg(found, found.cases[0])
    width, height = drawing_file.size(picture)
    assert struct.unpack(">II", drawing_file.png(picture)[16:24]) == (2 * width, 2 * height)
    monkeypatch.setattr(drawing_file, "MOST_PIXELS", width * height / 4)
    assert struct.unpack(">II", drawing_file.png(picture)[16:24]) == pytest.approx((width / 2, height / 2), abs=1)


@needs_poppler
def test_names_of_any_kind_are_text_in_the_pdf(tmp_path: Path) -> None:
    found = studied(hostile())
    text = text_of(drawing_file.pdf(found, found.cases[0], PAPERS["a4"]), tmp_path)
    assert "<b>fridge</b>" in text
    assert "<script>alert(1)</script> =SUM(A1)" in text


def test_a_graft_is_stored_once_and_an_empty_list_changes_nothing() -> None:
    paper = FPDF()
    paper.add_page()
    paper.add_page()
    base = bytes(paper.output())
    assert graft(base, ()) is base
    picture = FPDF(format=(100, 50))
    picture.add_page()
    picture.set_font("helvetica", size=8)
    for _ in range(400):
        picture.cell(text="many different words to fill it")
    data = bytes(picture.output())
    once = graft(base, [Graft(0, data, 10, 10, 100, 50)])
    twice = graft(base, [Graft(0, data, 10, 10, 100, 50), Graft(1, data, 10, 10, 50, 50, (0, 0, 141.7, 141.7))])
    assert len(twice) - len(once) < 1000 < len(once) - len(base)


@needs_poppler
def test_a_graft_lies_in_its_box(tmp_path: Path) -> None:
    """A word 20 mm from the left of a picture of 100 mm, drawn at half size 30 mm from the edge: at 40 mm."""
    paper, picture = FPDF(), FPDF(format=(100, 100))
    paper.add_page()
    picture.add_page()
    picture.set_font("helvetica", size=20)
    picture.text(20, 50, "here")
    data = graft(bytes(paper.output()), [Graft(0, bytes(picture.output()), 30, 60, 50, 50)])
    box = text_of(data, tmp_path, "-bbox").split("<word ")[1]
    left, bottom = (float(box.split(f'{name}="')[1].split('"')[0]) for name in ("xMin", "yMax"))
    assert left / MM_POINTS == pytest.approx(30 + 20 / 2, abs=0.3)
    assert bottom / MM_POINTS == pytest.approx(60 + 50 / 2, abs=1.5)


class TestCommand:
    """`farvolt draw`."""

    def test_writes_the_case_with_the_largest_drop_or_the_one_named(self, tmp_path: Path) -> None:
        plan, out = tmp_path / "plan.toml", tmp_path / "drawing.svg"
        plan.write_text(examples.text(VAN))
        found = studied(examples.text(VAN))
        assert CliRunner().invoke(main, ["draw", str(plan), "-o", str(out)]).exit_code == 0
        worst = max(found.cases, key=lambda case: max(one.drop_percent or 0 for one in case.loads))
        assert out.read_text() == drawing.svg(found.plan, worst, found.findings)
        arguments = ["draw", str(plan), "-o", str(out), "--case", found.cases[0].name, "--units", "american"]
        assert CliRunner().invoke(main, arguments).exit_code == 0
        assert out.read_text() == drawing.svg(found.plan, found.cases[0], found.findings, units="american")
        assert (tmp_path / "drawing.svg.previous").exists()

    @pytest.mark.parametrize(("suffix", "start"), [("png", b"\x89PNG"), ("pdf", b"%PDF"), ("PDF", b"%PDF")])
    def test_writes_what_the_suffix_says(self, suffix: str, start: bytes, tmp_path: Path) -> None:
        plan, out = tmp_path / "plan.toml", tmp_path / f"drawing.{suffix}"
        plan.write_text(examples.starter_text())
        done = CliRunner().invoke(main, ["draw", str(plan), "-o", str(out), "--paper", "letter"])
        assert done.exit_code == 0, done.output
        assert out.read_bytes().startswith(start)
        assert "check local codes" in done.output

    @pytest.mark.parametrize(
        ("arguments", "told"),
        [
            (["-o", "drawing.jpg"], '".jpg" is not written; accepted: .svg, .png, .pdf'),
            (["-o", "drawing"], "accepted: .svg, .png, .pdf"),
            (["-o", "plan.svg"], "is the plan itself"),
            (["-o", "new.svg", "--case", "Evenin"], 'there is no case "Evenin"; accepted:'),
            (["-o", "nowhere/new.svg"], "cannot be written"),
        ],
    )
    def test_refuses_and_writes_nothing(
        self, arguments: list[str], told: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        monkeypatch.chdir(tmp_path)
        (tmp_path / "plan.svg").write_text(examples.starter_text())
        done = CliRunner().invoke(main, ["draw", "plan.svg", *arguments])
        assert done.exit_code == 2
        assert told in " ".join(done.output.split())
        assert [one.name for one in tmp_path.iterdir()] == ["plan.svg"]
        assert (tmp_path / "plan.svg").read_text() == examples.starter_text()
