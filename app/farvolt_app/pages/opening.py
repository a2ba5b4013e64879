"""Open another plan: an example, a file, a filled-in workbook. Edits that are not saved are never left unasked."""

from pathlib import Path

import streamlit as st

from farvolt import examples
from farvolt.errors import FarvoltError, PlanError
from farvolt_app import draft as drafts
from farvolt_app.draft import Draft
from farvolt_app.pages import state
from farvolt_app.shown import plain

OWN_TEXT = "Starter plan"
XLSX = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"
POPOVER = "opening"
"""Key of the popover that this is drawn in; it closes when something was chosen."""


def show() -> None:
    """Draw what can be opened."""
    titles = {examples.title(name): name for name in examples.names()}
    st.markdown("**An example** (all are invented) or a small plan to start from")
    for title, name in [*titles.items(), (OWN_TEXT, "")]:
        st.button(plain(title), on_click=_open_example, args=(name,), key=f"open-{name}", width="stretch")
    st.markdown("**A plan file** on this machine")
    st.text_input("Path of the file", key="path", placeholder="/home/me/my-van.toml")
    st.button("Open file", on_click=_open_file, key="open_file")
    st.markdown("**A workbook**: the template filled in, or an exported one")
    key = f"workbook-{st.session_state.get('workbooks', 0)}"
    st.file_uploader("Workbook", "xlsx", key=key, on_change=_open_workbook, args=(key,), label_visibility="collapsed",
                     max_upload_size=10)  # fmt: skip
    st.download_button("Download template", _template, "template.xlsx", XLSX, on_click="ignore",
                       key="download_template", help="A workbook to fill in: a sheet for each table.")  # fmt: skip


def questions() -> None:
    """What has to be decided before another plan is opened."""
    if "faulty" in st.session_state:
        with st.container(horizontal=True):
            st.button("Open it all the same, to mend it here", on_click=_open_faulty, key="open_faulty")
            st.button("Leave it", on_click=_keep_editing, key="leave_faulty")
    if "waiting" in st.session_state:
        name = plain(_name(st.session_state["waiting"]))
        st.warning(f"This plan has edits that are not saved. Opening {name} leaves them behind.")
        with st.container(horizontal=True):
            st.button("Keep editing", on_click=_keep_editing, key="keep_editing", type="primary")
            st.button("Open it, leave the edits behind", on_click=_open_waiting, key="open_waiting")


def take(opened: Draft) -> None:
    """Open a plan, or ask first where that would lose edits."""
    _keep_editing()
    if state.draft().saved:
        state.put(opened)
    else:
        st.session_state["waiting"] = opened


def take_with_faults(opened: Draft, told: str) -> None:
    """Say what is wrong with a plan before it is opened."""
    _keep_editing()
    state.say(told)
    st.session_state["faulty"] = opened


def read(path: str) -> Draft | None:
    """The draft of a plan file by its path as typed; None where there is none, which is then said."""
    path = path.strip().strip("\"'")
    if not path:
        state.say("No file was named: write its path, such as /home/me/my-van.toml.")
        return None
    try:
        return drafts.open_file(Path(path).expanduser())
    except (FarvoltError, RuntimeError) as error:  # the home folder of a user who does not exist
        state.say(str(error))
        return None


def _open_example(name: str) -> None:
    take(drafts.begin(examples.text(name) if name else examples.starter_text()))


def _open_file() -> None:
    opened = read(str(st.session_state.get("path", "")))
    if opened is not None and opened.faults:
        take_with_faults(opened, str(PlanError(list(opened.faults), str(opened.path))))
    elif opened is not None:
        take(opened)


def _template() -> bytes:
    from farvolt_app import template

    return template.to_bytes()


def _open_workbook(key: str) -> None:
    given = st.session_state[key]
    if given is None:
        return
    from farvolt_app import workbook_plan
    from farvolt_app.workbook_cells import WorkbookError

    # The next one to be chosen is another widget: this one would go on showing its file.
    st.session_state["workbooks"] = st.session_state.get("workbooks", 0) + 1
    try:
        found = workbook_plan.read(given.getvalue(), given.name)
    except FarvoltError as error:
        state.say(str(error))
        return
    opened = drafts.begin(found.text, new=True)
    if found.faults:
        take_with_faults(opened, str(WorkbookError(list(found.faults), given.name)))
    else:
        state.say("\n".join(("The plan was read from the workbook. Save writes it as a plan file.", *found.notes)))
        take(opened)


def _open_faulty() -> None:
    take(st.session_state["faulty"])


def _open_waiting() -> None:
    opened = st.session_state["waiting"]
    _keep_editing()
    state.put(opened)


def _keep_editing() -> None:
    st.session_state[POPOVER] = False
    for name in ("waiting", "faulty"):
        st.session_state.pop(name, None)


def _name(opened: Draft) -> str:
    return opened.plan.plan.name if opened.plan else "the other plan"

