"""The network: a plan as arrays of nodes, conductors and ports, before any case is chosen.

Every point has a feed and a return node; the chassis is one node. A run puts its real conductors between them, a
device its resistance in its own pole (the other pole passes straight through, so those two nodes are one).
Conductors are branches; sources, loads and diodes are ports, which `solve` gives their laws.
"""

from collections.abc import Iterator
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from farvolt import conductors
from farvolt.plan import CHASSIS, Battery, Converter, Device, Plan, ReturnConductor, Run, Solar
from farvolt.rulebook import Rulebook
from farvolt.tables import read
from farvolt_data import ROOT

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

FEED, RETURN, BOND = 0, 1, 2
"""Poles of a branch; a bond ties a return to the chassis or the returns of a converter together."""

_CONTACTS = read(ROOT / "devices" / "contact.csv")

CONTACT_OHM = {row["kind"]: float(row["resistance_mohm"]) / 1000 for row in _CONTACTS}
"""Resistance of a device that states none, by kind. From memory: provisional."""

DIODE_DROP_V = next(float(row["forward_drop_V"]) for row in _CONTACTS if row["forward_drop_V"])
"""Forward drop of a diode that states none. From memory: provisional."""

LEAST_OHM = 1e-6
"""No contact is better than this; a stated zero is taken as it."""

CONTROLLER_BOND_OHM = 1e-3
"""Joins the returns of a solar controller's input and output, which are common (common practice)."""


@dataclass(frozen=True)
class Network:
    """Arrays over branches (conductors) and the nodes they join; node numbers are rows of the nodal equations."""

    plan: Plan
    node_count: int
    nodes: dict[tuple[str, int], int]
    """(point, FEED or RETURN) to node; the chassis is (CHASSIS, RETURN)."""
    a: Ints
    b: Ints
    fixed_ohm: Floats
    """Joints, protection, devices, bonds: at no temperature of their own."""
    cable_ohm_20: Floats
    """Conductor of the cable at 20 °C; 0 where the branch is no cable."""
    run: Ints
    """Index of the run a branch belongs to, or -1."""
    device: Ints
    """Index of the device a branch belongs to, or -1."""
    pole: Ints
    diodes: tuple[tuple[int, int, int], ...]
    """(device index, node at `from`, node at `to`) of each diode."""
    strings: tuple[tuple[int, int, int], ...]
    """(source index, feed node, return node) of each battery string with link cables of its own."""
    arrays: tuple[tuple[int, int, int], ...]
    """(source index, feed node, return node) of each solar array that the plan places."""
    assumptions: tuple[str, ...] = field(default=())

    def feed(self, point: str) -> int:
        """Feed node of a point."""
        return self.nodes[point, FEED]

    def ret(self, point: str) -> int:
        """Return node of a point."""
        return self.nodes[point, RETURN]


@dataclass(slots=True)
class _Branch:
    a: tuple[str, int]
    b: tuple[str, int]
    fixed_ohm: float
    cable_ohm_20: float = 0.0
    run: int = -1
    device: int = -1
    pole: int = FEED


def build(plan: Plan, rulebook: Rulebook) -> Network:
    """The network of a plan; runs whose size is still free are left out (a finding names them)."""
    assumptions: list[str] = []
    names = _Names()
    bars = bar_ends_ohm(plan)
    branches = list(_run_branches(plan, rulebook, bars))
    strings: list[tuple[int, tuple[str, int], tuple[str, int]]] = []
    for index, source in enumerate(plan.sources):
        if isinstance(source, Battery) and linked(source):
            strings.extend((index, *ends) for ends in _string_ends(source))
            branches.extend(_link_branches(source, rulebook))
    diodes: list[tuple[int, tuple[str, int], tuple[str, int]]] = []
    for index, device in enumerate(plan.devices):
        branches.extend(_device_branches(index, device, bars))
        if device.kind == "diode":
            pole = FEED if device.pole != "return" else RETURN
            diodes.append((index, (device.from_point, pole), (device.to_point, pole)))
        _join_passing_pole(names, device)
    branches.extend(_source_bonds(plan))
    branches.extend(_chassis_bonds(plan, branches, names, assumptions))
    for point in plan.point_names:
        for pole in (FEED, RETURN):
            names.node((point, pole))
    return _arrays(plan, branches, diodes, strings, names, tuple(assumptions))


