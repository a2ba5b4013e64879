"""Fresh air for lead-acid batteries, which give off hydrogen when charged (IEC 62485-2, formerly EN 50272-2).

Q = 0.05 · n · I_gas · C_rt · 10^-3 m³/h keeps the air below 4 % of hydrogen by a factor of five; A = 28 · Q cm² is the
free area of each of two openings, low and high, where the air moves by itself.
"""

from dataclasses import dataclass
from typing import Literal

from farvolt.tables import read
from farvolt.units import number
from farvolt_data import ROOT

BASIS = "IEC 62485-2, clause 7 (from memory, provisional)"

Charging = Literal["float", "boost"]


@dataclass(frozen=True, slots=True)
class Ventilation:
    """The air that a bank needs while it is charged."""

    charging: Charging
    air_m3_h: float
    opening_cm2: float
    working: tuple[str, ...]


def ventilation(chemistry: str, cells: int, capacity_Ah: float, charging: Charging) -> Ventilation | None:
    """Of a bank with so many cells in series and this capacity in all; None for lithium, which gives off no gas."""
    kind = {"flooded": "vented", "agm": "sealed", "gel": "sealed"}.get(chemistry)
    if kind is None:
        return None
    rows = read(ROOT / "batteries" / "gas.csv")
    gas = next(float(row["gas_mA_per_Ah"]) for row in rows if (row["type"], row["charging"]) == (kind, charging))
    air = 0.05 * cells * gas * capacity_Ah * 1e-3
    opening = 28 * air
    return Ventilation(charging, air, opening, (
        f"Q = 0.05 x {cells} cells x {number(gas)} mA/Ah ({kind}, {charging}) x {number(capacity_Ah, 4)} Ah x 0.001 = "
        f"{number(air)} m3/h",
        f"A = 28 x {number(air)} = {number(opening)} cm2 for each of two openings, one low and one high",
    ))  # fmt: skip
