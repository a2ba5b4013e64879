"""The nodal equations of one case: element laws, Kirchhoff's current law, and its Jacobian."""

from functools import cached_property

import numpy as np

from farvolt.fed import Fed, first_diode
from farvolt.linear import factor
from farvolt.network import FEED, Floats, Network
from farvolt.operating import KNEE_SHARE, Operating, components

IMBALANCE_A = 1e-9
"""No node may be out of balance by more than this, or by the rounding of its own currents."""

_TRACE_S = 1e-9
"""Slope given to a source at its limit in the Jacobian alone; far below a blocking diode's leak."""

HAIR_V = 1e-8
"""Far below any drop that matters, far above rounding."""

_EPSILON = float(np.finfo(float).eps)


class Equations:
    """The nodal equations F(v) = G·v + element currents = 0 of one case at one set of conductor temperatures.

    Voltages are over all nodes; `position` maps a node to its unknown (-1: grounded or not fed). `sources` and `loads`
    are the working ports, and the laws below are over these.
    """

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
        self.fed_through = np.isin(self.sources, [port for port, *_ in self.converters])
        self.position = np.where(unknown, np.cumsum(unknown) - 1, -1)
        self.size = int(unknown.sum())
        self.scale = self._rounding()
        self.power = self._power(ohm) if condition.arrays else condition.power

    def _power(self, ohm: Floats) -> Floats:
        """What each source may deliver, W: a controller with an array no more than the array gives at its input."""
        c, network, power = self.condition, self.network, self.condition.power.copy()
        for port, array, load, amps in c.arrays:
            if self.supply.source_on[port]:
                start, end = (c.source_a[array], c.source_b[array]), (c.load_a[load], c.load_b[load])
                at_input_V = c.volts[array] - amps * c.ohm[array] - _way_V(network, c, ohm, start, end, amps)
                efficiency = next(share for source, _, share, _ in c.converters if source == port)
                power[port] = min(power[port], max(efficiency * at_input_V * amps, 0.0))
        return power

    def _rounding(self) -> Floats:
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
        """All feeds of a joined part at its highest source voltage, all returns at zero."""
        c, part = self.condition, self.supply.part
        volts = np.zeros(self.network.node_count)
        high: dict[int, float] = {}
        for port in self.sources:
            if port < first_diode(self.network):
                mine = int(part[c.source_a[port]])
                high[mine] = max(high.get(mine, 0.0), float(c.volts[port]))
        for node in self._feeds:
            volts[node] = high.get(int(part[node]), 0.0)
        return volts

    def inside(self, volts: Floats) -> Floats:
        """A hair below: a source that idles at its very own voltage then conducts, and Newton sees its slope."""
        lower = volts.copy()
        lower[self._feeds] -= HAIR_V
        return lower

    @cached_property
    def _feeds(self) -> list[int]:
        return list({node for (_, pole), node in self.network.nodes.items() if pole == FEED})

    # Element laws -----------------------------------------------------------------------------------------

    def source_law(self, volts: Floats) -> tuple[Floats, Floats, Floats]:
        """Port voltage, current delivered and its slope −di/du (≥ 0) of the working source ports."""
        c, on = self.condition, self.sources
        u = self.source_volts(volts)
        ohm, low, power = c.ohm[on], c.low[on], self.power[on]
        amps = (c.volts[on] - u) / ohm
        slope = 1 / ohm
        floor = KNEE_SHARE * c.nominal[on]
        by_power = np.where(np.isfinite(power), power / np.maximum(u, floor), np.inf)
        high = np.minimum(c.high[on], by_power)
        # At its own voltage, give or take rounding, a source is ready to deliver: it holds a part that draws nothing.
        idle, limited = amps < low - 1e-12 * np.abs(c.volts[on]) / ohm, amps > high
        power_bound = limited & (by_power <= c.high[on]) & (u > floor)
        amps = np.clip(amps, low, high)
        with np.errstate(invalid="ignore"):
            slope = np.where(idle, 0.0, np.where(limited, np.where(power_bound, by_power / u, 0.0), slope))
        leak = c.leak[on]
        return u, amps - leak * u, slope + leak

    def limit_volts(self, volts: Floats) -> Floats:
        """Port voltage at which the droop of each working source reaches its limit."""
        c, on = self.condition, self.sources
        most = np.minimum(c.high[on], self.power[on] / np.maximum(self.source_volts(volts), KNEE_SHARE * c.nominal[on]))
        limit: Floats = c.volts[on] - c.ohm[on] * most
        return limit

    def load_law(self, volts: Floats, share: float) -> tuple[Floats, Floats, Floats]:
        """Port voltage, current drawn and its slope di/du of the working load ports, loads raised to `share`."""
        c, on = self.condition, self.loads
        u = self.load_volts(volts)
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
        source_S = np.maximum(source_S, _TRACE_S)
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

    def balanced(self, out: Floats, volts: Floats) -> bool:
        """Whether every node balances, with a quarter of what the certificate allows."""
        live = self.supply.live
        return bool(np.all(np.abs(out[live]) <= self.allowed(volts)[live] / 4))

    def allowed(self, volts: Floats) -> Floats:
        """The certificate's bound on the imbalance at every node, A."""
        allowed: Floats = np.maximum(IMBALANCE_A, self.scale * np.abs(volts).max(initial=0.0))
        return allowed

    def jacobian(self, volts: Floats, share: float) -> tuple[np.ndarray, np.ndarray, Floats]:
        """Rows, columns and values of the Jacobian over the unknown nodes."""
        rows, columns, values = self._stamps(volts, share)
        rows, columns = self.position[rows], self.position[columns]
        keep = (rows >= 0) & (columns >= 0)
        return rows[keep], columns[keep], values[keep]

    def load_volts(self, volts: Floats) -> Floats:
        """Voltage across every working load port, of node voltages or of a change in them."""
        c, on = self.condition, self.loads
        across: Floats = volts[c.load_a[on]] - volts[c.load_b[on]]
        return across

    def source_volts(self, volts: Floats) -> Floats:
        """Voltage across every working source port, of node voltages or of a change in them."""
        c, on = self.condition, self.sources
        across: Floats = volts[c.source_a[on]] - volts[c.source_b[on]]
        return across

    def above_knees(self, volts: Floats) -> bool:
        """True when no constant-power or constant-current load stands below its knee."""
        c, on = self.condition, self.loads
        u = self.load_volts(volts)
        demands = (self._watts(volts, 1.0)[on] > 0) | (c.load_A[on] > 0)
        return not bool(np.any(demands & (u < c.knee[on])))


