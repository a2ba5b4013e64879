"""What was built as changes to the text of a plan: measured resistances, lengths and sizes, nothing else."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from farvolt import conductors, units
from farvolt.as_built import RunBuilt
from farvolt.errors import FarvoltError, QuantityError
from farvolt.integrity import nearest
from farvolt.plan import Plan, Run
from farvolt.units import number
from farvolt_app.edits import Set


@dataclass(frozen=True, slots=True)
class Change:
    """One field of a run: what the plan says, and what it will say."""

    run: str
    field: str
    before: str
    after: str
    step: Set


def run_of(plan: Plan, name: str, option: str) -> Run:
    """The run of a name or label. Raises FarvoltError."""
    known = {run.name: run for run in plan.runs} | {run.label: run for run in plan.runs if run.label is not None}
    if name not in known:
        near = nearest(name, known)
        meant = f"; did you mean {near}?" if near else ""
        raise FarvoltError(f'{option}: there is no run "{name}" in the plan; accepted: the name of a run{meant}')
    return known[name]


def stated(plan: Plan, lengths: Iterable[str], sizes: Iterable[str]) -> list[Change]:
    """Lengths and sizes as they were built, each written RUN=VALUE. Raises FarvoltError."""
    found = []
    for text in lengths:
        run, value = _pair(plan, text, "--length", "4.8 m")
        found += _change(plan, run, "length", run.length.text, _parsed_length(text, value))
    for text in sizes:
        run, value = _pair(plan, text, "--size", "10 mm2")
        found += _change(plan, run, "size", run.size.name if run.size else "free", _parsed_size(text, value))
    return found


def _pair(plan: Plan, text: str, option: str, example: str) -> tuple[Run, str]:
    name, equals, value = text.rpartition("=")
    if not equals:
        raise FarvoltError(f'{option}: "{text}" has no value; accepted: "{plan.runs[0].name}={example}"')
    return run_of(plan, name.strip(), option), value.strip()


def _parsed_length(text: str, value: str) -> str:
    try:
        length = units.parse(value, "length")
    except QuantityError as error:
        raise FarvoltError(f'--length: "{text}": {error}; accepted: {error.accepted}') from None
    if length.si <= 0:
        raise FarvoltError(f'--length: "{text}" is no length of a run; accepted: more than 0 m')
    return length.text


def _parsed_size(text: str, value: str) -> str:
    try:
        return conductors.parse_size(value).name
    except QuantityError as error:
        near = f"; did you mean {error.nearest}?" if error.nearest else ""
        raise FarvoltError(f'--size: "{text}": {error.problem}; accepted: {error.accepted}{near}') from None


def resistances(plan: Plan, built: Sequence[RunBuilt], accepted: Sequence[str]) -> list[Change]:
    """The measured resistances to take over: those of the runs named, or of all that are within the plan's tolerances
    where none is named, because a bad joint that is taken over becomes the plan. Raises FarvoltError."""
    named = [run_of(plan, name, "--accept").name for name in accepted]
    complete = {one.run.name: one for one in built if one.ohm is not None}
    for name in named:
        if name not in complete:
            why = next((one.lacking for one in built if one.run.name == name), "it was not measured")
            raise FarvoltError(f'--accept: run "{name}" cannot be taken over: {why}; accepted: {_listed(complete)}')
    found: list[Change] = []
    for name in dict.fromkeys(named) if named else [name for name, one in complete.items() if not one.outside]:
        found += _resistance(plan, complete[name])
    return found


def _listed(names: Iterable[str]) -> str:
    return ", ".join(f'"{name}"' for name in names) or "none of these readings"


def _resistance(plan: Plan, one: RunBuilt) -> list[Change]:
    run = next(run for run in plan.runs if run.name == one.run.name)
    before = run.resistance.text if run.resistance is not None else "not stated"
    found = _change(plan, run, "resistance", before, f"{number(1000 * (one.ohm or 0.0), 4)} mohm")
    stated_degC = run.resistance_temperature.text if run.resistance is not None else "not stated"
    return found + _change(plan, run, "resistance_temperature", stated_degC, f"{number(one.degC, 4)} degC")


def _change(plan: Plan, run: Run, field: str, before: str, after: str) -> list[Change]:
    if before == after:
        return []
    at = [one.name for one in plan.runs].index(run.name)
    return [Change(run.name, field, before, after, Set("runs", at, (field,), after))]
