"""Meter readings of an installation, read from the rows of a table and held against the names of its plan.

A reading is the voltage between two nodes (feed or return of a point), or the current in one conductor of a run.
Readings of one `set` were taken in the same state of loads, sources and devices. What a meter may be off by is stated
as its data sheet does: so many percent of the reading and so many digits, a digit being the last place shown.
"""

import csv
import io
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from farvolt import reading_states, units
from farvolt.errors import FarvoltError, Fault, QuantityError
from farvolt.integrity import nearest, shorten
from farvolt.network import FEED, RETURN
from farvolt.plan import CHASSIS, Case, Plan

COLUMNS = (
    "set", "case", "loads", "sources", "devices", "from", "from pole", "to", "to pole", "volts", "run", "pole", "amps",
    "accuracy", "resolution", "time", "notes",
)  # fmt: skip
"""Columns of a table of readings, in the order that a sheet to fill in has them. Each may be left out."""

ACCURACY = "0.5 % + 2 digits"
"""What a meter may be off by unless a row says otherwise: that of an ordinary hand-held one (common practice)."""

POLES = {"feed": FEED, "+": FEED, "return": RETURN, "-": RETURN, "−": RETURN}
MOST_ROWS = 2_000

Pin = tuple[str, int]
"""A point and FEED or RETURN."""


class ReadingsError(FarvoltError):
    """Readings that cannot be used. `faults` holds every fault found, each with its row."""

    def __init__(self, faults: Sequence[Fault], source: str = "") -> None:
        self.faults = tuple(faults)
        head = f"{source}: " if source else ""
        super().__init__("\n".join(f"{head}{fault}" for fault in self.faults))


@dataclass(frozen=True, slots=True)
class Reading:
    """One reading: volts from `start` to `end`, or amps in the conductor `pole` of `run`; `limit` is what it may be
    off by, in the same unit. `row` counts the rows of the table, its heading being the first."""

    row: int
    value: float
    limit: float
    written: str
    start: Pin | None = None
    end: Pin | None = None
    run: str = ""
    pole: int = FEED

    @property
    def place(self) -> str:
        """How a message names it."""
        return f"row {self.row}"

    @property
    def where(self) -> str:
        """Between what it was taken, in words."""
        return between(self.start, self.end) if self.start and self.end else f'in {_POLE[self.pole]} of "{self.run}"'

    @property
    def unit(self) -> str:
        """V or A."""
        return "A" if self.run else "V"


@dataclass(frozen=True, slots=True)
class ReadingSet:
    """Readings taken in one state: `case` is that of the plan with what the rows say of it."""

    name: str
    case: Case
    readings: tuple[Reading, ...]
    times: tuple[str, ...] = ()


_POLE = {FEED: "feed", RETURN: "return"}


def between(start: Pin, end: Pin) -> str:
    """Two nodes in words: feed to return of one point, or one node to another."""
    if start[0] == end[0] and start[1] != end[1]:
        return f'at "{start[0]}", {_POLE[start[1]]} to {_POLE[end[1]]}'
    return f"from {pin_words(start)} to {pin_words(end)}"


def pin_words(pin: Pin) -> str:
    """A node in words."""
    return "chassis" if pin[0] == CHASSIS else f'{_POLE[pin[1]]} of "{pin[0]}"'


def from_text(text: str, plan: Plan, source: str = "") -> tuple[ReadingSet, ...]:
    """Readings of a CSV text: a heading row with names of `COLUMNS`, then a row for each reading; `#` begins a note.

    Commas, semicolons or tabs part the columns. Raises ReadingsError.
    """
    lines = ["" if line.lstrip().startswith("#") else line for line in text.lstrip("\ufeff").splitlines()]
    head = next((line for line in lines if line.strip()), "")
    mark = max(",;\t", key=head.count)
    try:
        rows = [(line + 1, row) for line, row in _csv_rows("\n".join(lines), mark)]
    except csv.Error as error:
        raise ReadingsError([Fault("", "", "", f"this is no table of readings ({error})", ", ".join(COLUMNS))],
                            source) from None  # fmt: skip
    return from_rows(rows, plan, source)


