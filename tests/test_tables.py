"""The editor's tables: entries to cells and back, and what the pages show of a study."""

import math
import re
from pathlib import Path
from typing import Any

import pytest

from farvolt import examples, plan, planfile
from farvolt.results import Study
from farvolt.study import study
from farvolt_app import case_grid, columns, draft, edits, keep, shown, tables
from farvolt_app.columns import Sheet
from farvolt_app.edits import Set
from farvolt_app.server import FOLDER_VARIABLE

VAN = examples.text("instrument-repair-van")
TEXTS = {name: examples.text(name) for name in examples.names()} | {"starter": examples.starter_text()}
MODELS: dict[str, type[plan.Entry]] = {
    "runs": plan.Run, "loads": plan.Load, "batteries": plan.Battery, "chargers": plan.Charger, "solar": plan.Solar,
    "converters": plan.Converter, "devices": plan.Device, "zones": plan.Zone, "routes": plan.Route,
    "points": plan.Point,
}  # fmt: skip


def changed(text: str, sheet: Sheet, **delta: Any) -> dict[str, Any]:
    """The plan's tables after what the editor reports."""
    raw = edits.read(text)
    return edits.read(edits.apply(text, tables.steps(raw, sheet, delta)))


@pytest.mark.parametrize("sheet", columns.SHEETS, ids=lambda sheet: sheet.id)
def test_every_field_of_the_file_has_its_column(sheet: Sheet) -> None:
    model = MODELS[sheet.id]
    in_file = {info.alias or name for name, info in model.model_fields.items()} - {"kind" if sheet.kind else "", "name"}
    shown_fields = {column.path[0] for column in sheet.columns} - {"name"}
    assert shown_fields == in_file


@pytest.mark.parametrize(
    ("table", "shown", "in_text"),
    [(plan.Site, columns.SITE, {"clearness"}), (plan.Bank, columns.BANK, set())],
    ids=["site", "bank"],
)
def test_tables_that_are_there_once_have_a_setting_for_each_field(
    table: type[plan.Entry], shown: tuple[columns.Column, ...], in_text: set[str]
) -> None:
    assert {column.path[0] for column in shown} == set(table.model_fields) - in_text


@pytest.mark.parametrize("sheet", columns.SHEETS, ids=lambda sheet: sheet.id)
def test_every_column_has_a_hint_and_a_heading_of_its_own(sheet: Sheet) -> None:
    labels = [column.label for column in sheet.columns]
    assert len(set(labels)) == len(labels)
    assert all(column.hint.endswith(".") for column in sheet.columns)


@pytest.mark.parametrize("text", TEXTS.values(), ids=TEXTS)
@pytest.mark.parametrize("sheet", columns.SHEETS, ids=lambda sheet: sheet.id)
def test_writing_every_cell_back_changes_nothing_that_a_plan_holds(text: str, sheet: Sheet) -> None:
    raw = edits.read(text)
    cells = {
        row: {name: value for name, value in cells.items() if name != "name"}
        for row, cells in enumerate(tables.rows(raw, sheet))
    }
    assert changed(text, sheet, edited_rows=cells) == raw


def test_cells_show_the_text_as_it_was_written() -> None:
    row = tables.rows(edits.read(VAN), columns.RUNS)[7]
    assert (row["name"], row["length"], row["protection.rating"]) == ("fridge feed", "6.5 m", "10 A")
    assert row["zone"] is None
    zone = next(row for row in tables.rows(edits.read(VAN), columns.ZONES) if row["name"] == "engine")
    assert zone == {"name": "engine", "ambient": "60 degC", "engine_space": "yes"}


@pytest.mark.parametrize(
    ("cell", "kind", "expected"),
    [
        ("2", "count", 2), ("two", "count", "two"), ("2.5", "count", 2.5), ("2.5", "number", 2.5),
        ("yes", "flag", True), ("no", "flag", False), ("perhaps", "flag", "perhaps"), ("2", "text", "2"),
        ("", "text", None), ("  ", "count", None), (None, "text", None), ("1e400", "number", "1e400"),
        ("a, b,", "list", ["a", "b"]), ("nan", "number", "nan"),
    ],
)  # fmt: skip
def test_a_cell_is_typed_as_the_file_holds_it_and_kept_where_it_cannot_be(cell: Any, kind: Any, expected: Any) -> None:
    found = tables.typed(cell, columns.Column(("x",), "X", "X.", kind))
    assert found == expected
    assert type(found) is type(expected)


