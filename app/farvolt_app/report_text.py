"""A study as readable tables on a terminal. Text from the plan is shown as text, never as markup."""

import os
import sys
from collections.abc import Iterable

from rich.console import Console
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from farvolt.conductors import other_system
from farvolt.errors import FarvoltError
from farvolt.integrity import nearest
from farvolt.results import CaseResult, Finding, Study
from farvolt.units import both_lengths, number
from farvolt_app.shown import CAUTION

_MARKS = {"fail": "FAIL", "warn": "warn", "note": "note"}
_STYLES = {"fail": "bold red", "warn": "yellow", "note": "dim"}
_WHOLE = ("Label", "length", "size")
"""Columns that are not folded."""

ROWS_SHOWN = 300
"""Rows of a table; what is longer is not read on a terminal."""

PIPED_WIDTH = 150
"""Columns of the tables where no terminal says how wide it is."""


def show(study: Study, case_name: str | None, working: bool) -> None:
    """Print a study: its findings, then the worst of every case, or all of one case.

    Raises FarvoltError, before anything is printed, for a case that the plan does not have.
    """
    case = None if case_name is None else study.cases[place(case_name, [one.name for one in study.cases], "case")]
    console = open_console()
    plan = study.plan.plan
    console.print(Text(plan.name, style="bold"))
    rulebook = study.rulebook
    console.print(Text(f"{plan.nominal}, rulebook {rulebook.name}: {rulebook.title} ({rulebook.edition})"))
    _findings(console, study.findings, working)
    if case is None:
        _cases(console, study.cases)
        _loads(console, study)
        _runs(console, study)
    else:
        _one_case(console, case)
    if study.assumptions:
        console.print(Text("\nTaken as given", style="bold"))
        for line in study.assumptions:
            console.print(Text(f"- {line}"))
    counts = {severity: sum(one.severity == severity for one in study.findings) for severity in _MARKS}
    console.print(Text(f"\n{counts['fail']} failing, {counts['warn']} doubtful, {counts['note']} noted. {CAUTION}"))


def open_console() -> Console:
    """Standard output, as wide as the terminal says it is."""
    return Console(highlight=False, width=None if sys.stdout.isatty() or "COLUMNS" in os.environ else PIPED_WIDTH)


def place(name: str, known: list[str], what: str) -> int:
    """Where a name stands among the known ones. Raises FarvoltError with what is accepted."""
    if name not in known:
        close = nearest(name, known)
        hint = f"; did you mean {close}?" if close else ""
        accepted = ", ".join(f'"{one}"' for one in known)
        raise FarvoltError(f'there is no {what} "{name}"; accepted: {accepted}{hint}')
    return known.index(name)


def table(out: Console, title: str, columns: Iterable[tuple[str, bool]], rows: Iterable[Iterable[str]]) -> None:
    """Print a table under a title; each column has a heading, and says whether it holds numbers."""
    found = Table(title=Text(title, style="bold"), title_justify="left", box=None, pad_edge=False, padding=(0, 2, 0, 0))
    for name, right in columns:
        found.add_column(
            Text(name), justify="right" if right else "left", overflow="fold", no_wrap=right or name in _WHOLE
        )
    every = list(rows)
    for row in every[:ROWS_SHOWN]:
        found.add_row(*(Text(cell) for cell in row))
    out.print()
    out.print(found)
    if len(every) > ROWS_SHOWN:
        out.print(Text(f"… and {len(every) - ROWS_SHOWN} more; --json and the cable schedule have them all"))


def _findings(console: Console, findings: tuple[Finding, ...], working: bool) -> None:
    console.print(Text("\nFindings", style="bold"))
    if not findings:
        console.print(Text("Nothing found by the checks that were made."))
    for one in findings:
        head = Text(f"{_MARKS[one.severity]:5}", style=_STYLES[one.severity])
        head.append(f"{one.rule}  ", style="bold")
        head.append(one.message + (f'  [case "{one.case}"]' if one.case else ""), style="default not bold")
        _hanging(console, head)
        for line in one.working if working else ():
            _hanging(console, Text(line), indent=5)
        if one.remedy:
            _hanging(console, Text(f"Remedy: {one.remedy}"), indent=5)
        if working or one.severity == "fail":
            _hanging(console, Text(f"Basis: {one.basis}", style="dim"), indent=5)


def _hanging(console: Console, text: Text, indent: int = 0) -> None:
    """Print a text, the lines after its first set in."""
    first, *rest = text.wrap(console, max(console.width - indent - 5, 20)) or [text]
    console.print(Padding(first, (0, 0, 0, indent), expand=False))
    for line in rest:
        console.print(Padding(line, (0, 0, 0, indent + 5), expand=False))


