"""Rulebooks: the limits a plan is held against, each with the published source it comes from.

A rulebook is a TOML file with its ampacity tables as CSV beside it. Six are shipped; a user's own may start
from one of them and replace any entry. What a rulebook does not give stays None, so that a check can say it
cannot be made. Reading and validating is done by `rulebook_file`.
"""

import difflib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import Literal

from farvolt.conductors import Size
from farvolt.errors import RulebookError
from farvolt_data import ROOT

FOLDER = ROOT / "rulebooks"
"""Where the shipped rulebooks are."""


@dataclass(frozen=True, slots=True)
class Basis:
    """Where a limit comes from: standard and clause, or "common practice"; provisional when from memory."""

    text: str
    provisional: bool

    def __str__(self) -> str:
        return f"{self.text} (provisional)" if self.provisional else self.text


@dataclass(frozen=True, slots=True)
class DropBasis:
    """The resistance that drop limits are meant for: at a temperature, or a factor on that at 20 °C."""

    temperature_degC: float | None
    factor_on_R20: float | None
    note: str
    basis: Basis


@dataclass(frozen=True, slots=True)
class DropClass:
    """A class of loads with the voltage drop allowed from the source to the load, in percent of nominal."""

    name: str
    applies_to: str
    limit_percent: float
    branch_limit_percent: float | None
    """Limit of the branch circuit alone, where the rulebook has one."""
    severity: str
    """"fail" or "warn": what exceeding the limit means."""
    basis: Basis


@dataclass(frozen=True, slots=True)
class Cell:
    """One figure of a table: amperes or a factor, with its source."""

    value: float
    source: str
    provisional: bool


@dataclass(frozen=True, slots=True, eq=False)
class AmpacityTable:
    """Allowable currents in ampere by size and insulation rating, for the materials it is made for."""

    materials: tuple[str, ...]
    insulations_degC: tuple[float, ...]
    rows: tuple[tuple[Size, Mapping[float, Cell]], ...]
    """By rising area: the size, and insulation rating in degC to its figure."""
    basis: Basis


@dataclass(frozen=True, slots=True, eq=False)
class AmbientCorrection:
    """Ampacity by ambient: published factors, or sqrt((Tc − Ta) / (Tc − reference)) without them."""

    reference_degC: float
    factors: Mapping[float, tuple[tuple[float, Cell], ...]]
    """Insulation rating to (highest ambient, factor) by rising ambient; empty: the formula, never above 1."""
    basis: Basis


@dataclass(frozen=True, slots=True, eq=False)
class EngineSpace:
    """Factors for conductors in engine spaces by insulation rating; they stand for the given ambient."""

    ambient_degC: float
    factors: Mapping[float, Cell]
    basis: Basis


@dataclass(frozen=True, slots=True)
class Bundling:
    """Factors for current-carrying conductors laid together."""

    counts: str
    """"conductors", or "circuits" of two conductors each."""
    steps: tuple[tuple[float, Cell], ...]
    """(greatest number, factor), rising; the last may reach to infinity."""
    basis: Basis


@dataclass(frozen=True, slots=True)
class SizeExemption:
    """Conductors that may be thinner: up to a length or a current, and where used for what a plan does not tell."""

    text: str
    up_to_m: float | None
    up_to_A: float | None
    used_for: str
    """What only a person can judge; empty where length and current decide."""
    basis: Basis


@dataclass(frozen=True, slots=True)
class MinimumSize:
    """Smallest conductor allowed; at most one size of each system, the first for systems not named."""

    separate: tuple[Size, ...]
    in_sheath: tuple[Size, ...]
    aluminium: tuple[Size, ...]
    """For aluminium and copper-clad aluminium; empty where they are held to the same sizes."""
    outside_sheath_m: float | None
    """How far a conductor that is allowed in a sheath only may leave it."""
    exempt: tuple[SizeExemption, ...]
    basis: Basis

    def least(self, system: str, sheathed: bool, material: str = "copper") -> Size:
        """The smallest size for a conductor of a system ("metric", "AWG", "SAE")."""
        sizes = self.in_sheath if sheathed else self.separate
        if "aluminium" in material and self.aluminium:
            sizes = self.aluminium
        return next((size for size in sizes if size.system == system), sizes[0])


@dataclass(frozen=True, slots=True)
class Continuous:
    """Factor on loads that run three hours or more."""

    factor: float
    basis: Basis


@dataclass(frozen=True, slots=True)
class OverConductor:
    """How far a protection's rating may exceed the ampacity of the conductor."""

    percent: float
    allowance_percent: float | None
    """Up to here where no standard rating matches the ampacity, or None."""
    next_standard_up_to_A: float | None
    """The next standard rating above the ampacity is allowed up to this rating, or None."""
    text: str
    basis: Basis


@dataclass(frozen=True, slots=True)
class SmallConductor:
    """Greatest protection of one small conductor, whatever its ampacity."""

    size: Size
    materials: tuple[str, ...]
    max_A: float


@dataclass(frozen=True, slots=True)
class SmallConductors:
    """Greatest protection by conductor size, for sizes below `none_from`."""

    sizes: tuple[SmallConductor, ...]
    none_from: Size
    basis: Basis

    def limit(self, size: Size, material: str) -> SmallConductor | None:
        """The entry that binds: the largest listed size not above the area; None beyond the list."""
        if size.area_mm2 >= self.none_from.area_mm2:
            return None
        fits = [e for e in self.sizes if material in e.materials and e.size.area_mm2 <= size.area_mm2]
        return max(fits, key=lambda entry: entry.size.area_mm2, default=None)


