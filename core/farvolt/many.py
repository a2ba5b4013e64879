"""Many cases of one network at once: equal conductances share one factorisation.

The conductors, and the resistance of every battery, are factorised once and reduced to the ports: the voltages at
the ports are u = Z·j with the currents j that loads and EMFs put in there, and only Z (ports by ports) is met again
by the cases. Loads then differ from case to case as rows of an array.

The way down from the unloaded network is a fixed-point iteration whose step is corrected by one matrix for all cases.
A case is accepted when its certificate holds and its voltages lie where the iteration is a contraction: there the
solution is the only one above, hence the one reached from zero load. All others are solved one by one by `solve`.
"""

from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np

from farvolt.equations import Equations
from farvolt.fed import Fed, fed
from farvolt.linear import factor
from farvolt.network import Floats, Network
from farvolt.operating import Operating
from farvolt.solve import POWER_SHARE, solve

_ITERATIONS = 60

_CHUNK = 500
"""Cases at a time: their arrays then stay in the processor's cache."""


@dataclass(frozen=True)
class Many:
    """Solutions over (case, node), (case, load) and (case, branch), with the certificate of each case."""

    solved: np.ndarray
    share_held: Floats
    volts: Floats
    drawn_A: Floats
    delivered_A: Floats
    branch_A: Floats
    imbalance_A: Floats
    together: np.ndarray
    """Whether a case was solved together with the others, or one by one."""


def solve_many(
    network: Network, condition: Operating, factor_of_20: Floats, shares: Floats, supply: Fed | None = None
) -> Many:
    """Solve a condition with other load shares: `shares` is over (case, load), factors on the condition's own loads.

    The condition's loads must be on (their rated demand is what the shares multiply).
    """
    supply = supply or fed(network, condition)
    ports = _Ports(network, condition, factor_of_20, supply)
    found = ports.empty(len(shares))
    for start in range(0, len(shares), _CHUNK) if ports.linear else ():
        ports.descend(shares, found, slice(start, start + _CHUNK))
    found.together[:] = found.solved
    for case in np.flatnonzero(~found.solved):
        _one_by_one(network, condition, factor_of_20, supply, shares, int(case), found)
    return found


def _one_by_one(
    network: Network, condition: Operating, factor_of_20: Floats, supply: Fed, shares: Floats, case: int, found: Many
) -> None:
    state = solve(network, scaled(condition, shares[case]), factor_of_20, supply)
    found.solved[case], found.share_held[case] = state.solved, state.share_held
    found.volts[case], found.branch_A[case] = state.volts, state.branch_A
    found.drawn_A[case], found.delivered_A[case] = state.drawn_A, state.delivered_A
    found.imbalance_A[case] = state.imbalance_A


def scaled(condition: Operating, shares: Floats) -> Operating:
    """A condition with each load multiplied by its share."""
    full = np.ones(len(condition.load_a))
    full[: len(shares)] = shares
    return replace(
        condition,
        load_W=condition.load_W * full,
        load_A=condition.load_A * full,
        load_S=condition.load_S * full,
    )


