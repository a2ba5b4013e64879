"""What is known of a battery beside its voltage and resistance: as its plan states it, else typical of its chemistry.

Tables: data `batteries/`, each row with its source; most are ranges, and a range stays one here.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise

from farvolt import batteries
from farvolt.plan import Battery
from farvolt.tables import read
from farvolt_data import ROOT

STATED = "stated in the plan"

_FIELDS = ("capacity_hours", "peukert", "efficiency", "self_discharge", "min_charge_temperature")
"""Figures that a plan may state, by the same name."""


@dataclass(frozen=True, slots=True)
class Figure:
    """A figure as a range, with where it comes from. Shares are 0..1, a charge rate is 1/h (capacities per hour)."""

    low: float
    high: float
    basis: str
    stated: bool = False

    @property
    def middle(self) -> float:
        """The middle of the range."""
        return (self.low + self.high) / 2


@lru_cache
def _rows() -> dict[tuple[str, str], Figure]:
    found = {}
    for row in read(ROOT / "batteries" / "figures.csv"):
        factor = 0.01 if row["unit"].startswith("%") else 0.001 if row["unit"].startswith("mV") else 1.0
        known = "" if row["status"] != "from memory" else ", from memory"
        basis = f"typical of {row['chemistry']}{known}"
        one = Figure(float(row["low"]) * factor, float(row["high"]) * factor, basis)
        found[row["chemistry"], row["figure"]] = one
    return found


def typical(chemistry: str, name: str) -> Figure:
    """A figure of `figures.csv`, in base units: `capacity_hours`, `peukert`, `efficiency`, `charge_efficiency`,
    `self_discharge` (a month), `charge_rate`, `discharge_rate` (1/h), `absorption_V`, `float_V`, `end_V` (per cell),
    `charge_fall` (V per K and cell), `min_charge_temperature`, `absorption_from` (charge), `tail_current` (1/h)."""
    return _rows()[chemistry, name]


def figure(battery: Battery, name: str) -> Figure | None:
    """The battery's own figure where its plan states it, else typical; None without either."""
    stated = getattr(battery, name) if name in _FIELDS else None
    if stated is not None:
        value = float(stated if isinstance(stated, int | float) else stated.si)
        return Figure(value, value, STATED, stated=True)
    return typical(battery.chemistry, name) if battery.chemistry else None


def least_charge(battery: Battery) -> Figure:
    """State of charge below which a battery is not to be taken; half where nothing says otherwise."""
    if battery.least_charge is not None:
        return Figure(battery.least_charge.si, battery.least_charge.si, STATED, stated=True)
    for row in read(ROOT / "batteries" / "low_charge.csv"):
        if row["chemistry"] == battery.chemistry:
            share = float(row["low_charge_percent"]) / 100
            return Figure(share, share, f"typical of {battery.chemistry}, common practice")
    return Figure(0.5, 0.5, "taken, as no chemistry is stated")


@lru_cache
def _capacity_points() -> dict[str, list[tuple[float, float]]]:
    points: dict[str, list[tuple[float, float]]] = {}
    for row in read(ROOT / "batteries" / "capacity.csv"):
        points.setdefault(row["chemistry"], []).append((float(row["degC"]), float(row["capacity_share"])))
    return {name: sorted(rows) for name, rows in points.items()}


def capacity_share(chemistry: str | None, degC: float) -> float:
    """Capacity at a temperature over that at 25 °C, linear between the table's rows; 1 without a chemistry."""
    return _between(_capacity_points()[chemistry], degC) if chemistry else 1.0


@lru_cache
def _sizing_points() -> list[tuple[float, float]]:
    rows = read(ROOT / "batteries" / "temperature_factor.csv")
    return sorted((float(row["degC"]), float(row["capacity_times"])) for row in rows)


def is_lead(chemistry: str | None) -> bool:
    """Whether it is a lead-acid battery."""
    return chemistry in ("flooded", "agm", "gel")


def sizing_times(chemistry: str | None, degC: float) -> tuple[float, str]:
    """What the required capacity is multiplied with at a temperature, and its basis.

    Lead-acid: IEEE 485 Table 1. Lithium: 1 over its capacity there, never below 1, since no standard counts on a
    warm battery as a larger one.
    """
    if is_lead(chemistry):
        return _between(_sizing_points(), degC), "IEEE 485 Table 1, partly from memory"
    return max(1.0, 1 / capacity_share(chemistry, degC)), "1 / its capacity at that temperature, from memory"


def charging_V(battery: Battery, nominal_V: float, degC: float, name: str = "absorption_V") -> Figure | None:
    """Range of a charging voltage for a whole string at a temperature; None without a chemistry.

    The range at 25 °C is moved by the least and the greatest of the temperature coefficients that makers ask for.
    """
    if battery.chemistry is None:
        return None
    count = batteries.cells(battery.chemistry, battery.nominal.si if battery.nominal else nominal_V)
    per_cell, fall = typical(battery.chemistry, name), typical(battery.chemistry, "charge_fall")
    moved = [-one * (degC - batteries.REFERENCE_DEGC) for one in (fall.low, fall.high)]
    return Figure(count * (per_cell.low + min(moved)), count * (per_cell.high + max(moved)), per_cell.basis)


def _between(points: Sequence[tuple[float, float]], at: float) -> float:
    at = min(max(at, points[0][0]), points[-1][0])
    for (low, low_value), (high, high_value) in pairwise(points):
        if at <= high:
            return low_value + (high_value - low_value) * (at - low) / (high - low)
    return points[-1][1]
