"""The workbook: live formulas that agree with the solver, print set-up, and text that can only be text."""

import io
import random
import re
import shutil
import subprocess
import zipfile
from collections import defaultdict
from collections.abc import Callable
from pathlib import Path
from typing import Any

import openpyxl
import pytest
from openpyxl.formula.translate import Translator
from openpyxl.workbook import Workbook
from openpyxl.worksheet.worksheet import Worksheet

from farvolt import examples, planfile, price_file, shopping
from farvolt.plan import Plan
from farvolt.results import Study
from farvolt.shopping import CablePiece, Wanted
from farvolt.study import study
from farvolt_app import schedule, shopping_rows, workbook
from farvolt_app.sheet_cables import LETTERS
from farvolt_app.sheet_shopping import NEEDED, TO_BUY
from farvolt_app.sheets import FIRST, HEADING_ROW
from strategies import plan_of as drafted
from strategies import random_draft
from wiring import CLASS_5_OHM_PER_KM, cable, fuse, lamp, plan_of

SHEETS = ["Cables", "Loads", "Protection", "Shopping", "Cut list", "Findings", "Assumptions", "Ways"]
AT_20: dict[str, Any] = {"conductor_temperature": "20 degC"}
RANDOM_PLANS = 12


def mesh() -> Plan:
    """Feeds and returns that close different rings, so that in one run both currents flow the same way."""
    runs = [
        cable("ab", "bank", "a", "3 m", "4 mm2"), cable("bb", "bank", "b", "8 m", "4 mm2"),
        cable("ring", "a", "b", "2 m", "4 mm2"), cable("back", "a", "b", "1 m", carries="return"),
        cable("over", "bank", "b", "1 m", "1.5 mm2", carries="feed"),
    ]  # fmt: skip
    return plan_of(runs, [lamp("one", "a", "5 A"), lamp("other", "b", "5 A")])


def measured() -> Plan:
    """A measured resistance whose run returns through the chassis, where the bond is all there is."""
    runs = [cable("lead", "bank", "a", "3 m", None, resistance="12 mohm", **{"return": "chassis"})]
    return plan_of(runs, [lamp("one", "a", "5 A")])


def warm_and_cold() -> Plan:
    """Resistances differ by case: what a load loses in the cold is not what its cable loses at its worst."""
    cases = [
        {"name": "hot", "ambient": "50 degC", "loads": {"far": 1.0, "near": 0.2}},
        {"name": "cold", "ambient": "0 degC", "loads": {"near": 1.0}},
    ]
    runs = [cable("first", "bank", "a", "3 m", "4 mm2"), cable("second", "a", "b", "3 m", "4 mm2")]
    loads = [lamp("near", "a", "20 A"), lamp("far", "b", "8 A")]
    return plan_of(runs, loads, cases=cases, info={"conductor_temperature": "estimated"})


def capitals() -> Plan:
    """Names and colours that differ in nothing but capitals, which spreadsheets compare as equal."""
    runs = [
        cable("lead", "bank", "a", "3 m", "4 mm2", colour="Red"), cable("Lead", "a", "b", "3 m", "4 mm2"),
    ]  # fmt: skip
    return plan_of(runs, [lamp("lamp", "a", "5 A"), lamp("Lamp", "b", "5 A")])


def tree(length: str = "5 m") -> Plan:
    """Constant currents on a tree: they stay as they are whatever a length is changed to."""
    runs = [
        cable("main", "bank", "bus", length, "10 mm2", protection=fuse("40 A"), joints=2),
        cable("feed", "bus", "a", "5 m", "4 mm2", protection=fuse("15 A")),
        cable("other", "bus", "b", "2 m", "2.5 mm2", **{"return": {"size": "6 mm2", "length": "4 m"}}),
    ]
    return plan_of(runs, [lamp("one", "a", "10 A"), lamp("two", "b", "5 A")], info=AT_20)


PLANS: dict[str, Callable[[], Plan]] = {
    **{name: lambda name=name: planfile.parse(examples.text(name)) for name in examples.names()},
    "mesh": mesh,
    "measured": measured,
    "warm and cold": warm_and_cold,
    "capitals": capitals,
    "tree": tree,
    **{f"random {seed}": lambda seed=seed: drafted(random_draft(random.Random(seed))) for seed in range(RANDOM_PLANS)},
}


