"""The heading of every page: which plan this is, open, undo, save, and what is wrong with the draft."""

from dataclasses import replace
from pathlib import Path

import streamlit as st

from farvolt.errors import FarvoltError
from farvolt_app import shown
from farvolt_app.draft import Draft
from farvolt_app.pages import keyboard, opening, state
from farvolt_app.shown import plain
from farvolt_app.units_shown import NAMES

# White letters on the dark theme's first colour have a contrast of 2.5 only; 4.5 is asked for (WCAG 2.1, 1.4.3).
_ON_PRIMARY = '<style>button[kind^="primary"], button[kind^="primary"] p { color: #16191d !important; }</style>'

SAVING = "saving"
"""Key of the popover Save; it closes when the file was written."""


def show() -> None:
    """Draw the heading."""
    draft = state.draft()
    name = draft.plan.plan.name if draft.plan else "Plan with faults"
    with st.container(horizontal=True, vertical_alignment="center"):
        st.subheader(plain(name), anchor=False, width="stretch")
        with st.popover("Open", key=opening.POPOVER, on_change="rerun"):
            opening.show()
        st.button("Undo", on_click=_undo, disabled=not draft.undo_texts, help="Take the last edit back.", key="undo",
                  shortcut="Mod+Z")  # fmt: skip
        st.button("Redo", on_click=_redo, disabled=not draft.redo_texts, help="Make it again.", key="redo",
                  shortcut="Mod+Y")  # fmt: skip
        with st.popover("Save", key=SAVING, on_change="rerun"):
            _save(draft)
        st.download_button(
            "Download plan", draft.text, _file_name(draft), "text/plain", on_click="ignore", key="download_plan",
            help="The plan as a text file, as it stands now, faults and all.",
        )  # fmt: skip
    with st.container(horizontal=True, vertical_alignment="center"):
        st.caption(plain(_whereabouts(draft)), width="stretch")
        st.segmented_control(
            "Units of results", list(NAMES), default="metric", required=True, format_func=NAMES.__getitem__,
            key="units", label_visibility="collapsed", persist_state="session",
        )  # fmt: skip
    _messages(draft)
    keyboard.show()
    if st.context.theme.type == "dark":
        st.html(_ON_PRIMARY)


def _undo() -> None:
    state.put(state.draft().undo())


def _redo() -> None:
    state.put(state.draft().redo())


def _save(draft: Draft) -> None:
    if draft.path is not None:
        # Its key is another one whenever a draft is taken, so that it shows what the draft says.
        key = state.editor_key("autosave")
        st.toggle("Autosave", draft.autosave, key=key, on_change=_set_autosave, args=(key,),
                  help="Writes every change without faults to the plan's own file at once. The file as it was before "
                       "is kept beside it, with .previous added to its name.")  # fmt: skip
    st.text_input("Path of the file", str(draft.path or _file_name(draft)), key=state.editor_key("save_path"),
                  help="Another path saves it as another file, and goes on with that.")  # fmt: skip
    st.button("Save file", on_click=_save_file, key="save_file")
    st.caption("What was in the file before is kept beside it, with .previous added to its name.")


def _save_file() -> None:
    path = Path(str(st.session_state[state.editor_key("save_path")]).strip()).expanduser()
    try:
        state.put(state.draft().save(path), keep_editors=True)
        state.say(f"Saved as {path.absolute()}.")
        st.session_state[SAVING] = False
    except (FarvoltError, RuntimeError) as error:  # the home folder of a user who does not exist
        state.say(str(error))


def _set_autosave(key: str) -> None:
    state.put(replace(state.draft(), autosave=bool(st.session_state[key])), keep_editors=True)


def _file_name(draft: Draft) -> str:
    if draft.path:
        return draft.path.name
    name = draft.plan.plan.name if draft.plan else "plan"
    kept = "".join(one if one.isascii() and one.isalnum() else "-" for one in name.lower())
    return "-".join(filter(None, kept.split("-")))[:60] + ".toml"


def _whereabouts(draft: Draft) -> str:
    if draft.path is None and not draft.undo_texts:
        return "Change any cell under Plan: results, drawing and findings follow. Open has a starter plan for your own."
    if draft.path is None:
        return "Not saved in a file yet."
    autosave = " Every change is saved at once." if draft.autosave else ""
    return f"{draft.path}: {'saved' if draft.saved else 'with edits that are not saved'}.{autosave}"


def _messages(draft: Draft) -> None:
    message = state.said()
    if message:
        st.info(plain_lines(message))
    opening.questions()


def faults() -> None:
    """What is wrong with the draft, if anything. Pages draw it where it moves no editor from under the cursor."""
    draft = state.draft()
    if not draft.faults:
        return
    number = "One thing" if len(draft.faults) == 1 else f"{len(draft.faults)} things"
    kept = "Results, drawing and downloads are those of the last plan without faults." if draft.results else ""
    st.error(f"**{number} in the plan cannot be used yet.** Your text is kept. {kept}")
    st.dataframe(shown.fault_rows(draft.faults[:50]), hide_index=True, key="faults", alt="What is wrong with the plan")


def plain_lines(text: str) -> str:
    """Several lines of text as they are, for a page that reads Markdown."""
    return "  \n".join(plain(line) for line in text.splitlines())
