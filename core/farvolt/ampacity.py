"""Ampacity: the current a conductor may carry where it lies, with every factor shown.

The figure of the rulebook's table is corrected for ambient or engine space and for conductors laid together.
Engine space is not counted twice: where the rulebook has a factor for it, that factor stands for its ambient
(50 °C), and only what the zone is hotter than that is corrected on top.
"""

import math
from dataclasses import dataclass, field
from functools import lru_cache

from farvolt.conductors import Size, resistance_ohm_per_m
from farvolt.rulebook import AmbientCorrection, AmpacityTable, Basis, Bundling, Cell, EngineSpace, Rulebook
from farvolt.units import number


@dataclass(frozen=True, slots=True)
class Ampacity:
    """Current in ampere that a conductor may carry; None where an entry is missing, which `missing` names."""

    amps: float | None
    working: tuple[str, ...]
    basis: str
    provisional: bool
    missing: str
    table_amps: float | None = None
    """The table's figure for one conductor."""
    table_size: Size | None = None
    """The size that figure stands under; another than asked for where the table lacks that one."""
    column_degC: float | None = None
    """The insulation rating the figure stands under."""
    engine_factor: float = 1.0
    ambient_factor: float = 1.0
    bundle_factor: float = 1.0
    parallel: int = 1


class _MissingError(Exception):
    """An entry that the rulebook lacks."""


@dataclass(slots=True)
class _Steps:
    """What has been worked out so far under one rulebook."""

    book: str
    working: list[str] = field(default_factory=list)
    bases: list[str] = field(default_factory=list)
    provisional: bool = False

    @property
    def basis(self) -> str:
        """All sources used, marked where any of their figures is from memory."""
        return "; ".join(self.bases) + (" (provisional)" if self.provisional else "")

    def say(self, line: str) -> None:
        self.working.append(line)

    def take(self, line: str, basis: str, provisional: bool) -> None:
        """A line of working with its source; the source counts once for the whole."""
        self.working.append(f"{line} ({basis}{', provisional' if provisional else ''})")
        self.provisional |= provisional
        if basis not in self.bases:
            self.bases.append(basis)

    def lack(self, what: str) -> _MissingError:
        return _MissingError(f"{self.book} {what}")


@lru_cache(maxsize=65536)
def ampacity(
    rulebook: Rulebook,
    *,
    size: Size,
    material: str,
    insulation_degC: float,
    ambient_degC: float,
    engine_space: bool,
    conductors: int,
    parallel: int = 1,
) -> Ampacity:
    """The current in ampere allowed for `parallel` equal conductors of one pole under a rulebook.

    `conductors` counts every current-carrying conductor laid together, return and parallel ones included.
    """
    steps = _Steps(rulebook.name)
    try:
        listed, column, cell = _table_figure(steps, rulebook.ampacity_tables, size, material, insulation_degC)
        space = rulebook.engine_space if engine_space else None
        if engine_space and space is None:
            steps.say(f"{rulebook.name} has no engine-space factor: the zone's ambient counts")
        engine, ambient = _surroundings(steps, rulebook.ambient, space, column, ambient_degC)
        bundle = _bundle(steps, rulebook.bundling, max(conductors, parallel))
    except _MissingError as missing:
        steps.say(str(missing))
        return Ampacity(None, tuple(steps.working), steps.basis, steps.provisional, str(missing))
    amps = cell.value * engine * ambient * bundle * parallel
    steps.say(_product(cell.value, (engine, ambient, bundle), parallel, amps))
    return Ampacity(
        amps, tuple(steps.working), steps.basis, steps.provisional, "",
        cell.value, listed, column, engine, ambient, bundle, parallel,
    )  # fmt: skip


def conductor_temperature_degC(
    current_A: float, ampacity_A: float, ambient_degC: float, insulation_degC: float
) -> float:
    """Conductor temperature in °C: Ta + (Tc − Ta) · (I / Iz)², the rise going with the square of the current.

    `ampacity_A` is that at the same ambient: with it the conductor reaches its insulation's rating. A loaded
    conductor without any ampacity gives infinity.
    """
    if current_A == 0:
        return ambient_degC
    if ampacity_A <= 0:
        return math.inf
    return ambient_degC + (insulation_degC - ambient_degC) * (current_A / ampacity_A) ** 2


