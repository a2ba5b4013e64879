"""The commands `shopping` and `prices`, and the lists as CSV: what is written where, and text that stays text."""

import csv
import io
from pathlib import Path

import openpyxl
import pytest
from click.testing import CliRunner, Result

from farvolt import examples, planfile, price_file, shopping
from farvolt.errors import FarvoltError
from farvolt.shopping import Bill, Wanted
from farvolt.study import study
from farvolt_app import shopping_rows
from farvolt_app.cli import main
from wiring import cable, fuse, lamp, plan_of

ODD = ["=HYPERLINK(1)", "@radio", "+1-2", "-pump", "<b>bold</b>", "\x1b[31mred"]


def run(*arguments: str | Path) -> Result:
    """The command in this process, on a terminal wide enough to fold no cell."""
    return CliRunner(env={"COLUMNS": "220"}).invoke(main, [str(one) for one in arguments])


@pytest.fixture
def van(tmp_path: Path) -> Path:
    """An example plan in a file."""
    path = tmp_path / "van.toml"
    path.write_text(examples.text("instrument-repair-van"), encoding="utf-8")
    return path


def table(text: str) -> list[dict[str, str]]:
    """A CSV read back."""
    return list(csv.DictReader(io.StringIO(text.removeprefix("\ufeff"))))


def test_the_list_and_the_cuts_are_printed(van: Path) -> None:
    """Without prices: quantities alone, and said so; every run is in the cut list."""
    result = run("shopping", van)
    assert result.exit_code == 0
    assert "No price list is given" in result.stdout
    for plan_run in planfile.parse(van.read_text()).runs:
        assert f" {plan_run.name} " in result.stdout


def test_prices_come_with_what_their_list_says_of_itself(van: Path) -> None:
    """The list shipped is invented; its total is that of the list."""
    result = run("shopping", van, "--prices", "example")
    prices = price_file.example()
    total = shopping.of_study(study(planfile.parse(van.read_text())), Wanted(prices=prices)).total
    assert f"Total {total:.2f} EUR; 4 lines have no price. Invented prices: no shop asks these." in result.stdout
    assert "reel of 10 m" in result.stdout


def test_a_list_of_ones_own_starts_from_the_one_shipped(van: Path, tmp_path: Path) -> None:
    """Written, read back, and no longer invented once its first line is gone."""
    own = tmp_path / "own.csv"
    assert run("prices", "-o", own).exit_code == 0
    assert run("prices").stdout == price_file.example_text() == own.read_text(encoding="utf-8")
    own.write_text(own.read_text(encoding="utf-8").split("\n", 2)[2], encoding="utf-8")
    result = run("shopping", van, "--prices", own)
    assert "Invented" not in result.stdout
    assert "Prices as in" in result.stdout


def test_files_are_written_beside_what_was_there(van: Path, tmp_path: Path) -> None:
    """Shopping list and cut list as CSV, the whole workbook as .xlsx; an older file is kept."""
    target, cuts, book = tmp_path / "list.csv", tmp_path / "cuts.csv", tmp_path / "all.xlsx"
    target.write_text("older")
    result = run("shopping", van, "--prices", "example", "-o", target, "--cuts", cuts)
    assert (result.exit_code, result.stdout) == (0, "")
    assert (tmp_path / "list.csv.previous").read_text() == "older"
    listed, cut = table(target.read_text(encoding="utf-8")), table(cuts.read_text(encoding="utf-8"))
    assert all(row["Price list"].startswith("Invented") for row in listed if row["Price"])
    assert {row["Note"].split(";")[0] for row in listed if not row["Price"]} == {"no price"}
    assert sum(float(row["Cut to (m)"]) for row in cut) > 60
    assert run("shopping", van, "--prices", "example", "-o", book).exit_code == 0
    assert "Invented" in openpyxl.load_workbook(book)["Shopping"]["A3"].value


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--spare", "10"], 'the spare: "10" has no unit'),
        (["--spare", "150 %"], "accepted: 0 % to 100 %"),
        (["--spare", "-5 %"], "accepted: 0 % to 100 %"),
        (["--reel", "25"], 'did you mean "25 m"?'),
        (["--reel", "1 cm"], "accepted: 0.1 m to 10000 m"),
        (["--prices", "none.csv"], "none.csv: cannot be read"),
        (["-o", "list.pdf"], "accepted: .csv, .xlsx"),
        (["--cuts", "cuts.xlsx"], "accepted: .csv"),
    ],
)
def test_what_cannot_be_used_is_said_in_one_message(van: Path, arguments: list[str], said: str) -> None:
    """Exit code 2, nothing on standard output."""
    result = run("shopping", van, *arguments)
    assert result.exit_code == 2
    assert result.stdout == ""
    assert said in result.stderr
    assert "Traceback" not in result.stderr


def test_the_plan_is_never_written_over(tmp_path: Path) -> None:
    """Even where it is called like a list."""
    plan = tmp_path / "plan.csv"
    plan.write_text(examples.text("instrument-repair-van"))
    assert "is the plan itself" in run("shopping", plan, "-o", plan).stderr
    assert "is the plan itself" in run("shopping", plan, "--cuts", plan).stderr
    assert plan.read_text() == examples.text("instrument-repair-van")


def odd_bill(odd: str) -> Bill:
    """The list of a plan whose names are odd."""
    runs = [cable(odd, "bank", "a", "3 m", "4 mm2", label=odd, colour=odd, protection=fuse("10 A"))]
    points = [{"name": "bank", "kind": "busbar", "stud": odd}]
    return shopping.of_study(study(plan_of(runs, [lamp(odd, "a", "5 A")], points=points)))


@pytest.mark.parametrize("odd", [one for one in ODD if one.isprintable()])
def test_text_of_a_plan_begins_no_cell_like_a_formula(odd: str) -> None:
    """Names, labels, colours and studs, in both lists."""
    bill = odd_bill(odd)
    for text in (shopping_rows.list_csv(bill), shopping_rows.cuts_csv(bill)):
        cells = [cell for row in csv.reader(io.StringIO(text)) for cell in row]
        assert any(odd in cell for cell in cells)
        assert not any(cell[:1] in ("=", "+", "-", "@") and not cell[1:2].isdigit() for cell in cells)


def test_a_price_list_with_odd_text_is_only_text(tmp_path: Path) -> None:
    """Its notice cannot steer a terminal, and is no formula in a CSV."""
    data = "# \x1b[31m=1+1\nitem,per,price,currency\nlabel,piece,1,EUR\n"
    bill = shopping.of_study(
        study(plan_of([cable("lead", "bank", "a")])), Wanted(prices=price_file.parse(data.encode()))
    )
    assert "\x1b" not in shopping_rows.total_text(bill)
    assert "\x1b" not in shopping_rows.list_csv(bill)


def test_runs_still_to_be_chosen_are_named() -> None:
    """Their size on the list is one taken meanwhile."""
    assert '"free"' in shopping_rows.to_choose(study(plan_of([cable("free", "bank", "a", size=None)])))
    assert shopping_rows.to_choose(study(plan_of([cable("lead", "bank", "a")]))) == ""


def test_reels_are_asked_for_as_lengths() -> None:
    """Feet and metres, each once, shortest first."""
    assert shopping_rows.wanted(None, "0 %", ["25 m", "25 ft", "25 m"]).reels_m == (25 * 0.3048, 25)
    with pytest.raises(FarvoltError, match="the length of a reel"):
        shopping_rows.wanted(None, "0 %", ["long"])