def _csv_rows(text: str, mark: str) -> Iterator[tuple[int, list[str]]]:
    reader = csv.reader(io.StringIO(text), delimiter=mark)
    before = 0
    for row in reader:
        if any(cell.strip() for cell in row):
            yield before, row
        before = reader.line_num


def read(path: Path, plan: Plan) -> tuple[ReadingSet, ...]:
    """Readings of a CSV file. Raises ReadingsError."""
    try:
        text = path.read_bytes().decode("utf-8-sig")
    except OSError as error:
        raise ReadingsError([Fault("", "", "", f"cannot be read ({error.strerror})")], str(path)) from None
    except UnicodeDecodeError:
        raise ReadingsError([Fault("", "", "", "is not a text in UTF-8", "a CSV file in UTF-8")], str(path)) from None
    return from_text(text, plan, str(path))


def from_rows(rows: Sequence[tuple[int, Sequence[str]]], plan: Plan, source: str = "") -> tuple[ReadingSet, ...]:
    """Readings of numbered rows of cells, the first of which is the heading. Raises ReadingsError."""
    faults: list[Fault] = []
    if not rows:
        faults.append(Fault("", "", "", "there is no heading row", f"columns {', '.join(COLUMNS)}"))
    elif len(rows) > MOST_ROWS:
        faults.append(Fault("", "", str(len(rows)), "there are too many rows", f"at most {MOST_ROWS}"))
    else:
        faults += _heading_faults(rows[0])
    if faults:
        raise ReadingsError(faults, source)
    names = [cell.strip().lower() for cell in rows[0][1]]
    table = [
        (number, {name: cell.strip() for name, cell in zip(names, row, strict=False) if name}) for number, row in rows[1:]
    ]
    faults += [Fault(f"row {number}", "", shorten(" ".join(row[len(names):])), "has more cells than the heading",
                     f"{len(names)} cells") for number, row in rows[1:]
               if any(cell.strip() for cell in row[len(names):])]  # fmt: skip
    found = _sets(table, plan, faults)
    if not faults and not any(one.readings for one in found):
        faults.append(Fault("", "", "", "there is no reading", 'a row such as from "bank", volts 12.84'))
    if faults:
        raise ReadingsError(faults, source)
    return tuple(found)


def _heading_faults(row: tuple[int, Sequence[str]]) -> list[Fault]:
    number, cells = row
    names = [cell.strip().lower() for cell in cells]
    accepted = ", ".join(COLUMNS)
    place = f"row {number}"
    found = [
        Fault(place, shorten(name), "", "there is no such column", accepted, nearest(name, COLUMNS))
        for name in names
        if name and name not in COLUMNS
    ]
    found += [Fault(place, name, "", "this column is there twice") for name in COLUMNS if names.count(name) > 1]
    if not found and not {"volts", "amps"} & set(names):
        found.append(Fault(place, "", "", "there is no column of readings", "volts, amps"))
    return found


def _sets(
    table: list[tuple[int, dict[str, str]]], plan: Plan, faults: list[Fault]
) -> list[ReadingSet]:
    """The sets in order of appearance; a row that names none belongs to the one before it."""
    groups: dict[str, list[tuple[int, dict[str, str]]]] = {}
    name = "1"
    for number, row in table:
        name = row.get("set") or name
        groups.setdefault(name, []).append((number, row))
    digit = _digits(table)
    found = []
    for name, rows in groups.items():
        case = reading_states.case_of(name, rows, plan, faults)
        readings = [one for number, row in rows if (one := _reading(number, row, plan, digit, faults)) is not None]
        times = tuple(row["time"] for _, row in rows if row.get("time"))
        found.append(ReadingSet(name, case, tuple(readings), times))
    return found



def _unit_of(text: str) -> str:
    return text.lstrip("+-−0123456789. ").strip()


