"""The pages, driven without a browser: what is asserted is what a person would read."""

import re
import socket
from pathlib import Path
from typing import Any

import pytest
from streamlit.testing.v1 import AppTest

from farvolt import examples, planfile
from farvolt_app import columns, edits, tables
from farvolt_app.edits import Set
from farvolt_app.server import ENTRY, PLAN_VARIABLE

VAN = examples.text("instrument-repair-van")
FRIDGE_FEED = 7
HOSTILE = ":red[x] **b** `c` $d$ <img src=x onerror=alert(1)> [l](http://x) # h | e ~~s~~ :material/bolt: {f}"


@pytest.fixture(autouse=True)
def _no_network(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv(PLAN_VARIABLE, raising=False)

    def refuse(*_args: Any, **_kwargs: Any) -> None:
        raise AssertionError("the pages must not open connections")

    monkeypatch.setattr(socket.socket, "connect", refuse)


@pytest.fixture
def page() -> AppTest:
    return started()


def started() -> AppTest:
    """A new browser session on the first page."""
    at = AppTest.from_file(str(ENTRY), default_timeout=60).run()
    assert not at.exception
    return at


def choose(at: AppTest, title: str) -> AppTest:
    """Choose one of the editor's tables."""
    at.segmented_control(key="table").set_value(title).run()
    assert not at.exception
    return at


def write(at: AppTest, text: str) -> AppTest:
    """Replace the whole text of the plan."""
    if at.segmented_control(key="table").value != "Text":
        choose(at, "Text")
    at.text_area[0].set_value(text).run()
    assert not at.exception
    return at


def table(at: AppTest, column: str) -> Any:
    """The table on the page that has such a column."""
    return next(one.value for one in at.dataframe if column in one.value.columns)


def volts(at: AppTest) -> dict[str, float]:
    """Volts of each load as the results show them."""
    found = table(at, "Load")
    return dict(zip(found["Load"], found["Volts (V)"], strict=True))


def longer(length: str) -> str:
    """The van with another length of its fridge feed."""
    return edits.apply(VAN, [Set("runs", FRIDGE_FEED, ("length",), length)])


def everything(at: AppTest) -> str:
    """All text that the page shows outside its tables."""
    kinds = (at.markdown, at.caption, at.subheader, at.info, at.error, at.warning, at.text, at.button, at.expander)
    return "\n".join(str(getattr(one, "value", "")) + str(getattr(one, "label", "")) for kind in kinds for one in kind)


def test_the_first_page_shows_an_example_with_its_results(page: AppTest) -> None:
    assert page.subheader[0].value == r"Instrument\-repair van"
    assert table(page, "Load")["Load"].tolist()[0] == "fridge"
    editor = page.data_editor[0].value
    assert editor["length"][FRIDGE_FEED] == "6.5 m"
    assert "failing" in everything(page)


@pytest.mark.parametrize("name", examples.names())
def test_each_example_and_each_table_can_be_shown(page: AppTest, name: str) -> None:
    page.button(key=f"open-{name}").click().run()
    raw = edits.read(examples.text(name))
    for sheet in columns.SHEETS:
        choose(page, sheet.title)
        shown = page.data_editor[0].value
        expected = raw.get(sheet.table, [])
        if sheet.kind:
            expected = [row for row in expected if row["kind"] == sheet.kind]
        assert len(shown) == len(expected)
    choose(page, "Cases")
    assert page.data_editor[0].value.iloc[0, 1:].tolist() == [case["name"] for case in raw["cases"]]


def test_the_standard_cases_are_taken_into_a_plan_that_states_none(page: AppTest) -> None:
    bare = examples.starter_text()
    write(page, bare)
    choose(page, "Cases")
    assert "Everything on, low charge" in page.info[0].value
    page.button(key="add_standard_cases").click().run()
    assert not page.exception
    names = [case.name for case in planfile.parse(bare).checked_cases]
    assert page.data_editor[0].value.iloc[0, 1:].tolist() == names
    assert not [one for one in page.button if one.key == "add_standard_cases"]


def test_a_longer_cable_lowers_the_volts_and_undo_brings_them_back(page: AppTest) -> None:
    before = volts(page)["fridge"]
    write(page, longer("9 m"))
    assert volts(page)["fridge"] < before
    page.button(key="undo").click().run()
    assert volts(page)["fridge"] == before
    page.button(key="redo").click().run()
    assert volts(page)["fridge"] < before
    assert page.button(key="redo").disabled


def test_a_wrong_cell_keeps_its_text_is_named_and_leaves_the_results(page: AppTest) -> None:
    before = volts(page)
    write(page, longer("9"))
    assert "cannot be used yet" in page.error[0].value
    fault = table(page, "What is wrong").iloc[0]
    assert (fault["Where"], fault["Field"], fault["Did you mean"]) == ('runs "fridge feed"', "length", '"9 m"')
    assert volts(page) == before
    choose(page, "Cable runs")
    assert page.data_editor[0].value["length"][FRIDGE_FEED] == "9"
    choose(page, "Text")
    assert page.text_area[0].value == longer("9")


def test_text_that_is_not_toml_can_be_undone_and_nothing_is_lost(page: AppTest) -> None:
    write(page, VAN + "\n[[runs")
    assert page.error
    choose(page, "Cable runs")
    assert "cannot be shown" in page.warning[0].value
    page.button(key="undo").click().run()
    assert not page.error
    assert len(page.data_editor[0].value) == 27


def test_a_setting_changes_the_plan(page: AppTest) -> None:
    choose(page, "Settings")
    page.selectbox[0].set_value("cabin-iec").run()
    assert edits.read(page.session_state["draft"].text)["plan"]["rulebook"] == "cabin-iec"
    page.text_input(key=f"plan.name-{page.session_state['revision']}").set_value(HOSTILE).run()
    assert page.session_state["draft"].plan.plan.name == HOSTILE
    assert not page.exception


def test_a_file_is_opened_saved_and_kept_from_others(page: AppTest, tmp_path: Path) -> None:
    file = tmp_path / "plan.toml"
    file.write_text(examples.starter_text())
    open_file(page, str(file))
    assert page.subheader[0].value == "My plan"
    write(page, examples.starter_text().replace('"My plan"', '"Ours"'))
    page.button(key="save_file").click().run()
    assert planfile.read(file).plan.plan.name == "Ours"
    assert "Saved as" in page.info[0].value
    file.write_text("somebody else's")
    write(page, examples.starter_text())
    page.button(key="save_file").click().run()
    assert r"changed on disk" in page.info[0].value
    assert file.read_text() == "somebody else's"


def open_file(at: AppTest, path: str) -> AppTest:
    """Open a plan by its path."""
    at.text_input(key="path").set_value(path)
    at.button(key="open_file").click().run()
    assert not at.exception
    return at


@pytest.mark.parametrize("path", ["/no/such/plan.toml", "/", "", "\0", "x" * 5000])
def test_what_cannot_be_opened_is_said_and_the_plan_stays(page: AppTest, path: str) -> None:
    open_file(page, path)
    assert page.info[0].value
    assert page.subheader[0].value == r"Instrument\-repair van"


def test_a_faulty_file_is_said_in_full_and_can_be_opened_all_the_same(page: AppTest, tmp_path: Path) -> None:
    file = tmp_path / "faulty.toml"
    file.write_text(longer("9").replace("10 mm2", "11 mm2"))
    open_file(page, str(file))
    assert page.info[0].value.count("line ") >= 3
    assert page.subheader[0].value == r"Instrument\-repair van"
    page.button(key="open_faulty").click().run()
    assert table(page, "What is wrong")["Line"].notna().all()
    assert "no results yet" in page.info[0].value
    for script in ("drawing_page.py", "findings_page.py", "protection_page.py", "bank_page.py", "schedule_page.py"):
        page.switch_page(script).run()
        assert not page.exception
        assert "no results yet" in page.info[0].value


def test_the_guided_start_makes_a_plan_to_go_on_with(page: AppTest) -> None:
    page.switch_page("start_page.py").run()
    assert not page.exception
    page.text_input[[one.label for one in page.text_input].index("Name of the plan")].set_value("Cottage on wheels")
    page.button[[one.label for one in page.button].index("Make the plan")].click().run()
    assert not page.exception
    draft = page.session_state["draft"]
    assert draft.plan.plan.name == "Cottage on wheels"
    assert draft.plan.loads[0].name == "compressor fridge"
    assert not [one for one in draft.results.findings if one.rule == "protection.missing" and one.severity == "fail"]


@pytest.mark.parametrize(
    "script", ["drawing_page.py", "findings_page.py", "protection_page.py", "bank_page.py", "schedule_page.py"]
)
def test_every_page_shows_its_tables(page: AppTest, script: str) -> None:
    page.switch_page(script).run()
    assert not page.exception
    assert len(page.dataframe) >= 1


def test_a_finding_shows_working_basis_and_remedy(page: AppTest) -> None:
    page.switch_page("findings_page.py").run()
    study = page.session_state["draft"].results
    assert page.text[0].value.startswith(study.findings[0].message)
    for line in (*study.findings[0].working, study.findings[0].basis, study.findings[0].remedy):
        assert line in page.text[0].value
    assert page.expander[0].label.startswith("**FAIL**")
    page.button_group(key="severities").set_value(["note"]).run()
    assert {one.label.split(":")[0] for one in page.expander} == {"**note**"}


def test_edits_are_there_after_a_look_at_another_page(page: AppTest) -> None:
    write(page, longer("9 m"))
    page.switch_page("findings_page.py").run()
    page.switch_page("plan_page.py").run()
    choose(page, "Cable runs")
    assert page.data_editor[0].value["length"][FRIDGE_FEED] == "9 m"


def test_two_sessions_never_see_each_others_plan(page: AppTest) -> None:
    other = started()
    write(page, longer("9 m"))
    other.button(key="open-bird-observatory-cabin").click().run()
    assert page.run().subheader[0].value == r"Instrument\-repair van"
    assert "bed outlet" in volts(page)
    assert "bed outlet" not in volts(other)
    assert other.session_state["draft"].text == examples.text("bird-observatory-cabin")


def test_the_plan_that_the_command_named_is_opened(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    file = tmp_path / "named.toml"
    file.write_text(examples.starter_text())
    monkeypatch.setenv(PLAN_VARIABLE, str(file))
    assert started().subheader[0].value == "My plan"
    monkeypatch.setenv(PLAN_VARIABLE, str(tmp_path / "gone.toml"))
    assert "no such file" in started().info[0].value


def test_text_from_a_plan_is_only_text(page: AppTest) -> None:
    text = VAN
    for table in ("sources", "runs", "loads", "devices", "cases"):
        for index in range(len(edits.read(text)[table])):
            text = edits.apply(text, edits.renaming(edits.read(text), table, index, f"{HOSTILE} {table} {index}"))
    write(page, edits.apply(text, [Set("plan", None, ("name",), HOSTILE)]))
    assert not page.error
    for script in ("plan_page.py", "findings_page.py", "drawing_page.py", "schedule_page.py"):
        page.switch_page(script).run()
        assert not page.exception
        shown = everything(page)
        kept_as_text = "\n".join(str(one.value) for one in page.text)
        for markup in ("<img", ":red[", "`c`", "](http", ":material/", "~~s", "**b**"):
            assert not re.search(r"(?<!\\)" + re.escape(markup), shown.replace(kept_as_text, ""))


def test_the_bank_is_sized_anew_when_a_setting_of_it_changes(page: AppTest) -> None:
    choose(page, "Settings")
    field = next(one for one in page.text_input if one.label == "Days of autonomy")
    assert field.value == "1"
    field.set_value("3").run()
    assert not page.exception
    assert page.session_state["draft"].results.plan.bank.autonomy == 3
    page.switch_page("bank_page.py").run()
    assert not page.exception
    assert any(one.label.startswith("**FAIL**") and "the plan asks for 3" in one.label for one in page.expander)


def arrange(at: AppTest, row: int, button: str) -> AppTest:
    """Press a button for one entry of the table shown."""
    box = next(one for one in at.selectbox if str(one.key).startswith("arranged-"))
    box.set_value(row).run()
    at.button(key=button).click().run()
    assert not at.exception
    return at


def names_in(at: AppTest, table: str) -> list[str]:
    """The names of a table's entries as the draft's text holds them."""
    return [row["name"] for row in edits.read(at.session_state["draft"].text)[table]]


def test_an_entry_is_moved_up_and_down_and_duplicated_under_a_name_counted_on(page: AppTest) -> None:
    before = names_in(page, "runs")
    arrange(page, 2, "move_up")
    assert names_in(page, "runs")[:3] == [before[0], before[2], before[1]]
    page.button(key="move_down").click().run()  # the entry stays chosen where it went
    assert names_in(page, "runs") == before
    choose(page, "Loads")
    arrange(page, names_in(page, "loads").index("ceiling lamp 1"), "duplicate_entry")
    loads = names_in(page, "loads")
    assert loads[loads.index("ceiling lamp 1") + 1] == next(
        f"ceiling lamp {n}" for n in range(2, 99) if f"ceiling lamp {n}" not in names_in(started(), "loads")
    )
    choose(page, "Chargers")
    box = next(one for one in page.selectbox if one.key == "arranged-chargers")
    assert len(box.options) == len(page.data_editor[0].value)


def test_the_first_entry_cannot_go_up_nor_the_last_down(page: AppTest) -> None:
    choose(page, "Batteries")
    assert page.button(key="move_up").disabled
    assert page.button(key="move_down").disabled


def test_points_are_offered_and_a_new_one_joins_them(page: AppTest) -> None:
    offered = edits.read(VAN)
    assert page.toggle(key="choose_points").value is True
    page.text_input(key="new_point").set_value("awning").run()
    assert not page.exception
    assert page.session_state["new_points"] == ("awning",)
    assert "awning" not in tables.points(offered)
    page.toggle(key="choose_points").set_value(False).run()
    assert not [one for one in page.text_input if one.key == "new_point"]


def test_rows_copied_from_a_spreadsheet_are_added(page: AppTest) -> None:
    head, row = "Name\tFrom point\tTo point\tLength\tSize", "awning feed\tmain bus\tawning\t3 m\t4 mm2"
    page.text_area(key="pasted").set_value(f"{head}\n{row}")
    page.button(key="add_pasted").click().run()
    assert not page.exception
    assert page.info[0].value == r"One row added\."
    added = edits.read(page.session_state["draft"].text)["runs"][-1]
    assert added == {"name": "awning feed", "from": "main bus", "to": "awning", "length": "3 m", "size": "4 mm2"}
    page.text_area(key="pasted").set_value("Name\tFrom point\tLenght\nx\ty\tz")
    page.button(key="add_pasted").click().run()
    assert "Lenght" in page.info[0].value
    assert "Length" in page.info[0].value
    assert len(names_in(page, "runs")) == len(edits.read(VAN)["runs"]) + 1


def test_edits_are_not_lost_unasked_when_another_plan_is_opened(page: AppTest) -> None:
    page.button(key="open-bird-observatory-cabin").click().run()
    assert not page.warning  # nothing was edited
    write(page, page.session_state["draft"].text + "\n# mine\n")
    page.button(key="open-instrument-repair-van").click().run()
    assert "not saved" in page.warning[0].value
    assert page.session_state["draft"].text.endswith("# mine\n")
    page.button(key="keep_editing").click().run()
    assert not page.warning
    page.button(key="open-instrument-repair-van").click().run()
    page.button(key="open_waiting").click().run()
    assert page.session_state["draft"].text == VAN
    assert not page.warning


def test_autosave_writes_each_valid_change_and_keeps_what_was_there_before(page: AppTest, tmp_path: Path) -> None:
    file = tmp_path / "plan.toml"
    first = examples.starter_text()
    file.write_text(first)
    open_file(page, str(file))
    next(one for one in page.toggle if str(one.key).startswith("autosave")).set_value(True).run()
    for name in ("One", "Two"):
        write(page, first.replace('"My plan"', f'"{name}"'))
        assert planfile.read(file).plan.plan.name == name
    write(page, "faulty")
    assert planfile.read(file).plan.plan.name == "Two"
    assert (tmp_path / "plan.toml.previous").read_text() == first
    file.write_text("somebody else's")
    write(page, first)
    assert "Autosave is off now" in page.info[0].value
    assert file.read_text() == "somebody else's"
    assert page.session_state["draft"].text == first
    assert not page.session_state["draft"].autosave


def test_plans_stand_side_by_side_with_what_differs(page: AppTest, tmp_path: Path) -> None:
    file = tmp_path / "other.toml"
    file.write_text(examples.starter_text())
    write(page, longer("9 m"))
    page.switch_page("compare_page.py").run()
    assert not page.exception
    assert "Choose one or more plans" in page.info[0].value
    box = page.multiselect(key="compared")
    box.set_value(["this plan before its edits", str(file)]).run()
    assert not page.exception
    figures = page.dataframe[0].value
    assert figures["Plan"].tolist() == ["this plan", "this plan before its edits", str(file)]
    changed = table(page, "Change").iloc[0]
    assert (changed["Name"], changed["Field"], changed["Before"], changed["After"]) == (
        "fridge feed", "length", "6.5 m", "9 m")  # fmt: skip
    page.multiselect(key="compared").set_value([str(tmp_path / "none.toml")]).run()
    assert "no such file" in page.warning[0].value


def test_a_workbook_is_opened_as_an_unsaved_plan_and_its_faults_are_told_by_cell(page: AppTest) -> None:
    from farvolt.study import study
    from farvolt_app import template, workbook

    exported = workbook.to_bytes(study(planfile.parse(longer("9 m")), margins=False), text=longer("9 m"))
    page.file_uploader[0].set_value(("cables.xlsx", exported, "application/zip")).run()
    assert not page.exception
    assert page.session_state["draft"].text == longer("9 m")
    assert not page.session_state["draft"].saved
    page.file_uploader[0].set_value(("empty.xlsx", template.to_bytes(), "application/zip")).run()
    assert not page.exception
    assert "Settings" in page.info[0].value
    page.file_uploader[0].set_value(("bomb.xlsx", b"PK\x03\x04", "application/zip")).run()
    assert "is not a workbook" in page.info[0].value
    assert page.session_state["draft"].text == longer("9 m")


def test_results_in_american_units_are_the_same_lengths_and_temperatures(page: AppTest) -> None:
    page.switch_page("schedule_page.py").run()
    metric = table(page, "Length one way (m)")
    assert "Length one way (ft)" not in metric.columns
    page.button_group(key="units").set_value("american").run()
    assert not page.exception
    american = table(page, "Length one way (ft)")
    assert "Length one way (m)" not in american.columns
    # 1 ft = 0.3048 m and 9/5 of a degree, by definition.
    assert american["Length one way (ft)"].tolist() == pytest.approx((metric["Length one way (m)"] / 0.3048).tolist())
    assert american["Insulation (degF)"].tolist() == pytest.approx((metric["Insulation (degC)"] * 1.8 + 32).tolist())
    page.switch_page("drawing_page.py").run()
    assert not page.exception
    assert page.session_state["units"] == "american"
    assert page.session_state["draft"].text == VAN