class _Names:
    """Node numbers by (point, pole), with poles that pass straight through a device merged into one node."""

    def __init__(self) -> None:
        self._parent: dict[tuple[str, int], tuple[str, int]] = {}

    def node(self, key: tuple[str, int]) -> tuple[str, int]:
        path = []
        while (parent := self._parent.setdefault(key, key)) != key:
            path.append(key)
            key = parent
        for passed in path:
            self._parent[passed] = key
        return key

    def merge(self, one: tuple[str, int], other: tuple[str, int]) -> None:
        self._parent[self.node(other)] = self.node(one)

    def numbered(self) -> dict[tuple[str, int], int]:
        numbers: dict[tuple[str, int], int] = {}
        for key in list(self._parent):
            numbers.setdefault(self.node(key), len(numbers))
        return {key: numbers[self.node(key)] for key in self._parent}


def _join_passing_pole(names: _Names, device: Device) -> None:
    if device.pole != "both":
        other = RETURN if device.pole == "feed" else FEED
        names.merge((device.from_point, other), (device.to_point, other))


def insulation_degC(run: Run, rulebook: Rulebook) -> float:
    """Insulation rating of a run: as stated, else the rulebook's default."""
    return run.insulation.si if run.insulation is not None else rulebook.default_insulation_degC


def strand(run: Run, rulebook: Rulebook) -> str:
    """Strand of a run: as stated, else the rulebook's default."""
    return run.strand or rulebook.default_strand


def conductor_lengths_m(run: Run) -> tuple[float, float]:
    """Length of the feed and of the return conductor of a run; 0 for one it does not have."""
    feed = run.length.si if run.conducts in ("both", "feed") else 0.0
    if run.conducts == "feed" or run.return_path == "chassis":
        return feed, 0.0
    if isinstance(run.return_path, ReturnConductor) and run.return_path.length is not None:
        return feed, run.return_path.length.si
    return feed, run.length.si


def return_size(run: Run) -> conductors.Size | None:
    """Size of the return conductor: its own where the run states one, else that of the feed."""
    if isinstance(run.return_path, ReturnConductor) and run.return_path.size is not None:
        return run.return_path.size
    return run.size


def joints_ohm(run: Run) -> float:
    """Resistance of the joints in one pole of a run: every conductor has them, and parallel ones share the current."""
    return run.joints * run.joint_resistance.si / run.parallel


def protection_ohm(run: Run, pole: str) -> float:
    """Resistance of the protection in one pole of a run: as stated, else typical of its type and rating."""
    return sum(
        one.resistance.si if one.resistance is not None else one.kind.resistance_ohm(one.rating.si)
        for one in run.protections
        if one.pole == pole
    )


def bar_ends_ohm(plan: Plan) -> dict[str, float]:
    """Half the resistance of each busbar that states one: in series with whatever is joined to it, in each pole.

    Any two of its studs are then as far apart as its two ends: the most that the bar can add.
    """
    return {point.name: point.resistance.si / 2 for point in plan.points if point.resistance is not None}


def _run_branches(plan: Plan, rulebook: Rulebook, bars: dict[str, float]) -> Iterator[_Branch]:
    for index, run in enumerate(plan.runs):
        if run.size is None and run.resistance is None:
            continue
        parts = _run_ohm_20(run, rulebook)
        ends = {
            FEED: ((run.from_point, FEED), (run.to_point, FEED)),
            RETURN: ((run.from_point, RETURN), (run.to_point, RETURN)),
        }
        at_bars = bars.get(run.from_point, 0.0) + bars.get(run.to_point, 0.0)
        for pole, (cable, fixed) in parts.items():
            a, b = ends[pole]
            yield _Branch(a, b, fixed + at_bars, cable, run=index, pole=pole)


