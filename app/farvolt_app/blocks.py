"""The blocks of a TOML text: a table header and what follows it, up to the next header."""

import re
import tomllib
from dataclasses import dataclass
from typing import Any

Entry = int | str | None
"""Which entry of a table: its index in an array, its key among named tables, None for the table itself."""


@dataclass(frozen=True, slots=True)
class Block:
    """One block; `path` holds the keys of its header, none for what stands before the first header."""

    path: tuple[str, ...]
    array: bool
    text: str

    @property
    def after_header(self) -> str:
        """What follows the header's brackets: a comment, and the fields."""
        found = _HEADER.match(self.text)
        return self.text[found.end() :] if found else self.text


_TOKEN = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}'
    r"|'''.*?'{3,5}"
    r'|"(?:\\.|[^"\\\n])*"'
    r"|'[^'\n]*'"
    r"|#[^\n]*|[\[\]{}\n]|[^\"'#\[\]{}\n]+",
    re.DOTALL,
)
_HEADER = re.compile(r"""\s*\[(?:"(?:\\.|[^"\\])*"|'[^']*'|[^\]"'])*\]+""")


def split(text: str) -> list[Block]:
    """The blocks of valid TOML; texts and nested brackets are skipped, so that only real headers count."""
    starts, depth, line, fresh = [0], 0, 0, True
    for token in _TOKEN.finditer(text):
        word = token.group()
        if word == "\n":
            line, fresh = token.end(), True
        elif word in "[{":
            if fresh and depth == 0 and word == "[" and line > 0:
                starts.append(line)
            depth, fresh = depth + 1, False
        elif word in "]}":
            depth -= 1
        elif word.strip():
            fresh = False
    pieces = [text[a:b] for a, b in zip(starts, [*starts[1:], len(text)], strict=True)]
    return [_block(piece) for piece in pieces if piece]


def _block(piece: str) -> Block:
    first = piece.split("\n", 1)[0].rstrip("\r")
    if not first.lstrip().startswith("["):
        return Block((), False, piece)
    found: Any = tomllib.loads(first)
    path: list[str] = []
    while isinstance(found, dict) and found:
        path.append(next(iter(found)))
        found = found[path[-1]]
    return Block(tuple(path), first.lstrip().startswith("[["), piece)


def group(blocks: list[Block], table: str, entry: Entry) -> slice | None:
    """Where an entry stands: its block and the blocks of its own tables that follow it."""
    own = (table,) if isinstance(entry, int) or entry is None else (table, entry)
    found = [i for i, block in enumerate(blocks) if block.path == own and block.array == isinstance(entry, int)]
    place = entry if isinstance(entry, int) else 0
    if place >= len(found) or (entry is None and len(found) > 1):
        return None
    end = found[place] + 1
    while end < len(blocks) and len(blocks[end].path) > len(own) and blocks[end].path[: len(own)] == own:
        end += 1
    return slice(found[place], end)


def core_and_tail(text: str) -> tuple[str, str]:
    """A block, and apart the blank lines and comments at its end, which belong to what follows."""
    lines = text.split("\n")
    kept = len(lines)
    while kept and (not lines[kept - 1].strip() or lines[kept - 1].lstrip().startswith("#")):
        kept -= 1
    core = "\n".join(lines[:kept]) + ("\n" if kept else "")
    return core, "\n".join(lines[kept:])
