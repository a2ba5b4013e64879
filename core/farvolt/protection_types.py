"""Types of fuses and breakers: ratings made, voltage, interrupting rating, opening times and resistance.

The type of a protection on a run is its `kind`, which knows the plan's own types as well; the functions here know those
shipped. Every figure shipped is typical of a kind of part: the data sheet goes before it.
"""

import difflib
import math
import tomllib
from dataclasses import dataclass
from functools import lru_cache
from typing import Literal

from farvolt.errors import DataError, QuantityError
from farvolt.fields import Fields
from farvolt.time_current import UNSTATED, Band, Gate, band
from farvolt_data import ROOT

Kind = Literal["fuse", "breaker"]

Points = list[tuple[float, float]]

LEAST_SHARE = 0.01
"""A hot device counts as carrying at least this share of its rating: what is beyond its range is a finding already."""


@dataclass(frozen=True, slots=True)
class ProtectionType:
    """A kind of fuse or breaker. Currents in ampere, times in second, I2t in A2s.

    Wherever a rating is asked for, a rating corrected for the ambient (`rating_at_A`) may be given.
    """

    name: str
    title: str
    kind: Kind
    ratings_A: tuple[float, ...]
    volts: float
    """Greatest DC system voltage."""
    interrupting_A: float
    """Greatest fault current it clears at that voltage."""
    interrupting: tuple[tuple[float, float], ...]
    """(system volts, ampere) by rising voltage; the last is `volts` and `interrupting_A`."""
    drop_at_rating_mV: float
    basis: str
    provisional: bool
    band: Band = UNSTATED
    cold_share: float = 1.0
    """Resistance cold over that at rated current, warm."""
    derating_per_K: float = 0.0
    """Share of the rating lost for each kelvin of ambient above `reference_degC`."""
    reference_degC: float = 25.0
    clearing: tuple[tuple[float, float], ...] = ()
    """(rating up to, greatest clearing I2t in A2s) beyond the last gate of the band, for current-limiting types."""
    times_basis: str = ""
    """Where opening times, I2t and derating come from."""
    own: bool = False
    """Stated in the plan, from a data sheet."""

    def interrupting_at(self, system_volts: float) -> float | None:
        """Greatest fault current in ampere cleared at a system voltage; None above the type's own."""
        return next((amps for volts, amps in self.interrupting if volts >= system_volts), None)

    def resistance_ohm(self, rating_A: float, *, cold: bool = False) -> float:
        """Resistance of one protection, from the typical drop at rated current: R = U / I; less where it is cold."""
        return self.drop_at_rating_mV / 1000 / rating_A * (self.cold_share if cold else 1)

    def rating_at_A(self, rating_A: float, ambient_degC: float) -> float:
        """The rating corrected for the ambient: less above the reference temperature, more below it."""
        return rating_A * max(LEAST_SHARE, 1 - self.derating_per_K * (ambient_degC - self.reference_degC))

    def opens_within_s(self, current_A: float, rating_A: float) -> float:
        """The greatest time that it may take to open at a steady current.

        Infinite where it may never open, and where nothing is stated. It never rises with the current; beyond the
        last gate of the band it stays the last one's.
        """
        return self.band.greatest_s(current_A / rating_A)

    def holds_for_s(self, current_A: float, rating_A: float) -> float:
        """The least time for which it carries a current without opening.

        Infinite at up to its rating; 0 where nothing is stated. It never rises with the current.
        """
        return self.band.least_s(current_A / rating_A)

    def let_through_A2s(self, current_A: float, rating_A: float) -> float:
        """The most I2t that it lets through at a fault current; infinite where it may never open.

        I² · greatest time within the band. Beyond its last gate a breaker takes the same time, so that I2t rises; what
        melts a fuse needs no more I2t than at that gate, since less heat escapes, so that I2t stays (IEC 60269-1
        on pre-arcing I2t, from memory; the arc of a circuit within the fuse's ratings counts in the gate's time).
        A current-limiting type has its stated clearing I2t there, if that is less.
        """
        times, last_s = self.band.last
        if self.kind == "breaker" or current_A <= times * rating_A:
            return _joule(current_A, self.opens_within_s(current_A, rating_A))
        stated = next((joule for up_to, joule in self.clearing if rating_A <= up_to), math.inf)
        return min(_joule(times * rating_A, last_s), stated)

    def holds_A2s(self, current_A: float, rating_A: float) -> float:
        """The least I2t at a current before which it does not open: I² · least time; 0 where nothing is stated."""
        return _joule(current_A, self.holds_for_s(current_A, rating_A))

    def points(self, rating_A: float, largest_A: float) -> tuple[Points, Points]:
        """The band for a drawing: (ampere, s) along its least and its greatest times, by rising current.

        Both are straight between their points on logarithms, with steps where two stand at one current. A least time
        of 0 means that none is stated from there on.
        """
        least = [(times * rating_A, time_s) for times, time_s in self.band.least if times * rating_A < largest_A]
        greatest = [(times * rating_A, time_s) for times, time_s in self.band.greatest if times * rating_A < largest_A]
        least += [(largest_A, self.holds_for_s(largest_A, rating_A))] if least else []
        greatest += [(largest_A, self.opens_within_s(largest_A, rating_A))] if greatest else []
        return least, greatest


