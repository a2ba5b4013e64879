"""Reads the shipped CSV tables: rows of text under a header that carries the units."""

import csv
from pathlib import Path

from farvolt.errors import DataError

STATUSES = ("secondary copy", "computed", "from memory")
"""How a figure is known: seen in a secondary copy of the standard, computed from its formula, or recalled."""


def read(path: Path) -> list[dict[str, str]]:
    """The rows of one CSV table. Raises DataError for a ragged row or an unknown status."""
    with path.open(encoding="utf-8", newline="") as file:
        rows: list[dict[str, str]] = list(csv.DictReader(file, strict=True))
    for line, row in enumerate(rows, start=2):
        if None in row or None in row.values():
            raise DataError(f"{path.name}, line {line}: the row does not have one value per column")
        status = row.get("status", STATUSES[0])
        if status not in STATUSES:
            accepted = ", ".join(STATUSES)
            raise DataError(f'{path.name}, line {line}: status "{status}" is none of {accepted}')
    return rows
