"""Many variants of one case at once: each with resistances, source voltages and demands of its own.

The variants of a batch stand side by side as one large network, so that the element laws and the certificate are
those of `equations`, and each Newton step eliminates all of them together. The way is that of `solve.solve`: from the
unloaded network down, no step over the voltage at which an idle source joins in, no load voltage that rises, the
Jacobian positive definite; else with the loads raised in small steps. A variant that leaves both ways, or misses its
certificate, is solved by `solve.solve`.
"""

from collections.abc import Callable
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np

from farvolt.elimination import Elimination
from farvolt.equations import IMBALANCE_A, Equations
from farvolt.fed import Fed, first_diode
from farvolt.network import FEED, Floats, Ints, Network
from farvolt.operating import Operating
from farvolt.solve import POWER_SHARE, State, solve

FIRST_STEP = 1 / 16
"""Share of the loads by which they are raised at a time where they cannot be put on at once."""

_ITERATIONS = 30

_HAIR_V = 1e-8

_CHUNK = 500
"""Variants at a time: their arrays then stay in the processor's cache."""

_CHUNK_NODES = 400_000
"""Nodes of a batch, at most, unless fewer than 20 variants are left of it."""


@dataclass(frozen=True)
class Variants:
    """What differs: Ω of every branch, V of every source port, demand of every load port over the condition's own.

    Arrays are over (variant, branch), (variant, source port), (variant, load port).
    """

    ohm: Floats
    volts: Floats
    demand: Floats

    def __len__(self) -> int:
        return len(self.ohm)

    def __getitem__(self, rows: Ints) -> "Variants":
        return Variants(self.ohm[rows], self.volts[rows], self.demand[rows])


@dataclass(frozen=True)
class Answers:
    """Over variants: whether each is solved, the share of its loads that holds, volts of the plan's loads, and the
    largest imbalance (A) of its certificate. `together` says which were solved in a batch."""

    solved: np.ndarray
    share_held: Floats
    load_volts: Floats
    imbalance_A: Floats
    together: np.ndarray


