"""The errors of the TOML reader and of the validator in our words: problem, place, value, what is accepted, nearest."""

import re
from typing import Any

from farvolt import integrity, plan, schema
from farvolt.errors import Fault
from farvolt.integrity import Found, Path
from farvolt.plan import FORMAT, Plan
from farvolt.plan_protection import OpeningTime, OwnProtection, Protection
from farvolt.plan_types import Entry

_TOML_WORDS = {
    "Expected newline or end of document after a statement": "something stands after the value",
    "Cannot overwrite a value": "this field is written twice",
    "Unterminated string": "a quote is not closed",
    "Invalid value": "this is no value",
}
_ACCEPTED_VALUES = 'a text or quantity in quotes ("4.5 m"), a bare count, true, false, a list [ ] or a table { }'
_UNQUOTED = re.compile(r"""([A-Za-z_][\w-]*)\s*=\s*([+-]?[0-9][0-9.,]* *[A-Za-zΩµ°%][^\s,}\]"']*)""")
_UNQUOTED_TEXT = re.compile(r"""\s*([A-Za-z_][\w-]*)\s*=\s*([A-Za-z][^"'=\[\]{}#]*)""")


def syntax(error: Exception, text: str) -> Fault:
    """A fault of the TOML itself, with the line as written, and in quotes what lacks them."""
    if isinstance(error, RecursionError):
        return Fault("", "", "", "tables or lists are nested too deep", "a plan file")
    match = re.match(r"(.*?)\s*\(at (?:line (\d+), column \d+|end of document)\)$", str(error))
    if match is None:
        too_long = re.search(r"[0-9_]{4000}", text)
        line = text.count("\n", 0, too_long.start()) + 1 if too_long else None
        return Fault("", "", "", "a number is too long to be read", _ACCEPTED_VALUES, line=line)
    reason = re.sub(r"\('(.*)',?\)", r'"\1"', match.group(1)).replace("', '", ".")
    rows = text.split("\n")
    number = int(match.group(2)) if match.group(2) else len(text.rstrip().split("\n"))
    row = rows[number - 1].strip()
    nearest = _quoted(row)
    accepted = _ACCEPTED_VALUES if nearest or reason == "Invalid value" else ""
    problem = f"this is not valid TOML: {_TOML_WORDS.get(reason, reason)}"
    return Fault("", "", integrity.shorten(row), problem, accepted, nearest, number)


def _quoted(row: str) -> str:
    """The first field of a line whose value lacks its quotes, with them; nothing where all have them."""
    for match in _UNQUOTED.finditer(row):
        if row.count('"', 0, match.start()) % 2 == 0:
            return f'{match.group(1)} = "{match.group(2)}"'
    text = _UNQUOTED_TEXT.fullmatch(row)
    return f'{text.group(1)} = "{text.group(2).strip()}"' if text else ""


def wrong_format(raw: dict[str, Any]) -> Found | None:
    """The fault of a file that is not of the format read here, or None."""
    version = raw.get("format")
    if type(version) is int and version == FORMAT:
        return None
    if version is None:
        near = integrity.nearest("format", [key for key in raw if key not in plan.Plan.model_fields])
        problem = (
            f"the file does not state its format (there is {near})" if near else "the file does not state its format"
        )
        fault = Fault("", "format", "", problem, f"format = {FORMAT} as the first line")
        return (near.strip('"') or "format",), fault
    accepted = f"format = {FORMAT}"
    if type(version) is int and version > FORMAT:
        problem, accepted = (
            "this file is of a later format than this version of Farvolt reads",
            f"{accepted}, or a newer Farvolt",
        )
    else:
        problem = "is not a format"
    return ("format",), Fault("", "format", integrity.shown(version), problem, accepted)


_WORDS = {
    "missing": "is missing",
    "string_type": "is not a text",
    "int_type": "is not a whole number",
    "int_from_float": "is not a whole number",
    "bool_type": "is not true or false",
    "float_type": "is not a number",
    "finite_number": "is not a finite number",
    "model_type": "is not a table",
    "model_attributes_type": "is not a table",
    "dict_type": "is not a table",
    "tuple_type": "is not a list",
    "extra_forbidden": "there is no such field",
    "union_tag_invalid": "is not a known choice",
    "union_tag_not_found": "is missing",
    "literal_error": "is not a known choice",
    "greater_than_equal": "is too small",
    "greater_than": "is too small",
    "less_than_equal": "is too large",
    "string_too_long": "is too long",
}


