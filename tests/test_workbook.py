"""The workbook: live formulas that agree with the solver, print set-up, and text that can only be text."""

import io
import shutil
import subprocess
from pathlib import Path

import openpyxl
import pytest
from openpyxl.workbook import Workbook
from openpyxl.worksheet.worksheet import Worksheet

from farvolt import examples, planfile
from farvolt.results import Study
from farvolt.study import study
from farvolt_app import schedule, workbook
from farvolt_app.sheets import HEADING_ROW

SHEETS = ["Cables", "Loads", "Protection", "Shopping", "Findings", "Assumptions", "Resistances", "Ways"]


def example(name: str) -> Study:
    """The study of an example plan."""
    return study(planfile.parse(examples.text(name)))


def opened(data: bytes, *, values: bool = False) -> Workbook:
    """A workbook read back; `values` for what a program calculated last."""
    return openpyxl.load_workbook(io.BytesIO(data), data_only=values)


def column(sheet: Worksheet, heading: str) -> list[object]:
    """The cells under a heading."""
    for cells in sheet.iter_cols(min_row=HEADING_ROW):
        if cells[0].value == heading:
            return [cell.value for cell in cells[1:]]
    raise AssertionError(f"no heading {heading} on {sheet.title}")


def recalculated(data: bytes, folder: Path) -> Workbook:
    """The workbook as LibreOffice calculates it."""
    folder.mkdir(parents=True, exist_ok=True)
    source = folder / "in.xlsx"
    source.write_bytes(data)
    profile = (folder / "profile").as_uri()
    command = [
        "soffice",
        f"-env:UserInstallation={profile}",
        "--headless",
        "--convert-to",
        "xlsx:Calc MS Excel 2007 XML",
    ]
    subprocess.run(
        [*command, "--outdir", str(folder / "out"), str(source)], check=True, capture_output=True, timeout=180
    )
    return opened((folder / "out" / "in.xlsx").read_bytes(), values=True)


office = [
    pytest.mark.office,
    pytest.mark.skipif(shutil.which("soffice") is None, reason="LibreOffice is not installed"),
]


def test_sheets_have_frozen_headers_filters_and_print_set_up() -> None:
    """Every sheet prints landscape, one page wide, its heading row repeated."""
    book = opened(workbook.to_bytes(example("instrument-repair-van")))
    assert book.sheetnames == SHEETS
    for sheet in book:
        assert sheet.freeze_panes == f"C{HEADING_ROW + 1}"
        assert sheet.auto_filter.ref.startswith(f"A{HEADING_ROW}:")
        assert (sheet.page_setup.orientation, sheet.page_setup.fitToWidth, sheet.page_setup.fitToHeight) == (
            "landscape",
            1,
            0,
        )
        assert sheet.sheet_properties.pageSetUpPr.fitToPage
        assert sheet.print_title_rows == f"${HEADING_ROW}:${HEADING_ROW}"
    assert book["Cables"].conditional_formatting
    assert book["Loads"].conditional_formatting


def test_drops_totals_and_percentages_are_formulas() -> None:
    """Live: nothing that follows from a length is written as a number."""
    book = opened(workbook.to_bytes(example("bird-observatory-cabin")))
    for sheet, heading in (
        ("Cables", "Drop (V)"),
        ("Cables", "Drop (%)"),
        ("Loads", "Drop (V)"),
        ("Shopping", "Needed"),
    ):
        assert all(str(value).startswith("=") for value in column(book[sheet], heading))


def test_text_of_a_plan_is_never_a_formula() -> None:
    """Names that begin with = + - @ are text cells with the quote mark; control characters do not get in."""
    text = examples.text("instrument-repair-van").replace('"fridge"', '"=HYPERLINK(1)"').replace('"radio"', '"@radio"')
    text = text.replace('"roof fan"', '"+1-2"').replace('"water pump"', '"-pump"')
    book = opened(workbook.to_bytes(study(planfile.parse(text))))
    formulas = [
        cell.value
        for sheet in book
        for row in sheet.iter_rows()
        for cell in row
        if cell.data_type == "f" and "HYPERLINK" in str(cell.value)
    ]
    assert formulas == []
    names = {str(value): cell.data_type for cell in book["Loads"]["A"] if (value := cell.value)}
    assert [names[name] for name in ("=HYPERLINK(1)", "@radio", "+1-2", "-pump")] == ["s"] * 4


@pytest.mark.parametrize("name", examples.names())
class TestRecalculated:
    """What LibreOffice calculates for the unchanged plan is what the solver found."""

    pytestmark = office

    def test_values_agree_with_the_solver(self, name: str, tmp_path: Path) -> None:
        """Drops of loads and runs, losses, lengths and shopping totals, to 1e-6."""
        found = example(name)
        book = recalculated(workbook.to_bytes(found), tmp_path)
        self.totals(found, book)
        for value, line in zip(column(book["Loads"], "Drop (V)"), schedule.loads(found), strict=True):
            assert value == pytest.approx(line.drop_V, abs=1e-6)
        for value, line in zip(column(book["Loads"], "Load (V)"), schedule.loads(found), strict=True):
            assert value == pytest.approx(line.volts, abs=1e-6)
        cables = schedule.cables(found)
        for heading, expected in (
            ("Drop (V)", [cable.drop_V for cable in cables]),
            ("Loss (W)", [cable.loss_W for cable in cables]),
            ("All conductors (m)", [cable.total_m for cable in cables]),
            ("Current (A)", [cable.amps for cable in cables]),
        ):
            assert column(book["Cables"], heading) == pytest.approx(expected, abs=1e-6)

    @staticmethod
    def totals(found: Study, book: Workbook) -> None:
        """Metres by size and colour sum to the metres of the cables sheet; pieces to the protections."""
        rows = list(zip(column(book["Shopping"], "Unit"), column(book["Shopping"], "Needed"), strict=True))
        metres = sum(float(str(need)) for unit, need in rows if unit == "m")
        pieces = sum(float(str(need)) for unit, need in rows if unit == "pieces")
        assert metres == pytest.approx(sum(cable.total_m for cable in schedule.cables(found)), abs=1e-6)
        assert pieces == len(schedule.protections(found))

    def test_a_changed_length_changes_drop_and_total(self, name: str, tmp_path: Path) -> None:
        """Twice the length of a run: its cable part doubles, the load's drop and the shopping total follow."""
        found = example(name)
        line = max(schedule.loads(found), key=lambda one: one.drop_V or 0)
        part = max((one for one in line.way if one.kind == "run"), key=lambda one: one.drop_V)
        cable = schedule.cables(found)[part.run]
        book = opened(workbook.to_bytes(found))
        heading = next(cell for cell in book["Cables"][HEADING_ROW] if cell.value == "Length one way (m)")
        book["Cables"].cell(HEADING_ROW + 1 + part.run, heading.column).value = 2 * cable.run.length.si
        out = io.BytesIO()
        book.save(out)
        changed = recalculated(out.getvalue(), tmp_path)
        before = {"feed": cable.feed, "return": cable.back}
        same_length = cable.back.length_m == cable.run.length.si
        more = sum(
            one.amps * before[one.pole].ohm_per_m * before[one.pole].length_m / cable.parallel
            for one in line.way
            if one.run == part.run and one.kind == "run" and (one.pole == "feed" or same_length)
        )
        place = [one.name for one in schedule.loads(found)].index(line.name)
        assert column(changed["Loads"], "Drop (V)")[place] == pytest.approx((line.drop_V or 0) + more, abs=1e-6)
