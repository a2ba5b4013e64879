"""Conductors: sizes in three systems, their resistance at any temperature, and the metal they hold.

Metric sizes take the maximum resistances of IEC 60228; American wire gauge is computed from the geometry of
ASTM B258 and the lay of the strand; SAE gauges have smaller areas of their own (SAE J1127, J1128).
"""

import difflib
import math
import re
from dataclasses import dataclass
from functools import lru_cache

from farvolt.errors import DataError, SizeError
from farvolt.tables import read
from farvolt_data import ROOT

MATERIALS = ("copper", "tinned copper", "aluminium", "copper-clad aluminium")
STRANDS = ("flexible", "stranded", "solid")
SYSTEMS = ("metric", "AWG", "SAE")

_FOLDER = ROOT / "conductors"
_ACCEPTED = 'a size with its system, such as "6 mm2", "10 AWG", "2/0 AWG" or "10 SAE"'
_MM2_PER_CIRCULAR_MIL = math.pi / 4 * 0.0254**2  # a circle one thousandth of an inch across
_ZEROS = {"0": "1/0", "00": "2/0", "000": "3/0", "0000": "4/0"}
_UNITS = {"mm2": "mm2", "mm²": "mm2", "sqmm": "mm2", "mm^2": "mm2", "qmm": "mm2"}
_UNITS |= {"awg": "AWG", "sae": "SAE", "kcmil": "kcmil", "mcm": "kcmil"}


@dataclass(frozen=True, slots=True)
class Size:
    """A conductor size: its system, its one name ("6 mm2", "10 AWG", "10 SAE") and its metal area."""

    system: str
    name: str
    area_mm2: float

    def __str__(self) -> str:
        return self.name


@dataclass(frozen=True, slots=True)
class TableValue:
    """A figure and its source; provisional when it is from memory or stands in for a missing one."""

    value: float
    source: str
    provisional: bool
    note: str = ""


@dataclass(frozen=True, slots=True)
class _Material:
    resistivity_ohm_mm2_per_m: float
    coefficient: TableValue
    density_kg_per_m3: float
    source: str
    provisional: bool


@lru_cache(maxsize=4096)
def parse_size(text: str) -> Size:
    """Read a conductor size; case, spaces and the spelling of mm² do not matter. Raises SizeError."""
    cleaned = " ".join(text.split()).lower().replace(" / ", "/").replace("/ ", "/").replace(" /", "/")
    cleaned = re.sub(r"^awg ?(\d\S*)$", r"\1 awg", cleaned)
    match = re.fullmatch(r"(\d[\d./]*) ?([a-z^²2 ]*)", cleaned)
    if match is None:
        raise _unreadable(text)
    number, unit = match.groups()
    system = _UNITS.get(unit.replace(" ", ""))
    if system is None:
        raise _without_system(number, unit)
    name = f"{_number_name(number, system)} {system}"
    known = _by_name().get(name)
    if known is None:
        raise _not_made(name, system)
    return known


def made_sizes(system: str) -> tuple[Size, ...]:
    """The commonly made sizes of a system ("metric", "AWG" or "SAE"), by rising area."""
    return _made()[system]


@lru_cache(maxsize=4096)
def resistance_20_ohm_per_m(size: Size, material: str, strand: str) -> TableValue:
    """Resistance of one conductor at 20 °C in ohm per metre.

    Metric: the maximum of IEC 60228 for the strand's class. Others: R = rho20 · lay / area (ASTM B258,
    IEC 60028), tinned copper with the ratio of tinned to plain in NEC chapter 9 Table 8.
    """
    if size.system == "metric":
        return _metric(size, material, strand)
    lay = _strands()[strand]
    metal = _material(material)
    tinned = float(_tinned_factor(size)) if material == "tinned copper" else 1.0
    value = metal.resistivity_ohm_mm2_per_m * float(lay["lay_factor"]) * tinned / size.area_mm2
    source = f"{_row(size)['source']}; resistivity {metal.source}; lay factor {lay['lay_factor']}"
    provisional = metal.provisional or material == "tinned copper"
    return TableValue(value, source, provisional, f"lay: {lay['source']}")