def solve_variants(network: Network, condition: Operating, supply: Fed, variants: Variants) -> Answers:
    """Solve all variants; NaN volts at a load that is not fed, and in a variant that gives way."""
    count, loads = len(variants), len(network.plan.loads)
    found = Answers(
        np.zeros(count, dtype=bool), np.zeros(count), np.full((count, loads), np.nan), np.zeros(count),
        np.zeros(count, dtype=bool),
    )  # fmt: skip
    batch = _Batch(network, condition, supply)
    step = max(20, min(_CHUNK, _CHUNK_NODES // max(network.node_count, 1)))
    for way in (batch.fall, batch.climb) if count > 1 else ():
        left = np.flatnonzero(~found.solved)
        for start in range(0, len(left), step):
            rows = left[start : start + step]
            batch.solve(variants[rows], way, rows, found)
    found.together[:] = found.solved
    for row in np.flatnonzero(~found.solved):
        state = solve_variant(network, condition, supply, variants, int(row))
        found.solved[row], found.share_held[row] = state.solved, state.share_held
        found.imbalance_A[row] = state.imbalance_A
        if state.solved:
            found.load_volts[row] = _at_loads(condition, supply, state.volts, loads)
    return found


def solve_variant(network: Network, condition: Operating, supply: Fed, variants: Variants, row: int) -> State:
    """One variant alone."""
    one, changed = _changed(network, condition, variants[np.array([row])])
    return solve(one, changed, np.empty(0), supply)


def _at_loads(condition: Operating, supply: Fed, volts: Floats, loads: int) -> Floats:
    """Volts at the plan's loads, of node volts over (…, node); NaN where one is not fed."""
    across = volts[..., condition.load_a[:loads]] - volts[..., condition.load_b[:loads]]
    return np.where(supply.load_on[:loads], across, np.nan)


def _changed(network: Network, condition: Operating, variants: Variants) -> tuple[Network, Operating]:
    """Network and condition of the variants, side by side. Resistances are whole: no branch has a temperature left."""
    ohm = variants.ohm.ravel()
    side_by_side = _tiled(network, len(variants), network.node_count)
    conductors = replace(
        side_by_side,
        node_count=network.node_count * len(variants),
        fixed_ohm=ohm,
        cable_ohm_20=np.zeros(len(ohm)),
        run=np.full(len(ohm), -1),
    )
    many: Operating = _tiled(condition, len(variants), network.node_count)
    demand = variants.demand.ravel()
    return conductors, replace(
        many,
        volts=variants.volts.ravel(),
        load_W=many.load_W * demand,
        load_A=many.load_A * demand,
        load_S=many.load_S * demand,
        converters=tuple(
            (port + copy * len(condition.source_a), load + copy * len(condition.load_a), efficiency, standby)
            for copy in range(len(variants))
            for port, load, efficiency, standby in condition.converters
        ),
    )


_NODES = ("a", "b", "source_a", "source_b", "load_a", "load_b", "group", "part")
"""Arrays of node or part numbers: those of each copy are its own."""


def _tiled(one: Any, copies: int, nodes: int) -> Any:
    """A dataclass with its arrays repeated, node numbers moved on with each copy."""
    changes: dict[str, Any] = {}
    for field in fields(one):
        value = getattr(one, field.name)
        if isinstance(value, np.ndarray):
            repeated = np.tile(value, copies)
            moved = np.repeat(np.arange(copies) * nodes, len(value)) if field.name in _NODES else 0
            changes[field.name] = repeated + moved if field.name in _NODES else repeated
    return replace(one, **changes)


_Way = Callable[[Equations, Floats, int], tuple[Floats, np.ndarray]]
"""From the unloaded networks, side by side, to the loaded ones: volts, and which variants it led to an answer."""


class _Batch:
    """A case whose variants are solved together, some at a time."""

    def __init__(self, network: Network, condition: Operating, supply: Fed) -> None:
        self.network, self.condition, self.supply = network, condition, supply
        factors = np.ones(len(network.plan.runs))
        own = Equations(network, condition, factors, supply)
        self.unknown = own.position >= 0
        rows, columns, _ = own.jacobian(own.first_guess(), 1.0)
        self.elimination = Elimination(own.size, rows, columns)
        self.feeds = self._feeds(own)
        self._places: dict[int, np.ndarray] = {}

    def _feeds(self, own: Equations) -> list[tuple[Ints, Ints]]:
        """The feed nodes of each part and the sources that may set their first guess, as `Equations.first_guess`."""
        part, at = self.supply.part, self.condition.source_a[own.sources]
        mine = own.sources[own.sources < first_diode(self.network)]
        feeds = np.unique([node for (_, pole), node in self.network.nodes.items() if pole == FEED])
        numbers = np.unique(part[at])
        return [(feeds[part[feeds] == one], mine[part[self.condition.source_a[mine]] == one]) for one in numbers]

    def _array_power(self, variants: Variants) -> Floats:
        """What each source may deliver: with a solar array it depends on the resistances on its way."""
        alone = (_changed(self.network, self.condition, variants[np.array([row])]) for row in range(len(variants)))
        return np.concatenate([Equations(*one, np.empty(0), self.supply).power for one in alone])

    def _first_guess(self, variants: Variants) -> Floats:
        """All feeds of a joined part at its highest source voltage, all returns at zero, side by side."""
        volts = np.zeros((len(variants), self.network.node_count))
        for nodes, ports in self.feeds:
            volts[:, nodes] = variants.volts[:, ports].max(axis=1, initial=0.0, keepdims=True)
        return volts.ravel()

    def solve(self, variants: Variants, way: "_Way", rows: Ints, found: Answers) -> None:
        """Solve the variants, which are `rows` of the answers; what cannot be accepted is left unsolved there."""
        count, grounds = len(variants), np.array(self.supply.grounds, dtype=np.int64)
        network, condition = _changed(self.network, self.condition, variants)
        supply = _tiled(self.supply, count, self.network.node_count)
        each = (np.arange(count)[:, None] * self.network.node_count + grounds).ravel()
        if self.condition.arrays:
            condition = replace(condition, power=self._array_power(variants), arrays=())
        equations = Equations(network, condition, np.empty(0), replace(supply, grounds=tuple(each.tolist())))
        start, held = self._newton(equations, self._first_guess(variants), count, 0.0)
        volts, ended = way(equations, self._inside(start, count), count)
        self._accept(equations, volts, held & ended, rows, found)

    def _inside(self, volts: Floats, count: int) -> Floats:
        """A hair below: a source that idles at its very own voltage then conducts, and Newton sees its slope."""
        lower = volts.reshape(count, -1).copy()
        for nodes, _ in self.feeds:
            lower[:, nodes] -= _HAIR_V
        return lower.ravel()

    def fall(self, equations: Equations, volts: Floats, count: int) -> tuple[Floats, np.ndarray]:
        """From the unloaded network down in one go, as `solve.solve` tries first."""
        return self._newton(equations, volts, count, 1.0, falling=True)

    def climb(self, equations: Equations, volts: Floats, count: int) -> tuple[Floats, np.ndarray]:
        """Loads raised in the steps that `solve.solve` begins with; a variant that needs smaller ones is left."""
        near = np.ones(count, dtype=bool)
        for step in range(1, round(1 / FIRST_STEP) + 1):
            after, ended = self._newton(equations, volts, count, step * FIRST_STEP)
            u, moved = equations.load_volts(volts), equations.load_volts(after - volts)
            close = np.abs(moved) <= 0.1 * np.abs(u) + 1e-9
            near &= ended & close.reshape(count, -1).all(axis=1) & self._above_knees(equations, after, count)
            volts = after
        return volts, near

    def _newton(
        self, equations: Equations, volts: Floats, count: int, share: float, *, falling: bool = False
    ) -> tuple[Floats, np.ndarray]:
        """Newton's method for every variant at a share of the loads: volts, and which variants ended well.

        With `falling` a variant in which a load voltage rises on the way does not.
        """
        ended, left = np.zeros(count, dtype=bool), np.zeros(count, dtype=bool)
        previous = np.full(count, np.inf)
        for _ in range(_ITERATIONS):
            out = equations.residual(volts, share).reshape(count, -1)
            done = np.all(np.abs(out)[:, self.supply.live] <= self._allowed(equations, volts, count) / 4, axis=1)
            largest = np.abs(out[:, self.unknown]).max(axis=1, initial=0.0)
            ended |= done & (largest >= previous / 2) & ~left
            if np.all(ended | left):
                break
            previous = np.where(done, largest, np.inf)
            step, positive = self._step(equations, volts, out, count, share)
            step *= self._lengths(equations, volts, step, count)[:, None]
            left |= ~ended & ~positive
            if falling:
                left |= ~ended & self._rises(equations, volts, step, count)
            volts = volts + np.where((ended | left)[:, None], 0.0, step).ravel()
        return volts, ended

    def _allowed(self, equations: Equations, volts: Floats, count: int) -> Floats:
        """What the certificate allows at the live nodes of every variant, A: as `equations.allowed`, by variant."""
        highest = np.abs(volts.reshape(count, -1)).max(axis=1, keepdims=True, initial=0.0)
        allowed: Floats = np.maximum(IMBALANCE_A, equations.scale.reshape(count, -1) * highest)[:, self.supply.live]
        return allowed

    def _step(
        self, equations: Equations, volts: Floats, out: Floats, count: int, share: float
    ) -> tuple[Floats, np.ndarray]:
        """Newton's step over (variant, node), and which Jacobians are positive definite."""
        size, places = self.elimination.size, self.elimination.places
        rows, columns, values = equations.jacobian(volts, share)
        # The pattern stays from step to step: where each entry goes is looked up once for each size of batch.
        if count not in self._places:
            copy = rows // size
            self._places[count] = self.elimination.place(rows % size, columns % size) * count + copy
        matrices = np.bincount(self._places[count], weights=values, minlength=places * count).astype(float)
        solution, positive = self.elimination.solve(matrices.reshape(places, count), -out[:, self.unknown].T)
        step = np.zeros_like(out)
        step[:, self.unknown] = solution.T
        return np.where(positive[:, None], step, 0.0), positive

    def _lengths(self, equations: Equations, volts: Floats, step: Floats, count: int) -> Floats:
        """Longest part of every variant's step that passes no idle source's voltage and at most halves a load's."""
        c, on, flat = equations.condition, equations.sources, step.ravel()
        length = np.ones(count)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            change, above = equations.source_volts(flat), equations.source_volts(volts) - c.volts[on]
            joins = (c.low[on] == 0) & (above > 1e-12 * np.abs(c.volts[on]) + 1e-15) & (above + change < 0)
            limits = np.where(joins, (above + 1e-9) / -change, 1.0).reshape(count, -1)
            length = np.minimum(length, limits.min(axis=1, initial=1.0))
            u, change = equations.load_volts(volts), equations.load_volts(flat)
            halves = (change < -0.5 * u) & (u > c.knee[equations.loads])
            limits = np.where(halves, 0.5 * u / -change, 1.0).reshape(count, -1)
        return np.asarray(np.minimum(length, limits.min(axis=1, initial=1.0)))

    @staticmethod
    def _rises(equations: Equations, volts: Floats, step: Floats, count: int) -> np.ndarray:
        change, u = equations.load_volts(step.ravel()), equations.load_volts(volts)
        return np.asarray((change > 1e-6 + 1e-9 * np.abs(u)).reshape(count, -1).any(axis=1))

    @staticmethod
    def _above_knees(equations: Equations, volts: Floats, count: int) -> np.ndarray:
        """Variants in which no constant-power or constant-current load stands below its knee."""
        c, on = equations.condition, equations.loads
        u, drawn, _ = equations.load_law(volts, 1.0)
        low = (drawn - c.load_S[on] * u != 0) & (u < c.knee[on])
        return ~np.asarray(low.reshape(count, -1).any(axis=1))

    def _accept(self, equations: Equations, volts: Floats, ended: np.ndarray, rows: Ints, found: Answers) -> None:
        """Keep the variants whose certificate holds, recomputed from the element laws, with no load below its knee."""
        count = len(ended)
        out = np.abs(equations.residual(volts, 1.0).reshape(count, -1)[:, self.supply.live])
        good = ended & np.all(out <= self._allowed(equations, volts, count), axis=1)
        _, delivered, _ = equations.source_law(volts)
        u, drawn, _ = equations.load_law(volts, 1.0)
        good &= self._above_knees(equations, volts, count)
        source_W = (equations.source_volts(volts) * delivered).reshape(count, -1)
        load_W = (u * drawn).reshape(count, -1)
        across = volts[equations.a] - volts[equations.b]
        lost = (equations.siemens * across**2).reshape(count, -1).sum(axis=1)
        turnover = np.abs(source_W).sum(axis=1) + np.abs(load_W).sum(axis=1) + lost
        least = (self._allowed(equations, volts, count) * np.abs(volts.reshape(count, -1)[:, self.supply.live])).sum(1)
        balance = source_W.sum(axis=1) - load_W.sum(axis=1) - lost
        good &= np.abs(balance) <= np.maximum(POWER_SHARE * turnover, least)
        found.solved[rows], found.share_held[rows] = good, good.astype(float)
        found.imbalance_A[rows] = out.max(axis=1, initial=0.0)
        by_load = _at_loads(self.condition, self.supply, volts.reshape(count, -1), found.load_volts.shape[1])
        found.load_volts[rows] = np.where(good[:, None], by_load, np.nan)
