"""Meter readings of an installation: what they are, and which columns a table of them has.

A reading is the voltage between two nodes (feed or return of a point), or the current in one conductor of a run.
Readings of one `set` were taken in the same state of loads, sources and devices. What a meter may be off by is stated
as its data sheet does: so many percent of the reading and so many digits, a digit being the last place shown.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from farvolt.errors import FarvoltError, Fault
from farvolt.network import FEED, RETURN
from farvolt.plan import CHASSIS, Case

COLUMNS = (
    "set", "case", "loads", "sources", "devices", "from", "from pole", "to", "to pole", "volts", "run", "pole", "amps",
    "accuracy", "resolution", "time", "notes",
)  # fmt: skip
"""Columns of a table of readings, in the order that a sheet to fill in has them. Each may be left out."""

ACCURACY = "0.5 % + 2 digits"
"""What a meter may be off by unless a row says otherwise: that of an ordinary hand-held one (common practice)."""

POLES = {"feed": FEED, "+": FEED, "return": RETURN, "-": RETURN, "−": RETURN}

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
        if self.start and self.end:
            return between(self.start, self.end)
        return f'in the {POLE_WORDS[self.pole]} of run "{self.run}"'

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


POLE_WORDS = {FEED: "feed", RETURN: "return"}


def between(start: Pin, end: Pin) -> str:
    """Two nodes in words: feed to return of one point, or one node to another."""
    if start[0] == end[0] and start[1] != end[1]:
        return f'at "{start[0]}", {POLE_WORDS[start[1]]} to {POLE_WORDS[end[1]]}'
    return f"from {pin_words(start)} to {pin_words(end)}"


def pin_words(pin: Pin) -> str:
    """A node in words."""
    return "chassis" if pin[0] == CHASSIS else f'{POLE_WORDS[pin[1]]} of "{pin[0]}"'
