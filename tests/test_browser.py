"""The pages in a real browser: edit a cell, see the drop change, undo, download; and nothing leaves the machine."""

import contextlib
import io
import re
import shutil
import subprocess
import tempfile
import urllib.request
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import openpyxl
import pytest

from farvolt import examples, planfile
from farvolt_app import edits, server
from farvolt_app.edits import Set

playwright = pytest.importorskip("playwright.sync_api", reason="needs the playwright package")
CHROMIUM = shutil.which("chromium")
FLAGS = [
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync",
]  # fmt: skip
FRIDGE_FEED = 7
VAN = examples.text("instrument-repair-van")
HOSTILE = '<img src=x onerror="document.title=1">:red[x] **b** $d$'

pytestmark = [
    pytest.mark.browser,
    pytest.mark.skipif(CHROMIUM is None, reason="needs Debian's chromium"),
]


@pytest.fixture(scope="module")
def address() -> Iterator[str]:
    """The pages on an example, served for this module."""
    with served(None) as where:
        yield where


@contextlib.contextmanager
def served(plan: Path | None) -> Iterator[str]:
    """The pages on a plan, for as long as the block lasts."""
    port = server.free_port("127.0.0.1")
    folder = tempfile.TemporaryDirectory()
    process = subprocess.Popen(server.command(port, "127.0.0.1"), env=server.environment_for(plan, folder.name))
    try:
        where = server.url(port, "127.0.0.1")
        assert server._answers(process, where)
        yield where
    finally:
        server._end(process)
        folder.cleanup()


@pytest.fixture
def browser() -> Iterator[Any]:
    with playwright.sync_playwright() as driver:
        started = driver.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
        yield started
        started.close()


class Page:
    """A browser tab on the pages, with the few things a person does there."""

    def __init__(self, browser: Any, where: str, **context: Any) -> None:
        self.tab = browser.new_context(viewport={"width": 1440, "height": 1400}, **context).new_page()
        self.tab.set_default_timeout(60_000)
        self.requests: list[str] = []
        self.tab.on("request", lambda request: self.requests.append(request.url))
        self.tab.goto(where)
        self.cells("Load")

    def cells(self, column: str) -> list[list[str]]:
        """The rows of the table with such a column, from what it offers to screen readers."""
        table = self.tab.locator("table[role=grid]", has=self.tab.locator("th", has_text=re.compile(f"^{column}$")))
        table.first.wait_for(state="attached")
        script = "table => [...table.querySelectorAll('tbody tr')].map(r => [...r.cells].map(c => c.textContent))"
        rows: list[list[str]] = table.first.evaluate(script)
        return rows

    def fridge_volts(self) -> float:
        """Volts of the fridge as the results show them."""
        return float(next(row[2] for row in self.cells("Load") if row[0] == "fridge"))

    def type_into(self, heading: str, row: int, text: str) -> None:
        """Type into a cell of the editor that is shown, as from the keyboard, and commit it."""
        self._open(heading, row)
        field = self.tab.locator(".gdg-input, .gdg-style textarea, #portal textarea").first
        field.wait_for()
        field.fill(text)
        self.tab.keyboard.press("Enter")

    def choose_in(self, heading: str, row: int, text: str) -> None:
        """Choose from the list that a cell of the editor opens, by the keyboard."""
        self._open(heading, row)
        field = self.tab.locator("#portal input").first
        field.wait_for()
        self.tab.keyboard.type(text)
        self.tab.keyboard.press("Enter")

    def _open(self, heading: str, row: int) -> None:
        editor = self.tab.locator("[data-testid=stDataFrame]").first
        # The editor is drawn after the results are there, on a busy machine well after.
        editor.locator("th", has_text=re.compile(f"^{heading}$")).first.wait_for(state="attached")
        headings = editor.locator("th").all_text_contents()
        box = editor.locator("canvas").first.bounding_box()
        # Two clicks on two rows: one on the cell that is selected already would open it.
        for y in (90, 55):
            self.tab.mouse.move(box["x"] + 80, box["y"] + y)
            self.tab.mouse.wheel(-10_000, -10_000)
            self.tab.wait_for_timeout(200)
            self.tab.mouse.click(box["x"] + 80, box["y"] + y)
            self.tab.wait_for_timeout(200)
        for key, times in (("ArrowRight", headings.index(heading)), ("ArrowDown", row)):
            for _ in range(times):
                self.tab.keyboard.press(key)
                self.tab.wait_for_timeout(30)
        self.tab.keyboard.press("Enter")

    def wait_until(self, what: Any) -> None:
        """Wait until the page shows what is expected, or fail."""
        for _ in range(300):
            with contextlib.suppress(StopIteration):
                if what():
                    return
            self.tab.wait_for_timeout(100)
        raise AssertionError("the page never showed what was expected")

    def press(self, name: str) -> None:
        """Press a button by its words."""
        self.button(name).click()

    def button(self, name: str) -> Any:
        """A button by its words, which the keys of its shortcut may follow."""
        return self.tab.get_by_role("button", name=re.compile(rf"^{name}( Shortcut .*)?$"))

    def download(self, name: str) -> bytes:
        """What a download button hands over."""
        with self.tab.expect_download() as waiting:
            self.press(name)
        return Path(waiting.value.path()).read_bytes()


