"""The table editors. What they report becomes steps on the plan's text; they are never fed with their own edits."""

from collections.abc import Callable, Sequence
from typing import Any

import pandas as pd
import streamlit as st

from farvolt import rulebook
from farvolt.errors import FarvoltError
from farvolt_app import case_grid, columns, edits, tables
from farvolt_app.blocks import Entry
from farvolt_app.columns import Column, Sheet
from farvolt_app.edits import Step
from farvolt_app.pages import once_settings, state
from farvolt_app.shown import plain

SETTINGS, CASES, TEXT = "Settings", "Cases", "Text"
SHEETS = {sheet.title: sheet for sheet in columns.SHEETS}
TITLES = [SETTINGS, *list(SHEETS)[:2], CASES, *list(SHEETS)[2:], TEXT]
MOST_UNPINNED = 20
ROW_PX, HEAD_PX, MOST_PX = 35, 38, 320


def show() -> None:
    """Draw the choice of table, and the editor of the one that is chosen."""
    chosen = st.segmented_control(
        "Table", TITLES, default=columns.RUNS.title, required=True, key="table",
        on_change=state.show_anew, label_visibility="collapsed", persist_state="session",
    )  # fmt: skip
    if chosen == TEXT:
        _text()
        return
    try:
        raw = edits.read(state.shown_text())
    except FarvoltError as error:
        st.warning(plain(f"The tables cannot be shown: {error}. The text can be mended under {TEXT}, or undone."))
        return
    if chosen == SETTINGS:
        _settings(raw)
    elif chosen == CASES:
        _cases(raw)
    else:
        _sheet(raw, SHEETS[str(chosen)])


Making = Callable[[tables.Raw], Sequence[Step]]


def _apply(text: str, making: Making, *, keep_editors: bool = False) -> None:
    """Make the draft what the steps make of a text."""
    try:
        changed = edits.apply(text, making(edits.read(text)))
    except FarvoltError as error:
        state.say(str(error))
        return
    state.put(state.draft().edit(changed), keep_editors=keep_editors)


def _apply_to_draft(making: Making, *, keep_editors: bool = False) -> None:
    _apply(state.draft().text, making, keep_editors=keep_editors)


def _sheet(raw: tables.Raw, sheet: Sheet) -> None:
    st.caption(sheet.hint + " Hover over a heading for its meaning; the last, empty row adds an entry.")
    everything, offered = st.session_state.get("everything", False), st.session_state.get("choose_points", True)
    shown = tables.columns(raw, sheet, everything=everything)
    frame = pd.DataFrame(tables.rows(raw, sheet), columns=[column.id for column in shown], dtype=object)
    key = state.editor_key(f"{sheet.id}{everything}{offered}")
    classes = _classes()
    st.data_editor(
        frame,
        key=key,
        num_rows="dynamic",
        hide_index=True,
        placeholder="",
        height=min(MOST_PX, HEAD_PX + ROW_PX * (len(frame) + 1) + 2),
        column_config={column.id: _config(raw, column, frame, classes, offered) for column in shown},
        on_change=_commit,
        args=(sheet, key),
        alt=f"Table of {sheet.title.lower()}, to edit",
    )
    more = tables.hidden_protection(raw) if sheet.table == "runs" else []
    if more:
        st.caption(plain(f"More protection than shown here, under {TEXT}: {', '.join(more)}."))
    with st.container(horizontal=True, vertical_alignment="center"):
        st.toggle("Show all fields", key="everything", on_change=state.show_anew, persist_state="session")
        if any(column.id in tables.POINT_FIELDS for column in shown):
            st.toggle("Choose points", True, key="choose_points", on_change=state.show_anew, persist_state="session",
                      help="On: points are chosen from a list, which New point adds to. Off: they are typed, and a "
                           "point exists by being named.")  # fmt: skip
            if offered:
                _new_point()
        _paste(sheet, everything)
        _arrange(sheet)


def _commit(sheet: Sheet, key: str) -> None:
    delta: Any = st.session_state[key]
    # All changes since the editor was shown are applied to what it was shown.
    _apply(
        state.shown_text(), lambda raw: tables.steps(raw, sheet, delta), keep_editors=not tables.renames(sheet, delta)
    )


