"""The page "Drawing": the system as a single-line diagram, with the voltages of one case."""

import base64

import streamlit as st

from farvolt.results import Study
from farvolt_app import drawing, shown
from farvolt_app.pages import results

FIT, WHOLE = "whole drawing", "full size"
ALT = "Single-line diagram of the plan; the tables below give the same numbers"
UNITS = {"metric": "metres", "american": "feet"}


def show(study: Study) -> None:
    """Draw one case, and the same numbers as tables."""
    names = [case.name for case in study.cases]
    with st.container(horizontal=True, vertical_alignment="bottom"):
        chosen = st.selectbox("Case", range(len(names)), format_func=names.__getitem__, key="drawn_case", width=420)
        units = st.segmented_control(
            "Lengths in", list(UNITS), default="metric", required=True, format_func=UNITS.__getitem__, key="drawn_units"
        )
        whole = st.segmented_control("Show", [FIT, WHOLE], default=FIT, required=True, key="drawn_at")
    case = study.cases[chosen]
    dark = st.context.theme.type == "dark"
    svg = drawing.svg(study.plan, case, study.findings, dark=dark, units=str(units))
    if whole == FIT:
        st.image(svg, width="stretch", alt=ALT)
    else:
        with st.container(height=720):
            # An image is drawn but never runs or loads anything, whatever the plan's text holds.
            st.html(f'<img alt="{ALT}" src="data:image/svg+xml;base64,{base64.b64encode(svg.encode()).decode()}">')
    on_paper = drawing.svg(study.plan, case, study.findings, units=str(units))
    st.download_button("Download drawing", on_paper, "drawing.svg", "image/svg+xml", on_click="ignore",
                       key="download_drawing")  # fmt: skip
    left, right = st.columns(2)
    with left:
        st.markdown("**Points**: volts between feed and return, and of each against the reference's return")
        results.table(shown.point_rows(case), "points", "Voltage of each point")
    with right:
        st.markdown("**Sources**: a current is positive when the source delivers")
        results.table(shown.source_rows(case), "sources", "Volts and current of each source")


if (found := results.study()) is not None:
    show(found)
