"""The test sheet to download, as part of a page."""

from functools import partial

import streamlit as st

from farvolt import meter
from farvolt.commissioning import sheet_of
from farvolt.results import Study
from farvolt.study import build_context
from farvolt_app import commissioning_command

EXCEL = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"


def show(study: Study) -> None:
    """Draw the choice of case and the downloads; each file is made when it is asked for."""
    st.markdown("#### Test sheet")
    st.caption("What to test before handing over, what to expect, and room for what is read. The workbook's sheet "
               "Readings, once filled in, can be put in on the page Readings.")  # fmt: skip
    held = [one.name for one in study.cases if one.solved]
    if not held:
        st.info("The plan gives way in every case: there is none to be tested in.")
        return
    with st.container(horizontal=True, vertical_alignment="bottom"):
        case = st.selectbox("Case to read in", held, key="test_sheet_case", width=300)
        for name, suffix, kind in (("Download test sheet", ".pdf", "application/pdf"),
                                   ("Download test sheet as a workbook", ".xlsx", EXCEL)):  # fmt: skip
            st.download_button(name, partial(_bytes, study, case, suffix), f"test-sheet{suffix}", kind,
                               on_click="ignore", key=f"download_test_sheet{suffix}")  # fmt: skip


def _bytes(study: Study, case: str, suffix: str) -> bytes:
    sheet = sheet_of(build_context(study.plan, study.rulebook), meter.parse(), case)
    return commissioning_command.written(sheet, suffix)
