"""What must hold between the entries of a plan: each breach is a fault, placed, with what is accepted."""

import json
import tomllib
from typing import Any

import pytest

from farvolt import examples, integrity, planfile
from farvolt.errors import Fault, PlanError
from farvolt.plan import NAMED

BASE: dict[str, Any] = {
    "format": 1,
    "plan": {"nominal": "12 V"},
    "zones": {"cabin": {"ambient": "30 degC"}},
    "routes": {"loom": {"zone": "cabin"}},
    "sources": [
        {"name": "bank", "kind": "battery", "at": "bank", "emf": "13 V", "resistance": "5 mohm"},
        {"name": "charger", "kind": "charger", "at": "bank", "volts": "14 V", "amps": "20 A"},
        {
            "name": "lift", "kind": "converter", "from": "bus", "at": "high", "nominal": "24 V", "volts": "26 V",
            "amps": "5 A", "efficiency": "90 %",
        },
    ],
    "runs": [
        {"name": "main", "label": "W1", "from": "bank", "to": "bus", "length": "1 m"},
        {"name": "feed", "label": "W2", "from": "bus", "to": "lamp", "length": "2 m", "zone": "cabin", "route": "loom"},
    ],
    "devices": [{"name": "switch", "kind": "switch", "from": "bus", "to": "pump"}],
    "loads": [{"name": "lamp", "at": "lamp", "power": "5 W"}, {"name": "pump", "at": "pump", "power": "60 W"}],
    "cases": [{"name": "all on"}],
}  # fmt: skip


def changed(path: str, value: Any) -> dict[str, Any]:
    """The plan with one field set: "runs.0.to"; None takes the field away."""
    raw: dict[str, Any] = json.loads(json.dumps(BASE))
    node: Any = raw
    *within, last = [int(part) if part.isdigit() else part for part in path.split(".")]
    for part in within:
        node = node[part]
    node[last] = value
    if value is None:
        del node[last]
    return raw


def test_a_plan_that_hangs_together_has_no_faults() -> None:
    assert integrity.faults(BASE) == []


@pytest.mark.parametrize("name", examples.names())
def test_the_examples_hang_together(name: str) -> None:
    assert integrity.faults(tomllib.loads(examples.text(name))) == []


@pytest.mark.parametrize(
    ("loads", "surge", "problem", "accepted"),
    [
        ("all", ["pump"], None, ""), ({"pump": 1.0}, ["pump"], None, ""),
        ("all", ["lamp"], "states no surge", '"pump"'), ("all", ["pmup"], "no such load", '"lamp", "pump"'),
        ("none", ["pump"], None, ""), ({"lamp": 1.0}, ["lamp"], "states no surge", '"pump"'),
    ],
)  # fmt: skip
def test_a_case_starts_what_states_a_surge(loads: Any, surge: Any, problem: Any, accepted: str) -> None:
    raw = changed("cases.0", {"name": "start", "loads": loads, "surge": surge})
    raw["loads"][1]["surge"] = {"times": 3}
    found = [fault for _, fault in integrity.faults(raw)]
    assert len(found) == (problem is not None)
    for fault in found:
        assert (fault.place, fault.field) == ('cases "start"', "surge")
        assert problem is not None
        assert problem in fault.problem
        assert accepted in fault.accepted


BUS = {"from": "bus", "to": "chassis", "name": "x", "length": "1 m"}

