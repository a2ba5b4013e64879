"""Two plans compared: which entries differ, what every load sees, which findings come and go, what the cables weigh.

Entries are matched by name; runs whose names differ are matched by their label, which marks one wire. Quantities are
compared by value, so that 4.5 m and 450 cm are the same length.
"""

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal

from pydantic import BaseModel

from farvolt import cable_kinds
from farvolt.plan import NAMED, SINGLE, Plan
from farvolt.results import Finding, Study
from farvolt.units import Quantity

Change = Literal["added", "removed", "changed"]


@dataclass(frozen=True, slots=True)
class Difference:
    """One entry or field that differs, as the file writes it; `before` is None where there was none."""

    table: str
    entry: str
    change: Change
    field: str
    before: str | None
    after: str | None


@dataclass(frozen=True, slots=True)
class LoadSeen:
    """The case in which a load's drop is largest, and what it sees there; numbers are None where there is no answer."""

    volts: float | None
    drop_percent: float | None
    case: str


@dataclass(frozen=True, slots=True)
class LoadCompared:
    """A load in both plans; None in the one that does not have it."""

    name: str
    before: LoadSeen | None
    after: LoadSeen | None


@dataclass(frozen=True, slots=True)
class Summary:
    """A plan in a few figures, to stand beside another."""

    failing: int
    doubtful: int
    lowest: tuple[str, LoadSeen] | None
    """The load with the largest drop of all."""
    cable_m: float
    metal_kg: float
    """Of all conductors whose size is stated."""
    without_size: int
    """Runs that state neither a size nor a resistance, and are not weighed."""


@dataclass(frozen=True, slots=True)
class Comparison:
    """What differs from one plan to another."""

    before: Summary
    after: Summary
    differences: tuple[Difference, ...]
    loads: tuple[LoadCompared, ...]
    gone: tuple[Finding, ...]
    new: tuple[Finding, ...]


def compare(before: Study, after: Study) -> Comparison:
    """Compare two studies; what is in both alike is left out, but for the loads."""
    seen, sees = loads_seen(before), loads_seen(after)
    names = dict.fromkeys([*seen, *sees])
    told, tells = _by_subject(before), _by_subject(after)
    return Comparison(
        summary(before),
        summary(after),
        tuple(differences(before.plan, after.plan)),
        tuple(LoadCompared(name, seen.get(name), sees.get(name)) for name in names),
        tuple(one for key, one in told.items() if key not in tells),
        tuple(one for key, one in tells.items() if key not in told),
    )


def summary(study: Study) -> Summary:
    """The figures of one plan."""
    seen = loads_seen(study)
    lowest = max(seen.items(), key=lambda pair: _drop(pair[1].drop_percent), default=None)
    cables = cable_kinds.bought(study.plan, study.rulebook)
    return Summary(
        sum(one.severity == "fail" for one in study.findings),
        sum(one.severity == "warn" for one in study.findings),
        lowest,
        math.fsum(one.length_m for one in cables),
        math.fsum(one.length_m * (one.kind.kg_per_m or 0.0) for one in cables),
        sum(run.size is None and run.resistance is None for run in study.plan.runs),
    )


def loads_seen(study: Study) -> dict[str, LoadSeen]:
    """Every load by name, in the case where its drop is largest."""
    found = {}
    for index, load in enumerate(study.plan.loads):
        case = max(study.cases, key=lambda one: _drop(one.loads[index].drop_percent if one.loads[index].amps else None))
        result = case.loads[index]
        found[load.name] = LoadSeen(result.volts, result.drop_percent, case.name)
    return found


def _drop(percent: float | None) -> float:
    return -math.inf if percent is None else percent


def _by_subject(study: Study) -> dict[tuple[str, str, str, str], Finding]:
    """The first finding of each rule, severity and subject, in whichever case: cases may be called otherwise."""
    found: dict[tuple[str, str, str, str], Finding] = {}
    for one in study.findings:
        found.setdefault((one.rule, one.severity, one.kind, one.subject), one)
    return found


def differences(before: Plan, after: Plan) -> Iterator[Difference]:
    """Every entry that only one plan has, and every field that differs."""
    for table in type(before).model_fields:
        if table == "format":
            continue
        old, new = (_entries(getattr(plan, table), table) for plan in (before, after))
        renamed = _relabelled(old, new) if table == "runs" else {}
        for name, entry in old.items():
            kept = renamed.get(name, name)
            if kept not in new:
                yield Difference(table, name, "removed", "", _short(entry), None)
            else:
                yield from _fields_changed(table, name, entry, new[kept])
        taken = {*old, *renamed.values()}
        yield from (Difference(table, name, "added", "", None, _short(one)) for name, one in new.items()
                    if name not in taken)  # fmt: skip


def _entries(value: Any, table: str) -> dict[str, BaseModel]:
    if value is None:
        return {}
    if table in SINGLE:
        return {"": value}
    return dict(value) if table in NAMED else {one.name: one for one in value}


def _relabelled(old: Mapping[str, Any], new: Mapping[str, Any]) -> dict[str, str]:
    """The runs that carry the same label under another name."""
    labels = {run.label: name for name, run in new.items() if run.label and name not in old}
    return {name: labels[run.label] for name, run in old.items() if name not in new and run.label in labels}


def _fields_changed(table: str, name: str, old: BaseModel, new: BaseModel) -> Iterator[Difference]:
    before, after = dict(_flat(old)), dict(_flat(new))
    for field in dict.fromkeys([*before, *after]):
        if not _same(before.get(field), after.get(field)):
            yield Difference(table, name, "changed", field, _text(before.get(field)), _text(after.get(field)))


def _flat(value: Any, path: str = "") -> Iterator[tuple[str, Any]]:
    """Every value below an entry by its dotted field; what is not given is left out."""
    if isinstance(value, BaseModel):
        fields = type(value).model_fields
        inner: Sequence[tuple[Any, Any]] = [(info.alias or name, getattr(value, name)) for name, info in fields.items()]
    elif isinstance(value, Mapping):
        inner = list(value.items())
    elif isinstance(value, tuple) and any(isinstance(one, BaseModel) for one in value):
        inner = list(enumerate(value, start=1))
    else:
        if value is not None and value != () and value != "":
            yield path, value
        return
    for key, one in inner:
        yield from _flat(one, f"{path}.{key}" if path else str(key))


def _same(one: Any, other: Any) -> bool:
    if isinstance(one, Quantity) and isinstance(other, Quantity):
        return math.isclose(one.si, other.si, rel_tol=1e-9, abs_tol=1e-12)
    return bool(one == other)


def _text(value: Any) -> str | None:
    if value is None:
        return None
    if isinstance(value, bool):
        return "yes" if value else "no"
    return ", ".join(map(str, value)) if isinstance(value, tuple) else str(value)


def _short(entry: BaseModel) -> str:
    """What an entry is, in a line: the fields that tell it from others of its table."""
    told = dict(_flat(entry))
    wanted = ("kind", "from", "to", "at", "length", "size", "power", "current", "resistance", "capacity", "ambient")
    return ", ".join(f"{field} {_text(told[field])}" for field in wanted if field in told)
