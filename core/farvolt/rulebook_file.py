"""Reads a rulebook from its TOML file and its CSV tables, and validates all of it."""

import itertools
import math
import tomllib
from collections.abc import Callable
from pathlib import Path
from typing import Literal, TypeVar

from farvolt import tables
from farvolt.conductors import MATERIALS, STRANDS, SYSTEMS, Size, parse_size
from farvolt.errors import DataError, RulebookError, SizeError
from farvolt.fields import Fields
from farvolt.rulebook import (
    FOLDER,
    AmbientCorrection,
    AmpacityTable,
    Basis,
    Bundling,
    Cell,
    Continuous,
    DropBasis,
    DropClass,
    EngineSpace,
    Exempt,
    FaultDamage,
    Interrupting,
    InterruptingStep,
    MinimumSize,
    OverConductor,
    Protection,
    Refused,
    Returns,
    Rulebook,
    SizeExemption,
    SmallConductor,
    SmallConductors,
    StandardRatings,
    Terminals,
    UnprotectedLength,
    shipped,
)

PURPOSES = ("cranking", "bond")
_LIMITS = ("ampacity", "ambient", "engine_space", "bundling", "minimum_size", "refused", "returns", "terminals")
_PROTECTION = ("continuous", "over_conductor", "small_conductors", "unprotected_length", "exempt")
ENTRIES = (*_LIMITS, *_PROTECTION, "standard_ratings", "interrupting", "fault_damage")
"""Entries a rulebook may leave out, and give a reason for under `missing`."""

_SHIPPED_TABLES = FOLDER / "tables"
_HOTTEST_DEGC = 300.0
_MOST_AMPS = 10_000.0
_MOST_FAULT_AMPS = 200_000.0
_T = TypeVar("_T")


def read(path: Path) -> Rulebook:
    """The rulebook in a file, which may replace entries of the shipped one it names under `starts_from`."""
    values = _toml(path)
    start = values.pop("starts_from", None)
    if start is not None:
        if start not in shipped():
            problem = f"starts_from: no shipped rulebook is called {start!r}"
            raise RulebookError(f"{path.name}: {problem}; accepted: {', '.join(shipped())}")
        values = _merged(_toml(FOLDER / f"{start}.toml"), values)
    fields = Fields(values, "", lambda sentence: RulebookError(f"{path.name}: {sentence}"))
    return _rulebook(fields, path)


def _toml(path: Path) -> dict[str, object]:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise RulebookError(f"{path.name}: the rulebook cannot be read ({error.strerror})") from error
    except ValueError as error:  # wrong TOML, wrong UTF-8, or a path that no file system has
        raise RulebookError(f"{path.name}: not a TOML file in UTF-8 ({error})") from error
    except RecursionError as error:
        raise RulebookError(f"{path.name}: tables are nested too deep") from error


def _merged(base: dict[str, object], over: dict[str, object]) -> dict[str, object]:
    """`base` with the entries of `over`: tables merge field by field, all else is replaced."""
    merged = dict(base)
    for key, value in over.items():
        below = merged.get(key)
        if isinstance(below, dict) and isinstance(value, dict):
            # The two ways to give a drop basis exclude each other: the later one counts.
            if key == "drop_basis" and value.keys() & {"temperature_degC", "factor_on_R20"}:
                below = {k: v for k, v in below.items() if k not in ("temperature_degC", "factor_on_R20")}
            merged[key] = _merged(below, value)
        else:
            merged[key] = value
    return merged


def _rulebook(top: Fields, path: Path) -> Rulebook:
    defaults = _required(top, "defaults")
    classes = _classes(top)
    find = _finder(path, top)
    book = Rulebook(
        name=path.stem,
        title=top.text("title"),
        edition=top.text("edition"),
        text=top.text("text", ""),
        default_insulation_degC=defaults.number("insulation_degC", 40, _HOTTEST_DEGC),
        default_strand=defaults.choice("strand", STRANDS),
        default_system=defaults.choice("system", SYSTEMS),
        default_class=defaults.choice("class", tuple(classes)),
        drop_basis=_drop_basis(_required(top, "drop_basis")),
        classes=classes,
        ampacity_tables=tuple(_ampacity(fields, find) for fields in top.tables("ampacity")),
        ambient=_optional(top, "ambient", lambda fields: _ambient(fields, find)),
        engine_space=_optional(top, "engine_space", _engine_space),
        bundling=_optional(top, "bundling", _bundling),
        minimum_size=_optional(top, "minimum_size", _minimum_size),
        protection=_protection(top.table("protection") or Fields({}, "protection", top.fault)),
        refused=_optional(top, "refused", _refused),
        returns=_optional(top, "returns", _returns),
        terminals=_optional(top, "terminals", _terminals),
        missing=_missing(top),
    )
    defaults.done()
    top.done()
    return book


