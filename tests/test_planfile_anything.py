"""Any text and any bytes at all: a plan, or faults of one line each that say where and what."""

import tomllib
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from farvolt import examples, planfile
from farvolt.errors import PlanError
from farvolt.plan import Plan
from plan_text import BASE, EVERY_FIELD, outcome

FORGIVING = settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow])

SEEDS = (BASE, EVERY_FIELD.read_text(), examples.starter_text())


def holds(result: Plan | PlanError) -> bool:
    """A plan, or faults of one line each, in order, all of which say where and what."""
    if isinstance(result, Plan):
        return True
    told = str(result).split("\n")
    placed = [one for one in result.faults if one.line]
    return (
        len(told) == len(result.faults) > 0
        and all(one.isprintable() for one in told)
        and all(one.problem and (one.place or one.field or one.line or one.accepted) for one in result.faults)
        and [one.line for one in placed] == sorted(one.line or 0 for one in placed)
    )


@FORGIVING
@given(st.text())
def test_any_text_is_a_plan_or_refused(text: str) -> None:
    assert holds(outcome(text))
    assert holds(outcome("format = 1\n" + text))


@FORGIVING
@given(st.binary())
def test_any_bytes_are_a_plan_or_refused(tmp_path_factory: pytest.TempPathFactory, data: bytes) -> None:
    path = tmp_path_factory.getbasetemp() / "any.toml"
    path.write_bytes(data)
    try:
        result: Plan | PlanError = planfile.read(path).plan
    except PlanError as error:
        result = error
    assert holds(result)


@FORGIVING
@given(st.sampled_from(SEEDS), st.data())
def test_a_plan_with_a_piece_cut_out_or_put_in_is_a_plan_or_refused(text: str, data: st.DataObject) -> None:
    start = data.draw(st.integers(0, len(text)))
    end = data.draw(st.integers(start, min(len(text), start + 60)))
    piece = data.draw(st.text(max_size=8) | st.sampled_from(['"', "\n[[", "]", "{", "= 5\n", "'''", '"""', "#", "\\u"]))
    assert holds(outcome(text[:start] + piece + text[end:]))


values = st.recursive(
    st.booleans()
    | st.integers()
    | st.floats()
    | st.text(max_size=5)
    | st.dates()
    | st.times()
    | st.datetimes()
    | st.sampled_from(["4 m", "12 V", "60 W", "30 A", "off", "bank", "chassis", "all", 1, 2**70, -(2**70)]),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner, max_size=3),
    max_leaves=5,
)


def toml(value: Any) -> str:
    """A value as TOML, tables inline."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return '"' + "".join(one if one.isalnum() or one == " " else f"\\U{ord(one):08x}" for one in value) + '"'
    if isinstance(value, list):
        return "[" + ", ".join(map(toml, value)) + "]"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{toml(key)} = {toml(one)}" for key, one in value.items()) + " }"
    if isinstance(value, float | int):
        return repr(value)
    return str(value.isoformat())


def places(node: Any, path: tuple[str | int, ...] = ()) -> list[tuple[str | int, ...]]:
    """The path of everything within a table or a list."""
    pairs = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
    return [one for key, value in pairs for one in ((*path, key), *places(value, (*path, key)))]


@settings(FORGIVING, max_examples=300)
@given(st.sampled_from(SEEDS), st.data())
def test_a_plan_with_any_value_anywhere_is_a_plan_or_refused(text: str, data: st.DataObject) -> None:
    """Values of every kind of TOML in every place, written with inline tables throughout."""
    raw = tomllib.loads(text)
    for _ in range(data.draw(st.integers(1, 3))):
        *within, last = data.draw(st.sampled_from(places(raw)))
        node: Any = raw
        for part in within:
            node = node[part]
        value = data.draw(st.none() | values)
        if value is None:
            del node[last]
        else:
            node[last] = value
        if not raw:
            break
    assert holds(outcome("".join(f"{toml(key)} = {toml(value)}\n" for key, value in raw.items())))
