"""Batteries by chemistry: rest voltage against state of charge, internal resistance against temperature and age.

Tables: data `batteries/`, each row with its source. Ranges are taken at their middle and said to be typical.
"""

from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise

from farvolt.plan import Battery
from farvolt.tables import read
from farvolt_data import ROOT

ESTIMATED = "estimated from a table of typical values"

REFERENCE_DEGC = 25.0
"""What a stated internal resistance is meant for."""


@dataclass(frozen=True, slots=True)
class BatteryModel:
    """One string as the network sees it: EMF behind a resistance, and where each figure comes from."""

    emf_V: float
    resistance_ohm: float
    emf_source: str
    resistance_source: str
    times: float = 1.0
    """What cold, age and low charge have multiplied the resistance with."""

    @property
    def resistance_is_estimated(self) -> bool:
        """True when nothing in the plan states the resistance: never a basis for an interrupting rating."""
        return self.resistance_source.startswith(ESTIMATED)


@lru_cache
def _rest_rows() -> dict[str, tuple[float, list[tuple[float, float]]]]:
    table: dict[str, tuple[float, list[tuple[float, float]]]] = {}
    for row in read(ROOT / "batteries" / "rest_voltage.csv"):
        middle = (float(row["low_V_per_cell"]) + float(row["high_V_per_cell"])) / 2
        _, points = table.setdefault(row["chemistry"], (float(row["cell_nominal_V"]), []))
        points.append((float(row["charge_percent"]) / 100, middle))
    return {name: (nominal, sorted(points)) for name, (nominal, points) in table.items()}


@lru_cache
def _resistance_rows() -> dict[str, float]:
    return {
        row["chemistry"]: (float(row["low_mohm_100Ah_12V"]) + float(row["high_mohm_100Ah_12V"])) / 2e3
        for row in read(ROOT / "batteries" / "resistance.csv")
    }


