"""A solved case read back in the plan's own words: volts at points, currents in runs, drops of loads."""

from collections import deque
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from farvolt.fed import Fed, first_diode
from farvolt.network import BOND, FEED, RETURN, Floats, Network
from farvolt.operating import Operating
from farvolt.results import (
    CaseResult,
    DeviceResult,
    LoadResult,
    PointResult,
    RunResult,
    SourceResult,
    Step,
    StringResult,
)
from farvolt.solve import State
from farvolt.temperatures import Conductors


@dataclass(frozen=True)
class Solution:
    """One case on one set of conductor temperatures. NaN stands for "no answer" in its arrays."""

    network: Network
    condition: Operating
    supply: Fed
    conductors: Conductors
    state: State

    @cached_property
    def ohm(self) -> Floats:
        """Resistance of every branch."""
        factors = np.append(self.conductors.factor_of_20, 1.0)[self.network.run]
        ohm: Floats = self.network.fixed_ohm + self.network.cable_ohm_20 * factors
        return ohm

    @cached_property
    def run_branches(self) -> tuple[np.ndarray, np.ndarray]:
        """Over runs: the branch of the feed and of the return conductor, or -1."""
        found = np.full((2, len(self.network.plan.runs)), -1)
        for pole in (FEED, RETURN):
            places = np.flatnonzero((self.network.run >= 0) & (self.network.pole == pole))
            found[pole, self.network.run[places]] = places
        return found[0], found[1]

    def run_amps(self, pole: int) -> Floats:
        """Current of every run's conductor in one pole, positive from `from` to `to`; NaN where it has none."""
        places = self.run_branches[pole]
        live = self.supply.live[self.network.a[places]] & self.supply.live[self.network.b[places]]
        return np.where((places >= 0) & live, self.state.branch_A[places], np.nan)

    @cached_property
    def largest_run_amps(self) -> Floats:
        """Over runs: the larger of feed and return current, without sign; 0 for a run without current."""
        return np.nan_to_num(np.fmax(np.abs(self.run_amps(FEED)), np.abs(self.run_amps(RETURN))))

    @cached_property
    def load_volts(self) -> Floats:
        """Voltage at every load, feed less return; NaN where it is not fed."""
        c, count = self.condition, len(self.network.plan.loads)
        volts = self.state.volts[c.load_a[:count]] - self.state.volts[c.load_b[:count]]
        return np.where(self.supply.load_on[:count], volts, np.nan)

    @cached_property
    def references(self) -> tuple[int | None, ...]:
        """For every load, the source its drop is counted from: the working reference source of its island.

        Where the load hangs on another source alone, such as one that an open switch in the return has cut off with
        it, that one counts: there is no way through conductors from the other.
        """
        c, plan = self.condition, self.network.plan
        sources = plan.sources
        order = sorted(
            range(len(sources)), key=lambda i: (sources[i].name != plan.reference, sources[i].kind != "battery")
        )
        island, group, part = c.islands.of_node, self.supply.group, self.supply.part
        best: dict[tuple[int, ...], int] = {}
        for port in order:
            a, b = c.source_a[port], c.source_b[port]
            if self.working(port):
                best.setdefault((int(island[a]), int(part[a]), int(part[b])), port)
                best.setdefault((int(island[a]), int(group[a])), port)
        found = []
        for a, b in zip(c.load_a[: len(plan.loads)], c.load_b[: len(plan.loads)], strict=True):
            anywhere = best.get((int(island[a]), int(group[a])))
            found.append(best.get((int(island[a]), int(part[a]), int(part[b])), anywhere))
        return tuple(found)

    def working(self, source: int) -> bool:
        """Whether a source, or any of its strings, is on and part of the fed network."""
        return any(bool(self.supply.source_on[port]) for port in self._ports(source))

    def _ports(self, source: int) -> list[int]:
        """The source ports of a source: its own, and those of its strings that stand apart."""
        first = len(self.network.plan.sources)
        return [source, *(first + place for place, (index, _, _) in enumerate(self.network.strings) if index == source)]

    @cached_property
    def load_drop_V(self) -> Floats:
        """Drop of every load: volts at its reference source less volts at the load."""
        c = self.condition
        found = np.full(len(self.references), np.nan)
        for load, port in enumerate(self.references):
            if port is not None:
                found[load] = self.state.volts[c.source_a[port]] - self.state.volts[c.source_b[port]]
        return found - self.load_volts

    @cached_property
    def load_nominal_V(self) -> Floats:
        """Nominal voltage of every load's island."""
        c = self.condition
        count = len(self.network.plan.loads)
        return np.array([c.islands.nominal(int(node)) for node in c.load_a[:count]], dtype=float)

    @cached_property
    def _neighbours(self) -> dict[int, list[tuple[int, int]]]:
        """Conducting branches at every node: (branch, node at its other end); diodes as branch -1 - index."""
        at: dict[int, list[tuple[int, int]]] = {}
        network = self.network
        on = self.condition.branch_on & self.supply.live[network.a] & self.supply.live[network.b]
        for branch in np.flatnonzero(on):
            a, b = int(network.a[branch]), int(network.b[branch])
            at.setdefault(a, []).append((int(branch), b))
            at.setdefault(b, []).append((int(branch), a))
        for place, (_, start, end) in enumerate(network.diodes):
            at.setdefault(start, []).append((-1 - place, end))
            at.setdefault(end, []).append((-1 - place, start))
        return at

    @cached_property
    def _trees(self) -> dict[int, dict[int, tuple[int, int]]]:
        return {}

    def _parents(self, root: int) -> dict[int, tuple[int, int]]:
        """Breadth-first tree from a node: node to (branch towards the root, next node)."""
        if root not in self._trees:
            parents: dict[int, tuple[int, int]] = {root: (-1, root)}
            queue = deque([root])
            while queue:
                node = queue.popleft()
                for branch, other in self._neighbours.get(node, ()):
                    if other not in parents:
                        parents[other] = (branch, node)
                        queue.append(other)
            self._trees[root] = parents
        return self._trees[root]

    @cached_property
    def feed_demand(self) -> tuple[Floats, Floats]:
        """Over runs: current of all loads beyond the run's feed conductor, and that of the continuous ones.

        Loads are counted along the shortest way from their reference source; in a mesh that is one way of several.
        """
        network = self.network
        loads = network.plan.loads
        continuous = np.array([load.continuous for load in loads], dtype=float)
        drawn = np.where(self.supply.load_on[: len(loads)], self.state.drawn_A[: len(loads)], 0.0)
        total = np.zeros((2, len(network.plan.runs)))
        for port in {port for port in self.references if port is not None}:
            root = int(self.condition.source_a[port])
            beyond = np.zeros((2, network.node_count))
            mine = [i for i, one in enumerate(self.references) if one == port]
            for row, amps in enumerate((drawn, drawn * continuous)):
                np.add.at(beyond[row], self.condition.load_a[mine], amps[mine])
            for node, (branch, before) in reversed(self._parents(root).items()):
                if node != root:
                    beyond[:, before] += beyond[:, node]
                    if branch >= 0 and network.run[branch] >= 0 and network.pole[branch] == FEED:
                        total[:, network.run[branch]] += beyond[:, node]
        return total[0], total[1]

    def way(self, load: int) -> tuple[Step, ...]:
        """The conductors and devices from a load's reference source to the load and back; their drops sum to its
        drop (Kirchhoff's voltage law holds along any way, so one shortest way serves in a mesh too)."""
        port = self.references[load]
        if port is None or not self.supply.load_on[load]:
            return ()
        c = self.condition
        feed = self._steps(int(c.source_a[port]), int(c.load_a[load]), 1.0)
        back = self._steps(int(c.source_b[port]), int(c.load_b[load]), -1.0)
        return (*feed, *reversed(back))

    def _steps(self, root: int, node: int, sign: float) -> list[Step]:
        parents, steps = self._parents(root), []
        while node != root:
            if node not in parents:
                return []
            branch, before = parents[node]
            drop = sign * float(self.state.volts[before] - self.state.volts[node])
            steps.append(self._step(branch, before, drop, sign))
            node = before
        return steps[::-1]

    def _step(self, branch: int, before: int, drop_V: float, sign: float) -> Step:
        network, plan = self.network, self.network.plan
        pole = "feed" if sign > 0 else "return"
        if branch < 0:
            device = plan.devices[network.diodes[-1 - branch][0]]
            return Step(device.name, "diode", pole, float(self.diode_amps[-1 - branch]), 0.0, drop_V)
        forward = 1.0 if network.a[branch] == before else -1.0
        amps = sign * forward * float(self.state.branch_A[branch])
        ohm = float(self.ohm[branch])
        run, device_index = int(network.run[branch]), int(network.device[branch])
        if run >= 0:
            fixed = float(network.fixed_ohm[branch])
            return Step(plan.runs[run].name, "run", pole, amps, ohm, drop_V, run, fixed)
        if device_index >= 0:
            return Step(plan.devices[device_index].name, "device", pole, amps, ohm, drop_V)
        return Step("bond", "bond", pole, amps, ohm, drop_V)

    @cached_property
    def diode_amps(self) -> Floats:
        """Current of every diode, from `from` to `to`."""
        return self.state.delivered_A[first_diode(self.network) :]

    def result(self, margin: float | None, ampacities: list[float | None]) -> CaseResult:
        """The case as the output shows it; a case that gives way has no numbers, only where it gives way."""
        state = self.state
        return CaseResult(
            name=self.condition.case.name,
            solved=state.solved,
            share_held=state.share_held,
            margin=margin,
            imbalance_A=state.imbalance_A,
            power_in_W=state.power_in_W,
            power_loads_W=state.power_loads_W,
            power_lost_W=state.power_lost_W,
            points=tuple(self._points()),
            sources=tuple(self._sources()),
            runs=tuple(self._runs(ampacities)),
            devices=tuple(self._devices()),
            strings=tuple(self._strings()),
            nominal_V=self._nominals(),
            way=self.way,
            loads=tuple(self._loads()),
        )

    def _nominals(self) -> dict[str, float]:
        islands, network = self.condition.islands, self.network
        return {name: islands.nominal(network.feed(name)) for name in network.plan.point_names}

    def _number(self, value: float) -> float | None:
        return float(value) if self.state.solved and np.isfinite(value) else None

    def _numbers(self, values: Floats) -> list[float | None]:
        """As `_number`, of many."""
        if not self.state.solved:
            return [None] * len(values)
        finite = np.isfinite(values).tolist()
        return [value if known else None for value, known in zip(values.tolist(), finite, strict=True)]

    def _points(self) -> Iterator[PointResult]:
        names, network, group = self.network.plan.point_names, self.network, self.supply.group
        feed = np.array([network.feed(name) for name in names], dtype=np.int64)
        back = np.array([network.ret(name) for name in names], dtype=np.int64)
        feed_V, back_V = self.state.volts[feed] - self._base_V, self.state.volts[back] - self._base_V
        volts = np.where(group[feed] == group[back], feed_V - back_V, np.nan)
        return map(PointResult, names, self._numbers(feed_V), self._numbers(back_V), self._numbers(volts))

    @property
    def _base_V(self) -> float:
        """Voltage of the reference source's return, 0 unless that source's part is not fed."""
        plan = self.network.plan
        port = next((i for i, source in enumerate(plan.sources) if source.name == plan.reference), None)
        base = self.state.volts[self.condition.source_b[port]] if port is not None else 0.0
        return float(base) if np.isfinite(base) else 0.0

    def _sources(self) -> list[SourceResult]:
        c, plan, found = self.condition, self.network.plan, []
        inputs = {source: load for source, load, _, _ in c.converters}
        for port, source in enumerate(plan.sources):
            a, b = c.source_a[port], c.source_b[port]
            volts = (
                self.state.volts[a] - self.state.volts[b] if self.supply.group[a] == self.supply.group[b] else np.nan
            )
            amps = float(sum(self.state.delivered_A[one] for one in self._ports(port) if self.supply.source_on[one]))
            drawn = None
            if port in inputs:
                load = inputs[port]
                at_input = self.state.volts[c.load_a[load]] - self.state.volts[c.load_b[load]]
                drawn = self._number(np.nan_to_num(at_input) * self.state.drawn_A[load])
            found.append(
                SourceResult(
                    source.name,
                    self._number(volts),
                    self._number(amps),
                    self._number(np.nan_to_num(volts) * amps),
                    drawn,
                )
            )
        return found

    def _runs(self, ampacities: list[float | None]) -> Iterator[RunResult]:
        drop, loss = np.zeros((2, len(ampacities)))
        amps, ohms = [], []
        for pole, sign in ((FEED, 1.0), (RETURN, -1.0)):
            places, through = self.run_branches[pole], self.run_amps(pole)
            there, ohm = places >= 0, self.ohm[places] if len(self.ohm) else np.zeros(len(places))
            drop += np.where(there, sign * through * ohm, 0.0)
            loss += np.where(there, through**2 * ohm, 0.0)
            amps.append(self._numbers(through))
            ohms.append([value if known else None for value, known in zip(ohm.tolist(), there.tolist(), strict=True)])
        none = (self.run_branches[FEED] < 0) & (self.run_branches[RETURN] < 0)
        drop[none], loss[none] = np.nan, np.nan
        names = [run.name for run in self.network.plan.runs]
        degC = self.conductors.degC.tolist()
        return map(RunResult, names, *amps, *ohms, self._numbers(drop), self._numbers(loss), degC, ampacities)

    def _strings(self) -> list[StringResult]:
        plan, first = self.network.plan, len(self.network.plan.sources)
        counts: dict[int, int] = {}
        found = []
        for place, (index, _, _) in enumerate(self.network.strings):
            counts[index] = counts.get(index, 0) + 1
            amps = self._number(float(self.state.delivered_A[first + place]))
            found.append(StringResult(plan.sources[index].name, counts[index], amps))
        return found

    def _devices(self) -> list[DeviceResult]:
        network, found = self.network, []
        diode = {index: place for place, (index, _, _) in enumerate(network.diodes)}
        first = {int(index): int(branch) for branch, index in reversed(list(enumerate(network.device))) if index >= 0}
        for index, device in enumerate(network.plan.devices):
            if index in diode:
                amps = float(self.diode_amps[diode[index]])
                _, start, end = network.diodes[diode[index]]
                drop = float(self.state.volts[start] - self.state.volts[end])
            else:
                branch = first[index]
                amps, drop = float(self.state.branch_A[branch]), float(self.state.branch_A[branch] * self.ohm[branch])
                if not self.condition.branch_on[branch]:
                    drop = float("nan")
            found.append(DeviceResult(device.name, self._number(amps), self._number(drop)))
        return found

    def _loads(self) -> Iterator[LoadResult]:
        names = [load.name for load in self.network.plan.loads]
        on, volts, drop = self.supply.load_on[: len(names)], self.load_volts, self.load_drop_V
        amps = np.where(on, self.state.drawn_A[: len(names)], 0.0)
        values = volts, amps, np.nan_to_num(volts) * amps, drop, 100 * drop / self.load_nominal_V
        return map(LoadResult, names, *map(self._numbers, values))


__all__ = ["BOND", "Solution", "Step"]
