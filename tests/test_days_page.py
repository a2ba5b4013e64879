"""The page "Days", driven without a browser."""

import socket
from pathlib import Path
from typing import Any

import pytest
from streamlit.testing.v1 import AppTest

import farvolt_app
from farvolt_app.server import PLAN_VARIABLE

ENTRY = Path(farvolt_app.__file__).parent / "pages" / "entry.py"


@pytest.fixture
def page(monkeypatch: pytest.MonkeyPatch) -> AppTest:
    monkeypatch.delenv(PLAN_VARIABLE, raising=False)

    def refuse(*_args: Any, **_kwargs: Any) -> None:
        raise AssertionError("the pages must not open connections")

    monkeypatch.setattr(socket.socket, "connect", refuse)
    at = AppTest.from_file(str(ENTRY), default_timeout=60).run()
    at.switch_page("days_page.py").run()
    assert not at.exception
    return at


def test_days_are_worked_through_when_asked_for(page: AppTest) -> None:
    assert not [one for one in page.markdown if "of charge" in one.value]
    page.number_input(key="days_count").set_value(2).run()
    page.button(key="days_run").click().run()
    assert not page.exception
    assert not page.error
    assert any("house bank" in one.value and "of charge" in one.value for one in page.markdown)
    loads = next(one.value for one in page.dataframe if "Not served (Wh)" in one.value.columns)
    assert "fridge" in loads["Load"].tolist()
    assert any("solutions of the network" in one.value for one in page.caption)


def test_a_type_of_day_can_be_asked_for(page: AppTest) -> None:
    page.number_input(key="days_count").set_value(1).run()
    page.selectbox(key="days_kind").set_value("summer weekend").run()
    page.button(key="days_run").click().run()
    assert not page.exception
    sources = next(one.value for one in page.dataframe if "Delivered (Wh)" in one.value.columns)
    given = dict(zip(sources["Source"], sources["Delivered (Wh)"], strict=True))
    assert given["alternator charger"] == 0
