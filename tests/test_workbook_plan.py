"""A plan out of a workbook: what is filled in is read, what is wrong is told by its cell, hostile files are refused."""

import io
import zipfile
from pathlib import Path
from typing import Any

import openpyxl
import pytest
from click.testing import CliRunner
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import examples, planfile
from farvolt.study import study
from farvolt_app import columns, edits, plan_text, tables, template, workbook, workbook_cells, workbook_plan
from farvolt_app.cli import main
from farvolt_app.workbook_cells import WorkbookError

VAN = examples.text("instrument-repair-van")
SETTINGS = {"Name of the plan": "Hut", "Nominal voltage": "12 V", "Rulebook": "cabin-iec"}
ROWS: dict[str, list[dict[str, Any]]] = {
    "Zones": [{"Name": "cabin", "Ambient": "35 degC"}],
    "Batteries": [{"Name": "bank", "At point": "bank", "Chemistry": "lfp", "Nominal": "12.8 V", "Capacity": "100 Ah",
                   "Strings": 1, "Charge": 0.8}],
    "Cable runs": [{"Name": "feed", "From point": "bank", "To point": "block", "Length": "4.5 m", "Size": "6 mm2",
                    "Protection": "blade", "Rated": "20 A", "Zone": "cabin"}],
    "Loads": [{"Name": "lamp", "At point": "block", "Power": "20 W", "Hours a day": 4, "Continuous": True},
              {"Name": "fan", "At point": "block", "Power": "10 W"}],
}  # fmt: skip
CASES = [("What", "Name", "Evening", "Night"), ("load", "lamp", 1, "50 %"), ("load", "fan", "off", ""),
         ("source charge", "bank", 0.5, ""), ("ambient", "", "20 degC", "10 degC")]  # fmt: skip


def filled(rows: dict[str, list[dict[str, Any]]] = ROWS, cases: Any = (), settings: dict[str, Any] = SETTINGS) -> Any:
    """The template with rows under its headings."""
    book = openpyxl.load_workbook(io.BytesIO(template.to_bytes()))
    for sheet, entries in rows.items():
        heads = [cell.value for cell in book[sheet][1]]
        for number, entry in enumerate(entries, start=3):
            for label, value in entry.items():
                cell = book[sheet].cell(number, heads.index(label) + 1, value)
                cell.number_format = "0%" if isinstance(value, float) else "General"
    for row in book["Settings"].iter_rows(min_row=2):
        row[1].value = settings.get(row[0].value)
    for number, line in enumerate(cases, start=1):
        for place, value in enumerate(line, start=2):
            cell = book["Cases"].cell(number if number == 1 else number + 8, place, value)
            cell.number_format = "0%" if isinstance(value, float) else "General"
    return book


def saved(book: Any) -> bytes:
    """A workbook as a file's content."""
    out = io.BytesIO()
    book.save(out)
    return out.getvalue()


def refused(data: bytes) -> str:
    """What is said of a workbook that cannot be used."""
    with pytest.raises(WorkbookError) as caught:
        workbook_plan.read(data, "given.xlsx")
    return str(caught.value)


def test_what_was_filled_in_is_the_plan() -> None:
    found = workbook_plan.read(saved(filled(cases=CASES)))
    assert found.faults == ()
    raw = edits.read(found.text)
    assert raw["plan"] == {"name": "Hut", "nominal": "12 V", "rulebook": "cabin-iec"}
    assert raw["zones"] == {"cabin": {"ambient": "35 degC"}}
    assert raw["sources"][0]["charge"] == "80 %"
    assert raw["sources"][0]["strings"] == 1
    assert raw["runs"][0]["protection"] == {"type": "blade", "rating": "20 A"}
    assert raw["loads"][0] == {"name": "lamp", "at": "block", "power": "20 W", "hours_per_day": 4, "continuous": True}
    evening, night = raw["cases"]
    assert evening == {"name": "Evening", "loads": {"lamp": 1.0}, "sources": {"bank": {"charge": "50 %"}},
                       "ambient": "20 degC"}  # fmt: skip
    assert night == {"name": "Night", "loads": {"lamp": 0.5}, "ambient": "10 degC"}


def test_all_loads_but_one() -> None:
    cases = [("What", "Name", "Day"), ("all loads", "", "all"), ("load", "fan", "off")]
    raw = edits.read(workbook_plan.read(saved(filled(cases=cases))).text)
    assert raw["cases"][0]["loads"] == {"lamp": 1.0}


