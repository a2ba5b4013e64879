"""The JSON Schema of the plan format, made from the model that validates it, and its fields in words."""

import json
from functools import lru_cache
from typing import Any

from farvolt.plan import FORMAT, NAMED, SINGLE, Plan
from farvolt.plan_types import Entry


def json_schema() -> dict[str, Any]:
    """JSON Schema (draft 2020-12) of format 1, with the names as written in the file."""
    schema: dict[str, Any] = _tidy(Plan.model_json_schema(by_alias=True))
    schema["$schema"] = "https://json-schema.org/draft/2020-12/schema"
    schema["title"] = f"Farvolt plan, format {FORMAT}"
    schema["properties"]["format"] = {"const": FORMAT, "description": "Version of the format of this file."}
    tables = schema["$defs"]
    # Short forms that the model rewrites before it validates them.
    states = {"anyOf": [tables["SourceState"]["properties"]["state"], {"$ref": "#/$defs/SourceState"}]}
    tables["Case"]["properties"]["sources"]["additionalProperties"] = states
    protection = tables["Run"]["properties"]["protection"]
    protection["anyOf"] = [
        {"$ref": "#/$defs/Protection"},
        {"type": protection.pop("type"), "items": protection.pop("items")},
    ]
    return schema


def accepted(model: type[Entry], field: str) -> str:
    """What a field of a table takes, in words; nothing for a field that the table does not have."""
    schema = _schema()
    if model is Plan:
        words = {"format": str(FORMAT)}
        words |= {table: f"tables headed [{table}.NAME]" for table in NAMED}
        words |= {table: f"a table headed [{table}]" for table in SINGLE}
        return words.get(field, f"tables headed [[{field}]]")
    entry = schema["$defs"][model.__name__]["properties"].get(field)
    return _words(entry, schema["$defs"]) if entry else ""


@lru_cache(maxsize=1)
def _schema() -> dict[str, Any]:
    return json_schema()


def _tidy(node: Any) -> Any:
    """Without null, which TOML does not have, and with defaults as they would be written."""
    if isinstance(node, list):
        return [_tidy(one) for one in node]
    if not isinstance(node, dict):
        return node
    found = {key: _tidy(value) for key, value in node.items()}
    if isinstance(found.get("default"), dict):
        found["default"] = found["default"]["text"]
    if "default" in found and found["default"] is None:
        del found["default"]
    choices = [one for one in found.get("anyOf", ()) if one != {"type": "null"}]
    if len(choices) == 1:
        del found["anyOf"]
        found = {**choices[0], **found}
    elif choices:
        found["anyOf"] = choices
    return found


def _words(entry: dict[str, Any], tables: dict[str, Any]) -> str:
    if "$ref" in entry:
        return "a table of " + ", ".join(tables[entry["$ref"].rsplit("/", 1)[-1]]["properties"])
    if "anyOf" in entry and "description" in entry:
        return str(entry["description"])
    if "anyOf" in entry:
        return ", or ".join(_words(one, tables) for one in entry["anyOf"])
    if "const" in entry or "enum" in entry:
        return _either([json.dumps(one) for one in entry.get("enum", [entry.get("const")])])
    kind = entry.get("type")
    if kind == "array":
        return _list_words(entry["items"])
    if kind in ("integer", "number"):
        low = f"above {entry['exclusiveMinimum']:g}" if "exclusiveMinimum" in entry else f"from {entry['minimum']:g}"
        return f"a {'whole ' if kind == 'integer' else ''}number {low} to {entry['maximum']:g}"
    if "additionalProperties" in entry and kind == "object":
        return f'{{ "name" = {_words(entry["additionalProperties"], tables)} }}'
    simple = {"boolean": "true or false", "string": "a text in quotes"}
    return str(entry.get("description") or simple[str(kind)])


def _list_words(items: dict[str, Any]) -> str:
    if "$ref" in items:
        return "a list of such tables"
    if items.get("type") == "number":
        return f"a list, each {_words(items, {})}"
    return f"a list, each {items['description']}" if "description" in items else "a list of texts in quotes"


def _either(words: list[str]) -> str:
    return " or ".join(filter(None, (", ".join(words[:-1]), words[-1])))
