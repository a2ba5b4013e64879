"""How ways side by side share the current: cables in parallel, and the strings of a battery."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from farvolt.checks.registry import check
from farvolt.checks.rings import ring_numbers, ways
from farvolt.context import CaseStudy, Context
from farvolt.network import FEED, RETURN, Network
from farvolt.plan import Battery
from farvolt.results import Finding, Severity
from farvolt.solution import Solution
from farvolt.units import number

EVEN_PERCENT = 10.0
"""By how much the most loaded way may exceed its even share."""

NEAR = 0.8
"""Share of its ampacity from which an end of a ring counts as nearly full."""

_PARALLEL = (
    "IEC 60364-5-52 523.7 asks conductors in parallel to share alike, and takes more than 10 % as unequal "
    "(from memory, provisional); common practice"
)
_STRINGS = "common practice: parallel strings carry within 10 % of each other, or the most loaded ages first"


_RING = "common practice: a ring is laid so that both its ends carry a fair part"


@dataclass(frozen=True, slots=True)
class _Share:
    """One of several ways side by side in a case."""

    run: int
    """Index of the run that limits it."""
    names: tuple[str, ...]
    amps: float
    allowed_A: float

    @property
    def loading(self) -> float:
        """Current over ampacity."""
        return self.amps / self.allowed_A


@dataclass(frozen=True, slots=True)
class _Group:
    """Ways that share a current in one pole: between the same two junctions, or from where a ring is fed."""

    pole: int
    ring: bool
    shares: list[_Share]

    @property
    def word(self) -> str:
        """The pole in a word."""
        return "feed" if self.pole == FEED else "return"

    @property
    def loading(self) -> float:
        """That of the most loaded way."""
        return max(share.loading for share in self.shares)


@check(
    "plan.uneven-sharing",
    title="Currents of ways side by side against what each may carry",
    reads=("ampacity",),
)
def uneven_sharing(context: Context) -> Iterator[Finding]:
    """Cables side by side of which one carries more than its share, in the case where that one is loaded most.

    The even share of a way goes with its ampacity. Feeds and returns are looked at apart; each group is said once.
    """
    worst: dict[frozenset[str], tuple[CaseStudy, _Group]] = {}
    meshes: dict[bytes, list[_MeshWay]] = {}
    for one in context.cases:
        solution = one.solutions["plan"]
        if not solution.state.solved:
            continue
        on = solution.condition.branch_on & solution.supply.live[context.network.a]
        key = on.tobytes()
        if key not in meshes:
            meshes[key] = [way for pole in (FEED, RETURN) for way in _meshed(solution, on, pole)]
        for group in _groups(context.network, one, meshes[key]):
            names = frozenset(name for share in group.shares for name in share.names)
            if names not in worst or group.loading > worst[names][1].loading * (1 + 1e-9):
                worst[names] = (one, group)
    for one, group in worst.values():
        yield from _uneven_ring(context, one, group) if group.ring else _uneven(context, one, group)


@dataclass(frozen=True, slots=True)
class _MeshWay:
    """A way that lies on a ring, in one pole."""

    pole: int
    mesh: int
    start: int
    end: int
    branches: tuple[int, ...]


def _meshed(solution: Solution, on: np.ndarray, pole: int) -> Iterator[_MeshWay]:
    """The ways on rings among the conductors of one pole that are `on`; bonds count among the returns."""
    network, c = solution.network, solution.condition
    places = np.flatnonzero(on & ((network.pole == FEED) == (pole == FEED)))
    edges = list(zip(network.a[places].tolist(), network.b[places].tolist(), strict=True))
    meshes = ring_numbers(edges)
    meshed = [place for place, mesh in enumerate(meshes) if mesh >= 0]
    ends = {int(node) for nodes in (c.source_a, c.source_b, c.load_a, c.load_b) for node in nodes}
    ends |= {node for place, edge in enumerate(edges) if meshes[place] < 0 for node in edge}
    for way in ways([edges[place] for place in meshed], ends):
        branches = tuple(int(places[meshed[edge]]) for edge in way.edges)
        yield _MeshWay(pole, meshes[meshed[way.edges[0]]], way.start, way.end, branches)


def _groups(network: Network, one: CaseStudy, mesh_ways: list[_MeshWay]) -> Iterator[_Group]:
    """The groups of ways that share a current in a case: those between the same junctions, and the ends of rings."""
    solution = one.solutions["plan"]
    between: dict[tuple[int, int, int], list[_Share]] = {}
    leaving: dict[tuple[int, int, int], list[tuple[_Share, float]]] = {}
    for way in mesh_ways:
        share = _share(network, one, solution, way.branches)
        if share is None or way.start == way.end:
            continue
        between.setdefault((way.pole, min(way.start, way.end), max(way.start, way.end)), []).append(share)
        first = way.branches[0]
        forward = 1.0 if network.a[first] == way.start else -1.0
        # Feeds lead away from where a ring is fed, returns towards it.
        away = forward * float(solution.state.branch_A[first]) * (1.0 if way.pole == FEED else -1.0)
        leaving.setdefault((way.pole, way.mesh, way.start), []).append((share, away))
        leaving.setdefault((way.pole, way.mesh, way.end), []).append((share, -away))
    parallel = {key: shares for key, shares in between.items() if len(shares) > 1}
    yield from (_Group(pole, False, shares) for (pole, _, _), shares in parallel.items())
    told = {frozenset(map(id, shares)) for shares in parallel.values()}
    for (pole, _, _), legs in leaving.items():
        shares = [share for share, _ in legs]
        if len(legs) > 1 and all(away > 0 for _, away in legs) and frozenset(map(id, shares)) not in told:
            yield _Group(pole, True, shares)


def _share(network: Network, one: CaseStudy, solution: Solution, branches: tuple[int, ...]) -> _Share | None:
    """A way with its current and the least of its ampacities; None where none of those is known.

    A bond to the chassis belongs to its run, but the run's ampacity is that of its cable.
    """
    runs = [int(network.run[branch]) for branch in branches if network.cable_ohm_20[branch] > 0]
    known = [(found.amps, run) for run in runs if (found := one.ampacities[run]) is not None and found.amps]
    if not known:
        return None
    allowed, run = min(known)
    names = tuple(network.plan.runs[run].name for run in runs)
    return _Share(run, names, abs(float(solution.state.branch_A[branches[0]])), allowed)


def _uneven(context: Context, one: CaseStudy, group: _Group) -> Iterator[Finding]:
    shares = group.shares
    total, allowed = sum(share.amps for share in shares), sum(share.allowed_A for share in shares)
    most = max(shares, key=lambda share: share.loading)
    even = total * most.allowed_A / allowed
    limit = even * (1 + EVEN_PERCENT / 100)
    if most.amps <= limit * (1 + 1e-9) or total < 0.01 * allowed:
        return
    severity: Severity = "warn" if most.amps > most.allowed_A / 2 else "note"
    name, others = _named(most), ", ".join(_named(share) for share in shares if share is not most)
    together = total * most.allowed_A / most.amps
    shared = f"{number(total)} A that it shares with {others} in the {group.word}"
    yield Finding(
        "plan.uneven-sharing", severity, context.plan.runs[most.run].name, "run", one.name, most.amps, limit, "A",
        f"{name} carries {number(most.amps)} A of the {shared}; its even share is {number(even)} A. "
        f"Together they carry {number(together)} A, not {number(allowed)} A",
        _PARALLEL,
        (
            *_loadings(shares),
            f"even share: {number(total)} A x {number(most.allowed_A)} A / {number(allowed)} A = {number(even)} A",
            f"{number(most.amps)} A > {number(100 + EVEN_PERCENT)} % of {number(even)} A",
            f"{name} is full at {number(total)} A x {number(most.allowed_A)} A / {number(most.amps)} A "
            f"= {number(together)} A in all",
        ),
        "the same size, length, joints and protection on every way; or one thicker cable instead of them all",
    )  # fmt: skip


def _uneven_ring(context: Context, one: CaseStudy, group: _Group) -> Iterator[Finding]:
    """One end of a ring near its ampacity while another idles: loads sit close to that end."""
    most = max(group.shares, key=lambda share: share.loading)
    least = min(group.shares, key=lambda share: share.loading)
    limit = NEAR * most.allowed_A
    if most.amps <= limit * (1 + 1e-9) or least.loading > most.loading / 2:
        return
    yield Finding(
        "plan.uneven-sharing", "warn", context.plan.runs[most.run].name, "run", one.name, most.amps, limit, "A",
        f"{_named(most)} carries {number(100 * most.loading)} % of its {number(most.allowed_A)} A in the {group.word} "
        f"while {_named(least)}, the other end of its ring, carries {number(100 * least.loading)} %",
        _RING,
        (
            *_loadings(group.shares),
            f"{number(most.amps)} A > {number(100 * NEAR)} % of {number(most.allowed_A)} A = {number(limit)} A",
        ),
        f"a thicker cable for {_named(most)}, the large loads nearer to the middle of the ring, or no ring",
    )  # fmt: skip


def _loadings(shares: list[_Share]) -> Iterator[str]:
    for share in shares:
        of = f"{number(share.amps)} A of {number(share.allowed_A)} A"
        yield f"{_named(share)}: {of}, {number(100 * share.loading)} %"


def _named(share: _Share) -> str:
    return " + ".join(f'"{name}"' for name in share.names[:3]) + (" ..." if len(share.names) > 3 else "")


@check("bank.sharing", title="Currents of the parallel strings of a battery")
def strings(context: Context) -> Iterator[Finding]:
    """Batteries whose most loaded string carries more than its share, in the case with the largest current."""
    first = len(context.plan.sources)
    ports: dict[int, list[int]] = {}
    for place, (index, _, _) in enumerate(context.network.strings):
        ports.setdefault(index, []).append(first + place)
    for index, mine in ports.items():
        solved = [(one, one.solutions["plan"].state.delivered_A[mine]) for one in context.cases
                  if one.solutions["plan"].state.solved and one.solutions["plan"].working(index)]  # fmt: skip
        if not solved:
            continue
        one, amps = max(solved, key=lambda found: float(np.max(np.abs(found[1]))))
        battery = context.plan.sources[index]
        assert isinstance(battery, Battery)
        yield from _uneven_strings(battery, one, amps.tolist())


def _uneven_strings(battery: Battery, one: CaseStudy, amps: list[float]) -> Iterator[Finding]:
    even = abs(sum(amps)) / len(amps)
    most = max(amps, key=abs)
    limit = even * (1 + EVEN_PERCENT / 100)
    if abs(most) <= max(limit * (1 + 1e-9), 0.01):
        return
    place = amps.index(most) + 1
    way = {"ends": "at opposite ends", "same end": "at the same end", "bar": "at a bar"}[battery.take_off]
    better = (
        "every string to a bar by cables of one length" if battery.take_off == "ends" else "a take-off at opposite ends"
    )
    yield Finding(
        "bank.sharing", "warn", battery.name, "source", one.name, abs(most), limit, "A",
        f'String {place} of "{battery.name}" carries {number(abs(most))} A; even shares of its {len(amps)} strings, '
        f"taken off {way}, would be {number(even)} A",
        _STRINGS,
        (
            *(f"string {index}: {number(one_A)} A" for index, one_A in enumerate(amps, start=1)),
            f"even share: {number(abs(sum(amps)))} A / {len(amps)} = {number(even)} A",
            f"{number(abs(most))} A > {number(100 + EVEN_PERCENT)} % of {number(even)} A",
        ),
        f"{better}, or thicker and shorter links",
    )  # fmt: skip