class _Ports:
    """A network reduced to its ports."""

    def __init__(self, network: Network, condition: Operating, factor_of_20: Floats, supply: Fed) -> None:
        self.network, self.condition, self.supply = network, condition, supply
        self.equations = Equations(network, condition, factor_of_20, supply)
        c, e = condition, self.equations
        self.linear = (
            not e.converters
            and bool(np.all(np.isneginf(c.low[e.sources]) & np.isposinf(c.high[e.sources])))
            and bool(np.all(np.isinf(c.power[e.sources])))
            and len(e.loads) > 0
        )
        if self.linear:
            self._reduce()

    def _reduce(self) -> None:
        """Factorise once: `spread` turns currents into the load ports to node volts, `base` is the unloaded network."""
        c, e = self.condition, self.equations
        source_S = 1 / c.ohm[e.sources]
        a = np.concatenate([e.a, c.source_a[e.sources]])
        b = np.concatenate([e.b, c.source_b[e.sources]])
        g = np.concatenate([e.siemens, source_S])
        rows, columns = np.concatenate([a, b, a, b]), np.concatenate([a, b, b, a])
        values = np.concatenate([g, g, -g, -g])
        rows, columns = e.position[rows], e.position[columns]
        keep = (rows >= 0) & (columns >= 0)
        solution = factor(e.size, rows[keep], columns[keep], values[keep], symmetric=True)
        ports = np.zeros((self.network.node_count, len(e.loads)))
        place = np.arange(len(e.loads))
        ports[c.load_a[e.loads], place] += 1.0
        ports[c.load_b[e.loads], place] -= 1.0
        unknown = e.position >= 0
        self.spread = np.zeros_like(ports)
        self.spread[unknown] = solution.solve(ports[unknown])
        emf = np.zeros(self.network.node_count)
        np.add.at(emf, c.source_a[e.sources], source_S * c.volts[e.sources])
        np.add.at(emf, c.source_b[e.sources], -source_S * c.volts[e.sources])
        self.base = np.zeros(self.network.node_count)
        self.base[unknown] = solution.solve(emf[unknown])
        self.impedance = self.spread[c.load_a[e.loads]] - self.spread[c.load_b[e.loads]]
        self.open_V = self.base[c.load_a[e.loads]] - self.base[c.load_b[e.loads]]

    def empty(self, cases: int) -> Many:
        """Nothing solved yet."""
        n, c = self.network, self.condition
        return Many(
            np.zeros(cases, dtype=bool),
            np.zeros(cases),
            np.full((cases, n.node_count), np.nan),
            np.zeros((cases, len(c.load_a))),
            np.zeros((cases, len(c.source_a))),
            np.zeros((cases, len(n.a))),
            np.zeros(cases),
            np.zeros(cases, dtype=bool),
        )

    def _laws(self, shares: Floats) -> tuple[Floats, Floats, Floats]:
        """W, A and S of the working loads, over (case, load)."""
        c, on = self.condition, self.equations.loads
        mine = shares[:, on]
        return mine * c.load_W[on], mine * c.load_A[on], mine * c.load_S[on]

    def descend(self, shares: Floats, found: Many, rows: slice) -> None:
        """Solve the cases of `rows` together, from the unloaded network down, into `found`."""
        watts, amps, siemens = self._laws(shares[rows])
        knee = self.condition.knee[self.equations.loads]
        u = np.broadcast_to(self.open_V, watts.shape).copy()
        mean_slope = (siemens - watts / u**2).mean(axis=0)
        correct = np.linalg.inv(np.eye(len(knee)) + self.impedance * mean_slope)
        toward = (correct @ self.impedance).T
        keep = correct.T
        drawn = np.empty_like(u)
        for _ in range(_ITERATIONS):
            self._drawn(u, watts, amps, siemens, knee, out=drawn)
            # u ← u + M (open − Z·drawn − u)
            step = (self.open_V - u) @ keep - drawn @ toward
            u += step
            if np.abs(step).max() < 1e-13 * max(1.0, float(self.open_V.max(initial=0.0))):
                break
        self._drawn(u, watts, amps, siemens, knee, out=drawn)
        contracts = self._contracts(u, watts, siemens)
        self._answer(u, drawn, contracts & np.all(u >= knee, axis=1), found, rows)

    @staticmethod
    def _drawn(u: Floats, watts: Floats, amps: Floats, siemens: Floats, knee: Floats, out: Floats) -> None:
        above = np.maximum(u, knee)
        np.divide(watts, above, out=out)
        out += amps
        out *= np.minimum(u / knee, 1.0) if (u < knee).any() else 1.0
        out += siemens * u

    def _contracts(self, u: Floats, watts: Floats, siemens: Floats) -> np.ndarray:
        """Whether the map is a contraction at and above u: |Z|·|slope| sums to less than one at every port."""
        slope = np.abs(siemens - watts / np.maximum(u, 1e-9) ** 2) + siemens
        return np.asarray((slope @ np.abs(self.impedance).T).max(axis=1) < 1.0)

    def _answer(self, u: Floats, drawn: Floats, accepted: np.ndarray, found: Many, rows: slice) -> None:
        """Node volts and currents of all cases, and the certificate from the element laws on the full network."""
        c, e = self.condition, self.equations
        volts = self.base - drawn @ self.spread.T
        flow = e.siemens * (volts[:, e.a] - volts[:, e.b])
        source_u = volts[:, c.source_a[e.sources]] - volts[:, c.source_b[e.sources]]
        delivered = (c.volts[e.sources] - source_u) / c.ohm[e.sources]
        out = self._imbalance(flow, delivered, drawn)
        found.imbalance_A[rows] = np.abs(out[:, self.supply.live]).max(axis=1, initial=0.0)
        allowed = np.maximum(1e-9, e.scale * np.abs(volts).max(axis=1, initial=0.0)[:, None])
        balanced = np.all(np.abs(out) <= allowed, axis=1)
        load_u = volts[:, c.load_a[e.loads]] - volts[:, c.load_b[e.loads]]
        power_in = (source_u * delivered).sum(axis=1)
        used = (load_u * drawn).sum(axis=1) + (flow**2 / e.siemens).sum(axis=1)
        balanced &= np.abs(power_in - used) <= POWER_SHARE * np.maximum(np.abs(power_in), 1.0)
        # The currents were taken at the ports' own voltages: those must be the network's.
        consistent = np.abs(load_u - u).max(axis=1) <= 1e-9
        found.solved[rows] = accepted & balanced & consistent
        found.share_held[rows] = np.where(found.solved[rows], 1.0, 0.0)
        found.volts[rows] = np.where(self.supply.live, volts, np.nan)
        found.branch_A[rows, e.branches] = flow
        found.drawn_A[rows, e.loads] = drawn
        found.delivered_A[rows, e.sources] = delivered

    @cached_property
    def _incidence(self) -> Any:
        """Sparse (node, current) matrix of signs: which currents leave and enter each node."""
        from scipy.sparse import coo_array

        c, e, count = self.condition, self.equations, self.network.node_count
        ends = np.concatenate(
            [e.a, e.b, c.source_a[e.sources], c.source_b[e.sources], c.load_a[e.loads], c.load_b[e.loads]]
        )
        branch, source = np.arange(len(e.a)), len(e.a) + np.arange(len(e.sources))
        load = len(e.a) + len(e.sources) + np.arange(len(e.loads))
        columns = np.concatenate([branch, branch, source, source, load, load])
        ones_b, ones_s, ones_l = np.ones(len(branch)), np.ones(len(source)), np.ones(len(load))
        signs = np.concatenate([ones_b, -ones_b, -ones_s, ones_s, ones_l, -ones_l])
        return coo_array((signs, (ends, columns)), shape=(count, len(branch) + len(source) + len(load))).tocsr()

    def _imbalance(self, flow: Floats, delivered: Floats, drawn: Floats) -> Floats:
        """Current leaving every node, over (case, node)."""
        return np.asarray((self._incidence @ np.concatenate([flow, delivered, drawn], axis=1).T).T)