def cells(chemistry: str, nominal_V: float) -> int:
    """Cells in series for a nominal voltage: 12 V lead-acid has 6, LFP has 4 for each 12 V of a system.

    A system's 12, 24, 36 or 48 V are filled with whole 12 V blocks where the chemistry makes one; any other voltage
    is taken as the battery's own, at the nominal voltage of a cell.
    """
    cell_V = _rest_rows()[chemistry][0]
    block = round(12 / cell_V)
    if block * cell_V >= 12 and nominal_V % 12 == 0:
        return int(block * nominal_V // 12)
    return max(1, round(nominal_V / cell_V))


def rest_voltage_V(chemistry: str, charge: float, nominal_V: float) -> float:
    """Rest voltage of a string at a state of charge 0..1, linear between the table's rows."""
    points = _rest_rows()[chemistry][1]
    charge = min(max(charge, points[0][0]), points[-1][0])
    for (low, low_V), (high, high_V) in pairwise(points):
        if charge <= high:
            per_cell = low_V + (high_V - low_V) * (charge - low) / (high - low)
            return per_cell * cells(chemistry, nominal_V)
    return points[-1][1] * cells(chemistry, nominal_V)


def typical_resistance_ohm(chemistry: str, capacity_Ah: float, nominal_V: float) -> float:
    """Typical resistance of one string, from 100 Ah at 12 V scaled with voltage and inversely with capacity."""
    return _resistance_rows()[chemistry] * (nominal_V / 12) * (100 / capacity_Ah)


@lru_cache
def _temperature_rows() -> dict[str, list[tuple[float, float]]]:
    rows: dict[str, list[tuple[float, float]]] = {}
    for row in read(ROOT / "batteries" / "temperature.csv"):
        rows.setdefault(row["chemistry"], []).append((float(row["degC"]), float(row["resistance_times"])))
    return {name: sorted(points) for name, points in rows.items()}


@lru_cache
def _chemistry_rows() -> dict[str, dict[str, float]]:
    words = ("chemistry", "status", "source")
    rows = read(ROOT / "batteries" / "chemistry.csv")
    return {row["chemistry"]: {name: float(row[name]) for name in row if name not in words} for row in rows}


def cold_times(chemistry: str | None, degC: float) -> float:
    """Internal resistance at a temperature over that at 25 °C, never below 1; 1 where the chemistry is not stated."""
    if chemistry is None:
        return 1.0
    points = _temperature_rows()[chemistry]
    degC = min(max(degC, points[0][0]), points[-1][0])
    for (low, low_times), (high, high_times) in pairwise(points):
        if degC <= high:
            share: float = (degC - low) / (high - low)
            return float(low_times ** (1 - share) * high_times**share)
    return points[-1][1]


@lru_cache
def _charge_rows() -> dict[str, list[tuple[float, float]]]:
    rows: dict[str, list[tuple[float, float]]] = {}
    for row in read(ROOT / "batteries" / "resistance_charge.csv"):
        point = (float(row["charge_percent"]) / 100, float(row["resistance_times"]))
        rows.setdefault(row["chemistry"], []).append(point)
    return {name: sorted(points) for name, points in rows.items()}


def low_charge_times(chemistry: str | None, charge: float) -> float:
    """Internal resistance at a state of charge 0..1 over that of a full battery; 1 without a chemistry."""
    if chemistry is None:
        return 1.0
    points = _charge_rows()[chemistry]
    charge = min(max(charge, points[0][0]), points[-1][0])
    for (low, low_times), (high, high_times) in pairwise(points):
        if charge <= high:
            return low_times + (high_times - low_times) * (charge - low) / (high - low)
    return points[-1][1]


def aged_times(battery: Battery) -> float:
    """Internal resistance at the end of its life over that of new: as stated, else typical of the chemistry."""
    if battery.aged_times is not None:
        return battery.aged_times
    return _chemistry_rows()[battery.chemistry]["aged_resistance_times"] if battery.chemistry else AGED_TIMES


AGED_TIMES = 2.0
"""Of a battery that states neither `aged_times` nor a chemistry: the highest of the table."""


def model(
    battery: Battery,
    charge: float,
    nominal_V: float,
    emf_V: float | None = None,
    *,
    degC: float = REFERENCE_DEGC,
    aged: bool = False,
    rises_at_low_charge: bool = False,
) -> BatteryModel:
    """One string of the battery at a state of charge 0..1 and a temperature; `emf_V` overrides its curve.

    A stated resistance is that of a new battery at 25 °C, as in data sheets; a stated EMF is taken as it stands. Cases
    state the charge of a moment and take the resistance as stated; over days, where the charge is worked out, and for
    the least fault current it `rises_at_low_charge`.
    """
    nominal_V = battery.nominal.si if battery.nominal else nominal_V
    stated = emf_V if emf_V is not None else battery.emf.si if battery.emf else None
    if stated is not None:
        emf, emf_source = stated, "stated in the plan"
    else:
        chemistry = battery.chemistry or ""
        emf = rest_voltage_V(chemistry, charge, nominal_V) + _emf_change_V(chemistry, nominal_V, degC)
        emf_source = f"rest voltage of {chemistry} at {charge:.0%} of charge, typical"
    resistance, source = _string_resistance(battery, nominal_V, emf)
    times = cold_times(battery.chemistry, degC) * (aged_times(battery) if aged else 1.0)
    times *= low_charge_times(battery.chemistry, charge) if rises_at_low_charge else 1.0
    return BatteryModel(emf, resistance * times, emf_source, source, times)


def _emf_change_V(chemistry: str, nominal_V: float, degC: float) -> float:
    row = _chemistry_rows()[chemistry]
    return row["emf_mV_per_K_cell"] / 1000 * (degC - row["emf_reference_degC"]) * cells(chemistry, nominal_V)


def _string_resistance(battery: Battery, nominal_V: float, emf_V: float) -> tuple[float, str]:
    if battery.resistance is not None:
        return battery.resistance.si, "stated in the plan"
    if battery.short_circuit is not None:
        return emf_V / battery.short_circuit.si, "EMF over the maker's short-circuit current"
    # The plan's own validation makes sure that chemistry and capacity are there.
    chemistry, capacity = battery.chemistry or "", battery.capacity.si if battery.capacity else 100.0
    return typical_resistance_ohm(chemistry, capacity, nominal_V), f"{ESTIMATED} ({chemistry}, from memory)"
