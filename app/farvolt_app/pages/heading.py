"""The heading of every page: which plan this is, open, undo, save, and what is wrong with the draft."""

from pathlib import Path

import streamlit as st

from farvolt import examples
from farvolt.errors import FarvoltError, PlanError
from farvolt_app import draft as drafts
from farvolt_app import shown
from farvolt_app.draft import Draft
from farvolt_app.pages import state
from farvolt_app.shown import plain

OWN_TEXT = "Starter plan"


def show() -> None:
    """Draw the heading."""
    draft = state.draft()
    name = draft.plan.plan.name if draft.plan else "Plan with faults"
    with st.container(horizontal=True, vertical_alignment="center"):
        st.subheader(plain(name), anchor=False, width="stretch")
        with st.popover("Open"):
            _open()
        st.button("Undo", on_click=_undo, disabled=not draft.undo_texts, help="Take the last edit back.", key="undo")
        st.button("Redo", on_click=_redo, disabled=not draft.redo_texts, help="Make it again.", key="redo")
        with st.popover("Save"):
            _save(draft)
        st.download_button(
            "Download plan", draft.text, _file_name(draft), "text/plain", on_click="ignore", key="download_plan",
            help="The plan as a text file, as it stands now, faults and all.",
        )  # fmt: skip
    st.caption(plain(_whereabouts(draft)))
    _messages(draft)


def _open() -> None:
    titles = {examples.title(name): name for name in examples.names()}
    st.markdown("**An example** (all are invented) or a small plan to start from")
    for title, name in [*titles.items(), (OWN_TEXT, "")]:
        st.button(plain(title), on_click=_open_example, args=(name,), key=f"open-{name}", width="stretch")
    st.markdown("**A plan file** on this machine")
    st.text_input("Path of the file", key="path", placeholder="/home/me/my-van.toml")
    st.button("Open file", on_click=_open_file, key="open_file")
    if state.draft().undo_texts and not state.draft().saved:
        st.caption("Opening another plan leaves this one's unsaved edits behind.")


def _open_example(name: str) -> None:
    state.put(drafts.begin(examples.text(name) if name else examples.starter_text()))


def _open_file() -> None:
    path = str(st.session_state.get("path", "")).strip().strip("\"'")
    if not path:
        state.say("No file was named: write its path, such as /home/me/my-van.toml.")
        return
    try:
        opened = drafts.open_file(Path(path).expanduser())
    except FarvoltError as error:
        state.say(str(error))
        return
    if opened.faults:
        state.say(str(PlanError(list(opened.faults), path)))
        st.session_state["faulty"] = opened
        return
    state.put(opened)


def _open_faulty() -> None:
    state.put(st.session_state.pop("faulty"))


def _undo() -> None:
    state.put(state.draft().undo())


def _redo() -> None:
    state.put(state.draft().redo())


def _save(draft: Draft) -> None:
    st.text_input("Path of the file", str(draft.path or _file_name(draft)), key=state.editor_key("save_path"))
    st.button("Save file", on_click=_save_file, key="save_file")
    st.caption("What was in the file before is kept beside it, with .previous added to its name.")


def _save_file() -> None:
    path = Path(str(st.session_state[state.editor_key("save_path")]).strip()).expanduser()
    try:
        state.put(state.draft().save(path), keep_editors=True)
        state.say(f"Saved as {path.absolute()}.")
    except FarvoltError as error:
        state.say(str(error))


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
    return f"{draft.path}: {'saved' if draft.saved else 'with edits that are not saved'}."


def _messages(draft: Draft) -> None:
    message = state.said()
    if message:
        st.info(plain_lines(message))
    if "faulty" in st.session_state:
        st.button("Open it all the same, to mend it here", on_click=_open_faulty, key="open_faulty")
        if not message:
            del st.session_state["faulty"]


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