def _config(
    raw: tables.Raw, column: Column, frame: pd.DataFrame, classes: Sequence[str], choose_points: bool
) -> Any:
    offered = tables.choices(raw, column, classes)
    if choose_points and column.id in tables.POINT_FIELDS:
        offered = (*tables.points(raw), *st.session_state.get("new_points", ()))
    # A pinned column looks as if it could not be changed, so the name is pinned only where it would scroll away.
    pinned = column.id == "name" and len(frame.columns) > MOST_UNPINNED
    if not offered:
        return st.column_config.TextColumn(column.label, help=column.hint, pinned=pinned)
    # What stands in the file stays in the list, even where it is not a choice: the cell must show it.
    present = [value for value in frame[column.id] if isinstance(value, str)]
    options = list(dict.fromkeys([*offered, *present]))
    return st.column_config.SelectboxColumn(column.label, help=column.hint, options=options, pinned=pinned)


def _classes() -> tuple[str, ...]:
    results = state.draft().results
    return tuple(results.rulebook.classes) if results else ()


def _new_point() -> None:
    with st.popover("New point", key="adding_point", on_change="rerun"):
        st.text_input("Name of the point", key="new_point", on_change=_add_point, placeholder="such as galley",
                      help="It is offered in the table then, and part of the plan once a row names it.")  # fmt: skip


def _add_point() -> None:
    name = str(st.session_state["new_point"]).strip()
    if name:
        st.session_state["new_points"] = (*st.session_state.get("new_points", ()), name)
        st.session_state["new_point"], st.session_state["adding_point"] = "", False
        state.show_anew()


def _paste(sheet: Sheet, everything: bool) -> None:
    with st.popover("Paste rows", key="pasting", on_change="rerun"):
        st.text_area("Rows copied from a spreadsheet", key="pasted", height=160,
                     help="With a row of headings as in the table, or in the order of its columns. New points and "
                          "other names are taken as they stand.")  # fmt: skip
        st.button("Add rows", on_click=_add_pasted, args=(sheet, everything), key="add_pasted")


def _add_pasted(sheet: Sheet, everything: bool) -> None:
    text = state.draft().text
    try:
        raw = edits.read(text)
        rows = tables.pasted(str(st.session_state["pasted"]), sheet, tables.columns(raw, sheet, everything=everything))
        changed = edits.apply(text, tables.additions(raw, sheet, rows))
    except FarvoltError as error:
        state.say(f"Nothing was added: {error}")
        return
    st.session_state["pasted"], st.session_state["pasting"] = "", False
    state.say(f"{len(rows)} rows added." if len(rows) != 1 else "One row added.")
    state.put(state.draft().edit(changed))


def _arrange(sheet: Sheet) -> None:
    """Buttons for one entry: a table has none for its rows."""
    raw = edits.read(state.draft().text)
    names = [str(row["name"]) for row in tables.rows(raw, sheet)]
    if not names:
        return
    with st.popover("Move or duplicate"):
        key = f"arranged-{sheet.id}"
        if st.session_state.get(key, 0) >= len(names):
            st.session_state[key] = len(names) - 1
        row = int(st.selectbox("Entry", range(len(names)), format_func=names.__getitem__, key=key))
        entry, (above, below) = tables.keys(raw, sheet)[row], tables.neighbours(raw, sheet, row)
        with st.container(horizontal=True):
            st.button("Up", on_click=_move, args=(sheet.table, entry, above, key, row - 1), disabled=above is None,
                      icon=":material/arrow_upward:", key="move_up")  # fmt: skip
            st.button("Down", on_click=_move, args=(sheet.table, entry, below, key, row + 1), disabled=below is None,
                      icon=":material/arrow_downward:", key="move_down")  # fmt: skip
            st.button("Duplicate", on_click=_copy, args=(sheet.table, entry, names[row]), key="duplicate_entry")


def _move(table: str, entry: Entry, other: Entry, key: str, row: int) -> None:
    _apply_to_draft(lambda raw: [edits.Swap(table, entry, other)])
    st.session_state[key] = row


def _copy(table: str, entry: Entry, name: str) -> None:
    _apply_to_draft(lambda raw: [edits.Duplicate(table, entry, tables.free_name(raw, table, name))])


