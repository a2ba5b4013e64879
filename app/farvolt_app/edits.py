"""Changes to the text of a plan that leave everything else as it stands: order, comments, spacing.

A step rewrites only the block it is about (see `blocks`) with tomlkit, because tomlkit moves the tables of an array
together when it writes a whole file in which they are mixed with others. What comes out is read again and compared
with what the steps mean; a text written in some rarer way (dotted tables, an array in one line) is rewritten whole.
"""

import copy
import re
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

from farvolt.errors import FarvoltError
from farvolt.plan import NAMED
from farvolt_app.blocks import Block, Entry, core_and_tail, group, split

Path = tuple[str | int, ...]

@dataclass(frozen=True, slots=True)
class Set:
    """Give the field at `path` of an entry a value, or clear it with None."""

    table: str
    entry: Entry
    path: Path
    value: Any


@dataclass(frozen=True, slots=True)
class RenameKey:
    """Give the key at `path` of an entry another name, in its place."""

    table: str
    entry: Entry
    path: Path
    name: str


@dataclass(frozen=True, slots=True)
class Add:
    """Add an entry at the end of its table; in a table of `NAMED` ones `name` is its key."""

    table: str
    fields: dict[str, Any]
    name: str | None = None


@dataclass(frozen=True, slots=True)
class Duplicate:
    """Add a copy of an entry right after it, under another name; without its label, which marks one run."""

    table: str
    entry: Entry
    name: str


@dataclass(frozen=True, slots=True)
class Remove:
    """Remove an entry; the comments above it stay."""

    table: str
    entry: Entry


@dataclass(frozen=True, slots=True)
class Swap:
    """Let two entries of a table change places; the comments right above each go with it."""

    table: str
    entry: Entry
    other: Entry


Step = Set | RenameKey | Add | Duplicate | Remove | Swap


def read(text: str) -> dict[str, Any]:
    """The tables of a plan's text, not validated. Raises FarvoltError where it is not valid TOML."""
    try:
        return tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise FarvoltError(f"the text of the plan is not valid TOML: {error}; mend the text first") from None


def apply(text: str, steps: Sequence[Step]) -> str:
    """The text after all steps, in order. Raises FarvoltError: not TOML, no such entry, a name that is taken."""
    expected = read(text)
    if not steps:
        return text
    for step in steps:
        _perform(expected, step, whole=False)
    changed = _by_blocks(text, steps)
    if changed is None or not _means(changed, expected):
        changed = _whole(text, steps)
    if not _means(changed, expected):
        raise FarvoltError("this change cannot be written into the text of the plan; make it in the text itself")
    return changed


def renaming(raw: dict[str, Any], table: str, entry: Entry, name: str) -> list[Step]:
    """The steps that rename an entry together with everything in the plan that calls it by its name."""
    old = entry if isinstance(entry, str) else _entry_of(raw, table, entry).get("name")
    steps: list[Step] = [
        RenameKey(table, None, (entry,), name) if isinstance(entry, str) else Set(table, entry, ("name",), name)
    ]
    if not isinstance(old, str) or name in _names(raw, table):
        return steps  # a name that is taken is a fault to be shown; nothing may follow it
    if table == "sources" and _dict(raw.get("plan")).get("reference") == old:
        steps.append(Set("plan", None, ("reference",), name))
    if table == "sources":
        pairs = enumerate(_list(raw.get("loads")))
        steps += [Set("loads", i, ("inverter_of",), name) for i, row in pairs if _dict(row).get("inverter_of") == old]
    if table == "days" and _dict(raw.get("bank")).get("design_day") == old:
        steps.append(Set("bank", None, ("design_day",), name))
    for index, day in enumerate(_list(raw.get("days"))):
        if old in _dict(_dict(day).get(table)):
            steps.append(RenameKey("days", index, (table, old), name))
    if table == "protection_types":
        steps += _protections(raw, old, name)
    elif table in NAMED:
        steps += _references(raw, table.removesuffix("s"), old, name)
    for index, case in enumerate(_list(raw.get("cases"))):
        if old in _dict(_dict(case).get(table)):
            steps.append(RenameKey("cases", index, (table, old), name))
        surge = _list(_dict(case).get("surge"))
        if table == "loads" and old in surge:
            steps.append(Set("cases", index, ("surge",), [name if one == old else one for one in surge]))
    return steps


