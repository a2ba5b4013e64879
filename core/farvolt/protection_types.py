"""Types of fuses and breakers by plain name: ratings made, voltage, interrupting rating, and resistance."""

import difflib
import math
import tomllib
from dataclasses import dataclass
from functools import lru_cache

from farvolt.errors import DataError, QuantityError
from farvolt.fields import Fields
from farvolt_data import ROOT


@dataclass(frozen=True, slots=True)
class ProtectionType:
    """A kind of fuse or breaker. Its figures are typical: the data sheet of the part goes before them."""

    name: str
    title: str
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

    def interrupting_at(self, system_volts: float) -> float | None:
        """Greatest fault current in ampere cleared at a system voltage; None above the type's own."""
        return next((amps for volts, amps in self.interrupting if volts >= system_volts), None)


def protection_type_names() -> tuple[str, ...]:
    """The names a plan may use, in the order of the table."""
    return tuple(_types())


def protection_type(name: str) -> ProtectionType:
    """The type of that name; case does not matter. Raises QuantityError with the nearest name."""
    found = _types().get(" ".join(name.lower().split()))
    if found is None:
        near = difflib.get_close_matches(name.lower(), _types(), n=1, cutoff=0.4)
        nearest = f'"{near[0]}"' if near else ""
        accepted = ", ".join(f'"{known}"' for known in _types())
        raise QuantityError("is not a known type of protection", accepted=accepted, nearest=nearest)
    return found


def resistance_ohm(name: str, rating_A: float) -> float:
    """Resistance in ohm of one protection, from its type's typical drop at rated current: R = U / I."""
    return protection_type(name).drop_at_rating_mV / 1000 / rating_A


@lru_cache(maxsize=1)
def _types() -> dict[str, ProtectionType]:
    path = ROOT / "protection" / "types.toml"
    values = tomllib.loads(path.read_text(encoding="utf-8"))
    top = Fields(values, "", lambda sentence: DataError(f"{path.name}: {sentence}"))
    return {name: _type(name, fields) for name, fields in top.named_tables().items()}


def _type(name: str, fields: Fields) -> ProtectionType:
    interrupting: list[tuple[float, float]] = []
    for entry in fields.tables("interrupting"):
        interrupting.append((entry.number("volts", 1, 2000), entry.number("amps", 1, math.inf)))
        entry.done()
    if not interrupting or interrupting != sorted(interrupting):
        raise fields.fail("interrupting", "must be a list of { volts, amps } with rising volts")
    made = ProtectionType(
        name=name,
        title=fields.text("title"),
        ratings_A=fields.numbers("ratings_A", 0.1, 10_000),
        volts=interrupting[-1][0],
        interrupting_A=interrupting[-1][1],
        interrupting=tuple(interrupting),
        drop_at_rating_mV=fields.number("drop_at_rating_mV", 1, 1000),
        basis=fields.text("basis"),
        provisional=fields.flag("provisional", False),
    )
    fields.done()
    return made
