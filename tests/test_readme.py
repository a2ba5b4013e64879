"""What the README shows is what the program prints."""

import re
from pathlib import Path

import pytest
from click.testing import CliRunner

from farvolt import examples, rulebook
from farvolt_app.cli import main

README = (Path(__file__).parent.parent / "README.md").read_text(encoding="utf-8")
VAN = str(examples.path("instrument-repair-van"))


def block(beginning: str) -> list[str]:
    """The lines of the code block that begins with a text, without the command itself."""
    for found in re.findall(r"```\w*\n(.*?)```", README, re.DOTALL):
        if found.startswith(beginning):
            return [line for line in found.splitlines() if line and line != "…" and not line.startswith("$ ")]
    raise AssertionError(f"README.md shows no block that begins with {beginning!r}")


@pytest.mark.parametrize(
    ("beginning", "options"), [("$ farvolt check", []), ('warn drop.load  "fridge"', ["--working"])]
)
def test_output_shown_is_output_printed(
    beginning: str, options: list[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Every line shown is printed, in the same order; what is left out is marked by an ellipsis."""
    monkeypatch.setenv("COLUMNS", "100")
    printed = [line.rstrip() for line in CliRunner().invoke(main, ["check", VAN, *options]).output.splitlines()]
    place = 0
    for line in block(beginning):
        assert line in printed[place:], line
        place = printed.index(line, place) + 1


def test_every_command_and_rulebook_is_named() -> None:
    """A command or a shipped rulebook that the README does not know is not finished."""
    for name in main.commands:
        assert re.search(rf"farvolt {name}\b", README), name
    for name in rulebook.shipped():
        assert f"`{name}`" in README


def test_pictures_are_there() -> None:
    """Each picture that is linked is a file, with words for those who cannot see it."""
    pictures = re.findall(r"!\[([^\]]+)\]\(([^)]+)\)", README)
    assert pictures
    for words, path in pictures:
        assert len(words) > 20
        assert (Path(__file__).parent.parent / path).is_file()


def test_the_job_comes_first_and_then_two_commands() -> None:
    """One paragraph, then one line that opens the pages and one that passes the tests."""
    assert README.splitlines()[2].startswith("Farvolt plans low-voltage DC wiring")
    commands = [line for line in README.splitlines() if line.startswith("python3 -m venv")]
    assert len(commands) == 2
    assert commands[0].endswith(".venv/bin/farvolt")
    assert "pytest" in commands[1]


def test_contributors_find_every_module_in_its_page() -> None:
    """DEVELOPERS.md names each module of the core and of the app, so that it cannot fall behind the code."""
    root = Path(__file__).parent.parent
    page = (root / "DEVELOPERS.md").read_text(encoding="utf-8")
    modules = [*(root / "core" / "farvolt").glob("*.py"), *(root / "app" / "farvolt_app").glob("*.py")]
    unnamed = [module.stem for module in modules if module.stem != "__init__" and f"`{module.stem}`" not in page]
    assert unnamed == []