def _last_place(text: str) -> float:
    """What the last digit of a number as written stands for: 0.01 of "12.40"."""
    number = re.match(r"\s*[+\-−]?(\d*)\.?(\d*)", text)
    return float(10.0 ** -len(number.group(2))) if number else 1.0


def _digits(table: list[tuple[int, dict[str, str]]]) -> dict[tuple[str, str, int], float]:
    """The last place shown, by column, unit and order of magnitude: the finest written there, since a spreadsheet
    leaves the noughts at the end of a number out."""
    finest: dict[tuple[str, str, int], float] = {}
    for _, row in table:
        for column in ("volts", "amps"):
            text = row.get(column, "")
            if text:
                key = (column, _unit_of(text), _magnitude(text))
                finest[key] = min(finest.get(key, 1e9), _last_place(text))
    return finest


def _magnitude(text: str) -> int:
    whole = re.match(r"\s*[+\-−]?0*(\d*)", text)
    return len(whole.group(1)) if whole else 0


def _reading(
    number: int, row: Mapping[str, str], plan: Plan, digits: Mapping[tuple[str, str, int], float], faults: list[Fault]
) -> Reading | None:
    """The reading of a row; None where it has none, or is wrong, with the faults added."""
    before = len(faults)
    place = f"row {number}"
    columns = [column for column in ("volts", "amps") if row.get(column)]
    if len(columns) != 1:
        if columns or any(row.get(name) for name in ("from", "to", "run")):
            problem = "has both volts and amps" if columns else "has no reading"
            faults.append(Fault(place, "", "", problem, "one of volts, amps"))
        return None
    column = columns[0]
    text = row[column].replace("−", "-")
    value, scale = _value(place, column, text, faults)
    step = _resolution(place, row.get("resolution", ""), column, faults)
    if step is None:
        step = digits[column, _unit_of(text), _magnitude(text)] * scale
    limit = _limit(place, row.get("accuracy") or ACCURACY, value, step, faults)
    if column == "volts":
        start, end = _ends(place, row, plan, faults)
        made = Reading(number, value, limit, row[column], start, end)
    else:
        run, pole = _conductor(place, row, plan, faults)
        made = Reading(number, value, limit, row[column], run=run, pole=pole)
    return made if len(faults) == before else None


_DIMENSION = {"volts": ("voltage", "V"), "amps": ("current", "A")}


def _value(place: str, column: str, text: str, faults: list[Fault]) -> tuple[float, float]:
    """A reading and what its unit is worth in V or A; a bare number is in the unit of its column."""
    dimension, base = _DIMENSION[column]
    unit = _unit_of(text)
    try:
        return units.parse(text if unit else f"{text} {base}", dimension).si, units.DIMENSIONS[dimension].get(unit, 1.0)
    except QuantityError as error:
        faults.append(Fault(place, column, f'"{shorten(text)}"', str(error), error.accepted, error.nearest))
        return 0.0, 1.0


def _resolution(place: str, text: str, column: str, faults: list[Fault]) -> float | None:
    if not text:
        return None
    found, _ = _value(place, column, text, faults)
    if found < 0:
        faults.append(Fault(place, "resolution", f'"{text}"', "is below zero", '"0.01 V"'))
    return found


_ACCURACY = re.compile(r"[±+\-/ ]*(?:([\d.]+) ?%)?\s*\+?\s*(?:([\d.]+) ?(?:digits?|counts?|d|dgt))?", re.IGNORECASE)


def _limit(place: str, text: str, value: float, step: float, faults: list[Fault]) -> float:
    """What a reading may be off by: percent of it and digits of `step` each."""
    found = _ACCURACY.fullmatch(text.strip())
    numbers = [_number(one) for one in found.groups()] if found else []
    if not numbers or None in numbers or (numbers == [0.0, 0.0] and step > 0):
        faults.append(Fault(place, "accuracy", f'"{shorten(text)}"', "is no accuracy of a meter", f'"{ACCURACY}"'))
        return 1.0
    percent, digits = (one or 0.0 for one in numbers)
    return max(percent / 100 * abs(value) + digits * step, 1e-9)