BREACHES = [
    # change; place, field, given, part of the problem, part of what is accepted
    ("runs.1.name", "main", 'runs "main"', "name", '"main"', "used twice", "another name"),
    ("runs.1.label", "W1", 'runs "feed"', "label", '"W1"', 'the label of run "main" too', "another label"),
    ("loads.1.name", "lamp", 'loads "lamp"', "name", '"lamp"', "used twice", "another name"),
    ("sources.1.name", "bank", 'sources "bank"', "name", '"bank"', "used twice", "another name"),
    ("runs.0.to", "bank", 'runs "main"', "to", '"bank"', "same point", "another point"),
    ("devices.0.to", "bus", 'devices "switch"', "to", '"bus"', "same point", "another point"),
    ("sources.2.at", "bus", 'sources "lift"', "at", '"bus"', "same point", "another point"),
    ("loads.0.at", "chassis", 'loads "lamp"', "at", '"chassis"', "one node", "another point"),
    ("sources.0.at", "chassis", 'sources "bank"', "at", '"chassis"', "one node", "another point"),
    ("sources.2.from", "chassis", 'sources "lift"', "from", '"chassis"', "one node", "another point"),
    ("devices.0.to", "chassis", 'devices "switch"', "to", '"chassis"', "one node", "another point"),
    ("runs.1.to", "Chassis", 'runs "feed"', "to", '"Chassis"', "one spelling", '"chassis"'),
    ("runs.0", {**BUS, "carries": "both"}, 'runs "x"', "carries", '"both"', "is a return", '"return"'),
    ("runs.0", {**BUS, "return": "same"}, 'runs "x"', "return", '"same"', "itself a return", "no return field"),
    ("runs.0", {**BUS, "protection": {}}, 'runs "x"', "protection.pole", '"feed"', "no conductor", '"return"'),
    ("runs.1.zone", "cabn", 'runs "feed"', "zone", '"cabn"', "no such zone", '"cabin"'),
    ("runs.1.route", "lom", 'runs "feed"', "route", '"lom"', "no such route", '"loom"'),
    ("routes.loom.zone", "cab", 'routes "loom"', "zone", '"cab"', "no such zone", '"cabin"'),
    ("points", [{"name": "bus", "zone": "roof"}], 'points "bus"', "zone", '"roof"', "no such zone", '"cabin"'),
    ("plan.reference", "lamp", "plan", "reference", '"lamp"', "no such source", '"bank"'),
    ("plan.reference", "lift", "plan", "reference", '"lift"', "cannot be the reference", "a battery or charger"),
    ("devices.0.drop", "0.5 V", 'devices "switch"', "drop", '"0.5 V"', "a resistance, not a drop", "resistance"),
    ("cases.0.loads", {"lmp": 1}, 'cases "all on"', "loads", '"lmp"', "no such load", '"lamp"'),
    ("cases.0.sources", {"bnk": "off"}, 'cases "all on"', "sources", '"bnk"', "no such source", '"bank"'),
    ("cases.0.devices", {"lever": "open"}, 'cases "all on"', "devices", '"lever"', "no such device", '"switch"'),
    ("cases.0.sources", {"charger": "full"}, 'cases "all on"', "sources.charger", '"full"', "only a battery", '"off"'),
    (
        "cases.0.sources", {"lift": {"charge": "5 %"}}, 'cases "all on"', "sources.lift.charge", '"5 %"',
        "not a setting of a converter", "state, volts, amps",
    ),
    ("sources", [], "sources", "", "", "nothing feeds the loads", "at least one source"),
    ("sources", None, "sources", "", "", "nothing feeds the loads", "at least one source"),
    ("sources", [BASE["sources"][2]], "sources", "", "", "converters alone", "at least one source"),
]  # fmt: skip


@pytest.mark.parametrize(("path", "value", "place", "field", "given", "problem", "accepted"), BREACHES)
def test_a_breach_is_a_fault(
    path: str, value: Any, place: str, field: str, given: str, problem: str, accepted: str
) -> None:
    found = [fault for _, fault in integrity.faults(changed(path, value))]
    matching = [one for one in found if problem in one.problem]
    assert [(one.place, one.field, one.given) for one in matching] == [(place, field, given)]
    assert accepted in matching[0].accepted


PROTECTION = {"type": "blade", "rating": "20 A"}

POLES = [
    # fields of the run; poles in which it may hold protection
    ({}, ["feed", "return"]),
    ({"carries": "both"}, ["feed", "return"]),
    ({"return": "chassis"}, ["feed"]),
    ({"return": {"size": "4 mm2"}}, ["feed", "return"]),
    ({"carries": "feed"}, ["feed"]),
    ({"carries": "return"}, ["return"]),
]


@pytest.mark.parametrize(("fields", "poles"), POLES)
@pytest.mark.parametrize("pole", ["feed", "return"])
def test_protection_is_in_a_conductor_that_the_run_has(fields: dict[str, Any], poles: list[str], pole: str) -> None:
    guard = {**PROTECTION, "pole": pole}
    for written, count in (
        ({"protection": guard}, 1),
        ({"protection": [guard, guard]}, 2),
        ({"protection_to": guard}, 1),
    ):
        found = integrity.faults(changed("runs.0", {**BASE["runs"][0], **fields, **written}))
        assert len(found) == (0 if pole in poles else count)


