"""Bolted shorts at many places of one network: each the exact solution of the whole network with that short in it.

Conductors and batteries are linear. What is one-way or limited (chargers, controllers, converters, diodes) delivers
clip((V − u)/r, 0, limit), with a trace of leak. The network is factorised once with all of these in their sloping
range; a short and every port that stands at a limit are then currents injected into it (superposition), so that a
place costs one solution of a triangular system and a small dense one over the limited ports. Which of these stand at
a limit is found by pivoting on the linear complementarity problem that their laws make: its matrix is positive
definite, so there is exactly one answer (Cottle, Pang and Stone, The Linear Complementarity Problem, 1992, ch. 3).
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from farvolt.equations import IMBALANCE_A
from farvolt.linear import DENSE_LIMIT, Factor, factor
from farvolt.network import Floats, Ints
from farvolt.operating import components

LEAK_S = 1e-6
"""Leak across every one-way port, as of a blocking diode: no part of a network floats."""

BLOCK = 32
"""Places solved together: few enough for what they need to stay in a processor's cache."""

_EPSILON = float(np.finfo(float).eps)
_ROUNDS = 20
LOW, SLOPE, HIGH = -1, 0, 1


@dataclass(frozen=True)
class Ports:
    """What feeds a fault, as arrays: each delivers clip((volts − u)/ohm, low, high) at `a`, back at `b`."""

    a: Ints
    b: Ints
    volts: Floats
    ohm: Floats
    low: Floats
    high: Floats
    alive: np.ndarray
    """False for a diode, which feeds nothing by itself."""

    @property
    def bounded(self) -> np.ndarray:
        """Ports that are one-way or limited."""
        return np.flatnonzero(np.isfinite(self.low) | np.isfinite(self.high))


@dataclass(frozen=True, slots=True)
class Spot:
    """One end of a short: a node, or a place within a branch with some resistance to either end of it."""

    node: int
    branch: int = -1
    other: int = -1
    """The far end of the branch, counted from `node`."""
    near_ohm: float = 0.0
    far_ohm: float = 0.0
    near_fixed_ohm: float = 0.0
    """The part of `near_ohm` that is no cable."""

    @property
    def weights(self) -> tuple[tuple[int, float], ...]:
        """What an ampere at this place comes to at the ends of the branch."""
        if self.branch < 0:
            return ((self.node, 1.0),)
        share = self.near_ohm / (self.near_ohm + self.far_ohm)
        return ((self.node, 1 - share), (self.other, share))

    @property
    def inner_ohm(self) -> float:
        """Resistance of this place against the ends of its branch: the two parts side by side."""
        if self.branch < 0:
            return 0.0
        return self.near_ohm * self.far_ohm / (self.near_ohm + self.far_ohm)


@dataclass(frozen=True, slots=True)
class Place:
    """Where a short is made: from a feed conductor to a return conductor."""

    feed: Spot
    back: Spot


@dataclass(frozen=True)
class Shorted:
    """The network with one short in it. Arrays are over the circuit's ports and branches (from a to b).

    Within a branch that holds the place itself, `branch_A` is what would flow with the fault current drawn from both
    ends in the proportion of their resistance; `parts_A` gives the true currents of the two parts.
    """

    place: Place
    amps: float
    port_A: Floats
    branch_A: Floats
    imbalance_A: float
    certified: bool
    """Kirchhoff's current law holds at every node: to the rounding of the currents there, or to a billionth of the
    fault current."""
    limited: np.ndarray
    """Over ports: at its limit."""

    def parts_A(self, spot: Spot, branch_from_node: bool) -> tuple[float, float]:
        """Current that arrives at a spot within a branch from its `node` and from its `other` end.

        `branch_from_node`: the branch runs from the spot's `node`. At the return spot both are negative.
        """
        through = float(self.branch_A[spot.branch]) * (1.0 if branch_from_node else -1.0)
        (_, near), (_, far) = spot.weights
        drawn = self.amps if spot is self.place.feed else -self.amps
        return through + near * drawn, -through + far * drawn


@dataclass(frozen=True)
class _Block:
    """Places solved together. By node and place: what an ampere of each short draws, and the volts that it takes off;
    by bounded port and place: what the port injects beyond its sloping range; by port and place: its limit."""

    draws: Floats
    by_place: Floats
    injected: Floats
    limits: np.ndarray
    amps: Floats