def _number(text: str | None) -> float | None:
    try:
        return float(text or 0.0)
    except ValueError:
        return None


def _ends(place: str, row: Mapping[str, str], plan: Plan, faults: list[Fault]) -> tuple[Pin | None, Pin | None]:
    """The two nodes of a voltage; a point alone is read from its feed to its return."""
    for column in ("run", "pole"):
        if row.get(column):
            faults.append(Fault(place, column, f'"{row[column]}"', "a run is for a current", "from and to"))
    start = _pin(place, row, "from", FEED, plan, faults)
    if not row.get("to"):
        if start is not None and start[1] == RETURN and not row.get("to pole"):
            accepted = "the other end in to, or the feed in from"
            faults.append(Fault(place, "to", "", "is missing", accepted))
        return start, _pin(place, {**row, "to": row.get("from", "")}, "to", RETURN, plan, faults)
    end = _pin(place, row, "to", start[1] if start else FEED, plan, faults)
    if start is not None and start == end:
        faults.append(Fault(place, "to", f'"{row["to"]}"', "starts and ends at the same node", "another node"))
    return start, end


def _pin(
    place: str, row: Mapping[str, str], column: str, usual: int, plan: Plan, faults: list[Fault]
) -> Pin | None:
    point, pole_column = row.get(column, ""), f"{column} pole"
    known = [*plan.point_names, *([CHASSIS] if _has_chassis(plan) else [])]
    if point not in known:
        problem = "there is no such point in the plan" if point else "is missing"
        accepted = ", ".join(f'"{name}"' for name in known[:12]) + (", …" if len(known) > 12 else "")
        faults.append(Fault(place, column, f'"{shorten(point)}"' if point else "", problem, accepted,
                            nearest(point, known)))  # fmt: skip
        return None
    if point == CHASSIS:
        return CHASSIS, RETURN
    pole = _pole(place, pole_column, row.get(pole_column, ""), usual, faults)
    return None if pole is None else (point, pole)


def _has_chassis(plan: Plan) -> bool:
    return any(CHASSIS in join for join in plan.joins) or any(run.return_path == CHASSIS for run in plan.runs)


def _pole(place: str, column: str, text: str, usual: int, faults: list[Fault]) -> int | None:
    if not text:
        return usual
    if text.lower() not in POLES:
        faults.append(Fault(place, column, f'"{shorten(text)}"', "is not a pole", "feed, return",
                            nearest(text.lower(), POLES)))  # fmt: skip
        return None
    return POLES[text.lower()]


def _conductor(place: str, row: Mapping[str, str], plan: Plan, faults: list[Fault]) -> tuple[str, int]:
    """The run of a current, and which of its conductors the clamp was around."""
    for column in ("from", "to"):
        if row.get(column):
            faults.append(Fault(place, column, f'"{row[column]}"', "a current is read in a run", "run and pole"))
    given, names = row.get("run", ""), {run.name: run for run in plan.runs}
    names |= {run.label: run for run in plan.runs if run.label is not None}
    if given not in names:
        problem = "there is no such run in the plan" if given else "is missing"
        faults.append(Fault(place, "run", f'"{shorten(given)}"' if given else "", problem, "the name of a run",
                            nearest(given, names)))  # fmt: skip
        return "", FEED
    run = names[given]
    has = [FEED] if run.return_path == CHASSIS else [POLES[run.conducts]] if run.conducts != "both" else [FEED, RETURN]
    pole = _pole(place, "pole", row.get("pole", ""), has[0], faults)
    if pole is not None and pole not in has:
        faults.append(Fault(place, "pole", f'"{row["pole"]}"', f'run "{run.name}" has no such conductor',
                            _POLE[has[0]]))  # fmt: skip
    return run.name, has[0] if pole is None else pole