def opened(data: bytes, *, values: bool = False) -> Workbook:
    """A workbook read back; `values` for what a program calculated last."""
    return openpyxl.load_workbook(io.BytesIO(data), data_only=values)


def saved(book: Workbook) -> bytes:
    """A workbook as a file's content."""
    out = io.BytesIO()
    book.save(out)
    return out.getvalue()


def place(sheet: Worksheet, heading: str) -> int:
    """The number of the column under a heading."""
    return next(cell.column for cell in sheet[HEADING_ROW] if cell.value == heading)


def column(sheet: Worksheet, heading: str) -> list[Any]:
    """The cells under a heading."""
    at = place(sheet, heading)
    return [sheet.cell(row, at).value for row in range(FIRST, sheet.max_row + 1)]


def by_name(sheet: Worksheet, name: str, heading: str) -> dict[Any, Any]:
    """The cells under a heading, by those under another."""
    return dict(zip(column(sheet, name), column(sheet, heading), strict=True))


def upside_down(sheet: Worksheet) -> None:
    """What a spreadsheet's sort does: rows move whole, and references relative to the row move along."""
    rows = range(FIRST, sheet.max_row + 1)
    before = [[cell.value for cell in sheet[row]] for row in rows]
    for row, old, values in zip(rows, reversed(rows), reversed(before), strict=True):
        for at, value in enumerate(values, start=1):
            formula = isinstance(value, str) and value.startswith("=")
            sheet.cell(row, at).value = Translator(value, f"A{old}").translate_formula(f"A{row}") if formula else value


def edited(change: Callable[[Workbook], None], name: str = "tree") -> bytes:
    """The workbook of a plan after a person changed it."""
    book = opened(workbook.to_bytes(study(PLANS[name]())))
    change(book)
    return saved(book)


def longer(book: Workbook) -> None:
    """12.5 m instead of 5 m for the first run."""
    book["Cables"].cell(FIRST, place(book["Cables"], "Length one way (m)")).value = 12.5


def recoloured(book: Workbook) -> None:
    """A return of a colour that the shopping list does not have."""
    book["Cables"].cell(FIRST, place(book["Cables"], "Return colour")).value = "yellow"


def sorted_otherwise(book: Workbook) -> None:
    """The tables that others refer to, and those that refer to them."""
    for title in ("Cables", "Loads", "Ways", "Protection"):
        upside_down(book[title])


def own_price(book: Workbook) -> None:
    """A price of one's own for the labels."""
    sheet = book["Shopping"]
    row = column(sheet, "Item").index("wire label") + FIRST
    sheet.cell(row, place(sheet, "Unit price (own currency)")).value = 0.25


EDITS = {"longer": longer, "recoloured": recoloured, "sorted": sorted_otherwise, "own price": own_price}

PRICED = {
    "priced": Wanted(prices=price_file.example()),
    "priced without spare": Wanted(0.0, price_file.example()),
    "reels": Wanted(reels_m=(5.0, 25.0)),
}
"""Ways to make the shopping list of the van."""


def needs(sheet: Worksheet) -> defaultdict[str, list[float]]:
    """What is needed of each item, line by line."""
    found: defaultdict[str, list[float]] = defaultdict(list)
    for item, needed in zip(column(sheet, "Item"), column(sheet, NEEDED), strict=True):
        found[item].append(needed)
    return found


def pieces(found: Study) -> list[CablePiece]:
    """Every conductor that the shopping list has."""
    return [piece for one in shopping.of_study(found).cables for piece in one.pieces]


@pytest.fixture(scope="module")
def studies() -> dict[str, Study]:
    """The study of every plan."""
    return {name: study(make()) for name, make in PLANS.items()}


