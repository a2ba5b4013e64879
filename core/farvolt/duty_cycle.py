"""Sizing a battery for a load that changes: the duty-cycle method of IEEE 485, section by section.

A section ends with each period of the duty cycle. Within it, every change of the load counts as a current of its own
that lasts to the end of the section; each is multiplied with the capacity-rate factor K(t), the rated capacity that a
battery must have for each ampere that it is to give for a time t. The section that asks for most decides; what may
come at any moment (the random load) is added to it.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from farvolt.network import Floats
from farvolt.plan import DischargeRate

MOMENT_H = 1 / 60
"""A load that lasts for less than a minute counts as lasting one (IEEE 485)."""

RateFactor = Callable[[Floats], Floats]
"""K over times in hours: rated ampere-hours for each ampere."""


@dataclass(frozen=True, slots=True)
class Period:
    """A part of the duty cycle in which the current does not change."""

    current_A: float
    hours: float


@dataclass(frozen=True, slots=True)
class Sized:
    """The rated capacity that a duty cycle asks for, before temperature, margin and ageing."""

    sections_Ah: tuple[float, ...]
    random_Ah: float

    @property
    def section(self) -> int:
        """Place of the section that asks for most."""
        return max(range(len(self.sections_Ah)), key=self.sections_Ah.__getitem__)

    @property
    def capacity_Ah(self) -> float:
        """That section and the random load."""
        return max(self.sections_Ah, default=0.0) + self.random_Ah


def by_peukert(rated_hours: float, exponent: float) -> RateFactor:
    """K(t) = H (t/H)^(1/k) from Peukert's law; beyond the rated hours K(t) = t: no more than the rated capacity."""

    def factor(hours: Floats) -> Floats:
        within: Floats = rated_hours * (np.minimum(hours, rated_hours) / rated_hours) ** (1 / exponent)
        return np.asarray(np.where(hours > rated_hours, hours, within), dtype=float)

    return factor


def by_table(capacity_Ah: float, rates: Sequence[DischargeRate]) -> RateFactor:
    """K(t) = C / I(t) from a data sheet's constant-current table, linear between its rows in the logarithms.

    Shorter than its first row the current of that row is all there is; longer than its last, the charge of that row.
    """
    rows = sorted((one.hours, one.current.si) for one in rates)
    known_h = np.array([hours for hours, _ in rows])
    known_A = np.array([amps for _, amps in rows])

    def factor(hours: Floats) -> Floats:
        amps = np.exp(np.interp(np.log(hours), np.log(known_h), np.log(known_A)))
        amps = np.where(hours > known_h[-1], known_A[-1] * known_h[-1] / hours, amps)
        return np.asarray(capacity_Ah / amps, dtype=float)

    return factor


def sized(periods: Sequence[Period], factor: RateFactor, random: Period | None = None) -> Sized:
    """The capacity for a duty cycle, in ampere-hours at the rated hours of `factor`."""
    currents = np.array([0.0, *(one.current_A for one in periods)])
    ends = np.cumsum([one.hours for one in periods])
    starts = np.array([0.0, *ends[:-1]])
    changes = np.diff(currents)
    found = []
    for last, end in enumerate(ends):
        lasting = np.maximum(end - starts[: last + 1], MOMENT_H)
        found.append(float(np.sum(changes[: last + 1] * factor(lasting))))
    extra = 0.0
    if random is not None:
        extra = random.current_A * float(factor(np.array([max(random.hours, MOMENT_H)]))[0])
    return Sized(tuple(found), extra)


def joined(minutes_A: Floats) -> tuple[Period, ...]:
    """A course of one value for each minute as periods of unchanging current."""
    cuts = [0, *(np.flatnonzero(np.diff(minutes_A)) + 1).tolist(), len(minutes_A)]
    return tuple(Period(float(minutes_A[start]), (end - start) / 60) for start, end in pairwise(cuts))
