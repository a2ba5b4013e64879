"""Plan files: TOML text to a `Plan` and back, every fault named with its place and line.

Reading uses tomllib, which is fast; changing a file uses tomlkit (in `edits`), which keeps comments and order.
"""

import hashlib
import os
import re
import sys
import tempfile
import tomllib
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from farvolt import integrity, lines, plan
from farvolt.errors import Fault, PlanError, SaveError
from farvolt.plan import FORMAT, Plan

SIZE_LIMIT_BYTES = 10_000_000
"""A larger plan file is refused."""

STDIN = "-"


@dataclass(frozen=True, slots=True)
class PlanFile:
    """A plan with the text it came from; `stamp` tells whether the file changed since."""

    plan: Plan
    text: str
    path: Path | None

    @property
    def folder(self) -> Path:
        """Where relative paths of the plan (a rulebook of the user's own) start."""
        return self.path.parent if self.path else Path.cwd()


def read(path: str | Path) -> PlanFile:
    """Read and validate a plan file; "-" is standard input. Raises PlanError with every fault."""
    if str(path) == STDIN:
        text = _decode(sys.stdin.buffer.read(SIZE_LIMIT_BYTES + 1), "standard input")
        return PlanFile(parse(text, "standard input"), text, None)
    text = read_text(Path(path))
    return PlanFile(parse(text, str(path)), text, Path(path))


def read_text(path: Path) -> str:
    """The text of a plan file. Raises PlanError: missing, a folder, unreadable, too large, not UTF-8 text."""
    source = str(path)
    try:
        with path.open("rb") as file:
            data = file.read(SIZE_LIMIT_BYTES + 1)
    except FileNotFoundError:
        raise _whole_file(source, "there is no such file", nearest=_neighbour(path)) from None
    except IsADirectoryError:
        raise _whole_file(source, "this is a folder, not a plan file", "the path of a .toml file") from None
    except PermissionError:
        raise _whole_file(source, "no permission to read this file") from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise _whole_file(source, f"cannot be read ({reason})") from None
    return _decode(data, source)


def parse(text: str, source: str = "") -> Plan:
    """Validate the text of a plan. Raises PlanError with every fault of the text, in order of lines."""
    if not text.strip():
        raise _whole_file(source, "the file is empty", 'a plan; "farvolt new FILE" writes one to start from')
    try:
        raw = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise _syntax(str(error), source) from None
    _check_format(raw, text, source)
    read, found = _validated(raw)
    found += integrity.faults(raw)
    if read is None or found:
        where = lines.index(text)
        placed = [replace(fault, line=lines.line_of(where, path)) for path, fault in found]
        raise PlanError(sorted(placed, key=lambda fault: fault.line or 0), source)
    return read


def stamp(text: str) -> str:
    """A fingerprint of a file's text, to tell whether it changed on disk."""
    return hashlib.sha256(text.encode()).hexdigest()


def save(path: Path, text: str, *, expected: str | None) -> None:
    """Write a plan file whole or not at all, keeping the previous version as NAME.previous beside it.

    `expected` is the stamp of the text that was read (None: the file must not exist yet). Raises SaveError when
    the file on disk is another one by now, or cannot be written.
    """
    try:
        present = path.read_text(encoding="utf-8") if path.exists() else None
    except (OSError, UnicodeDecodeError) as error:
        raise SaveError(f"{path}: cannot be compared with what was read ({error})") from None
    if (stamp(present) if present is not None else None) != expected:
        what = "changed on disk since it was read" if expected else "exists already"
        raise SaveError(f"{path}: the file {what}; nothing was written. Save under another name, or open it again.")
    try:
        if present is not None:
            write_whole(path.with_name(path.name + ".previous"), present.encode())
        write_whole(path, text.encode())
    except OSError as error:
        raise SaveError(f"{path}: cannot be written ({error.strerror}); nothing was changed") from None


def write_whole(path: Path, data: bytes) -> None:
    """Write `data` to `path` so that a reader sees the old file or the new one, never a part. Raises OSError."""
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(data)
            file.flush()
            os.fsync(file.fileno())
        os.chmod(name, path.stat().st_mode & 0o777 if path.exists() else 0o666 & ~_umask())
        os.replace(name, path)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def _decode(data: bytes, source: str) -> str:
    if len(data) > SIZE_LIMIT_BYTES:
        raise _whole_file(source, "the file is larger than 10 MB", "a plan file of up to 10 MB")
    if b"\0" in data:
        raise _whole_file(source, "this is a binary file, not a plan", "TOML text in UTF-8")
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise _whole_file(source, "the text is not UTF-8", "TOML text saved as UTF-8", line=line) from None


def _whole_file(source: str, problem: str, accepted: str = "", nearest: str = "", line: int | None = None) -> PlanError:
    return PlanError([Fault("", "", "", problem, accepted, nearest, line)], source)


def _neighbour(path: Path) -> str:
    try:
        beside = [one.name for one in path.parent.glob("*.toml")][:200]
    except OSError:
        return ""
    return integrity.nearest(path.name, beside)


def _syntax(message: str, source: str) -> PlanError:
    match = re.search(r"\(at line (\d+), column \d+\)", message)
    problem = "this is not valid TOML: " + re.sub(r"\s*\(at .*\)$", "", message)
    return _whole_file(source, problem, line=int(match.group(1)) if match else None)


