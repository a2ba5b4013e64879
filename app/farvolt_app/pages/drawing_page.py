"""The page "Drawing": the system as a single-line diagram, with the voltages of one case."""

import base64
from datetime import date
from functools import partial

import streamlit as st

from farvolt.results import CaseResult, Study
from farvolt_app import drawing, drawing_file, shown
from farvolt_app.pages import results, state
from farvolt_app.paper import PAPERS, foot

FIT, WHOLE = "whole drawing", "full size"
ALT = "Single-line diagram of the plan; the tables below give the same numbers"


def show(study: Study) -> None:
    """Draw one case, and the same numbers as tables."""
    names = [case.name for case in study.cases]
    with st.container(horizontal=True, vertical_alignment="bottom"):
        chosen = st.selectbox("Case", range(len(names)), format_func=names.__getitem__, key="drawn_case", width=420)
        whole = st.segmented_control("Show", [FIT, WHOLE], default=FIT, required=True, key="drawn_at")
    case, units = study.cases[chosen], state.units()
    dark = st.context.theme.type == "dark"
    svg = drawing.svg(study.plan, case, study.findings, dark=dark, units=units)
    if whole == FIT:
        st.image(svg, width="stretch", alt=ALT)
    else:
        with st.container(height=720):
            # An image is drawn but never runs or loads anything, whatever the plan's text holds.
            st.html(f'<img alt="{ALT}" src="data:image/svg+xml;base64,{base64.b64encode(svg.encode()).decode()}">')
    _downloads(study, case, units)
    left, right = st.columns(2)
    with left:
        st.markdown("**Points**: volts between feed and return, and of each against the reference's return")
        results.table(shown.point_rows(case), "points", "Voltage of each point")
    with right:
        st.markdown("**Sources**: a current is positive when the source delivers")
        results.table(shown.source_rows(case), "sources", "Volts and current of each source")


def _downloads(study: Study, case: CaseResult, units: str) -> None:
    """The same drawing as a file, on white; made when it is asked for."""
    with st.container(horizontal=True, vertical_alignment="bottom"):
        paper = st.segmented_control(
            "Paper", list(PAPERS), default="a4", required=True, key="drawn_paper", format_func=str.capitalize,
            help="Of the PDF: on one page where letters stay legible, else in parts that overlap.",
        )  # fmt: skip
        for name, mime, made in (
            ("svg", "image/svg+xml", partial(_svg, study, case, units)),
            ("png", "image/png", partial(_png, study, case, units)),
            ("pdf", "application/pdf", partial(_pdf, study, case, units, str(paper))),
        ):
            st.download_button(f"Download {name.upper()}", made, f"drawing.{name}", mime, on_click="ignore",
                               key=f"download_drawing_{name}")  # fmt: skip


def _svg(study: Study, case: CaseResult, units: str) -> bytes:
    return drawing_file.svg(study, case, units).encode()


def _png(study: Study, case: CaseResult, units: str) -> bytes:
    return drawing_file.png(drawing_file.svg(study, case, units))


def _pdf(study: Study, case: CaseResult, units: str, paper: str) -> bytes:
    return drawing_file.pdf(study, case, PAPERS[paper], units, foot(study.plan.plan.name, date.today()))


if (found := results.study()) is not None:
    show(found)
