"""The shipped example plans, and the short plan that a new file starts from. All of them are invented."""

import tomllib
from functools import lru_cache
from pathlib import Path

from farvolt.errors import FarvoltError
from farvolt.integrity import nearest, shorten
from farvolt_data import ROOT

FOLDER = ROOT / "examples"
"""Where the example plans are; the name of an example is the name of its file without ending."""


@lru_cache(maxsize=1)
def names() -> tuple[str, ...]:
    """Names of the example plans, in alphabetical order."""
    return tuple(sorted(file.stem for file in FOLDER.glob("*.toml")))


def path(name: str) -> Path:
    """The file of an example. Raises FarvoltError for a name that no example has."""
    if name not in names():
        near = nearest(name, names())
        hint = f"; did you mean {near}?" if near else ""
        raise FarvoltError(f'no example is called "{shorten(name)}"; accepted: {", ".join(names())}{hint}')
    return FOLDER / f"{name}.toml"


def text(name: str) -> str:
    """The text of an example plan, comments and all. Raises FarvoltError for an unknown name."""
    return path(name).read_text(encoding="utf-8")


@lru_cache(maxsize=16)
def title(name: str) -> str:
    """The name that an example's plan gives itself. Raises FarvoltError for an unknown name."""
    return str(tomllib.loads(text(name))["plan"]["name"])


def starter_text() -> str:
    """The short commented plan that a new plan file starts from."""
    return (ROOT / "starter.toml").read_text(encoding="utf-8")
