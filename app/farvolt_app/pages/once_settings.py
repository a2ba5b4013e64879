"""The settings of tables that are there once, the site and the bank: each a field to type or to choose."""

from collections.abc import Sequence
from typing import Any

import streamlit as st

from farvolt.errors import FarvoltError
from farvolt_app import case_grid, columns, edits, tables
from farvolt_app.columns import Column
from farvolt_app.pages import state

TABLES = (("Site", "site", columns.SITE), ("Bank", "bank", columns.BANK))
IN_A_ROW = 3


def show(raw: tables.Raw) -> None:
    """Draw the fields of both tables, each table closed until it is asked for."""
    for title, table, shown in TABLES:
        with st.expander(title):
            _fields(raw, table, shown)


def _fields(raw: tables.Raw, table: str, shown: Sequence[Column]) -> None:
    found = raw.get(table)
    given = found if isinstance(found, dict) else {}
    places = st.columns(IN_A_ROW)
    for place, column in enumerate(shown):
        with places[place % IN_A_ROW]:
            _field(raw, table, column, _written(given, column))


def _field(raw: tables.Raw, table: str, column: Column, value: str) -> None:
    key, offered = state.editor_key(f"{table}.{column.id}"), case_grid.names(raw, column.names_of)
    if not offered:
        st.text_input(column.label, value, key=key, help=column.hint, on_change=_commit, args=(table, column, key))
        return
    options = list(dict.fromkeys([*offered, *([value] if value else [])]))
    index = options.index(value) if value else None
    st.selectbox(column.label, options, index, key=key, help=column.hint, placeholder="not stated",
                 on_change=_commit, args=(table, column, key))  # fmt: skip


def _written(given: tables.Raw, column: Column) -> str:
    """A field as it stands in the file; nothing where it is not given."""
    value: Any = given
    for part in column.path:
        value = value.get(part) if isinstance(value, dict) else None
    return "" if value is None else tables.written(value)


def _commit(table: str, column: Column, key: str) -> None:
    value = tables.typed(st.session_state[key], column)
    try:
        text = edits.apply(state.draft().text, [edits.Set(table, None, column.path, value)])
    except FarvoltError as error:
        state.say(str(error))
        return
    state.put(state.draft().edit(text), keep_editors=True)
