"""The page "Schedule": the cable schedule, and the files to hand over."""

from functools import partial

import streamlit as st

from farvolt.results import Study
from farvolt_app import schedule, shown, workbook
from farvolt_app.pages import buying, papers, results, state
from farvolt_app.shown import plain

EXCEL = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"


def show(study: Study) -> None:
    """Draw the schedule and its downloads. They are made when they are asked for."""
    with st.container(horizontal=True):
        st.download_button(
            "Download workbook", partial(workbook.to_bytes, study, None, state.draft().valid_text), "cables.xlsx",
            EXCEL, on_click="ignore", type="primary", key="download_workbook",
            help="Cables, protection, totals, findings. It calculates on.",
        )  # fmt: skip
        st.download_button(
            "Download CSV", partial(_csv, study), "cables.csv", "text/csv", on_click="ignore", key="download_csv",
            help="The cable list alone, for other programs.",
        )  # fmt: skip
    results.table(schedule.rows(study), "schedule", "Cable schedule", tall=True)
    buying.show(study)
    papers.show(study)
    st.caption(plain(shown.CAUTION))


def _csv(study: Study) -> bytes:
    return schedule.to_csv(study).encode("utf-8-sig")


if (found := results.study()) is not None:
    show(found)
