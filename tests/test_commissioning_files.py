"""The test sheet as files: paper, workbook, and readings to fill in that are read back."""

import csv
import io
import shutil
import subprocess
from datetime import date
from functools import lru_cache
from pathlib import Path

import pytest
from click.testing import CliRunner
from openpyxl import load_workbook
from streamlit.testing.v1 import AppTest

from farvolt import commissioning, examples, meter, planfile
from farvolt.commissioning import Sheet
from farvolt.installation import Installation
from farvolt.locate import locate
from farvolt.readings import COLUMNS
from farvolt.rulebook import load
from farvolt.study import prepared
from farvolt_app import commissioning_pdf, commissioning_rows, commissioning_sheets, readings_file
from farvolt_app.cli import main
from farvolt_app.paper import PAPERS
from paper_plans import hostile

needs_poppler = pytest.mark.skipif(shutil.which("pdftotext") is None, reason="poppler is not installed")
VAN = examples.text("instrument-repair-van")


@lru_cache
def sheet(text: str = VAN) -> Sheet:
    return commissioning.sheet_of(prepared(planfile.parse(text)), meter.parse())


def text_of(data: bytes, folder: Path) -> str:
    file = folder / "sheet.pdf"
    file.write_bytes(data)
    return subprocess.run(["pdftotext", "-layout", file, "-"], capture_output=True, text=True, check=True).stdout


@needs_poppler
@pytest.mark.parametrize("paper", ["a4", "letter"])
def test_paper_has_every_test_with_room_for_what_is_read(paper: str, tmp_path: Path) -> None:
    found = text_of(commissioning_pdf.pdf(sheet(), PAPERS[paper], date(2026, 3, 9)), tmp_path)
    for head in ("Before power is put on", "Fitted protection", "Voltages of the points", "Torque by size of stud",
                 "Millivolts over conductors and joints", "Millivolts over protection and devices", "Signature",
                 "250 V DC", "check local codes"):  # fmt: skip
        assert head in found
    (row,) = (line for line in found.splitlines() if 'W08 "fridge feed", feed' in line and "lead" not in line
              and "of" in line)  # fmt: skip
    expected, passes = commissioning_rows.millivolts(
        next(one.test.volts for one in sheet().conductors if one.run.name == "fridge feed" and one.test)
    )
    assert expected in row
    assert passes in row
    assert "____" in row


@needs_poppler
def test_hostile_names_are_text_on_paper(tmp_path: Path) -> None:
    found = text_of(commissioning_pdf.pdf(sheet(hostile()), PAPERS["a4"], date(2026, 3, 9)), tmp_path)
    assert "=HYPERLINK(1)" in found
    assert "<script>" in found


def test_no_cell_of_the_workbook_is_a_formula_of_the_plan() -> None:
    book = load_workbook(io.BytesIO(commissioning_sheets.to_bytes(sheet(hostile()))))
    formulas = [cell.value for page in book for row in page.iter_rows() for cell in row if cell.data_type == "f"]
    assert formulas
    assert all(one.startswith('=IF(') for one in formulas)
    assert not any("HYPERLINK" in one or "SUM" in one for one in formulas)


@pytest.mark.parametrize("kind", ["csv", "xlsx"])
@pytest.mark.parametrize("text", [VAN, hostile()], ids=["van", "hostile"])
def test_readings_filled_in_as_expected_fit_the_plan(kind: str, text: str, tmp_path: Path) -> None:
    made = sheet(text)
    rows = commissioning_rows.reading_rows(made)
    bands = [one.volts for one in made.points if one.volts] + [
        one.test.volts for one in (*made.conductors, *made.devices) if one.test
    ]
    file = tmp_path / f"filled.{kind}"
    if kind == "csv":
        filled = list(csv.DictReader(io.StringIO(commissioning_rows.to_csv(made))))
        for row, band in zip(filled, bands, strict=False):
            row["volts"] = f"{1000 * band.expected:.1f} mV" if band.expected < 0.6 else f"{band.expected:.2f}"
        with file.open("w", newline="") as out:
            writer = csv.DictWriter(out, COLUMNS)
            writer.writeheader()
            writer.writerows(filled)
    else:
        book = load_workbook(io.BytesIO(commissioning_sheets.to_bytes(made)))
        page = book[readings_file.SHEET]
        for number, band in enumerate(bands, start=5):
            shown = f"{1000 * band.expected:.1f} mV" if band.expected < 0.6 else f"{band.expected:.2f}"
            page.cell(number, COLUMNS.index("volts") + 1).value = shown
        book.save(file)
    assert len(rows) > len(bands)  # the amps are left open
    plan = planfile.parse(text)
    sets = readings_file.read(str(file), plan)
    assert [len(one.readings) for one in sets] == [len(bands)]
    assert locate(Installation(plan, load(plan.plan.rulebook)), sets).fits


