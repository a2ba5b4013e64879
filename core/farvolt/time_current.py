"""Time-current bands: how soon a fuse or breaker opens at a current, from the least to the greatest time.

A band is a list of gates, each at a multiple of the rating, as standards and data sheets print them. Between gates
each limit is interpolated on the logarithms of time and current, in which published curves are nearly straight;
strictly only the gates themselves are promised. Two gates at one multiple make a step (a magnetic trip).
"""

import math
from bisect import bisect_left, bisect_right
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

_SAME = 1e-9
"""Relative difference below which a current stands at a gate: 27 A / 20 A is 1.35."""

Limit = tuple[tuple[float, float], ...]
"""(multiple of the rating, time in s) by rising multiple and falling time."""


@dataclass(frozen=True, slots=True)
class Gate:
    """What is stated at one multiple of the rated current; None where nothing is."""

    times: float
    """Current over rated current."""
    least_s: float | None
    """It does not open before."""
    greatest_s: float | None
    """It has opened by then."""


@dataclass(frozen=True, slots=True)
class Band:
    """The least and the greatest opening time over multiples of the rated current."""

    least: Limit = ()
    greatest: Limit = ()

    def greatest_s(self, times: float) -> float:
        """The time by which it has opened at a multiple of its rating; infinite where it need not open.

        Beyond the last gate it stays the last one's. It never rises with the current.
        """
        after = bisect_right(self.greatest, times * (1 + _SAME), key=_times)
        if after == 0:
            return math.inf
        low, low_s = self.greatest[after - 1]
        if after == len(self.greatest) or times <= low:
            return low_s
        return _between(times, (low, low_s), self.greatest[after])

    def least_s(self, times: float) -> float:
        """The time before which it does not open at a multiple of its rating; 0 where nothing is stated.

        Below its rating it does not open at all. Beyond the last gate the time falls with the square of the current:
        it takes at least the heat of the last gate. It never rises with the current.
        """
        at = bisect_left(self.least, times * (1 - _SAME), key=_times)
        if at == 0:
            first, first_s = self.least[0] if self.least else (math.inf, 0.0)
            return math.inf if times < 1 or (times <= 1 + _SAME and first > 1) else first_s
        low, low_s = self.least[at - 1]
        if at == len(self.least):
            return low_s * (low / times) ** 2
        high, high_s = self.least[at]
        return high_s if times >= high else _between(times, (low, low_s), (high, high_s))

    def greatest_over(self, times: Floats) -> Floats:
        """As `greatest_s`, over many multiples."""
        if not self.greatest:
            return np.full(len(times), math.inf)
        gates = _arrays(self.greatest)
        after = np.searchsorted(gates[0], times * (1 + _SAME), side="right")
        low, high = np.maximum(after - 1, 0), np.minimum(after, len(self.greatest) - 1)
        found = _between_over(times, gates, low, high)
        return np.where(after == 0, math.inf, found)

    def least_over(self, times: Floats) -> Floats:
        """As `least_s`, over many multiples."""
        first, first_s = self.least[0] if self.least else (math.inf, 0.0)
        below = np.where((times < 1) | ((times <= 1 + _SAME) & (first > 1)), math.inf, first_s)
        if not self.least:
            return below
        gates = _arrays(self.least)
        at = np.searchsorted(gates[0], times * (1 - _SAME), side="left")
        low, high = np.maximum(at - 1, 0), np.minimum(at, len(self.least) - 1)
        found = _between_over(times, gates, low, high)
        last, last_s = self.least[-1]
        found = np.where(at == len(self.least), last_s * (last / times) ** 2, found)
        return np.where(at == 0, below, found)

    @property
    def last(self) -> tuple[float, float]:
        """The last gate of the greatest time: (multiple, s); both infinite where there is none."""
        return self.greatest[-1] if self.greatest else (math.inf, math.inf)


UNSTATED = Band()
"""Of a type whose opening times nobody states: it may never open, and may open at once above its rating."""


def band(gates: Sequence[Gate]) -> Band:
    """The band of gates as stated. Raises ValueError with a sentence for gates that contradict each other."""
    problem = contradiction(gates)
    if problem:
        raise ValueError(problem)
    least = tuple((gate.times, gate.least_s) for gate in gates if gate.least_s is not None)
    greatest = tuple((gate.times, gate.greatest_s) for gate in gates if gate.greatest_s is not None)
    return Band(least, greatest)


def contradiction(gates: Sequence[Gate]) -> str:
    """What is wrong with gates as stated, in words; empty where nothing is."""
    times, least, greatest = 0.0, math.inf, math.inf
    for gate in gates:
        at = f"at {gate.times:g} times the rating"
        if gate.times < times:
            return f"{at} comes after {times:g}: the multiples must rise"
        if gate.least_s is not None and gate.least_s > least:
            return f"{at} it holds longer than at a smaller current"
        if gate.greatest_s is not None and gate.greatest_s > greatest:
            return f"{at} it takes longer than at a smaller current"
        times = gate.times
        least = least if gate.least_s is None else gate.least_s
        greatest = greatest if gate.greatest_s is None else gate.greatest_s
        if gate.least_s is not None and gate.least_s > greatest:
            return f"{at} the least time is above the greatest"
    return ""


def _times(gate: tuple[float, float]) -> float:
    return gate[0]


def _between(times: float, low: tuple[float, float], high: tuple[float, float]) -> float:
    """On the straight line between two gates on logarithms; 0 where no least time is stated at the further one."""
    if high[1] == 0:
        return 0.0
    share = math.log(times / low[0]) / math.log(high[0] / low[0])
    found = math.exp((1 - share) * math.log(low[1]) + share * math.log(high[1]))
    return min(low[1], max(high[1], found))


@lru_cache(maxsize=200)
def _arrays(limit: Limit) -> tuple[Floats, Floats, Floats, Floats]:
    """Multiples and times of gates, and the logarithms of both."""
    times, seconds = np.array(limit).T.copy()
    with np.errstate(divide="ignore"):
        return times, seconds, np.log(times), np.log(seconds)


def _between_over(times: Floats, gates: tuple[Floats, Floats, Floats, Floats], low: Ints, high: Ints) -> Floats:
    """As `_between`, between gates by their places; a multiple that stands at a gate has the time of that gate."""
    at, seconds, log_at, log_s = gates
    low_s, high_s, low_at, low_log = seconds[low], seconds[high], at[low], log_at[low]
    with np.errstate(divide="ignore", invalid="ignore"):
        share = (np.log(times) - low_log) / (log_at[high] - low_log)
        found = np.exp((1 - share) * log_s[low] + share * log_s[high])
    found = np.minimum(low_s, np.maximum(high_s, found))
    found = np.where(times <= low_at, low_s, found)
    found = np.where(times >= at[high], high_s, found)
    within: Floats = np.where((high_s == 0) & (times > low_at), 0.0, found)
    return within
