"""The shopping list and the cut list, as part of a page: with a price list if one is given, and files to download."""

from functools import partial
from typing import Any

import streamlit as st

from farvolt import price_file, shopping, upsizing
from farvolt.errors import FarvoltError
from farvolt.results import Study
from farvolt.shopping import Bill, Wanted
from farvolt.upsizing import Hint
from farvolt_app import shopping_rows, workbook
from farvolt_app.pages import results, state
from farvolt_app.shown import plain

NO_PRICES, EXAMPLE, OWN = "No prices", "Example prices (invented)", "Your own price list"
EXCEL = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"


def show(study: Study) -> None:
    """Draw the questions, the lists and their downloads."""
    st.markdown("#### Shopping list")
    try:
        how = _wanted()
    except FarvoltError as error:
        st.error("\n\n".join(plain(line) for line in str(error).split("\n")))
        return
    bill, hints = _worked_out(study, how)
    if study.interim:
        st.warning(plain(shopping_rows.to_choose(study)))
    st.markdown(f"**{plain(shopping_rows.total_text(bill))}**")
    results.table(
        [_in_short(row, bill) for row in shopping_rows.list_rows(bill)], "shopping", "Shopping list", tall=True
    )
    if hints and how.prices is not None:
        with st.expander("Where a thicker size costs less"):
            st.markdown("\n".join(f"- {plain(shopping_rows.hint_text(hint, how.prices.currency))}" for hint in hints))
    st.markdown("#### Cut list")
    results.table(shopping_rows.cut_rows(bill), "cuts", "Cut list", tall=True)
    st.caption(plain(shopping_rows.MEASURE))
    _downloads(study, bill)


def _wanted() -> Wanted:
    """How to buy, as the page is answered. Raises FarvoltError."""
    with st.container(horizontal=True, vertical_alignment="bottom"):
        source = st.selectbox(
            "Prices", [NO_PRICES, EXAMPLE, OWN], key="price_source", width=260,
            help="With prices, cable is bought in the reels that cost least in all.",
        )  # fmt: skip
        spare = st.text_input(
            "Spare on every length", "10 %", key="spare", width=160, help="Added to each piece before it is cut."
        )  # fmt: skip
        reels = st.text_input(
            "Reels on offer", "", key="reels", placeholder="10 m, 25 m", width=220,
            help="Lengths sold as one, with commas; for cable that no price list has.",
        )  # fmt: skip
        st.download_button(
            "Download example prices", price_file.example_text().encode("utf-8-sig"), "prices.csv", "text/csv",
            on_click="ignore", key="download_prices", help="An invented list, to fill in with what your shop asks.",
        )  # fmt: skip
    asked = shopping_rows.wanted(
        None, spare, [one.strip() for one in reels.split(",") if one.strip()], example=source == EXAMPLE
    )  # fmt: skip
    if source != OWN:
        return asked
    given = st.file_uploader("Price list (CSV with the columns of the example)", type="csv", key="price_file")
    if given is None:
        st.info("Put in a CSV file. The example is one to start from.")
        return asked
    return Wanted(asked.spare, _read(given), asked.reels_m)


def _read(given: Any) -> Any:
    """The list in an upload, read once."""
    before = st.session_state.get("price_list")
    if before is None or before[0] != given.file_id:
        data = given.read(price_file.SIZE_LIMIT_BYTES + 1)
        given.seek(0)
        before = (given.file_id, price_file.parse(data, given.name))
        st.session_state["price_list"] = before
    return before[1]


def _worked_out(study: Study, how: Wanted) -> tuple[Bill, list[Hint]]:
    """The list and its hints, worked out again when the study or an answer is another."""
    before = st.session_state.get("bill")
    if before is None or before[0] is not study or before[1] != how:
        with st.spinner("Sharing the pieces out to reels …"):
            bill = shopping.of_study(study, how)
            before = (study, how, bill, upsizing.of_study(study, bill))
        st.session_state["bill"] = before
    return before[2], before[3]


def _in_short(row: dict[str, Any], bill: Bill) -> dict[str, Any]:
    """A row without what the line above the table says once for all, and without prices where there are none."""
    left_out = {"Price list", "Currency"} | (set() if bill.wanted.prices is not None else {"Unit price", "Price"})
    return {name: value for name, value in row.items() if name not in left_out}


def _downloads(study: Study, bill: Bill) -> None:
    text = state.draft().valid_text
    with st.container(horizontal=True):
        for name, data, file, mime in (
            ("Download shopping list", partial(_bytes, shopping_rows.list_csv, bill), "shopping.csv", "text/csv"),
            ("Download cut list", partial(_bytes, shopping_rows.cuts_csv, bill), "cuts.csv", "text/csv"),
            ("Download workbook with this list", partial(workbook.to_bytes, study, bill.wanted, text), "cables.xlsx",
             EXCEL),
        ):
            st.download_button(name, data, file, mime, on_click="ignore", key=f"{file}_{name[9:13]}")


def _bytes(make: Any, bill: Bill) -> bytes:
    return str(make(bill)).encode("utf-8-sig")