def test_the_verdict_goes_with_the_current_that_was_read() -> None:
    book = load_workbook(io.BytesIO(commissioning_sheets.to_bytes(sheet())))
    page = book["Conductors"]
    headings = {cell.value: cell.column_letter for cell in page[4]}
    amps, verdict = headings["Read A"], page[f"{headings['Verdict']}5"].value
    assert f"IF(N({amps}5)>0,N({amps}5)/{headings['At A']}5,1)" in verdict


@pytest.mark.parametrize("suffix", [".pdf", ".xlsx", ".csv"])
def test_the_command_writes_each_kind_and_keeps_what_was_there(suffix: str, tmp_path: Path) -> None:
    plan, file = tmp_path / "van.toml", tmp_path / f"sheet{suffix}"
    plan.write_text(VAN)
    file.write_bytes(b"before")
    done = CliRunner().invoke(main, ["test-sheet", str(plan), "-o", str(file), "--amps", "20", "--paper", "letter"])
    assert (done.exit_code, done.stdout) == (0, "")
    assert (tmp_path / f"sheet{suffix}.previous").read_bytes() == b"before"
    assert file.read_bytes()[:4] == {".pdf": b"%PDF", ".xlsx": b"PK\x03\x04", ".csv": b"\xef\xbb\xbfs"}[suffix]


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (["-o", "x.doc"], ".pdf, .xlsx, .csv"),
        (["-o", "x.pdf", "--case", "Everythin on, no charging"], "did you mean"),
        (["-o", "x.pdf", "--amps", "0"], "0"),
        (["-o", "x.pdf", "--amps", "nan"], "accepted"),
        (["-o", "x.pdf", "--accuracy", "good"], "0.5 % + 2 digits"),
    ],
)
def test_what_cannot_be_used_is_told_in_one_line(options: list[str], said: str, tmp_path: Path) -> None:
    plan = tmp_path / "van.toml"
    plan.write_text(VAN)
    done = CliRunner().invoke(main, ["test-sheet", str(plan), *options])
    assert done.exit_code == 2
    assert said in done.stderr
    assert "Traceback" not in done.output


def part() -> None:
    from farvolt import examples, planfile
    from farvolt.study import study
    from farvolt_app.pages import commissioning_part

    commissioning_part.show(study(planfile.parse(examples.text("instrument-repair-van")), margins=False))


def test_a_page_offers_the_sheet_for_a_case_that_holds() -> None:
    shown = AppTest.from_function(part, default_timeout=60).run()
    assert not shown.exception
    assert "Everything on, no charging" in shown.selectbox(key="test_sheet_case").options
    assert [one.label for one in shown.get("download_button")] == ["Download test sheet",
                                                                   "Download test sheet as a workbook"]  # fmt: skip


def test_readings_that_a_table_has_no_room_for_are_counted(monkeypatch: pytest.MonkeyPatch) -> None:
    whole = len(commissioning_rows.reading_rows(sheet()))
    assert commissioning_rows.left_out(sheet()) == 0
    monkeypatch.setattr(commissioning_rows, "MOST_ROWS", whole - 2)
    assert (len(commissioning_rows.reading_rows(sheet())), commissioning_rows.left_out(sheet())) == (whole - 3, 3)
