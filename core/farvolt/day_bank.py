"""A battery through the hours: its charge, the voltage that goes with it, and the energy that it holds.

The EMF over a step is the mean of the curve between the charge before and after, so that what a current brings or
takes at the EMF is what the store gains or loses, to the last digit. Charge counts what can be drawn: of a charging
current the battery keeps its charge efficiency.
"""

from bisect import bisect_right
from dataclasses import dataclass, field
from itertools import accumulate

import numpy as np

from farvolt import batteries, battery_figures
from farvolt.network import Floats
from farvolt.plan import Battery

GRID = 100
"""Curves over charge are read at so many steps; the tables' own rows lie on them."""

BACK_ON = 0.05
"""An emptied battery is used again when it holds this share: common practice, from memory."""

EMPTY = 1e-9
"""Charge below which it is empty."""

MONTH_H = 365.25 / 12 * 24


class Curve:
    """A quantity over charge 0..1, straight between its knots."""

    def __init__(self, values: Floats) -> None:
        """From values at equal steps of charge; points on a straight line between others are dropped."""
        bends = np.abs(np.diff(values, 2)) > 1e-9 * np.abs(values).max()
        keep = np.concatenate([[True], bends, [True]])
        self.at = np.linspace(0.0, 1.0, len(values))[keep].tolist()
        self.values = values[keep].tolist()
        pieces = zip(self.at, self.at[1:], self.values, self.values[1:], strict=False)
        self.slopes = [(high - low) / (end - start) for start, end, low, high in pieces]

    def place(self, charge: float) -> int:
        """The piece that a charge lies in; the first and the last go on beyond the ends."""
        return min(max(bisect_right(self.at, charge) - 1, 0), len(self.slopes) - 1)

    def __call__(self, charge: float) -> float:
        """The value at a charge."""
        k = self.place(charge)
        return float(self.values[k] + self.slopes[k] * (charge - self.at[k]))

    def integral(self) -> list[float]:
        """The integral from 0 to each knot."""
        pieces = zip(self.at, self.at[1:], self.values, self.values[1:], strict=False)
        return [0.0, *accumulate((end - start) * (low + high) / 2 for start, end, low, high in pieces)]


