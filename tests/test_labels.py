"""Wire labels: which there are, what stands on each, and how they lie on paper."""

import shutil
import subprocess
from pathlib import Path

import pytest
from click.testing import CliRunner

from farvolt import examples, planfile
from farvolt.errors import FarvoltError
from farvolt.results import Study
from farvolt.study import study
from farvolt_app import labels
from farvolt_app.cli import main
from farvolt_app.labels import LabelSize, parse_size
from farvolt_app.paper import PAPERS

needs_poppler = pytest.mark.skipif(shutil.which("pdftotext") is None, reason="poppler is not installed")

PLAN = """format = 1
[plan]
name = "Bench"
nominal = "12 V"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "10 mohm"
[[runs]]
name = "lamp feed"
label = "W1"
from = "bank"
to = "lamp"
length = "10 m"
size = "6 mm2"
return = { size = "10 mm2", length = "8 m" }
protection = { type = "blade", rating = "20 A" }
[[runs]]
name = "horn feed"
from = "lamp"
to = "horn"
length = "2 m"
size = "2.5 mm2"
parallel = 2
colour = "blue"
return = "chassis"
[[runs]]
name = "strap"
label = "W3"
from = "bank"
to = "chassis"
length = "0.5 m"
size = "16 mm2"
carries = "return"
[[loads]]
name = "lamp"
at = "lamp"
power = "20 W"
[[loads]]
name = "horn"
at = "horn"
power = "20 W"
"""


@pytest.fixture(scope="module")
def bench() -> Study:
    return study(planfile.parse(PLAN), margins=False)


def of(found: Study, mark: str) -> list[labels.Label]:
    return [one for one in labels.labels(found) if one.mark.startswith(mark)]


def test_a_run_of_both_conductors_has_four_labels_with_the_size_of_each(bench: Study) -> None:
    found = of(bench, "W1")
    assert [one.pole for one in found] == ["+", "−", "+", "−"]
    assert [one.here for one in found] == ["at bank", "at bank", "at lamp", "at lamp"]
    assert found[0].data == "6 mm² · red · 20 A blade"
    assert found[1].data == "10 mm² · black"
    assert {one.way for one in found} == {"bank → lamp"}


def test_parallel_cables_are_numbered_and_the_chassis_gets_no_label(bench: Study) -> None:
    found = of(bench, "horn feed")
    assert [(one.mark, one.pole) for one in found] == 2 * [("horn feed 1/2", "+"), ("horn feed 2/2", "+")]
    assert found[0].data == "2.5 mm² · blue"
    assert found[0].name == ""


def test_a_return_alone_is_labelled_as_one(bench: Study) -> None:
    assert [one.pole for one in of(bench, "W3")] == ["−", "−"]


@pytest.mark.parametrize(
    ("text", "width_mm", "height_mm"),
    [("62x12mm", 62, 12), (" 62 × 12 mm ", 62, 12), ("62mm x 12mm", 62, 12), ("2.5X0.5in", 63.5, 12.7)],
)
def test_sizes_are_read_in_both_systems(text: str, width_mm: float, height_mm: float) -> None:
    assert parse_size(text) == LabelSize(pytest.approx(width_mm), pytest.approx(height_mm))


@pytest.mark.parametrize("text", ["", "62", "62x12", "62x12pt", "-6x12mm", "5x5mm", "62x500mm", "nanxinfmm", "1e9x9mm"])
def test_what_is_no_size_is_refused_with_what_is(text: str) -> None:
    with pytest.raises(FarvoltError, match="accepted: width x height"):
        parse_size(text)


@needs_poppler
@pytest.mark.parametrize("paper", PAPERS)
def test_a_sheet_holds_each_label_once_in_rows_and_columns(bench: Study, paper: str, tmp_path: Path) -> None:
    """A4: (210 - 18) / 62 = 3 across, (297 - 18) / 12 = 23 down; the bench's ten labels take one page of either."""
    file = tmp_path / "labels.pdf"
    file.write_bytes(labels.pdf(bench, LabelSize(62, 12), PAPERS[paper]))
    text = subprocess.run(["pdftotext", "-layout", file, "-"], capture_output=True, text=True, check=True).stdout
    assert text.count("\f") == 1
    assert text.count("W1 · at bank") == text.count("W1 · at lamp") == 2
    assert text.count("W3 · at chassis") == 1


@needs_poppler
def test_a_strip_has_a_page_of_the_labels_size_for_each(bench: Study, tmp_path: Path) -> None:
    file = tmp_path / "labels.pdf"
    file.write_bytes(labels.pdf(bench, LabelSize(50.8, 25.4)))
    told = subprocess.run(["pdfinfo", file], capture_output=True, text=True, check=True).stdout
    assert f"Pages:           {len(labels.labels(bench))}" in told
    assert "144 x 72 pts" in told  # 2 in and 1 in, of 72 points each


@needs_poppler
def test_a_very_long_name_and_one_from_right_to_left_stay_on_their_label(tmp_path: Path) -> None:
    """The label's text lies within its page: what pdftotext finds outside the page would be lost in print."""
    long = "Ω" * 200
    found = study(planfile.parse(PLAN.replace('"lamp feed"', f'"{long}"').replace("W1", "תווית א")), margins=False)
    file = tmp_path / "labels.pdf"
    file.write_bytes(labels.pdf(found, LabelSize(50, 20)))
    command = ["pdftotext", "-bbox", "-l", "4", file, "-"]
    boxes = subprocess.run(command, capture_output=True, text=True, check=True).stdout
    edges = [float(line.split('xMax="')[1].split('"')[0]) for line in boxes.splitlines() if "<word" in line]
    assert edges
    assert max(edges) <= 50 / 25.4 * 72
    assert "תווית" in boxes or "תיוות" in boxes
    assert "…" in boxes


def test_the_command_writes_a_pdf_and_refuses_anything_else(tmp_path: Path) -> None:
    plan, out = tmp_path / "plan.toml", tmp_path / "labels.pdf"
    plan.write_text(examples.text("instrument-repair-van"))
    done = CliRunner().invoke(main, ["labels", str(plan), "-o", str(out), "--sheet", "--size", "50x20mm"])
    assert done.exit_code == 0, done.output
    assert out.read_bytes().startswith(b"%PDF")
    for arguments, told in (
        (["-o", str(tmp_path / "labels.csv")], ".pdf"),
        (["-o", str(out), "--size", "62x12"], "accepted: width x height"),
        (["-o", str(out), "--paper", "a0"], "letter"),
    ):
        refused = CliRunner().invoke(main, ["labels", str(plan), *arguments])
        assert refused.exit_code == 2
        assert told in refused.output
    assert sorted(one.name for one in tmp_path.iterdir()) == ["labels.pdf", "plan.toml"]