@pytest.fixture(scope="module")
def calculated(studies: dict[str, Study], tmp_path_factory: pytest.TempPathFactory) -> dict[str, Workbook]:
    """Every workbook as LibreOffice calculates it, all in one start of the program."""
    folder = tmp_path_factory.mktemp("office")
    data = {name: workbook.to_bytes(one) for name, one in studies.items()}
    data |= {name: edited(change) for name, change in EDITS.items()}
    van = studies["instrument-repair-van"]
    data |= {name: workbook.to_bytes(van, wanted) for name, wanted in PRICED.items()}
    cuts = opened(data["priced"])
    upside_down(cuts["Cut list"])
    data["sorted cuts"] = saved(cuts)
    data["sorted van"] = edited(sorted_otherwise, "instrument-repair-van")
    files = {name: folder / f"{number}.xlsx" for number, name in enumerate(data)}
    for name, file in files.items():
        file.write_bytes(data[name])
    profile = f"-env:UserInstallation={(folder / 'profile').as_uri()}"
    command = ["soffice", profile, "--headless", "--convert-to", "xlsx:Calc MS Excel 2007 XML"]
    command += ["--outdir", str(folder / "out"), *map(str, files.values())]
    subprocess.run(command, check=True, capture_output=True, timeout=300)
    return {name: opened((folder / "out" / file.name).read_bytes(), values=True) for name, file in files.items()}


