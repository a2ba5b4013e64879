"""Papers from the pages: what is offered to download, and when."""

import pytest
from streamlit.testing.v1 import AppTest

from farvolt import examples
from farvolt_app import labels
from farvolt_app.server import ENTRY, PLAN_VARIABLE

VAN = examples.text("instrument-repair-van")


@pytest.fixture
def page(monkeypatch: pytest.MonkeyPatch) -> AppTest:
    """A new browser session on the first page."""
    monkeypatch.delenv(PLAN_VARIABLE, raising=False)
    at = AppTest.from_file(str(ENTRY), default_timeout=60).run()
    assert not at.exception
    return at


def downloads(at: AppTest) -> list[str]:
    """Labels of the buttons that download."""
    return [one.proto.label for one in at.get("download_button")]


def test_the_report_is_made_when_asked_for_and_only_offered_for_the_plan_it_is_of(page: AppTest) -> None:
    page.switch_page("schedule_page.py").run()
    assert "report" not in page.session_state
    assert "Download labels" in downloads(page)
    page.button(key="make_report").click().run()
    assert not page.exception
    wanted, made = page.session_state["report"]
    assert made.startswith(b"%PDF")
    assert wanted == (VAN, "a4", "metres")
    assert "Download report" in downloads(page)
    page.button_group(key="report_paper").set_value("letter").run()
    assert "Download report" not in downloads(page)


def test_a_size_that_no_label_has_is_said_with_what_is_accepted(
    page: AppTest, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(labels, "SIZES", ("50x20",))  # as a person may type it: without its unit
    page.switch_page("schedule_page.py").run()
    assert "accepted: width x height" in page.error[0].value.replace("\\", "")
    assert "Download labels" not in downloads(page)


def test_the_drawing_is_offered_in_three_forms(page: AppTest) -> None:
    page.switch_page("drawing_page.py").run()
    assert {"Download SVG", "Download PNG", "Download PDF"} <= set(downloads(page))
