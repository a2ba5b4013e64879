"""What may be wrong in an installation, and how far its sound parts may differ from the plan.

A cause is one quantity that is not as planned: ohms more at a place (a conductor with its joints and protection, a
device, a bond), a cable of another length or size (both its conductors together), a load that draws another current,
a source of another voltage or with more inner resistance. Sound parts differ by the plan's tolerances, and by what
nobody states: see the constants below.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from farvolt import conductors
from farvolt.context import label
from farvolt.network import BOND, DIODE_DROP_V, FEED, Floats, Network, insulation_degC, joints_ohm
from farvolt.operating import Operating
from farvolt.plan import Battery, Case, Plan, Run
from farvolt.response import Atoms
from farvolt.rulebook import Rulebook
from farvolt.temperatures import run_ambient_degC

Kind = Literal["joint", "cable", "load", "source volts", "source resistance"]

LEAST_OHM, MOST_OHM = 2e-3, 2.0
"""A bad joint has between these many ohms more than planned; every order of magnitude is as likely."""

LASTING_W = 50.0
"""A joint that turns more than about this into heat does not last until it is measured (a judgement)."""

SOUND_JOINTS_OHM = 0.3e-3
"""Two sound terminations of a conductor: up to about so much (common practice, from memory: provisional)."""

SOUND_FIXED_SHARE = 0.2
"""Sound protection, devices and bonds differ from what is stated by about so much (from memory: provisional)."""

SOUND_INNER_SHARE = 0.25
"""And so does the inner resistance of a battery, with its age and charge (from memory: provisional)."""

_EVEN = 1 / np.sqrt(3)
"""Standard deviation of what lies evenly within ±1."""

Scaled = tuple[tuple[int, float], ...]
"""Atoms that move together, each with its scale."""


@dataclass(frozen=True)
class Cause:
    """One quantity that may be wrong. Its value moves its atoms; `values` are those held possible, `weight` its odds
    beside other causes. `parts` is what lies between the two ends of a place."""

    kind: Kind
    name: str
    """Of the run, device, load or source."""
    words: str
    atoms: Scaled
    values: Floats
    weight: float
    pole: str = ""
    parts: tuple[str, ...] = ()
    branch: int = -1
    prior: Floats | None = None
    """Logarithm of how likely each of `values` is beside an even spread; even unless given."""
    at: int = -1
    """Place of the run, load or source in its table of the plan; -1 where it has none."""


_OHMS = np.geomspace(LEAST_OHM, MOST_OHM, 220)
_LONGER = np.concatenate([np.linspace(-0.65, -0.12, 54), np.geomspace(0.12, 4.0, 110)])
_LOADS = np.concatenate([np.linspace(-1.0, -0.12, 60), np.geomspace(0.12, 5.0, 110)])
_VOLTS = np.concatenate([-np.geomspace(0.012, 0.25, 90), np.geomspace(0.012, 0.12, 60)])

_WEIGHTS: dict[Kind, float] = {
    "joint": 1.0, "cable": 0.15, "load": 0.3, "source volts": 1.5, "source resistance": 0.7,
}  # fmt: skip
"""Odds of one cause of each kind beside one bad joint: a judgement, stated where results are shown."""


def causes(network: Network, condition: Operating, atoms: Atoms, factor_of_20: Floats) -> tuple[Cause, ...]:
    """All causes of a plan that is built as `network`."""
    plan = network.plan
    return (
        *_places(network),
        *_cables(network, factor_of_20),
        *(
            _cause("load", one.name, f'load "{one.name}"', ((atoms.load(at), 1.0),), _LOADS, at=at)
            for at, one in enumerate(plan.loads)
        ),
        *_sources(plan, network, condition, atoms),
    )


def _cause(
    kind: Kind, name: str, words: str, atoms: Scaled, values: Floats, pole: str = "", parts: tuple[str, ...] = (),
    branch: int = -1, at: int = -1,
) -> Cause:  # fmt: skip
    # The farther a cable or a load is from what is planned, the less likely: a lead of twice its length is rare.
    far = _evened(-np.abs(values)) if kind in ("cable", "load") else None
    return Cause(kind, name, words, atoms, values, _WEIGHTS[kind], pole, parts, branch, far, at)


def _places(network: Network) -> Iterator[Cause]:
    plan = network.plan
    ends = {node: point for (point, _), node in reversed(network.nodes.items()) if not point.startswith("\x1f")}
    for branch in range(len(network.a)):
        run, device, pole = int(network.run[branch]), int(network.device[branch]), int(network.pole[branch])
        word = "feed" if pole == FEED else "return"
        at = -1
        parts: tuple[str, ...] = ()
        if run >= 0:
            entry, at = plan.runs[run], run
            name, words = entry.name, f"{word} of run {label(entry)}"
            if network.cable_ohm_20[branch] == 0:
                words, parts = f"chassis bond of run {label(entry)}", (f'bond at "{entry.to_point}"',)
            else:
                parts = _parts(entry, word)
        elif device >= 0:
            one = plan.devices[device]
            name, words = one.name, f'{one.kind} "{one.name}" in the {word}'
            parts = (f'its terminals at "{one.from_point}" and "{one.to_point}"', "its contacts")
        else:
            points = [ends.get(int(node), "a string") for node in (network.a[branch], network.b[branch])]
            what = "bond" if pole == BOND else f"link cable in the {word}"
            name, words = f"{points[0]} to {points[1]}", f'{what} from "{points[0]}" to "{points[1]}"'
        yield _cause("joint", name, words, ((branch, 1.0),), _OHMS, word, parts, branch, at)


def _parts(run: Run, pole: str) -> tuple[str, ...]:
    """What lies in one conductor of a run, between its two points."""
    guards = [
        f'{one.type} {one.rating} at "{run.from_point if one.end == "from" else run.to_point}"'
        for one in run.protections
        if one.pole == pole
    ]
    return (
        f'joints at "{run.from_point}"',
        *(f"protection {guard} and its holder" for guard in guards),
        f"cable of {run.length}",
        f'joints at "{run.to_point}"',
    )


def _cables(network: Network, factor_of_20: Floats) -> Iterator[Cause]:
    """Runs whose cable is longer, shorter, thicker or thinner than planned: both conductors by the same share."""
    for at, run in enumerate(network.plan.runs):
        atoms = _cable_atoms(network, at, float(factor_of_20[at]))
        if atoms:
            yield _cause("cable", run.name, f"cable of run {label(run)}", atoms, _LONGER, at=at)


def _cable_atoms(network: Network, run: int, factor: float) -> Scaled:
    branches = np.flatnonzero((network.run == run) & (network.cable_ohm_20 > 0))
    return tuple((int(branch), float(network.cable_ohm_20[branch]) * factor) for branch in branches)


def source_ports(network: Network, source: int) -> list[int]:
    """The source ports of a source: its own, and those of its strings that stand apart."""
    first = len(network.plan.sources)
    strings = [first + place for place, (index, _, _) in enumerate(network.strings) if index == source]
    return strings or [source]


def _sources(plan: Plan, network: Network, condition: Operating, atoms: Atoms) -> Iterator[Cause]:
    for at, source in enumerate(plan.sources):
        ports = source_ports(network, at)
        volts = float(condition.volts[ports[0]])
        moved = tuple((atoms.volts(port), volts) for port in ports)
        yield _cause("source volts", source.name, f'voltage of "{source.name}"', moved, _VOLTS, at=at)
        if isinstance(source, Battery):
            inner = tuple((atoms.ohm(port), 1.0) for port in ports)
            words = f'inner resistance of "{source.name}"'
            yield _cause("source resistance", source.name, words, inner, _OHMS, at=at)


def lasting(cause: Cause, heat_W: Floats) -> Cause:
    """A bad joint with values that would soon burn out made unlikely; `heat_W` is over its values."""
    return replace(cause, prior=_evened(-np.log1p((heat_W / LASTING_W) ** 2)))


def _evened(logs: Floats) -> Floats:
    """Logarithms of odds over the values of a cause, moved so that the odds are 1 on average."""
    evened: Floats = logs - np.log(np.mean(np.exp(logs)))
    return evened


# Sound parts ---------------------------------------------------------------------------------------------------------


def sound_degC(plan: Plan, rulebook: Rulebook, case: Case) -> tuple[Floats, Floats]:
    """Over runs: the middle and half the width of the range of conductor temperatures that the tolerances allow."""
    stated = plan.tolerances
    least = [stated.coldest.si if stated.coldest else run_ambient_degC(plan, run, case) for run in plan.runs]
    most = [stated.hottest.si if stated.hottest else insulation_degC(run, rulebook) for run in plan.runs]
    low, high = np.array(least, dtype=float), np.array(most, dtype=float)
    return (low + high) / 2, np.abs(high - low) / 2


def alphas(plan: Plan) -> Floats:
    """Temperature coefficient of each run's metal at 20 °C, per K."""
    return np.array([conductors.temperature_coefficient(run.material).value for run in plan.runs], dtype=float)