@pytest.mark.office
@pytest.mark.skipif(shutil.which("soffice") is None, reason="LibreOffice is not installed")
class TestCalculated:
    """What LibreOffice calculates."""

    @pytest.mark.parametrize("name", PLANS)
    def test_an_unchanged_plan_has_the_solvers_values(
        self, name: str, studies: dict[str, Study], calculated: dict[str, Workbook]
    ) -> None:
        """Drops, losses, currents, voltages and lengths, to 1e-6; what has no answer stays empty."""
        found = studies[name]
        cables = schedule.cables(found)
        lines = schedule.loads(found, cables)
        for title, heading, expected in (
            ("Cables", "Drop (V)", [one.drop_V for one in cables]),
            ("Cables", "Loss (W)", [one.loss_W for one in cables]),
            ("Cables", "Design current (A)", [one.largest_A if one.drop_V is not None else None for one in cables]),
            ("Cables", "All conductors (m)", [one.total_m for one in cables]),
            ("Loads", "Drop (V)", [one.drop_V for one in lines]),
            ("Loads", "Load (V)", [one.volts for one in lines]),
        ):
            values = column(calculated[name][title], heading)
            assert [one is None for one in values] == [one is None for one in expected], heading
            known = [pair for pair in zip(values, expected, strict=True) if pair[1] is not None]
            assert [one for one, _ in known] == pytest.approx([one for _, one in known], abs=1e-6, rel=1e-9), heading

    @pytest.mark.parametrize("name", PLANS)
    def test_shopping_adds_up(self, name: str, studies: dict[str, Study], calculated: dict[str, Workbook]) -> None:
        """Metres by kind sum to all conductors, pieces to all protection; nothing is left out or counted twice."""
        sheet = calculated[name]["Shopping"]
        needed = needs(sheet)
        links_m = sum(one.conductor.length_m for one in pieces(studies[name]) if one.conductor.run is None)
        metres = sum(one.total_m for one in schedule.cables(studies[name])) + links_m
        assert sum(needed["cable"]) == pytest.approx(metres, abs=1e-6)
        guards = schedule.protections(studies[name])
        assert sum(needed["fuse"] + needed["breaker"]) == len(guards)
        assert sheet["K3"].value == 0

    @pytest.mark.parametrize("name", PLANS)
    def test_no_cell_is_an_error(self, name: str, calculated: dict[str, Workbook]) -> None:
        """No #VALUE!, #REF! or their like on any sheet."""
        cells = [cell for sheet in calculated[name] for row in sheet.iter_rows() for cell in row]
        assert [cell.coordinate for cell in cells if cell.data_type == "e"] == []

    def test_drop_by_hand(self, calculated: dict[str, Workbook]) -> None:
        """IEC 60228: 4 mm2 flexible, 4.95 ohm/km at 20 degC. 10 A x 10 m x 4.95 mohm/m = 0.495 V; / 12 V = 4.125 %."""
        expected = 10 * 2 * 5 * CLASS_5_OHM_PER_KM["4 mm2"] / 1000
        sheet = calculated["tree"]["Cables"]
        assert by_name(sheet, "Run", "Drop (V)")["feed"] == pytest.approx(expected, abs=1e-9)
        assert by_name(sheet, "Run", "Drop (%)")["feed"] == pytest.approx(4.125, abs=1e-9)
        assert by_name(sheet, "Run", "Loss (W)")["feed"] == pytest.approx(10 * expected, abs=1e-9)

    def test_a_changed_length_is_the_plan_solved_again(self, calculated: dict[str, Workbook]) -> None:
        """With constant currents on a tree the edited sheet and a new study agree, load by load and in the totals."""
        again = study(tree("12.5 m"))
        cables = schedule.cables(again)
        book = calculated["longer"]
        lines = schedule.loads(again, cables)
        assert column(book["Loads"], "Drop (V)") == pytest.approx([one.drop_V for one in lines], abs=1e-6)
        assert column(book["Cables"], "Drop (V)") == pytest.approx([one.drop_V for one in cables], abs=1e-6)
        metres = needs(book["Shopping"])["cable"]
        assert sum(metres) == pytest.approx(sum(one.total_m for one in cables), abs=1e-6)
        assert sum(metres) == pytest.approx(2 * 12.5 + 2 * 5 + 2 + 4)

    def test_sorting_keeps_every_value_with_its_row(self, calculated: dict[str, Workbook]) -> None:
        """Filter buttons invite sorting; each name keeps its drop, on the sheet itself and on those that look it up."""
        for after, before in (("sorted", "tree"), ("sorted van", "instrument-repair-van")):
            for title, name in (("Cables", "Run"), ("Loads", "Load")):
                moved, kept = (by_name(calculated[one][title], name, "Drop (V)") for one in (after, before))
                assert list(moved) == list(reversed(kept))
                assert moved == pytest.approx(kept, abs=1e-9)

    def test_the_total_is_that_of_the_list_and_follows_a_price(
        self, studies: dict[str, Study], calculated: dict[str, Workbook]
    ) -> None:
        """Sums of quantity times price; a price of one's own written in, 4 labels at 0.25 each, is in the total."""
        for name, wanted in PRICED.items():
            bill = shopping.of_study(studies["instrument-repair-van"], wanted)
            sheet = calculated[name]["Shopping"]
            assert sheet["M2"].value == pytest.approx(bill.total, abs=1e-6)
            assert sheet["M3"].value == bill.without_price
        assert calculated["own price"]["Shopping"]["M2"].value == pytest.approx(0.25 * 2 * 6)
        assert calculated["tree"]["Shopping"]["M2"].value == 0

    def test_cuts_leave_what_the_list_says(self, studies: dict[str, Study], calculated: dict[str, Workbook]) -> None:
        """Reel by reel; the last cut leaves the offcut, and a sorted sheet says the same of each cut."""
        bill = shopping.of_study(studies["instrument-repair-van"], PRICED["priced"])
        expected = [cut.left_m for cut in shopping_rows.cuts(bill)]
        assert any(left > 0 for left in expected)
        for name, values in (("priced", expected), ("sorted cuts", expected[::-1])):
            assert column(calculated[name]["Cut list"], "Left on it (m)") == pytest.approx(values, abs=1e-6)

    def test_a_colour_out_of_the_list_is_not_lost_unseen(self, calculated: dict[str, Workbook]) -> None:
        """5 m of return were black and are yellow: no row counts them, and the sheet says so."""
        sheet = calculated["recoloured"]["Shopping"]
        assert sheet["K3"].value == pytest.approx(5.0)

    def test_marks_say_what_is_over(self, calculated: dict[str, Workbook]) -> None:
        """The loads marked are those whose percentage is above their limit: in words, not by colour alone."""
        sheet = calculated["instrument-repair-van"]["Loads"]
        marks, percent, limit = (by_name(sheet, "Load", heading) for heading in ("Mark", "Drop (%)", "Limit (%)"))
        over = {name for name in percent if percent[name] > limit[name]}
        assert over == {name for name, mark in marks.items() if "OVER" in (mark or "")}
        assert over


@pytest.fixture(scope="module")
def van() -> bytes:
    """The workbook of an example."""
    return workbook.to_bytes(study(planfile.parse(examples.text("instrument-repair-van"))))