class Circuit:
    """One network of conductors and ports, ready to be shorted anywhere."""

    def __init__(self, node_count: int, a: Ints, b: Ints, ohm: Floats, ports: Ports) -> None:
        self.a, self.b, self.siemens, self.ports = a, b, 1 / ohm, ports
        self._bounded = ports.bounded
        self._leak_S = np.zeros(len(ports.a))
        self._leak_S[self._bounded] = LEAK_S
        self.part = components(node_count, np.concatenate([a, ports.a]), np.concatenate([b, ports.b]))
        self.live = np.isin(self.part, self.part[ports.a[ports.alive]])
        self._unknown = self._without_grounds(ports)
        self._incidence = _incidence(node_count, a, b)
        self._port_incidence = _incidence(node_count, ports.a, ports.b)
        self._allowed_S = self._largest_S(node_count)
        self._factor = self._factorised(node_count)
        self._start_V = self._spread(self._port_incidence @ (ports.volts / ports.ohm))
        self._by_port_V = self._spread(_dense(self._port_incidence[:, self._bounded]))

    def _without_grounds(self, ports: Ports) -> np.ndarray:
        """The nodes whose voltage is to be found: all that is fed but one of each part."""
        grounds = {int(self.part[node]): int(node) for node in ports.b[ports.alive]}
        unknown = self.live.copy()
        unknown[list(grounds.values())] = False
        return np.flatnonzero(unknown)

    def _largest_S(self, node_count: int) -> Floats:
        """Over nodes: the largest conductance that meets there, which the rounding of a sum goes with."""
        largest = np.zeros(node_count)
        for nodes in (self.a, self.b):
            np.maximum.at(largest, nodes, self.siemens)
        for nodes in (self.ports.a, self.ports.b):
            np.maximum.at(largest, nodes, 1 / self.ports.ohm)
        return largest

    def _factorised(self, node_count: int) -> Factor:
        p = self.ports
        a, b = np.concatenate([self.a, p.a]), np.concatenate([self.b, p.b])
        siemens = np.concatenate([self.siemens, 1 / p.ohm + self._leak_S])
        position = np.full(node_count, -1)
        position[self._unknown] = np.arange(len(self._unknown))
        rows, columns = position[np.concatenate([a, b, a, b])], position[np.concatenate([a, b, b, a])]
        values = np.concatenate([siemens, siemens, -siemens, -siemens])
        keep = (rows >= 0) & (columns >= 0)
        return factor(len(self._unknown), rows[keep], columns[keep], values[keep], symmetric=True)

    def _spread(self, injected_A: Floats) -> Floats:
        """Node volts for currents injected at the nodes, every port in its sloping range and without EMF."""
        volts = np.zeros_like(injected_A)
        if len(self._unknown) and injected_A.size:
            volts[self._unknown] = self._factor.solve(injected_A[self._unknown])
        return volts

    def shorted(self, places: Sequence[Place]) -> Iterator[Shorted]:
        """The network with a short at each place in turn; no current where feed and return have no common source."""
        for first in range(0, len(places), BLOCK):
            yield from self._block(places[first : first + BLOCK])

    def through(self, places: Sequence[Place], branches: Ints) -> Iterator[Floats]:
        """For each place, the currents in some branches alone; without what shows that they balance."""
        a, b = self.a[branches], self.b[branches]
        for first in range(0, len(places), BLOCK):
            part = self._solved(places[first : first + BLOCK])
            start, by_port = self._start_V[a] - self._start_V[b], self._by_port_V[a] - self._by_port_V[b]
            across = start[:, None] + by_port @ part.injected - (part.by_place[a] - part.by_place[b]) * part.amps
            yield from (self.siemens[branches, None] * across).T

    def _solved(self, places: Sequence[Place]) -> "_Block":
        draws = self._draws(places)
        by_place = self._spread(draws)
        inner = np.array([place.feed.inner_ohm + place.back.inner_ohm for place in places])
        ohm = np.einsum("nk,nk->k", draws, by_place) + inner
        joined = ohm > 0
        ohm = np.where(joined, ohm, 1.0)
        at_ports = self._across(by_place)
        injected, limits = self._corrections(at_ports, draws.T @ self._start_V, ohm)
        amps = (draws.T @ self._start_V + np.einsum("mk,mk->k", at_ports[self._bounded], injected)) / ohm
        return _Block(draws, by_place, injected, limits, np.where(joined, amps, 0.0))

    def _block(self, places: Sequence[Place]) -> Iterator[Shorted]:
        p, part = self.ports, self._solved(places)
        draws, amps, limits = part.draws, part.amps, part.limits
        volts = self._start_V[:, None] + self._by_port_V @ part.injected - part.by_place * amps
        branch_A = self.siemens[:, None] * (volts[self.a] - volts[self.b])
        across = self._across(volts)
        port_A = np.clip((p.volts[:, None] - across) / p.ohm[:, None], p.low[:, None], p.high[:, None])
        out = self._incidence @ branch_A + draws * amps
        out -= self._port_incidence @ (port_A - self._leak_S[:, None] * across)
        out = np.abs(np.where(self.live[:, None], out, 0.0))
        allowed = 64 * _EPSILON * self._allowed_S[:, None] * np.abs(volts).max(axis=0, initial=0.0)
        certified = np.all(out <= np.maximum(allowed, IMBALANCE_A * np.maximum(1.0, np.abs(amps))), axis=0)
        for k, place in enumerate(places):
            yield Shorted(
                place, float(amps[k]), port_A[:, k], branch_A[:, k], float(out[:, k].max(initial=0.0)),
                bool(certified[k]), limits[:, k] == HIGH,
            )  # fmt: skip

    def _draws(self, places: Sequence[Place]) -> Floats:
        """Over nodes and places: what an ampere through each short takes out of the nodes."""
        found = np.zeros((len(self.live), len(places)))
        for k, place in enumerate(places):
            feed, back = place.feed.node, place.back.node
            if self.live[feed] and self.part[feed] == self.part[back]:
                for spot, sign in ((place.feed, 1.0), (place.back, -1.0)):
                    for node, weight in spot.weights:
                        found[node, k] += sign * weight
        return found

    def _across(self, volts: Floats) -> Floats:
        across: Floats = volts[self.ports.a] - volts[self.ports.b]
        return across

    def _corrections(self, at_ports: Floats, open_V: Floats, ohm: Floats) -> tuple[Floats, np.ndarray]:
        """Over bounded ports and places: what each injects beyond its sloping range; over ports: at which limit."""
        few, count = self._bounded, len(ohm)
        injected, limits = np.zeros((len(few), count)), np.zeros((len(self.ports.a), count), dtype=np.int64)
        if not len(few):
            return injected, limits
        between = self._across(self._by_port_V)[few]
        start = self._across(self._start_V)[few]
        law = _Bounded(self.ports, few)
        state = np.where(np.isfinite(law.high), HIGH, SLOPE)
        for k in range(count):
            seen = at_ports[few, k]
            injected[:, k], state = law.settle(
                start - seen * open_V[k] / ohm[k], between - np.outer(seen, seen) / ohm[k], state
            )
            limits[few, k] = state
        return injected, limits


