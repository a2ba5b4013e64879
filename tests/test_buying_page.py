"""The shopping part of the page Schedule, driven without a browser."""

import pytest
from streamlit.testing.v1 import AppTest

from farvolt import examples, price_file, shopping
from farvolt.shopping import Wanted
from farvolt_app import edits
from farvolt_app.edits import Set
from farvolt_app.pages.buying import EXAMPLE, OWN
from farvolt_app.server import ENTRY, PLAN_VARIABLE

HOSTILE = ":red[x] **b** `c` $d$ <img src=x onerror=alert(1)> =1+1"


@pytest.fixture
def page(monkeypatch: pytest.MonkeyPatch) -> AppTest:
    """A new session on the page."""
    monkeypatch.delenv(PLAN_VARIABLE, raising=False)
    at = AppTest.from_file(str(ENTRY), default_timeout=120).run()
    at.switch_page("schedule_page.py").run()
    assert not at.exception
    return at


def listed(at: AppTest, column: str) -> list[object]:
    """A column of the table that has it."""
    return list(next(one.value for one in at.dataframe if column in one.value.columns)[column])


def said(at: AppTest) -> str:
    """What the page says in Markdown, its escapes taken away."""
    return "\n".join(one.value.replace("\\", "") for one in (*at.markdown, *at.error, *at.info))


def test_the_lists_are_there_without_prices(page: AppTest) -> None:
    """Every item of the library's list, and every cut of every run."""
    bill = shopping.of_study(page.session_state["draft"].results)
    assert listed(page, "Item") == [line.item for line in bill.lines]
    assert len(listed(page, "Cut to (m)")) == sum(len(one.pieces) for one in bill.cables)
    assert "No price list is given" in said(page)


def test_prices_show_what_their_list_says_of_itself(page: AppTest) -> None:
    """The example is invented; hints say what a thicker size saves."""
    page.selectbox(key="price_source").set_value(EXAMPLE).run()
    assert not page.exception
    bill = shopping.of_study(page.session_state["draft"].results, Wanted(prices=price_file.example()))
    assert f"Total {bill.total:.2f} EUR" in said(page)
    assert "Invented prices" in said(page)
    assert any(one.label == "Where a thicker size costs less" for one in page.expander)


def test_a_price_list_of_ones_own_is_put_in(page: AppTest) -> None:
    """104 labels at 0.50, and nothing else; then one with a fault, which is named with its row."""
    page.selectbox(key="price_source").set_value(OWN).run()
    assert "Put in a CSV file" in said(page)
    page.file_uploader(key="price_file").set_value(
        ("own.csv", b"item,per,price,currency\nlabel,piece,0.50,EUR\n", "text/csv")
    ).run()
    assert not page.exception
    assert "Total 52.00 EUR" in said(page)
    assert "Prices as in own.csv" in said(page)
    page.file_uploader(key="price_file").set_value(
        ("bad.csv", f"item,per,price,currency\nlabel,piece,{HOSTILE},EUR\n".encode(), "text/csv")
    ).run()
    assert not page.exception
    assert "row 2, price: is not a plain number" in said(page)
    assert "<img" not in "\n".join(one.value for one in page.error).replace("\\<", "")


def test_spare_and_reels_are_asked_for(page: AppTest) -> None:
    """Without spare the cuts are the plan's lengths; what is no length is said."""
    page.text_input(key="spare").set_value("0 %").run()
    assert sum(map(float, listed(page, "Cut to (m)"))) == pytest.approx(
        sum(one.needed_m for one in shopping.of_study(page.session_state["draft"].results).cables)
    )
    page.text_input(key="reels").set_value("5 m, 25 m").run()
    assert "reel of 25 m" in listed(page, "Cut from")
    page.text_input(key="reels").set_value("many").run()
    assert not page.exception
    assert 'the length of a reel: "many"' in said(page)


def test_text_of_a_plan_is_only_text(page: AppTest) -> None:
    """A hostile name of a run that is still free, and shown in a sentence."""
    text = edits.apply(examples.text("instrument-repair-van"), [Set("runs", 7, ("name",), HOSTILE)])
    page.switch_page("plan_page.py").run()
    page.segmented_control(key="table").set_value("Text").run()
    page.text_area[0].set_value(text.replace('size = "4 mm2"', 'size = "free"')).run()
    page.switch_page("schedule_page.py").run()
    assert not page.exception
    shown = "\n".join(one.value for one in page.warning)
    assert HOSTILE in shown.replace("\\", "")
    assert "<img" not in shown.replace("\\<", "")