def _way_V(
    network: Network, condition: Operating, ohm: Floats, one: tuple[int, int], other: tuple[int, int], amps: float
) -> float:
    """What is lost between two ports, there and back, by a current that enters at the feed of `one`, leaves at that of
    `other` and comes back in the returns: in the conductors, and in diodes on the way, which are taken to conduct."""
    on, first = condition.branch_on, first_diode(network)
    start, end = condition.source_b[first:], condition.source_a[first:]
    a, b = np.concatenate([network.a[on], start]), np.concatenate([network.b[on], end])
    siemens = np.concatenate([1 / ohm[on], 1 / condition.ohm[first:]])
    part = components(network.node_count, a, b)
    nodes = np.flatnonzero(np.isin(part, part[[*one, *other]]))
    place = np.full(network.node_count, -1)
    place[nodes] = np.arange(len(nodes))
    for root in np.unique(part[nodes]):
        place[nodes[np.argmax(part[nodes] == root)]] = -1  # the ground of each part
    known = np.flatnonzero(place >= 0)
    place[known] = np.arange(len(known))
    rows, columns = place[np.concatenate([a, b, a, b])], place[np.concatenate([a, b, b, a])]
    keep = (rows >= 0) & (columns >= 0)
    values = np.concatenate([siemens, siemens, -siemens, -siemens])[keep]
    into = np.zeros(network.node_count)
    for node, sign in zip((*one, *other), (1.0, -1.0, -1.0, 1.0), strict=True):
        into[node] += sign * amps
    # A diode's forward drop stands in series with its resistance: `volts` of its port is the drop, negative.
    holds = condition.volts[first:] / condition.ohm[first:]
    np.add.at(into, start, -holds)
    np.add.at(into, end, holds)
    volts = np.zeros(network.node_count)
    volts[known] = factor(len(known), rows[keep], columns[keep], values, symmetric=True).solve(into[known])
    return float(volts[one[0]] - volts[one[1]] - volts[other[0]] + volts[other[1]])
