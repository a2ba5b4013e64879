"""Quantities with units: read from text, kept as the user wrote them, shown in metric and American units.

Base units: metre, watt, ampere, volt, ohm, degree Celsius, ampere-hour, second; a percentage has base 1.
"""

import difflib
import math
import re
from dataclasses import dataclass
from functools import lru_cache

from farvolt.errors import QuantityError

_FOOT_M = 0.3048  # exact by the international yard and pound agreement of 1959
_INCH_M = 0.0254

DIMENSIONS: dict[str, dict[str, float]] = {
    "length": {"m": 1.0, "cm": 0.01, "mm": 0.001, "km": 1000.0, "ft": _FOOT_M, "in": _INCH_M},
    "power": {"W": 1.0, "mW": 1e-3, "kW": 1e3},
    "current": {"A": 1.0, "mA": 1e-3, "kA": 1e3},
    "voltage": {"V": 1.0, "mV": 1e-3, "kV": 1e3},
    "resistance": {"ohm": 1.0, "mohm": 1e-3, "uohm": 1e-6, "kohm": 1e3},
    "charge": {"Ah": 1.0, "mAh": 1e-3},
    "share": {"%": 0.01},
    "time": {"s": 1.0, "ms": 1e-3, "min": 60.0, "h": 3600.0},
    "temperature": {"degC": 1.0, "degF": 1.0, "K": 1.0},
}
"""Dimension to its units, each with its factor to the base unit (temperatures are converted apart)."""

EXAMPLES: dict[str, str] = {
    "length": '"4.5 m" or "15 ft"',
    "power": '"60 W"',
    "current": '"30 A"',
    "voltage": '"12 V"',
    "resistance": '"4 mohm"',
    "charge": '"200 Ah"',
    "share": '"80 %"',
    "time": '"0.5 s"',
    "temperature": '"30 degC" or "86 degF"',
}
"""Dimension to what a message shows as accepted."""

_SPELLINGS = {"Ω": "ohm", "mΩ": "mohm", "µΩ": "uohm", "μΩ": "uohm", "kΩ": "kohm", "µohm": "uohm", "μohm": "uohm"}
_SPELLINGS |= {"°C": "degC", "°F": "degF", "℃": "degC", "℉": "degF"}
_PATTERN = re.compile(r"\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(\S.*?)?\s*")


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number with its unit: the value in the base unit of its dimension, and the text as written."""

    si: float
    text: str
    dimension: str

    def __str__(self) -> str:
        return self.text


@lru_cache(maxsize=65536)
def parse(text: str, dimension: str) -> Quantity:
    """Read `text` as a quantity of `dimension` (a key of `DIMENSIONS`).

    Raises QuantityError: no number, no unit, a unit of another dimension, or a number that is not finite.
    """
    units = DIMENSIONS[dimension]
    match = _PATTERN.fullmatch(text)
    if match is None:
        raise _not_a_number(text, dimension)
    number, written = match.groups()
    if not written:
        first = next(iter(units))
        raise QuantityError("has no unit", accepted=_accepted(dimension), nearest=f'"{number} {first}"')
    unit = _SPELLINGS.get(written, written)
    if unit not in units:
        raise _wrong_unit(number, written, dimension)
    value = float(number)
    if not math.isfinite(value):
        raise QuantityError("is not a finite number", accepted=_accepted(dimension))
    return Quantity(_to_base(value, unit, units[unit]), text.strip(), dimension)


def quantity(value: float, unit: str, dimension: str) -> Quantity:
    """A quantity from a bare number, for defaults and computed values."""
    return parse(f"{value:.12g} {unit}", dimension)


def number(value: float, digits: int = 3) -> str:
    """`value` rounded to `digits` significant digits, without an exponent, for reading (never for computing)."""
    if value == 0 or not math.isfinite(value):
        return "0" if value == 0 else str(value)
    decimals = max(0, digits - 1 - math.floor(math.log10(abs(value))))
    text = f"{value:.{decimals}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def both_lengths(length_m: float) -> str:
    """A length in metres with feet beside it, for reading."""
    return f"{number(length_m)} m ({number(length_m / _FOOT_M)} ft)"


def feet(length_m: float) -> float:
    """Metres to feet."""
    return length_m / _FOOT_M


def fahrenheit(temperature_degC: float) -> float:
    """Degrees Celsius to degrees Fahrenheit."""
    return temperature_degC * 9 / 5 + 32


def _to_base(value: float, unit: str, factor: float) -> float:
    if unit == "degF":
        return (value - 32) * 5 / 9
    if unit == "K":
        return value - 273.15
    # Dividing by an exact reciprocal keeps "80 %" at 0.8 and "4 mohm" at 0.004 to the last bit.
    return value / round(1 / factor) if factor < 1 and (1 / factor).is_integer() else value * factor


def _accepted(dimension: str) -> str:
    return f"a {dimension} such as {EXAMPLES[dimension]} (units: {', '.join(DIMENSIONS[dimension])})"


def _not_a_number(text: str, dimension: str) -> QuantityError:
    if not text.strip():
        return QuantityError("is empty", accepted=_accepted(dimension))
    decimal_comma = re.sub(r"^(\s*[+-]?\d+),(\d+)", r"\1.\2", text)
    nearest = f'"{decimal_comma}"' if decimal_comma != text and _PATTERN.fullmatch(decimal_comma) else ""
    if re.match(r"\s*[+-]?(inf|nan)", text, re.IGNORECASE):
        return QuantityError("is not a finite number", accepted=_accepted(dimension))
    return QuantityError("does not start with a number", accepted=_accepted(dimension), nearest=nearest)


def _wrong_unit(value: str, written: str, dimension: str) -> QuantityError:
    units = DIMENSIONS[dimension]
    same_letters = [unit for unit in units if unit.lower() == written.lower()]
    close = same_letters or difflib.get_close_matches(written, units, n=1, cutoff=0.5)
    others = [name for name, table in DIMENSIONS.items() if written in table and name != dimension]
    problem = f'"{written}" is a unit of {others[0]}, not of {dimension}' if others else f'unknown unit "{written}"'
    nearest = f'"{value} {close[0]}"' if close else ""
    return QuantityError(problem, accepted=_accepted(dimension), nearest=nearest)
