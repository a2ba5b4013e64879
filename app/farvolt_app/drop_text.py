"""What drives one load's voltage, as tables on a terminal."""

from rich.console import Console

from farvolt.context import Context
from farvolt.errors import FarvoltError
from farvolt.influence import Influence, influence
from farvolt.units import number
from farvolt_app.report_text import open_console, place, table

GAINS_SHOWN = 8


def show(context: Context, load: str, case: str | None) -> None:
    """Print the parts of a load's drop and what the next size of each run gains, in a case or in its worst one.

    Raises FarvoltError, before anything is printed, for a load or a case that the plan does not have.
    """
    names = [one.name for one in context.plan.loads]
    cases = [one.name for one in context.cases]
    index_of_load = place(load, names, "load")
    chosen = None if case is None else place(case, cases, "case")
    found = {
        index: answer
        for index, one in enumerate(context.cases)
        if chosen in (None, index) and one.case.share(load) > 0
        if (answer := influence(one.solutions["basis"], context.rulebook, index_of_load)) is not None
    }
    if not found:
        raise FarvoltError(f'load "{load}" has no drop to show: it is off, not fed, or its case gives way')
    worst = max(found, key=lambda index: found[index].drop_V)
    _print(open_console(), context, cases[worst], found[worst])


def _print(out: Console, context: Context, case: str, found: Influence) -> None:
    temperature = context.cases[0].solutions["basis"].conductors.text
    title = f'Drop of "{found.load}": {number(found.drop_V, 4)} V, case "{case}", resistances {temperature}'
    parts = [
        (one.name, one.pole, number(one.amps, 4), number(1000 * one.ohm, 4), number(one.drop_V, 4),
         number(100 * one.drop_V / found.drop_V) if found.drop_V else "-")
        for one in found.parts
    ]  # fmt: skip
    headings = (("conductor or device", False), ("pole", False), ("amps", True), ("mohm", True), ("volts", True))
    table(out, title, (*headings, ("% of the drop", True)), parts)
    gains = [(one.run, one.size.name, number(one.gain_V)) for one in found.gains[:GAINS_SHOWN] if one.gain_V > 0]
    table(out, "What the next size gains", (("run", False), ("size", False), ("volts at the load", True)), gains)
