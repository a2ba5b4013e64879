"""Many cases of one network at once: equal conductances share one factorisation.

Cases whose devices stand alike and whose sources feed the same parts are solved together on the `ports` of their
network. A case that is not accepted there (see `ports`), and one with a working converter or solar array of its own,
is solved alone by `solve.solve`: the answer is the same in either way.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from farvolt.fed import Fed, fed
from farvolt.linear import SingularError
from farvolt.network import Floats, Ints, Network
from farvolt.operating import Operating
from farvolt.ports import MOST_LIMITED, Ports, Settled
from farvolt.solve import State, solve

_CHUNK = 200_000
"""Node voltages at a time: the arrays of so many cases stay in the processor's cache."""

FEWEST = 8
"""Fewer cases are solved sooner one by one; and so are fewer than a tenth of the ports, each of which costs a
solution first."""

_LARGEST = 20_000_000
"""Nodes times ports, at most: what each port does to every node must fit in memory."""

_LAWS = ("volts", "ohm", "low", "high", "power", "leak", "load_W", "load_A", "load_S")
_STATES = ("branch_on", "source_on")

Changes = Mapping[str, np.ndarray]
"""Fields of `Operating` that differ from case to case, over (case, port): any of volts, ohm, low, high, power, leak,
load_W, load_A, load_S, source_on; or branch_on, over (case, branch)."""


@dataclass(frozen=True)
class Many:
    """States of many cases: arrays over (case, node), (case, port), (case, branch) or cases, as those of `State`."""

    solved: np.ndarray
    share_held: Floats
    volts: Floats
    delivered_A: Floats
    drawn_A: Floats
    branch_A: Floats
    imbalance_A: Floats
    power_in_W: Floats
    power_loads_W: Floats
    power_lost_W: Floats
    weakest: Ints
    """The load that falls fastest where a case gives way, or -1."""
    together: np.ndarray
    """Whether a case was solved together with the others, or alone."""

    def __len__(self) -> int:
        return len(self.solved)

    def state(self, case: int) -> State:
        """One case, as `solve.solve` gives it."""
        return State(
            bool(self.solved[case]),
            float(self.share_held[case]),
            self.volts[case].copy(),
            self.delivered_A[case].copy(),
            self.drawn_A[case].copy(),
            self.branch_A[case].copy(),
            float(self.imbalance_A[case]),
            float(self.power_in_W[case]),
            float(self.power_loads_W[case]),
            float(self.power_lost_W[case]),
            int(self.weakest[case]) if self.weakest[case] >= 0 else None,
        )


