"""The network as a fault sees it: its conductors cold or hot, its switches in one setting, places within its runs."""

from collections.abc import Sequence

import numpy as np

from farvolt import conductors
from farvolt.fault_sources import FaultSource, coldest_degC, fault_sources, ports
from farvolt.network import BOND, FEED, LEAST_OHM, RETURN, Floats, Network
from farvolt.operating import Islands, device_closed
from farvolt.plan import CHASSIS, Run
from farvolt.rulebook import Rulebook
from farvolt.shorts import Circuit, Place, Shorted, Spot
from farvolt.temperatures import at as temperatures_at

TRACE_A = 1e-3
"""A current below this is none: what leaks through a blocking diode."""

_LINK_PER_K = 0.00393
"""Temperature coefficient of the copper of link cables at 20 °C (IEC 60028)."""


class FaultNetwork:
    """The conductors that are closed, with the sources at work, ready to be shorted at points and within runs."""

    def __init__(
        self,
        network: Network,
        parts: Islands,
        fixed: Floats,
        cable: Floats,
        sources: Sequence[FaultSource],
        on: np.ndarray,
    ) -> None:
        closed = np.flatnonzero(on)
        self.network, self.sources = network, tuple(sources)
        self._part = parts.of_node
        self.fixed_ohm, self.cable_ohm = fixed[closed], cable[closed]
        self.ohm = self.fixed_ohm + self.cable_ohm
        self.run, self.device, self.pole = network.run[closed], network.device[closed], network.pole[closed]
        self.circuit = Circuit(network.node_count, network.a[closed], network.b[closed], self.ohm, ports(sources))
        ends = (self.circuit.a, self.circuit.b, self.circuit.ports.a, self.circuit.ports.b)
        self._meeting = np.bincount(np.concatenate(ends), minlength=network.node_count)
        cables = np.flatnonzero((self.run >= 0) & (self.cable_ohm > 0))
        keys = zip(self.run[cables].tolist(), self.pole[cables].tolist(), strict=True)
        self._branches = dict(zip(keys, cables.tolist(), strict=True))
        runs = network.plan.runs
        alone = [(run, place) for (run, _), place in self._branches.items() if runs[run].conducts == "return"]
        self._returns = np.array(alone, dtype=np.int64).reshape(-1, 2)

    @property
    def guarded(self) -> list[tuple[tuple[int, int], int]]:
        """Every protection as (run, place among its protections), with the conductor that it sits in."""
        found = []
        for index, run in enumerate(self.network.plan.runs):
            for number, one in enumerate(run.protections):
                branch = self._branches.get((index, FEED if one.pole == "feed" else RETURN))
                if branch is not None:
                    found.append(((index, number), branch))
        return found

    def point(self, name: str) -> Place:
        """A short between the feed and the return of a point."""
        return Place(Spot(self.network.feed(name)), Spot(self.network.ret(name)))

    def spot(self, run: int, pole: int, end: str, along_m: float, beyond_ohm: float = 0.0) -> Spot | None:
        """A place in one conductor of a run, `along_m` from one of its ends; None where it has no such conductor.

        Half of what is no cable lies on either side, but for `beyond_ohm`, which lies beyond the place.
        """
        branch = self._branches.get((run, pole))
        if branch is None:
            return None
        share = min(along_m / self.network.plan.runs[run].length.si, 1.0)
        beyond_ohm = min(beyond_ohm, float(self.fixed_ohm[branch]))
        half, cable = (float(self.fixed_ohm[branch]) - beyond_ohm) / 2, float(self.cable_ohm[branch])
        a, b = int(self.circuit.a[branch]), int(self.circuit.b[branch])
        node, other = (a, b) if end == "from" else (b, a)
        return Spot(node, branch, other, half + share * cable, half + (1 - share) * cable + beyond_ohm, half)

    def ends_at(self, spot: Spot) -> bool:
        """Whether nothing but the run that a spot lies in is joined to its `node`: no current comes from there."""
        return bool(self._meeting[spot.node] == 1)

    def opposite(self, run: int, pole: int, end: str, along_m: float) -> list[Spot]:
        """What a short within a run may end at: its own conductor of that pole beside it; where it has none, that
        pole at its end, and the chassis where that is its return."""
        own = self.spot(run, pole, end, along_m)
        if own is not None:
            return [own]
        entry = self.network.plan.runs[run]
        order = (entry.from_point, entry.to_point) if end == "from" else (entry.to_point, entry.from_point)
        keys = [(name, pole) for name in order if name != CHASSIS][:1]
        if pole == RETURN and entry.return_path == "chassis":
            keys.append((CHASSIS, RETURN))
        return [Spot(self.network.nodes[key]) for key in keys if key in self.network.nodes]

    def taking_part(self, found: Shorted) -> list[int]:
        """The sources of the island of a fault that deliver or take a current; what another island does is apart."""
        mine = self._part[found.place.feed.node]
        return [
            place
            for place, (one, amps) in enumerate(zip(self.sources, found.port_A.tolist(), strict=True))
            if one.source >= 0 and abs(amps) >= TRACE_A and self._part[one.a] == mine
        ]

    def feed_A(self, found: Shorted, run: int, end: str) -> float:
        """Current in the feed of a run at one of its ends, without its sign; 0 where the run has no feed."""
        branch = self._branches.get((run, FEED))
        if branch is None:
            return 0.0
        spot = found.place.feed
        if spot.branch != branch:
            return abs(found.in_branch(branch))
        near, far = found.parts_A(spot)
        at_end = int(self.circuit.a[branch] if end == "from" else self.circuit.b[branch])
        return abs(near if at_end == spot.node else far)

    def returns_A(self, found: Shorted) -> tuple[tuple[int, float], ...]:
        """The runs with a return conductor only that carry a fault's current, each with what it carries."""
        runs, branches = self._returns.T
        amps = np.abs(found.in_branches(branches)) if len(runs) else np.zeros(0)
        some = amps >= TRACE_A
        return tuple(zip(runs[some].tolist(), amps[some].tolist(), strict=True))


