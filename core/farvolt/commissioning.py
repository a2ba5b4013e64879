"""What to test before an installation is handed over, with what to expect of each test.

Expected figures are those of sound parts in the middle of the plan's tolerances; bands reach from one end of the
tolerances to the other and are widened by what the meter may be off by. Over one run the band follows from its own
length, joints and temperature; the voltage at a point from all tolerances of the plan, each at the end that moves it
furthest, added up to first order.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from farvolt.causes import SOUND_FIXED_SHARE, alphas, sound_degC, source_ports
from farvolt.conductors import temperature_coefficient
from farvolt.context import CaseStudy, Context
from farvolt.errors import FarvoltError
from farvolt.integrity import nearest
from farvolt.lugs import known_stud
from farvolt.meter import Meter
from farvolt.network import FEED, RETURN, Floats, Network, joints_ohm, protection_ohm
from farvolt.plan import CHASSIS, Device, Protection, Run
from farvolt.readings import Pin
from farvolt.response import Probe, State
from farvolt.tables import read
from farvolt.temperatures import run_ambient_degC
from farvolt.tolerances import Factor, spread
from farvolt_data import ROOT

TORQUE_NM = {row["stud"]: float(row["torque_Nm"]) for row in read(ROOT / "devices" / "torque.csv")}
"""Typical torque of a stud's nut by its one name, provisional: the figure of the terminal's maker goes before it."""

JUDGED_SHARE = 0.2
"""A voltage is too small to judge a part by where the meter may be off by more than this share of it."""

_CHUNK = 200


@dataclass(frozen=True, slots=True)
class Band:
    """What to expect, and between what a reading passes."""

    expected: float
    low: float
    high: float

    def read_with(self, meter: Meter) -> "Band":
        """Widened by what the meter may be off by at each end; a voltage that is taken as positive stays so."""
        return Band(self.expected, max(self.low - meter.limit(self.low), 0.0), self.high + meter.limit(self.high))

    def times(self, factor: float) -> "Band":
        """All three times a factor."""
        return Band(self.expected * factor, self.low * factor, self.high * factor)


@dataclass(frozen=True, slots=True)
class UnderCurrent:
    """A voltage over a part: red lead and black lead so that it is positive, the current, and the volts.

    `amps_to_judge` is the least current at which the meter is good enough, where `amps` is less.
    """

    red: Pin
    black: Pin
    amps: float
    volts: Band
    amps_to_judge: float | None


@dataclass(frozen=True, slots=True)
class ConductorTest:
    """One conductor of a run from end to end, or its bond to the chassis. `test` is None where no current flows.

    `joint` are the volts over each of its sound joints at that current; `torque_Nm` are those at `from` and `to`.
    """

    run: Run
    pole: str
    bond: bool
    ends: tuple[str, str]
    ohm: Band
    """End to end, cold: at the ambient of the run, without current."""
    test: UnderCurrent | None
    joint: Band | None
    torque_Nm: tuple[float | None, float | None]


@dataclass(frozen=True, slots=True)
class ProtectionTest:
    """A protection as planned; `volts` over it with its holder at the current of its conductor."""

    run: Run
    planned: Protection
    point: str
    amps: float | None
    volts: Band | None


@dataclass(frozen=True, slots=True)
class DeviceTest:
    """A device in one of its poles. `test` is None where no current flows through it."""

    device: Device
    pole: str
    test: UnderCurrent | None
    torque_Nm: tuple[float | None, float | None]


@dataclass(frozen=True, slots=True)
class PointTest:
    """The voltage of a point, red lead on its feed, black lead on its return; None where it is not fed."""

    point: str
    volts: Band | None


@dataclass(frozen=True, slots=True)
class InsulationTest:
    """Test voltage and the least resistance that passes."""

    test_V: float
    least_Mohm: float
    source: str


@dataclass(frozen=True)
class Sheet:
    """All tests of a plan. `amps` is the stated test current, None where it is that of the case."""

    context: Context
    case: CaseStudy
    amps: float | None
    meter: Meter
    insulation: InsulationTest
    conductors: tuple[ConductorTest, ...]
    protections: tuple[ProtectionTest, ...]
    devices: tuple[DeviceTest, ...]
    points: tuple[PointTest, ...]


def sheet_of(context: Context, meter: Meter, case_name: str | None = None, amps: float | None = None) -> Sheet:
    """The tests of a plan, in a case and at a stated current or that of the case. Raises FarvoltError."""
    if amps is not None and not 0 < amps < 1e5:
        raise FarvoltError(f"{amps:g} A is no test current; accepted: more than 0 A")
    case = _case(context, case_name)
    made = _Maker(context, case, meter, amps)
    return Sheet(
        context, case, amps, meter, insulation_test(max(made.nominals)), tuple(made.conductors()),
        tuple(made.protections()), tuple(made.devices()), tuple(made.points()),
    )  # fmt: skip


def insulation_test(nominal_V: float) -> InsulationTest:
    """The test for a nominal voltage (IEC 60364-6, provisional)."""
    rows = read(ROOT / "devices" / "insulation.csv")
    row = next((one for one in rows if nominal_V <= float(one["nominal_up_to_V"])), rows[-1])
    return InsulationTest(float(row["test_V"]), float(row["least_Mohm"]), row["source"])


def _case(context: Context, name: str | None) -> CaseStudy:
    """The case asked for; else, of those that can be held while one reads, the one in which loads draw most."""
    names = [one.name for one in context.cases]
    if name is not None:
        if name not in names:
            near = nearest(name, names)
            told = ", ".join(f'"{one}"' for one in names) + (f"; did you mean {near}?" if near else "")
            raise FarvoltError(f'there is no case "{name}"; accepted: {told}')
        return context.cases[names.index(name)]
    held = [one for one in context.cases if one.solutions["plan"].state.solved]
    if not held:
        raise FarvoltError("the plan gives way in every case; accepted: a plan that holds in one, to be tested in it")
    steady = [one for one in held if not one.case.surge and not _aged(one)]
    return max(steady or held, key=lambda one: one.solutions["plan"].state.power_loads_W)


def _aged(one: CaseStudy) -> bool:
    return any(state.aged for state in one.case.sources.values())


def conductor_ohm(network: Network, branch: int, degC: tuple[float, float, float]) -> Band:
    """Resistance of a conductor of a run, sound, within the plan's tolerances: at the middle one of three temperatures,
    the least at the first, the most at the last."""
    run, stated = network.plan.runs[int(network.run[branch])], network.plan.tolerances
    length = 0.0 if run.resistance is not None else stated.length.si
    cable, fixed = float(network.cable_ohm_20[branch]), float(network.fixed_ohm[branch])
    joints = joints_ohm(run) if run.resistance is None and cable > 0 else 0.0
    alpha = temperature_coefficient(run.material).value
    least, middle, most = (1 + alpha * (one - 20) for one in degC)
    rest = fixed - joints
    return Band(
        cable * middle + fixed,
        cable * least * (1 - length) + rest * (1 - SOUND_FIXED_SHARE) + joints * min(stated.joints, 1.0),
        cable * most * (1 + length) + rest * (1 + SOUND_FIXED_SHARE) + joints * max(stated.joints, 1.0),
    )  # fmt: skip


class _Maker:
    """Works the tests out of one case, solved with sound parts."""

    def __init__(self, context: Context, case: CaseStudy, meter: Meter, amps: float | None) -> None:
        self.context, self.case, self.meter, self.amps = context, case, meter, amps
        self.plan, self.network = context.plan, context.network
        self.middle, self.half = sound_degC(context.plan, context.rulebook, case.case)
        self.alpha = alphas(context.plan)
        self.state = State(self.network, case.solutions["plan"].condition, 1 + self.alpha * (self.middle - 20))
        studs = {one.name: known_stud(one.stud) for one in self.plan.points if one.stud is not None}
        self.torque = {point: TORQUE_NM.get(stud) if stud else None for point, stud in studs.items()}

    @property
    def nominals(self) -> list[float]:
        """Nominal voltages in the plan."""
        islands = self.state.condition.islands
        return [islands.nominal(self.network.feed(name)) for name in self.plan.point_names] or [0.0]

    # Conductors, protection, devices ---------------------------------------------------------------------------------

    def conductors(self) -> Iterator[ConductorTest]:
        """Every conductor of every run."""
        for index, run in enumerate(self.plan.runs):
            for branch in np.flatnonzero(self.network.run == index):
                yield self._conductor(run, int(branch))

    def _conductor(self, run: Run, branch: int) -> ConductorTest:
        pole = int(self.network.pole[branch])
        bond = bool(self.network.cable_ohm_20[branch] == 0)
        ends = (CHASSIS, run.to_point) if bond else (run.from_point, run.to_point)
        test = self._test(branch, ((ends[0], RETURN if bond else pole), (ends[1], pole)), self._ohm(branch))
        joint = None
        if test is not None and not bond:
            each = run.joint_resistance.si / run.parallel
            joint = self._at_most(each, max(self.plan.tolerances.joints, 1.0), test.amps)
        torque = (self.torque.get(ends[0]), self.torque.get(ends[1]))
        word = "feed" if pole == FEED else "return"
        return ConductorTest(run, word, bond, ends, self._ohm(branch, cold=True), test, joint, torque)

    def _ohm(self, branch: int, *, cold: bool = False) -> Band:
        """Resistance of a branch of a run, of sound parts over the tolerances; `cold` at the ambient of the run."""
        at = int(self.network.run[branch])
        middle, half = float(self.middle[at]), float(self.half[at])
        if cold:
            middle, half = run_ambient_degC(self.plan, self.plan.runs[at], self.case.case), 0.0
        return conductor_ohm(self.network, branch, (middle - half, middle, middle + half))

    def _current(self, branch: int) -> float:
        """Of a branch: that of the case, or the stated one (in at the feed of `from`, back at its return)."""
        flowing = float(self.state.solved.branch_A[branch]) if self.state.siemens[branch] else 0.0
        if self.amps is None:
            return flowing
        back = self.network.pole[branch] == RETURN
        return float(np.copysign(self.amps, flowing)) if flowing else (-self.amps if back else self.amps)

    def _test(self, branch: int, ends: tuple[Pin, Pin], ohm: Band) -> UnderCurrent | None:
        """Volts over a branch, whose ends as the network has them are `ends`; None without current."""
        current = self._current(branch)
        if abs(current) < 1e-6:
            return None
        red, black = ends if current > 0 else ends[::-1]
        amps = abs(current)
        least = self._amps_to_judge(ohm.expected)
        return UnderCurrent(red, black, amps, ohm.times(amps).read_with(self.meter), least if least > amps else None)

    def _amps_to_judge(self, ohm: float) -> float:
        """Current at which what the meter may be off by is `JUDGED_SHARE` of the volts, in its lowest range."""
        left = JUDGED_SHARE - self.meter.percent / 100
        return self.meter.digits * 1e-4 / (left * ohm) if left > 0 else np.inf

    def _at_most(self, ohm: float, times: float, amps: float) -> Band:
        return Band(ohm, 0.0, ohm * times).times(amps).read_with(self.meter)

    def protections(self) -> Iterator[ProtectionTest]:
        """Every protection of every run."""
        for index, run in enumerate(self.plan.runs):
            for one in run.protections:
                pole = FEED if one.pole == "feed" else RETURN
                places = np.flatnonzero((self.network.run == index) & (self.network.pole == pole))
                amps = abs(self._current(int(places[0]))) if len(places) else 0.0
                alone = run.model_copy(update={"protection": (one,), "protection_to": None})
                ohm = protection_ohm(alone, one.pole)
                volts = self._at_most(ohm, 1 + SOUND_FIXED_SHARE, amps) if amps > 1e-6 else None
                point = run.from_point if one.end == "from" else run.to_point
                yield ProtectionTest(run, one, point, amps if volts else None, volts)

    def devices(self) -> Iterator[DeviceTest]:
        """Every device in each of its poles."""
        for index, device in enumerate(self.plan.devices):
            torque = (self.torque.get(device.from_point), self.torque.get(device.to_point))
            for branch in np.flatnonzero(self.network.device == index):
                pole = int(self.network.pole[branch])
                ohm = float(self.network.fixed_ohm[branch])
                band = Band(ohm, 0.0, ohm * (1 + SOUND_FIXED_SHARE))
                test = self._test(int(branch), ((device.from_point, pole), (device.to_point, pole)), band)
                yield DeviceTest(device, "feed" if pole == FEED else "return", test, torque)
            for place, (of, start, end) in enumerate(self.network.diodes):
                if of == index:
                    yield DeviceTest(device, "feed" if device.pole != "return" else "return",
                                     self._diode(device, place, start, end), torque)  # fmt: skip

    def _diode(self, device: Device, place: int, start: int, end: int) -> UnderCurrent | None:
        """Volts over a diode: those of the case, because they hardly follow its current."""
        first = len(self.state.condition.source_a) - len(self.network.diodes)
        current = float(self.state.solved.delivered_A[first + place])
        if not current > 1e-6:
            return None
        pole = FEED if device.pole != "return" else RETURN
        volts = float(self.state.volts[start] - self.state.volts[end])
        band = Band(volts, volts * (1 - SOUND_FIXED_SHARE), volts * (1 + SOUND_FIXED_SHARE)).read_with(self.meter)
        return UnderCurrent((device.from_point, pole), (device.to_point, pole), current, band, None)

    # Points ----------------------------------------------------------------------------------------------------------

    def points(self) -> Iterator[PointTest]:
        """Every point, in the case (whatever the stated test current)."""
        names = self.plan.point_names
        probes = {name: self.state.joined(self.network.feed(name), self.network.ret(name)) for name in names}
        fed = {name: probe for name, probe in probes.items() if probe is not None}
        bands: dict[str, Band] = {}
        for at in range(0, len(fed), _CHUNK):
            some = list(fed)[at : at + _CHUNK]
            bands |= zip(some, self._volts([fed[name] for name in some]), strict=True)
        for name in names:
            yield PointTest(name, bands[name].read_with(self.meter) if name in bands else None)

    def _volts(self, probes: list[Probe]) -> list[Band]:
        """Volts at the probes, moved as far as each tolerance moves them, added up."""
        response = self.state.response(probes)
        down, up = np.zeros(len(probes)), np.zeros(len(probes))
        for factor in self._factors:
            ends = np.zeros((3, len(probes)))
            for row, value in enumerate((factor.lowers, factor.raises), start=1):
                for atom, amount in self._atoms(factor, value):
                    ends[row] += response.move(atom, np.array([amount]))[0]
            down += ends.min(axis=0)
            up += ends.max(axis=0)
        return [Band(float(v), float(v + d), float(v + u)) for v, d, u in zip(response.planned, down, up, strict=True)]

    @cached_property
    def _factors(self) -> tuple[Factor, ...]:
        return spread(self.context, self.case).factors

    def _atoms(self, factor: Factor, value: float) -> list[tuple[int, float]]:
        """A tolerance at a value as ohms, volts or shares more than in the middle."""
        atoms, at, network = self.state.atoms, factor.at, self.network
        if factor.group == "loads":
            return [(atoms.load(at), value - 1)]
        if factor.group == "source voltage":
            volts = self.state.condition.volts
            return [(atoms.volts(port), float(volts[port]) * (value - 1)) for port in source_ports(network, at)]
        branches = np.flatnonzero((network.run == at) & (network.cable_ohm_20 > 0))
        if factor.group == "joints":
            return [(int(branch), joints_ohm(self.plan.runs[at]) * (value - 1)) for branch in branches]
        cable: Floats = network.cable_ohm_20[branches]
        if factor.group == "length":
            more = cable * self.state.factor_of_20[at] * (value - 1)
        else:
            more = cable * float(self.alpha[at]) * (value - float(self.middle[at]))
        return list(zip(branches.tolist(), more.tolist(), strict=True))