def test_the_examples_of_the_template_are_plans_entries_but_not_read() -> None:
    said = workbook_plan.read(template.to_bytes())
    assert [fault.place for fault in said.faults] == ['sheet "Settings"', "sources"]
    for sheet in columns.SHEETS:
        example = template._EXAMPLES[sheet.id]
        assert set(example) <= {column.id for column in sheet.columns}
    book = openpyxl.load_workbook(io.BytesIO(template.to_bytes()))
    for sheet in columns.SHEETS:
        assert book[sheet.title]["A2"].value == template.EXAMPLE
        book[sheet.title]["A2"].value = None
    book["Cases"].delete_rows(2, 10)
    book["Settings"]["B3"].value = "12 V"
    found = workbook_plan.read(saved(book))
    assert [fault.problem for fault in found.faults if "length" in fault.field.lower()] == []
    raw = edits.read(found.text)
    assert {"fridge", "house bank"} <= {one.get("name") for one in (*raw["loads"], *raw["sources"])}


@pytest.mark.parametrize(
    ("sheet", "label", "value", "expected"),
    [
        ("Cable runs", "Length", 4.5, ['sheet "Cable runs", row 3, Length (F3)', "4.5", '"4.5 m"']),
        ("Cable runs", "Size", "11 mm2", ['sheet "Cable runs", row 3, Size (G3)', '"11 mm2"', "10 mm2"]),
        ("Cable runs", "Zone", "cabine", ['row 3, Zone', '"cabine"', '"cabin"']),
        ("Cable runs", "Protection", "blad", ["Protection (H3)", '"blad"', '"blade"']),
        ("Loads", "Power", "20 A", ['sheet "Loads", row 3, Power (D3)', '"20 A"']),
        ("Loads", "Hours a day", 40, ['sheet "Loads", row 3, Hours a day', "40"]),
        ("Batteries", "Chemistry", "lpf", ['sheet "Batteries", row 3, Chemistry', '"lpf"', '"lfp"']),
    ],
)  # fmt: skip
def test_a_fault_names_its_cell_the_value_what_is_accepted_and_the_nearest(
    sheet: str, label: str, value: Any, expected: list[str]
) -> None:
    rows = {name: [dict(one) for one in ones] for name, ones in ROWS.items()}
    rows[sheet][0][label] = value
    found = workbook_plan.read(saved(filled(rows)))
    assert len(found.faults) == 1
    for part in expected:
        assert part in str(found.faults[0])


def test_slips_of_headings_settings_and_cases_are_told_with_the_nearest() -> None:
    book = filled(cases=[("What", "Name", "Day"), ("laod", "fan", "1")])
    book["Cable runs"]["F1"].value = "Lenght"
    book["Settings"]["A3"].value = "Nominal volts"
    said = refused(saved(book))
    assert 'sheet "Cable runs", row 1, column F: is no heading' in said
    assert 'did you mean "Length"?' in said
    assert 'did you mean "Nominal voltage"?' in said
    assert 'sheet "Cases", row 10, What' in said
    assert 'did you mean "load"?' in said


def test_a_name_twice_is_told_where_names_are_keys() -> None:
    rows = ROWS | {"Zones": [{"Name": "cabin", "Ambient": "35 degC"}, {"Name": "cabin", "Ambient": "20 degC"}]}
    assert 'sheet "Zones", row 4, Name: this name is used twice' in refused(saved(filled(rows)))


def test_columns_may_be_moved_and_titles_stand_above() -> None:
    book = openpyxl.Workbook()
    book.active.title = "settings"
    book.active.append(["Nominal voltage", "12 V"])
    runs = book.create_sheet("Cable runs")
    runs.append(["My hut"])
    runs.append([])
    runs.append(["size", "LENGTH", "name", "to", "from point"])
    runs.append(["6 mm2", "3 m", "feed", "lamp", "bank"])
    for title, rows in (("Loads", [["Name", "At point", "Power"], ["lamp", "lamp", "20 W"]]),
                        ("Batteries", [["Name", "At point", "Rest voltage", "Resistance"],
                                       ["bank", "bank", "12 V", "5 mohm"]])):  # fmt: skip
        for row in rows:
            (book[title] if title in book.sheetnames else book.create_sheet(title)).append(row)
    found = workbook_plan.read(saved(book))
    assert found.faults == ()
    assert edits.read(found.text)["runs"] == [
        {"size": "6 mm2", "length": "3 m", "name": "feed", "to": "lamp", "from": "bank"}
    ]


@pytest.mark.parametrize("name", examples.names())
def test_an_exported_workbook_gives_its_plan_back(name: str) -> None:
    text = examples.text(name)
    found = workbook_plan.read(workbook.to_bytes(study(planfile.parse(text), margins=False), text=text))
    assert found.text == text
    assert found.faults == ()