def test_edits_removals_and_new_rows_in_one_go() -> None:
    after = changed(
        VAN, columns.CHARGERS, edited_rows={1: {"volts": "14 V", "amps": None}}, deleted_rows=[0],
        added_rows=[{"name": "dock", "at": "main bus", "self_limiting": "yes"}, {}],
    )["sources"]  # fmt: skip
    assert [source["name"] for source in after] == ["house bank", "mains charger", "roof panels", "dock"]
    assert after[1] == {
        "name": "mains charger", "kind": "charger", "at": "mains charger", "volts": "14 V", "self_limiting": True,
    }  # fmt: skip
    assert after[3] == {"name": "dock", "at": "main bus", "self_limiting": True, "kind": "charger"}


def test_a_new_zone_without_a_name_gets_one() -> None:
    rows = [{"ambient": "1 degC"}, {"ambient": "2 degC"}, {"name": "cabin", "ambient": "3 degC"}]
    zones = changed(VAN, columns.ZONES, added_rows=rows)["zones"]
    assert list(zones) == ["cabin", "engine", "roof", "new zone", "new zone 2", "cabin 2"]


def test_a_zone_is_renamed_with_its_other_edits() -> None:
    after = changed(VAN, columns.ZONES, edited_rows={0: {"name": "salon", "ambient": "33 degC"}})
    assert after["zones"]["salon"] == {"ambient": "33 degC"}
    assert after["runs"][10]["zone"] == "salon"


def test_of_several_protections_the_first_is_edited_and_the_rest_is_mentioned() -> None:
    both = [{"type": "blade", "rating": "10 A"}, {"type": "blade", "rating": "5 A", "end": "to"}]
    text = VAN.replace(
        'protection = { type = "cartridge", rating = "100 A", distance = "0.1 m" }',
        'protection = [{ type = "blade", rating = "10 A" }, { type = "blade", rating = "5 A", end = "to" }]',
    )
    assert edits.read(text)["runs"][0]["protection"] == both
    assert tables.hidden_protection(edits.read(text)) == ["bank main"]
    after = changed(text, columns.RUNS, edited_rows={0: {"protection.rating": "7.5 A"}})
    assert after["runs"][0]["protection"] == [{**both[0], "rating": "7.5 A"}, both[1]]


def test_rare_columns_show_when_asked_for_or_filled_in() -> None:
    raw = edits.read(VAN)
    short = {column.id for column in tables.columns(raw, columns.RUNS, everything=False)}
    assert {"name", "length", "protection_to.rating", "joints"} <= short
    assert "colour" not in short
    assert "colour" in {column.id for column in tables.columns(raw, columns.RUNS, everything=True)}


def test_choices_follow_the_plan() -> None:
    raw = edits.read(VAN)
    by_id = {column.id: column for column in (*columns.RUNS.columns, *columns.LOADS.columns)}
    assert tables.choices(raw, by_id["zone"], ()) == ("cabin", "engine", "roof")
    assert tables.choices(raw, by_id["class"], ("critical", "other")) == ("critical", "other")
    assert tables.choices(raw, by_id["sheathed"], ()) == ("yes", "no")
    assert tables.choices(raw, by_id["length"], ()) == ()


@pytest.mark.parametrize(
    "text", ['format = 1\nruns = "x"\nzones = 3', "format = 1\nruns = [1, 2]", "format = 1\nloads = {}"]
)
def test_tables_of_the_wrong_shape_are_shown_without_failing(text: str) -> None:
    raw = edits.read(text)
    for sheet in columns.SHEETS:
        assert tables.columns(raw, sheet, everything=True)
        assert all(isinstance(row, dict) for row in tables.rows(raw, sheet))
    assert all(isinstance(row, dict) for row in case_grid.rows(raw))


# Cases -------------------------------------------------------------------------------------------------------


