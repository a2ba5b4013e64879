"""A network reduced to its ports, and many cases solved on them at once.

The conductors are factorised once, with the resistance of every source beside them, and turned into Z: the voltages
at the ports are u = Z·j, where j is what each port puts in beyond what its resistance in the matrix takes. Cases are
columns of arrays over (port, case) and meet only Z. The iteration is Newton's with slopes that cases share: those of
the sources' straight parts (cases with the same sources on a straight part go together), and the mean of the loads'.

What it settles on is the solution reached from zero load where it is the only one on the way: the equations are the
gradient of a potential, and where their Jacobian is positive definite for every load voltage above nine tenths of
what was found, with the least slope that each source has between the unloaded network and the loaded one, the
potential is strictly convex there and has one minimum. All other cases are for `solve.solve`.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, fields, replace
from functools import cached_property
from typing import Any

import numpy as np

from farvolt.equations import IMBALANCE_A, Equations
from farvolt.fed import Fed, first_diode
from farvolt.linear import DENSE_LIMIT, SingularError, factor
from farvolt.network import FEED, Floats, Ints, Network
from farvolt.operating import KNEE_SHARE, Operating
from farvolt.solve import POWER_SHARE

_ITERATIONS = 40

_STEADY = 1e-12
"""An iteration has settled when no port moves by more than this share of the highest voltage."""

_NEARLY = 1e-9
"""A source within this share of its voltage from the end of its straight part is taken to be on it."""

_BELOW = 0.9
"""The solution must be the only one with every load at or above this share of the voltage found."""

_WORST_CONDITION = 1e6
"""A part that hangs on a blocking diode's leak alone is not settled to a nanovolt by any rounding."""

MOST_LIMITED = 62
"""Sources with limits, at most: which of them are on a straight part is one integer."""


@dataclass(frozen=True)
class Laws:
    """The laws of the working ports over (port, case), or (port, 1) where all cases have the same."""

    volts: Floats
    ohm: Floats
    low: Floats
    high: Floats
    power: Floats
    leak: Floats
    floor: Floats
    watts: Floats
    amps: Floats
    siemens: Floats
    knee: Floats
    limited: np.ndarray
    """The sources that have a limit in any case."""

    def __getitem__(self, cases: slice | Ints) -> "Laws":
        if isinstance(cases, slice) and cases == slice(None):
            return self
        every = {one.name: getattr(self, one.name) for one in fields(self)[:-1]}
        mine = {name: value if value.shape[1] == 1 else value[:, cases] for name, value in every.items()}
        return replace(self, **mine)

    @cached_property
    def columns(self) -> int:
        """Over how many cases the laws of the sources differ; 1 where all have the same."""
        return max(len(one[0]) for one in (self.volts, self.ohm, self.low, self.high, self.power, self.leak))

    def delivered(self, u: Floats) -> Floats:
        """Current of every source at its voltage, as `Equations.source_law`."""
        amps = (self.volts - u) / self.ohm
        if len(self.limited):
            amps = np.clip(amps, self.low, self._high(u))
        return amps - self.leak * u if self.leak.any() else amps

    def _high(self, u: Floats) -> Floats:
        return np.minimum(self.high, self.power / np.maximum(u, self.floor))

    def straight(self, u: Floats) -> np.ndarray:
        """Over (limited source, case): whether it is on the straight part of its law, or at its very end."""
        mine = self.limited
        amps = (self.volts - u)[mine] / self.ohm[mine]
        slack = _NEARLY * np.abs(self.volts[mine]) / self.ohm[mine]
        return np.asarray((amps >= self.low[mine] - slack) & (amps <= self._high(u)[mine] + slack))

    def drawn(self, u: Floats) -> Floats:
        """Current of every load at its voltage, as `Equations.load_law`."""
        amps = np.maximum(u, self.knee)
        np.divide(self.watts, amps, out=amps)
        if self.amps.any():
            amps += self.amps
        if (u < self.knee).any():
            amps *= np.minimum(u / self.knee, 1.0)
        if self.siemens.any():
            amps += self.siemens * u
        return amps

    def above_knees(self, u: Floats) -> np.ndarray:
        """Over cases: whether no constant-power or constant-current load stands below its knee."""
        demands = (self.watts > 0) | (self.amps > 0)
        return np.asarray(~np.any(demands & ~(u >= self.knee), axis=0))


@dataclass(frozen=True)
class _Shared:
    """One Newton matrix: a port puts in j = x + slope·u, and u = toward·x at the ports, spread·x at the nodes."""

    slope: Floats
    toward: Floats
    spread: Floats


