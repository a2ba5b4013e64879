"""Text of a plan in cells: a spreadsheet must neither calculate it nor refuse the file because of it."""

import re

_STARTERS = ("=", "+", "-", "@", "＝", "＋", "－", "＠")
"""What spreadsheets take for the start of a formula; some take the wide forms as well."""

_NOT_XML = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")
_ESCAPE = re.compile(r"_(?=x[0-9A-Fa-f]{4}_)")
_LONGEST_CELL = 32_000
"""A little under what one cell may hold (32 767 characters, ECMA-376 applications)."""


def begins_like_formula(text: str) -> bool:
    """Whether a spreadsheet could take a text for a formula; blanks, tabs and line ends before it do not matter."""
    return text.lstrip().startswith(_STARTERS) or text.startswith(("\t", "\r", "\n"))


def cell_text(text: str) -> str:
    """Text as a workbook can hold it: no character that XML refuses, none that reads as an escape, not too long."""
    clean = _NOT_XML.sub(" ", text.replace("\r\n", "\n").replace("\r", "\n"))
    # A workbook's own escape for a character is _x0041_; its first underscore escaped, it is that text again.
    return _ESCAPE.sub("_x005F_", clean[:_LONGEST_CELL])


def csv_text(text: str) -> str:
    """Text for a CSV cell: with an apostrophe before what a spreadsheet would calculate."""
    return f"'{text}" if begins_like_formula(text) else text


def from_csv_text(cell: str) -> str:
    """What `csv_text` was given."""
    return cell[1:] if cell.startswith("'") and begins_like_formula(cell[1:]) else cell