def _references(raw: dict[str, Any], field: str, old: str, name: str) -> list[Step]:
    found: list[Step] = []
    for table in ("points", "runs"):
        for index, row in enumerate(_list(raw.get(table))):
            if _dict(row).get(field) == old:
                found.append(Set(table, index, (field,), name))
    for key, row in _dict(raw.get("routes")).items():
        if field == "zone" and _dict(row).get(field) == old:
            found.append(Set("routes", key, (field,), name))
    return found


def _protections(raw: dict[str, Any], old: str, name: str) -> list[Step]:
    """The steps that move the protection on runs to the new name of its type."""
    found: list[Step] = []
    for index, run in enumerate(_list(raw.get("runs"))):
        given, at_to = _dict(run).get("protection"), _dict(run).get("protection_to")
        guards: list[tuple[Path, Any]] = [(("protection",), given), (("protection_to",), at_to)]
        guards += [(("protection", number), one) for number, one in enumerate(_list(given))]
        found += [Set("runs", index, (*path, "type"), name) for path, one in guards if _dict(one).get("type") == old]
    return found


def _names(raw: dict[str, Any], table: str) -> list[Any]:
    if table in NAMED:
        return list(_dict(raw.get(table)))
    return [_dict(row).get("name") for row in _list(raw.get(table))]


def _dict(value: Any) -> dict[str, Any]:
    return value if isinstance(value, dict) else {}


def _list(value: Any) -> list[Any]:
    return value if isinstance(value, list) else []


def _means(text: str, expected: dict[str, Any]) -> bool:
    try:
        found = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return False
    # Equal tables may still stand in another order, which is all that a swap of named ones changes.
    return found == expected and all(_names(found, table) == _names(expected, table) for table in NAMED)


# What a step does to tables: plain ones, to know what is meant, or tomlkit's, to write it.


def _perform(tables: Any, step: Step, *, whole: bool) -> None:
    if isinstance(step, Set):
        if step.entry is None and step.table not in tables:
            tables[step.table] = {}
        _assign(_entry_of(tables, step.table, step.entry), step, inline=whole)
    elif isinstance(step, RenameKey):
        _rename(tables, step)
    elif isinstance(step, Remove):
        _entry_of(tables, step.table, step.entry)
        del tables[step.table][step.entry]
        if not tables[step.table]:
            del tables[step.table]
    elif isinstance(step, Duplicate):
        fields = copy.deepcopy(_plain(_entry_of(tables, step.table, step.entry)))
        if step.table not in NAMED:
            fields.pop("label", None)
            fields["name"] = step.name
        place = step.entry + 1 if isinstance(step.entry, int) else None
        _insert(tables, step.table, fields, step.name, place)
    elif isinstance(step, Swap):
        _swap(tables, step)
    else:
        _insert(tables, step.table, step.fields, step.name, None)


def _swap(tables: Any, step: Swap) -> None:
    one, other = (_entry_of(tables, step.table, key) for key in (step.entry, step.other))
    holder = tables[step.table]
    if isinstance(step.entry, int) and isinstance(step.other, int):
        holder[step.entry], holder[step.other] = copy.deepcopy(other), copy.deepcopy(one)
        return
    keys = list(holder)
    first, second = keys.index(step.entry), keys.index(step.other)
    keys[first], keys[second] = keys[second], keys[first]
    fields = dict(holder)
    for key in keys:
        del holder[key]
        holder[key] = fields[key]


def _insert(tables: Any, table: str, fields: dict[str, Any], name: str | None, place: int | None) -> None:
    if table in NAMED:
        if name is None or name in tables.get(table, {}):
            raise FarvoltError(f'{table}: the name "{name}" is taken; each needs its own')
        tables.setdefault(table, {})[name] = dict(fields)
    elif table not in tables:
        tables[table] = [dict(fields)]
    else:
        tables[table].insert(len(tables[table]) if place is None else place, dict(fields))


