"""What a browser session keeps: its draft, and the text its table editors were shown. No other session sees it."""

import os
from dataclasses import replace
from pathlib import Path

import streamlit as st

from farvolt import examples
from farvolt.errors import FarvoltError
from farvolt_app import draft as drafts
from farvolt_app import keep
from farvolt_app.draft import Draft
from farvolt_app.server import FOLDER_VARIABLE, PLAN_VARIABLE
from farvolt_app.units_shown import Units

FIRST_EXAMPLE = "instrument-repair-van"
ADDRESS_FIELD = "draft"


def begin() -> None:
    """At the start of a session: the draft of the plan that the command named, or of an example."""
    if "draft" in st.session_state:
        return
    st.session_state["revision"] = 0
    st.session_state["kept_as"] = keep.new_name()
    before = keep.kept(st.query_params.get(ADDRESS_FIELD, ""))
    if before is not None:
        put(before)
        return
    named = os.environ.get(PLAN_VARIABLE, "")
    opened = drafts.begin(examples.text(FIRST_EXAMPLE)) if not named else None
    try:
        opened = opened or drafts.open_file(Path(named))
    except FarvoltError as error:
        say(str(error))
        opened = drafts.begin(examples.text(FIRST_EXAMPLE))
    put(opened)


def mark_address() -> None:
    """Let the page's address carry the name its draft is kept under, for when it is loaded again."""
    if os.environ.get(FOLDER_VARIABLE) and st.query_params.get(ADDRESS_FIELD) != st.session_state["kept_as"]:
        st.query_params[ADDRESS_FIELD] = st.session_state["kept_as"]


def draft() -> Draft:
    """The session's draft."""
    found: Draft = st.session_state["draft"]
    return found


def put(changed: Draft, *, keep_editors: bool = False) -> None:
    """Take another draft; the table editors start anew from its text, unless they are what changed it."""
    try:
        changed = changed.autosave_now()
    except FarvoltError as error:
        changed = replace(changed, autosave=False)
        say(f"Autosave is off now. {error}")
    st.session_state["draft"] = changed
    keep.keep(st.session_state["kept_as"], changed)
    if not keep_editors:
        show_anew()


def show_anew() -> None:
    """Let the table editors start from the draft's text. Until then the text they were shown must not change:
    an editor reports all changes since it was first shown, and starts over when its data is another."""
    st.session_state["shown_text"] = draft().text
    st.session_state["revision"] += 1


def shown_text() -> str:
    """The text that the table editors were shown."""
    return str(st.session_state["shown_text"])


def editor_key(name: str) -> str:
    """The key of an editor: another one whenever the editors start anew."""
    return f"{name}-{st.session_state['revision']}"


def units() -> Units:
    """The units that results are shown in."""
    return "american" if st.session_state.get("units") == "american" else "metric"


def say(message: str) -> None:
    """A message for the next drawing of the page, such as why a file could not be opened."""
    st.session_state["message"] = message


def said() -> str:
    """The message, once."""
    return str(st.session_state.pop("message", ""))
