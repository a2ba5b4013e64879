"""Reads price lists: a CSV of the user's own, every fault named with its row and column.

The columns are `COLUMNS`; an empty cell of what describes a thing means any. Lines before the headings may start with
#; the first of them is the list's own notice, shown wherever one of its prices is. The list shipped is invented and
says so.
"""

import csv
import io
import math
import re
from collections.abc import Iterator, Sequence
from functools import lru_cache
from pathlib import Path

from farvolt.conductors import MATERIALS, STRANDS, parse_size
from farvolt.errors import Fault, PriceListError, SizeError
from farvolt.integrity import nearest, plain, shorten
from farvolt.lugs import STUDS, known_stud
from farvolt.prices import Offer, PriceList, as_word
from farvolt_data import ROOT

SIZE_LIMIT_BYTES = 2_000_000
ROW_LIMIT = 20_000
CELL_LIMIT = 200
FAULT_LIMIT = 50
"""A larger list is refused; of more faults than these the first are told."""

COLUMNS = (
    "item", "size", "material", "strand", "type", "rating_A", "stud", "per", "reel_m", "price", "currency", "notes",
)  # fmt: skip

_ALWAYS = {"item", "per", "price", "currency", "notes"}
_NEEDED = ("item", "per", "price", "currency")
_USES: dict[str, tuple[frozenset[str], tuple[str, ...]]] = {
    "cable": (frozenset({"size", "material", "strand", "reel_m"}), ("m", "reel")),
    "lug": (frozenset({"size", "stud"}), ("piece",)),
    "terminal": (frozenset({"size"}), ("piece",)),
    "splice": (frozenset({"size"}), ("piece",)),
    "heat-shrink": (frozenset({"size"}), ("m",)),
    "protection": (frozenset({"type", "rating_A"}), ("piece",)),
    "holder": (frozenset({"type", "rating_A"}), ("piece",)),
    "device": (frozenset({"type", "rating_A"}), ("piece",)),
    "label": (frozenset(), ("piece",)),
}
"""Each item with the columns that describe it, and what it may be priced by."""


def read(path: Path) -> PriceList:
    """Read a price list of the user's own. Raises PriceListError."""
    source = plain(str(path))
    try:
        with path.open("rb") as file:
            data = file.read(SIZE_LIMIT_BYTES + 1)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or "no such name"
        raise _refused(f"cannot be read ({reason})", "the path of a CSV file", source) from None
    return parse(data, source)


@lru_cache(maxsize=1)
def example() -> PriceList:
    """The list shipped, which is invented and says so."""
    return parse(example_text().encode(), "the example list")


def example_text() -> str:
    """The text of the list shipped, to start one's own from."""
    return (ROOT / "prices" / "example.csv").read_text(encoding="utf-8")


def parse(data: bytes, source: str = "the price list") -> PriceList:
    """Read the bytes of a price list; commas, semicolons or tabs part its columns. Raises PriceListError."""
    rows = _rows(data, source)
    start = _first_of_table(rows)
    if start == len(rows):
        raise _refused("has no headings", f"a first row of headings: {', '.join(COLUMNS)}", source)
    headings = [cell.strip() for cell in rows[start]]
    _raise(list(_heading_faults(headings, start + 1)), source)
    faults: list[Fault] = []
    offers: list[Offer] = []
    currencies: dict[str, int] = {}
    for number, cells in enumerate(rows[start + 1 :], start=start + 2):
        if not any(cell.strip() for cell in cells):
            continue
        row = _Row(number, headings, cells)
        offers += row.offer()
        faults += row.faults
        currencies.setdefault(row.value("currency").upper(), number)
    faults += _repeated(offers)
    if not faults and len(currencies) > 1:
        (first, _), (other, at) = list(currencies.items())[:2]
        faults = [Fault(f"row {at}", "currency", other, f"the rows before are in {first}", "one currency", first)]
    if not faults and not offers:
        faults = [Fault("", "", "", "has headings and no row under them", "at least one row with a price")]
    _raise(faults, source)
    return PriceList(offers, next(iter(currencies)), _notice(rows[:start]), source)