def solve_together(
    network: Network, conditions: Sequence[Operating], factor_of_20: Floats, supplies: Sequence[Fed] | None = None
) -> list[State]:
    """Solve cases of one network at one set of conductor temperatures; `supplies` are theirs, if known already."""
    supplies = supplies or [fed(network, condition) for condition in conditions]
    states: dict[int, State] = {}
    for group in _alike(conditions, supplies):
        first = conditions[group[0]]
        if len(group) < max(FEWEST, (len(first.volts) + len(first.load_a)) // 10):
            states |= {case: solve(network, conditions[case], factor_of_20, supplies[case]) for case in group}
            continue
        changes = {name: np.array([getattr(conditions[case], name) for case in group]) for name in _LAWS}
        found = solve_many(network, first, factor_of_20, changes, supplies[group[0]])
        states |= {case: found.state(place) for place, case in enumerate(group)}
    return [states[case] for case in range(len(conditions))]


def _alike(conditions: Sequence[Operating], supplies: Sequence[Fed]) -> list[list[int]]:
    """Cases by the state of their devices and sources, and by what these feed."""
    groups: dict[object, list[int]] = {}
    for case, (condition, supply) in enumerate(zip(conditions, supplies, strict=True)):
        arrays = (condition.branch_on, condition.source_on, supply.live, supply.source_on, supply.load_on)
        key = *(one.tobytes() for one in arrays), supply.grounds, condition.converters, condition.arrays
        groups.setdefault(key, []).append(case)
    return list(groups.values())


def solve_many(
    network: Network, condition: Operating, factor_of_20: Floats, changes: Changes, supply: Fed | None = None
) -> Many:
    """Solve cases that differ from one condition in `changes`; `supply` is the condition's, if known already."""
    cases = len(next(iter(changes.values())))
    found = _empty(network, condition, cases)
    for rows, base in _by_states(condition, changes, cases):
        own = supply if supply is not None and base is condition else fed(network, base)
        laws = {name: values[rows].T for name, values in changes.items() if name in _LAWS and _differs(values)}
        laws |= {name: values[:1].T for name, values in changes.items() if name in _LAWS and name not in laws}
        coupled = any(own.source_on[port] for port, *_ in base.converters)
        if not coupled and network.node_count * (own.source_on.sum() + own.load_on.sum()) <= _LARGEST:
            _together(network, base, factor_of_20, own, laws, rows, found)
        for case in rows[~found.solved[rows]]:
            one = {name: values[case] for name, values in changes.items() if name in _LAWS}
            _keep(found, int(case), solve(network, replace(base, **one), factor_of_20, own))
    return found


def shared_demand(condition: Operating, shares: Floats) -> dict[str, np.ndarray]:
    """The changes that other load shares make: `shares`, over (case, load), multiply the condition's own demand."""
    full = np.ones((len(shares), len(condition.load_a)))
    full[:, : shares.shape[1]] = shares
    own = {name: getattr(condition, name) for name in ("load_W", "load_A", "load_S")}
    return {name: full * values for name, values in own.items()}


def _differs(values: np.ndarray) -> bool:
    return bool(np.any(values != values[0]))


def _by_states(condition: Operating, changes: Changes, cases: int) -> Iterator[tuple[Ints, Operating]]:
    """Cases whose devices and sources are on alike, with a condition of theirs."""
    states = [changes[name] for name in _STATES if name in changes]
    if not states:
        yield np.arange(cases), condition
        return
    _, first, group = np.unique(np.concatenate(states, axis=1), axis=0, return_index=True, return_inverse=True)
    for number, case in enumerate(first):
        on = {name: changes[name][case] for name in _STATES if name in changes}
        yield np.flatnonzero(group.ravel() == number), replace(condition, **on)


def _empty(network: Network, condition: Operating, cases: int) -> Many:
    """Nothing solved yet. Arrays are laid out with the cases beside each other, as they are worked out."""
    sizes = network.node_count, len(condition.source_a), len(condition.load_a), len(network.a)
    volts, delivered, drawn, branch = (np.zeros((size, cases)).T for size in sizes)
    imbalance, given, loads, lost = np.zeros((4, cases))
    return Many(
        np.zeros(cases, dtype=bool), np.zeros(cases), volts, delivered, drawn, branch, imbalance, given, loads, lost,
        np.full(cases, -1), np.zeros(cases, dtype=bool),
    )  # fmt: skip


def _together(
    network: Network,
    condition: Operating,
    factor_of_20: Floats,
    supply: Fed,
    laws: dict[str, Floats],
    rows: Ints,
    found: Many,
) -> None:
    """Solve the cases of `rows` on their ports, as far as they are accepted there; `laws` are over (port, row)."""
    try:
        ports = Ports(network, condition, factor_of_20, supply, laws)
    except SingularError:
        return
    step = max(1, _CHUNK // network.node_count)
    for start in range(0, len(rows) if len(ports.laws.limited) <= MOST_LIMITED else 0, step):
        chunk = slice(start, min(start + step, len(rows)))
        _keep_settled(found, rows[chunk], ports, ports.solve(chunk))


def _keep_settled(found: Many, rows: Ints, ports: Ports, settled: Settled) -> None:
    e = ports.equations
    cases: Ints | slice = rows
    if len(rows) and rows[-1] - rows[0] + 1 == len(rows):
        cases = slice(int(rows[0]), int(rows[-1]) + 1)
    found.solved[cases] = found.together[cases] = settled.accepted
    found.share_held[cases] = settled.accepted
    found.volts.T[:, cases] = settled.volts
    for target, places, values in (
        (found.delivered_A, e.sources, settled.delivered_A),
        (found.drawn_A, e.loads, settled.drawn_A),
        (found.branch_A, e.branches, settled.flow_A),
    ):
        if len(places) == target.shape[1]:
            target.T[:, cases] = values
        else:
            target.T[np.ix_(places, rows)] = values
    found.imbalance_A[cases], found.power_in_W[cases] = settled.imbalance_A, settled.power_in_W
    found.power_loads_W[cases], found.power_lost_W[cases] = settled.power_loads_W, settled.power_lost_W


def _keep(found: Many, case: int, state: State) -> None:
    found.solved[case], found.share_held[case], found.imbalance_A[case] = (
        state.solved, state.share_held, state.imbalance_A,
    )  # fmt: skip
    found.volts[case], found.branch_A[case] = state.volts, state.branch_A
    found.delivered_A[case], found.drawn_A[case] = state.delivered_A, state.drawn_A
    found.power_in_W[case], found.power_loads_W[case] = state.power_in_W, state.power_loads_W
    found.power_lost_W[case] = state.power_lost_W
    found.weakest[case] = -1 if state.weakest is None else state.weakest
