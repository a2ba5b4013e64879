"""A choice as changes to the text of a plan: sizes, cables in parallel and protection, nothing else."""

from collections.abc import Iterator
from typing import Any

from farvolt.choice_options import Option
from farvolt.choose import Choice
from farvolt.units import number
from farvolt_app.edits import Set, Step, apply, read


def applied(text: str, choice: Choice) -> str:
    """The text of the plan with the choice in it; the same text where nothing was chosen."""
    rows = read(text).get("runs", [])
    found = choice.picked or {}
    return apply(text, [step for run, option in found.items() for step in _of_run(run, rows[run], option)])


def _of_run(run: int, row: dict[str, Any], option: Option) -> Iterator[Step]:
    if row.get("size") != option.size.name:
        yield Set("runs", run, ("size",), option.size.name)
    if row.get("parallel", 1) != option.parallel:
        yield Set("runs", run, ("parallel",), option.parallel)
    if option.rating_A is not None:
        yield from _protection(run, row, option)


def _protection(run: int, row: dict[str, Any], option: Option) -> Iterator[Step]:
    """The rating where the plan has one in that seat; else a protection of its own."""
    rating, given, at_to = f"{number(option.rating_A or 0.0, 6)} A", row.get("protection"), row.get("protection_to")
    if option.end == "to" and isinstance(at_to, dict):
        yield Set("runs", run, ("protection_to", "rating"), rating)
        return
    every = given if isinstance(given, list) else [given] if given else []
    for place, one in enumerate(every):
        if one.get("pole", "feed") == "feed" and one.get("end", "from") == option.end:
            path = ("protection", place) if isinstance(given, list) else ("protection",)
            yield Set("runs", run, (*path, "rating"), rating)
            return
    made = {"type": option.kind, "rating": rating, **({"end": "to"} if option.end == "to" else {})}
    yield Set("runs", run, ("protection",), made if not every else [*every, made])
