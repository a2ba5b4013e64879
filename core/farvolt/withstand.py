"""What a conductor withstands in a short circuit: the heat that takes it to the limit of its insulation.

Adiabatic, as IEC 60364-4-43 434.5.2 and IEC 60364-5-54 Annex A have it: over a few seconds no heat leaves the
conductor, so that I²·t = k²·S². The constants of the metals and the insulations' temperatures are data.
"""

import math
from dataclasses import dataclass
from functools import lru_cache

from farvolt.tables import read
from farvolt.units import number
from farvolt_data import ROOT

LONGEST_S = 5.0
"""Up to so many seconds no heat is taken to leave the conductor (IEC 60364-4-43 434.5.2)."""

SOURCE = "IEC 60364-4-43 434.5.2"
_FOLDER = ROOT / "conductors"


@dataclass(frozen=True, slots=True)
class Withstand:
    """What one conductor withstands, and how that was found."""

    k: float
    """A·√s/mm²."""
    area_mm2: float
    joule_A2s: float
    """k²·S²: the I2t that takes it from its insulation's rating to the limit."""
    initial_degC: float
    final_degC: float
    working: tuple[str, ...]
    basis: str
    provisional: bool

    def reaches_limit_s(self, current_A: float) -> float:
        """The time in s at which a steady current takes it to its limit; infinite without current.

        Claimed up to `LONGEST_S`; later some heat has left, and the limit is reached later still.
        """
        return math.inf if current_A == 0 else self.joule_A2s / current_A**2

    def points(self, longest_s: float = LONGEST_S, shortest_s: float = 0.001) -> list[tuple[float, float]]:
        """The damage curve for a drawing: (ampere, s) at its two ends; straight between them on logarithms."""
        return [(math.sqrt(self.joule_A2s / time_s), time_s) for time_s in (longest_s, shortest_s)]


@dataclass(frozen=True, slots=True)
class Limit:
    """The highest temperature that an insulation stands at the end of a short circuit."""

    up_to_degC: float
    """Rating of the insulation, up to which the row holds."""
    insulation: str
    final_degC: float
    final_degC_above_300mm2: float
    source: str
    provisional: bool


@dataclass(frozen=True, slots=True)
class _Metal:
    heat_J_per_K_mm3: float
    beta_degC: float
    resistivity_ohm_mm: float
    source: str
    provisional: bool


def k_factor(material: str, initial_degC: float, final_degC: float) -> float:
    """k in A·√s/mm² between two temperatures of a conductor (IEC 60364-5-54 Annex A).

    k = √(Qc·(β + 20)/ρ20 · ln((β + final)/(β + initial))). Zero where the conductor starts at its limit or above.
    """
    metal = _metals()[material]
    if final_degC <= initial_degC:
        return 0.0
    ratio = (metal.beta_degC + final_degC) / (metal.beta_degC + initial_degC)
    return math.sqrt(metal.heat_J_per_K_mm3 * (metal.beta_degC + 20) / metal.resistivity_ohm_mm * math.log(ratio))


def limit(insulation_degC: float) -> Limit:
    """The short-circuit limit of an insulation known by its rating; that of the highest row above all rows."""
    rows = _limits()
    return next((row for row in rows if insulation_degC <= row.up_to_degC), rows[-1])


@lru_cache(maxsize=1000)
def withstand(material: str, area_mm2: float, insulation_degC: float, parallel: int = 1) -> Withstand:
    """What the conductors of a run withstand: `area_mm2` is that of one of `parallel` equal ones.

    The conductor starts at its insulation's rating: as warm as its ampacity lets it be. Parallel conductors share a
    fault behind their far end only: before it, one alone carries most, so that 1 is to be asked for there.
    """
    metal, found = _metals()[material], limit(insulation_degC)
    final = found.final_degC if area_mm2 <= 300 else found.final_degC_above_300mm2
    k, area = k_factor(material, insulation_degC, final), area_mm2 * parallel
    size = f"{number(area_mm2)} mm2" if parallel == 1 else f"{parallel} x {number(area_mm2)} mm2"
    working = (
        f"k = {number(k, 5)} for {material} from {number(insulation_degC)} to {number(final)} degC: {found.insulation}",
        f"k² S² = ({number(k, 5)} x {size})² = {number((k * area) ** 2, 4)} A2s",
    )
    provisional = metal.provisional or found.provisional
    basis = f"{SOURCE}; {found.source}" + (" (provisional)" if provisional else "")
    return Withstand(k, area, (k * area) ** 2, insulation_degC, final, working, basis, provisional)


@lru_cache(maxsize=1)
def _metals() -> dict[str, _Metal]:
    return {
        row["material"]: _Metal(
            float(row["heat_J_per_K_mm3"]),
            float(row["beta_degC"]),
            float(row["resistivity_ohm_mm"]),
            row["source"],
            row["status"] == "from memory",
        )
        for row in read(_FOLDER / "short_circuit_metals.csv")
    }


@lru_cache(maxsize=1)
def _limits() -> tuple[Limit, ...]:
    return tuple(
        Limit(
            float(row["up_to_degC"]), row["insulation"], float(row["final_degC"]),
            float(row["final_degC_above_300mm2"]), row["source"], row["status"] == "from memory",
        )
        for row in read(_FOLDER / "short_circuit_limits.csv")
    )  # fmt: skip
