"""The JSON Schema of the plan format, made from the model that validates it."""

from typing import Any

from farvolt.plan import FORMAT, Plan


def json_schema() -> dict[str, Any]:
    """JSON Schema (draft 2020-12) of format 1, with the names as written in the file."""
    schema = Plan.model_json_schema(by_alias=True)
    schema["$schema"] = "https://json-schema.org/draft/2020-12/schema"
    schema["title"] = f"Farvolt plan, format {FORMAT}"
    schema["properties"]["format"] = {"const": FORMAT, "description": "Version of the format of this file."}
    return schema
