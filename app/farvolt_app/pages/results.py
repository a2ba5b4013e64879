"""What every load and cable run sees, in the worst case or in a chosen one."""

from typing import Any

import streamlit as st

from farvolt.results import Study
from farvolt_app import shown, units_shown
from farvolt_app.pages import heading, state
from farvolt_app.shown import plain

WORST = "Worst of all cases"
EMPTY = "There are no results yet: the plan has faults that keep it from being calculated. Mend them on the page Plan."
FORMATS = {
    "Volts (V)": "%.2f", "Feed (V)": "%.3f", "Return (V)": "%.3f", "Drop (V)": "%.3f", "Drop (%)": "%.2f",
    "Current (A)": "%.2f", "May carry (A)": "%.1f", "Loss (W)": "%.2f", "Power (W)": "%.1f", "Sources (W)": "%.1f",
    "Loads (W)": "%.1f", "Lost in the wiring (W)": "%.2f", "Unit price": "%.2f", "Price": "%.2f",
    "Quantity (ft)": "%.1f", "Reel (m)": "%.2f", "Cut to (m)": "%.2f", "Cut to (ft)": "%.1f", "Left on it (m)": "%.2f",
}  # fmt: skip
TALL_PX = 760
WIDTHS = {"Findings": 150, "What": 520, "Case": 220, "Note": 320}
"""Columns of text that would else be cut short or take all the room, in pixels."""


def study() -> Study | None:
    """The results of the draft, below what is wrong with it; where there are none the page says so."""
    heading.faults()
    found = state.draft().results
    if found is None:
        st.info(EMPTY)
    return found


def table(rows: list[shown.Cells], key: str, alt: str, *, tall: bool = False) -> None:
    """A table of results in the units that are chosen, its numbers rounded for reading."""
    rows = units_shown.rows(rows, state.units())
    numbers = {name for row in rows for name, value in row.items() if isinstance(value, float)}
    config: dict[str, Any] = {
        name: st.column_config.NumberColumn(format=FORMATS.get(name, "%.4g")) for name in {*numbers, *FORMATS}
    }
    config |= {name: st.column_config.TextColumn(width=width) for name, width in WIDTHS.items()}
    height = min(TALL_PX, 40 + 35 * len(rows)) if tall else "auto"
    st.dataframe(rows, height=height, hide_index=True, key=key, alt=alt, column_config=config, placeholder="")


def show() -> None:
    """Draw the results under the editor."""
    found = study()
    if found is None:
        return
    with st.container(horizontal=True, vertical_alignment="bottom", horizontal_alignment="distribute"):
        st.markdown(f"#### Results: {shown.verdict(found)}")
        names = [case.name for case in found.cases]
        chosen = st.selectbox(
            "Case", [WORST, *names], key="case", persist_state="session", width=360,
            help="Worst: each load where its drop is largest, each cable run where its current is largest.",
        )  # fmt: skip
    index = names.index(chosen) if chosen in names else None
    left, right = st.columns(2)
    with left:
        st.markdown("**Loads**")
        table(shown.load_rows(found, index), "loads", "Volts and drop of each load")
    with right:
        st.markdown("**Cable runs**")
        table(shown.run_rows(found, index), "runs", "Current of each cable run")
    st.markdown("**Cases**")
    table(shown.case_rows(found), "cases", "Whether each case holds")
    st.caption(plain(shown.CAUTION))
