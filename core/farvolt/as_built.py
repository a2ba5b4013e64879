"""What readings say of the runs as they were built: ohms of each conductor, beside the plan and beside earlier ones.

Ohm's law on two readings of one set: the volts between the two ends of a conductor over the amps in it. What an ohm
value may be off by is that of the most volts over the least amps that the meter may have stood for: a hard bound.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from farvolt.commissioning import conductor_ohm
from farvolt.errors import FarvoltError
from farvolt.installation import Installation
from farvolt.network import FEED, RETURN, conductor_lengths_m
from farvolt.plan import Run
from farvolt.readings import Reading, ReadingSet
from farvolt.temperatures import run_ambient_degC

ALIKE = 5e-3
"""Feed and return carry the same current where the plan says so to this share; one reading then serves both."""

Conductor = tuple[str, int]
"""The name of a run, and FEED or RETURN."""


@dataclass(frozen=True, slots=True)
class Measured:
    """Ohms of one conductor between the ends of its run, what they may be off by, and the set they are from."""

    ohm: float
    limit_ohm: float
    taken_in: ReadingSet


@dataclass(frozen=True, slots=True)
class RunBuilt:
    """A run as measured at `degC`, feed and return together, beside what its plan says at that temperature.

    `lacking` says what was not measured; the ohms are then None.
    """

    run: Run
    degC: float
    planned_ohm: float
    least_ohm: float
    most_ohm: float
    ohm: float | None
    limit_ohm: float
    lacking: str = ""

    @property
    def outside(self) -> str:
        """"more" or "less" than the plan's tolerances allow, whatever the meter; empty where it may be within."""
        if self.ohm is None:
            return ""
        if self.ohm - self.limit_ohm > self.most_ohm:
            return "more"
        return "less" if self.ohm + self.limit_ohm < self.least_ohm else ""


@dataclass(frozen=True, slots=True)
class Drift:
    """Ohms (volts for each ampere) of a conductor at two dates."""

    run: str
    pole: int
    earlier: Measured
    later: Measured

    @property
    def grown_ohm(self) -> float:
        """How much more it is."""
        return self.later.ohm - self.earlier.ohm

    @property
    def limit_ohm(self) -> float:
        """What the two readings may be off by together."""
        return self.earlier.limit_ohm + self.later.limit_ohm

    @property
    def changed(self) -> str:
        """"grew" or "fell" by more than the meter explains, else empty."""
        if abs(self.grown_ohm) <= self.limit_ohm:
            return ""
        return "grew" if self.grown_ohm > 0 else "fell"


def measured(installation: Installation, sets: Sequence[ReadingSet]) -> dict[Conductor, Measured]:
    """Every conductor whose volts and amps were read in one set; the most exact where several were."""
    found: dict[Conductor, Measured] = {}
    runs = [(at, run, pole) for at, run in enumerate(installation.plan.runs) for pole in _poles(run)]
    for one in sets:
        amps = {(reading.run, reading.pole): reading for reading in one.readings if reading.run}
        volts = {frozenset((reading.start, reading.end)): reading for reading in one.readings if not reading.run}
        for at, run, pole in runs:
            over = volts.get(frozenset(((run.from_point, pole), (run.to_point, pole))))
            through = amps.get((run.name, pole)) or (over and _other_pole(installation, one, at, pole, amps))
            if over and through:
                _keep_best(found, (run.name, pole), over, through, one)
    return found


def _poles(run: Run) -> list[int]:
    """The conductors that a run has."""
    return [pole for pole, length in zip((FEED, RETURN), conductor_lengths_m(run), strict=True) if length > 0]


def _keep_best(
    found: dict[Conductor, Measured], key: Conductor, over: Reading, through: Reading, taken_in: ReadingSet
) -> None:
    """Ohms of two readings, unless they are within what the meter may be off by, or less exact than others."""
    if abs(over.value) <= over.limit or abs(through.value) <= through.limit:
        return
    ohm = abs(over.value / through.value)
    limit = (abs(over.value) + over.limit) / (abs(through.value) - through.limit) - ohm
    if key not in found or limit / ohm < found[key].limit_ohm / found[key].ohm:
        found[key] = Measured(ohm, limit, taken_in)


def _other_pole(
    installation: Installation, taken_in: ReadingSet, at: int, pole: int, amps: Mapping[Conductor, Reading]
) -> Reading | None:
    """The current read in the run's other conductor, where the plan has the same in both."""
    network = installation.network
    reading = amps.get((installation.plan.runs[at].name, RETURN if pole == FEED else FEED))
    if reading is None:
        return None
    try:
        flowing = installation.state(taken_in.case).solved.branch_A
    except FarvoltError:
        return None
    both = np.abs(flowing[(network.run == at) & (network.cable_ohm_20 > 0)])
    return reading if len(both) == 2 and np.ptp(both) <= ALIKE * both.max() else None


def runs_built(installation: Installation, sets: Sequence[ReadingSet], degC: float | None = None) -> list[RunBuilt]:
    """The runs of which something was measured, at a temperature, or else at the ambient of the run in its set's case.

    None where in no set both the volts over a conductor and the amps in it were read.
    """
    ohms = measured(installation, sets)
    return [
        _run_built(installation, at, run, ohms, degC)
        for at, run in enumerate(installation.plan.runs)
        if (run.name, FEED) in ohms or (run.name, RETURN) in ohms
    ]


def _run_built(
    installation: Installation, at: int, run: Run, ohms: Mapping[Conductor, Measured], degC: float | None
) -> RunBuilt:
    has = _poles(run)
    found = {pole: ohms[run.name, pole] for pole in has if (run.name, pole) in ohms}
    one = next(iter(found.values()))
    at_degC = degC if degC is not None else run_ambient_degC(installation.plan, run, one.taken_in.case)
    network = installation.network
    branches = np.flatnonzero((network.run == at) & (network.cable_ohm_20 > 0))
    bands = [conductor_ohm(network, int(branch), (at_degC,) * 3) for branch in branches]
    planned = [sum(parts) for parts in zip(*((band.expected, band.low, band.high) for band in bands), strict=True)]
    if len(found) < len(has):
        missing = "return" if FEED in found else "feed"
        return RunBuilt(run, at_degC, planned[0], planned[1], planned[2], None, 0.0, f"its {missing} was not measured")
    ohm, limit = sum(one.ohm for one in found.values()), sum(one.limit_ohm for one in found.values())
    return RunBuilt(run, at_degC, planned[0], planned[1], planned[2], ohm, limit)


def drift(installation: Installation, earlier: Sequence[ReadingSet], later: Sequence[ReadingSet]) -> list[Drift]:
    """Conductors measured at both dates, those that changed most beside their meter's accuracy first.

    Raises FarvoltError where there is none.
    """
    before, after = measured(installation, earlier), measured(installation, later)
    found = [Drift(*key, one, after[key]) for key, one in before.items() if key in after]
    if not found:
        raise FarvoltError(
            "no conductor was measured at both dates; accepted: the same volts and amps read in both sets"
        )
    return sorted(found, key=lambda one: -abs(one.grown_ohm) / one.limit_ohm)
