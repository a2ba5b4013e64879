"""Where in a TOML text an entry or a field stands. Used only to place messages, so it may not know."""

import re

Path = tuple[str | int, ...]

_HEADER = re.compile(r"^\s*(\[\[?)\s*(.*?)\s*\]\]?\s*(?:#.*)?$")
_KEY = re.compile(r"""^\s*("[^"]*"|'[^']*'|[A-Za-z0-9_-]+)\s*[.=]""")
_PART = re.compile(r""""([^"]*)"|'([^']*)'|([A-Za-z0-9_-]+)""")


def index(text: str) -> dict[Path, int]:
    """Line (from 1) of each table header and each field of a TOML text, such as ("runs", 3, "length")."""
    lines: dict[Path, int] = {}
    counts: dict[str, int] = {}
    current: Path = ()
    for number, line in enumerate(text.splitlines(), start=1):
        header = _HEADER.match(line)
        key = None if header else _KEY.match(line)
        if header:
            current = _entry(header.group(1), header.group(2), counts)
            lines.setdefault(current, number)
        elif key:
            lines.setdefault((*current, key.group(1).strip("\"'")), number)
    return lines


def line_of(lines: dict[Path, int], path: Path) -> int | None:
    """Line of `path`, or of the nearest table around it that is written; `lines` comes from `index`."""
    while path:
        if path in lines:
            return lines[path]
        path = path[:-1]
    return None


def _entry(bracket: str, name: str, counts: dict[str, int]) -> Path:
    parts: list[str | int] = [next(filter(None, match), "") for match in _PART.findall(name)]
    if bracket == "[[":
        counts[name] = counts.get(name, -1) + 1
        return (*parts, counts[name])
    table = str(parts[0]) if parts else ""
    if table in counts and len(parts) > 1:
        return (table, counts[table], *parts[1:])
    return tuple(parts)
