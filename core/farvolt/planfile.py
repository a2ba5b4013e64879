"""Plan files: TOML text to a `Plan` and back, every fault named with its place and line.

Reading uses tomllib, which is fast; changing a file uses tomlkit (in `edits`), which keeps comments and order.
"""

import hashlib
import os
import sys
import tempfile
import tomllib
from collections.abc import Iterable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from farvolt import integrity, lines, translate
from farvolt.errors import Fault, PlanError, RulebookError, SaveError
from farvolt.plan import Plan

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
    source = integrity.plain(str(path))
    if source == STDIN:
        if sys.stdin is None:
            raise _whole_file("standard input", "is closed", "a plan on standard input, or the path of a file")
        text = _decode(sys.stdin.buffer.read(SIZE_LIMIT_BYTES + 1), "standard input")
        return PlanFile(parse(text, "standard input"), text, None)
    text = read_text(Path(path))
    return PlanFile(parse(text, source), text, Path(path))


def read_text(path: Path) -> str:
    """The text of a plan file. Raises PlanError: missing, a folder, unreadable, too large, not UTF-8 text."""
    source = integrity.plain(str(path))
    try:
        with path.open("rb") as file:
            data = file.read(SIZE_LIMIT_BYTES + 1)
    except FileNotFoundError:
        raise _whole_file(source, "there is no such file", "the path of a plan file", _neighbour(path)) from None
    except IsADirectoryError:
        raise _whole_file(source, "this is a folder, not a plan file", "the path of a .toml file") from None
    except PermissionError:
        raise _whole_file(source, "no permission to read this file", "a file that you may read") from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise _whole_file(source, f"cannot be read ({reason})", "the path of a plan file") from None
    return _decode(data, source)


def parse(text: str, source: str = "") -> Plan:
    """Validate the text of a plan. Raises PlanError with every fault of the text, in order of lines."""
    if not text.strip():
        raise _whole_file(source, "the file is empty", 'a plan; "farvolt new FILE" writes one to start from')
    try:
        raw = tomllib.loads(text)
    except (ValueError, RecursionError) as error:  # a number too long for Python is a bare ValueError
        raise PlanError([_clean(translate.syntax(error, text))], source) from None
    wrong_format = translate.wrong_format(raw)
    if wrong_format:
        raise PlanError(_in_order([wrong_format], text), source)
    read, found = _validated(raw)
    found += integrity.faults(raw)
    if read is None or found:
        raise PlanError(_in_order(found, text), source)
    return read


def placed(error: PlanError | RulebookError, text: str, source: str = "") -> PlanError:
    """What a study found wrong in the plan with this text, with the lines."""
    faults = error.faults if isinstance(error, PlanError) else [Fault("plan", "rulebook", "", str(error))]
    raw = tomllib.loads(text)
    tables = [(table, index, row) for table in raw for index, row in integrity.entries(raw, table)]
    entries = {integrity.place(table, row, index): (table, index) for table, index, row in tables}
    found = [((*entries.get(fault.place, (fault.place,)), *fault.field.split(".")), fault) for fault in faults]
    return PlanError(_in_order(found, text), source)


def _in_order(found: Iterable[integrity.Found], text: str) -> list[Fault]:
    where = lines.index(text)
    faults = [replace(_clean(fault), line=lines.line_of(where, path)) for path, fault in found]
    return sorted(faults, key=lambda fault: fault.line or 0)


def _clean(fault: Fault) -> Fault:
    """The fault with all its texts on one line each: a name in quotes may hold line ends and worse."""
    plain = integrity.plain
    texts = plain(fault.place), plain(fault.field), plain(fault.given), plain(fault.problem)
    return Fault(*texts, plain(fault.accepted), plain(fault.nearest), fault.line)


def stamp(text: str) -> str:
    """A fingerprint of a file's text, to tell whether it changed on disk."""
    return hashlib.sha256(text.encode()).hexdigest()


def save(path: Path, text: str, *, expected: str | None, keep_previous: bool = True) -> None:
    """Write a plan file whole or not at all, keeping the previous version as NAME.previous beside it (if asked to).

    `expected` is the stamp of the text that was read (None: the file must not exist yet). Raises SaveError when
    the file on disk is another one by now, or cannot be written. A link is followed, not replaced.
    """
    target = Path(os.path.realpath(path))
    try:
        present = target.read_bytes() if expected is not None else None
        if expected is None and target.exists():
            raise SaveError(f"{path}: it exists already; nothing was written. Save under another name.")
        if present is not None and not _is(present, expected):
            problem = "the file changed on disk since it was read"
            raise SaveError(f"{path}: {problem}; nothing was written. Save under another name, or open it again.")
        if present is not None and keep_previous:
            write_whole(target.with_name(target.name + ".previous"), present)
        write_whole(target, text.encode())
    except OSError as error:
        raise SaveError(f"{path}: cannot be written ({error.strerror}); nothing was changed") from None


def _is(data: bytes, expected: str | None) -> bool:
    try:
        return stamp(data.decode("utf-8-sig")) == expected
    except UnicodeDecodeError:
        return False


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
    return PlanError([_clean(Fault("", "", "", problem, accepted, nearest, line))], source)


def _neighbour(path: Path) -> str:
    try:
        beside = [one.name for one in path.parent.glob("*.toml")][:200]
    except OSError:
        return ""
    return integrity.nearest(path.name, beside)


def _validated(raw: dict[str, Any]) -> tuple[Plan | None, list[integrity.Found]]:
    try:
        return Plan.model_validate(raw), []
    except ValidationError as error:
        return None, [translate.refused(one, raw) for one in error.errors(include_url=False)]
