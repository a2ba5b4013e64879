"""The script that Streamlit runs for each session and each change: the heading that all pages share, then the page."""

import streamlit as st

from farvolt_app.pages import heading, state

PAGES = (
    ("plan_page.py", "Plan", "plan"),
    ("start_page.py", "Guided start", "start"),
    ("drawing_page.py", "Drawing", "drawing"),
    ("findings_page.py", "Findings", "findings"),
    ("protection_page.py", "Protection", "protection"),
    ("choice_page.py", "Cable choice", "choice"),
    ("bank_page.py", "Bank", "bank"),
    ("days_page.py", "Days", "days"),
    ("schedule_page.py", "Schedule", "schedule"),
    ("readings_page.py", "Readings", "readings"),
    ("compare_page.py", "Compare", "compare"),
)


def run() -> None:
    """Draw the page that the address asks for."""
    st.set_page_config(page_title="Farvolt", layout="wide", menu_items={"about": None})
    state.begin()
    pages = [
        st.Page(script, title=title, url_path=address, default=script == PAGES[0][0])
        for script, title, address in PAGES
    ]
    page = st.navigation(pages, position="top")
    if st.session_state.get("page") != page.title:
        st.session_state["page"] = page.title
        state.show_anew()
    state.mark_address()
    heading.show()
    page.run()


run()