def test_sheets_have_frozen_headers_filters_and_print_set_up(van: bytes) -> None:
    """Every sheet prints landscape, one page wide, its heading row repeated, its pages numbered."""
    book = opened(van)
    assert book.sheetnames == SHEETS
    for sheet in book:
        assert sheet["A1"].value.startswith("Instrument-repair van: ")
        assert sheet.freeze_panes == f"C{FIRST}"
        assert sheet.auto_filter.ref.startswith(f"A{HEADING_ROW}:")
        setup = sheet.page_setup
        assert (setup.orientation, setup.fitToWidth, setup.fitToHeight) == ("landscape", 1, 0)
        assert sheet.sheet_properties.pageSetUpPr.fitToPage
        assert sheet.print_title_rows == f"${HEADING_ROW}:${HEADING_ROW}"
        assert "&P" in sheet.oddFooter.right.text
        assert sheet.page_margins.footer < sheet.page_margins.bottom
    for title in ("Cables", "Loads", "Protection", "Findings"):
        assert book[title].conditional_formatting


def test_working_columns_are_filtered_but_not_printed(van: bytes) -> None:
    """They stand right of the print area, and move with their rows."""
    sheet = opened(van)["Cables"]
    assert sheet.print_area.endswith(f"${LETTERS['Mark']}${sheet.max_row}")
    assert sheet.auto_filter.ref == f"A{HEADING_ROW}:{LETTERS['Return in all (mΩ)']}{sheet.max_row}"


def test_headings_carry_units_and_numbers_a_format(van: bytes) -> None:
    """A heading of numbers ends in its unit, except counts."""
    for sheet in opened(van):
        for cell in sheet[HEADING_ROW]:
            values = [sheet.cell(row, cell.column) for row in range(FIRST, sheet.max_row + 1)]
            numbers = [one for one in values if isinstance(one.value, float)]
            if numbers and sheet.title != "Findings":  # its unit is a column of its own
                assert re.search(r"\(.+\)$|^Resistance over that on Cables$", cell.value), cell.value
                assert all(one.number_format != "General" for one in numbers)


def test_drops_totals_and_percentages_are_formulas(van: bytes) -> None:
    """Live: nothing that follows from a length is written as a number."""
    book = opened(van)
    for title, headings in {
        "Cables": ("Length one way (ft)", "All conductors (m)", "Drop (V)", "Drop (%)", "Loss (W)", "Used (%)"),
        "Loads": ("Drop (V)", "Drop (%)", "Load (V)"),
        "Protection": ("Used (%)",),
        "Shopping": (TO_BUY,),
        "Cut list": ("Cut to (ft)", "Left on it (m)"),
        "Ways": ("Drop (V)",),
    }.items():
        for heading in headings:
            assert all(str(value).startswith("=") for value in column(book[title], heading)), heading


def test_formulas_of_a_row_stay_in_the_row(van: bytes) -> None:
    """On the cables sheet no formula points to another row or sheet, so that sorting cannot part them."""
    for row in opened(van)["Cables"].iter_rows(min_row=FIRST):
        for cell in row:
            if cell.data_type == "f":
                assert "!" not in re.sub(r'"[^"]*"', "", cell.value)
                assert set(re.findall(r"\b[A-Z]{1,2}(\d+)\b", cell.value)) == {str(cell.row)}


ODD = ["=HYPERLINK(1)", "@radio", "+1-2", "-pump", "＝wide", "<b>bold</b>", "_x0041_", "*", "'quoted"]


def odd_plan(odd: str) -> Plan:
    """A plan whose every text is one that a spreadsheet might take for something else."""
    runs = [cable(odd, "bank", "a", "3 m", "4 mm2", label=odd, colour=odd, protection=fuse("10 A"))]
    info = {"name": odd, "notes": f"{odd}\n\t{odd}\n\r{odd}\x07\ufffe"}
    return plan_of(runs, [lamp(odd, "a", "5 A")], info=info, cases=[{"name": odd}])