def _run_ohm_20(run: Run, rulebook: Rulebook) -> dict[int, tuple[float, float]]:
    """Cable resistance at 20 °C and fixed resistance of each conductor of a run, by pole."""
    lengths = dict(zip((FEED, RETURN), conductor_lengths_m(run), strict=True))
    sizes = {FEED: run.size, RETURN: return_size(run)}
    computed: dict[int, tuple[float, float]] = {}
    for pole, length in lengths.items():
        if length == 0:
            continue
        size = sizes[pole]
        per_m = conductors.resistance_20_ohm_per_m(size, run.material, strand(run, rulebook)).value if size else 1.0
        fixed = joints_ohm(run) + protection_ohm(run, "feed" if pole == FEED else "return")
        computed[pole] = (per_m * length / run.parallel, fixed)
    return computed if run.resistance is None else _measured(run, computed)


def _measured(run: Run, computed: dict[int, tuple[float, float]]) -> dict[int, tuple[float, float]]:
    """A measured resistance covers all between the run's ends; it is shared out as the computed one would be."""
    assert run.resistance is not None
    alpha = conductors.temperature_coefficient(run.material).value
    at_20 = run.resistance.si / (1 + alpha * (run.resistance_temperature.si - 20))
    total = sum(cable for cable, _ in computed.values())
    return {pole: (at_20 * cable / total, 0.0) for pole, (cable, _) in computed.items()}


def _device_branches(index: int, device: Device, bars: dict[str, float]) -> Iterator[_Branch]:
    ohm = device_ohm(device) + bars.get(device.from_point, 0.0) + bars.get(device.to_point, 0.0)
    for pole, word in ((FEED, "feed"), (RETURN, "return")):
        if device.pole in (word, "both") and not (
            device.kind == "diode" and pole == (FEED if device.pole != "return" else RETURN)
        ):
            yield _Branch((device.from_point, pole), (device.to_point, pole), ohm, device=index, pole=pole)


def device_ohm(device: Device) -> float:
    """Resistance of a device: as stated, else typical of its kind."""
    return max(device.resistance.si if device.resistance is not None else CONTACT_OHM[device.kind], LEAST_OHM)


def linked(battery: Battery) -> bool:
    """Whether the strings of a battery stand apart in the network, joined by the link cables the plan states."""
    return battery.strings > 1 and battery.link is not None


def _string_ends(battery: Battery) -> list[tuple[tuple[str, int], tuple[str, int]]]:
    """Feed and return node of every string: the point's own at the take-off, inner nodes elsewhere.

    Taken off at the same end, both are at the first string; at opposite ends the return is at the last; at a bar
    every string has cables of its own to the point.
    """
    count, bar = battery.strings, battery.take_off == "bar"
    last = count - 1 if battery.take_off == "ends" else 0
    ends = []
    for place in range(count):
        inner = f"\x1f{battery.name}\x1f{place}"  # no name in a plan holds a control character
        feed = (battery.at, FEED) if place == 0 and not bar else (inner, FEED)
        back = (battery.at, RETURN) if place == last and not bar else (inner, RETURN)
        ends.append((feed, back))
    return ends


def _link_branches(battery: Battery, rulebook: Rulebook) -> Iterator[_Branch]:
    """Link cables between neighbouring strings, or from each string to the bar, one in each pole, at 20 °C."""
    assert battery.link is not None
    size = battery.link.size
    per_m = conductors.resistance_20_ohm_per_m(size, "copper", rulebook.default_strand).value if size else 0.0
    ohm = max(per_m * battery.link.length.si, LEAST_OHM)
    ends = _string_ends(battery)
    for pole in (FEED, RETURN):
        if battery.take_off == "bar":
            yield from (_Branch((battery.at, pole), one[pole], ohm, pole=pole) for one in ends)
        else:
            yield from (_Branch(one[pole], after[pole], ohm, pole=pole) for one, after in pairwise(ends))


