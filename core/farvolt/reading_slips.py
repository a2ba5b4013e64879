"""Readings that look like a slip: leads the wrong way round, millivolts for volts, two that cannot both be true."""

from collections.abc import Iterator

import numpy as np

from farvolt.errors import Fault
from farvolt.evidence import Evidence
from farvolt.installation import Measured
from farvolt.network import Floats
from farvolt.readings import Reading, ReadingsError
from farvolt.units import number

_FAR, _NEAR = 8.0, 4.0
"""A slip is offered where a reading is this many standard deviations off the plan, and within so many once mended."""

_SLIP = 0.02
"""Odds of a slip, before anything is compared: one reading in fifty, a judgement."""

_DOUBTS = 2.0
"""Readings that close a loop contradict where their sum exceeds so many times what their meter allows."""


def refuse_slips(found: Measured, evidence: Evidence) -> None:
    """Raise ReadingsError for readings that contradict each other or physics, or look like a slip."""
    faults = [*_alone(found, evidence), *_loops(found)]
    if faults:
        raise ReadingsError(sorted(faults, key=lambda one: int(one.place.split()[1])))


_MENDED = (
    (-1.0, "looks like leads the wrong way round"),
    (1e-3, "looks like thousandths given as whole units"),
    (1e3, "looks like whole units given as thousandths"),
    (-1e-3, "looks like thousandths given as whole units, with the leads the wrong way round"),
)


def _alone(found: Measured, evidence: Evidence) -> Iterator[Fault]:
    """Readings that are far from the plan, or impossible, and near it once a sign or a factor of 1000 is mended."""
    sound = np.sqrt(np.sum(evidence.sound**2, axis=1))
    spread = np.hypot(sound, evidence.meter)
    for at, reading in enumerate(found.readings):
        planned, most = float(evidence.response.planned[at]), _most(found, at)
        impossible = abs(reading.value) - reading.limit > most
        if impossible or abs(reading.value - planned) > _FAR * spread[at]:
            near = _near(reading, planned, float(sound[at]), impossible)
            if impossible or (near is not None and _likelier(evidence, at, near[0])):
                yield _fault(reading, planned, most, near, impossible)


def _most(found: Measured, at: int) -> float:
    """No voltage between two nodes exceeds what all sources of its state have together."""
    if found.readings[at].run:
        return float("inf")
    condition = found.states[at].condition
    volts = np.where(condition.source_on, np.maximum(condition.volts, 0.0), 0.0)
    return 1.3 * float(volts.sum())


def _near(reading: Reading, planned: float, sound: float, impossible: bool) -> tuple[float, str] | None:
    """What the reading may have been meant as, and why. `sound` is the standard deviation of sound parts."""
    for times, words in _MENDED:
        mended = times * reading.value
        allowed = _NEAR * float(np.hypot(sound, abs(times) * reading.limit))
        if impossible:
            allowed += 0.5 * abs(planned)
        # A value of nothing, planned or read, tells no sign and no unit.
        if abs(mended - planned) <= allowed and abs(planned) > 2 * sound and abs(mended) > abs(planned) / 2:
            return mended, words
    return None


def _likelier(evidence: Evidence, at: int, mended: float) -> bool:
    """Whether a slip explains a reading better than anything that may be wrong with the installation."""
    times = abs(mended / float(evidence.read[at]))
    meant = evidence.reread(at, mended, times * float(evidence.limits[at]))
    return meant.log_likelihood() + float(np.log(_SLIP * times)) > evidence.log_likelihood()


def _fault(
    reading: Reading, planned: float, most: float, near: tuple[float, str] | None, impossible: bool
) -> Fault:
    column = "amps" if reading.run else "volts"
    problem = near[1] if near is not None else ""
    if impossible:
        all_of_it = f"is more than all sources together have ({number(most)} V)"
        problem = f"{all_of_it}; {problem}" if problem else all_of_it
    accepted = f"about {number(planned, 4)} {reading.unit} by the plan {reading.where}"
    offered = f'"{number(near[0], 4)} {reading.unit}"' if near is not None else ""
    return Fault(reading.place, column, f'"{reading.written}"', problem, accepted, offered)


def _loops(found: Measured) -> Iterator[Fault]:
    """Voltages of one state whose sum around a loop is not nothing (Kirchhoff's voltage law)."""
    for _, places in found.by_state:
        volts = [at for at in places if not found.readings[at].run]
        tree: dict[int, tuple[int, int, float]] = {}
        for at in volts:
            path = _path(tree, found, at)
            if path is None:
                _join(tree, found, at)
            else:
                yield from _contradiction(found, [(at, 1.0), *path])


def _join(tree: dict[int, tuple[int, int, float]], found: Measured, at: int) -> None:
    """Hang the tree of one end below the other: each node knows the reading that leads up, and its sign."""
    a, b, _ = found.probes[at]
    above, via, sign = b, at, 1.0
    node: int | None = a
    while node is not None:
        before = tree.get(node)
        tree[node] = (above, via, sign)
        if before is None:
            return
        above, via, sign, node = node, before[1], -before[2], before[0]


def _up(tree: dict[int, tuple[int, int, float]], node: int) -> dict[int, list[tuple[int, float]]]:
    """Every node on the way up with the readings that lead there."""
    found: dict[int, list[tuple[int, float]]] = {node: []}
    way: list[tuple[int, float]] = []
    while node in tree:
        node, via, sign = tree[node]
        way = [*way, (via, sign)]
        found[node] = way
    return found


def _path(
    tree: dict[int, tuple[int, int, float]], found: Measured, at: int
) -> list[tuple[int, float]] | None:
    """The readings that lead back from the end of one to its start, with their signs; None where none do."""
    a, b, _ = found.probes[at]
    from_a, from_b = _up(tree, a), _up(tree, b)
    meet = next((node for node in from_a if node in from_b), None)
    if meet is None:
        return None
    return [(via, -sign) for via, sign in from_a[meet]] + list(from_b[meet])


def _contradiction(found: Measured, loop: list[tuple[int, float]]) -> Iterator[Fault]:
    readings = [found.readings[at] for at, _ in loop]
    signs: Floats = np.array([sign for _, sign in loop])
    values = np.array([one.value for one in readings])
    allowed = _DOUBTS * sum(one.limit for one in readings)
    total = float(signs @ values)
    if abs(total) <= allowed:
        return
    rows = ", ".join(str(number_) for number_ in sorted(one.row for one in readings))
    near = ""
    for at, one in enumerate(readings):
        rest = total - signs[at] * values[at]
        mended = next((times for times, _ in _MENDED if abs(rest + signs[at] * times * values[at]) <= allowed), None)
        if mended is not None and abs(one.value) > one.limit:
            near = f'"{number(mended * one.value, 4)} {one.unit}" in row {one.row}'
            break
    last = max(readings, key=lambda one: one.row)
    problem = f"rows {rows} contradict each other: around the loop {number(abs(total))} V are left"
    accepted = f"at most {number(allowed)} V by the accuracy of the meter"
    yield Fault(last.place, "volts", f'"{last.written}"', problem, accepted, near)