def _assign(entry: Any, step: Set, *, inline: bool) -> None:
    """Set or clear `step.path` below an entry, making the tables on the way and removing those it empties."""
    holder, trail = entry, []
    for place, part in enumerate(step.path[:-1]):
        child = holder[part] if isinstance(part, int) else holder.get(part)
        if not isinstance(child, dict | list):
            if step.value is not None:
                holder[part] = _value(_below(step, place, child), inline)
            return
        trail.append((holder, part))
        holder = child
    last = step.path[-1]
    if step.value is not None:
        holder[last] = _value(step.value, inline)
    elif last in holder:
        del holder[last]
        for above, part in reversed(trail):
            # `loads = {}` in a case means that all are off, which leaving it out does not.
            if above[part] or (step.table == "cases" and part == "loads"):
                break
            del above[part]


def _below(step: Set, place: int, word: Any) -> dict[str, Any]:
    """The tables that a value needs where there are none yet, from the part of the path at `place` down."""
    value: Any = step.value
    for part in reversed(step.path[place + 1 :]):
        value = {str(part): value}
    # In a case a bare word is the state of a source; elsewhere a table replaces the word (a return path).
    return {"state": word, **value} if step.table == "cases" and isinstance(word, str) else dict(value)


def _rename(tables: Any, step: RenameKey) -> None:
    holder = tables[step.table] if step.entry is None else _entry_of(tables, step.table, step.entry)
    for part in step.path[:-1]:
        holder = holder[part]
    if step.name in holder:
        raise FarvoltError(f'{step.table}: the name "{step.name}" is taken; each needs its own')
    if hasattr(holder, "value"):
        _rename_written(holder.value.body, str(step.path[-1]), step.name)
        return
    pairs = [(step.name if key == step.path[-1] else key, value) for key, value in holder.items()]
    holder.clear()
    holder.update(pairs)


def _rename_written(body: list[Any], old: str, name: str) -> None:
    """The same among tomlkit's pairs of key and item, keeping quotes, comments and spacing as they are."""
    from tomlkit.items import KeyType, SingleKey

    for place, (key, item) in enumerate(body):
        if key is not None and key.key == old:
            quoted = getattr(key, "t", KeyType.Bare) != KeyType.Bare
            body[place] = (SingleKey(name, t=KeyType.Basic if quoted else None), item)


def _entry_of(tables: Any, table: str, entry: Entry) -> Any:
    try:
        found = tables[table] if entry is None else tables[table][entry]
    except (KeyError, IndexError, TypeError):
        found = None
    if not isinstance(found, dict):
        raise FarvoltError(f"{table}: there is no entry {entry!r} to change")
    return found


def _plain(value: Any) -> Any:
    return value.unwrap() if hasattr(value, "unwrap") else value


def _value(value: Any, inline: bool) -> Any:
    return _new_table(value, inline) if isinstance(value, dict) else value


def _new_table(fields: dict[str, Any], inline: bool) -> Any:
    if not inline:
        return {key: _value(value, False) for key, value in fields.items()}
    import tomlkit

    made = tomlkit.inline_table()
    for key, value in fields.items():
        made[key] = _value(value, True)
    inner = made.as_string()[1:-1].strip()
    return tomlkit.value(f"{{ {inner} }}") if inner else made


def _whole(text: str, steps: Sequence[Step]) -> str:
    """The text after the steps, written whole by tomlkit; an empty text where it cannot be."""
    import tomlkit
    from tomlkit.exceptions import TOMLKitError

    try:
        for step in steps:
            document = tomlkit.parse(text)
            _perform(document, step, whole=True)
            text = tomlkit.dumps(document)
    except TOMLKitError:
        return ""
    return text


# The same step within the block it is about.


