"""The protection of a plan as tables on a terminal: all of it, or one run with every rating that fits."""

import math

from farvolt import protection_choice
from farvolt.context import Context, label
from farvolt.protected import ProtectionResult, protections
from farvolt.protection_choice import Place
from farvolt.protection_types import protection_type, protection_type_names
from farvolt.units import number
from farvolt_app.report_text import open_console, place, table

HEADINGS = (
    ("run", False), ("type", False), ("rated A", True), ("load A", True), ("cable A", True), ("highest fault A", True),
    ("interrupts A", True), ("least fault A", True), ("opens within s", True), ("cable stands s", True),
)  # fmt: skip

NOTES = (
    "Cable A: the highest rating that all cables behind it allow. Fault currents are of bolted shorts; an arc or a "
    "loose joint draws less. Opens within, cable stands: at the least fault current, at the far end that is worst off."
)

UNVERIFIED = "What the typical figures of a type leave unverified, such as what it lets through, counts as no failure."


def show(context: Context, run: str | None) -> None:
    """Print every protection, or those of one run with the ratings of each type that pass all checks there.

    Raises FarvoltError, before anything is printed, for a run that the plan does not have.
    """
    index = None if run is None else place(run, [one.name for one in context.plan.runs], "run")
    out = open_console()
    found = [one for one in protections(context) if run in (None, one.run)]
    table(out, "Protection", HEADINGS, [row(context, one) for one in found])
    out.print(NOTES, markup=False)
    if index is not None:
        table(out, "Ratings that fail no check of protection here", (("type", False), ("ratings A", False)),
              _fitting(context, index))  # fmt: skip
        out.print(UNVERIFIED, markup=False)


def row(context: Context, one: ProtectionResult) -> tuple[str, ...]:
    """One protection as the cells of a table."""
    where = "" if (one.end, one.pole) == ("from", "feed") else f" ({one.end}, {one.pole})"
    estimated = " ?" if one.estimated else ""
    return (
        f"{label(context.plan.runs[context.run_index(one.run)])}{where}", one.type, number(one.rating_A),
        number(one.load_A), shown(one.cable_A), shown(one.highest_A) + estimated, shown(one.interrupts_A),
        shown(one.lowest_A), shown(one.opens_s), shown(one.allowed_s, "for good" if one.carried else "-"),
    )  # fmt: skip


def shown(value: float | None, nothing: str = "-") -> str:
    """A figure for reading; what is infinite is never reached."""
    if value is None:
        return nothing
    return number(value) if math.isfinite(value) else "never"


def _fitting(context: Context, index: int) -> list[tuple[str, ...]]:
    """Ratings by type for the present protection of a run, or for one at its start."""
    own = [one for one in context.plan.runs[index].protections if one.pole == "feed"]
    end = own[0].end if own else "from"
    known = [*context.plan.own_types.values(), *(protection_type(name) for name in protection_type_names())]
    found = protection_choice.fitting(context, Place(index, end), known)
    rows: list[tuple[str, ...]] = [(kind, ", ".join(map(number, ratings))) for kind, ratings in found.items()]
    return rows or [("none", "no rating of any type known here passes with the present cable")]