def temperature_coefficient(material: str) -> TableValue:
    """Temperature coefficient of resistance at 20 °C in 1/K (IEC 60028, IEC 60889)."""
    return _material(material).coefficient


@lru_cache(maxsize=65536)
def resistance_ohm_per_m(size: Size, material: str, strand: str, temperature_degC: float) -> float:
    """Resistance of one conductor in ohm per metre at a temperature: R20 · (1 + alpha · (T − 20)).

    Raises ValueError where the formula no longer holds (at and below its zero-resistance temperature).
    """
    factor = 1 + temperature_coefficient(material).value * (temperature_degC - 20)
    if not (math.isfinite(factor) and factor > 0):
        raise ValueError(f"the resistance formula for {material} does not hold at {temperature_degC} degC")
    return resistance_20_ohm_per_m(size, material, strand).value * factor


def mass_kg_per_m(size: Size, material: str) -> float:
    """Mass of the conductor's metal in kg per metre: density · area. Insulation and the lay are left out."""
    return _material(material).density_kg_per_m3 * size.area_mm2 * 1e-6


@lru_cache(maxsize=1024)
def other_system(size: Size) -> Size:
    """The size of the other system nearest by ratio of areas: metric to AWG, AWG and SAE to metric."""
    candidates = list(made_sizes("AWG" if size.system == "metric" else "metric"))
    if size.system == "metric":  # beyond 4/0 AWG the American sizes go on in kcmil
        candidates += [known for known in _by_name().values() if known.name.endswith("kcmil")]
    return min(candidates, key=lambda candidate: abs(math.log(candidate.area_mm2 / size.area_mm2)))


def _metric(size: Size, material: str, strand: str) -> TableValue:
    """IEC 60228 where it has the conductor; else its copper value times the ratio of resistivities."""
    row = _row(size)
    iec_class = _strands()[strand]["iec_60228_class"]
    column = {"copper": "copper", "tinned copper": "tinned", "aluminium": "aluminium"}.get(material)
    text = row.get(f"{strand}_{column}_ohm_per_km_20degC", "")
    source = f"{row['source']}, class {iec_class}"
    if text:
        return TableValue(float(text) / 1000, source, material == "aluminium")
    if material == "tinned copper":
        # Class 1 lists no tinned conductor above 16 mm2; the stranded one's resistance is the higher.
        value = float(row["stranded_tinned_ohm_per_km_20degC"]) / 1000
        note = f"class {iec_class} lists no tinned {size.name}"
        return TableValue(value, f"{row['source']}, class 2", True, note)
    metal = _material(material)
    ratio = metal.resistivity_ohm_mm2_per_m / _material("copper").resistivity_ohm_mm2_per_m
    value = float(row[f"{strand}_copper_ohm_per_km_20degC"]) / 1000 * ratio
    note = f"the standard lists no {strand} {material} of {size.name}"
    return TableValue(value, f"computed: {source}, copper, x {ratio:.4f} ({metal.source})", True, note)


def _tinned_factor(size: Size) -> str:
    return _row(parse_size(size.name.replace("SAE", "AWG")))["tinned_factor"]


def _material(name: str) -> _Material:
    return _materials()[name]


@lru_cache(maxsize=1)
def _materials() -> dict[str, _Material]:
    found: dict[str, _Material] = {}
    for row in read(_FOLDER / "materials.csv"):
        provisional = row["status"] == "from memory"
        alpha = TableValue(float(row["temperature_coefficient_per_K_20degC"]), row["source"], provisional)
        rho, density = float(row["resistivity_ohm_mm2_per_m_20degC"]), float(row["density_kg_per_m3"])
        found[row["material"]] = _Material(rho, alpha, density, row["source"], provisional)
    return found


@lru_cache(maxsize=1)
def _strands() -> dict[str, dict[str, str]]:
    return {row["strand"]: row for row in read(_FOLDER / "strands.csv")}


@lru_cache(maxsize=1)
def _rows() -> dict[str, dict[str, str]]:
    files = ("metric.csv", "awg.csv", "sae.csv")
    return {row["size"]: row for file in files for row in read(_FOLDER / file)}


def _row(size: Size) -> dict[str, str]:
    return _rows()[size.name]


@lru_cache(maxsize=1)
def _by_name() -> dict[str, Size]:
    return {name: _size(name, row) for name, row in _rows().items()}