def refused(error: Any, raw: dict[str, Any]) -> Found:
    """A pydantic error in our words, with its path in the raw tables."""
    kind, context = error["type"], error.get("ctx", {})
    path = _path(error["loc"], raw)
    if kind in ("union_tag_invalid", "union_tag_not_found"):
        path = (*path, "kind")
    where, field = _where(path, raw)
    problem = context.get("problem") or _WORDS.get(kind) or error["msg"][:1].lower() + error["msg"][1:]
    given, near = integrity.shown(_value_at(raw, path)), context.get("nearest", "")
    model = _model_of(path, raw)
    accepted = context.get("accepted") or _accepted(path, raw)
    if kind == "extra_forbidden" and model:
        known = fields(model)
        accepted, near, given = ", ".join(known), integrity.nearest(str(path[-1]), known), ""
    elif kind == "literal_error":
        accepted = str(context["expected"]).replace("'", '"')
        near = integrity.nearest(str(error["input"]), re.findall(r'"([^"]*)"', accepted))
    elif kind in ("union_tag_invalid", "union_tag_not_found"):
        accepted, near = ", ".join(_SOURCES), integrity.nearest(str(_value_at(raw, path)), _SOURCES)
    return path, Fault(where, field, given, problem, accepted, near)


def _accepted(path: Path, raw: dict[str, Any]) -> str:
    while isinstance(path[-1], int) and len(path) > 2:
        path = path[:-1]
    if path[0] == "cases" and path[2:3] == ("loads",) and len(path) > 3:
        return "a share of what the load is rated for, a number from 0 to 1000"
    if len(path) == 2 and path[0] not in plan.SINGLE:
        return schema.accepted(Plan, str(path[0]))
    model = _model_of(path, raw)
    return schema.accepted(model, str(path[-1])) if model else ""


def _path(loc: Path, raw: Any) -> Path:
    """The place of a pydantic error in the raw tables: without union tags and what a validator put in between."""
    if loc[0] == "sources" and len(loc) > 2:
        loc = (*loc[:2], *loc[3:])
    path: list[str | int] = []
    for part in loc:
        if isinstance(raw, dict) and isinstance(part, int):
            continue  # one table stands where a list of them may
        if not isinstance(raw, dict | list):
            break
        path.append(part)
        raw = _value_at(raw, (part,))
        if raw is None:
            break
    return tuple(path)


def _value_at(raw: Any, path: Path) -> Any:
    for part in path:
        try:
            raw = raw[part]
        except (KeyError, IndexError, TypeError):
            return None
    return raw


def _where(path: Path, raw: dict[str, Any]) -> tuple[str, str]:
    if len(path) >= 2 and isinstance(path[1], int):
        place, rest = integrity.place(str(path[0]), _value_at(raw, path[:2]), path[1]), path[2:]
    elif path[0] in plan.NAMED and len(path) >= 2:
        place, rest = f'{path[0]} "{integrity.shorten(str(path[1]))}"', path[2:]
    else:
        place, rest = (str(path[0]) if len(path) > 1 else ""), path[1:] if len(path) > 1 else path
    parts = [
        f"entry {part + 1}" if isinstance(part, int) else integrity.shorten(part) for part in rest if part != "[key]"
    ]
    return place, ".".join(parts)


_TABLES: dict[str, type[Entry]] = {
    "plan": plan.PlanInfo, "zones": plan.Zone, "routes": plan.Route, "points": plan.Point, "runs": plan.Run,
    "devices": plan.Device, "loads": plan.Load, "cases": plan.Case, "protection_types": OwnProtection,
    "tolerances": plan.Tolerances, "site": plan.Site, "bank": plan.Bank, "days": plan.DayType,
}  # fmt: skip
_SOURCES: dict[str, type[Entry]] = {
    "battery": plan.Battery, "charger": plan.Charger, "solar": plan.Solar, "converter": plan.Converter,
}  # fmt: skip
_NESTED: dict[tuple[str, str], type[Entry]] = {
    ("runs", "protection"): Protection, ("runs", "protection_to"): Protection,
    ("runs", "return"): plan.ReturnConductor, ("loads", "surge"): plan.Surge,
    ("sources", "link"): plan.LinkCable, ("sources", "array"): plan.SolarArray,
    ("protection_types", "band"): OpeningTime, ("bank", "block"): plan.Block,
}  # fmt: skip


def fields(model: type[Entry]) -> list[str]:
    """The names of a table's fields, as written in the file."""
    return [info.alias or name for name, info in model.model_fields.items()]


def _model_of(path: Path, raw: dict[str, Any]) -> type[Entry] | None:
    """The table that holds the field at the end of `path`; None where its names are the user's own."""
    table = str(path[0])
    if len(path) == 1:
        return Plan
    if table in plan.SINGLE:
        return plan.DischargeRate if "rates" in path[:-1] else _NESTED.get((table, str(path[1])), _TABLES[table])
    if len(path) > 3:
        if table == "cases":
            return plan.SourceState if path[2] == "sources" and len(path) > 4 else None
        return _NESTED.get((table, str(path[2])))
    if table == "sources":
        return _SOURCES.get(str(_value_at(raw, (*path[:2], "kind"))))
    return _TABLES.get(table) if len(path) == 3 else None
