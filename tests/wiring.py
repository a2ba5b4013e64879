"""Small plans for tests of the checks, and their findings: a bank, runs and loads in a line or two each."""

import json
import re
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from farvolt import checks, planfile
from farvolt.conductors import parse_size
from farvolt.context import Context
from farvolt.plan import Plan
from farvolt.results import Finding
from farvolt.rulebook import Rulebook, load
from farvolt.study import build_context
from farvolt.units import parse

Row = dict[str, Any]

CLASS_5_OHM_PER_KM = {"1.5 mm2": 13.3, "2.5 mm2": 7.98, "4 mm2": 4.95, "6 mm2": 3.30, "10 mm2": 1.91, "16 mm2": 1.21}
"""IEC 60228 Table 3, flexible copper, plain, at 20 degC."""

COPPER_PER_K = 0.00393
"""IEC 60028: temperature coefficient of copper at 20 degC."""

BANK: Row = {"name": "bank", "kind": "battery", "at": "bank", "emf": "12.8 V", "resistance": "1 mohm"}


def bank(name: str = "bank", **more: Any) -> Row:
    """A battery of 12.8 V behind 1 milliohm, at a point of its own name."""
    return {**BANK, "name": name, "at": name, **more}


def charger(name: str = "charger", at: str = "charger", amps: str = "20 A", **more: Any) -> Row:
    """A charger of 14.4 V."""
    return {"name": name, "kind": "charger", "at": at, "volts": "14.4 V", "amps": amps, **more}


def cable(name: str, start: str, end: str, length: str = "2 m", size: str | None = "10 mm2", **more: Any) -> Row:
    """A run, without protection unless it is given."""
    row: Row = {"name": name, "from": start, "to": end, "length": length, **more}
    return row if size is None else {**row, "size": size}


def fuse(rating: str, distance: str = "0.1 m", kind: str = "blade", **more: Any) -> Row:
    """A protection without resistance, so that hand calculations stay short."""
    return {"type": kind, "rating": rating, "distance": distance, "resistance": "0 ohm", **more}


def lamp(name: str, at: str, amps: str = "1 A", **more: Any) -> Row:
    """A load of constant current."""
    return {"name": name, "at": at, "current": amps, **more}


def plan_of(
    runs: Sequence[Row], loads: Sequence[Row] = (), *, sources: Sequence[Row] = (BANK,),
    rulebook: str = "small-craft-iso",
    tables: Mapping[str, Mapping[str, Row]] | None = None, info: Row | None = None, **rows: Sequence[Row],
) -> Plan:  # fmt: skip
    """A plan read from its text as a file would be; `tables` are zones and routes, `rows` points, devices, cases."""
    lines = ["format = 1", "[plan]"]
    head = {"name": "Test plan", "nominal": "12 V", "rulebook": rulebook, **(info or {})}
    lines += [f"{key} = {_value(value)}" for key, value in head.items()]
    for table, entries in (tables or {}).items():
        for name, row in entries.items():
            lines += [f"[{table}.{json.dumps(name)}]", *(f"{key} = {_value(value)}" for key, value in row.items())]
    for table, listed in {"sources": sources, "runs": runs, "loads": loads, **rows}.items():
        for row in listed:
            lines += [f"[[{table}]]", *(f"{key} = {_value(value)}" for key, value in row.items())]
    return planfile.parse("\n".join(lines) + "\n")


def _value(value: Any) -> str:
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{json.dumps(key)} = {_value(one)}" for key, one in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(map(_value, value)) + "]"
    return json.dumps(value)


def context_of(plan: Plan, book: Rulebook | None = None) -> Context:
    """Everything a check reads."""
    return build_context(plan, book or load(plan.plan.rulebook))


def findings(plan: Plan, rule: str, subject: str | None = None, book: Rulebook | None = None) -> list[Finding]:
    """The findings of one rule, all severities, of one subject if it is named."""
    found = checks.run_all(context_of(plan, book))
    return [one for one in found if one.rule == rule and subject in (None, one.subject)]


def fails(plan: Plan, rule: str, book: Rulebook | None = None) -> list[str]:
    """Subjects that fail a rule."""
    return [one.subject for one in findings(plan, rule, book=book) if one.severity == "fail"]


def only(plan: Plan, rule: str, subject: str, book: Rulebook | None = None) -> Finding:
    """The one finding of a rule on a subject."""
    (found,) = findings(plan, rule, subject, book)
    return found


def lacking(name: str, **changes: Any) -> Rulebook:
    """A shipped rulebook with entries replaced, for instance by None."""
    book = load(name)
    protection = {key: changes.pop(key) for key in list(changes) if hasattr(book.protection, key)}
    return replace(book, protection=replace(book.protection, **protection), **changes)


def named_sizes(remedy: str) -> dict[str, str]:
    """The runs and sizes that a remedy names: '"feed": 6 mm2'."""
    return dict(re.findall(r'"([^"]+)": ([\d./]+ (?:mm2|AWG|SAE))', remedy))


def resized(plan: Plan, sizes: Mapping[str, str]) -> Plan:
    """The plan with other sizes for some runs."""
    runs = [
        run.model_copy(update={"size": parse_size(sizes[run.name])}) if run.name in sizes else run for run in plan.runs
    ]
    return plan.model_copy(update={"runs": tuple(runs)})


def rerated(plan: Plan, run: str, amps: float) -> Plan:
    """The plan with another rating for the single protection of a run."""

    def changed(one: Any) -> Any:
        if one.name != run:
            return one
        rating = parse(f"{amps:g} A", "current")
        (guard,) = one.protections
        other = guard.model_copy(update={"rating": rating})
        copy = one.model_copy(update={"protection": (other,), "protection_to": None})
        copy.__dict__.pop("protections", None)  # what the original had worked out does not hold for the copy
        return copy

    return plan.model_copy(update={"runs": tuple(changed(one) for one in plan.runs)})


def steps_add_up(finding: Finding) -> float:
    """The drop in V that a working's lines add up to, each product recomputed as a reader would."""
    total = 0.0
    for line in finding.working:
        match = re.search(r": (-?[\d.]+) A x ([\d.]+) mohm = (-?[\d.]+) V$", line)
        if match:
            amps, mohm, volts = map(float, match.groups())
            assert abs(amps * mohm / 1000 - volts) <= 2e-3 * abs(volts) + 1e-6
            total += volts
    return total