def test_edit_a_length_see_the_drop_change_undo_and_download(browser: Any, address: str) -> None:
    page = Page(browser, address)
    before = page.fridge_volts()
    page.type_into("Length", FRIDGE_FEED, "9 m")
    page.wait_until(lambda: page.fridge_volts() < before)
    assert page.download("Download plan").decode() == edits.apply(VAN, [Set("runs", FRIDGE_FEED, ("length",), "9 m")])
    page.press("Undo")
    page.wait_until(lambda: page.fridge_volts() == before)
    assert page.download("Download plan").decode() == VAN
    hosts = {re.sub(r"^\w+://([^/]*).*", r"\1", url) for url in page.requests if not url.startswith(("data:", "blob:"))}
    assert hosts == {address.removeprefix("http://")}


def test_one_edit_after_another_and_a_wrong_one_lose_nothing(browser: Any, address: str) -> None:
    page = Page(browser, address)
    page.type_into("Length", FRIDGE_FEED, "9 m")
    page.type_into("Size", FRIDGE_FEED, "six")
    page.type_into("Name", FRIDGE_FEED + 1, HOSTILE)
    page.wait_until(lambda: HOSTILE in page.download("Download plan").decode().replace('\\"', '"'))
    kept = edits.read(page.download("Download plan").decode())["runs"]
    assert (kept[FRIDGE_FEED]["length"], kept[FRIDGE_FEED]["size"]) == ("9 m", "six")
    assert kept[FRIDGE_FEED + 1]["name"] == HOSTILE
    assert page.tab.get_by_text("cannot be used yet").is_visible()
    assert page.cells("What is wrong")[0][:3] == ['runs "fridge feed"', "size", '"six"']
    texts = [page.download("Download plan")]
    while page.button("Undo").is_enabled():
        page.press("Undo")
        page.wait_until(lambda: page.download("Download plan") != texts[-1])
        texts.append(page.download("Download plan"))
    assert texts[-1].decode() == VAN


def test_a_new_row_becomes_an_entry(browser: Any, address: str) -> None:
    page = Page(browser, address)
    page.tab.get_by_role("radio", name="Zones").or_(
        page.tab.get_by_role("button", name="Zones", exact=True)
    ).first.click()
    page.wait_until(lambda: page.cells("Engine space"))
    page.type_into("Ambient", 3, "40 degC")
    page.wait_until(lambda: "new zone" in page.download("Download plan").decode())
    plan = planfile.parse(page.download("Download plan").decode())
    assert plan.zones["new zone"].ambient.text == "40 degC"


def test_the_workbook_holds_the_plan_as_it_was_edited(browser: Any, address: str) -> None:
    page = Page(browser, address)
    before = page.fridge_volts()
    page.type_into("Length", FRIDGE_FEED, "9.75 m")
    page.wait_until(lambda: page.fridge_volts() < before)
    page.tab.get_by_role("link", name="Schedule").click()
    data = page.download("Download workbook")
    book = openpyxl.load_workbook(io.BytesIO(data))
    values = {cell.value for sheet in book for row in sheet.iter_rows() for cell in row}
    assert 9.75 in values
    assert "fridge feed" in values


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_the_drawing_is_an_inert_picture_with_a_table_beside_it(browser: Any, tmp_path: Path, scheme: str) -> None:
    text = VAN
    for index in range(len(edits.read(text)["loads"])):
        text = edits.apply(text, edits.renaming(edits.read(text), "loads", index, f"{HOSTILE} {index}"))
    (tmp_path / "hostile.toml").write_text(text)
    with served(tmp_path / "hostile.toml") as where:
        page = Page(browser, where, color_scheme=scheme)
        page.tab.get_by_role("link", name="Drawing").click()
        picture = page.tab.locator("img[alt*='Single-line diagram']")
        picture.wait_for()
        page.wait_until(lambda: picture.evaluate("one => one.complete && one.naturalWidth > 0"))
        assert page.cells("Point")
        page.tab.get_by_text("full size").click()
        whole = page.tab.locator("[data-testid=stHtml] img")
        page.wait_until(lambda: whole.evaluate("one => one.complete && one.naturalWidth > 1000"))
        assert page.tab.title() == "Farvolt"
        assert page.tab.locator("img[src=x]").count() == 0