@dataclass(frozen=True)
class Settled:
    """Cases solved together: over (node, case), (source or load, case), (branch, case), and over cases."""

    accepted: np.ndarray
    volts: Floats
    delivered_A: Floats
    drawn_A: Floats
    flow_A: Floats
    imbalance_A: Floats
    power_in_W: Floats
    power_loads_W: Floats
    power_lost_W: Floats


class Ports:
    """The working ports of a network, sources first, with their laws in all cases, and what a current into each port
    does to every node. `changes` holds the laws that differ from the condition's, over (port, case)."""

    def __init__(
        self, network: Network, condition: Operating, factor_of_20: Floats, supply: Fed, changes: Mapping[str, Floats]
    ) -> None:
        self.network, self.supply = network, supply
        e = self.equations = Equations(network, condition, factor_of_20, supply)
        self.a = np.concatenate([condition.source_a[e.sources], condition.load_a[e.loads]])
        self.b = np.concatenate([condition.source_b[e.sources], condition.load_b[e.loads]])
        self.sources = len(e.sources)
        rows, columns = np.concatenate([e.a, self.a, e.b, self.b]), np.concatenate([e.b, self.b, e.a, self.a])
        self._rows, self._columns = e.position[np.append(rows, rows)], e.position[np.append(rows, columns)]
        self._known = (self._rows >= 0) & (self._columns >= 0)
        self.held_S = np.append(1 / condition.ohm[e.sources], np.zeros(len(e.loads)))
        self.spread = self._spread()
        self.impedance = self.spread[self.a] - self.spread[self.b]
        self._feed = np.zeros(network.node_count, dtype=bool)
        self._feed[[node for (_, pole), node in network.nodes.items() if pole == FEED]] = True
        self.laws = self._laws(condition, changes)
        self._matrices: dict[tuple[int, bool], _Shared] = {}

    def _entries(self, port_S: Floats) -> tuple[np.ndarray, np.ndarray, Floats]:
        """The nodal matrix with a conductance at every port."""
        one = np.append(self.equations.siemens, port_S)
        values, keep = np.concatenate([one, one, -one, -one]), self._known
        return self._rows[keep], self._columns[keep], values[keep]

    def _spread(self) -> Floats:
        ports = np.zeros((self.network.node_count, len(self.a)))
        place, unknown = np.arange(len(self.a)), self.equations.position >= 0
        ports[self.a, place] += 1.0
        ports[self.b, place] -= 1.0
        spread = np.zeros_like(ports)
        solution = factor(self.equations.size, *self._entries(self.held_S), symmetric=True)
        spread[unknown] = solution.solve(ports[unknown])
        return spread

    def _laws(self, condition: Operating, changes: Mapping[str, Floats]) -> Laws:
        on, loads = self.equations.sources, self.equations.loads

        def of(name: str, places: Ints) -> Floats:
            values = changes.get(name)
            return (getattr(condition, name)[:, None] if values is None else values)[places]

        low, high, power = (of(name, on) for name in ("low", "high", "power"))
        return Laws(
            volts=of("volts", on), ohm=of("ohm", on), low=low, high=high, power=power, leak=of("leak", on),
            floor=KNEE_SHARE * condition.nominal[on][:, None],
            watts=of("load_W", loads), amps=of("load_A", loads), siemens=of("load_S", loads),
            knee=condition.knee[loads][:, None],
            limited=np.flatnonzero(np.isfinite(low).any(1) | np.isfinite(high).any(1) | np.isfinite(power).any(1)),
        )  # fmt: skip

    def solve(self, cases: slice) -> Settled:
        """Solve cases together; `accepted` says which of them are what `solve.solve` would answer."""
        laws = self.laws[cases]
        unloaded, at_rest = self._unloaded if self.laws.columns == 1 else self._settle(laws, self._first_guess(laws))
        unloaded = np.broadcast_to(unloaded, (len(unloaded), cases.stop - cases.start))
        u, steady = self._settle(laws, unloaded, loaded=True)
        steady &= at_rest & laws.above_knees(u[self.sources :])
        steady &= self._only(laws, unloaded, u, steady)
        return self._certified(laws, u, steady)

    @cached_property
    def _unloaded(self) -> tuple[Floats, np.ndarray]:
        """The unloaded network where it is the same in all cases."""
        return self._settle(self.laws, self._first_guess(self.laws))

    def _first_guess(self, laws: Laws) -> Floats:
        """At the ports: all feeds of a joined part at its highest source voltage, all returns at zero."""
        part, e = self.supply.part, self.equations
        high = np.zeros((int(part.max(initial=0)) + 1, laws.columns))
        for place, port in enumerate(e.sources):
            if port < first_diode(self.network):
                mine = part[self.a[place]]
                high[mine] = np.maximum(high[mine], laws.volts[place])
        guess: Floats = high[part[self.a]] * self._feed[self.a, None] - high[part[self.b]] * self._feed[self.b, None]
        return guess

    # The iteration ----------------------------------------------------------------------------------------

    def _settle(self, laws: Laws, u: Floats, *, loaded: bool = False) -> tuple[Floats, np.ndarray]:
        """Iterate from `u`: the voltages at the ports, and in which cases they have settled."""
        tolerance = _STEADY * max(1.0, float(np.abs(laws.volts).max(initial=0.0)))
        moved = error = np.zeros(u.shape[1])
        for _ in range(_ITERATIONS):
            after = np.empty_like(u)
            for cases, matrix, inward in self._alike(laws, u, loaded):
                after[:, cases] = matrix.toward @ inward
            if len(laws.limited):
                after = u + self._lengths(laws, u, after - u) * (after - u)
            before, moved = moved, np.abs(after - u).max(axis=0, initial=0.0)
            u = after
            # Steps shrink by a steady factor: what is left to go is at most the next one, and it times that factor …
            error = moved * np.minimum(moved / np.maximum(before, tolerance), 1.0)
            if not np.any(error > tolerance):
                break
        return u, error <= tolerance

    def _lengths(self, laws: Laws, u: Floats, step: Floats) -> Floats:
        """Over cases: the longest part of a step that passes no idle source's voltage and at most halves a load's."""
        above, change = u[: self.sources] - laws.volts, step[: self.sources]
        joins = (laws.low == 0) & (above > 1e-12 * np.abs(laws.volts) + 1e-15) & (above + change < 0)
        load_u, fall = u[self.sources :], -step[self.sources :]
        halves = (fall > 0.5 * load_u) & (load_u > laws.knee)
        length = np.ones(u.shape[1])
        if joins.any():
            # Land just inside the law of the source that joins in first.
            length = np.divide(above + 1e-9, -change, where=joins, out=np.ones_like(u[: self.sources])).min(axis=0)
        if halves.any():
            part = np.divide(0.5 * load_u, fall, where=halves, out=np.ones_like(load_u)).min(axis=0)
            length = np.minimum(length, part)
        return length

    def _volts(self, laws: Laws, u: Floats) -> Floats:
        """Node voltages over (node, case)."""
        volts = np.empty((self.network.node_count, u.shape[1]))
        for cases, matrix, inward in self._alike(laws, u, loaded=True):
            volts[:, cases] = matrix.spread @ inward
        return volts

    def _alike(self, laws: Laws, u: Floats, loaded: bool) -> Iterator[tuple[slice | Ints, _Shared, Floats]]:
        """Cases by which sources are on their straight part: their places, their matrix, and x = j − slope·u."""
        split = self.sources
        for number, cases, straight in _by_pattern(laws, laws.straight(u[:split]), split):
            own, mine, matrix = laws[cases], u[:, cases], self._matrix(number, straight, loaded)
            inward = (self.held_S - matrix.slope)[:, None] * mine
            inward[:split] += own.delivered(mine[:split])
            if loaded:
                inward[split:] -= own.drawn(mine[split:])
            yield cases, matrix, inward

    def _matrix(self, number: int, straight: np.ndarray, loaded: bool) -> _Shared:
        """The Newton matrix of cases whose sources deliver along their resistances where `straight`."""
        if (number, loaded) not in self._matrices:
            laws = self.laws
            source_S = np.where(straight, (1 / laws.ohm).mean(axis=1), 0.0) + laws.leak.mean(axis=1)
            nominal_V = laws.knee[:, 0] / KNEE_SHARE
            load_S = laws.siemens.mean(axis=1) - laws.watts.mean(axis=1) / nominal_V**2
            slope = self.held_S - np.append(source_S, load_S if loaded else 0.0 * load_S)
            self._matrices[number, loaded] = self._shared(slope)
        return self._matrices[number, loaded]

    def _shared(self, slope: Floats) -> _Shared:
        system = np.eye(len(slope)) - self.impedance * slope
        try:
            inverse = np.linalg.inv(system)
            condition = np.abs(system).sum(axis=0).max(initial=0.0) * np.abs(inverse).sum(axis=0).max(initial=0.0)
        except np.linalg.LinAlgError:
            condition = np.inf
        if not condition < _WORST_CONDITION:
            return _Shared(slope, np.full_like(system, np.nan), np.full_like(self.spread, np.nan))
        toward = inverse @ self.impedance
        return _Shared(slope, toward, self.spread + (self.spread * slope) @ toward)

    # Acceptance -------------------------------------------------------------------------------------------

    def _only(self, laws: Laws, unloaded: Floats, u: Floats, candidates: np.ndarray) -> np.ndarray:
        """Which of the candidates are the only solution on the way from the unloaded network (see above)."""
        found = np.zeros(len(candidates), dtype=bool)
        load_u = u[self.sources :]
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            pull = np.where(laws.watts > 0, laws.watts / (_BELOW * load_u) ** 2, 0.0) - laws.siemens
        always = laws.straight(unloaded[: self.sources]) & laws.straight(u[: self.sources])
        for _, cases, straight in _by_pattern(laws, always, self.sources):
            places = np.arange(len(candidates))[cases]
            places = places[candidates[places]]
            source_S = np.where(straight, 1 / laws.ohm.max(axis=1), 0.0) + laws.leak.min(axis=1)
            self._convex(source_S, pull, places[np.argsort(pull[:, places].sum(axis=0))], found)
        return found

    def _convex(self, source_S: Floats, pull: Floats, cases: Ints, found: np.ndarray) -> None:
        """Mark the cases whose Jacobian stays positive definite: all at once if the worst of each load allows it,
        else in halves."""
        if len(cases) == 0:
            return
        try:
            worst = np.append(source_S, -pull[:, cases].max(axis=1))
            positive = factor(self.equations.size, *self._entries(worst), symmetric=True).positive
        except SingularError:
            positive = False
        if positive:
            found[cases] = True
        elif len(cases) > 1:
            half = len(cases) // 2
            self._convex(source_S, pull, cases[:half], found)
            self._convex(source_S, pull, cases[half:], found)

    def _certified(self, laws: Laws, u: Floats, steady: np.ndarray) -> Settled:
        """Currents and the certificate, recomputed from the element laws on the full network, as `solve` does."""
        e, live, split = self.equations, self.supply.live, self.sources
        volts = self._volts(laws, u)
        across = volts[self.a] - volts[self.b]
        delivered, drawn = laws.delivered(across[:split]), laws.drawn(across[split:])
        along = volts[e.a] - volts[e.b]
        flow = e.siemens[:, None] * along
        out = np.abs(self._incidence @ np.concatenate([flow, -delivered, drawn]))[live]
        highest = np.abs(volts).max(axis=0, initial=0.0)
        allowed = np.maximum(IMBALANCE_A, e.scale[live, None] * highest)
        along *= flow
        source_W, load_W = across[:split] * delivered, across[split:] * drawn
        diodes, inputs = e.sources >= first_diode(self.network), e.loads >= len(self.network.plan.loads)
        power_in = source_W[~diodes].sum(axis=0) - load_W[inputs].sum(axis=0)
        loads, lost = load_W[~inputs].sum(axis=0), along.sum(axis=0) - source_W[diodes].sum(axis=0)
        turnover = np.abs(source_W).sum(axis=0) + np.abs(load_W).sum(axis=0) + np.abs(lost)
        least = POWER_SHARE * turnover
        if not np.all(turnover > 1.0):
            # Where hardly any power flows, the balance is no better than the imbalance that the nodes are allowed.
            least = np.maximum(least, (allowed * np.abs(volts[live])).sum(axis=0))
        balanced = np.abs(power_in - loads - lost) <= least
        # The currents were taken at the ports' own voltages: those must be the network's.
        consistent = np.abs(across - u).max(axis=0, initial=0.0) <= 1e-10 * np.maximum(1.0, highest)
        accepted = steady & consistent & balanced & np.all(out <= allowed, axis=0)
        volts[~live] = np.nan
        return Settled(
            accepted, volts, delivered, drawn, flow, out.max(axis=0, initial=0.0), power_in, loads, lost
        )  # fmt: skip

    @cached_property
    def _incidence(self) -> Any:
        """(node, current) matrix of signs: which currents of branches and ports leave and enter each node."""
        e = self.equations
        start, end = np.append(e.a, self.a), np.append(e.b, self.b)
        place, ones = np.arange(len(start)), np.ones(len(start))
        shape = (self.network.node_count, len(start))
        if self.network.node_count > DENSE_LIMIT:
            from scipy.sparse import coo_array

            entries = np.append(ones, -ones), (np.append(start, end), np.append(place, place))
            return coo_array(entries, shape=shape).tocsr()
        matrix = np.zeros(shape)
        matrix[start, place] += 1.0
        matrix[end, place] -= 1.0
        return matrix


def _by_pattern(laws: Laws, straight: np.ndarray, sources: int) -> Iterator[tuple[int, slice | Ints, np.ndarray]]:
    """Cases by which limited sources are `straight`: a number, their places, and the pattern over all sources."""
    if len(straight) == 0:
        yield 0, slice(None), np.ones(sources, dtype=bool)
        return
    numbers = (1 << np.arange(len(straight), dtype=np.int64)) @ straight
    for number in np.unique(numbers):
        cases = np.flatnonzero(numbers == number)
        whole = np.ones(sources, dtype=bool)
        whole[laws.limited] = straight[:, cases[0]]
        yield int(number), slice(None) if len(cases) == len(numbers) else cases, whole
