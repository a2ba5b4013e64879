"""The page "Protection": each fuse and breaker beside its load, its cables and its faults, and its curve."""

from functools import partial

import streamlit as st

from farvolt.results import Study
from farvolt_app import shown, time_current_chart
from farvolt_app.pages import results
from farvolt_app.shown import plain

HELP = "Shown: its protection, the one upstream, its cable, its load and its fault currents."


def show(study: Study) -> None:
    """Draw the table, and the chart of one run."""
    st.caption(plain(shown.PROTECTION_NOTES))
    if study.protections:
        results.table(shown.protection_rows(study), "protections", "Each protection with its currents", tall=True)
    else:
        st.info("The plan has no protection yet: put fuses or breakers on its cable runs, on the page Plan.")
    if not study.plan.runs or study.time_current is None:
        return
    names = [run.name for run in study.plan.runs]
    with st.container(horizontal=True, vertical_alignment="bottom"):
        chosen = st.selectbox("Cable run", names, key="curve_run", width=420, help=HELP)
    picture = study.time_current(chosen)
    st.altair_chart(time_current_chart.chart(picture), width="content", key="time_current")
    with st.container(horizontal=True):
        for name, mime, made in (
            ("svg", "image/svg+xml", time_current_chart.svg),
            ("pdf", "application/pdf", time_current_chart.pdf),
        ):
            st.download_button(
                f"Download chart as {name.upper()}", partial(made, picture), f"time-current.{name}", mime,
                on_click="ignore", key=f"download_curve_{name}",
            )  # fmt: skip
    st.caption(plain(shown.CAUTION))


if (found := results.study()) is not None:
    show(found)