def _cases(raw: tables.Raw) -> None:
    st.caption(
        "One column is one condition to check. A load's cell is the share of its rating at which it is on: 1, 0.5, "
        "50 %, empty for off. A source left empty is on; a device left empty is as its own table says."
    )
    names = case_grid.case_names(raw)
    if not names:
        st.info(plain(_unstated()))
    else:
        frame = pd.DataFrame(case_grid.rows(raw), dtype=object)
        key = state.editor_key("cases")
        st.data_editor(
            frame, key=key, hide_index=True, placeholder="", height=min(MOST_PX, HEAD_PX + ROW_PX * len(frame) + 2),
            column_config={
                case_grid.WHAT: st.column_config.TextColumn("What the case decides", disabled=True, pinned=True),
                **{case_grid.column_id(i): st.column_config.TextColumn(name) for i, name in enumerate(names)},
            },
            on_change=_commit_cases, args=(key,), alt="Table of cases, to edit",
        )  # fmt: skip
    with st.container(horizontal=True):
        st.button("Add a case", on_click=_add_case, key="add_case")
        if not names:
            st.button("Add the standard cases", on_click=_add_standard_cases, key="add_standard_cases")
        if names:
            with st.popover("Copy or remove a case"):
                chosen = st.selectbox("Case", range(len(names)), format_func=names.__getitem__,
                                      key=state.editor_key("case_chosen"))  # fmt: skip
                st.button("Copy", on_click=_copy, args=("cases", chosen, names[chosen]), key="copy_case")
                st.button("Remove", on_click=_remove_case, args=(chosen,), key="remove_case")


def _unstated() -> str:
    """What is checked while the plan states no cases, by name where the text is a plan."""
    results = state.draft().results
    listed = "; ".join(case.name for case in results.plan.checked_cases) if results else ""
    return "The plan states no cases, so a standard set is checked" + (f": {listed}." if listed else ".")


def _add_standard_cases() -> None:
    from farvolt import planfile

    text = state.draft().text
    try:
        plan = planfile.parse(text)
    except FarvoltError as error:
        state.say(f"The standard cases follow from a plan without faults. {error}")
        return
    _apply(text, lambda raw: case_grid.standard(plan))


def _commit_cases(key: str) -> None:
    delta: Any = st.session_state[key]
    _apply(state.shown_text(), lambda raw: case_grid.steps(raw, delta), keep_editors=True)


def _add_case() -> None:
    _apply_to_draft(lambda raw: [case_grid.new_case(raw)])


def _remove_case(index: int) -> None:
    _apply_to_draft(lambda raw: [edits.Remove("cases", index)])


def _text() -> None:
    st.caption("The whole plan as its file holds it. Everything can be changed here, also what the tables leave out.")
    key = state.editor_key("text")
    st.text_area("Plan as text", state.shown_text(), height=MOST_PX + 140, key=key, on_change=_commit_text, args=(key,),
                 label_visibility="collapsed")  # fmt: skip


def _commit_text(key: str) -> None:
    state.put(state.draft().edit(str(st.session_state[key])), keep_editors=True)


def _settings(raw: tables.Raw) -> None:
    plan = raw.get("plan")
    given = plan if isinstance(plan, dict) else {}
    sources = case_grid.names(raw, "sources")
    left, right = st.columns(2)
    with left:
        _setting(given, "name", "Name of the plan", "What drawings and the cable schedule are headed with.")
        _setting(given, "nominal", "Nominal voltage", "Of the main battery system: 12 V, 24 V or 48 V.")
        _setting(
            given, "ambient", "Ambient", "Highest air temperature where no zone says otherwise; 30 degC unless stated."
        )
    with right:
        books = rulebook.shipped()
        _setting(given, "rulebook", "Rulebook", "The limits the plan is held against, or a file of your own.", books)
        _setting(
            given,
            "reference",
            "Reference source",
            "Drops are counted from it; the first battery unless stated.",
            sources,
        )
        words = ["rulebook", "rated", "ambient", "estimated"]
        hint = (
            "Temperature of the wiring in the numbers shown: as the rulebook says, at its rating, at ambient, "
            "estimated from the current, or a temperature such as 60 degC."
        )
        _setting(given, "conductor_temperature", "Conductor temperature", hint, words)
    _setting(given, "notes", "Notes", "For people; nothing is calculated from it.")
    once_settings.show(raw)


def _setting(given: tables.Raw, field: str, label: str, hint: str, options: Sequence[str] = ()) -> None:
    value = tables.written(given[field]) if field in given else None
    key = state.editor_key(f"plan.{field}")
    if not options:
        st.text_input(label, value or "", key=key, help=hint, on_change=_commit_setting, args=(field, key))
        return
    offered = list(dict.fromkeys([*options, *([value] if value else [])]))
    index = offered.index(value) if value else None
    st.selectbox(label, offered, index, key=key, help=hint, on_change=_commit_setting, args=(field, key),
                 accept_new_options=True, placeholder="not stated")  # fmt: skip


def _commit_setting(field: str, key: str) -> None:
    value = str(st.session_state[key] or "").strip() or None
    _apply_to_draft(lambda raw: [edits.Set("plan", None, (field,), value)], keep_editors=True)