def at_current(
    found: Ampacity, current_A: float, ambient_degC: float, size: Size, material: str, strand: str
) -> str:  # fmt: skip
    """What a conductor reaches at a current, and its resistance then, as a line of working; empty with no ampacity.

    `current_A` is that of all conductors in parallel, as is the ampacity; the resistance is that of one of them.
    """
    if not found.amps or found.column_degC is None:
        return ""
    degC = conductor_temperature_degC(current_A, found.amps, ambient_degC, found.column_degC)
    mohm = 1000 * resistance_ohm_per_m(size, material, strand, degC)
    ambient, rated = number(ambient_degC), number(found.column_degC)
    rise = f"({rated} - {ambient}) x ({number(current_A, 4)} / {number(found.amps, 4)})^2"
    one = " each" if found.parallel > 1 else ""
    return (
        f"At {number(current_A, 4)} A the conductor reaches about {ambient} + {rise} = {number(degC)} degC, "
        f"{number(mohm)} mohm/m{one}"
    )


def _table_figure(
    steps: _Steps, tables: tuple[AmpacityTable, ...], size: Size, material: str, insulation_degC: float
) -> tuple[Size, float, Cell]:
    """Size and insulation rating as listed, and the figure in ampere."""
    fitting = [table for table in tables if material in table.materials]
    if not fitting:
        known = sorted({name for table in tables for name in table.materials})
        tells = f"its tables are for {' and '.join(known)}" if known else "it has no ampacity table"
        raise steps.lack(f"gives no ampacity for {material}: {tells}")
    found = [entry for table in fitting if (entry := _entry(table, size, insulation_degC)) is not None]
    if not found:
        raise steps.lack(_not_listed(fitting, size, insulation_degC))
    listed, column, cell = max(found, key=lambda entry: (entry[0] == size, entry[0].area_mm2))
    if listed != size:
        areas = f"{number(listed.area_mm2)} mm2, not above {number(size.area_mm2)} mm2"
        steps.say(f"{size.name} is not listed: the next thinner listed size is {listed.name} ({areas})")
    if column != insulation_degC:
        rating = f"{number(insulation_degC)} degC insulation"
        steps.say(f"{rating} is not listed: the next lower listed rating is {number(column)} degC")
    line = f"{listed.name}, {number(column)} degC insulation: {number(cell.value, 4)} A"
    steps.take(line, cell.source, cell.provisional)
    return listed, column, cell


def _entry(table: AmpacityTable, size: Size, insulation_degC: float) -> tuple[Size, float, Cell] | None:
    """The entry of one table: same size or the next thinner, same insulation rating or the next lower."""
    column = max((rating for rating in table.insulations_degC if rating <= insulation_degC), default=None)
    if column is None:
        return None
    fits = [
        (listed, row[column])
        for listed, row in table.rows
        if column in row and (listed == size or listed.area_mm2 <= size.area_mm2)
    ]
    if not fits:
        return None
    listed, cell = max(fits, key=lambda fit: (fit[0] == size, fit[0].area_mm2))
    return listed, column, Cell(cell.value, cell.source, cell.provisional or table.basis.provisional)


def _not_listed(tables: list[AmpacityTable], size: Size, insulation_degC: float) -> str:
    lowest = min(table.insulations_degC[0] for table in tables)
    if insulation_degC < lowest:
        return f"lists no insulation of {number(insulation_degC)} degC; its lowest is {number(lowest)} degC"
    thinnest = min((table.rows[0][0] for table in tables), key=lambda listed: listed.area_mm2)
    return f"lists no ampacity for {size.name}; its thinnest conductor is {thinnest.name}"


