"""The command `as-built`: readings into the plan, kept with their date, and compared with earlier ones."""

import csv
import io
import sys
from collections.abc import Iterator, Sequence
from dataclasses import replace
from datetime import date
from pathlib import Path
from typing import TYPE_CHECKING

import click

from farvolt.errors import FarvoltError, QuantityError

if TYPE_CHECKING:
    from farvolt.as_built import RunBuilt
    from farvolt.plan import Plan
    from farvolt.planfile import PlanFile
    from farvolt_app.as_built_edits import Change
    from farvolt_app.readings_file import Rows


@click.command("as-built")
@click.argument("plan")
@click.argument("readings", required=False)
@click.option("--accept", multiple=True, metavar="RUN", help="Take over what was measured of this run; again for each.")
@click.option("--length", "lengths", multiple=True, metavar="RUN=LENGTH", help='As laid: "galley feed=4.8 m".')
@click.option("--size", "sizes", multiple=True, metavar="RUN=SIZE", help='As laid: "galley feed=10 mm2".')
@click.option("--temperature", help='Of the conductors when read, "25 degC"; their ambient in the case unless given.')
@click.option("--write", "write_it", is_flag=True, help="Write the changes into PLAN; comments are kept.")
@click.option("--keep", metavar="FILE", help="Keep the readings with their date in this CSV file.")
@click.option("--against", metavar="FILE", help="Compare with these earlier readings: what grew beyond the meter.")
def as_built(
    plan: str, readings: str | None, accept: tuple[str, ...], lengths: tuple[str, ...], sizes: tuple[str, ...],
    temperature: str | None, write_it: bool, keep: str | None, against: str | None,
) -> None:  # fmt: skip
    """Take what was built into PLAN: resistances from meter READINGS, and lengths and sizes as laid.

    READINGS are those of farvolt locate; a run is measured by the volts over each of its conductors and the amps in
    them, in one set. Shows what would change; only --write writes, keeping the plan before as NAME.previous. A run
    outside its tolerances is taken over only where --accept names it: a bad joint is to be mended, not planned with.
    The exit code is 1 when a run is outside its tolerances, or changed since the readings of --against.
    """
    from farvolt_app import as_built_edits, cli

    if readings is None and (accept or keep or against or temperature or not (lengths or sizes)):
        raise click.UsageError("READINGS is missing: a CSV file, or a workbook with a sheet Readings")
    degC = _degC(temperature)
    read = cli._read(plan)
    if write_it and read.path is None:
        raise FarvoltError("--write needs a plan in a file: there is nothing to write standard input back to")
    if keep is not None:
        _refuse_kept(plan, keep)
    changes = as_built_edits.stated(read.plan, lengths, sizes)
    # What was measured is held against the cables as they were laid.
    laid = replace(read, plan=_changed(read, changes)[1])
    if readings is None:
        _finish(read, changes, [], write_it)
        return
    with cli._placed(read, plan):
        wrong = _from_readings(laid, readings, accept, changes, degC, write_it, keep, against)
    sys.exit(cli.FAILS if wrong else 0)


def _degC(text: str | None) -> float | None:
    from farvolt.units import parse

    try:
        return None if text is None else parse(text, "temperature").si
    except QuantityError as error:
        raise FarvoltError(f'--temperature: "{text}" {error}; accepted: {error.accepted}') from None


def _refuse_kept(plan: str, keep: str) -> None:
    from farvolt_app import cli

    if Path(keep).suffix.lower() != ".csv":
        raise click.BadParameter(f'"{keep}" is not written; accepted: .csv', param_hint="--keep")
    cli._refuse_plan(plan, keep)


def _from_readings(
    read: "PlanFile", readings: str, accept: Sequence[str], changes: "list[Change]", degC: float | None,
    write_it: bool, keep: str | None, against: str | None,
) -> bool:  # fmt: skip
    """Show what the readings say, and write and keep what is asked for; whether a run is outside or changed."""
    from farvolt import as_built as core
    from farvolt import reading_table, rulebook
    from farvolt.installation import Installation
    from farvolt_app import as_built_edits, as_built_text, cli, readings_file

    source = "standard input" if readings == "-" else readings
    rows = readings_file.rows_in(readings)
    sets = reading_table.from_rows(rows, read.plan, source)
    earlier = readings_file.read(against, read.plan) if against is not None else None
    installation = Installation(read.plan, rulebook.load(read.plan.plan.rulebook, read.folder))
    built = core.runs_built(installation, sets, degC)
    if not built and not (changes or keep):
        raise FarvoltError(f"{source}: {NOT_MEASURED}")
    drifts = core.drift(installation, earlier, sets) if earlier is not None else []
    taken = as_built_edits.resistances(read.plan, built, accept)
    if built:
        as_built_text.show_built(built)
    if earlier is not None:
        as_built_text.show_drift(drifts, earlier, sets)
    named = {one.run for one in taken}
    left = [one for one in built if one.outside and one.run.name not in named] if not accept else []
    _finish(read, [*changes, *taken], left, write_it)
    if keep is not None:
        cli._write_beside(str(read.path or "-"), keep, kept_csv(rows).encode("utf-8-sig"))
    return any(one.outside for one in built) or any(one.changed for one in drifts)


NOT_MEASURED = (
    "no run was measured; accepted: in one set the volts between the two ends of a conductor (from, from pole, to, to "
    "pole, volts) and the amps in it (run, pole, amps), both more than the meter may be off by"
)


def _changed(read: "PlanFile", changes: "list[Change]") -> "tuple[str, Plan]":
    """Text and plan after the changes."""
    from farvolt import planfile
    from farvolt_app import edits

    text = edits.apply(read.text, [one.step for one in changes])
    return text, planfile.parse(text, str(read.path or "standard input"))


def _finish(read: "PlanFile", changes: "list[Change]", left: "Sequence[RunBuilt]", write_it: bool) -> None:
    """Show the changes, and write them where that is asked for."""
    from farvolt import planfile
    from farvolt_app import as_built_text

    text, _ = _changed(read, changes)
    written = write_it and bool(changes)
    if written and read.path is not None:
        planfile.save(read.path, text, expected=planfile.stamp(read.text))
        click.echo(f"Wrote {read.path}. Next: farvolt check {read.path}", err=True)
    as_built_text.show_changes(changes, left, written=written)


def kept_csv(rows: "Rows") -> str:
    """Readings to keep, as CSV with all columns: what was read, with its state, and today where no time is stated."""
    from farvolt.readings import COLUMNS
    from farvolt_app.textsafe import csv_text

    names = [cell.strip().lower() for cell in rows[0][1]]
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(COLUMNS)
    for row in _filled([dict(zip(names, cells, strict=False)) for _, cells in rows[1:]]):
        row["time"] = row.get("time") or date.today().isoformat()
        writer.writerow([csv_text(row.get(name, "").strip()) for name in COLUMNS])
    return out.getvalue()


def _filled(rows: "list[dict[str, str]]") -> "Iterator[dict[str, str]]":
    """Rows with a reading, and those that are the first to tell the state of their set; each names its set."""
    from farvolt.reading_states import STATE_COLUMNS

    said, name = set(), ""
    for row in rows:
        name = row["set"] = row.get("set") or name
        state = (name, *(row.get(column, "") for column in STATE_COLUMNS))
        if row.get("volts") or row.get("amps") or (any(state[1:]) and state not in said):
            said.add(state)
            yield row