def _missing(top: Fields) -> dict[str, str]:
    fields = top.table("missing")
    if fields is None:
        return {}
    found = {key: fields.text(key) for key in ENTRIES if key in fields}
    fields.know(ENTRIES)
    fields.done()
    return found


def _required(top: Fields, key: str) -> Fields:
    fields = top.table(key)
    if fields is None:
        raise top.fail(key, "the table is missing")
    return fields


def _optional(top: Fields, key: str, make: Callable[[Fields], _T]) -> _T | None:
    fields = top.table(key)
    if fields is None:
        return None
    made = make(fields)
    fields.done()
    return made


def _basis(fields: Fields) -> Basis:
    return Basis(fields.text("basis"), fields.flag("provisional", False))


def _size(fields: Fields, key: str, text: str) -> Size:
    try:
        return parse_size(text)
    except SizeError as error:
        hint = f"; did you mean {error.nearest}?" if error.nearest else ""
        raise fields.fail(key, f'"{text}": {error.problem}; accepted: {error.accepted}{hint}') from error


def _drop_basis(fields: Fields) -> DropBasis:
    temperature = fields.number_or_none("temperature_degC", -50, _HOTTEST_DEGC)
    factor = fields.number_or_none("factor_on_R20", 0.5, 3)
    if (temperature is None) == (factor is None):
        raise fields.fail("temperature_degC", "give either temperature_degC or factor_on_R20")
    made = DropBasis(temperature, factor, fields.text("note", ""), _basis(fields))
    fields.done()
    return made


def _classes(top: Fields) -> dict[str, DropClass]:
    tables = _required(top, "classes").named_tables()
    if not tables:
        raise top.fail("classes", "holds no class")
    return {name: _drop_class(name, fields) for name, fields in tables.items()}


def _drop_class(name: str, fields: Fields) -> DropClass:
    made = DropClass(
        name=name,
        applies_to=fields.text("applies_to"),
        limit_percent=fields.number("limit_percent", 0.1, 50),
        branch_limit_percent=fields.number_or_none("branch_limit_percent", 0.1, 50),
        severity=fields.choice("severity", ("fail", "warn")),
        basis=_basis(fields),
    )
    fields.done()
    return made


Find = Callable[[Fields, str], list[dict[str, str]]]
"""Reads the CSV table that a field names."""


def _finder(path: Path, top: Fields) -> Find:
    """Tables are looked for beside the rulebook, then among the shipped ones."""

    def find(fields: Fields, key: str) -> list[dict[str, str]]:
        name = fields.text(key)
        if Path(name).name != name:
            raise fields.fail(key, "must be the name of a CSV file beside the rulebook, without a folder")
        place = next((f / name for f in (path.parent, _SHIPPED_TABLES) if (f / name).is_file()), None)
        if place is None:
            raise fields.fail(key, "no such file beside the rulebook or among the shipped tables")
        try:
            return tables.read(place)
        except (DataError, OSError, ValueError) as error:
            raise fields.fail(key, f"the table cannot be read: {error}") from error

    return find


def _value(fields: Fields, row: dict[str, str], column: str, low: float, high: float) -> float:
    text = row.get(column)
    if text is None:
        raise fields.fail("file", f"the table has no column {column}")
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not low <= value <= high:
        raise fields.fail("file", f'column {column}: "{text}" is not a number from {low:g} to {high:g}')
    return value


def _cell(fields: Fields, row: dict[str, str], column: str, high: float) -> Cell:
    value = _value(fields, row, column, 0, high)
    source = row.get("source", "").strip()
    if not source:
        raise fields.fail("file", "every row of the table needs its source")
    return Cell(value, source, row.get("status") == "from memory")


