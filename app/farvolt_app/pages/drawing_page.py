"""The page "Drawing": the system as a single-line diagram, with the voltages of one case."""

import streamlit as st

from farvolt.results import Study
from farvolt_app import drawing, shown
from farvolt_app.pages import results


def show(study: Study) -> None:
    """Draw one case, and the same numbers as tables."""
    names = [case.name for case in study.cases]
    chosen = st.selectbox("Case", range(len(names)), format_func=names.__getitem__, key="drawn_case", width=420)
    case = study.cases[chosen]
    svg = drawing.svg(study.plan, case, study.findings, dark=st.context.theme.type == "dark")
    st.image(svg, width="stretch", alt="Single-line diagram of the plan; the tables below give the same numbers")
    st.download_button(
        "Download drawing", svg, "drawing.svg", "image/svg+xml", on_click="ignore", key="download_drawing"
    )
    left, right = st.columns(2)
    with left:
        st.markdown("**Points**: volts between feed and return, and of each against the reference's return")
        results.table(shown.point_rows(case), "points", "Voltage of each point")
    with right:
        st.markdown("**Sources**: a current is positive when the source delivers")
        results.table(shown.source_rows(case), "sources", "Volts and current of each source")


if (found := results.study()) is not None:
    show(found)
