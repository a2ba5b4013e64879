"""Node volts of a circuit's element list by Newton's method: what ngspice finds, at once.

For many thousands of circuits, of which a sample is held against ngspice. It shares nothing with the solver: the
elements are those of `circuit`, slopes are differences, the loads rise in steps.
"""

import numpy as np

from circuit import Circuit, Coupling, currents, imbalance

STEPS = 8
_HAIR_V = 1e-7
_BALANCED_A = 1e-8


def circuit_volts(circuit: Circuit, start: dict[int, float]) -> dict[int, float] | None:
    """Volts at every fed node, one node of each part at 0; None where no balance is found."""
    nodes = sorted(circuit.live)
    row = {node: at for at, node in enumerate(nodes)}
    free = np.array([node not in {min(part) for part in circuit.parts} for node in nodes])
    volts = np.array([start[node] for node in nodes])
    for share in np.linspace(0, 1, STEPS + 1):
        for _ in range(60):
            out, matrix = _around(circuit, nodes, row, volts, float(share))
            if np.abs(out[free]).max(initial=0.0) < _BALANCED_A:
                break
            try:
                step = np.linalg.solve(matrix[np.ix_(free, free)], -out[free])
            except np.linalg.LinAlgError:
                return None
            volts[free] += step * min(1.0, 2.0 / max(float(np.abs(step).max()), 1e-12))
        else:
            return None
    found = {node: float(volts[at]) for node, at in row.items()}
    return found if max(map(abs, imbalance(circuit, found).values()), default=0.0) < 1e-6 else None


def _around(
    circuit: Circuit, nodes: list[int], row: dict[int, int], volts: np.ndarray, share: float
) -> tuple[np.ndarray, np.ndarray]:
    """Current that leaves each node, and how it changes with the volts of each."""
    here = {node: float(volts[row[node]]) for node in nodes}
    out, matrix = np.zeros(len(nodes)), np.zeros((len(nodes), len(nodes)))
    for a, b, amps in currents(circuit, here, share):
        out[row[a]] += amps
        out[row[b]] -= amps
    elements = [*((one.a, one.b, 1 / one.ohm) for one in circuit.resistors), *_slopes(circuit, here, share)]
    for a, b, siemens in elements:
        i, j = row[a], row[b]
        matrix[i, i] += siemens
        matrix[j, j] += siemens
        matrix[i, j] -= siemens
        matrix[j, i] -= siemens
    for one in circuit.couplings:
        _couple(one, here, row, matrix, share)
    return out, matrix


def _slopes(circuit: Circuit, here: dict[int, float], share: float) -> list[tuple[int, int, float]]:
    found = []
    for feeder in circuit.feeders:
        u = here[feeder.a] - here[feeder.b]
        slope = (feeder.amps(u - _HAIR_V) - feeder.amps(u + _HAIR_V)) / (2 * _HAIR_V)
        found.append((feeder.a, feeder.b, max(slope, 1e-9)))
    for drain in circuit.drains:
        u = here[drain.a] - here[drain.b]
        slope = (drain.current(u + _HAIR_V, share) - drain.current(u - _HAIR_V, share)) / (2 * _HAIR_V)
        found.append((drain.a, drain.b, slope))
    return found


def _couple(
    one: Coupling, here: dict[int, float], row: dict[int, int], matrix: np.ndarray, share: float
) -> None:
    """How what a converter takes follows the volts at both of its sides."""

    def drawn(given: float, taken: float) -> float:
        watts = given * one.feeder.amps(given) / one.efficiency + share * one.standby_W
        return one.drain.current(taken, watts=watts)

    given, taken = here[one.feeder.a] - here[one.feeder.b], here[one.drain.a] - here[one.drain.b]
    for end, slope in (
        (one.feeder, (drawn(given + _HAIR_V, taken) - drawn(given - _HAIR_V, taken)) / (2 * _HAIR_V)),
        (one.drain, (drawn(given, taken + _HAIR_V) - drawn(given, taken - _HAIR_V)) / (2 * _HAIR_V)),
    ):
        for node, sign in ((one.drain.a, 1.0), (one.drain.b, -1.0)):
            matrix[row[node], row[end.a]] += sign * slope
            matrix[row[node], row[end.b]] -= sign * slope