def _ampacity(fields: Fields, find: Find) -> AmpacityTable:
    cells: dict[Size, dict[float, Cell]] = {}
    for row in find(fields, "file"):
        size = _size(fields, "file", row.get("size", ""))
        insulation = _value(fields, row, "insulation_degC", 40, _HOTTEST_DEGC)
        if insulation in cells.setdefault(size, {}):
            raise fields.fail("file", f"{size.name} at {insulation:g} degC insulation is listed twice")
        cells[size][insulation] = _cell(fields, row, "ampacity_A", _MOST_AMPS)
    insulations = sorted({insulation for row in cells.values() for insulation in row})
    rows = sorted(cells.items(), key=lambda item: item[0].area_mm2)
    materials = fields.choices("materials", MATERIALS)
    made = AmpacityTable(materials, tuple(insulations), tuple(rows), _basis(fields))
    fields.done()
    return made


def _ambient(fields: Fields, find: Find) -> AmbientCorrection:
    factors: dict[float, list[tuple[float, Cell]]] = {}
    for row in find(fields, "file") if "file" in fields else []:
        insulation = _value(fields, row, "insulation_degC", 40, _HOTTEST_DEGC)
        highest = _value(fields, row, "ambient_up_to_degC", -50, _HOTTEST_DEGC)
        factors.setdefault(insulation, []).append((highest, _cell(fields, row, "factor", 2)))
    fields.know(("file",))
    rising = {key: tuple(sorted(steps, key=lambda step: step[0])) for key, steps in factors.items()}
    return AmbientCorrection(fields.number("reference_degC", 0, 60), rising, _basis(fields))


def _engine_space(fields: Fields) -> EngineSpace:
    basis = _basis(fields)
    factors: dict[float, Cell] = {}
    for entry in fields.tables("factors"):
        factor = entry.number("factor", 0, 1)
        provisional = entry.flag("provisional", basis.provisional)
        factors[entry.number("insulation_degC", 40, _HOTTEST_DEGC)] = Cell(factor, basis.text, provisional)
        entry.done()
    return EngineSpace(fields.number("ambient_degC", 30, 100), factors, basis)


def _bundling(fields: Fields) -> Bundling:
    basis = _basis(fields)
    steps: list[tuple[float, Cell]] = []
    for entry in fields.tables("steps"):
        provisional = entry.flag("provisional", basis.provisional)
        cell = Cell(entry.number("factor", 0.05, 1), basis.text, provisional)
        steps.append((entry.number("up_to", 1, math.inf), cell))
        entry.done()
    if not steps or any(low[0] >= high[0] for low, high in itertools.pairwise(steps)):
        raise fields.fail("steps", "must be a list of { up_to, factor } with rising up_to")
    return Bundling(fields.choice("counts", ("conductors", "circuits")), tuple(steps), basis)


def _minimum_size(fields: Fields) -> MinimumSize:
    sizes = {}
    for key, default in (("separate", None), ("in_sheath", None), ("aluminium", ())):
        sizes[key] = tuple(_size(fields, key, text) for text in fields.texts(key, default))
        if not sizes[key] and default is None:
            raise fields.fail(key, "must hold at least one size")
    outside = fields.number_or_none("outside_sheath_m", 0, 10)
    exempt = tuple(_size_exemption(entry) for entry in fields.tables("exempt"))
    return MinimumSize(sizes["separate"], sizes["in_sheath"], sizes["aluminium"], outside, exempt, _basis(fields))


def _size_exemption(entry: Fields) -> SizeExemption:
    length, amps = entry.number_or_none("up_to_m", 0, 100), entry.number_or_none("up_to_A", 0, _MOST_AMPS)
    made = SizeExemption(entry.text("text"), length, amps, entry.text("used_for", ""), _basis(entry))
    if length is None and amps is None and not made.used_for:
        raise entry.fail("up_to_m", "give up_to_m, up_to_A or used_for")
    entry.done()
    return made


