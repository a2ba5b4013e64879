"""The machine-readable output: exactly these keys and types, SI numbers with full precision, or null."""

import json
import math
from collections.abc import Iterator
from dataclasses import replace
from functools import lru_cache
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from hypothesis import given, settings

from farvolt import examples, planfile
from farvolt.output import as_object
from farvolt.plan import Solar
from farvolt.results import Study
from farvolt.study import study
from odd import odd_texts
from strategies import Draft, drafts, plan_of

EVERY_FIELD = Path(__file__).parent / "plans" / "every_field.toml"

NUMBER, TEXT, MAYBE = {"type": "number"}, {"type": "string"}, {"type": ["number", "null"]}


def table(**fields: Any) -> dict[str, Any]:
    """Exactly these fields."""
    return {"type": "object", "properties": fields, "required": list(fields), "additionalProperties": False}


def several(one: dict[str, Any]) -> dict[str, Any]:
    return {"type": "array", "items": one}


CASE = table(
    name=TEXT,
    solved={"type": "boolean"},
    share_held={"type": "number", "minimum": 0, "maximum": 1},
    margin={"type": ["number", "null"], "minimum": 1},
    imbalance_A=NUMBER,
    power_in_W=NUMBER,
    power_loads_W=NUMBER,
    power_lost_W=NUMBER,
    points=several(table(name=TEXT, feed_V=MAYBE, return_V=MAYBE, volts=MAYBE)),
    sources=several(table(name=TEXT, volts=MAYBE, amps=MAYBE, watts=MAYBE, input_W=MAYBE)),
    runs=several(
        table(
            name=TEXT,
            feed_A=MAYBE,
            return_A=MAYBE,
            feed_ohm=MAYBE,
            return_ohm=MAYBE,
            drop_V=MAYBE,
            loss_W=MAYBE,
            conductor_degC=NUMBER,
            ampacity_A=MAYBE,
        )
    ),
    loads=several(table(name=TEXT, volts=MAYBE, amps=MAYBE, watts=MAYBE, drop_V=MAYBE, drop_percent=MAYBE)),
)
FINDING = table(
    rule={"type": "string", "pattern": r"^[a-z]+\.[a-z-]+$"},
    severity={"enum": ["fail", "warn", "note"]},
    subject=TEXT,
    kind={"enum": ["run", "load", "source", "device", "point", "case", "plan"]},
    case={"type": ["string", "null"]},
    value=MAYBE,
    limit=MAYBE,
    unit={"type": ["string", "null"]},
    message=TEXT,
    basis=TEXT,
    working=several(TEXT),
    remedy={"type": ["string", "null"]},
)
OUTPUT = table(output={"const": 1}, plan=TEXT, cases=several(CASE), findings=several(FINDING))

GIVES_WAY = """\
format = 1
[plan]
name = "Too much"
nominal = "12 V"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12 V"
resistance = "0.1 ohm"
[[runs]]
name = "feed"
from = "bank"
to = "end"
length = "5 m"
size = "6 mm2"
[[runs]]
name = "stray"
from = "nowhere"
to = "else"
length = "5 m"
[[loads]]
name = "winch"
at = "end"
power = "1 kW"
[[loads]]
name = "lamp"
at = "else"
power = "5 W"
[[cases]]
name = "All on"
[[cases]]
name = "Off"
loads = "none"
"""

TEXTS = {
    "every field": EVERY_FIELD.read_text(),
    "gives way": GIVES_WAY,
    **{name: examples.text(name) for name in examples.names()},
}


@lru_cache
def studied(which: str) -> Study:
    return study(planfile.parse(TEXTS[which]))


def as_json(result: Study) -> Any:
    """The object as its reader gets it."""
    return json.loads(json.dumps(as_object(result), allow_nan=False))


@pytest.mark.parametrize("which", TEXTS)
def test_shape(which: str) -> None:
    jsonschema.validate(as_json(studied(which)), OUTPUT)


@settings(max_examples=25, deadline=None)
@given(drafts())
def test_shape_of_any_plan(draft: Draft) -> None:
    result = study(plan_of(draft))
    jsonschema.validate(as_json(result), OUTPUT)


