"""How readings of an installation follow from what is not as planned in it, one quantity at a time.

Each quantity (ohms more in a conductor or source, volts more of a source, a share more of a load) is an atom. The
networks of all readings are solved as planned; J is the Jacobian there. Ohms x more in a branch that carries i move a
reading w by g·i·T·x/(1 + x·Y), with T = wᵀJ⁻¹a for the branch's ends a and Y = g·(1 − g·aᵀJ⁻¹a) what the rest of the
network presents to it: exact where the element laws are straight (Sherman and Morrison 1950, the compensation theorem),
and the other quantities follow the same form. One solution for each reading serves all atoms; one for each branch
gives its Y. `State.exact` solves the network itself with atoms at given values.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from farvolt.equations import Equations
from farvolt.errors import FarvoltError
from farvolt.fed import Fed, fed
from farvolt.linear import SingularError, factor
from farvolt.network import Floats, Ints, Network
from farvolt.operating import Operating
from farvolt.plan import Case
from farvolt.readings import Reading
from farvolt.solve import solve

_CHUNK = 256
_WHOLE = 1_500
"""Unknowns up to which the whole inverse is kept."""

Probe = tuple[int, int, int]
"""What a meter is put to: two nodes and -1, or the two nodes of a branch and that branch, for its current."""


@dataclass(frozen=True)
class Atoms:
    """Where the atoms of a network are among all: branches first, then loads, source volts, source ohms."""

    branches: int
    loads: int
    ports: int

    @property
    def count(self) -> int:
        """How many there are."""
        return self.branches + self.loads + 2 * self.ports

    def load(self, index: int) -> int:
        """A load's demand, as a share more than planned."""
        return self.branches + index

    def volts(self, port: int) -> int:
        """Volts more of a source port."""
        return self.branches + self.loads + port

    def ohm(self, port: int) -> int:
        """Ohms more in a source port."""
        return self.branches + self.loads + self.ports + port


@dataclass(frozen=True)
class Response:
    """Over readings: what they are as planned, and over (reading, atom) how they move: `gain`·t/(1 + t·`back`)."""

    planned: Floats
    gain: Floats
    back: Floats

    def move(self, atom: int, values: Floats) -> Floats:
        """How the readings move with an atom at each of `values`: over (value, reading)."""
        t = values[:, None]
        with np.errstate(divide="ignore", over="ignore"):
            moved: Floats = self.gain[:, atom] * (t / np.maximum(1 + t * self.back[:, atom], 1e-3))
        return moved


def stacked(parts: Sequence[Response]) -> Response:
    """Readings of several states as one."""
    return Response(
        np.concatenate([one.planned for one in parts]),
        np.concatenate([one.gain for one in parts]),
        np.concatenate([one.back for one in parts]),
    )