class _Bounded:
    """The one-way and limited ports as they see the rest of the network: u = start + between · injected."""

    def __init__(self, ports: Ports, few: np.ndarray) -> None:
        self.volts, self.siemens = ports.volts[few], 1 / ports.ohm[few]
        self.low, self.high = ports.low[few], ports.high[few]

    def settle(self, start: Floats, between: Floats, state: np.ndarray) -> tuple[Floats, np.ndarray]:
        """What the ports inject beyond their sloping range, and at which limit each stands, from a first guess.

        All that stand wrongly are moved at once; where that goes round in circles only the first of them, which
        always ends (Murty's rule).
        """
        slack = 64 * _EPSILON * self.siemens * (np.abs(self.volts) + np.abs(start).max())
        injected = np.zeros(len(start))
        for step in range(_ROUNDS * (1 + len(start))):
            injected = self._injected(start, between, state)
            amps = (self.volts - start - between @ injected) * self.siemens
            beyond = np.where(amps < self.low - slack, LOW, np.where(amps > self.high + slack, HIGH, SLOPE))
            # From one limit to the other a port goes by way of its sloping range, as the rule demands.
            wanted = np.where((state == SLOPE) | (state == beyond), beyond, SLOPE)
            wrong = np.flatnonzero(wanted != state)
            if not len(wrong):
                break
            moved = wrong if step < _ROUNDS else wrong[:1]
            state = state.copy()
            state[moved] = wanted[moved]
        return injected, state

    def _injected(self, start: Floats, between: Floats, state: np.ndarray) -> Floats:
        held = np.flatnonzero(state != SLOPE)
        injected = np.zeros(len(start))
        if len(held):
            bound = np.where(state == HIGH, self.high, self.low)[held]
            offset = bound - self.siemens[held] * self.volts[held]
            among = between[np.ix_(held, held)]
            matrix = np.eye(len(held)) - among * self.siemens[held]
            volts = np.linalg.solve(matrix, start[held] + among @ offset)
            injected[held] = offset + self.siemens[held] * volts
        return injected


def _incidence(node_count: int, a: Ints, b: Ints) -> Any:
    """Nodes by branches: 1 where a branch starts, -1 where it ends; sparse where it is large."""
    rows, columns = np.concatenate([a, b]), np.tile(np.arange(len(a)), 2)
    values = np.repeat([1.0, -1.0], len(a))
    if node_count <= DENSE_LIMIT:
        matrix = np.zeros((node_count, len(a)))
        np.add.at(matrix, (rows, columns), values)
        return matrix
    from scipy.sparse import coo_array

    return coo_array((values, (rows, columns)), shape=(node_count, len(a))).tocsc()


def _dense(matrix: Any) -> Floats:
    return np.asarray(matrix if isinstance(matrix, np.ndarray) else matrix.toarray())