def cell(text: str, label: str, case: int) -> str | None:
    """A cell of the table of cases."""
    raw = edits.read(text)
    return next(row[case_grid.column_id(case)] for row in case_grid.rows(raw) if row[case_grid.WHAT] == label)


def set_cell(text: str, label: str, case: int, value: str | None) -> str:
    """The text after one cell of the table of cases was changed."""
    raw = edits.read(text)
    row = [line.label for line in case_grid.lines(raw)].index(label)
    return edits.apply(text, case_grid.steps(raw, {"edited_rows": {row: {case_grid.column_id(case): value}}}))


def test_cases_are_shown_by_load_source_and_device() -> None:
    assert cell(VAN, "Load: table outlet", 0) == "0.5"
    assert cell(VAN, "Load: fridge", 2) == "1"  # all loads are on
    assert cell(VAN, "Load: fridge", 3) is None
    assert cell(VAN, "Source: house bank (charge, such as 50 %)", 0) == "15 %"
    assert cell(VAN, "Source: house bank (on, off, full)", 3) == "full"
    assert cell(VAN, "Source: mains charger (on, off)", 0) == "off"
    assert cell(VAN, "Source: roof panels (sun, such as 100 %)", 1) == "50 %"


@pytest.mark.parametrize(
    ("typed", "share"), [("0.25", 0.25), ("25 %", 0.25), ("on", 1.0), ("1", 1.0), ("half", "half")]
)
def test_the_share_of_a_load(typed: str, share: Any) -> None:
    after = edits.read(set_cell(VAN, "Load: fridge", 0, typed))
    assert after["cases"][0]["loads"]["fridge"] == share


@pytest.mark.parametrize("typed", ["off", "0", "", None])
def test_a_load_switched_off_in_a_case_of_all_leaves_the_others_on(typed: str | None) -> None:
    after = planfile.parse(set_cell(VAN, "Load: fridge", 2, typed))
    shares = {load.name: after.cases[2].share(load.name) for load in after.loads}
    assert shares.pop("fridge") == 0
    assert set(shares.values()) == {1.0}


def test_states_of_sources_and_devices_are_written_so_that_the_plan_stays_valid() -> None:
    text = set_cell(VAN, "Source: mains charger (on, off)", 0, "on")
    text = set_cell(text, "Source: house bank (on, off, full)", 0, "off")
    text = set_cell(text, "Device: bank switch (closed, open)", 0, "open")
    text = set_cell(text, "Ambient instead of the zones'", 1, "5 degC")
    case = planfile.parse(text).cases[0]
    assert case.sources["mains charger"].state == "on"
    assert (case.sources["house bank"].state, case.sources["house bank"].charge) == (
        "off",
        planfile.parse(VAN).cases[0].sources["house bank"].charge,
    )
    assert case.devices == {"bank switch": "open"}


def test_what_a_case_says_beyond_the_usual_gets_a_row() -> None:
    text = edits.apply(VAN, [Set("cases", 0, ("sources", "house bank", "emf"), "12.5 V")])
    assert cell(text, "Source: house bank (rest voltage)", 0) == "12.5 V"


def test_what_starts_in_a_case_is_a_list_with_commas() -> None:
    label = "Starting: loads that draw their surge (with commas)"
    text = set_cell(VAN, label, 2, " water pump, bench outlets ,")
    assert planfile.parse(text).cases[2].surge == ("water pump", "bench outlets")
    assert cell(text, label, 2) == "water pump, bench outlets"
    assert planfile.parse(set_cell(text, label, 2, " ")).cases[2].surge == ()


@pytest.mark.parametrize("text", [VAN, examples.text("bird-observatory-cabin"), examples.starter_text()])
def test_the_standard_cases_put_into_a_plan_are_what_was_checked_without(text: str) -> None:
    bare = edits.apply(text, [edits.Remove("cases", 0) for _ in edits.read(text).get("cases", ())])
    expected = planfile.parse(bare).checked_cases
    after = planfile.parse(edits.apply(bare, case_grid.standard(planfile.parse(bare))))
    assert after.cases == expected