def _rows(data: bytes, source: str) -> list[list[str]]:
    if len(data) > SIZE_LIMIT_BYTES:
        raise _refused("is too large", f"at most {SIZE_LIMIT_BYTES // 1_000_000} MB", source)
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError:
        raise _refused("is not UTF-8 text", 'a CSV file saved as "CSV UTF-8"', source) from None
    if "\0" in text:
        raise _refused("holds characters that no text has", "a CSV file", source)
    lines = text.splitlines()
    heading = next((line for line in lines if line.strip(" ,;\t") and not line.startswith(("#", '"#'))), "")
    parted_by = max(",;\t", key=heading.count)
    found: list[list[str]] = []
    try:
        for row in csv.reader(io.StringIO(text, newline=""), delimiter=parted_by, strict=True):
            if len(found) >= ROW_LIMIT:
                raise _refused("has too many rows", f"at most {ROW_LIMIT}", source)
            found.append(row)
    except csv.Error as error:
        problem = f"cannot be read as CSV ({plain(str(error))})"
        raise PriceListError([Fault(f"row {len(found) + 1}", "", "", problem, "a CSV file")], source) from None
    return found


def _first_of_table(rows: list[list[str]]) -> int:
    """The place of the headings: the first row that is neither empty nor a notice."""
    table = (at for at, row in enumerate(rows) if any(cell.strip() for cell in row) and not row[0].startswith("#"))
    return next(table, len(rows))


def _notice(rows: list[list[str]]) -> str:
    """The first line that starts with #, on one line, or nothing."""
    said = next((", ".join(row) for row in rows if row and row[0].startswith("#")), "")
    return plain(shorten(" ".join(said.strip("#,; ").split()), CELL_LIMIT))


def _heading_faults(headings: Sequence[str], row: int) -> Iterator[Fault]:
    place = f"row {row}"
    for at, name in enumerate(headings):
        given = shorten(plain(name))
        if name not in COLUMNS and name:
            yield Fault(place, "", given, "is not a known column", ", ".join(COLUMNS), nearest(name, COLUMNS))
        elif name and name in headings[:at]:
            yield Fault(place, "", given, "is there twice", "each column once")
    for name in _NEEDED:
        if name not in headings:
            yield Fault(place, "", "", f'has no column "{name}"', f"the columns {', '.join(_NEEDED)} at least")