def test_a_page_loaded_again_has_lost_nothing_and_another_tab_starts_afresh(browser: Any, address: str) -> None:
    page = Page(browser, address)
    before = page.fridge_volts()
    page.type_into("Length", FRIDGE_FEED, "9 m")
    page.wait_until(lambda: page.fridge_volts() < before)
    page.tab.get_by_role("link", name="Findings").click()
    page.tab.get_by_text("Taken as given").wait_for()
    page.tab.reload()
    page.tab.get_by_role("link", name="Plan").click()
    page.wait_until(lambda: page.fridge_volts() < before)
    copy = Page(browser, page.tab.url)
    assert copy.fridge_volts() == page.fridge_volts()
    copy.type_into("Length", FRIDGE_FEED, "11 m")
    copy.wait_until(lambda: copy.fridge_volts() < page.fridge_volts())
    page.tab.reload()
    page.cells("Load")
    assert 'length = "9 m"' in page.download("Download plan").decode()
    assert Page(browser, address).fridge_volts() == before


def test_two_tabs_have_each_their_own_plan(browser: Any, address: str) -> None:
    first, second = Page(browser, address), Page(browser, address)
    before = first.fridge_volts()
    first.type_into("Length", FRIDGE_FEED, "12 m")
    first.wait_until(lambda: first.fridge_volts() < before)
    assert second.fridge_volts() == before
    assert second.download("Download plan").decode() == VAN


def test_the_pages_answer_on_this_machine_only(address: str) -> None:
    opener = urllib.request.build_opener(urllib.request.ProxyHandler({}))
    assert address.startswith("http://127.0.0.1:")
    with opener.open(address, timeout=20) as answer:
        assert answer.status == 200


def test_undo_and_redo_by_the_keyboard(browser: Any, address: str) -> None:
    page = Page(browser, address)
    before = page.fridge_volts()
    page.type_into("Length", FRIDGE_FEED, "9 m")
    page.wait_until(lambda: page.fridge_volts() < before)
    after = page.fridge_volts()
    page.tab.keyboard.press("Control+z")
    page.wait_until(lambda: page.fridge_volts() == before)
    page.tab.keyboard.press("Control+y")
    page.wait_until(lambda: page.fridge_volts() == after)


def test_a_point_is_chosen_from_a_list_that_a_new_one_was_added_to(browser: Any, address: str) -> None:
    page = Page(browser, address)
    page.cells("From point")
    page.press("New point")
    page.tab.get_by_role("textbox", name="Name of the point").fill("awning")
    page.tab.keyboard.press("Enter")
    page.tab.get_by_role("textbox", name="Name of the point").wait_for(state="hidden")
    page.choose_in("To point", FRIDGE_FEED, "awning")
    page.wait_until(lambda: 'to = "awning"' in page.download("Download plan").decode())
    assert edits.read(page.download("Download plan").decode())["runs"][FRIDGE_FEED]["to"] == "awning"


def test_undo_while_a_text_is_typed_is_the_texts_own(browser: Any, address: str) -> None:
    page = Page(browser, address)
    before = page.fridge_volts()
    page.type_into("Length", FRIDGE_FEED, "9 m")
    page.wait_until(lambda: page.fridge_volts() < before)
    page.press("Paste rows")
    field = page.tab.get_by_role("textbox", name="Rows copied from a spreadsheet")
    field.click()
    page.tab.keyboard.type("x")
    page.tab.keyboard.press("Control+z")
    page.tab.wait_for_timeout(1500)
    assert 'length = "9 m"' in page.download("Download plan").decode()


ADDRESSES = (
    "", "start", "drawing", "findings", "protection", "choice", "bank", "days", "schedule", "readings", "compare",
)  # fmt: skip
RULES = "axe.run({runOnly: ['wcag2a', 'wcag2aa', 'wcag21a', 'wcag21aa']})"


@pytest.mark.parametrize(("scheme", "width"), [("light", 1024), ("dark", 768)])
def test_every_page_has_labels_contrast_and_fits_its_width(browser: Any, address: str, scheme: str, width: int) -> None:
    package = pytest.importorskip("axe_playwright_python", reason="needs the rules of accessibility that it brings")
    rules = Path(package.__file__).with_name("axe.min.js").read_text()
    tab = browser.new_context(viewport={"width": width, "height": 1000}, color_scheme=scheme).new_page()
    found = []
    for page in ADDRESSES:
        tab.goto(f"{address}/{page}")
        tab.locator(".st-key-undo button").first.wait_for(timeout=60_000)
        tab.locator("[data-testid=stApp][data-test-script-state=notRunning]").wait_for(timeout=60_000)
        tab.wait_for_timeout(1500)
        tab.evaluate(rules)
        broken = tab.evaluate(RULES)["violations"]
        found += [(page, one["id"], node["target"], node["failureSummary"]) for one in broken for node in one["nodes"]]
        beyond = tab.evaluate("document.documentElement.scrollWidth - document.documentElement.clientWidth")
        assert (page, beyond) == (page, 0)
        assert tab.locator("[data-testid=stException]").count() == 0
    assert found == []