def test_a_length_changed_on_the_sheet_of_cables_is_taken() -> None:
    book = openpyxl.load_workbook(
        io.BytesIO(workbook.to_bytes(study(planfile.parse(VAN), margins=False), text=VAN)))  # fmt: skip
    sheet = book[workbook_plan.CABLES]
    heads = {cell.value: cell.column for cell in sheet[4]}
    row = next(row for row in range(5, 60) if sheet.cell(row, heads["Run"]).value == "fridge feed")
    sheet.cell(row, heads["Length one way (m)"]).value = 9
    found = workbook_plan.read(saved(book))
    assert found.text == edits.apply(VAN, [edits.Set("runs", 7, ("length",), "9 m")])
    assert found.notes[0].startswith("1 changed length taken")
    sheet.cell(row, heads["Length one way (m)"]).value = "long"
    assert f'sheet "Cables", row {row}' in refused(saved(book))


def test_lines_that_begin_like_formulas_or_hold_escapes_come_back_as_they_were() -> None:
    text = VAN + '\n# =1+1\n=notes\n  # _x0041_ and a very long line: ' + "x" * 70_000 + "\n"
    book = openpyxl.Workbook()
    plan_text.write(book.active, text)
    read = openpyxl.load_workbook(io.BytesIO(saved(book)))
    assert all(cell.data_type != "f" for row in read.active.iter_rows() for cell in row)
    book.active.title = plan_text.TITLE
    rows = workbook_cells.read(saved(book), [plan_text.TITLE], exact=[plan_text.TITLE])[plan_text.TITLE]
    assert "\n".join(workbook_plan._lines(rows)) + "\n" == text


def parts(data: bytes, **changed: bytes | None) -> bytes:
    """A workbook with some of its parts replaced, or others added (`__` for `/`)."""
    out = io.BytesIO()
    wanted = {name.replace("__", "/").replace("_dot_", "."): value for name, value in changed.items()}
    with zipfile.ZipFile(io.BytesIO(data)) as old, zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as new:
        for name in dict.fromkeys([*old.namelist(), *wanted]):
            content = wanted.get(name, old.read(name) if name in old.namelist() else b"")
            if content is not None:
                new.writestr(name, content)
    return out.getvalue()


BOMB = b"<x>" + b"0" * (workbook_cells.UNPACKED_LIMIT_BYTES + 1) + b"</x>"
LAUGHS = (
    b'<?xml version="1.0"?><!DOCTYPE l [<!ENTITY a "ha"><!ENTITY b "&a;&a;&a;&a;&a;&a;&a;&a;&a;&a;">'
    b'<!ENTITY c "&b;&b;&b;&b;&b;&b;&b;&b;&b;&b;">]><worksheet><sheetData>&c;</sheetData></worksheet>'
)
OUTSIDE = b'<?xml version="1.0"?><!DOCTYPE l [<!ENTITY a SYSTEM "file:///etc/passwd">]><workbook>&a;</workbook>'