def _cases(console: Console, cases: tuple[CaseResult, ...]) -> None:
    columns = (
        ("Case", False), ("Solved", False), ("Sources W", True), ("Loads W", True), ("Lost W", True),
        ("Imbalance A", True),
    )  # fmt: skip
    rows = [
        (
            case.name,
            "yes" if case.solved else f"gives way at {number(100 * case.share_held)} % of its loads",
            *(_value(watts if case.solved else None, 4) for watts in _powers(case)),
            "< 1e-9" if case.imbalance_A < 1e-9 else f"{case.imbalance_A:.0e}",
        )
        for case in cases
    ]
    table(console, "Cases", columns, rows)


def _margin(console: Console, case: CaseResult) -> None:
    """How much more of its loads a case would hold."""
    if case.margin is not None:
        console.print(Text(f"It holds up to {number(case.margin)} times its loads, all raised together."))


def _powers(case: CaseResult) -> tuple[float, float, float]:
    return case.power_in_W, case.power_loads_W, case.power_lost_W


def _loads(console: Console, study: Study) -> None:
    rows = []
    for index, load in enumerate(study.plan.loads):
        found = [(case.name, case.loads[index]) for case in study.cases if case.loads[index].volts is not None]
        on = [(name, one) for name, one in found if one.amps]
        if not on:
            held = any(case.solved for case in study.cases)
            why = "not on, or not fed, in any case that holds" if held else "no answer: no case holds"
            rows.append((load.name, load.at, "", "", "", why))
            continue
        name, worst = max(on, key=lambda pair: pair[1].drop_percent or 0.0)
        rows.append((load.name, load.at, _value(worst.volts, 4), _value(worst.amps), _value(worst.drop_percent), name))
    columns = (("Load", False), ("at", False), ("volts", True), ("amps", True), ("drop %", True), ("in case", False))
    table(console, "Loads, in the case with the largest drop", columns, rows)


def _runs(console: Console, study: Study) -> None:
    rows = []
    for index, run in enumerate(study.plan.runs):
        results = [case.runs[index] for case in study.cases]
        currents = [max(abs(one.feed_A or 0.0), abs(one.return_A or 0.0)) for one in results]
        worst = results[currents.index(max(currents))]
        rows.append((
            run.label or "", run.name, f"{run.from_point} → {run.to_point}", both_lengths(run.length), _size(run.size),
            _value(max(currents) if any(case.solved for case in study.cases) else None), _value(worst.ampacity_A),
            _value(None if worst.drop_V is None else abs(worst.drop_V)),
        ))  # fmt: skip
    columns = (
        ("Label", False), ("Run", False), ("from → to", False), ("length", False), ("size", False),
        ("amps", True), ("ampacity", True), ("drop V", True),
    )  # fmt: skip
    table(console, "Runs, with their largest current", columns, rows)


def _size(size: object) -> str:
    from farvolt.conductors import Size

    return f"{size.name} (~{other_system(size).name})" if isinstance(size, Size) else "to be chosen"


def _one_case(console: Console, case: CaseResult) -> None:
    _cases(console, (case,))
    _margin(console, case)
    _numbers(console, "Points", ("feed V", "return V", "volts"), [
        (one.name, _value(one.feed_V, 5), _value(one.return_V, 5), _value(one.volts, 5)) for one in case.points
    ])  # fmt: skip
    _numbers(console, "Sources", ("volts", "amps", "watts"), [
        (one.name, _value(one.volts, 5), _value(one.amps, 4), _value(one.watts, 4)) for one in case.sources
    ])  # fmt: skip
    _numbers(console, "Runs", ("feed A", "return A", "drop V", "loss W", "ohm taken at °C", "ampacity A"), [
        (
            one.name, _value(one.feed_A, 4), _value(one.return_A, 4), _value(one.drop_V, 4), _value(one.loss_W),
            _value(one.conductor_degC), _value(one.ampacity_A),
        )
        for one in case.runs
    ])  # fmt: skip
    _numbers(console, "Loads", ("volts", "amps", "watts", "drop V", "drop %"), [
        (
            one.name, _value(one.volts, 5), _value(one.amps, 4), _value(one.watts, 4), _value(one.drop_V, 4),
            _value(one.drop_percent),
        )
        for one in case.loads
    ])  # fmt: skip


def _numbers(console: Console, title: str, headings: tuple[str, ...], rows: Iterable[Iterable[str]]) -> None:
    """A table of a name and numbers."""
    table(console, title, (("name", False), *((heading, True) for heading in headings)), rows)


def _value(value: float | None, digits: int = 3) -> str:
    return "-" if value is None else number(value, digits)
