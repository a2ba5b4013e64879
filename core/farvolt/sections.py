"""Protection by section: for every conductor and every source that can feed it, the nearest protection on the way.

The walk starts at each source with all devices closed and goes outward through the feed conductors. What it
carries along is the last protection passed and the length from the source or tap. A return conductor of its own
is judged by the protection of the circuits that return through it.
"""

from collections import deque
from dataclasses import dataclass, field

from farvolt.network import Network
from farvolt.plan import CHASSIS, Plan, Protection, Run


@dataclass(frozen=True, slots=True)
class Guard:
    """A protection on a run."""

    run: int
    protection: Protection

    @property
    def rating_A(self) -> float:
        """Rated current."""
        return self.protection.rating.si


@dataclass(frozen=True, slots=True)
class Exposure:
    """One way a run's conductor is fed: from which source, into which end, behind which protection."""

    run: int
    source: int
    end: str
    """The end of the run at which the source feeds it: "from" or "to"."""
    guard: Guard | None
    """The protection at that end, else the nearest one upstream; None where there is none."""
    upstream: Guard | None
    """The nearest protection before this end."""
    bare_m: float
    """Length of this run's conductor before its own first protection; all of it where it has none."""
    before_m: float
    """Length from the source to this end, where nothing protects that way."""
    ends_protected: bool
    """The run ends in protection: at its far end, or at the start of everything that leaves from there."""
    direct: bool
    """This end is at the source itself."""


@dataclass(slots=True)
class Sections:
    """All exposures of a plan, by run."""

    by_run: dict[int, list[Exposure]] = field(default_factory=dict)
    returns: dict[int, list[tuple[int, Guard]]] = field(default_factory=dict)
    """Return conductors of their own, by run: (source, protection of a circuit that returns through it)."""


@dataclass(frozen=True, slots=True)
class _Edge:
    run: int
    """Index of the run, or -1 for a device."""
    other: int
    end: str


def sections(network: Network) -> Sections:
    """Walk a plan's protection from every source. Runs in proportion to runs times sources."""
    plan = network.plan
    edges = _feed_edges(network)
    loaded = {network.feed(load.at) for load in plan.loads}
    found = Sections()
    for port, source in enumerate(plan.sources):
        start = network.feed(source.at)
        carried = _walk(plan, edges, loaded, port, start, found)
        _returns(network, port, network.ret(source.at), carried, found)
    return found


def _feed_edges(network: Network) -> dict[int, list[_Edge]]:
    edges: dict[int, list[_Edge]] = {}
    for index, run in enumerate(network.plan.runs):
        if run.conducts in ("both", "feed"):
            a, b = network.feed(run.from_point), network.feed(run.to_point)
            edges.setdefault(a, []).append(_Edge(index, b, "from"))
            edges.setdefault(b, []).append(_Edge(index, a, "to"))
    for device in network.plan.devices:
        a, b = network.feed(device.from_point), network.feed(device.to_point)
        if a != b:
            edges.setdefault(a, []).append(_Edge(-1, b, "from"))
            edges.setdefault(b, []).append(_Edge(-1, a, "to"))
    return edges


def _guard(plan: Plan, run: int, end: str) -> Guard | None:
    found = [one for one in plan.runs[run].protections if one.end == end and one.pole == "feed"]
    return Guard(run, min(found, key=lambda one: one.rating.si)) if found else None


def _walk(
    plan: Plan, edges: dict[int, list[_Edge]], loaded: set[int], port: int, start: int, found: Sections
) -> dict[int, set[Guard | None]]:
    """Fill in the exposures of one source; what protection is carried at each node reached."""
    carried: dict[int, set[Guard | None]] = {start: {None}}
    queue: deque[tuple[int, Guard | None, float, int, bool]] = deque([(start, None, 0.0, -2, True)])
    device_run = -1
    while queue:
        node, guard, length, came, direct = queue.popleft()
        for edge in edges.get(node, ()):
            if (edge.run == came and edge.run != device_run) or edge.other == start:
                continue
            passed, reach = guard, length
            if edge.run >= 0:
                exposure = _exposure(plan, edges, loaded, port, edge, guard, length, direct)
                found.by_run.setdefault(edge.run, []).append(exposure)
                far = _guard(plan, edge.run, "to" if edge.end == "from" else "from")
                passed = far or exposure.guard
                reach = length + plan.runs[edge.run].length.si
            if passed not in carried.setdefault(edge.other, set()):
                carried[edge.other].add(passed)
                queue.append((edge.other, passed, reach, edge.run, direct and edge.run < 0))
    return carried


def _exposure(
    plan: Plan, edges: dict[int, list[_Edge]], loaded: set[int], port: int, edge: _Edge, upstream: Guard | None,
    length: float, direct: bool,
) -> Exposure:  # fmt: skip
    run = plan.runs[edge.run]
    near = _guard(plan, edge.run, edge.end)
    far = _guard(plan, edge.run, "to" if edge.end == "from" else "from")
    bare = run.length.si
    if near is not None:
        bare = near.protection.distance.si if near.protection.distance else 0.0
    elif far is not None:
        bare -= far.protection.distance.si if far.protection.distance else 0.0
    onward = [other for other in edges.get(edge.other, ()) if other.run != edge.run]
    ends = far is not None or (
        bool(onward)
        and edge.other not in loaded
        and all(other.run >= 0 and _guard(plan, other.run, other.end) is not None for other in onward)
    )
    return Exposure(edge.run, port, edge.end, near or upstream, upstream, max(bare, 0.0), length, ends, direct)


def _returns(network: Network, port: int, start: int, carried: dict[int, set[Guard | None]], found: Sections) -> None:
    """Give every return conductor of its own the protections of the circuits beyond it."""
    plan = network.plan
    points: dict[int, list[str]] = {}
    for name in plan.point_names:
        points.setdefault(network.ret(name), []).append(name)
    order, parents = _return_tree(network, start)
    beyond: dict[int, set[Guard]] = {}
    for node in reversed(order):
        own = beyond.setdefault(node, set())
        for name in points.get(node, ()):
            own.update(guard for guard in carried.get(network.feed(name), ()) if guard is not None)
        run, before = parents[node]
        if run >= 0 and plan.runs[run].conducts == "return" and own:
            found.returns.setdefault(run, []).append((port, max(own, key=lambda guard: guard.rating_A)))
        if before != node:
            beyond.setdefault(before, set()).update(own)


def _return_tree(network: Network, start: int) -> tuple[list[int], dict[int, tuple[int, int]]]:
    at: dict[int, list[tuple[int, int]]] = {}
    for a, b, run in zip(network.a.tolist(), network.b.tolist(), network.run.tolist(), strict=True):
        at.setdefault(a, []).append((run, b))
        at.setdefault(b, []).append((run, a))
    returns = {network.ret(name) for name in (*network.plan.point_names, CHASSIS) if (name, 1) in network.nodes}
    parents, order, queue = {start: (-1, start)}, [start], deque([start])
    while queue:
        node = queue.popleft()
        for run, other in at.get(node, ()):
            if other in returns and other not in parents:
                parents[other] = (run, node)
                order.append(other)
                queue.append(other)
    return order, parents


def sheathed(plan: Plan, run: Run) -> bool:
    """Whether a run lies in a sheath or conduit: its own word, else its route's."""
    if run.sheathed is not None:
        return run.sheathed
    return run.route is not None and plan.routes[run.route].sheathed
