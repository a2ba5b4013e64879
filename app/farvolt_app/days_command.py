"""The command `days`: its options, the simulation with its progress, and what it writes."""

import datetime as dt
import json
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

import click

from farvolt import day_course, day_light, day_setup, days, irradiance_file, planfile, units
from farvolt.day_course import Period
from farvolt.day_results import DaysStudy, as_object, days_study
from farvolt.day_setup import Start
from farvolt.days import Progress
from farvolt.errors import FarvoltError, QuantityError
from farvolt.irradiance_file import IrradianceTable
from farvolt.plan import Plan

MOST_BYTES = 100_000_000


@dataclass(frozen=True)
class Wishes:
    """The options of the command, as they were written."""

    start: dt.date | None = None
    days: int = 14
    step_min: int = 60
    start_charge: str | None = None
    low_charge: str | None = None
    irradiance: str | None = None
    day: str | None = None
    ambient: str | None = None
    aged: bool = False


def study(
    plan: Plan, folder: Path | None, wishes: Wishes, progress: Progress | None = None,
    table: IrradianceTable | None = None,
) -> DaysStudy:  # fmt: skip
    """Work through the days, with the sun of `table` where there is one. Raises FarvoltError."""
    period = Period(wishes.start or usual_start(plan), wishes.days, wishes.step_min)
    charge = share(wishes.start_charge, "--start-charge")
    low = share(wishes.low_charge, "--low-charge")
    ambient = quantity(wishes.ambient, "temperature", "--ambient")
    ready = day_setup.prepare(plan, folder)
    if wishes.irradiance is not None:
        table = read_table(Path(wishes.irradiance), plan)
    course = day_course.course(plan, period, table=table, day=wishes.day, ambient_degC=ambient)
    return days_study(days.simulate(ready, course, Start(charge, wishes.aged), progress), low)


def usual_start(plan: Plan) -> dt.date:
    """Where nothing is asked for: the first day of the darkest month of this year."""
    south = plan.site is not None and plan.site.latitude.si < 0
    return dt.date(dt.date.today().year, 6 if south else 12, 1)


def share(text: str | None, option: str) -> float | None:
    """A share such as "90 %", at most all of it."""
    found = quantity(text, "share", option)
    if found is not None and not 0 <= found <= 1:
        raise FarvoltError(f'{option}: "{text}" is beyond what there is; accepted: 0 % to 100 %')
    return found


def quantity(text: str | None, dimension: str, option: str) -> float | None:
    """A quantity of an option, in base units."""
    if text is None:
        return None
    try:
        return units.parse(text, dimension).si
    except QuantityError as error:
        near = f"; did you mean {error.nearest}?" if error.nearest else ""
        raise FarvoltError(f'{option}: "{text}" {error.problem}; accepted: {error.accepted}{near}') from None


def read_table(path: Path, plan: Plan) -> IrradianceTable:
    """A table of irradiance from a file. Raises FarvoltError."""
    try:
        if path.stat().st_size > MOST_BYTES:
            raise FarvoltError(f"{path}: is larger than 100 MB; accepted: a year at one minute, or less")
        data = path.read_bytes()
    except OSError as error:
        raise FarvoltError(f"{path}: cannot be read ({error.strerror})") from None
    return table_of(path.name, data, plan)


def table_of(name: str, data: bytes, plan: Plan) -> IrradianceTable:
    """A table of irradiance, read for the plan's site. Raises FarvoltError."""
    site = day_light.place(plan)
    if site is None:
        raise FarvoltError(f"{name}: {day_light.NEEDS_PLACE}")
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise FarvoltError(f"{name}: is not UTF-8 text (byte {error.start}); accepted: CSV as UTF-8") from None
    return irradiance_file.read(text, name, site, day_course.clock(plan))


def run(path: str, wishes: Wishes, *, as_json: bool, quiet: bool = False) -> DaysStudy:
    """Work through the days of a plan file and print what they come to, unless it is to be `quiet`."""
    from farvolt_app import days_text

    read = planfile.read(path)
    with _progress() as progress:
        found = study(read.plan, read.folder, wishes, progress)
    if as_json:
        click.echo((json.dumps(as_object(found), ensure_ascii=False, allow_nan=False) + "\n").encode(), nl=False)
    elif not quiet:
        days_text.show(found)
    return found


@contextmanager
def _progress() -> Iterator[Progress | None]:
    """Show on a terminal how far the days are; silent elsewhere."""
    if not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console

    with Console(stderr=True).status("Working through the days …") as status:
        yield lambda done: status.update(f"Working through the days: {done:.0%} …")