@settings(max_examples=60, deadline=None)
@given(odd_texts)
def test_odd_plans_are_studied_and_what_gives_way_says_so(text: str) -> None:
    found = as_json(study(planfile.parse(text)))
    jsonschema.validate(found, OUTPUT)
    for case in found["cases"]:
        assert case["solved"] == (case["share_held"] == 1)
        collapses = [one for one in found["findings"] if (one["rule"], one["case"]) == ("volts.collapse", case["name"])]
        # A case that holds at the plan's own temperature may still give way with hot conductors, and says with which.
        assert len(collapses) <= 1 if case["solved"] else len(collapses) == 1
        assert all(("with conductors" in one["message"]) == case["solved"] for one in collapses)


@pytest.mark.parametrize("which", TEXTS)
def test_names_and_their_order_are_those_of_the_file(which: str) -> None:
    result = studied(which)
    plan = result.plan
    found = as_json(result)
    assert found["plan"] == plan.plan.name
    assert [case["name"] for case in found["cases"]] == [case.name for case in plan.checked_cases]
    for case in found["cases"]:
        assert [one["name"] for one in case["points"]] == list(plan.point_names)
        for kind in ("sources", "runs", "loads"):
            assert [one["name"] for one in case[kind]] == [one.name for one in getattr(plan, kind)]


@pytest.mark.parametrize("which", TEXTS)
def test_findings_name_what_is_in_the_file(which: str) -> None:
    result = studied(which)
    plan = result.plan
    arrays = {one.array.at for one in plan.sources if isinstance(one, Solar) and one.array}
    known = {
        "plan": {plan.plan.name},
        "point": {*plan.point_names, *arrays, "chassis"},
        "case": {case.name for case in plan.checked_cases},
        **{kind: {one.name for one in getattr(plan, f"{kind}s")} for kind in ("source", "run", "device", "load")},
    }
    for finding in as_json(result)["findings"]:
        assert finding["subject"] in known[finding["kind"]], finding
        assert finding["case"] is None or finding["case"] in known["case"]
        # A share has no unit.
        unitless = finding["rule"] == "volts.collapse" or finding["value"] is finding["limit"] is None
        assert unitless or finding["unit"]
        assert finding["message"]
        assert finding["basis"]


@pytest.mark.parametrize("which", TEXTS)
def test_power_that_goes_in_comes_out(which: str) -> None:
    for case in as_json(studied(which))["cases"]:
        if case["solved"]:
            out = case["power_loads_W"] + case["power_lost_W"]
            assert case["power_in_W"] == pytest.approx(out, rel=1e-9, abs=1e-9)
            assert case["power_loads_W"] == pytest.approx(sum(one["watts"] or 0 for one in case["loads"]), rel=1e-9)
            assert case["share_held"] == 1


def test_numbers_are_not_rounded() -> None:
    result = studied("every field")
    found = as_json(result)
    assert found["cases"][0]["loads"][0]["volts"] == result.cases[0].loads[0].volts
    assert found["cases"][0]["loads"][0]["volts"] != round(found["cases"][0]["loads"][0]["volts"], 6)


def test_what_is_not_known_is_null() -> None:
    all_on, off = as_json(studied("gives way"))["cases"]
    lamp = all_on["loads"][1]
    assert (all_on["solved"], all_on["margin"]) == (False, None)
    assert 0 < all_on["share_held"] < 1
    assert [lamp[key] for key in ("volts", "amps", "watts", "drop_V", "drop_percent")] == [None] * 5
    assert [one["volts"] for one in off["points"] if one["name"] in ("nowhere", "else")] == [None, None]
    stray = off["runs"][1]
    assert [stray[key] for key in ("feed_A", "return_A", "drop_V", "loss_W")] == [None] * 4


def numbers(node: Any) -> Iterator[float]:
    if isinstance(node, float):
        yield node
    for one in node.values() if isinstance(node, dict) else node if isinstance(node, list) else ():
        yield from numbers(one)


def test_a_number_that_is_not_finite_is_null() -> None:
    result = studied("gives way")
    endless = replace(result.findings[0], value=math.inf, limit=math.nan)
    found = as_object(replace(result, findings=(endless,)))
    assert (found["findings"][0]["value"], found["findings"][0]["limit"]) == (None, None)
    assert all(math.isfinite(one) for one in numbers(found))