class State:
    """A network in one case, solved as planned."""

    def __init__(self, network: Network, condition: Operating, factor_of_20: Floats) -> None:
        """Solve. Raises FarvoltError where the plan itself gives way in the case."""
        self.network, self.condition, self.factor_of_20 = network, condition, factor_of_20
        self.supply: Fed = fed(network, condition)
        self.solved = solve(network, condition, factor_of_20, self.supply)
        if not self.solved.solved:
            raise FarvoltError(
                f'case "{condition.case.name}": the plan itself gives way there, at '
                f"{100 * self.solved.share_held:.1f} % of its loads; accepted: readings in a state that the plan holds"
            )
        self.atoms = Atoms(len(network.a), len(network.plan.loads), len(condition.source_a))
        self.equations = Equations(network, condition, factor_of_20, self.supply)
        self.volts = np.nan_to_num(self.solved.volts)

    @property
    def case(self) -> Case:
        """The case it is in."""
        return self.condition.case

    def probe(self, reading: Reading) -> Probe | None:
        """Where a reading is in this network; None where nothing there is fed, or no path joins its ends."""
        network = self.network
        if reading.start is not None and reading.end is not None:
            return self.joined(network.nodes[reading.start], network.nodes[reading.end])
        index = next(at for at, run in enumerate(network.plan.runs) if run.name == reading.run)
        places = np.flatnonzero((network.run == index) & (network.pole == reading.pole))
        if len(places) == 0 or not self.siemens[places[0]]:
            return None
        branch = int(places[0])
        return int(network.a[branch]), int(network.b[branch]), branch

    def joined(self, start: int, end: int) -> Probe | None:
        """Two nodes as a probe, where both are fed and of one galvanic part."""
        live, group = self.supply.live, self.supply.group
        return (start, end, -1) if live[start] and live[end] and group[start] == group[end] else None

    @property
    def siemens(self) -> Floats:
        """Conductance of every branch; 0 where it does not conduct."""
        return self.equations.all_siemens

    def response(self, probes: Sequence[Probe]) -> Response:
        """How what is read at the probes follows from each atom."""
        a, b, of_branch = np.array(probes, dtype=np.int64).reshape(-1, 3).T
        times = np.where(of_branch >= 0, self.siemens[of_branch], 1.0)
        weights = self._weights(a, b) * times[:, None]
        planned = times * (self.volts[a] - self.volts[b])
        start, end, amps, back = self._atoms
        gain = (weights[:, start] - weights[:, end]) * amps
        both = np.tile(back, (len(probes), 1))
        for row, branch in enumerate(of_branch):
            if branch >= 0:
                # A clamp around the very conductor: i/(1 + x·Y) less i.
                gain[row, branch] = -self.solved.branch_A[branch] * back[branch]
        return Response(planned, gain, both)

    def read(self, volts: Floats, siemens: Floats, probes: Sequence[Probe]) -> Floats:
        """What the probes show at given node volts."""
        return np.array([(volts[a] - volts[b]) * (siemens[of] if of >= 0 else 1.0) for a, b, of in probes], dtype=float)

    def _weights(self, a: Ints, b: Ints) -> Floats:
        """wᵀJ⁻¹ over (probe, node): 0 at grounds and what is not fed."""
        position, size = self.equations.position, self.equations.size
        right = np.zeros((size, len(a)))
        for nodes, sign in ((a, 1.0), (b, -1.0)):
            known = position[nodes] >= 0
            np.add.at(right, (position[nodes][known], np.flatnonzero(known)), sign)
        return self._over_nodes(self._solve(right, transposed=True)).T

    def _over_nodes(self, values: Floats) -> Floats:
        whole = np.zeros((len(self.volts), values.shape[1]))
        known = self.equations.position >= 0
        whole[known] = values[self.equations.position[known]]
        return whole

    def _solve(self, right: Floats, *, transposed: bool = False) -> Floats:
        if self.equations.size <= _WHOLE:
            return (self._inverse.T if transposed else self._inverse) @ right
        rows, columns, values = self.equations.jacobian(self.volts, 1.0)
        ends = (columns, rows) if transposed else (rows, columns)
        try:
            solution = factor(self.equations.size, *ends, values, symmetric=not self.equations.converters)
            parts = [solution.solve(right[:, at : at + _CHUNK]) for at in range(0, right.shape[1], _CHUNK)]
        except SingularError:
            raise FarvoltError(f'case "{self.case.name}": no reading can be compared with it') from None
        return np.concatenate(parts, axis=1) if parts else right

    @cached_property
    def _inverse(self) -> Floats:
        """J⁻¹ of a network that is not too large for all of it: quicker than a solution for each of its branches."""
        rows, columns, values = self.equations.jacobian(self.volts, 1.0)
        matrix = np.zeros((self.equations.size, self.equations.size))
        np.add.at(matrix, (rows, columns), values)
        try:
            return np.asarray(np.linalg.inv(matrix))
        except np.linalg.LinAlgError:
            raise FarvoltError(f'case "{self.case.name}": no reading can be compared with it') from None

    @cached_property
    def _atoms(self) -> tuple[Ints, Ints, Floats, Floats]:
        """Over atoms: the two nodes at which each acts, the amps for one unit of it, and its Y (see above)."""
        network, c, equations = self.network, self.condition, self.equations
        source_S, load_S = np.zeros(len(c.source_a)), np.zeros(len(c.load_a))
        _, _, source_S[equations.sources] = equations.source_law(self.volts)
        _, _, load_S[equations.loads] = equations.load_law(self.volts, 1.0)
        loads = slice(0, self.atoms.loads)
        a = np.concatenate([network.a, c.load_a[loads], c.source_a, c.source_a])
        b = np.concatenate([network.b, c.load_b[loads], c.source_b, c.source_b])
        drawn = np.where(self.supply.load_on, self.solved.drawn_A, 0.0)[loads]
        # A source that is held at a limit does not feel its own volts or ohms.
        free_S = np.where(np.isclose(source_S * c.ohm, 1.0, rtol=1e-3), source_S, 0.0)
        amps = np.concatenate([
            self.siemens * self.solved.branch_A, -drawn, free_S, -free_S * self.solved.delivered_A,
        ])  # fmt: skip
        inner = self._inner_ohm(a, b)
        first, last = self.atoms.branches, self.atoms.ohm(0)
        back = np.zeros(len(a))
        back[:first] = np.maximum(self.siemens * (1 - self.siemens * inner[:first]), 0.0)
        back[first : first + self.atoms.loads] = load_S[loads] * inner[first : first + self.atoms.loads]
        back[last:] = free_S * (1 - free_S * inner[last:])
        return a, b, amps, back

    def _inner_ohm(self, a: Ints, b: Ints) -> Floats:
        """aᵀJ⁻¹a of each pair of nodes."""
        position, size = self.equations.position, self.equations.size
        found = np.zeros(len(a))
        pairs, back = np.unique(np.stack([a, b], axis=1), axis=0, return_inverse=True)
        ohm = np.zeros(len(pairs))
        for at in range(0, len(pairs), _CHUNK):
            part = pairs[at : at + _CHUNK]
            right = np.zeros((size, len(part)))
            for nodes, sign in ((part[:, 0], 1.0), (part[:, 1], -1.0)):
                known = position[nodes] >= 0
                np.add.at(right, (position[nodes][known], np.flatnonzero(known)), sign)
            whole = self._over_nodes(self._solve(right))
            each = np.arange(len(part))
            ohm[at : at + _CHUNK] = whole[part[:, 0], each] - whole[part[:, 1], each]
        found[:] = ohm[np.ravel(back)]
        return found

    def ends(self, atom: int) -> tuple[int, int]:
        """The two nodes at which an atom acts."""
        return int(self._atoms[0][atom]), int(self._atoms[1][atom])

    def heat_W(self, branch: int, ohm: Floats) -> Floats:
        """Watts in each of some ohms more in a branch, at the current that then flows."""
        amps = self.solved.branch_A[branch] / (1 + ohm * self._atoms[3][branch])
        heat: Floats = ohm * amps**2
        return heat

    def changed(self, values: Mapping[int, float]) -> tuple[Network, Operating]:
        """Network and condition with atoms at given values."""
        c, atoms = self.condition, self.atoms
        ohm, inner, volts = self.network.fixed_ohm.copy(), c.ohm.copy(), c.volts.copy()
        demand = np.ones(len(c.load_a))
        for atom, value in values.items():
            if atom < atoms.branches:
                ohm[atom] += value
            elif atom < atoms.volts(0):
                demand[atom - atoms.branches] += value
            elif atom < atoms.ohm(0):
                volts[atom - atoms.volts(0)] += value
            else:
                inner[atom - atoms.ohm(0)] += value
        condition = replace(
            c, ohm=inner, volts=volts, load_W=c.load_W * demand, load_A=c.load_A * demand, load_S=c.load_S * demand
        )
        return replace(self.network, fixed_ohm=ohm), condition

    def exact(self, values: Mapping[int, float], probes: Sequence[Probe]) -> Floats | None:
        """What the probes show with atoms at given values; None where the network then gives way."""
        network, condition = self.changed(values)
        found = solve(network, condition, self.factor_of_20, self.supply)
        if not found.solved:
            return None
        ohm = network.fixed_ohm + network.cable_ohm_20 * np.append(self.factor_of_20, 1.0)[network.run]
        return self.read(np.nan_to_num(found.volts), 1 / ohm, probes)
