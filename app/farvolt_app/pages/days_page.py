"""The page "Days": the plan worked through hour by hour, with its sun, its chargers and what cuts out when."""

import datetime as dt
from functools import partial
from typing import Any

import streamlit as st

from farvolt.day_course import STEP_MINUTES
from farvolt.day_results import DaysStudy
from farvolt.errors import FarvoltError
from farvolt.plan import Plan
from farvolt_app import days_chart, days_command, days_rows, shown
from farvolt_app.days_command import Wishes
from farvolt_app.pages import results, state
from farvolt_app.shown import plain

KEPT = "days_found"
OWN = "as the calendar has them"


def show(plan: Plan) -> None:
    """Draw the questions, then the answer to those asked last."""
    wishes, table = _questions(plan)
    if st.button("Work through the days", type="primary", key="days_run"):
        st.session_state[KEPT] = (plan, _worked(plan, wishes, table))
    before, found = st.session_state.get(KEPT, (None, None))
    if found is None:
        st.caption("A year in hours takes a few seconds; every step is solved on the plan's own cables.")
    elif isinstance(found, str):
        st.error(plain(found))
    else:
        if before is not plan:
            st.caption("The plan has changed since: this is what it was.")
        _answer(found)


def _questions(plan: Plan) -> tuple[Wishes, Any]:
    with st.container(horizontal=True, vertical_alignment="bottom"):
        start = st.date_input("From", days_command.usual_start(plan), key="days_start", width=150,
                              min_value=dt.date(1950, 1, 1), max_value=dt.date(2150, 12, 31))  # fmt: skip
        count = st.number_input("Days", 1, 3660, 14, key="days_count", width=120)
        step = st.selectbox("Step (min)", STEP_MINUTES, STEP_MINUTES.index(60), key="days_step", width=120)
        charge = st.number_input("Charge at start (%)", 0, 100, _charge(plan), key="days_charge", width=170)
        kind = st.selectbox("Types of day", [OWN, *(one.name for one in plan.days)], key="days_kind", width=240)
    table = st.file_uploader("Irradiance of your own (CSV: time, ghi in W/m²; dni, dhi, temp_air, wind where known)",
                             type="csv", key="days_table")  # fmt: skip
    day = start if isinstance(start, dt.date) else None
    wishes = Wishes(day, int(count), int(step), f"{charge} %", day=None if kind == OWN else str(kind))
    return wishes, table


def _charge(plan: Plan) -> int:
    """What the reference battery states, in percent."""
    found = [one for one in plan.sources if one.kind == "battery"]
    battery = next((one for one in found if one.name == plan.reference), next(iter(found), None))
    return round(100 * battery.charge.si) if battery is not None and battery.kind == "battery" else 100


def _worked(plan: Plan, wishes: Wishes, upload: Any) -> DaysStudy | str:
    """The days, or why there are none."""
    bar = st.progress(0.0, "Working through the days …")
    try:
        table = None
        if upload is not None:
            table = days_command.table_of(upload.name, upload.getvalue(), plan)
        path = state.draft().path
        return days_command.study(plan, path.parent if path else None, wishes, bar.progress, table=table)
    except FarvoltError as error:
        return str(error)
    finally:
        bar.empty()


def _answer(found: DaysStudy) -> None:
    for line in days_rows.answer(found):
        st.markdown(f"- {plain(line)}")
    st.altair_chart(days_chart.chart(found), width="content", key="days_chart")
    with st.container(horizontal=True):
        for name, mime in (("svg", "image/svg+xml"), ("pdf", "application/pdf")):
            st.download_button(
                f"Download chart as {name.upper()}", partial(days_chart.written, found, f".{name}"), f"days.{name}",
                mime, on_click="ignore", key=f"download_days_{name}",
            )  # fmt: skip
        st.download_button("Download every step as CSV", partial(_csv, found), "days.csv", "text/csv",
                           on_click="ignore", key="download_days_csv")  # fmt: skip
    for title, rows, key in (
        ("Loads", days_rows.load_rows(found), "days_loads"),
        ("Banks", days_rows.bank_rows(found), "days_banks"),
        ("Sources", days_rows.source_rows(found), "days_sources"),
        ("Account of energy", days_rows.account_rows(found), "days_account"),
    ):
        if rows:
            st.markdown(f"#### {title}")
            results.table(rows, key, title)
    for line in (*found.notes, days_rows.certificate(found), shown.CAUTION):
        st.caption(plain(line))


def _csv(found: DaysStudy) -> bytes:
    return days_rows.to_csv(found).encode("utf-8-sig")


if (study := results.study()) is not None:
    show(study.plan)