def _protection(fields: Fields) -> Protection:
    made = Protection(
        continuous=_optional(fields, "continuous", lambda f: Continuous(f.number("factor", 1, 2), _basis(f))),
        over_conductor=_optional(fields, "over_conductor", _over_conductor),
        small_conductors=_optional(fields, "small_conductors", _small_conductors),
        unprotected_length=_optional(fields, "unprotected_length", _unprotected_length),
        exempt=_optional(fields, "exempt", _exempt),
        standard_ratings=_optional(fields, "standard_ratings", _standard_ratings),
        interrupting=_optional(fields, "interrupting", _interrupting),
        fault_damage=_optional(fields, "fault_damage", _fault_damage),
    )
    fields.done()
    return made


def _over_conductor(fields: Fields) -> OverConductor:
    return OverConductor(
        percent=fields.number("percent", 10, 300),
        allowance_percent=fields.number_or_none("allowance_percent", 10, 300),
        next_standard_up_to_A=fields.number_or_none("next_standard_up_to_A", 0, _MOST_AMPS),
        text=fields.text("text", ""),
        basis=_basis(fields),
    )


def _small_conductors(fields: Fields) -> SmallConductors:
    entries: list[SmallConductor] = []
    for entry in fields.tables("sizes"):
        size = _size(entry, "size", entry.text("size"))
        materials = entry.choices("materials", MATERIALS, ("copper", "tinned copper"))
        entries.append(SmallConductor(size, materials, entry.number("max_A", 0.1, _MOST_AMPS)))
        entry.done()
    none_from = _size(fields, "none_from", fields.text("none_from"))
    return SmallConductors(tuple(entries), none_from, _basis(fields))


def _unprotected_length(fields: Fields) -> UnprotectedLength:
    return UnprotectedLength(
        plain_m=fields.number_or_none("plain_m", 0, math.inf),
        sheathed_m=fields.number_or_none("sheathed_m", 0, math.inf),
        sheathed_at_battery_m=fields.number_or_none("sheathed_at_battery_m", 0, math.inf),
        text=fields.text("text", ""),
        basis=_basis(fields),
    )


def _exempt(fields: Fields) -> Exempt:
    return Exempt(fields.choices("purposes", PURPOSES), fields.text("text", ""), _basis(fields))


def _standard_ratings(fields: Fields) -> StandardRatings:
    return StandardRatings(fields.numbers("amps", 0.1, _MOST_AMPS), _basis(fields))


def _interrupting(fields: Fields) -> Interrupting:
    steps: list[InterruptingStep] = []
    for entry in fields.tables("steps"):
        volts, cca = entry.number("up_to_V", 1, 1000), entry.number("up_to_cca", 1, math.inf)
        main, branch = (entry.number(key, 1, _MOST_FAULT_AMPS) for key in ("main_A", "branch_A"))
        steps.append(InterruptingStep(volts, cca, main, branch))
        entry.done()
    if not steps or any((a.up_to_V, a.up_to_cca) >= (b.up_to_V, b.up_to_cca) for a, b in itertools.pairwise(steps)):
        raise fields.fail("steps", "must be a list of { up_to_V, up_to_cca, main_A, branch_A }, rising")
    return Interrupting(tuple(steps), fields.number("cca_per_Ah", 0.1, 100), fields.text("text", ""), _basis(fields))


def _fault_damage(fields: Fields) -> FaultDamage:
    severity: Literal["fail", "warn"] = "fail" if fields.choice("severity", ("fail", "warn")) == "fail" else "warn"
    return FaultDamage(severity, _basis(fields))


def _refused(fields: Fields) -> Refused:
    materials, strands = fields.choices("materials", MATERIALS, ()), fields.choices("strands", STRANDS, ())
    return Refused(materials, strands, _basis(fields))


def _returns(fields: Fields) -> Returns:
    return Returns(fields.choices("forbidden", ("chassis",)), _basis(fields))


def _terminals(fields: Fields) -> Terminals:
    unmarked = fields.number("unmarked_degC", 40, _HOTTEST_DEGC)
    up_to = _size(fields, "unmarked_up_to", fields.text("unmarked_up_to"))
    return Terminals(unmarked, up_to, fields.number("marked_degC", unmarked, _HOTTEST_DEGC), _basis(fields))
