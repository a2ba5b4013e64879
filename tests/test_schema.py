"""The JSON Schema of the format: valid itself, and of one mind with the reader of plan files."""

import json
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from hypothesis import given, settings

from farvolt import examples, plan, planfile, schema, units
from farvolt.errors import PlanError
from strategies import Draft, drafts, text_of

EVERY_FIELD = Path(__file__).parent / "plans" / "every_field.toml"
TABLES = [one for one in vars(plan).values() if isinstance(one, type) and issubclass(one, plan.Entry)]

SCHEMA = schema.json_schema()
VALIDATOR = jsonschema.Draft202012Validator(SCHEMA)


def complaints(text: str) -> list[str]:
    return [error.message for error in VALIDATOR.iter_errors(tomllib.loads(text))]


def test_the_schema_is_a_schema_and_is_json() -> None:
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    assert SCHEMA["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    assert json.loads(json.dumps(SCHEMA, allow_nan=False)) == SCHEMA


@pytest.mark.parametrize(
    "text",
    [EVERY_FIELD.read_text(), examples.starter_text(), *(examples.text(name) for name in examples.names())],
    ids=["every field", "starter", *examples.names()],
)
def test_the_schema_takes_the_plans_that_are_read(text: str) -> None:
    planfile.parse(text)
    assert complaints(text) == []


@settings(max_examples=40, deadline=None)
@given(drafts())
def test_the_schema_takes_any_plan_that_is_read(draft: Draft) -> None:
    text = text_of(draft)
    planfile.parse(text)
    assert complaints(text) == []


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("format = 1", "format = 2"),
        ('nominal = "12 V"\nrulebook', "nominal = 12\nrulebook"),
        ('kind = "busbar"', 'kind = "busbr"'),
        ('kind = "battery"', 'kind = "batery"'),
        ("strings = 2", "strings = 0"),
        ("strings = 2", 'strings = "2"'),
        ('label = "W07"', 'lable = "W07"'),
        ('link = { length = "0.3 m"', 'link = { lenght = "0.3 m"'),
        ("hours_per_day = 10", "hours_per_day = 25"),
        ('"alternator charger" = "off"', '"alternator charger" = "of"'),
        ('"battery switch" = "closed"', '"battery switch" = "shut"'),
        ('loads = "all"', 'loads = "every"'),
        ('return = "chassis"', 'return = "hull"'),
        ('protection = { type = "blade", rating = "5 A" }', 'protection = { type = "blade" }'),
        ('at = "galley"\npower', "power"),
    ],
)
def test_the_schema_refuses_what_the_reader_refuses(old: str, new: str) -> None:
    text = EVERY_FIELD.read_text()
    assert old in text
    text = text.replace(old, new, 1)
    with pytest.raises(PlanError):
        planfile.parse(text)
    assert complaints(text)


def test_the_schema_names_every_field_as_in_the_file() -> None:
    for table in TABLES:
        if table in (plan.Plan, plan.Entry):
            continue
        assert list(SCHEMA["$defs"][table.__name__]["properties"]) == [
            info.alias or name for name, info in table.model_fields.items()
        ]
        assert SCHEMA["$defs"][table.__name__]["additionalProperties"] is False


def nodes(node: Any) -> Iterator[dict[str, Any]]:
    if isinstance(node, dict):
        yield node
    for one in node.values() if isinstance(node, dict) else node if isinstance(node, list) else ():
        yield from nodes(one)


def test_defaults_are_written_as_in_a_file() -> None:
    found = [node["default"] for node in nodes(SCHEMA) if "default" in node]
    assert "20 degC" in found
    assert not [one for one in found if one is None or isinstance(one, dict)]
    assert {"type": "null"} not in list(nodes(SCHEMA))


@pytest.mark.parametrize("table", [one for one in TABLES if one is not plan.Entry])
def test_every_field_can_be_told_in_words(table: type[plan.Entry]) -> None:
    for name, info in table.model_fields.items():
        words = schema.accepted(table, info.alias or name)
        assert words, name
        assert words.isprintable()
    assert schema.accepted(table, "no such field") == ("tables headed [[no such field]]" if table is plan.Plan else "")


@pytest.mark.parametrize(
    ("table", "field", "words"),
    [
        (plan.Run, "length", f"a length, such as {units.EXAMPLES['length']}"),
        (plan.Run, "parallel", "a whole number from 1 to 1000"),
        (plan.Surge, "times", "a number above 0 to 1000"),
        (plan.Run, "purpose", '"power", "cranking" or "bond"'),
        (plan.Run, "return", '"same" or "chassis", or a table of size, length'),
        (plan.Case, "devices", '{ "name" = "closed" or "open" }'),
        (plan.Load, "schedule", "a list of texts in quotes"),
        (plan.Load, "continuous", "true or false"),
        (plan.Plan, "runs", "tables headed [[runs]]"),
        (plan.Plan, "zones", "tables headed [zones.NAME]"),
    ],
)
def test_words_say_what_a_field_takes(table: type[plan.Entry], field: str, words: str) -> None:
    assert schema.accepted(table, field) == words