def _surroundings(
    steps: _Steps,
    rule: AmbientCorrection | None,
    space: EngineSpace | None,
    column_degC: float,
    ambient_degC: float,
) -> tuple[float, float]:
    """Factor for engine space, and factor for ambient."""
    if ambient_degC >= column_degC:
        limit = f"at or above the insulation's {number(column_degC)} degC"
        steps.say(f"ambient {number(ambient_degC)} degC is {limit}: x 0")
        return 1.0, 0.0
    if space is None:
        return 1.0, _ambient(steps, rule, column_degC, ambient_degC)
    engine = _engine(steps, space, column_degC)
    if ambient_degC <= space.ambient_degC:
        return engine, 1.0
    basis = Basis("common practice, on top of the engine-space factor", False)
    return engine, _formula(steps, basis, column_degC, ambient_degC, space.ambient_degC)


def _engine(steps: _Steps, space: EngineSpace, column_degC: float) -> float:
    listed = max((rating for rating in space.factors if rating <= column_degC), default=None)
    if listed is None:
        raise steps.lack(f"lists no engine-space factor for {number(column_degC)} degC insulation")
    cell = space.factors[listed]
    where = f"engine space ({number(space.ambient_degC)} degC), {number(listed)} degC insulation"
    steps.take(f"{where}: x {cell.value:.2f}", cell.source, cell.provisional)
    return cell.value


def _ambient(steps: _Steps, rule: AmbientCorrection | None, column_degC: float, ambient_degC: float) -> float:
    if rule is None:
        raise steps.lack("has no rule for ambient temperature")
    if rule.factors:
        return _published(steps, rule, column_degC, ambient_degC)
    if ambient_degC <= rule.reference_degC:
        reference = f"not above {number(rule.reference_degC)} degC"
        steps.say(f"ambient {number(ambient_degC)} degC, {reference}: x 1.00")
        return 1.0
    return _formula(steps, rule.basis, column_degC, ambient_degC, rule.reference_degC)


def _published(steps: _Steps, rule: AmbientCorrection, column_degC: float, ambient_degC: float) -> float:
    """The table's factor for the ambient or the next higher listed one; nothing is guessed in between."""
    ladder = rule.factors.get(column_degC, ())
    step = next((step for step in ladder if step[0] >= ambient_degC), None)
    if step is None:
        where = f"{number(column_degC)} degC insulation at {number(ambient_degC)} degC ambient"
        raise steps.lack(f"lists no ambient factor for {where}")
    highest, cell = step
    line = f"ambient {number(ambient_degC)} degC (listed up to {number(highest)} degC): x {cell.value:.2f}"
    steps.take(line, cell.source, cell.provisional)
    return cell.value


def _formula(steps: _Steps, basis: Basis, column_degC: float, ambient_degC: float, reference_degC: float) -> float:
    """sqrt((Tc − Ta) / (Tc − reference)): heat is shed with the difference, and made with I²."""
    factor = math.sqrt((column_degC - ambient_degC) / (column_degC - reference_degC))
    hot, cool, column = number(ambient_degC), number(reference_degC), number(column_degC)
    line = f"ambient {hot} degC: x sqrt(({column} - {hot}) / ({column} - {cool})) = x {factor:.4f}"
    steps.take(line, basis.text, basis.provisional)
    return factor


def _bundle(steps: _Steps, rule: Bundling | None, conductors: int) -> float:
    if rule is None:
        if conductors <= 2:
            return 1.0
        raise steps.lack(f"has no rule for {conductors} conductors laid together")
    count = conductors if rule.counts == "conductors" else math.ceil(conductors / 2)
    what = f"{conductors} conductor{'s' if conductors != 1 else ''} laid together"
    what += f" ({count} circuit{'s' if count != 1 else ''})" if rule.counts == "circuits" else ""
    cell = next((cell for most, cell in rule.steps if count <= most), None)
    if cell is None:
        raise steps.lack(f"lists no factor for {what}")
    if cell.value == 1:
        steps.say(f"{what}: x 1.00")
    else:
        steps.take(f"{what}: x {cell.value:.2f}", cell.source, cell.provisional)
    return cell.value


def _product(table_amps: float, factors: tuple[float, ...], parallel: int, amps: float) -> str:
    terms = [number(table_amps, 4), *(f"{factor:.4g}" for factor in factors if factor != 1)]
    terms += [f"{parallel} in parallel"] if parallel > 1 else []
    return f"= {' x '.join(terms)} = {number(amps, 4)} A" if len(terms) > 1 else f"= {number(amps, 4)} A"