@pytest.mark.parametrize("odd", ODD)
def test_text_of_a_plan_is_never_a_formula(odd: str) -> None:
    """Not in any cell of any sheet, nor a sheet's name; it is there as text, marked as such."""
    book = opened(workbook.to_bytes(study(odd_plan(odd))))
    assert book.sheetnames == SHEETS
    cells = [cell for sheet in book for row in sheet.iter_rows() for cell in row if odd[1:] in str(cell.value)]
    assert len(cells) >= 8
    for cell in cells:
        if cell.data_type == "f":  # our own formulas may hold a star or a quote, never the text
            assert odd in ("*", "'quoted")
            assert cell.value.startswith("=")
        elif str(cell.value).lstrip()[:1] in "=+-@＝":
            assert cell.quotePrefix


@pytest.mark.parametrize("name", ["Fish & chips &P &D van", "&" * 120, "24 V <cabin>"])
def test_names_with_ampersands_are_no_code_in_the_footer(name: str) -> None:
    """In a footer "&" starts a code: each of a name's is doubled, none cut in half."""
    sheet = opened(workbook.to_bytes(study(plan_of([cable("lead", "bank", "a")], [], info={"name": name}))))["Cables"]
    text = sheet.oddFooter.left.text
    assert "&" not in text.replace("&&", "")
    assert text.replace("&&", "&") == name[:80]


def test_what_no_workbook_can_hold_is_left_out() -> None:
    """Control characters, a character that XML has not, text above the length of a cell: the file still opens."""
    plan = plan_of([cable("lead", "bank", "a")], [], info={"notes": "bell\x07 none\uffff tab\tend"})
    rows = column(opened(workbook.to_bytes(study(plan)))["Assumptions"], "Text")
    assert "bell  none  tab\tend" in rows


def test_numbers_without_answer_are_empty_and_say_why() -> None:
    """A case that gives way: no zero anywhere, a word in the mark, its name above the table."""
    plan = plan_of(
        [cable("lead", "bank", "a", "3 m", "4 mm2")],
        [{"name": "winch", "at": "a", "power": "90 kW"}, lamp("idle", "a")],
        cases=[{"name": "winching", "loads": {"winch": 1.0}}],
    )
    book = opened(workbook.to_bytes(study(plan)))
    assert column(book["Cables"], "Drop (V)") == [None]
    assert column(book["Cables"], "Mark") == ["no answer"]
    assert column(book["Loads"], "Drop (V)") == [None, None]
    assert column(book["Loads"], "Mark") == ["no answer", "off"]
    assert '"winching"' in book["Loads"]["A3"].value
    assert any("winching" in text for text in column(book["Assumptions"], "Text"))


def test_a_free_size_is_to_be_chosen_and_counted() -> None:
    """The interim size is shown as such, and bought as what it is."""
    found = study(plan_of([cable("lead", "bank", "a", "3 m", None)], [lamp("one", "a", "5 A")]))
    book = opened(workbook.to_bytes(found))
    name = found.interim["lead"].name.replace("mm2", "mm²")
    assert column(book["Cables"], "Size") == [f"{name}, to be chosen"]
    assert column(book["Shopping"], "Size or rating")[:2] == [name, name]


def test_a_plan_of_nothing_but_a_bank_has_all_sheets() -> None:
    """Empty tables are no fault."""
    assert opened(workbook.to_bytes(study(plan_of([])))).sheetnames == SHEETS


def test_written_whole_or_not_at_all(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A fault while writing leaves the old file, and nothing half-written beside it."""
    found, file = study(tree()), tmp_path / "cables.xlsx"
    workbook.write(found, file)
    before = file.read_bytes()
    assert opened(before).sheetnames == SHEETS

    def full(*_: Any) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.replace", full)
    with pytest.raises(OSError, match="No space"):
        workbook.write(found, file)
    assert file.read_bytes() == before
    assert list(tmp_path.iterdir()) == [file]


def test_written_to_a_stream() -> None:
    """A stream gets a whole workbook, which has neither macros nor links to elsewhere."""
    out = io.BytesIO()
    workbook.write(study(tree()), out)
    names = zipfile.ZipFile(out).namelist()
    assert "xl/workbook.xml" in names
    assert not [one for one in names if "external" in one.lower() or "vba" in one.lower()]