def _by_blocks(text: str, steps: Sequence[Step]) -> str | None:
    """The text after the steps, or None where it is not written in blocks that the steps can use."""
    blocks = split(text)
    if not blocks:
        return None
    for step in steps:
        if isinstance(step, Add):
            _append(blocks, step)
            continue
        if isinstance(step, Swap):
            swapped = _swapped(blocks, step)
            if swapped is None:
                return None
            blocks = split(swapped)
            continue
        key: Entry = step.path[0] if isinstance(step, RenameKey) and step.table in NAMED else step.entry
        span = group(blocks, step.table, key)
        if span is None:
            return None
        core, tail = core_and_tail("".join(block.text for block in blocks[span]))
        blocks[span] = split(_in_block(core, step) + tail)
    changed = "".join(block.text for block in blocks)
    return re.sub(r"\r?\n", "\r\n", changed) if "\r\n" in text else changed


def _swapped(blocks: list[Block], step: Swap) -> str | None:
    """The text with two entries in each other's place; None where one of them has no block of its own."""
    found = [group(blocks, step.table, entry) for entry in (step.entry, step.other)]
    spans = sorted((span for span in found if span is not None), key=lambda span: int(span.start))
    if len(spans) < 2 or spans[0].stop > spans[1].start:
        return None
    texts = [block.text for block in blocks]
    one, one_tail = core_and_tail("".join(texts[spans[0]]))
    other, other_tail = core_and_tail("".join(texts[spans[1]]))
    before, above_one = _introduction("".join(texts[: spans[0].start]))
    between, above_other = _introduction(one_tail + "".join(texts[spans[0].stop : spans[1].start]))
    after = other_tail + "".join(texts[spans[1].stop :])
    return before + above_other + other + between + above_one + one + after


def _introduction(text: str) -> tuple[str, str]:
    """A text, and apart the comment lines at its very end: they stand right above the entry that follows."""
    lines = text.split("\n")
    kept = len(lines) - 1
    while kept and lines[kept - 1].lstrip().startswith("#"):
        kept -= 1
    above = lines[kept:]
    return "\n".join(lines[:kept]) + ("\n" if kept else ""), "\n".join(above)


def _in_block(core: str, step: Set | RenameKey | Duplicate | Remove) -> str:
    if isinstance(step, Remove):
        return ""
    import tomlkit

    document = tomlkit.parse(core)
    own: Entry = 0 if isinstance(step.entry, int) else step.entry
    if isinstance(step, Duplicate):
        copied = _copied(document, step, own)
        return f"{core}\n{copied}"
    if isinstance(step, RenameKey) and step.table in NAMED:
        return _renamed_header(core, step)
    _perform(document, replace(step, entry=own), whole=True)
    return tomlkit.dumps(document)


def _copied(document: Any, step: Duplicate, own: Entry) -> str:
    import tomlkit

    if isinstance(own, str):
        return _renamed_header(tomlkit.dumps(document), RenameKey(step.table, None, (own,), step.name))
    document[step.table][own]["name"] = step.name
    document[step.table][own].pop("label", None)
    return tomlkit.dumps(document)


def _renamed_header(core: str, step: RenameKey) -> str:
    """A block of a named table, and those below it, with the other name in their headers."""
    import tomlkit

    written = []
    for block in split(core):
        keys = (block.path[0], step.name, *block.path[2:])
        header = ".".join(tomlkit.key(key).as_string() for key in keys)
        left, right = ("[[", "]]") if block.array else ("[", "]")
        written.append(f"{left}{header}{right}{block.after_header}")
    return "".join(written)


def _append(blocks: list[Block], step: Add) -> None:
    """Write a new entry after the last one of its table, before the comments that introduce what follows."""
    import tomlkit

    header = f"[[{step.table}]]"
    if step.table in NAMED:
        header = f"[{tomlkit.key([step.table, str(step.name)]).as_string()}]"
    body = tomlkit.table()
    for key, value in step.fields.items():
        body[key] = _value(value, True)
    written = f"{header}\n{body.as_string()}"
    same = [place for place, block in enumerate(blocks) if block.path[:1] == (step.table,)]
    last = same[-1] if same else len(blocks) - 1
    core, tail = core_and_tail(blocks[last].text)
    blocks[last : last + 1] = split(f"{core}\n{written}{tail}")