@dataclass
class BankUnit:
    """One battery port over days. `charge` is its state, 0..1; `cut` while it is empty and feeds nothing."""

    name: str
    port: int
    """Its source port in the network."""
    capacity_Ah: float
    efficiency: float
    """Share of a charging current that is kept."""
    lost_per_h: float
    """Self-discharge: share of its charge that goes in an hour, at 20 °C."""
    least_degC: float
    """Below this it is not charged."""
    tail_A: float
    """Charging current at which it is taken as full."""
    emf: Curve
    """Rest voltage over charge."""
    ohm: Curve
    """Internal resistance over charge at 25 °C."""
    cold: tuple[float, ...]
    """What cold multiplies the resistance with, over whole degrees from −40 °C."""
    charge: float
    cut: bool = False
    amps: float = 0.0
    """What it delivered last."""
    _to_knots: list[float] = field(init=False)
    _piece: int = 0

    def __post_init__(self) -> None:
        self._to_knots = self.emf.integral()

    def resistance(self, charge: float, degC: float) -> float:
        """Internal resistance."""
        return self.ohm(charge) * self.cold[min(max(round(degC) + 40, 0), len(self.cold) - 1)]

    def stored_Wh(self, charge: float) -> float:
        """Energy at the EMF from empty to a charge."""
        k = self.emf.place(charge)
        over = charge - self.emf.at[k]
        mean = self.emf.values[k] + self.emf.slopes[k] * over / 2
        return float(self.capacity_Ah * (self._to_knots[k] + over * mean))

    def change(self, amps: float, hours: float) -> float:
        """Change of the charge by a current that it delivers (negative: takes)."""
        return -amps * hours / self.capacity_Ah * (1.0 if amps >= 0 else self.efficiency)

    def mean_emf(self, change: float) -> float:
        """Mean EMF between the charge now and that after a change."""
        curve, first, last = self.emf, self.charge, self.charge + change
        k = self._piece_of(first, last)
        if k >= 0:
            return float(curve.values[k] + curve.slopes[k] * (first + change / 2 - curve.at[k]))
        start, end = curve.place(first), curve.place(last)
        total, at, step = 0.0, first, 1 if end > start else -1
        for k in range(start, end, step):
            edge = curve.at[k + 1] if step > 0 else curve.at[k]
            total += (edge - at) * (curve.values[k] + curve.slopes[k] * ((at + edge) / 2 - curve.at[k]))
            at = edge
        total += (last - at) * (curve.values[end] + curve.slopes[end] * ((at + last) / 2 - curve.at[end]))
        return float(total / change)

    def _piece_of(self, first: float, last: float) -> int:
        """The piece of the EMF's curve that holds both charges, or -1. Mostly it is that of the last time asked."""
        at, k = self.emf.at, self._piece
        if at[k] <= first <= at[k + 1] and at[k] <= last <= at[k + 1]:
            return k
        self._piece = k = self.emf.place(first)
        return k if k == self.emf.place(last) else -1

    def fall_ohm(self, amps: float, hours: float) -> float:
        """How fast the mean EMF falls with the current that is delivered, Ω."""
        per_amp = hours / self.capacity_Ah * (1.0 if amps >= 0 else self.efficiency)
        change = -amps * per_amp
        k = self._piece_of(self.charge, self.charge + change)
        if k >= 0:
            return float(self.emf.slopes[k] * per_amp / 2)
        # d/dΔ of the mean over Δ is what its end stands above it, over Δ.
        return (self.emf(self.charge + change) - self.mean_emf(change)) / change * per_amp

    def room_A(self, hours: float) -> float:
        """Greatest mean charging current that it can keep in so many hours."""
        return max(1.0 - self.charge, 0.0) * self.capacity_Ah / (self.efficiency * hours)

    def usual_ohm(self, degC: float, hours: float) -> float:
        """Resistance for matrices that steps share: at half charge, with the fall of the mean EMF over a step."""
        slope = self.emf.slopes[self.emf.place(0.5)]
        return self.resistance(0.5, degC) + max(float(slope), 0.0) * hours / (2 * self.capacity_Ah)

    def part(self, amps: float, volts: float | None, degC: float, hours: float) -> "BankPart":
        """Bring it to the end of a part of a step in which it delivers `amps` at `volts` (None: it rests)."""
        resistance_Wh = unkept_Wh = 0.0
        if volts is not None:
            change = self.change(amps, hours)
            mean, ohm = self.mean_emf(change), self.resistance(self.charge, degC)
            resistance_Wh = amps**2 * ohm * hours
            if amps < 0:
                # At the end of a charge, the charger holds it at more than its own voltage needs.
                over = volts - mean + ohm * amps
                unkept_Wh = -amps * hours * ((1 - self.efficiency) * mean + over)
            self.charge += change
            self.cut = (self.cut and self.charge < BACK_ON) or (amps > 0 and self.charge <= EMPTY)
        self.amps = amps
        before = self.stored_Wh(self.charge)
        self.charge *= float((1 - self.lost_per_h) ** hours)
        gone_Wh = before - self.stored_Wh(self.charge)
        at = self.emf(self.charge) if volts is None else volts
        return BankPart(self.charge, amps, at, resistance_Wh, unkept_Wh, gone_Wh)


@dataclass(frozen=True, slots=True)
class BankPart:
    """One bank over a part of a step: its charge and current, and where its energy went, Wh."""

    charge: float
    """At the end."""
    amps: float
    volts: float
    resistance_Wh: float
    unkept_Wh: float
    """Of what it was charged with, what its charge efficiency does not keep."""
    gone_Wh: float
    """By self-discharge."""


def unit(
    battery: Battery, port: int, nominal_V: float, *, strings: int, degC: float, charge: float, aged: float | None
) -> BankUnit:
    """The unit of a battery's strings at a port. `aged`: capacity when new over that at the end of its life."""
    grid = np.linspace(0.0, 1.0, GRID + 1)
    points = [
        batteries.model(battery, float(one), nominal_V, rises_at_low_charge=True, aged=aged is not None) for one in grid
    ]
    shift = batteries.model(battery, 0.5, nominal_V, degC=degC).emf_V - batteries.model(battery, 0.5, nominal_V).emf_V
    capacity = (battery.capacity.si if battery.capacity else 100.0) * strings / (aged or 1.0)
    chemistry = battery.chemistry
    monthly = _middle(battery, "self_discharge", 0.0)
    return BankUnit(
        name=battery.name, port=port, capacity_Ah=capacity,
        efficiency=_middle(battery, "charge_efficiency", 1.0),
        lost_per_h=1 - (1 - monthly) ** (1 / MONTH_H),
        least_degC=_middle(battery, "min_charge_temperature", -273.0),
        tail_A=_middle(battery, "tail_current", 0.02) * capacity,
        emf=Curve(np.array([one.emf_V for one in points]) + shift),
        ohm=Curve(np.array([one.resistance_ohm for one in points]) / strings),
        cold=tuple(batteries.cold_times(chemistry, float(one)) for one in range(-40, 61)),
        charge=charge,
    )  # fmt: skip


def _middle(battery: Battery, name: str, otherwise: float) -> float:
    found = battery_figures.figure(battery, name)
    return found.middle if found is not None else otherwise