def test_protection_at_the_other_end_is_at_the_other_end() -> None:
    raw = changed("runs.0", {**BASE["runs"][0], "protection_to": {**PROTECTION, "end": "from"}})
    ((_, fault),) = integrity.faults(raw)
    assert (fault.field, fault.given, fault.accepted) == ("protection_to.end", '"from"', 'no end, or "to"')


@pytest.mark.parametrize("carries", ["feed", "return"])
def test_a_run_of_one_conductor_has_no_second(carries: str) -> None:
    run = {**BASE["runs"][0], "carries": carries}
    assert integrity.faults(changed("runs.0", {**run, "return": "same"})) == []
    for second in ("chassis", {"size": "4 mm2"}):
        ((_, fault),) = integrity.faults(changed("runs.0", {**run, "return": second}))
        assert fault.field == "return"
        assert f"carries the {carries} alone" in fault.problem


def test_faults_between_entries_are_told_beside_faults_of_fields() -> None:
    text = (
        'format = 1\n[plan]\nnominal = 12\n[[loads]]\nname = "a"\nat = "b"\npower = 5\n[[loads]]\nname = "a"\nat = 3\n'
    )
    with pytest.raises(PlanError) as caught:
        planfile.parse(text)
    found = {(one.line, one.field) for one in caught.value.faults}
    assert found == {(3, "nominal"), (7, "power"), (9, "name"), (10, "at"), (None, "")}


def test_faults_of_a_large_plan_share_their_search() -> None:
    """Many cases of many loads: every unknown name is told, each with its nearest."""
    raw = changed("loads", [{"name": f"load {number}", "at": "lamp", "power": "1 W"} for number in range(300)])
    raw["cases"] = [{"name": f"case {number}", "loads": {"load 7x": 1, "load 8": 1}} for number in range(300)]
    found = [fault for _, fault in integrity.faults(raw)]
    assert len(found) == 300
    assert len({one.nearest for one in found}) == 1
    assert found[0].nearest.startswith('"load ')


def test_nearest_names_are_looked_for_within_a_bound(monkeypatch: pytest.MonkeyPatch) -> None:
    """Thousands of unknown names beside thousands of known ones must not keep anyone waiting."""
    raw = changed("loads", [{"name": f"load {number}", "at": "lamp", "power": "1 W"} for number in range(100)])
    raw["cases"] = [{"name": "all on", "loads": {f"laod {number}": 1 for number in range(100)}}]
    monkeypatch.setattr(integrity, "COMPARISONS", 1000)
    found = [fault for _, fault in integrity.faults(raw)]
    assert len(found) == 100
    assert [bool(one.nearest) for one in found] == [True] * 10 + [False] * 90


@pytest.mark.parametrize(
    ("word", "known", "near"),
    [
        ("galey", ["galley", "bank"], '"galley"'),
        ("GALLEY", ["galley", "bank"], '"galley"'),
        ("xyz", ["galley", "bank"], ""),
        ("galley", [3, None, "galley"], '"galley"'),
        ("", ["galley"], ""),
    ],
)
def test_nearest(word: str, known: list[Any], near: str) -> None:
    assert integrity.nearest(word, known) == near


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (True, "true"),
        (3, "3"),
        (2.5, "2.5"),
        ("on", '"on"'),
        (None, ""),
        ({"a": 1}, ""),
        ([1], ""),
        (10**20, "a number of more than 20 digits"),
        ("x" * 100, f'"{"x" * 59}…"'),
    ],
)
def test_a_value_is_shown_as_in_a_file(value: Any, text: str) -> None:
    assert integrity.shown(value) == text


def test_plain_text_is_printable() -> None:
    assert integrity.plain("a\x1b[31m\nb\u202e é") == "a�[31m�b� é"


def test_an_entry_without_a_name_is_told_by_its_place() -> None:
    assert integrity.place("runs", {}, 2) == "runs, entry 3"
    assert integrity.place("runs", {"name": "main"}, 2) == 'runs "main"'
    assert integrity.place("runs", 5, 0) == "runs, entry 1"


@pytest.mark.parametrize(
    "odd", [None, 3, "x", [], {}, [1, "x", None, [], {}], {"name": {}}, [{"name": [], "kind": {}}]]
)
@pytest.mark.parametrize("table", ["plan", *NAMED, "points", "sources", "runs", "devices", "loads", "cases"])
def test_tables_of_any_shape_are_looked_at_without_error(table: str, odd: Any) -> None:
    assert all(isinstance(fault, Fault) for _, fault in integrity.faults({**BASE, table: odd}))