def coldest(network: Network, islands: Islands) -> list[FaultNetwork]:
    """All sources at their most and conductors cold, in each setting of the switches."""
    plan, degC = network.plan, coldest_degC(network.plan)
    factors = [1 + conductors.temperature_coefficient(run.material).value * (degC - 20) for run in plan.runs]
    fixed, cable = _stated(network, degC, np.array(factors))
    sources = fault_sources(network, islands, "highest")
    return [FaultNetwork(network, islands, fixed, cable, sources, on) for on in _settings(network)]


def hottest(network: Network, islands: Islands, rulebook: Rulebook, source: int) -> list[FaultNetwork]:
    """One source alone at its least and conductors hot, in each setting of the switches."""
    plan = network.plan
    hot = [temperatures_at(plan, rulebook, case, "hot").factor_of_20 for case in plan.checked_cases]
    cable = network.cable_ohm_20 * np.append(np.max(hot, axis=0), 1.0)[network.run]
    links = _links(network)
    warmer = 1 + _LINK_PER_K * (rulebook.default_insulation_degC - 20)
    fixed = np.where(links, network.fixed_ohm * warmer, network.fixed_ohm)
    alone = [one for one in fault_sources(network, islands, "lowest") if one.source in (source, -1)]
    return [FaultNetwork(network, islands, fixed, cable, alone, on) for on in _settings(network)]


def _links(network: Network) -> np.ndarray:
    """Branches that are cables between the strings of a battery: the network has them at 20 °C."""
    links: np.ndarray = (network.run < 0) & (network.device < 0) & (network.pole != BOND)
    return links


def _stated(network: Network, degC: float, factors: Floats) -> tuple[Floats, Floats]:
    """Fixed and cable resistance of every branch at a temperature, with only those contacts that the plan states."""
    plan = network.plan
    links = _links(network)
    cable = network.cable_ohm_20 * np.append(factors, 1.0)[network.run]
    fixed = np.where(links, network.fixed_ohm * (1 + _LINK_PER_K * (degC - 20)), network.fixed_ohm)
    chassis = network.nodes.get((CHASSIS, RETURN), -1)
    bond_ohm = plan.plan.chassis_bond.si if "chassis_bond" in plan.plan.model_fields_set else LEAST_OHM
    for branch in np.flatnonzero(~links):
        run, device = int(network.run[branch]), int(network.device[branch])
        if network.cable_ohm_20[branch] > 0:
            fixed[branch] = _stated_in_run(plan.runs[run], "feed" if network.pole[branch] == FEED else "return")
        elif device >= 0:
            known = plan.devices[device].resistance
            fixed[branch] = max(known.si, LEAST_OHM) if known is not None else LEAST_OHM
        elif chassis in (network.a[branch], network.b[branch]):
            fixed[branch] = max(bond_ohm, LEAST_OHM)
    return fixed, cable


def _stated_in_run(run: Run, pole: str) -> float:
    """What the plan states of the joints and the protection in one pole of a run; a measured resistance has them."""
    if run.resistance is not None:
        return 0.0
    joints = run.joints * run.joint_resistance.si / run.parallel if "joint_resistance" in run.model_fields_set else 0.0
    return joints + sum(one.resistance.si for one in run.protections if one.pole == pole and one.resistance is not None)


def _settings(network: Network) -> list[np.ndarray]:
    """Over branches: whether it is closed, with all devices closed and as each case has them."""
    plan = network.plan
    found = {tuple([True] * len(plan.devices)): None}
    for case in plan.checked_cases:
        found.setdefault(tuple(device_closed(plan, index, case) for index in range(len(plan.devices))), None)
    return [np.array([*closed, True])[network.device] for closed in found]