@pytest.mark.parametrize(
    ("data", "said"),
    [
        (b"", "is not a workbook"),
        (b"name = 1", "is not a workbook"),
        (b"PK\x03\x04 and nothing", "is not a workbook"),
        (b"\xd0\xcf\x11\xe0" + b"\0" * 600, "old format, or one with a password"),
        (b"x" * (workbook_cells.FILE_LIMIT_BYTES + 1), "larger than 10 MB"),
        (parts(template.to_bytes(), xl__bomb_dot_xml=BOMB), "unpacks to more than 60 MB"),
        (parts(template.to_bytes(), **{f"xl__{n}": b"" for n in range(600)}), "parts"),
        (parts(saved(filled()), xl__worksheets__sheet3_dot_xml=LAUGHS), "cannot be read"),
        (parts(saved(filled()), xl__workbook_dot_xml=OUTSIDE), "cannot be read"),
        (parts(template.to_bytes(), xl__workbook_dot_xml=b"<no"), "cannot be read"),
        (parts(template.to_bytes(), xl__workbook_dot_xml=None), "cannot be read"),
        (saved(openpyxl.Workbook()), "holds no plan"),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)  # fmt: skip
def test_a_hostile_or_foreign_file_is_refused_in_one_sentence(data: bytes, said: str) -> None:
    message = refused(data)
    assert said in message
    assert "\n" not in message


def test_a_part_that_unpacks_to_more_than_it_says_is_cut_there() -> None:
    large = b"<worksheet>" + b" " * 3_000_000 + b"</worksheet>"
    data = bytearray(parts(template.to_bytes(), xl__worksheets__sheet3_dot_xml=large))
    with zipfile.ZipFile(io.BytesIO(bytes(data))) as archive:
        size = archive.getinfo("xl/worksheets/sheet3.xml").file_size.to_bytes(4, "little")
    while size in data:
        at = data.index(size)
        data[at : at + 4] = (9).to_bytes(4, "little")
    assert "cannot be read" in refused(bytes(data))


def test_a_sheet_that_claims_a_million_rows_ends_at_the_limit() -> None:
    book = filled()
    book["Loads"].cell(1_048_576, 16_384, "far away")
    assert workbook_plan.read(saved(book)).faults == ()
    book["Loads"].cell(workbook_cells.ROWS_LIMIT + 1, 2, "too far")
    assert "has more than 20000 rows" in refused(saved(book))


def test_formulas_are_never_calculated_and_their_errors_are_told() -> None:
    book = filled()
    book["Loads"]["D3"].value = '=HYPERLINK("http://x","20 W")'
    said = refused(saved(book))
    assert 'sheet "Loads", row 3, column D: is a formula without a stored result' in said
    book["Loads"]["D3"].value = "#REF!"
    book["Loads"]["D3"].data_type = "e"
    assert "is an error of a formula" in refused(saved(book))


def test_macros_and_links_of_a_workbook_are_not_looked_at() -> None:
    data = parts(
        saved(filled()), xl__vbaProject_dot_bin=b"\0macro", xl__externalLinks__externalLink1_dot_xml=b"<not xml"
    )
    assert workbook_plan.read(data).faults == ()


@settings(max_examples=12, deadline=None)
@given(st.one_of(st.text(max_size=40), st.integers(-(10**9), 10**9), st.decimals(-(10**6), 10**6, places=3).map(float)))
def test_whatever_stands_in_a_cell_is_only_text(value: Any) -> None:
    clean = "".join(one for one in value if one.isprintable()) if isinstance(value, str) else value
    book = filled()
    cell = book["Loads"]["B3"]
    cell.value, cell.data_type = clean, "s" if isinstance(clean, str) else "n"
    found = workbook_plan.read(saved(book))
    written = [load.get("name") for load in edits.read(found.text)["loads"]]
    expected = clean.strip() if isinstance(clean, str) else workbook_cells.text_of(clean)
    assert written[0] == (expected or None)


def test_the_command_writes_the_template_and_reads_it_back(tmp_path: Path) -> None:
    run = CliRunner().invoke
    blank, full, plan = tmp_path / "blank.xlsx", tmp_path / "full.xlsx", tmp_path / "plan.toml"
    assert run(main, ["import", "--template", "-o", str(blank)]).exit_code == 0
    assert openpyxl.load_workbook(blank)["Cable runs"]["C1"].value == "Name"
    assert run(main, ["import", "--template", "-o", str(blank)]).exit_code == 2
    full.write_bytes(saved(filled(cases=CASES)))
    assert run(main, ["import", str(full), "-o", str(plan)]).exit_code == 0
    assert planfile.read(plan).plan.plan.name == "Hut"
    again = run(main, ["import", str(full), "-o", str(plan)])
    assert again.exit_code == 2
    assert "exists already" in again.stderr
    assert run(main, ["import", str(full), "-o", "-"]).stdout == plan.read_text()
    for wrong in (["import", "-o", "x.toml"], ["import", str(full), "--template", "-o", "x.xlsx"],
                  ["import", str(full), "-o", str(tmp_path / "x.txt")],
                  ["import", str(tmp_path / "none.xlsx"), "-o", "x.toml"]):  # fmt: skip
        done = run(main, wrong)
        assert done.exit_code == 2
        assert "Traceback" not in done.output


def test_the_schedule_that_the_command_exports_is_read_back(tmp_path: Path) -> None:
    plan, book, back = tmp_path / "plan.toml", tmp_path / "cables.xlsx", tmp_path / "back.toml"
    plan.write_text(VAN)
    CliRunner().invoke(main, ["schedule", str(plan), "-o", str(book)])
    done = CliRunner().invoke(main, ["import", str(book), "-o", str(back)])
    assert done.exit_code == 0
    assert back.read_text() == VAN
    assert "Other changes on the sheets are not read back" in done.stderr


def test_rows_are_pasted_with_headings_or_in_order() -> None:
    shown = list(columns.ZONES.columns)
    assert tables.pasted("cabin\t30 degC\tno\n", columns.ZONES, shown) == [
        {"name": "cabin", "ambient": "30 degC", "engine_space": "no"}
    ]
    assert tables.pasted("Ambient,Name\n30 degC,cabin\n\n", columns.ZONES, shown) == [
        {"ambient": "30 degC", "name": "cabin"}
    ]
