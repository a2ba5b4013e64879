"""Papers to hand over, as part of a page: the report, made when it is asked for, and wire labels."""

from datetime import date
from functools import partial
from typing import Any

import streamlit as st

from farvolt.errors import FarvoltError
from farvolt.results import Study
from farvolt_app import labels, report_file
from farvolt_app.pages import state
from farvolt_app.paper import PAPERS
from farvolt_app.report_tables import Units
from farvolt_app.shown import plain

PDF = "application/pdf"
ONE_EACH = "one to a page"
NAMES = {"a4": "A4", "letter": "Letter", ONE_EACH: "One to a page"}
LENGTHS: dict[str, Units] = {"metres": "metric", "feet": "american"}


def show(study: Study) -> None:
    """Draw what makes the papers, side by side."""
    left, right = st.columns(2)
    with left:
        _report(study)
    with right:
        _labels(study)


def _report(study: Study) -> None:
    st.markdown("#### Report")
    with st.container(horizontal=True, vertical_alignment="bottom"):
        paper = _choice("Paper", list(PAPERS), "report_paper")
        lengths = _choice("Lengths in", list(LENGTHS), "report_units")
        asked = st.button(
            "Make the report", key="make_report",
            help="One PDF: summary, drawing, cables, protection, loads, bank, findings with their working.",
        )  # fmt: skip
    wanted = (state.draft().text, paper, lengths)
    if asked:
        with st.container():
            bar = st.progress(0.0, text="Beginning")
            made = report_file.pdf(
                study, PAPERS[paper], LENGTHS[lengths], date.today(),
                told=lambda share, what: _tell(bar, share, what),
            )  # fmt: skip
            bar.empty()
        st.session_state["report"] = (wanted, made)
    ready = st.session_state.get("report")
    if ready is not None and ready[0] == wanted:
        st.download_button("Download report", ready[1], "report.pdf", PDF, on_click="ignore", type="primary",
                           key="download_report")  # fmt: skip


def _tell(bar: Any, share: float, what: str) -> None:
    bar.progress(share, text=what.capitalize())


def _labels(study: Study) -> None:
    st.markdown("#### Wire labels")
    with st.container(horizontal=True, vertical_alignment="bottom"):
        written = st.selectbox(
            "Size of a label", labels.SIZES, key="label_size", accept_new_options=True, width=200,
            help="Width x height with its unit; type another one if yours is not listed.",
        )  # fmt: skip
        paper = _choice("On paper", [*PAPERS, ONE_EACH], "label_paper")
    try:
        size = labels.parse_size(str(written or ""))
    except FarvoltError as error:
        st.error(plain(str(error)))
        return
    st.download_button(
        "Download labels", partial(labels.pdf, study, size, PAPERS.get(paper)), "labels.pdf", PDF, on_click="ignore",
        key="download_labels", help="Both ends and both poles of every run.",
    )  # fmt: skip


def _choice(label: str, options: list[str], key: str) -> str:
    """One of a few, the first unless another is chosen."""
    return str(st.segmented_control(label, options, default=options[0], required=True, key=key,
                                    format_func=lambda one: NAMES.get(one, one)))  # fmt: skip
