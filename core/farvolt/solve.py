"""The solution of a network in a case: Kirchhoff's laws with every element's own law, and its certificate.

Nodal analysis on both wires, F(v) = G·v + element currents = 0, solved by Newton's method on the way the loads
take when all are raised together from zero. See `solve`.
"""

from dataclasses import dataclass

import numpy as np

from farvolt.linear import SingularError, factor
from farvolt.network import Floats, Network
from farvolt.operating import KNEE_SHARE, Operating, components

IMBALANCE_A = 1e-9
POWER_SHARE = 1e-9
SHARE_STEP = 1e-3
"""A case that gives way is located to this share of its loads."""

_EPSILON = float(np.finfo(float).eps)
_FIRST_STEPS = 16
_LEAST_STEP = 1e-5


@dataclass(frozen=True)
class State:
    """Node voltages and port currents of a case at `share` of its loads, with the certificate.

    `volts` is NaN at unfed nodes. `delivered_A` is over source ports, `drawn_A` over load ports, `branch_A` over
    branches (from a to b). `imbalance_A` is the largest breach of Kirchhoff's current law at any fed node.
    """

    solved: bool
    share_held: float
    volts: Floats
    delivered_A: Floats
    drawn_A: Floats
    branch_A: Floats
    imbalance_A: float
    power_in_W: float
    power_loads_W: float
    power_lost_W: float
    weakest: int | None
    """Load port that falls fastest where the case gives way."""


@dataclass(frozen=True)
class Fed:
    """Which nodes have a source behind them in a case, and where each galvanic part is grounded."""

    live: np.ndarray
    group: np.ndarray
    grounds: tuple[int, ...]
    source_on: np.ndarray
    load_on: np.ndarray


def first_diode(network: Network) -> int:
    """Where the diodes begin among the source ports."""
    return len(network.plan.sources) + len(network.strings)


def fed(network: Network, condition: Operating) -> Fed:
    """Graph search before solving: live nodes, the ports that work, the ground of each galvanic part."""
    on = condition.branch_on
    ports = first_diode(network)
    converters = {source: load for source, load, _, _ in condition.converters}
    active = condition.source_on.copy()
    for port in converters:
        active[port] = False
    while True:
        group = _groups(network, condition, active, on)
        alive = {int(group[condition.source_a[port]]) for port in np.flatnonzero(active[:ports])}
        live = np.isin(group, list(alive))
        joined = [
            port
            for port, load in converters.items()
            if condition.source_on[port] and not active[port] and live[condition.load_a[load]]
            and group[condition.load_a[load]] == group[condition.load_b[load]]
        ]  # fmt: skip
        if not joined:
            break
        active[joined] = True
    load_on = live[condition.load_a] & (group[condition.load_a] == group[condition.load_b])
    for port, load in converters.items():
        load_on[load] &= active[port]
    active[ports:] &= live[condition.source_a[ports:]] & live[condition.source_b[ports:]]
    return Fed(live, group, _grounds(network, condition, active, group, live), active, load_on)


def _groups(network: Network, condition: Operating, active: np.ndarray, on: np.ndarray) -> np.ndarray:
    a = np.concatenate([network.a[on], condition.source_a[active]])
    b = np.concatenate([network.b[on], condition.source_b[active]])
    return components(network.node_count, a, b)


def _grounds(
    network: Network, condition: Operating, active: np.ndarray, group: np.ndarray, live: np.ndarray
) -> tuple[int, ...]:
    """The return of the reference source, or of the first working source, in each live galvanic part."""
    grounds: dict[int, int] = {}
    sources = network.plan.sources
    working = set(np.flatnonzero(active).tolist()) | {index for index, _, _ in network.strings}
    order = sorted(
        range(len(sources)),
        key=lambda i: (sources[i].name != network.plan.reference, i not in working, sources[i].kind != "battery"),
    )
    for port in order:
        node = network.ret(sources[port].at)
        if live[node]:
            grounds.setdefault(int(group[node]), node)
    return tuple(grounds.values())