def test_a_new_case_has_all_loads_on() -> None:
    after = planfile.parse(edits.apply(VAN, [case_grid.new_case(edits.read(VAN))]))
    assert (after.cases[-1].name, after.cases[-1].loads) == ("New case", "all")


# What is shown -----------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def van() -> Study:
    return study(planfile.parse(VAN))


def test_the_worst_case_of_a_load_is_the_one_with_its_largest_drop(van: Study) -> None:
    for index, row in enumerate(shown.load_rows(van, None)):
        drops = [case.loads[index].drop_percent or 0.0 for case in van.cases if case.loads[index].amps]
        assert row["Drop (%)"] == max(drops)
    for index, row in enumerate(shown.run_rows(van, None)):
        amps = [max(abs(case.runs[index].feed_A or 0.0), abs(case.runs[index].return_A or 0.0)) for case in van.cases]
        assert row["Current (A)"] == max(amps)


def test_one_case_shows_that_case(van: Study) -> None:
    assert [row["Volts (V)"] for row in shown.load_rows(van, 1)] == [one.volts for one in van.cases[1].loads]
    assert {row["Case"] for row in shown.run_rows(van, 1)} == {van.cases[1].name}


def test_findings_stand_beside_their_subject_in_words(van: Study) -> None:
    fails = [one for one in van.findings if one.severity == "fail" and one.kind == "run"]
    assert fails
    for one in fails:
        row = next(row for row in shown.run_rows(van, None) if row["Run"] == one.subject)
        assert f"FAIL: {one.rule}" in row["Findings"]
    assert [row["Severity"] for row in shown.finding_rows(van.findings)] == [
        {"fail": "FAIL", "warn": "doubtful", "note": "note"}[one.severity] for one in van.findings
    ]


def test_every_load_is_shown_with_a_finite_number_or_none(van: Study) -> None:
    for row in (*shown.load_rows(van, None), *shown.point_rows(van.cases[0]), *shown.source_rows(van.cases[0])):
        assert all(value is None or math.isfinite(value) for value in row.values() if not isinstance(value, str))


@pytest.mark.parametrize(
    "text",
    [":red[x]", "**b**", "`c`", "$a$", "<b>", "[l](http://x.org)", "# h", "1. x", "- x", "a | b", "~~s~~", "&lt;",
     ":material/bolt:", "\\", "http://x.org", "    code", "a\nb", "--", "x_y_", "> q", "www.x.org", "a@b.org"],
)  # fmt: skip
def test_plain_text_is_shown_as_it_is_by_a_page_that_reads_markdown(text: str) -> None:
    written = shown.plain(text)
    assert "\n" not in written
    assert not written.startswith(" ")
    # Every mark that Markdown gives a meaning to stands behind a backslash, and nothing else was changed.
    assert re.sub(r"\\(.)", r"\1", written) == " ".join(text.split())
    assert not re.search(r"[*_`$<>\[\]()#|~:&@\\-]", re.sub(r"\\.", "", written))


# Drafts kept while the pages are served ----------------------------------------------------------------------


def test_a_kept_draft_comes_back_with_its_text_faults_file_and_last_results(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv(FOLDER_VARIABLE, str(tmp_path))
    file = tmp_path / "van.toml"
    faulty = edits.apply(VAN, [Set("runs", 7, ("length",), "9")])
    before = draft.begin(VAN).save(file).edit(faulty)
    name = keep.new_name()
    keep.keep(name, before)
    after = keep.kept(name)
    assert after is not None
    assert (after.text, after.faults, after.path, after.stamp) == (faulty, before.faults, file, before.stamp)
    assert after.results is not None
    assert after.plan == before.plan


@pytest.mark.parametrize("name", ["", "../../etc/passwd", "a" * 31, "A" * 32, "0" * 32])
def test_no_other_file_can_be_had_by_a_name(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv(FOLDER_VARIABLE, str(tmp_path))
    assert keep.kept(name) is None
    (tmp_path / f"{'0' * 32}.json").write_text("{")
    assert keep.kept("0" * 32) is None


def test_without_a_folder_nothing_is_kept(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv(FOLDER_VARIABLE, raising=False)
    name = keep.new_name()
    keep.keep(name, draft.begin(VAN))
    assert keep.kept(name) is None
