"""The page "Bank": the energy of each type of day, the size of the bank, its charging, and what checks say of it."""

from functools import partial

import streamlit as st

from farvolt.bank_study import BankStudy, bank_study
from farvolt.results import Study
from farvolt_app import bank_rows, energy_chart, shown
from farvolt_app.pages import results
from farvolt_app.shown import plain


def show(study: Study) -> None:
    """Draw the bank of the plan."""
    bank = bank_study(study)
    for line in bank_rows.answer(bank):
        st.markdown(f"- {plain(line)}")
    _findings(bank)
    _energy(bank)
    _size(bank)
    st.caption(plain(shown.CAUTION))


def _findings(bank: BankStudy) -> None:
    for number, one in enumerate(bank.findings):
        with st.expander(f"**{shown.SEVERITIES[one.severity]}**: {plain(one.message)}", key=f"bank-{number}"):
            st.text(shown.finding_text(one))


def _energy(bank: BankStudy) -> None:
    st.markdown("#### Energy of a day")
    names = [one.day for one in bank.budgets]
    with st.container(horizontal=True, vertical_alignment="bottom"):
        chosen = st.selectbox("Type of day", names, index=names.index(bank.design.day), key="bank_day", width=420,
                              help="Types of day are tables [[days]] in the plan's text.")  # fmt: skip
    budget = next((one for one in bank.budgets if one.day == chosen), bank.design)
    results.table(bank_rows.load_rows(budget), "bank_loads", "Energy of each load in a day", tall=True)
    if budget.converters:
        results.table(bank_rows.converter_rows(budget), "bank_converters", "What converters pass on and lose")
    for line in budget.left_out:
        st.caption(plain(line))
    st.altair_chart(energy_chart.chart(budget), width="content", key="energy_shares")
    with st.container(horizontal=True):
        for name, mime, made in (
            ("svg", "image/svg+xml", energy_chart.svg),
            ("pdf", "application/pdf", energy_chart.pdf),
        ):
            st.download_button(
                f"Download chart as {name.upper()}", partial(made, budget), f"energy.{name}", mime,
                on_click="ignore", key=f"download_energy_{name}",
            )  # fmt: skip
    results.table(bank_rows.system_rows(bank), "bank_systems", "Energy by type of day and system")


def _size(bank: BankStudy) -> None:
    for title, rows, key in (
        ("Size of the bank", bank_rows.step_rows(bank), "bank_steps"),
        ("Charging", bank_rows.charging_rows(bank), "bank_charging"),
        ("Demand of feeders, in two columns", bank_rows.feeder_rows(bank), "bank_feeders"),
    ):
        if rows:
            st.markdown(f"#### {title}")
            results.table(rows, key, title)
    for place, (title, lines) in enumerate(bank_rows.workings(bank)):
        with st.expander(plain(title), key=f"bank-working-{place}"):
            st.text("\n".join(lines))


if (found := results.study()) is not None:
    show(found)
