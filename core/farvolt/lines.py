"""Where in a TOML text an entry or a field stands. Used only to place messages, so it may not know."""

import re

Path = tuple[str | int, ...]

# Strings over several lines may hold what looks like a field, comments what looks like anything.
_OPAQUE = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}|' + r"'''.*?'{3,5}|" + r'"(?:\\.|[^"\\\n])*"|' + r"'[^'\n]*'|#[^\n]*", re.DOTALL
)
_HEADER = re.compile(r"\s*(\[\[?)\s*(.*?)\s*\]\]?\s*")
_KEY = re.compile(r"""\s*("[^"]*"|'[^']*'|[A-Za-z0-9_-]+)\s*[.=]""")
_PART = re.compile(r""""([^"]*)"|'([^']*)'|([A-Za-z0-9_-]+)""")


def index(text: str) -> dict[Path, int]:
    """Line (from 1) of each table header and each field of a TOML text, such as ("runs", 3, "length")."""
    lines: dict[Path, int] = {}
    counts: dict[Path, int] = {}
    current: Path = ()
    for number, line in enumerate(_OPAQUE.sub(_blank, text).split("\n"), start=1):
        header = _HEADER.fullmatch(line)
        key = None if header else _KEY.match(line)
        if header:
            current = _entry(header.group(2), header.group(1) == "[[", counts)
            for length in range(1, len(current) + 1):
                lines.setdefault(current[:length], number)
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


def _blank(match: re.Match[str]) -> str:
    text = match.group()
    if text.startswith(('"""', "'''")):
        return "\n" * text.count("\n")
    return "" if text.startswith("#") else text


def _entry(name: str, is_array: bool, counts: dict[Path, int]) -> Path:
    """The path of a table header; `counts` holds the index of the last entry of each array of tables so far."""
    parts = [next(filter(None, match), "") for match in _PART.findall(name)]
    path: Path = ()
    for place, part in enumerate(parts, start=1):
        path = (*path, part)
        if is_array and place == len(parts):
            counts[path] = counts.get(path, -1) + 1
        if path in counts:
            path = (*path, counts[path])
    return path
