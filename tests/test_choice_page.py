"""The page "Cable choice", driven without a browser."""

import random
from pathlib import Path

import pytest
from streamlit.testing.v1 import AppTest

from choosing import draft
from farvolt_app.server import ENTRY, PLAN_VARIABLE
from strategies import text_of


@pytest.fixture
def page(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> AppTest:
    plan = tmp_path / "plan.toml"
    plan.write_text("# Mine\n" + text_of(draft(random.Random(3))))
    monkeypatch.setenv(PLAN_VARIABLE, str(plan))
    at = AppTest.from_file(str(ENTRY), default_timeout=120).run()
    at.switch_page("choice_page.py").run()
    assert not at.exception
    return at


def test_choosing_shows_the_choice_and_takes_it_into_the_draft_with_comments(page: AppTest) -> None:
    page.button(key="choose").click().run()
    assert not page.exception
    rows = page.dataframe[0].value
    assert list(rows["Present"]) == ["free"] * len(rows)
    sizes = list(rows["Chosen"])
    page.button(key="choice_apply").click().run()
    assert not page.exception
    plan = page.session_state["draft"]
    assert "# Mine" in plan.text
    assert [run.size.name for run in plan.plan.runs] == sizes


def test_a_size_that_cannot_be_read_is_named(page: AppTest) -> None:
    page.text_input(key="choice_stock").set_value("6 mm").run()
    assert not page.exception
    assert any("6 mm" in one.value for one in page.error)


def test_a_plan_with_all_its_sizes_says_so(page: AppTest) -> None:
    page.button(key="choose").click().run()
    page.button(key="choice_apply").click().run()
    page.button(key="choose").click().run()
    assert not page.exception
    assert any("states its size" in one.label for one in page.status)