def protection_type_names() -> tuple[str, ...]:
    """The names of the types shipped, in the order of the table."""
    return tuple(_types())


def protection_type(name: str) -> ProtectionType:
    """The shipped type of that name; case does not matter. Raises QuantityError with the nearest name."""
    found = _types().get(_plain(name))
    if found is None:
        near = difflib.get_close_matches(name.lower(), _types(), n=1, cutoff=0.4)
        nearest = f'"{near[0]}"' if near else ""
        accepted = ", ".join(f'"{known}"' for known in _types())
        raise QuantityError("is not a known type of protection", accepted=accepted, nearest=nearest)
    return found


def is_shipped(name: str) -> bool:
    """Whether a type of that name is shipped; case does not matter."""
    return _plain(name) in _types()


def _plain(name: str) -> str:
    return " ".join(name.lower().split())


def _joule(current_A: float, time_s: float) -> float:
    return 0.0 if time_s == 0 or current_A == 0 else current_A**2 * time_s


@lru_cache(maxsize=1)
def _types() -> dict[str, ProtectionType]:
    path = ROOT / "protection" / "types.toml"
    values = tomllib.loads(path.read_text(encoding="utf-8"))
    top = Fields(values, "", lambda sentence: DataError(f"{path.name}: {sentence}"))
    return {name: _type(name, fields) for name, fields in top.named_tables().items()}


def _type(name: str, fields: Fields) -> ProtectionType:
    interrupting = _pairs(fields, "interrupting", "volts", "amps")
    if not interrupting:
        raise fields.fail("interrupting", "must be a list of { volts, amps } with rising volts")
    kind: Kind = "fuse" if fields.choice("kind", ("fuse", "breaker")) == "fuse" else "breaker"
    made = ProtectionType(
        name=name,
        title=fields.text("title"),
        kind=kind,
        ratings_A=fields.numbers("ratings_A", 0.1, 10_000),
        volts=interrupting[-1][0],
        interrupting_A=interrupting[-1][1],
        interrupting=interrupting,
        drop_at_rating_mV=fields.number("drop_at_rating_mV", 1, 1000),
        basis=fields.text("basis"),
        provisional=fields.flag("provisional", False),
        band=_band(fields),
        cold_share=fields.number("cold_share", 0.1, 1),
        derating_per_K=fields.number("derating_percent_per_K", 0, 5) / 100,
        reference_degC=fields.number("reference_degC", 0, 60),
        clearing=_pairs(fields, "clearing", "up_to_A", "A2s"),
        times_basis=fields.text("times_basis"),
    )
    fields.done()
    return made


def _pairs(fields: Fields, key: str, rising: str, value: str) -> tuple[tuple[float, float], ...]:
    """A list of { rising, value }, in the order of `rising`."""
    found: list[tuple[float, float]] = []
    for entry in fields.tables(key):
        found.append((entry.number(rising, 1, 10_000), entry.number(value, 1, math.inf)))
        entry.done()
    if found != sorted(found):
        raise fields.fail(key, f"must be a list of {{ {rising}, {value} }} with rising {rising}")
    return tuple(found)


def _band(fields: Fields) -> Band:
    gates: list[Gate] = []
    for entry in fields.tables("band"):
        times = entry.number("times", 1, 1000)
        least = entry.number_or_none("not_before_s", 0, 1e7)
        gates.append(Gate(times, least, entry.number_or_none("within_s", 1e-4, 1e7)))
        entry.done()
    try:
        return band(gates)
    except ValueError as problem:
        raise fields.fail("band", str(problem)) from None