class _Row:
    """One row of a list while it is read, with the faults found in it."""

    def __init__(self, number: int, headings: Sequence[str], cells: Sequence[str]) -> None:
        self.number, self.faults = number, list[Fault]()
        self._cells = {name: cell.strip() for name, cell in zip(headings, cells, strict=False) if name}
        beyond = [cell for name, cell in zip([*headings, *[""] * len(cells)], cells, strict=False) if not name]
        if any(cell.strip() for cell in beyond):
            self.fault("", "", "has more cells than there are headings", f"{len(headings)} cells")

    def value(self, column: str) -> str:
        """The cell of a column; empty where there is none."""
        return self._cells.get(column, "")

    def fault(self, column: str, given: str, problem: str, accepted: str, near: str = "") -> None:
        """Note what is wrong."""
        text = f'"{shorten(plain(given))}"' if given else ""
        self.faults.append(Fault(f"row {self.number}", column, text, problem, accepted, near))

    def offer(self) -> list[Offer]:
        """The row as an offer; none where it has faults."""
        item = self._choice("item", tuple(_USES))
        if item is None:
            return []
        uses, per_what = _USES[item]
        self._cells_in_order(item, uses)
        per = self._choice("per", per_what)
        material = self._choice("material", MATERIALS, needed=False)
        strand = self._choice("strand", STRANDS, needed=False)
        size = self._size(needed="size" in uses)
        rating_A = self._number("rating_A", 1e-3, 1e6, needed=False)
        stud = self._stud()
        price = self._number("price", 0, 1e6)
        reel_m = self._reel_m(per)
        if self.faults or price is None:
            return []
        kind = as_word(self.value("type")) or None
        return [Offer(self.number, item, size, material, strand, kind, rating_A, stud, reel_m, price)]

    def _cells_in_order(self, item: str, uses: frozenset[str]) -> None:
        for column, text in self._cells.items():
            if len(text) > CELL_LIMIT:
                self.fault(column, text, "is too long", f"at most {CELL_LIMIT} characters")
            elif text and column not in uses | _ALWAYS:
                self.fault(column, text, f'says nothing of an item "{item}"', "an empty cell")
        if not re.fullmatch(r"[A-Za-z]{3}", self.value("currency")):
            self.fault("currency", self.value("currency"), "is not a currency", "three letters such as EUR (ISO 4217)")
        if "type" in uses and not self.value("type"):
            self.fault("type", "", "is empty", 'a type such as "blade" or "switch"')

    def _choice(self, column: str, known: tuple[str, ...], needed: bool = True) -> str | None:
        text = as_word(self.value(column))
        if text in known or (not text and not needed):
            return text or None
        problem = "is not a known choice" if text else "is empty"
        self.fault(column, self.value(column), problem, ", ".join(known), nearest(text, known) if text else "")
        return None

    def _size(self, needed: bool) -> str | None:
        text = self.value("size")
        if not text:
            if needed:
                self.fault("size", "", "is empty", 'a size such as "6 mm2", "10 AWG" or "10 SAE"')
            return None
        try:
            return parse_size(text).name
        except SizeError as error:
            self.fault("size", text, error.problem, error.accepted, error.nearest)
            return None

    def _stud(self) -> str | None:
        text = self.value("stud")
        known = known_stud(text) if text else None
        if text and known is None:
            self.fault("stud", text, "is not a known stud size", ", ".join(STUDS), nearest(text, STUDS))
        return known

    def _reel_m(self, per: str | None) -> float | None:
        if per == "reel":
            return self._number("reel_m", 0.1, 10_000)
        if per is not None and self.value("reel_m"):
            self.fault("reel_m", self.value("reel_m"), f'stands with a price per "{per}"', 'per "reel", or no length')
        return None

    def _number(self, column: str, least: float, most: float, needed: bool = True) -> float | None:
        text = self.value(column)
        accepted = f"a number from {least:g} to {most:,.0f}".replace(",", " ")
        if not text and not needed:
            return None
        if re.fullmatch(r"\d+,\d+", text):
            self.fault(column, text, "has a comma; a decimal point is read", accepted, text.replace(",", "."))
            return None
        if not re.fullmatch(r"\d+\.?\d*|\.\d+", text):
            self.fault(column, text, "is not a plain number" if text else "is empty", accepted)
            return None
        value = float(text)
        if not (math.isfinite(value) and least <= value <= most):
            self.fault(column, text, "is out of range", accepted)
            return None
        return value


def _repeated(offers: Sequence[Offer]) -> Iterator[Fault]:
    first: dict[tuple[object, ...], int] = {}
    for one in offers:
        if one.key in first:
            yield Fault(f"row {one.row}", "", "", f"prices the same thing as row {first[one.key]}", "each thing once")
        first.setdefault(one.key, one.row)


def _refused(problem: str, accepted: str, source: str) -> PriceListError:
    return PriceListError([Fault("", "", "", problem, accepted)], source)


def _raise(faults: Sequence[Fault], source: str) -> None:
    """Raise what was found: every fault, or the first of very many and their number."""
    if not faults:
        return
    kept = list(faults[:FAULT_LIMIT])
    more = len(faults) - len(kept)
    rest = [Fault("", "", "", f"and {more} more faults of this kind", "mend these first")] if more else []
    raise PriceListError([*kept, *rest], source)