@dataclass(frozen=True, slots=True)
class UnprotectedLength:
    """How far from the source protection may sit; infinite where no limit is set, None where unknown."""

    plain_m: float | None
    sheathed_m: float | None
    sheathed_at_battery_m: float | None
    text: str
    basis: Basis


@dataclass(frozen=True, slots=True)
class Exempt:
    """Purposes of runs (`cranking`, `bond`) that need no protection."""

    purposes: tuple[str, ...]
    text: str
    basis: Basis


@dataclass(frozen=True, slots=True)
class StandardRatings:
    """The rulebook's own list of standard ratings in ampere."""

    amps: tuple[float, ...]
    basis: Basis


@dataclass(frozen=True, slots=True)
class InterruptingStep:
    """Least interrupting ratings of protection behind a bank of batteries, in ampere."""

    up_to_V: float
    """Greatest nominal voltage of the system."""
    up_to_cca: float
    """Greatest cold cranking current of the batteries connected together, in ampere."""
    main_A: float
    """The first protection from the bank."""
    branch_A: float
    """Any further one."""


@dataclass(frozen=True, slots=True)
class Interrupting:
    """Least interrupting ratings by the size of the bank, whatever a calculation gives."""

    steps: tuple[InterruptingStep, ...]
    """By rising voltage and size."""
    cca_per_Ah: float
    """Cold cranking current that a bank of known capacity is taken to have, in ampere for each Ah."""
    text: str
    basis: Basis

    def step(self, system_V: float, capacity_Ah: float) -> InterruptingStep | None:
        """The step that binds; None for a voltage or a bank beyond the table."""
        least_V = min((one.up_to_V for one in self.steps if system_V <= one.up_to_V), default=None)
        fits = [one for one in self.steps if one.up_to_V == least_V and self.cca(capacity_Ah) <= one.up_to_cca]
        return min(fits, key=lambda one: one.up_to_cca, default=None)

    def cca(self, capacity_Ah: float) -> float:
        """Cold cranking current, in ampere, that a capacity is taken to have."""
        return capacity_Ah * self.cca_per_Ah


@dataclass(frozen=True, slots=True)
class FaultDamage:
    """What it means that a conductor may reach the limit of its insulation before its protection opens."""

    severity: Literal["fail", "warn"]
    basis: Basis


@dataclass(frozen=True, slots=True)
class Protection:
    """What a rulebook says of fuses and breakers."""

    continuous: Continuous | None
    over_conductor: OverConductor | None
    small_conductors: SmallConductors | None
    unprotected_length: UnprotectedLength | None
    exempt: Exempt | None
    standard_ratings: StandardRatings | None
    interrupting: Interrupting | None
    fault_damage: FaultDamage | None


@dataclass(frozen=True, slots=True)
class Refused:
    """Conductor materials and strands that the rulebook does not accept."""

    materials: tuple[str, ...]
    strands: tuple[str, ...]
    basis: Basis


@dataclass(frozen=True, slots=True)
class Returns:
    """Return paths that the rulebook forbids (`chassis`)."""

    forbidden: tuple[str, ...]
    basis: Basis


@dataclass(frozen=True, slots=True)
class Terminals:
    """Temperature that terminals are rated for: a conductor carries no more than its table's figure under it."""

    unmarked_degC: float
    """For conductors up to `unmarked_up_to`, unless the terminals are marked for more."""
    unmarked_up_to: Size
    marked_degC: float
    """For thicker conductors, and the highest usually marked."""
    basis: Basis


@dataclass(frozen=True, slots=True, eq=False)
class Rulebook:
    """The limits a plan is held against. What is None or empty is not given; `missing` may say why."""

    name: str
    title: str
    edition: str
    text: str
    default_insulation_degC: float
    default_strand: str
    default_system: str
    default_class: str
    drop_basis: DropBasis
    classes: Mapping[str, DropClass]
    ampacity_tables: tuple[AmpacityTable, ...]
    ambient: AmbientCorrection | None
    engine_space: EngineSpace | None
    bundling: Bundling | None
    minimum_size: MinimumSize | None
    protection: Protection
    refused: Refused | None
    returns: Returns | None
    terminals: Terminals | None
    missing: Mapping[str, str]
    """Entry to the reason why the rulebook does not give it."""


@lru_cache(maxsize=1)
def shipped() -> tuple[str, ...]:
    """Names of the shipped rulebooks, in alphabetical order."""
    return tuple(sorted(path.stem for path in FOLDER.glob("*.toml")))


def load(name_or_path: str, folder: Path | None = None) -> Rulebook:
    """A shipped rulebook by name, or a user's own by path (relative to `folder`). Raises RulebookError."""
    if name_or_path in shipped():
        return _shipped(name_or_path)
    path = (folder or Path()) / name_or_path
    if path.suffix.lower() != ".toml":
        near = difflib.get_close_matches(name_or_path, shipped(), n=1, cutoff=0.3)
        hint = f'; did you mean "{near[0]}"?' if near else ""
        accepted = f"accepted: {', '.join(shipped())}, or the path of a .toml file"
        raise RulebookError(f'no rulebook is called "{name_or_path}"; {accepted}{hint}')
    from farvolt.rulebook_file import read

    return read(path)


@lru_cache(maxsize=16)
def _shipped(name: str) -> Rulebook:
    from farvolt.rulebook_file import read

    return read(FOLDER / f"{name}.toml")
