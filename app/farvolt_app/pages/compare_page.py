"""The page "Compare": this plan beside other files, examples and its own earlier versions."""

from pathlib import Path

import streamlit as st

from farvolt import differences, examples, planfile
from farvolt.errors import FarvoltError
from farvolt.results import Study
from farvolt_app import compare_text, shown
from farvolt_app import draft as drafts
from farvolt_app.draft import Draft
from farvolt_app.pages import results, state
from farvolt_app.shown import plain

THIS = "this plan"
BEFORE_EDITS = "this plan before its edits"
IN_FILE, PREVIOUS = "this plan's file as it is", "previous version of its file"
MOST = 6


def show(study: Study) -> None:
    """Draw the choice of plans, and what differs."""
    chosen = st.multiselect(
        "Compare with", list(_offered(state.draft())), key="compared", accept_new_options=True, persist_state="session",
        max_selections=MOST, placeholder="Choose, or write the path of a plan file",
        help="Examples, earlier versions of this plan, or any plan file by its path, such as /home/me/other.toml.",
    )  # fmt: skip
    if not chosen:
        st.info("Choose one or more plans to see them side by side: what they need, what their loads see, what fails.")
        return
    others = {name: found for name in chosen if (found := _study(str(name))) is not None}
    named = [(THIS, study), *others.items()]
    results.table(compare_text.summary_rows([(name, differences.summary(one)) for name, one in named]), "side_by_side",
                  "The plans in figures, one row each")  # fmt: skip
    for place, (name, other) in enumerate(others.items()):
        _differences(place, name, differences.compare(other, study))
    st.caption(plain(shown.CAUTION))


def _differences(place: int, name: str, found: differences.Comparison) -> None:
    st.markdown(f"#### From {plain(name)} to {THIS}")
    for title, rows, nothing in (
        ("What differs", compare_text.difference_rows(found), "The two plans say the same."),
        ("Loads, each where its drop is largest", compare_text.load_rows(found), "Neither plan has loads."),
        ("Findings that come and go", compare_text.finding_rows(found), "The checks find the same in both."),
    ):
        st.markdown(f"**{title}**")
        if rows:
            results.table(rows, f"{title}-{place}", f"{title}, from {name} to {THIS}", tall=True)
        else:
            st.caption(nothing)


def _offered(draft: Draft) -> dict[str, str | Path]:
    """What can be chosen: a text, or the path of a file."""
    found: dict[str, str | Path] = {}
    if draft.undo_texts:
        found[BEFORE_EDITS] = draft.undo_texts[0]
    if draft.path is not None:
        previous = draft.path.with_name(f"{draft.path.name}.previous")
        found[IN_FILE] = draft.path
        if previous.is_file():
            found[PREVIOUS] = previous
    return found | {examples.title(name): examples.text(name) for name in examples.names()}


def _study(name: str) -> Study | None:
    """The study of a plan by the name it was chosen under; None, with the reason shown, where it has none."""
    draft = state.draft()
    wanted = _offered(draft).get(name) or Path(name.strip().strip("\"'"))
    try:
        path = wanted.expanduser() if isinstance(wanted, Path) else None
        text = planfile.read_text(path) if path is not None else str(wanted)
    except (FarvoltError, RuntimeError) as error:  # the home folder of a user who does not exist
        st.warning(plain(str(error)))
        return None
    folder = path if path is not None else draft.path
    cached: dict[tuple[str, str], Study | None] = st.session_state.setdefault("studied", {})
    key = (planfile.stamp(text), str(folder))
    if key not in cached:
        found, faults = drafts.examine(text, folder)
        if found is None:
            st.warning(plain(f"{name} cannot be compared: {faults[0]}"))
            return None
        if len(cached) > MOST:
            cached.clear()
        cached[key] = found
    return cached[key]


if (found := results.study()) is not None:
    show(found)
