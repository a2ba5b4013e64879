"""An installation as built beside its plan, and readings of two dates, as tables on a terminal."""

from collections.abc import Sequence

from rich.text import Text

from farvolt.as_built import Drift, RunBuilt
from farvolt.context import label
from farvolt.readings import POLE_WORDS, ReadingSet
from farvolt.units import number
from farvolt_app.as_built_edits import Change
from farvolt_app.report_text import open_console, table
from farvolt_app.shown import CAUTION

TEMPERATURE = (
    "Copper has 4 % more resistance when it is 10 °C warmer: readings are taken at like temperatures, soon after the "
    "current is put on."
)  # fmt: skip


def show_built(built: Sequence[RunBuilt]) -> None:
    """Print what was measured of each run."""
    columns = (("Run", False), ("Planned mΩ", True), ("Tolerances mΩ", True), ("Measured mΩ", True), ("± mΩ", True),
               ("At °C", True), ("Says", False))  # fmt: skip
    out = open_console()
    table(out, "Runs as measured, feed and return together", columns, map(_built, built))
    out.print(Text(TEMPERATURE))


def _built(one: RunBuilt) -> tuple[str, ...]:
    passes = f"{_mohm(one.least_ohm)} to {_mohm(one.most_ohm)}"
    read = (_mohm(one.ohm), _mohm(one.limit_ohm)) if one.ohm is not None else ("", "")
    return label(one.run), _mohm(one.planned_ohm), passes, *read, number(one.degC), says(one)


def says(one: RunBuilt) -> str:
    """What a measured run says, in words."""
    if one.ohm is None:
        return one.lacking
    if one.outside == "more":
        return "! more than the tolerances allow: look for a bad joint or a thinner cable first"
    if one.outside == "less":
        return "! less than the tolerances allow: another way beside it, or another size or length"
    return "within the tolerances"


def _mohm(ohm: float) -> str:
    return number(1000 * ohm)


def show_changes(changes: Sequence[Change], left: Sequence[RunBuilt], *, written: bool) -> None:
    """Print what changes in the plan, and which measured runs are left as they are."""
    out = open_console()
    title = "Changes written" if written else "Changes to the plan (not written; --write writes them)"
    columns = (("Run", False), ("Field", False), ("Planned", False), ("As built", False))
    if changes:
        table(out, title, columns, [(one.run, one.field, one.before, one.after) for one in changes])
    else:
        out.print(Text("Nothing changes in the plan."))
    for one in left:
        out.print(Text(f'- Run {label(one.run)} is left as planned: {says(one).removeprefix("! ")}. '
                       "Naming it with --accept takes it over."))  # fmt: skip
    out.print(Text(f"\n{CAUTION}"))


def show_drift(found: Sequence[Drift], earlier: Sequence[ReadingSet], later: Sequence[ReadingSet]) -> None:
    """Print how conductors changed between two dates."""
    columns = (("Run", False), ("Conductor", False), ("Earlier mV/A", True), ("± mV/A", True), ("Later mV/A", True),
               ("± mV/A", True), ("More by", True), ("Says", False))  # fmt: skip
    out = open_console()
    table(out, f"Readings of {dates(later)} beside those of {dates(earlier)}", columns, map(_drift, found))
    out.print(Text(TEMPERATURE))


def _drift(one: Drift) -> tuple[str, ...]:
    says_so = f"! {one.changed} by more than the meter explains" if one.changed else "no more than the meter explains"
    return (
        one.run, POLE_WORDS[one.pole], _mohm(one.earlier.ohm), _mohm(one.earlier.limit_ohm), _mohm(one.later.ohm),
        _mohm(one.later.limit_ohm), _mohm(one.grown_ohm), says_so,
    )  # fmt: skip


def dates(sets: Sequence[ReadingSet]) -> str:
    """When sets of readings were taken, as their rows say."""
    times = sorted({time for one in sets for time in one.times})
    return "an unknown date" if not times else times[0] if len(times) == 1 else f"{times[0]} to {times[-1]}"
