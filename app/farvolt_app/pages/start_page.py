"""The page "Guided start": a complete first plan from a few answers."""

from typing import Any

import pandas as pd
import streamlit as st

from farvolt import first_plan, rulebook
from farvolt.errors import FarvoltError
from farvolt.first_plan import Answers, Wanted, appliances
from farvolt_app import draft as drafts
from farvolt_app.pages import state
from farvolt_app.shown import plain

CHEMISTRIES = {
    "lfp": "lithium iron phosphate (LFP)", "agm": "lead, AGM", "gel": "lead, gel", "flooded": "lead, flooded",
    "nmc": "other lithium (NMC)",
}  # fmt: skip
ROWS = [("compressor fridge", "4 m"), ("interior lights", "3 m"), ("water pump", "2.5 m"), ("USB outlets", "3 m")]


def show() -> None:
    """Ask, and make the plan."""
    st.markdown(
        "Answer what you know; everything can be changed afterwards. The plan gets cables and fuses that pass the "
        "checks, as far as there are some: Findings tells what is left, and what is not verified. Figures of "
        "appliances are typical: put in those of the rating plates later."
    )
    with st.form("guided"):
        left, middle, right = st.columns(3)
        with left:
            name = st.text_input("Name of the plan", "My plan", max_chars=200)
            volts = st.selectbox("System voltage (V)", first_plan.VOLTAGES, help="12 V in most vehicles and boats.")
            books = rulebook.shipped()
            book = st.selectbox("Rulebook", books, index=books.index("leisure-vehicle-eu"), format_func=_book,
                                help="The limits the plan is held against: by what you build, and where.")  # fmt: skip
        with middle:
            chemistry = st.selectbox("Battery", list(CHEMISTRIES), format_func=CHEMISTRIES.__getitem__)
            capacity = st.text_input("Capacity", "100 Ah", help="Of the whole bank, such as 200 Ah.")
            short = st.text_input("Short-circuit current", placeholder="from its data sheet, such as 1000 A",
                                  help="What fuses have to interrupt; without it, not verified.")  # fmt: skip
            bank_m = st.text_input("Battery to fuse block", "1 m", help="Length of the cable one way: 1 m or 3 ft.")
        with right:
            alternator = st.text_input("Charger at the alternator", placeholder="such as 30 A; empty: none")
            mains = st.text_input("Mains charger", placeholder="such as 20 A; empty: none")
            solar = st.text_input("Solar modules", placeholder="such as 200 W; empty: none")
            charging_m = st.text_input("Chargers to fuse block", "2 m", help="Length of their cables one way.")
        st.markdown("**What is to run**, each on a cable of its own from the fuse block")
        table = st.data_editor(
            pd.DataFrame([{"Appliance": one, "Cable": length, "Power": ""} for one, length in ROWS]),
            num_rows="dynamic", hide_index=True, key="guided_loads", alt="Appliances of the plan, to edit",
            column_config={
                "Appliance": st.column_config.SelectboxColumn(options=list(appliances()), required=True,
                                                              help="A common one; its name can be changed later."),
                "Cable": st.column_config.TextColumn(help="Length one way from the fuse block: 4 m or 13 ft."),
                "Power": st.column_config.TextColumn(help="From its rating plate: 60 W; empty: the typical one."),
            },
        )  # fmt: skip
        made = st.form_submit_button("Make the plan", type="primary")
    if state.draft().undo_texts and not state.draft().saved:
        st.caption("The plan that is open has edits that are not saved: save it first if you want to keep them.")
    if made:
        _make(Answers(
            name=name.strip() or "My plan", nominal_V=int(volts), rulebook=book, chemistry=chemistry, capacity=capacity,
            bank_distance=bank_m, loads=tuple(_wanted(table)), short_circuit=short.strip(),
            alternator=alternator.strip(), mains=mains.strip(), solar=solar.strip(), charging_distance=charging_m,
        ))  # fmt: skip


def _book(name: str) -> str:
    return f"{name}: {rulebook.load(name, None).title}"


def _wanted(table: pd.DataFrame) -> list[Wanted]:
    """The rows that name an appliance."""
    rows: list[dict[str, Any]] = table.to_dict("records")
    return [
        Wanted(str(row["Appliance"]), _cell(row["Cable"]) or "3 m", _cell(row["Power"]))
        for row in rows
        if _cell(row["Appliance"])
    ]


def _cell(value: Any) -> str:
    return value.strip() if isinstance(value, str) else ""


def _make(answers: Answers) -> None:
    try:
        with st.spinner("Choosing cables and fuses …"):
            text = first_plan.first_plan(answers)
    except FarvoltError as error:
        st.error(plain(str(error)))
        return
    state.put(drafts.begin(text))
    state.say("The first plan is made. Look at Findings next, then at the cables here.")
    st.switch_page("plan_page.py")


show()
