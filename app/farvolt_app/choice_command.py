"""The command `choose`: its options as wishes, the search with its progress, and the choice written into the plan."""

import json
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import click

from farvolt import conductors
from farvolt.choice_options import Wishes
from farvolt.choose import Choice, Progress, Report
from farvolt.conductors import Size
from farvolt.errors import FarvoltError, QuantityError
from farvolt.units import number


def wishes(
    objective: str | None, prices: str | None, sizes: str | None, most_sizes: int | None, size_cost: float,
    parallel: int, *, ratings: bool, every: bool, seconds: float,
) -> Wishes:  # fmt: skip
    """The options of the command line as wishes. Raises FarvoltError for a price list or a size that cannot be read."""
    from farvolt import price_file

    if objective == "cost" and prices is None:
        raise FarvoltError("--objective cost needs a price list: --prices FILE.csv")
    listed = price_file.read(Path(prices)) if prices is not None else None
    aim = objective or ("cost" if listed is not None else "mass")
    return Wishes(
        objective="cost" if aim == "cost" else "mass", prices=listed, sizes=stock(sizes) if sizes else (),
        most_sizes=most_sizes, size_cost=size_cost, runs="all" if every else "free", parallel=parallel,
        ratings=ratings, time_limit_s=seconds,
    )  # fmt: skip


def stock(text: str) -> tuple[Size, ...]:
    """Sizes with commas between them. Raises FarvoltError with the one that cannot be read."""
    found = []
    for word in text.split(","):
        try:
            found.append(conductors.parse_size(word))
        except QuantityError as error:
            near = f"; did you mean {error.nearest}?" if error.nearest else ""
            raise FarvoltError(f'--sizes: "{word.strip()}" {error.problem}; accepted: {error.accepted}{near}') from None
    return tuple(found)


def run(path: str, wanted: Wishes, *, as_json: bool, apply_it: bool, with_curve: bool) -> bool:
    """Choose, print and, if asked for, write into the plan; whether a choice was found."""
    from farvolt import planfile, rulebook
    from farvolt.choice_curve import curve
    from farvolt.choose import choose
    from farvolt_app import choice_edits, choice_text

    read = planfile.read(path)
    if apply_it and read.path is None:
        raise FarvoltError("--apply needs a plan in a file: there is nothing to write standard input back to")
    book = rulebook.load(read.plan.plan.rulebook, read.folder)
    with _progress() as report:
        found = choose(read.plan, book, wanted, report)
    if as_json:
        click.echo(json.dumps(choice_text.as_object(found), ensure_ascii=False, allow_nan=False))
    else:
        choice_text.show(found)
    if with_curve and not as_json:
        with _progress() as report:
            choice_text.show_curve(curve(read.plan, book, wanted, report), wanted.unit)
    if apply_it and found.picked is not None and read.path is not None:
        planfile.save(read.path, choice_edits.applied(read.text, found), expected=planfile.stamp(read.text))
        click.echo(f"Wrote {path}. Next: farvolt check {path}", err=True)
    return found.picked is not None


@contextmanager
def _progress() -> Iterator[Report]:
    """Show on a terminal what is being done, with the best cost and the bound so far; silent elsewhere."""
    if not sys.stderr.isatty():
        yield lambda progress: None
        return
    from rich.console import Console

    with Console(stderr=True).status("Choosing …") as status:
        yield lambda progress: status.update(told(progress))


def told(progress: Progress) -> str:
    """Progress in a line."""
    cost = f"; best so far {number(progress.cost, 4)}" if progress.cost is not None else ""
    bound = f", none below {number(progress.bound, 4)}" if progress.bound else ""
    return f"{progress.doing}{cost}{bound} …"


__all__ = ["Choice", "run", "stock", "told", "wishes"]
