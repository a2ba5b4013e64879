"""The page "Findings": what the checks say, worst first, with working, basis and remedy."""

import streamlit as st

from farvolt.results import Study
from farvolt_app import shown
from farvolt_app.pages import results
from farvolt_app.shown import SEVERITIES, plain

MOST_IN_FULL = 40


def show(study: Study) -> None:
    """Draw the findings that are chosen."""
    book = study.rulebook
    st.caption(plain(f"Held against the rulebook {book.name}: {book.title} ({book.edition}). {shown.verdict(study)}."))
    chosen = st.pills(
        "Show",
        list(SEVERITIES),
        selection_mode="multi",
        default=list(SEVERITIES),
        format_func=_legend,
        key="severities",
    )
    found = [one for one in study.findings if one.severity in chosen]
    if not found:
        st.info("Nothing to show: the checks that were made found nothing of this kind. That is no proof of safety.")
    for number, one in enumerate(found[:MOST_IN_FULL]):
        with st.expander(f"**{SEVERITIES[one.severity]}**: {plain(one.message)}", key=f"finding-{number}"):
            st.text(shown.finding_text(one))
    if found:
        st.markdown("#### As a table")
        results.table(shown.finding_rows(found), "findings", "All findings")
    st.markdown("#### Taken as given")
    for line in study.assumptions:
        st.markdown(f"- {plain(line)}")
    st.caption(plain(shown.CAUTION))


def _legend(severity: str) -> str:
    meanings = {
        "fail": "FAIL: breaks a limit",
        "warn": "doubtful: beyond a recommendation, or not shown to hold",
        "note": "note: to know",
    }
    return meanings[severity]


if (found := results.study()) is not None:
    show(found)