def sound_spread(
    network: Network, rulebook: Rulebook, condition: Operating, atoms: Atoms
) -> list[tuple[Scaled, float]]:
    """How sound parts differ from the plan: groups of atoms that move together, each with a standard deviation."""
    plan, stated = network.plan, network.plan.tolerances
    middle, half = sound_degC(plan, rulebook, condition.case)
    alpha = alphas(plan)
    factor = 1 + alpha * (middle - 20)
    found: list[tuple[Scaled, float]] = []
    for at, run in enumerate(plan.runs):
        length = 0.0 if run.resistance is not None else stated.length.si
        share = _EVEN * float(np.hypot(length, alpha[at] * half[at] / factor[at]))
        found.append((_cable_atoms(network, at, float(factor[at])), share))
    for branch in range(len(network.a)):
        joints = _sound_joints_ohm(plan, int(network.run[branch]), network.cable_ohm_20[branch] > 0)
        fixed = SOUND_FIXED_SHARE * float(network.fixed_ohm[branch])
        found.append((((branch, 1.0),), _EVEN * float(np.hypot(joints, fixed))))
    found += [(((atoms.load(at), 1.0),), _EVEN * stated.loads.si) for at in range(len(plan.loads))]
    for at, source in enumerate(plan.sources):
        ports = source_ports(network, at)
        wide = _EVEN * stated.source_volts.si
        found.append((tuple((atoms.volts(port), float(condition.volts[port])) for port in ports), wide))
        if isinstance(source, Battery):
            inner = tuple((atoms.ohm(port), float(condition.ohm[port])) for port in ports)
            found.append((inner, _EVEN * SOUND_INNER_SHARE))
    first = len(condition.source_a) - len(network.diodes)
    found += [
        (((atoms.volts(first + place), 1.0),), _EVEN * SOUND_FIXED_SHARE * DIODE_DROP_V)
        for place in range(len(network.diodes))
    ]
    return [(scaled, wide) for scaled, wide in found if scaled and wide > 0]


def _sound_joints_ohm(plan: Plan, run: int, cable: bool) -> float:
    """How far the joints of a sound conductor may lie above what is planned."""
    if run < 0 or not cable:
        return SOUND_JOINTS_OHM
    own = joints_ohm(plan.runs[run]) if plan.runs[run].resistance is None else 0.0
    return float(np.hypot(SOUND_JOINTS_OHM, own * max(plan.tolerances.joints - 1, 0.0)))
