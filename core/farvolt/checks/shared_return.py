"""Returns that carry what their own feed does not: another circuit's current, or current that has two ways back."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from farvolt.checks.joined import listed
from farvolt.checks.registry import check, run_finding
from farvolt.checks.rings import ring_numbers
from farvolt.context import CaseStudy, Context, label
from farvolt.network import FEED, RETURN, Floats, Network
from farvolt.results import Finding
from farvolt.units import number

LEAST_A = 0.1
"""Feed and return of a run may differ by this, whatever they carry."""

TOLERATED, IN_A_MESH = 0.05, 0.2
"""They may differ by this share of the larger; more where the feed, too, has two ways, which share by themselves."""

_BASIS = "common practice: a circuit's return runs beside its feed and carries the same current"


@dataclass(frozen=True, slots=True)
class _Difference:
    """A run whose return differs from its feed, in the case where that is largest."""

    run: int
    case: int
    feed_A: float
    return_A: float
    mesh: int
    """The ring of returns it lies in, by the first of its conductors, or -1."""

    @property
    def excess_A(self) -> float:
        """By how much the return carries more; negative where it carries less."""
        return self.return_A - self.feed_A


@check("plan.shared-return", title="Return conductors that carry another current than their feed")
def shared_return(context: Context) -> Iterator[Finding]:
    """Runs whose return carries more than their feed, and circuits whose current has two ways back.

    A run that feeds what returns elsewhere is as meant where there is one way back. One finding for each ring of
    returns, and for each set of circuits that share a return.
    """
    worst: dict[int, _Difference] = {}
    for place, one in enumerate(context.cases):
        for found in _differences(context, place, one):
            known = worst.get(found.run)
            if known is None or abs(found.excess_A) > abs(known.excess_A) * (1 + 1e-9):
                worst[found.run] = found
    strangers = {case: _strangers(context, case) for case in {found.case for found in worst.values()}}
    groups: dict[tuple[int, tuple[str, ...]], list[_Difference]] = {}
    for found in worst.values():
        whose = tuple(strangers[found.case].get(found.run, ())) if found.mesh < 0 else ()
        groups.setdefault((found.mesh, whose), []).append(found)
    for group in groups.values():
        most = max(group, key=lambda one: one.excess_A)
        yield _finding(context, most, group, strangers[most.case].get(most.run, []))


def _differences(context: Context, place: int, one: CaseStudy) -> Iterator[_Difference]:
    network, solution = context.network, one.solutions["plan"]
    if not solution.state.solved:
        return
    feed, back = np.abs(solution.run_amps(FEED)), np.abs(solution.run_amps(RETURN))
    larger = np.fmax(feed, back)
    candidates = np.flatnonzero(np.abs(feed - back) > np.maximum(LEAST_A, TOLERATED * larger))
    if not candidates.size:
        return
    feeds, returns = _meshes(network, one, FEED), _meshes(network, one, RETURN)
    feed_at, return_at = solution.run_branches
    wired = _with_cables(network, returns)
    for run in candidates.tolist():
        meshed = feeds.get(int(feed_at[run]), -1) >= 0
        mesh = returns.get(int(return_at[run]), -1)
        if _tells(context, run, feed, back, mesh in wired, meshed):
            yield _Difference(run, place, float(feed[run]), float(back[run]), mesh)


def _tells(context: Context, run: int, feed: Floats, back: Floats, ringed: bool, feed_meshed: bool) -> bool:
    """Whether a difference is more than a plan means: `ringed` returns have two ways, one of them a cable."""
    share = IN_A_MESH if feed_meshed else TOLERATED
    if abs(feed[run] - back[run]) <= share * max(feed[run], back[run]):
        return False
    if back[run] > feed[run] and context.plan.runs[run].return_path != "chassis":
        return True
    return ringed and not feed_meshed


def _meshes(network: Network, one: CaseStudy, pole: int) -> dict[int, int]:
    """The mesh that each conductor of a pole lies in, by its first conductor; bonds count among the returns."""
    on = one.solutions["plan"].condition.branch_on & ((network.pole == FEED) == (pole == FEED))
    places = np.flatnonzero(on).tolist()
    edges = list(zip(network.a[places].tolist(), network.b[places].tolist(), strict=True))
    first: dict[int, int] = {-1: -1}
    return {place: first.setdefault(mesh, place) for place, mesh in zip(places, ring_numbers(edges), strict=True)}


def _with_cables(network: Network, meshes: dict[int, int]) -> set[int]:
    """The meshes in which some cable lies, not bonds alone."""
    return {mesh for branch, mesh in meshes.items() if mesh >= 0 and network.cable_ohm_20[branch] > 0}


def _strangers(context: Context, case: int) -> dict[int, list[str]]:
    """By run, the loads that return through it without being fed through it (along the shortest ways)."""
    solution, found = context.cases[case].solutions["plan"], dict[int, list[str]]()
    for index, load in enumerate(context.plan.loads):
        steps = [(step.pole, step.run) for step in solution.way(index)]
        fed = {run for pole, run in steps if pole == "feed"}
        for run in dict.fromkeys(run for pole, run in steps if pole == "return" and run >= 0 and run not in fed):
            found.setdefault(run, []).append(load.name)
    return found


def _finding(context: Context, found: _Difference, group: list[_Difference], whose: list[str]) -> Finding:
    run, case = context.plan.runs[found.run], context.cases[found.case].name
    amps = f"its return carries {number(found.return_A)} A and its feed {number(found.feed_A)} A"
    if found.excess_A > 0:
        of = f"that of {listed(whose)}" if whose else "current of another circuit or source"
        message = f"{label(run)}: {amps}; the return carries {of} as well, which its protection does not see"
        remedy = "a return of its own for each circuit, beside its feed, or this return sized for all it carries"
    else:
        message = f"{label(run)}: {amps}; the rest comes back another way"
        remedy = "one way back: leave out the bond to the chassis or the second return, whichever is not meant"
    others = [context.plan.runs[one.run].name for one in group if one.run != found.run]
    working = (
        f"{number(max(found.return_A, found.feed_A))} A - {number(min(found.return_A, found.feed_A))} A = "
        f"{number(abs(found.excess_A))} A",
        f"on the same way: {listed(others)}" if others else "",
    )
    return run_finding(
        "plan.shared-return", "warn", run, found.return_A, found.feed_A, "A", message, _BASIS, working, remedy, case
    )