def _source_bonds(plan: Plan) -> Iterator[_Branch]:
    """What joins the returns on both sides of a converter that is not isolated, or of a solar controller."""
    for source in plan.sources:
        if isinstance(source, Converter) and not source.isolated:
            yield _Branch((source.from_point, RETURN), (source.at, RETURN), source.return_bond.si, pole=BOND)
        if isinstance(source, Solar) and source.array is not None:
            yield _Branch((source.input_point, RETURN), (source.at, RETURN), CONTROLLER_BOND_OHM, pole=BOND)


def _chassis_bonds(plan: Plan, branches: list[_Branch], names: _Names, assumptions: list[str]) -> list[_Branch]:
    """Bonds of the runs that return through the chassis: at `to`, and at a source where nothing else joins it."""
    users = [run for run in plan.runs if run.return_path == "chassis"]
    if not users:
        return []
    chassis = (CHASSIS, RETURN)
    bond_ohm = plan.plan.chassis_bond.si
    bonds = [
        _Branch(chassis, (run.to_point, RETURN), bond_ohm + protection_ohm(run, "return"), run=index, pole=RETURN)
        for index, run in enumerate(plan.runs)
        if run.return_path == "chassis"
    ]
    reach = _Names()
    for key in list(names._parent):
        reach.merge(names.node(key), key)
    for branch in (*branches, *bonds):
        reach.merge(branch.a, branch.b)
    for run in users:
        if reach.node((run.from_point, RETURN)) != reach.node(chassis):
            point = _bonded_point(plan, reach, run.from_point)
            bonds.append(_Branch((point, RETURN), chassis, bond_ohm, pole=BOND))
            reach.merge((point, RETURN), chassis)
            assumptions.append(
                f'A bond of {plan.plan.chassis_bond} from the return of "{point}" to the chassis: '
                "runs return through the chassis and the plan shows no other way back from it."
            )
    return bonds


def _bonded_point(plan: Plan, reach: _Names, start: str) -> str:
    """Where a way back from the chassis is assumed: at the reference source, else the first source, that the return
    of `start` leads to; at `start` itself where it leads to none."""
    mine = reach.node((start, RETURN))
    order = sorted(plan.sources, key=lambda source: source.name != plan.reference)
    return next((source.at for source in order if reach.node((source.at, RETURN)) == mine), start)


def _arrays(
    plan: Plan,
    branches: list[_Branch],
    diodes: list[tuple[int, tuple[str, int], tuple[str, int]]],
    strings: list[tuple[int, tuple[str, int], tuple[str, int]]],
    names: _Names,
    assumptions: tuple[str, ...],
) -> Network:
    for branch in branches:
        names.node(branch.a)
        names.node(branch.b)
    numbers = names.numbered()
    return Network(
        plan=plan,
        node_count=max(numbers.values(), default=-1) + 1,
        nodes=numbers,
        a=np.array([numbers[one.a] for one in branches], dtype=np.int64),
        b=np.array([numbers[one.b] for one in branches], dtype=np.int64),
        fixed_ohm=np.array([one.fixed_ohm for one in branches], dtype=float),
        cable_ohm_20=np.array([one.cable_ohm_20 for one in branches], dtype=float),
        run=np.array([one.run for one in branches], dtype=np.int64),
        device=np.array([one.device for one in branches], dtype=np.int64),
        pole=np.array([one.pole for one in branches], dtype=np.int64),
        diodes=tuple((index, numbers[a], numbers[b]) for index, a, b in diodes),
        strings=tuple((index, numbers[a], numbers[b]) for index, a, b in strings),
        arrays=tuple(
            (index, numbers[one.array.at, FEED], numbers[one.array.at, RETURN])
            for index, one in enumerate(plan.sources)
            if isinstance(one, Solar) and one.array is not None
        ),
        assumptions=assumptions,
    )