def _check_format(raw: dict[str, Any], text: str, source: str) -> None:
    version = raw.get("format")
    if isinstance(version, int) and not isinstance(version, bool) and version == FORMAT:
        return
    line = lines.line_of(lines.index(text), ("format",))
    if version is None:
        fault = Fault("", "format", "", "the file does not state its format", f"format = {FORMAT} as the first line")
    elif isinstance(version, int) and version > FORMAT:
        problem = "this file is of a later format than this version of Farvolt reads"
        fault = Fault("", "format", str(version), problem, f"format = {FORMAT}, or a newer Farvolt", line=line)
    else:
        fault = Fault("", "format", str(version), "is not a format", f"format = {FORMAT}", line=line)
    raise PlanError([fault], source)


def _validated(raw: dict[str, Any]) -> tuple[Plan | None, list[tuple[tuple[str | int, ...], Fault]]]:
    try:
        return Plan.model_validate(raw), []
    except ValidationError as error:
        return None, [_translate(one, raw) for one in error.errors(include_url=False)]


_WORDS = {
    "missing": "is missing",
    "string_type": "is not a text",
    "int_type": "is not a whole number",
    "bool_type": "is not true or false",
    "float_type": "is not a number",
    "model_type": "is not a table",
    "model_attributes_type": "is not a table",
    "dict_type": "is not a table",
    "tuple_type": "is not a list of tables",
    "extra_forbidden": "there is no such field",
    "union_tag_invalid": "is not a known choice",
    "union_tag_not_found": "is missing",
    "literal_error": "is not a known choice",
}


def _translate(error: Any, raw: dict[str, Any]) -> tuple[tuple[str | int, ...], Fault]:
    """A pydantic error in our words, with its path in the raw tables."""
    path = tuple(part for part in error["loc"] if not _is_tag(part, error["loc"]))
    kind, context = error["type"], error.get("ctx", {})
    if kind in ("union_tag_invalid", "union_tag_not_found"):
        path = (*path, "kind")
    where, field = _where(path, raw)
    given = "" if kind in ("missing", "union_tag_not_found") else _given(_value_at(raw, path))
    problem = context.get("problem") or _WORDS.get(kind) or error["msg"][:1].lower() + error["msg"][1:]
    accepted, near = context.get("accepted", ""), context.get("nearest", "")
    if kind == "extra_forbidden":
        known = _known_fields(path, raw)
        accepted, near, given = ", ".join(known), integrity.nearest(str(path[-1]), known), ""
    elif kind == "literal_error":
        accepted = str(context["expected"]).replace("'", '"')
        near = integrity.nearest(str(error["input"]), re.findall(r'"([^"]*)"', accepted))
    elif kind in ("union_tag_invalid", "union_tag_not_found"):
        kinds = ("battery", "charger", "solar", "converter")
        accepted, near = ", ".join(kinds), integrity.nearest(str(context.get("tag", "")), kinds)
    return path, Fault(where, field, given, problem, accepted, near)


def _is_tag(part: Any, loc: tuple[Any, ...]) -> bool:
    # The discriminated union of sources puts its tag between index and field.
    return loc[0] == "sources" and len(loc) > 2 and loc[2] == part and part in ("battery", "charger", "solar", "converter")


def _value_at(raw: Any, path: tuple[str | int, ...]) -> Any:
    for part in path:
        try:
            raw = raw[part]
        except (KeyError, IndexError, TypeError):
            return None
    return raw


def _given(value: Any) -> str:
    if value is None or isinstance(value, dict | list):
        return ""
    text = f'"{value}"' if isinstance(value, str) else str(value).lower() if isinstance(value, bool) else str(value)
    return integrity.shorten(text)


def _where(path: tuple[str | int, ...], raw: dict[str, Any]) -> tuple[str, str]:
    if len(path) >= 2 and isinstance(path[1], int):
        place = integrity.place(str(path[0]), _value_at(raw, path[:2]), path[1])
        rest = path[2:]
    elif path and path[0] in ("zones", "routes") and len(path) >= 2:
        place, rest = f'{path[0]} "{integrity.shorten(str(path[1]))}"', path[2:]
    else:
        place, rest = (str(path[0]) if len(path) > 1 else ""), path[1:] if len(path) > 1 else path
    return place, ".".join(str(part) for part in rest if part != "[key]")


_TABLES: dict[str, type[plan.Entry]] = {
    "plan": plan.PlanInfo, "zones": plan.Zone, "routes": plan.Route, "points": plan.Point, "runs": plan.Run,
    "devices": plan.Device, "loads": plan.Load, "cases": plan.Case,
}  # fmt: skip
_SOURCES: dict[str, type[plan.Entry]] = {
    "battery": plan.Battery, "charger": plan.Charger, "solar": plan.Solar, "converter": plan.Converter,
}  # fmt: skip
_NESTED: dict[str, type[plan.Entry]] = {
    "protection": plan.Protection, "protection_to": plan.Protection, "return": plan.ReturnConductor,
    "surge": plan.Surge, "link": plan.LinkCable, "array": plan.SolarArray,
}  # fmt: skip


def fields(model: type[plan.Entry]) -> list[str]:
    """The names of a table's fields, as written in the file."""
    return [info.alias or name for name, info in model.model_fields.items()]


def _known_fields(path: tuple[str | int, ...], raw: dict[str, Any]) -> list[str]:
    table = str(path[0])
    if len(path) == 1:
        return fields(Plan)
    inner = next((str(part) for part in reversed(path[1:-1]) if part in _NESTED), None)
    if inner:
        return fields(_NESTED[inner])
    if table == "cases" and "sources" in path:
        return fields(plan.SourceState)
    if table == "sources":
        entry = _value_at(raw, path[:2])
        kind = entry.get("kind") if isinstance(entry, dict) else None
        return fields(_SOURCES.get(str(kind), plan.Battery))
    return fields(_TABLES[table]) if table in _TABLES else []