def solve(network: Network, condition: Operating, factor_of_20: Floats, supply: Fed | None = None) -> State:
    """Solve one case; `factor_of_20` is over runs, the resistance of a conductor over that at 20 °C.

    The solution is the one reached by raising all loads together from zero. Newton's method starts from the
    unloaded network and moves down: a step never jumps over the voltage at which an idle source joins in, and
    the Jacobian stays positive definite, so within a smooth piece the iterates fall monotonically on the highest
    solution. Where that fails, the loads are raised in small steps. A case gives way when a load has to fall
    below its knee; `share_held` then says where, to `SHARE_STEP`.
    """
    system = _System(network, condition, factor_of_20, supply or fed(network, condition))
    start = system.newton(system.first_guess(), 0.0)
    if start is None:
        return system.state(system.first_guess(), 0.0, None)
    end = system.newton(start, 1.0, falling=True)
    if end is not None and system.above_knees(end):
        return system.state(end, 1.0, None)
    return system.raise_loads(start)


class _System:
    """The nodal equations of one case at one set of conductor temperatures."""

    def __init__(self, network: Network, condition: Operating, factor_of_20: Floats, supply: Fed) -> None:
        self.condition = condition
        self.network = network
        self.supply = supply
        live = supply.live
        factors = np.append(factor_of_20, 1.0)[network.run]
        ohm = network.fixed_ohm + network.cable_ohm_20 * factors
        self.branches = np.flatnonzero(condition.branch_on & live[network.a] & live[network.b])
        self.all_siemens = np.zeros(len(ohm))
        self.all_siemens[self.branches] = 1 / ohm[self.branches]
        self.a, self.b = network.a[self.branches], network.b[self.branches]
        self.siemens = self.all_siemens[self.branches]
        self.sources = np.flatnonzero(supply.source_on)
        self.loads = np.flatnonzero(supply.load_on)
        self.converters = [row for row in condition.converters if supply.source_on[row[0]]]
        unknown = live.copy()
        unknown[list(supply.grounds)] = False
        self.position = np.where(unknown, np.cumsum(unknown) - 1, -1)
        self.size = int(unknown.sum())
        self.scale = self._imbalance_scale()

    def _imbalance_scale(self) -> Floats:
        """Over nodes: 64 ε times the largest conductance that meets there (times volts: the rounding of a sum)."""
        # `_allowed` takes the largest voltage of the network for |v|: currents at a grounded node round like
        # those of its neighbours.
        largest = np.zeros(self.network.node_count)
        np.maximum.at(largest, self.a, self.siemens)
        np.maximum.at(largest, self.b, self.siemens)
        c = self.condition
        for nodes in (c.source_a, c.source_b):
            np.maximum.at(largest, nodes[self.sources], 1 / c.ohm[self.sources])
        return 64 * _EPSILON * largest

    def first_guess(self) -> Floats:
        """All feeds of a galvanic part at its highest source voltage, all returns at zero."""
        c = self.condition
        volts = np.zeros(self.network.node_count)
        feeds = {node for (_, pole), node in self.network.nodes.items() if pole == 0}
        high: dict[int, float] = {}
        for port in self.sources:
            if port < first_diode(self.network):
                island = int(c.islands.of_node[c.source_a[port]])
                high[island] = max(high.get(island, 0.0), float(c.volts[port]))
        for node in feeds:
            volts[node] = high.get(int(c.islands.of_node[node]), 0.0)
        return volts

    # Element laws -----------------------------------------------------------------------------------------

    def source_law(self, volts: Floats) -> tuple[Floats, Floats, Floats]:
        """Port voltage, current delivered and its slope −di/du (≥ 0) of the working source ports."""
        c, on = self.condition, self.sources
        u = volts[c.source_a[on]] - volts[c.source_b[on]]
        ohm, low, power = c.ohm[on], c.low[on], c.power[on]
        amps = (c.volts[on] - u) / ohm
        slope = 1 / ohm
        floor = KNEE_SHARE * c.nominal[on]
        by_power = np.where(np.isfinite(power), power / np.maximum(u, floor), np.inf)
        high = np.minimum(c.high[on], by_power)
        idle, limited = amps < low, amps > high
        power_bound = limited & (by_power <= c.high[on]) & (u > floor)
        amps = np.clip(amps, low, high)
        with np.errstate(invalid="ignore"):
            slope = np.where(idle, 0.0, np.where(limited, np.where(power_bound, by_power / u, 0.0), slope))
        leak = c.leak[on]
        return u, amps - leak * u, slope + leak

    def load_law(self, volts: Floats, share: float) -> tuple[Floats, Floats, Floats]:
        """Port voltage, current drawn and its slope di/du of the working load ports, loads raised to `share`."""
        c, on = self.condition, self.loads
        u = volts[c.load_a[on]] - volts[c.load_b[on]]
        watts = self._watts(volts, share)[on]
        amps, siemens, knee = share * c.load_A[on], share * c.load_S[on], c.knee[on]
        above = u >= knee
        safe = np.where(above, u, knee)
        below_S = watts / knee**2 + amps / knee
        drawn = np.where(above, watts / safe + amps, below_S * u) + siemens * u
        slope = np.where(above, -watts / safe**2, below_S) + siemens
        return u, drawn, slope

    def _watts(self, volts: Floats, share: float) -> Floats:
        """Constant power of every load port; a converter's input follows its output."""
        c = self.condition
        watts = share * c.load_W
        if self.converters:
            u, amps, _ = self.source_law(volts)
            of_port = {int(port): place for place, port in enumerate(self.sources)}
            for port, load, efficiency, standby in self.converters:
                place = of_port[port]
                watts[load] = u[place] * amps[place] / efficiency + share * standby
        return watts

    # Equations --------------------------------------------------------------------------------------------

    def residual(self, volts: Floats, share: float) -> Floats:
        """Current leaving every node: zero where Kirchhoff's current law holds. Grounds included."""
        c = self.condition
        out = np.zeros(self.network.node_count)
        flow = self.siemens * (volts[self.a] - volts[self.b])
        _, delivered, _ = self.source_law(volts)
        _, drawn, _ = self.load_law(volts, share)
        for nodes, amps, sign in (
            (self.a, flow, 1.0), (self.b, flow, -1.0),
            (c.source_a[self.sources], delivered, -1.0), (c.source_b[self.sources], delivered, 1.0),
            (c.load_a[self.loads], drawn, 1.0), (c.load_b[self.loads], drawn, -1.0),
        ):  # fmt: skip
            np.add.at(out, nodes, sign * amps)
        return out

    def _stamps(self, volts: Floats, share: float) -> tuple[np.ndarray, np.ndarray, Floats]:
        """Rows, columns and values of the Jacobian over all nodes."""
        c = self.condition
        _, _, source_S = self.source_law(volts)
        _, _, load_S = self.load_law(volts, share)
        # A trace of slope keeps a part whose sources are all at a limit from being singular; F stays exact.
        source_S = np.maximum(source_S, 1e-9 / c.ohm[self.sources])
        a = np.concatenate([self.a, c.source_a[self.sources], c.load_a[self.loads]])
        b = np.concatenate([self.b, c.source_b[self.sources], c.load_b[self.loads]])
        g = np.concatenate([self.siemens, source_S, load_S])
        rows, columns, values = (
            np.concatenate([a, b, a, b]),
            np.concatenate([a, b, b, a]),
            np.concatenate([g, g, -g, -g]),
        )
        if self.converters:
            extra = np.array(list(self._coupling(volts))).reshape(-1, 3)
            rows = np.concatenate([rows, extra[:, 0].astype(np.int64)])
            columns = np.concatenate([columns, extra[:, 1].astype(np.int64)])
            values = np.concatenate([values, extra[:, 2]])
        return rows, columns, values

    def _coupling(self, volts: Floats) -> list[tuple[int, int, float]]:
        """How a converter's input current follows the voltage at its output."""
        c = self.condition
        u, amps, slope = self.source_law(volts)
        of_port = {int(port): place for place, port in enumerate(self.sources)}
        found = []
        for port, load, efficiency, _ in self.converters:
            place = of_port[port]
            rate = (amps[place] - u[place] * slope[place]) / efficiency
            u_in = volts[c.load_a[load]] - volts[c.load_b[load]]
            per_volt = rate / u_in if u_in >= c.knee[load] else rate * u_in / c.knee[load] ** 2
            for row, sign_row in ((c.load_a[load], 1.0), (c.load_b[load], -1.0)):
                for column, sign in ((c.source_a[port], 1.0), (c.source_b[port], -1.0)):
                    found.append((int(row), int(column), sign_row * sign * per_volt))
        return found

    def _balanced(self, out: Floats, volts: Floats) -> bool:
        live = self.supply.live
        return bool(np.all(np.abs(out[live]) <= self._allowed(volts)[live] / 4))

    def _allowed(self, volts: Floats) -> Floats:
        """The certificate's bound on the imbalance at every node, A."""
        allowed: Floats = np.maximum(IMBALANCE_A, self.scale * np.abs(volts).max(initial=0.0))
        return allowed

    def newton(self, volts: Floats, share: float, *, falling: bool = False) -> Floats | None:
        """Newton's method from `volts`; None where it does not converge on a stable solution.

        With `falling` a load voltage that rises on the way also ends it: the caller then takes smaller steps.
        """
        volts = volts.copy()
        unknown = self.position >= 0
        previous = np.inf
        for _ in range(80):
            out = self.residual(volts, share)
            done = self._balanced(out, volts)
            if done and np.abs(out[unknown]).max(initial=0.0) >= previous / 2:
                return volts
            previous = np.abs(out[unknown]).max(initial=0.0) if done else np.inf
            try:
                solution = factor(self.size, *self._reduced(volts, share), symmetric=not self.converters)
            except SingularError:
                return volts if done else None
            if not solution.positive:
                return None
            step = np.zeros_like(volts)
            step[unknown] = -solution.solve(out[unknown])
            length = self._step_length(volts, step)
            if falling and self._rises(volts, length * step):
                return None
            volts += length * step
        return volts if self._balanced(self.residual(volts, share), volts) else None

    def _reduced(self, volts: Floats, share: float) -> tuple[np.ndarray, np.ndarray, Floats]:
        rows, columns, values = self._stamps(volts, share)
        rows, columns = self.position[rows], self.position[columns]
        keep = (rows >= 0) & (columns >= 0)
        return rows[keep], columns[keep], values[keep]

    def _step_length(self, volts: Floats, step: Floats) -> float:
        """Longest part of a step that passes no idle source's voltage and at most halves a load's."""
        c, on, loads = self.condition, self.sources, self.loads
        length = 1.0
        u = volts[c.source_a[on]] - volts[c.source_b[on]]
        change = step[c.source_a[on]] - step[c.source_b[on]]
        margin = u - c.volts[on]
        joins = (c.low[on] == 0) & (margin > 1e-12 * np.abs(c.volts[on]) + 1e-15) & (margin + change < 0)
        if joins.any():
            # Land just inside the law of the source that joins in first.
            length = min(length, float(np.min((margin[joins] + 1e-9) / -change[joins])))
        u = volts[c.load_a[loads]] - volts[c.load_b[loads]]
        change = step[c.load_a[loads]] - step[c.load_b[loads]]
        halves = (change < -0.5 * u) & (u > c.knee[loads])
        if halves.any():
            length = min(length, float(np.min(0.5 * u[halves] / -change[halves])))
        return min(length, 1.0)

    def _rises(self, volts: Floats, step: Floats) -> bool:
        c, on = self.condition, self.loads
        rise = step[c.load_a[on]] - step[c.load_b[on]]
        return bool(np.any(rise > 1e-6 + 1e-9 * np.abs(volts[c.load_a[on]])))

    def above_knees(self, volts: Floats) -> bool:
        """True when no constant-power or constant-current load stands below its knee."""
        c, on = self.condition, self.loads
        u = volts[c.load_a[on]] - volts[c.load_b[on]]
        demands = (self._watts(volts, 1.0)[on] > 0) | (c.load_A[on] > 0)
        return not bool(np.any(demands & (u < c.knee[on])))

    # The way up --------------------------------------------------------------------------------------------

    def raise_loads(self, volts: Floats) -> State:
        """Raise all loads together from zero; the state at full share, or where the case gives way."""
        share, step = 0.0, 1 / _FIRST_STEPS
        while share < 1.0:
            trial = min(1.0, share + step)
            found = self.newton(volts, trial)
            if found is not None and self._near(volts, found) and self.above_knees(found):
                volts, share, step = found, trial, min(2 * step, 1 / _FIRST_STEPS)
                continue
            step /= 2
            if step < _LEAST_STEP:
                settled = self._settle(volts, min(1.0, share + 2 * step))
                if settled is None or not self.above_knees(settled):
                    return self.state(volts, share, self._weakest(volts, share))
                volts, share, step = settled, min(1.0, share + 2 * step), 1 / _FIRST_STEPS
        return self.state(volts, 1.0, None)

    def _near(self, before: Floats, after: Floats) -> bool:
        """No load voltage moved by more than a tenth: a larger move may have left the path."""
        c, on = self.condition, self.loads
        u = before[c.load_a[on]] - before[c.load_b[on]]
        v = after[c.load_a[on]] - after[c.load_b[on]]
        return bool(np.all(np.abs(v - u) <= 0.1 * np.abs(u) + 1e-9))

    def _settle(self, volts: Floats, share: float) -> Floats | None:
        """Where the network falls to when a solution ends: the flow of charge out of a small capacitance at every
        load (implicit Euler, steps of at most 2 %), until Newton's method takes hold of a stable solution."""
        volts = volts.copy()
        c, unknown = self.condition, self.position >= 0
        capacitance = np.zeros(self.network.node_count)
        np.maximum.at(capacitance, c.load_a[self.loads], 1.0)
        hold = 100.0
        for _ in range(2000):
            out = self.residual(volts, share)
            rows, columns, values = self._reduced(volts, share)
            own = np.flatnonzero(capacitance[unknown])
            try:
                held = factor(
                    self.size,
                    np.append(rows, own),
                    np.append(columns, own),
                    np.append(values, np.full(len(own), hold)),
                    symmetric=not self.converters,
                )
            except SingularError:
                return None
            if not held.positive:
                hold *= 4
                continue
            step = np.zeros_like(volts)
            step[unknown] = -held.solve(out[unknown])
            u = volts[c.load_a[self.loads]] - volts[c.load_b[self.loads]]
            change = np.abs(step[c.load_a[self.loads]] - step[c.load_b[self.loads]])
            worst = float(np.max(change / np.maximum(np.abs(u), 1e-3), initial=0.0))
            volts += step * min(1.0, 0.02 / worst if worst > 0 else 1.0)
            if not self.above_knees(volts):
                return None
            hold = max(hold * (0.7 if worst < 0.02 else 1.3), 1e-6)
            if worst < 1e-4 and (found := self.newton(volts, share)) is not None and self._near(volts, found):
                return found
        return None

    def _weakest(self, volts: Floats, share: float) -> int | None:
        """The load whose voltage falls fastest as the loads are raised further."""
        c, unknown = self.condition, self.position >= 0
        try:
            solution = factor(self.size, *self._reduced(volts, share), symmetric=False)
        except SingularError:
            return None
        rate = np.zeros_like(volts)
        ahead = self.residual(volts, share + 1e-6) - self.residual(volts, share)
        rate[unknown] = -solution.solve(ahead[unknown])
        fall = -(rate[c.load_a[self.loads]] - rate[c.load_b[self.loads]]) / c.knee[self.loads]
        named = self.loads < len(self.network.plan.loads)
        return int(self.loads[named][np.argmax(fall[named])]) if named.any() else None

    # The answer ----------------------------------------------------------------------------------------------

    def state(self, volts: Floats, share: float, weakest: int | None) -> State:
        """The answer with its certificate, recomputed from the element laws."""
        c, network = self.condition, self.network
        out = self.residual(volts, share)
        source_u, delivered, _ = self.source_law(volts)
        load_u, drawn, _ = self.load_law(volts, share)
        flow = self.all_siemens * (volts[network.a] - volts[network.b])
        lost = float(np.sum(flow * (volts[network.a] - volts[network.b])))
        diodes = self.sources >= first_diode(network)
        lost -= float(np.sum((source_u * delivered)[diodes]))
        inputs = self.loads >= len(network.plan.loads)
        power_in = float(np.sum((source_u * delivered)[~diodes]) - np.sum((load_u * drawn)[inputs]))
        power_loads = float(np.sum((load_u * drawn)[~inputs]))
        live, allowed = self.supply.live, self._allowed(volts)
        turnover = max(abs(power_in), power_loads + abs(lost), 1e-9)
        holds = (
            bool(np.all(np.abs(out[live]) <= allowed[live]))
            and abs(power_in - power_loads - lost) <= POWER_SHARE * turnover + 1e-9
        )
        return State(
            solved=share >= 1.0 and holds,
            share_held=share,
            volts=np.where(live, volts, np.nan),
            delivered_A=_spread(len(c.source_a), self.sources, delivered),
            drawn_A=_spread(len(c.load_a), self.loads, drawn),
            branch_A=flow,
            imbalance_A=float(np.abs(out[live]).max(initial=0.0)),
            power_in_W=power_in,
            power_loads_W=power_loads,
            power_lost_W=lost,
            weakest=weakest,
        )


def _spread(count: int, places: np.ndarray, values: Floats) -> Floats:
    full = np.zeros(count)
    full[places] = values
    return full
