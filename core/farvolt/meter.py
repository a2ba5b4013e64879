"""What a multimeter may be off by: percent of the reading and digits, a digit being the last place it shows."""

import re
from dataclasses import dataclass

from farvolt.errors import FarvoltError
from farvolt.readings import ACCURACY

COUNTS = 6000
"""Steps of a range of an ordinary hand-held meter (common practice): 600.0 mV, 6.000 V, 60.00 V."""

_TEXT = re.compile(r"[±+\-/ ]*(?:([\d.]+) ?%)?\s*\+?\s*(?:([\d.]+) ?(?:digits?|counts?|d|dgt))?", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Meter:
    """A meter by its data sheet, on volts in ranges of 0.6, 6, 60 and 600."""

    percent: float
    digits: float
    text: str

    def limit(self, value: float) -> float:
        """What a reading of `value` may be off by, in the range that is just large enough for it."""
        return self.percent / 100 * abs(value) + self.digits * step(value)


def step(value: float) -> float:
    """The last place shown of a value, in its own unit: 0.0001 up to 0.6, 0.001 up to 6, and so on."""
    whole = 0.6
    while whole < abs(value):
        whole *= 10
    return whole / COUNTS


def parse(text: str = ACCURACY) -> Meter:
    """A meter by its accuracy as data sheets write it. Raises FarvoltError."""
    found = percent_and_digits(text)
    if found is None or found == (0.0, 0.0) or found[0] > 20:
        raise FarvoltError(f'"{text}" is no accuracy of a meter; accepted: "{ACCURACY}"')
    return Meter(*found, " ".join(text.split()))


def percent_and_digits(text: str) -> tuple[float, float] | None:
    """The two numbers of an accuracy, 0 for one that is not given; None where it is no accuracy at all."""
    found = _TEXT.fullmatch(text.strip())
    if found is None or not any(found.groups()):
        return None
    try:
        percent, digits = (float(one or 0.0) for one in found.groups())
    except ValueError:
        return None
    return percent, digits
