"""Quantities with units: read from text, kept as the user wrote them, shown in metric and American units.

Base units: metre, watt, ampere, volt, ohm, degree Celsius, ampere-hour, second, degree of angle; a percentage has
base 1.
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
    "angle": {"deg": 1.0},
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
    "angle": '"30 deg"',
    "temperature": '"30 degC" or "86 degF"',
}
"""Dimension to what a message shows as accepted."""

_SPELLINGS = {"Ω": "ohm", "mΩ": "mohm", "µΩ": "uohm", "μΩ": "uohm", "kΩ": "kohm", "µohm": "uohm", "μohm": "uohm"}
_SPELLINGS |= {"°C": "degC", "°F": "degF", "℃": "degC", "℉": "degF", "°": "deg"}
_PATTERN = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?) ?(\S.*)?")
_COMMA = re.compile(r"([+-]?[0-9]+),([0-9]+)(?![0-9,.])")

_MEANT = {
    "metre": "m", "meter": "m", "foot": "ft", "feet": "ft", "'": "ft", "inch": "in", "inches": "in", '"': "in",
    "watt": "W", "kilowatt": "kW", "amp": "A", "ampere": "A", "adc": "A", "volt": "V", "vdc": "V", "v dc": "V",
    "ohm": "ohm", "milliohm": "mohm", "amp hour": "Ah", "ampere hour": "Ah", "amp-hour": "Ah", "percent": "%",
    "per cent": "%", "sec": "s", "second": "s", "minute": "min", "hour": "h", "hr": "h", "c": "degC", "f": "degF",
    "celsius": "degC", "fahrenheit": "degF", "deg c": "degC", "deg f": "degF", "kelvin": "K",
    "degree": "deg",
}  # fmt: skip
"""What people write for a unit, in small letters and without a plural s: offered in a message, never taken."""


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
    text = " ".join(text.split())
    match = _PATTERN.fullmatch(text)
    if match is None:
        raise _not_a_number(text, dimension)
    number, written = match.groups()
    if not written:
        raise QuantityError("has no unit", accepted=_accepted(dimension), nearest=with_unit(number, dimension))
    unit = _SPELLINGS.get(written, written)
    if unit not in units:
        raise _wrong_unit(number, written, dimension)
    value = _to_base(float(number), unit, units[unit])
    if not math.isfinite(value):
        raise QuantityError("is not a finite number", accepted=_accepted(dimension))
    return Quantity(value, text, dimension)


def with_unit(number: str, dimension: str) -> str:
    """A bare number as its writer may have meant it, in quotes; nothing for one that is not finite."""
    value = float(number)
    if dimension == "share" and 0 < value <= 1:
        return f'"{100 * value:g} %"'
    return f'"{number} {next(iter(DIMENSIONS[dimension]))}"' if math.isfinite(value) else ""


def number(value: float, digits: int = 3) -> str:
    """`value` rounded to `digits` significant digits, without an exponent, for reading (never for computing)."""
    if value == 0 or not math.isfinite(value):
        return "0" if value == 0 else str(value)
    decimals = max(0, digits - 1 - math.floor(math.log10(abs(value))))
    text = f"{value:.{decimals}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def a(dimension: str) -> str:
    """The dimension with its article: "a length", "an angle"."""
    return f"{'an' if dimension[0] in 'aeiou' else 'a'} {dimension}"


def both_lengths(length: Quantity) -> str:
    """A length as written, with the other system's beside it, for reading."""
    if length.text.endswith(("ft", "in")):
        return f"{length} ({number(length.si)} m)"
    return f"{length} ({number(feet(length.si))} ft)"


def feet(length_m: float) -> float:
    """Metres to feet."""
    return length_m / _FOOT_M


def _to_base(value: float, unit: str, factor: float) -> float:
    if unit == "degF":
        return (value - 32) * 5 / 9
    if unit == "K":
        return value - 273.15
    # Dividing by an exact reciprocal keeps "80 %" at 0.8 and "4 mohm" at 0.004 to the last bit.
    return value / round(1 / factor) if factor < 1 and (1 / factor).is_integer() else value * factor


def _accepted(dimension: str) -> str:
    return f"{a(dimension)} such as {EXAMPLES[dimension]} (units: {', '.join(DIMENSIONS[dimension])})"


def _not_a_number(text: str, dimension: str) -> QuantityError:
    if not text:
        return QuantityError("is empty", accepted=_accepted(dimension))
    if re.match(r"[+-]?(inf|nan)", text, re.IGNORECASE):
        return QuantityError("is not a finite number", accepted=_accepted(dimension))
    return QuantityError("does not start with a number", accepted=_accepted(dimension))


def _wrong_unit(value: str, written: str, dimension: str) -> QuantityError:
    comma = _COMMA.match(f"{value}{written}")
    if comma:
        return _comma(comma, f"{value}{written}"[comma.end() :].strip(), dimension)
    others = [name for name, table in DIMENSIONS.items() if written in table]
    problem = f'"{written}" is a unit of {others[0]}, not of {dimension}' if others else f'unknown unit "{written}"'
    unit = "" if others else _meant(written, dimension)
    return QuantityError(problem, accepted=_accepted(dimension), nearest=f'"{value} {unit}"' if unit else "")


def _meant(written: str, dimension: str) -> str:
    """The unit of `dimension` that `written` is a spelling of, or near to; empty where none is."""
    units = DIMENSIONS[dimension]
    small = written.lower().rstrip(".")
    found = [unit for unit in units if unit.lower() == small]
    found += [_MEANT[word] for word in (small, small.removesuffix("s")) if _MEANT.get(word) in units]
    # Short units are all near to each other ("Wh" to "Ah"), so that only longer ones are guessed by likeness.
    guessed = (
        difflib.get_close_matches(written, units, n=1, cutoff=0.6) if re.fullmatch("[A-Za-z]{3,}", written) else []
    )
    return next(iter([*found, *guessed]), "")


def _comma(match: re.Match[str], unit: str, dimension: str) -> QuantityError:
    whole, rest = match.groups()
    read = [f"{whole}.{rest}"] + ([f"{whole}{rest}"] if len(rest) == 3 else [])
    known = unit if _SPELLINGS.get(unit, unit) in DIMENSIONS[dimension] else _meant(unit, dimension)
    offered = [f'"{number} {known}"' if known else "" if unit else with_unit(number, dimension) for number in read]
    nearest = " or ".join(filter(None, offered))
    return QuantityError("has a comma; a decimal point is read", accepted=_accepted(dimension), nearest=nearest)
