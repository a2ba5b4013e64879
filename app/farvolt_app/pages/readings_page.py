"""The page "Readings": a table to type meter readings in, what they say of the installation, and what to read next."""

import csv
import io
from typing import Any

import pandas as pd
import streamlit as st

from farvolt import reading_table
from farvolt.errors import FarvoltError
from farvolt.installation import Installation
from farvolt.locate import Located, locate
from farvolt.next_reading import NextReading, next_readings
from farvolt.plan import CHASSIS, Plan
from farvolt.readings import ACCURACY, ReadingsError
from farvolt.results import Study
from farvolt_app import locate_text, readings_file, shown
from farvolt_app.pages import results
from farvolt_app.shown import plain

SHOWN = ("set", "case", "from", "from pole", "to", "to pole", "volts", "run", "pole", "amps", "notes")
MORE = ("loads", "sources", "devices", "accuracy", "resolution", "time")
EMPTY_ROWS = 4
HOW = (
    "Each row is one reading: volts between two nodes (a point alone is read from its feed to its return), or amps in "
    "one conductor of a run. Write a number as the meter shows it, with all its digits, or with its unit: 31.2 mV. "
    f"The meter is taken to be within ±({ACCURACY}) unless a row says otherwise. Rows of one set were read with the "
    "same loads on: those of its case."
)


def show(study: Study) -> None:
    """Draw the table, and below it what the readings say."""
    st.caption(plain(HOW))
    rows = _edited(study.plan)
    with st.container(horizontal=True):
        st.download_button("Download readings", _to_csv(rows), "readings.csv", "text/csv", on_click="ignore",
                           key="download_readings", disabled=not rows)  # fmt: skip
        st.button("Clear all readings", on_click=_keep, args=([],), key="clear_readings", disabled=not rows)
        as_read = st.checkbox("Take readings that look like slips as they stand", key="as_read")
    if not rows:
        st.info("There are no readings yet: type them in, or put in a file of them.")
        return
    try:
        sets = reading_table.from_rows([(1, list(_columns())), *_numbered(rows)], study.plan)
        found = locate(Installation(study.plan, study.rulebook), sets, as_read=as_read)
    except ReadingsError as error:
        st.error("\n\n".join(plain(str(fault)) for fault in error.faults))
        return
    except FarvoltError as error:
        st.error(plain(str(error)))
        return
    _answer(found, next_readings(found))


def _columns() -> tuple[str, ...]:
    return (*SHOWN, *MORE)


def _numbered(rows: list[dict[str, str]]) -> list[tuple[int, list[str]]]:
    """Rows numbered as the table counts them, the heading being none."""
    return [(at + 1, [row.get(name, "") for name in _columns()]) for at, row in enumerate(rows)]


def _edited(plan: Plan) -> list[dict[str, str]]:
    """The table as the user has it now; what a file held is put into it."""
    kept: list[dict[str, str]] = st.session_state.setdefault("readings", [])
    revision = st.session_state.setdefault("readings_revision", 0)
    more = st.toggle("More columns: loads, sources and devices of the moment, accuracy, time", key="more_readings",
                     persist_state="session")  # fmt: skip
    names = _columns() if more else SHOWN
    frame = pd.DataFrame([[row.get(name, "") for name in names] for row in kept] or [[""] * len(names)] * EMPTY_ROWS,
                         columns=list(names), dtype=object)  # fmt: skip
    edited = st.data_editor(
        frame, key=f"readings-{revision}-{more}", num_rows="dynamic", hide_index=True, placeholder="",
        column_config=_config(plan), alt="Table of readings, to edit",
    )  # fmt: skip
    _put_in(plan)
    hidden = [{name: row[name] for name in row if name not in names} for row in kept]
    rows = [
        {**(hidden[at] if at < len(hidden) else {}), **{name: _cell(value) for name, value in row.items()}}
        for at, row in enumerate(edited.to_dict("records"))
    ]
    return [row for row in rows if any(row.values())]


def _cell(value: Any) -> str:
    return "" if value is None or value != value else str(value).strip()


def _config(plan: Plan) -> dict[str, Any]:
    points = [*plan.point_names, CHASSIS]
    choices = {
        "case": [case.name for case in plan.checked_cases], "from": points, "to": points,
        "run": [run.name for run in plan.runs],
        **{name: ["feed", "return"] for name in ("from pole", "to pole", "pole")},
    }  # fmt: skip
    config: dict[str, Any] = {name: st.column_config.TextColumn(name) for name in _columns()}
    config |= {name: st.column_config.SelectboxColumn(name, options=["", *options]) for name, options in
               choices.items()}  # fmt: skip
    return config


def _put_in(plan: Plan) -> None:
    """A file of readings, whose rows take the place of those in the table."""
    with st.popover("Put in a file of readings"):
        given = st.file_uploader("CSV, or a workbook with a sheet Readings", ["csv", "xlsx"], key="readings_file")
        if given is None or st.session_state.get("readings_given") == given.file_id:
            return
        try:
            rows = readings_file.rows_of(given.name, given.getvalue())
            reading_table.from_rows(rows, plan, given.name)
        except ReadingsError as error:
            st.error("\n\n".join(plain(str(fault)) for fault in error.faults))
            return
    st.session_state["readings_given"] = given.file_id
    names = [cell.strip().lower() for cell in rows[0][1]]
    _keep([{name: cell.strip() for name, cell in zip(names, row, strict=False)} for _, row in rows[1:]])
    st.rerun()


def _keep(rows: list[dict[str, str]]) -> None:
    """Let the table start anew from these rows."""
    st.session_state["readings"] = rows
    st.session_state["readings_revision"] = st.session_state.get("readings_revision", 0) + 1


def _to_csv(rows: list[dict[str, str]]) -> bytes:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(_columns())
    writer.writerows([row.get(name, "") for name in _columns()] for row in rows)
    return out.getvalue().encode("utf-8-sig")


def _answer(found: Located, nexts: tuple[NextReading, ...]) -> None:
    """What the readings say."""
    verdict = [plain(line) for line in locate_text.verdict(found)]
    (st.success if found.fits else st.warning)("\n\n".join(verdict))
    if not found.fits:
        _table("Suspects", locate_text.SUSPECT_HEADINGS, locate_text.suspect_rows(found), "suspects")
        _list(locate_text.remarks(found))
    _table("Readings beside the plan", locate_text.READING_HEADINGS, locate_text.reading_rows(found), "readings_beside")
    _list([f"{one.place}: nothing is fed {one.where} in the state of its set; not used"
           for one in found.measured.unfed])  # fmt: skip
    if found.fits:
        st.markdown("**What these readings would not show**")
        _list(locate_text.unseen_lines(found))
    st.markdown("**What to measure next**")
    _list(locate_text.next_lines(found, nexts))
    st.caption(plain(f"{locate_text.BASIS} {shown.CAUTION}"))


def _list(lines: list[str]) -> None:
    if lines:
        st.markdown("\n".join(f"- {plain(line)}" for line in lines))


def _table(
    title: str, headings: tuple[tuple[str, bool], ...], rows: list[tuple[str, ...]], key: str
) -> None:
    st.markdown(f"**{title}**")
    cells = [dict(zip((name for name, _ in headings), row, strict=True)) for row in rows]
    st.dataframe(cells, hide_index=True, key=key, alt=title, placeholder="")


if (found := results.study()) is not None:
    show(found)
