"""Each protection beside what it stands before, and its picture: on the van, against the checks and by hand."""

import math
import shutil
import subprocess
from pathlib import Path

import pytest
from click.testing import CliRunner

from farvolt import examples, planfile
from farvolt.protected import ProtectionResult, TimeCurrent, protections, time_current
from farvolt.results import Study
from farvolt.study import prepared, study
from farvolt_app import cli, protection_text, shown, time_current_chart

VAN = planfile.parse(examples.text("instrument-repair-van"))


@pytest.fixture(scope="module")
def van() -> Study:
    """The van, studied once."""
    return study(VAN, margins=False)


@pytest.fixture(scope="module")
def picture() -> TimeCurrent:
    """The picture of the fridge's cable."""
    return time_current(prepared(VAN), "fridge feed")


def of(van: Study, run: str) -> ProtectionResult:
    """The protection of a run."""
    return next(one for one in van.protections if one.run == run)


def test_every_protection_has_its_row(van: Study) -> None:
    assert [one.run for one in van.protections] == [run.name for run in VAN.runs for _ in run.protections]
    assert len(shown.protection_rows(van)) == len(van.protections)


def test_only_a_cable_that_is_known_to_carry_a_fault_is_said_to() -> None:
    """A bolted short behind 200 m of 1.5 mm2 is some 2 A; of a cable without a size, and of one whose only fuse is in
    the return, nothing is known."""
    text = """
format = 1
[plan]
name = "one cable"
nominal = "12 V"
rulebook = "cabin-iec"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12 V"
resistance = "20 mohm"
[[runs]]
name = "feed"
from = "bank"
to = "end"
length = "200 m"
size = "1.5 mm2"
protection = { type = "blade", rating = "10 A" }
[[loads]]
name = "load"
at = "end"
power = "1 W"
[[cases]]
name = "on"
"""
    unsized = text.replace('size = "1.5 mm2"', 'resistance = "0.2 ohm"')
    back = text.replace('rating = "10 A"', 'rating = "10 A", pole = "return"')
    for one, words in ((text, "for good"), (unsized, "-"), (back, "-")):
        context = prepared(planfile.parse(one))
        (row,) = protections(context)
        assert protection_text.row(context, row)[-1] == words


def test_the_largest_fault_falls_from_the_bank_on(van: Study) -> None:
    amps = [of(van, name).highest_A or 0.0 for name in ("bank main", "living feeder", "fridge feed")]
    assert amps == sorted(amps, reverse=True)
    # The maker gives 1,000 A for the bank: nothing behind it sees more.
    assert amps[0] <= 1000


def test_each_carries_its_load_within_the_cable(van: Study) -> None:
    for one in van.protections:
        assert one.cable_A is not None
        assert one.load_A <= one.rating_A <= one.cable_A * 1.5
        assert one.lowest_A is not None
        assert one.highest_A is not None
        assert one.lowest_A < one.highest_A


def test_the_picture_shows_band_cable_load_and_both_faults(picture: TimeCurrent) -> None:
    roles = {curve.role for curve in picture.curves}
    assert roles == set(time_current_chart.ROLES)
    least, largest = sorted(mark.amps for mark in picture.marks)
    assert 50 < least < largest < 1000
    for curve in picture.curves:
        assert all(amps > 0 and math.isfinite(time_s) and time_s > 0 for amps, time_s in curve.points)


def test_the_cable_line_is_its_withstand(picture: TimeCurrent) -> None:
    """I² t is the same at both ends: (k S)² with k = 100 to 145 for copper (IEC 60364-4-43 Table 43A) and 4 mm2."""
    (cable,) = [curve for curve in picture.curves if curve.role == "cable"]
    joules = [amps**2 * time_s for amps, time_s in cable.points]
    assert joules[0] == pytest.approx(joules[-1])
    assert 80 < math.sqrt(joules[0]) / 4 < 145


def test_the_start_of_the_load_is_a_step(picture: TimeCurrent) -> None:
    (load,) = [curve for curve in picture.curves if curve.role == "load"]
    # 55 W at 12 V are 4.58 A; its surge is 9 A for 0.5 s.
    assert load.points[1][1] == 0.5
    assert load.points[2][0] - load.points[0][0] == pytest.approx(9 - 55 / 12)


def test_the_chart_is_drawn_as_svg_pdf_and_png(picture: TimeCurrent, tmp_path: Path) -> None:
    svg = time_current_chart.svg(picture)
    assert svg.startswith("<svg")
    assert "fridge feed" in svg
    assert time_current_chart.png(picture).startswith(b"\x89PNG")
    pdf = tmp_path / "chart.pdf"
    pdf.write_bytes(time_current_chart.pdf(picture))
    if shutil.which("pdftotext"):
        text = subprocess.run(["pdftotext", str(pdf), "-"], capture_output=True, text=True, check=True).stdout
        assert "Current (A)" in text


def test_a_name_is_only_text_in_the_chart() -> None:
    text = examples.text("instrument-repair-van").replace("fridge feed", "<script>alert(1)</script> & co")
    svg = time_current_chart.svg(time_current(prepared(planfile.parse(text)), "<script>alert(1)</script> & co"))
    assert "<script>" not in svg
    assert "&lt;script&gt;" in svg


def test_the_command_lists_protection_and_draws_one(tmp_path: Path) -> None:
    plan, drawn = tmp_path / "van.toml", tmp_path / "curve.svg"
    plan.write_text(examples.text("instrument-repair-van"))
    wide = CliRunner(env={"COLUMNS": "160"})
    done = wide.invoke(cli.main, ["protection", str(plan), "--run", "fridge feed", "--output", str(drawn)])
    assert done.exit_code == 0, done.output
    assert "Ratings that fail no check" in done.output
    assert drawn.read_text().startswith("<svg")
    every = CliRunner(env={"COLUMNS": "160"}).invoke(cli.main, ["protection", str(plan)])
    assert "cartridge" in every.output


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--run", "fridge fed"], 'did you mean "fridge feed"'),
        (["--output", "x.svg"], "name it with --run"),
        (["--run", "fridge feed", "--output", "x.gif"], "accepted: .svg, .pdf, .png"),
    ],
)
def test_what_cannot_be_drawn_is_said(arguments: list[str], words: str, tmp_path: Path) -> None:
    plan = tmp_path / "van.toml"
    plan.write_text(examples.text("instrument-repair-van"))
    done = CliRunner(env={"COLUMNS": "160"}).invoke(cli.main, ["protection", str(plan), *arguments])
    assert done.exit_code == 2
    assert words in done.output