@lru_cache(maxsize=1)
def _made() -> dict[str, tuple[Size, ...]]:
    rising = sorted(_by_name().values(), key=lambda size: size.area_mm2)
    made = [size for size in rising if _row(size)["made"] == "yes"]
    return {system: tuple(size for size in made if size.system == system) for system in SYSTEMS}


def _size(name: str, row: dict[str, str]) -> Size:
    if "area_mm2" in row:
        return Size("metric", name, float(row["area_mm2"]))
    if "minimum_area_circular_mils" in row:
        return Size("SAE", name, float(row["minimum_area_circular_mils"]) * _MM2_PER_CIRCULAR_MIL)
    if row["gauge_in_formula"]:
        diameter_mm = 0.127 * 92 ** ((36 - int(row["gauge_in_formula"])) / 39)  # ASTM B258
        return Size("AWG", name, math.pi / 4 * diameter_mm**2)
    if row["area_kcmil"]:
        return Size("AWG", name, float(row["area_kcmil"]) * 1000 * _MM2_PER_CIRCULAR_MIL)
    raise DataError(f"awg.csv: {name} has neither a gauge nor an area")


def _number_name(number: str, system: str) -> str:
    """The one spelling of a size's number: "6.0" is "6", "00" is "2/0"."""
    if number in _ZEROS and system in ("AWG", "SAE"):
        return _ZEROS[number]
    return f"{float(number):g}" if re.fullmatch(r"\d+(\.\d*)?", number) else number


def _unreadable(text: str) -> SizeError:
    if not text.strip():
        return SizeError("is empty", accepted=_ACCEPTED)
    if re.search(r"\d,\d", text):
        nearest = f'"{text.strip().replace(",", ".")}"'
        return SizeError("has a decimal comma", accepted=_ACCEPTED, nearest=nearest)
    return SizeError("is not a conductor size", accepted=_ACCEPTED, nearest=_closest(text))


def _without_system(number: str, unit: str) -> SizeError:
    """The message for a number without a system, or with one that says too little or is misspelt."""
    if not unit:
        problem = f'"{number}" alone means different sizes in different systems'
        return SizeError(problem, accepted=_ACCEPTED, nearest=_offers(number, ("mm2", "AWG", "SAE")))
    if unit in ("ga", "gauge"):
        problem = f'"{unit}" may mean AWG or SAE gauge, which differ'
        return SizeError(problem, accepted=_ACCEPTED, nearest=_offers(number, ("AWG", "SAE")))
    close = difflib.get_close_matches(unit, _UNITS, n=1, cutoff=0.5)
    nearest = _offers(number, (_UNITS[close[0]],)) if close else ""
    return SizeError(f'"{unit}" is not a system of conductor sizes', accepted=_ACCEPTED, nearest=nearest)


def _offers(number: str, systems: tuple[str, ...]) -> str:
    names = [f"{_number_name(number, system)} {system}" for system in systems]
    return " or ".join(f'"{name}"' for name in names if name in _by_name())


def _not_made(name: str, system: str) -> SizeError:
    sizes = [known for known in _by_name() if known.endswith(f" {system}")]
    accepted = f"{', '.join(size.split()[0] for size in sizes)} {system}"
    return SizeError(f"no table knows {name}", accepted=accepted, nearest=_nearest_number(name, sizes))


def _nearest_number(name: str, sizes: list[str]) -> str:
    wanted = _gauge_number(name.split()[0])
    if not math.isfinite(wanted):
        return ""
    # Of two equally near, the last in the table: the thicker.
    return f'"{min(reversed(sizes), key=lambda size: abs(_gauge_number(size.split()[0]) - wanted))}"'


def _gauge_number(number: str) -> float:
    """A size's number on one scale: 1/0 continues the gauges below 1 at 0, 2/0 at -1; NaN for no number."""
    try:
        return 1 - float(number.removesuffix("/0")) if number.endswith("/0") else float(number)
    except ValueError:
        return math.nan


def _closest(text: str) -> str:
    found = difflib.get_close_matches(text.strip(), list(_by_name()), n=1, cutoff=0.5)
    return f'"{found[0]}"' if found else ""
