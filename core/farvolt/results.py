"""What a study of a plan answers: the numbers of each case and the findings. Field names are those of the output.

Quantities are SI numbers with full precision, or None where there is no answer (an unfed point, a case that gives
way). Rounding is for the views.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

from farvolt.conductors import Size
from farvolt.plan import Plan
from farvolt.rulebook import Rulebook

if TYPE_CHECKING:
    from farvolt.protected import ProtectionResult, TimeCurrent

Severity = Literal["fail", "warn", "note"]
Kind = Literal["run", "load", "source", "device", "point", "case", "plan"]


@dataclass(frozen=True, slots=True)
class PointResult:
    """Voltages of a point against the return of the reference source; `volts` is feed less return."""

    name: str
    feed_V: float | None
    return_V: float | None
    volts: float | None


@dataclass(frozen=True, slots=True)
class SourceResult:
    """A source: amps are positive when it delivers; `input_W` is what a converter draws."""

    name: str
    volts: float | None
    amps: float | None
    watts: float | None
    input_W: float | None


@dataclass(frozen=True, slots=True)
class RunResult:
    """A run: currents are positive from `from` to `to`, feed and return apart; drop and loss are of both conductors."""

    name: str
    feed_A: float | None
    return_A: float | None
    feed_ohm: float | None
    return_ohm: float | None
    drop_V: float | None
    loss_W: float | None
    conductor_degC: float
    ampacity_A: float | None


@dataclass(frozen=True, slots=True)
class DeviceResult:
    """A device in line: its current from `from` to `to` in the pole it sits in."""

    name: str
    amps: float | None
    drop_V: float | None


@dataclass(frozen=True, slots=True)
class StringResult:
    """One of the parallel strings of a battery whose link cables are stated; positive when it delivers."""

    battery: str
    string: int
    amps: float | None


@dataclass(frozen=True, slots=True)
class LoadResult:
    """A load: drop is against the reference source of its island, in percent of the island's nominal voltage."""

    name: str
    volts: float | None
    amps: float | None
    watts: float | None
    drop_V: float | None
    drop_percent: float | None


@dataclass(frozen=True, slots=True)
class Step:
    """One conductor or device on the way from a reference source to a load; `drop_V` adds to the load's drop."""

    name: str
    kind: str
    """"run", "device", "bond" or "diode"."""
    pole: str
    amps: float
    ohm: float
    drop_V: float
    run: int = -1
    fixed_ohm: float = 0.0
    """The part of a run's resistance that is no cable: joints, protection, a bond."""


@dataclass(frozen=True, slots=True)
class CaseResult:
    """One case at the plan's conductor temperature, with its certificate."""

    name: str
    solved: bool
    share_held: float
    margin: float | None
    imbalance_A: float
    power_in_W: float
    power_loads_W: float
    power_lost_W: float
    points: tuple[PointResult, ...]
    sources: tuple[SourceResult, ...]
    runs: tuple[RunResult, ...]
    devices: tuple[DeviceResult, ...]
    loads: tuple[LoadResult, ...]
    strings: tuple[StringResult, ...] = ()
    nominal_V: Mapping[str, float] = field(default_factory=dict)
    """Nominal voltage at each point, of the island it belongs to."""
    way: Callable[[int], tuple[Step, ...]] = field(default=lambda load: (), repr=False, compare=False)
    """The conductors and devices on the way of a load (by its place in the plan); their drops sum to its drop."""


@dataclass(frozen=True, slots=True)
class Finding:
    """What a check says of one subject in one case, with the working that a person can redo."""

    rule: str
    severity: Severity
    subject: str
    kind: Kind
    case: str | None
    value: float | None
    limit: float | None
    unit: str | None
    message: str
    basis: str
    working: tuple[str, ...]
    remedy: str | None = None


@dataclass(frozen=True, slots=True)
class Study:
    """A plan, what it was held against, the numbers, the findings (worst first) and what was assumed."""

    plan: Plan
    rulebook: Rulebook
    cases: tuple[CaseResult, ...]
    findings: tuple[Finding, ...]
    assumptions: tuple[str, ...]
    interim: Mapping[str, Size] = field(default_factory=dict)
    """Sizes taken for the time being for runs that state none."""
    protections: Sequence["ProtectionResult"] = ()
    """Each protection beside its load, its cables and its fault currents; worked out when it is looked at."""
    time_current: Callable[[str], "TimeCurrent"] | None = field(default=None, repr=False, compare=False)
    """The time-current picture of a run, by its name."""

    @property
    def nominal_V(self) -> Mapping[str, float]:
        """Nominal voltage at each point, of the island it belongs to: the same in every case."""
        return self.cases[0].nominal_V

    @property
    def failing(self) -> bool:
        """True when any finding breaks a stated limit."""
        return any(finding.severity == "fail" for finding in self.findings)
