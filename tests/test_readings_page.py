"""The page "Readings", driven without a browser: a table of readings, what they say, what is wrong with a row."""

from pathlib import Path

import pytest
from streamlit.testing.v1 import AppTest

import farvolt_app.pages

ENTRY = Path(farvolt_app.pages.__file__).with_name("entry.py")

FRIDGE = [
    {"case": "Evening, resting bank at low charge", "from": "living block", "from pole": "feed", "to": "rear fridge",
     "volts": "0.300"},
    {"from": "rear fridge", "from pole": "return", "to": "living block", "volts": "0.164"},
]  # fmt: skip


@pytest.fixture
def page() -> AppTest:
    """The page, open on the van."""
    found = AppTest.from_file(str(ENTRY), default_timeout=120).run()
    return found.switch_page("readings_page.py").run()


def put(page: AppTest, rows: list[dict[str, str]]) -> AppTest:
    page.session_state["readings"] = rows
    page.session_state["readings_revision"] = page.session_state["readings_revision"] + 1
    return page.run()


def test_an_empty_table_waits_for_readings(page: AppTest) -> None:
    assert not page.exception
    assert "no readings yet" in page.info[0].value


def test_the_bad_joint_is_named_with_the_next_reading(page: AppTest) -> None:
    put(page, FRIDGE)
    assert not page.exception
    assert "do not fit the plan" in page.warning[0].value
    suspects = next(one.value for one in page.dataframe if "suspect" in one.value)
    assert suspects["suspect"][0] == 'feed of run W08 "fridge feed"'
    assert any("What to measure next" in one.value for one in page.markdown)


def test_readings_that_fit_are_said_to_fit(page: AppTest) -> None:
    put(page, [{**FRIDGE[0], "volts": "0.2107"}, {**FRIDGE[1], "volts": "0.1642"}])
    assert "All readings fit the plan" in page.success[0].value


def test_a_wrong_row_is_named(page: AppTest) -> None:
    put(page, [FRIDGE[0], {"from": "rear fridge", "volts": "twelve"}])
    assert not page.exception
    assert "row 2, volts" in page.error[0].value.replace("\\", "")


def test_clearing_leaves_an_empty_table(page: AppTest) -> None:
    put(page, FRIDGE).button(key="clear_readings").click().run()
    assert "no readings yet" in page.info[0].value
