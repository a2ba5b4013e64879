"""Bolted shorts at many places of one network: each the exact solution of the whole network with that short in it.

Conductors and batteries are linear. What is one-way or limited (chargers, controllers, converters, diodes) delivers
clip((V − u)/r, 0, limit), with a trace of leak. The network is factorised once with all of these in their sloping
range, without its spurs; a short and every port that stands at a limit are then currents injected into it
(superposition), so that a place costs one solution of a triangular system and a small dense one over the limited
ports. Which of these stand at
a limit is found by pivoting on the linear complementarity problem that their laws make: its matrix is positive
definite, so there is exactly one answer (Cottle, Pang and Stone, The Linear Complementarity Problem, 1992, ch. 3).
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from farvolt.equations import IMBALANCE_A
from farvolt.linear import DENSE_LIMIT, Factor, factor
from farvolt.network import Floats, Ints
from farvolt.operating import components
from farvolt.spurs import spurs

LEAK_S = 1e-6
"""Leak across every one-way port, as of a blocking diode: no part of a network floats."""

BLOCK = 32
"""The fewest places that are solved together."""

_NUMBERS = 100_000
"""Numbers in an array of the places solved together: few enough to stay in a processor's cache."""

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
    """The network with one short in it. `port_A` and `limited` are over the circuit's ports."""

    place: Place
    amps: float
    port_A: Floats
    imbalance_A: float
    certified: bool
    """Kirchhoff's current law holds at every node: to the rounding of the currents there, or to a billionth of the
    fault current."""
    limited: np.ndarray
    """Over ports: at its limit."""
    circuit: "Circuit"
    volts: Floats
    """Over the nodes that the circuit solves for."""

    @cached_property
    def branch_A(self) -> Floats:
        """Over branches, from a to b. Within a branch that holds the place itself and is in no spur, what would flow
        with the fault current drawn from both ends in the proportion of their resistance; in a spur, nothing. There
        `parts_A` gives the true currents."""
        c = self.circuit
        found = np.zeros(len(c.a))
        found[c.solved] = c.siemens[c.solved] * (self.volts[c.ends_a] - self.volts[c.ends_b])
        for spot, drawn in ((self.place.feed, self.amps), (self.place.back, -self.amps)):
            for node in c.spurs.way(c.seat(spot)):
                branch = c.spurs.branch[node]
                found[branch] += drawn if c.b[branch] == node else -drawn
        return found

    def in_branch(self, branch: int) -> float:
        """Current in one branch, as `branch_A` has it."""
        c = self.circuit
        child = int(c.spurs.child[branch])
        if child < 0:
            volts = self.volts[c.index[c.a[branch]]] - self.volts[c.index[c.b[branch]]]
            return float(c.siemens[branch] * volts)
        times = c.spurs.holds(child, c.seat(self.place.feed)) - c.spurs.holds(child, c.seat(self.place.back))
        return times * (self.amps if c.b[branch] == child else -self.amps)

    def in_branches(self, branches: Ints) -> Floats:
        """Currents in some branches, as `branch_A` has them."""
        c, found = self.circuit, np.zeros(len(branches))
        hanging = c.spurs.child[branches] >= 0
        rest, spurs_too = branches[~hanging], branches[hanging]
        volts = self.volts[c.index[c.a[rest]]] - self.volts[c.index[c.b[rest]]]
        found[~hanging] = c.siemens[rest] * volts
        feed, back = (c.spurs.beyond(spurs_too, c.seat(spot)) for spot in (self.place.feed, self.place.back))
        sign = np.where(c.b[spurs_too] == c.spurs.child[spurs_too], 1.0, -1.0)
        found[hanging] = self.amps * sign * (feed.astype(float) - back)
        return found

    def parts_A(self, spot: Spot) -> tuple[float, float]:
        """Current that arrives at a spot within a branch from its `node` and from its `other` end.

        At the return spot both are negative.
        """
        drawn = self.amps if spot is self.place.feed else -self.amps
        child = int(self.circuit.spurs.child[spot.branch])
        if child >= 0:
            return (0.0, drawn) if child == spot.node else (drawn, 0.0)
        through = self.in_branch(spot.branch) * (1.0 if self.circuit.a[spot.branch] == spot.node else -1.0)
        (_, near), (_, far) = spot.weights
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
    """One network of conductors and ports, ready to be shorted anywhere.

    Solved for are the nodes that are in no spur; `index` over all nodes says where each stands among them, or -1.
    """

    def __init__(self, node_count: int, a: Ints, b: Ints, ohm: Floats, ports: Ports) -> None:
        self.a, self.b, self.siemens, self.ports = a, b, 1 / ohm, ports
        self._bounded = ports.bounded
        self._leak_S = np.zeros(len(ports.a))
        self._leak_S[self._bounded] = LEAK_S
        self.part = components(node_count, np.concatenate([a, ports.a]), np.concatenate([b, ports.b]))
        self.live = np.isin(self.part, self.part[ports.a[ports.alive]])
        self.spurs = spurs(node_count, a, b, ohm, np.concatenate([ports.a, ports.b]))
        nodes = np.flatnonzero(self.spurs.branch < 0)
        self.index = np.full(node_count, -1)
        self.index[nodes] = np.arange(len(nodes))
        self.solved = np.flatnonzero((self.index[a] >= 0) & (self.index[b] >= 0))
        self.ends_a, self.ends_b = self.index[a[self.solved]], self.index[b[self.solved]]
        self._port_a, self._port_b = self.index[ports.a], self.index[ports.b]
        self._block_size = max(BLOCK, _NUMBERS // max(len(nodes), 1))
        self._fed = self.live[nodes]
        self._unknown = self._without_grounds(nodes)
        self._incidence = _incidence(len(nodes), self.ends_a, self.ends_b)
        self._port_incidence = _incidence(len(nodes), self._port_a, self._port_b)
        self._allowed_S = self._largest_S(len(nodes))
        self._factor = self._factorised(len(nodes))
        self._start_V = self._spread(self._port_incidence @ (ports.volts / ports.ohm))
        self._by_port_V = self._spread(_dense(self._port_incidence[:, self._bounded]))

    def _without_grounds(self, nodes: Ints) -> np.ndarray:
        """The nodes whose voltage is to be found: all that is fed but one of each part."""
        grounds = {int(self.part[node]): int(node) for node in self.ports.b[self.ports.alive]}
        unknown = self._fed.copy()
        unknown[self.index[list(grounds.values())]] = False
        return np.flatnonzero(unknown)

    def _largest_S(self, node_count: int) -> Floats:
        """Over nodes: the largest conductance that meets there, which the rounding of a sum goes with."""
        largest = np.zeros(node_count)
        for nodes in (self.ends_a, self.ends_b):
            np.maximum.at(largest, nodes, self.siemens[self.solved])
        for nodes in (self._port_a, self._port_b):
            np.maximum.at(largest, nodes, 1 / self.ports.ohm)
        return largest

    def _factorised(self, node_count: int) -> Factor:
        a, b = np.concatenate([self.ends_a, self._port_a]), np.concatenate([self.ends_b, self._port_b])
        siemens = np.concatenate([self.siemens[self.solved], 1 / self.ports.ohm + self._leak_S])
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
        for first in range(0, len(places), self._block_size):
            yield from self._block(places[first : first + self._block_size])

    def through(self, places: Sequence[Place], branches: Ints) -> Iterator[Floats]:
        """For shorts between nodes, the currents in some branches alone; without what shows that they balance."""
        hanging = np.flatnonzero(self.spurs.child[branches] >= 0)
        rest = np.flatnonzero(self.spurs.child[branches] < 0)
        siemens, in_spurs = self.siemens[branches[rest]], branches[hanging]
        a, b = self.index[self.a[branches[rest]]], self.index[self.b[branches[rest]]]
        sign = np.where(self.b[in_spurs] == self.spurs.child[in_spurs], 1.0, -1.0)
        start, by_port = self._start_V[a] - self._start_V[b], self._by_port_V[a] - self._by_port_V[b]
        for first in range(0, len(places), self._block_size):
            some = places[first : first + self._block_size]
            part = self._solved(some)
            across = start[:, None] + by_port @ part.injected - (part.by_place[a] - part.by_place[b]) * part.amps
            currents = (siemens[:, None] * across).T
            for place, amps, row in zip(some, part.amps.tolist(), currents, strict=True):
                found = np.zeros(len(branches))
                found[rest] = row
                ends = self.spurs.beyond(in_spurs, place.feed.node) * 1.0 - self.spurs.beyond(in_spurs, place.back.node)
                found[hanging] = amps * sign * ends
                yield found

    def _solved(self, places: Sequence[Place]) -> "_Block":
        draws, inner = self._draws(places)
        by_place = self._spread(draws)
        ohm = np.einsum("nk,nk->k", draws, by_place) + inner
        joined = ohm > 0
        ohm = np.where(joined, ohm, 1.0)
        at_ports = self._across(by_place)
        open_V = draws.T @ self._start_V
        injected, limits = self._corrections(at_ports, open_V, ohm)
        amps = (open_V + np.einsum("mk,mk->k", at_ports[self._bounded], injected)) / ohm
        return _Block(draws, by_place, injected, limits, np.where(joined, amps, 0.0))

    def _block(self, places: Sequence[Place]) -> Iterator[Shorted]:
        p, part = self.ports, self._solved(places)
        draws, amps, limits = part.draws, part.amps, part.limits
        volts = self._start_V[:, None] + self._by_port_V @ part.injected - part.by_place * amps
        branch_A = self.siemens[self.solved, None] * (volts[self.ends_a] - volts[self.ends_b])
        across = self._across(volts)
        port_A = np.clip((p.volts[:, None] - across) / p.ohm[:, None], p.low[:, None], p.high[:, None])
        out = self._incidence @ branch_A + draws * amps
        out -= self._port_incidence @ (port_A - self._leak_S[:, None] * across)
        out = np.abs(np.where(self._fed[:, None], out, 0.0))
        allowed = 64 * _EPSILON * self._allowed_S[:, None] * np.abs(volts).max(axis=0, initial=0.0)
        certified = np.all(out <= np.maximum(allowed, IMBALANCE_A * np.maximum(1.0, np.abs(amps))), axis=0).tolist()
        imbalance, limited = out.max(axis=0, initial=0.0).tolist(), (limits == HIGH).T
        for k, (place, given, column) in enumerate(zip(places, port_A.T.copy(), volts.T.copy(), strict=True)):
            yield Shorted(place, float(amps[k]), given, imbalance[k], certified[k], limited[k], self, column)

    def seat(self, spot: Spot) -> int:
        """The node from which a short at a spot is fed, if it lies in a spur: the one nearer to the root."""
        child = int(self.spurs.child[spot.branch]) if spot.branch >= 0 else -1
        return spot.other if child == spot.node and child >= 0 else spot.node

    def _fed_by(self, spot: Spot) -> tuple[list[tuple[int, float]], float]:
        """What an ampere at a spot comes to at the nodes solved for, and the resistance that it passes apart."""
        if spot.branch >= 0 and self.spurs.child[spot.branch] < 0:
            return [(int(self.index[node]), weight) for node, weight in spot.weights], spot.inner_ohm
        node = self.seat(spot)
        part_ohm = spot.far_ohm if node != spot.node else spot.near_ohm
        return [(int(self.index[self.spurs.root[node]]), 1.0)], float(self.spurs.ohm[node]) + part_ohm

    def _draws(self, places: Sequence[Place]) -> tuple[Floats, Floats]:
        """Over nodes and places: what an ampere through each short takes out of the nodes; over places: the resistance
        of the ways to it that lie within branches and spurs."""
        found, inner = np.zeros((len(self._fed), len(places))), np.zeros(len(places))
        for k, place in enumerate(places):
            feed, back = place.feed.node, place.back.node
            if self.live[feed] and self.part[feed] == self.part[back]:
                for spot, sign in ((place.feed, 1.0), (place.back, -1.0)):
                    weights, ohm = self._fed_by(spot)
                    inner[k] += ohm
                    for node, weight in weights:
                        found[node, k] += sign * weight
        return found, inner

    def _across(self, volts: Floats) -> Floats:
        across: Floats = volts[self._port_a] - volts[self._port_b]
        return across

    def _corrections(self, at_ports: Floats, open_V: Floats, ohm: Floats) -> tuple[Floats, np.ndarray]:
        """Over bounded ports and places: what each injects beyond its sloping range; over ports: at which limit."""
        few, count = self._bounded, len(ohm)
        injected, limits = np.zeros((len(few), count)), np.zeros((len(self.ports.a), count), dtype=np.int64)
        if not len(few):
            return injected, limits
        law = _Bounded(self.ports, few, self._across(self._by_port_V)[few])
        start, seen = self._across(self._start_V)[few], at_ports[few]
        step = max(1, 16 * _NUMBERS // len(few) ** 2)
        for first in range(0, count, step):
            some = slice(first, first + step)
            injected[:, some], limits[few, some] = law.settle(
                start[:, None] - seen[:, some] * (open_V[some] / ohm[some]), seen[:, some] / np.sqrt(ohm[some])
            )
        return injected, limits


class _Bounded:
    """The one-way and limited ports as they see the rest of the network with each short in it:
    u = start + between · injected, where a short takes the product of what each port sees of it off `between`."""

    def __init__(self, ports: Ports, few: np.ndarray, between: Floats) -> None:
        self.volts, self.siemens = ports.volts[few, None], 1 / ports.ohm[few, None]
        self.low, self.high, self.between = ports.low[few, None], ports.high[few, None], between

    def settle(self, start: Floats, seen: Floats) -> tuple[Floats, np.ndarray]:
        """Over ports and places: what the ports inject beyond their sloping range, and at which limit each stands.

        All that stand wrongly are moved at once; where that goes round in circles only the first of them, which
        always ends (Murty's rule).
        """
        slack = 64 * _EPSILON * self.siemens * (np.abs(self.volts) + np.abs(start).max(axis=0))
        state = np.where(np.isfinite(self.high), HIGH, SLOPE) + np.zeros(start.shape, dtype=np.int64)
        injected, todo = np.zeros(start.shape), np.arange(start.shape[1])
        for step in range(_ROUNDS * (1 + len(start))):
            now = state[:, todo]
            injected[:, todo], amps = self._injected(start[:, todo], seen[:, todo], now)
            near = slack[:, todo]
            beyond = np.where(amps < self.low - near, LOW, np.where(amps > self.high + near, HIGH, SLOPE))
            # From one limit to the other a port goes by way of its sloping range, as the rule demands.
            wanted = np.where((now == SLOPE) | (now == beyond), beyond, SLOPE)
            wrong = wanted != now
            if step >= _ROUNDS:
                wrong &= np.cumsum(wrong, axis=0) == 1
            state[:, todo] = np.where(wrong, wanted, now)
            todo = todo[wrong.any(axis=0)]
            if not len(todo):
                break
        return injected, state

    def _injected(self, start: Floats, seen: Floats, state: np.ndarray) -> tuple[Floats, Floats]:
        """What ports in some state inject beyond their sloping range, and what each would deliver in that range."""
        held = state != SLOPE
        offset = np.where(held, np.where(state == HIGH, self.high, self.low) - self.siemens * self.volts, 0.0)
        rise = held * self.siemens
        between = self.between - np.einsum("ik,jk->kij", seen, seen)
        matrix = np.eye(len(start)) - between * rise.T[:, None, :]
        known = start.T + np.einsum("kij,jk->ki", between, offset)
        injected: Floats = offset + rise * np.linalg.solve(matrix, known[:, :, None])[:, :, 0].T
        volts = start + np.einsum("kij,jk->ik", between, injected)
        return injected, (self.volts - volts) * self.siemens


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
