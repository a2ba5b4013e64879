"""Protection by section: for every conductor and every source that can feed it, the nearest protection on the way.

The walk starts at each source with all devices closed and goes outward through the feed conductors. What it
carries along is the last protection passed and the length from the source or tap. In dense meshes it may also follow
a way that would have to pass a point twice: it names too much there, never too little. A return conductor of its own
is judged by the protection of the circuits that return through it.
"""

from bisect import bisect
from collections import deque
from dataclasses import dataclass, field, replace
from functools import cached_property

from farvolt.network import Network
from farvolt.plan import CHASSIS, Converter, Plan, Protection, Run


@dataclass(frozen=True, slots=True, eq=False)
class Guard:
    """A protection on a run. There is one for each end of a run that has protection in its feed."""

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
    ahead: tuple[Guard, ...]
    """The protection the run ends in: at its far end, or at the start of everything that leaves from there."""
    direct: bool
    """This end is at the source itself."""

    @property
    def own(self) -> bool:
        """Whether the run has protection of its own at this end."""
        guard = self.guard
        return guard is not None and guard.run == self.run and guard.protection.end == self.end


@dataclass(slots=True)
class Sections:
    """All exposures of a plan, by run."""

    by_run: dict[int, list[Exposure]] = field(default_factory=dict)
    returns: dict[int, list[tuple[int, Guard]]] = field(default_factory=dict)
    """Return conductors of their own, by run: (source, protection of a circuit that returns through it)."""
    by_device: dict[tuple[int, str, int, Guard], None] = field(default_factory=dict)
    """Devices that are passed behind a protection: (device, end at which it is fed, source, protection)."""


@dataclass(frozen=True, slots=True)
class Stretch:
    """A piece of conductor that a protection guards against a source, up to the next protection on the way."""

    guard: Guard
    source: int
    run: int
    """Index of the run, or -1 where it is a device that the current passes."""
    end: str
    """The end of the run or device at which the source feeds it."""
    until_m: float = 0.0
    """How far along a run it reaches from that end: the whole length where no protection follows in the run."""
    device: int = -1


_Carried = dict[int, dict[tuple[Guard | None, int], None]]
"""Node to (protection last passed, node it was reached from) on the ways to it, as an ordered set."""


@dataclass(frozen=True, slots=True)
class _Edge:
    run: int
    """Index of the run, or -1 for a device."""
    other: int
    end: str
    device: int = -1


@dataclass(frozen=True, slots=True)
class _Feeds:
    """The feed conductors of a plan as a graph, with what stands on it."""

    plan: Plan
    edges: dict[int, list[_Edge]]
    guards: dict[tuple[int, str], Guard]
    bare: dict[int, int]
    """Node to the number of devices, and of runs without protection there, that leave it."""
    drawn: set[int]
    """Nodes at which a load or a converter's input stands, without protection in between."""

    def near(self, edge: _Edge) -> Guard | None:
        return self.guards.get((edge.run, edge.end))

    def far(self, edge: _Edge) -> Guard | None:
        return self.guards.get((edge.run, "to" if edge.end == "from" else "from"))

    def ahead(self, edge: _Edge) -> tuple[Guard, ...]:
        """What protects at the far end of an edge: its own, or one on everything that leaves there; else nothing."""
        far = self.far(edge)
        if far is not None:
            return (far,)
        if edge.other in self.drawn or self.bare[edge.other] > 1:  # this run itself leaves there without protection
            return ()
        return tuple(guard for other in self.edges[edge.other] if (guard := self.near(other)) is not None)


def sections(network: Network) -> Sections:
    """Walk a plan's protection from every source. Runs in proportion to runs times sources."""
    plan = network.plan
    feeds = _feeds(network)
    found = Sections()
    for port, source in enumerate(plan.sources):
        start = network.feed(source.at)
        carried = _walk(feeds, port, start, found)
        _returns(network, port, network.ret(source.at), carried, found)
    return found


def stretches(plan: Plan, found: Sections) -> list[Stretch]:
    """What each protection guards against each source, devices closed: each run and device, by the way it is fed.

    The start of a run before its own protection belongs to the protection upstream. The far ends of a protection's
    stretches are where a fault gives it the least current.
    """
    result: list[Stretch] = []
    for index, ways in found.by_run.items():
        run = plan.runs[index]
        for way in ways:
            ends_in = [one for one in run.protections if one.pole == "feed" and one.end != way.end]
            whole = run.length.si - min((one.distance.si if one.distance else 0.0 for one in ends_in), default=0.0)
            if way.guard is not None:
                result.append(Stretch(way.guard, way.source, index, way.end, whole))
            if way.own and way.upstream is not None and way.bare_m > 0:
                result.append(Stretch(way.upstream, way.source, index, way.end, way.bare_m))
    for device, end, source, guard in found.by_device:
        result.append(Stretch(guard, source, -1, end, device=device))
    return result


def _feeds(network: Network) -> _Feeds:
    plan = network.plan
    edges: dict[int, list[_Edge]] = {}
    guards: dict[tuple[int, str], Guard] = {}
    for index, run in enumerate(plan.runs):
        if run.conducts in ("both", "feed"):
            a, b = network.feed(run.from_point), network.feed(run.to_point)
            edges.setdefault(a, []).append(_Edge(index, b, "from"))
            edges.setdefault(b, []).append(_Edge(index, a, "to"))
            guards |= {(index, guard.protection.end): guard for guard in _lowest(index, run)}
    for index, device in enumerate(plan.devices):
        a, b = network.feed(device.from_point), network.feed(device.to_point)
        if a != b:
            edges.setdefault(a, []).append(_Edge(-1, b, "from", index))
            edges.setdefault(b, []).append(_Edge(-1, a, "to", index))
    drawn = {network.feed(load.at) for load in plan.loads}
    drawn |= {network.feed(source.from_point) for source in plan.sources if isinstance(source, Converter)}
    bare = {node: sum((edge.run, edge.end) not in guards for edge in leaving) for node, leaving in edges.items()}
    return _Feeds(plan, edges, guards, bare, drawn)


def _lowest(index: int, run: Run) -> list[Guard]:
    """The lowest-rated protection in the feed at each end of a run."""
    lowest: dict[str, Protection] = {}
    for one in run.protections:
        if one.pole == "feed" and (one.end not in lowest or one.rating.si < lowest[one.end].rating.si):
            lowest[one.end] = one
    return [Guard(index, one) for one in lowest.values()]


@dataclass(frozen=True, slots=True)
class _State:
    """Where a walk stands: behind which protection, over how much cable, by which run it came."""

    node: int
    guard: Guard | None
    seat: int
    """The node from which the protection was reached; the source's own where there is none."""
    length_m: float
    came: int
    direct: bool


def _walk(feeds: _Feeds, port: int, start: int, found: Sections) -> _Carried:
    """Fill in the exposures of one source; what protection is carried at each node reached."""
    carried: _Carried = {start: {(None, start): None}}
    cuts = _Cuts(feeds, start)
    queue = deque([_State(start, None, start, 0.0, -1, True)])
    while queue:
        state = queue.popleft()
        for edge in feeds.edges.get(state.node, ()):
            if edge.run >= 0 and edge.run == state.came:
                continue
            after = _step(feeds, port, edge, state, found)
            known = carried.setdefault(edge.other, {})
            key = (after.guard, after.seat)
            # Current never comes back to a point that it had to pass: a ring behind it protects nothing there.
            if key not in known and not (known and cuts.parts(edge.other, after.seat)):
                known[key] = None
                queue.append(after)
    return carried


def _step(feeds: _Feeds, port: int, edge: _Edge, state: _State, found: Sections) -> _State:
    """Go over an edge: note how a run on it is fed."""
    if edge.run < 0:
        if state.guard is not None:
            found.by_device[edge.device, edge.end, port, state.guard] = None
        return replace(state, node=edge.other, came=-1)
    exposure = _exposure(feeds, port, edge, state.guard, state.length_m, state.direct)
    found.by_run.setdefault(edge.run, []).append(exposure)
    length = state.length_m + feeds.plan.runs[edge.run].length.si
    passed = feeds.far(edge) or feeds.near(edge)
    if passed is not None:
        return _State(edge.other, passed, state.node, length, edge.run, False)
    return _State(edge.other, state.guard, state.seat, length, edge.run, False)


class _Cuts:
    """Points that part the network: whether everything from the source to a node has to pass another.

    By depth-first search: what lies below a child of x is parted by x if nothing there leads back above x.
    Worked out only when a node is reached for a second time, as in a ring.
    """

    def __init__(self, feeds: _Feeds, start: int) -> None:
        self._feeds, self._start = feeds, start

    def parts(self, x: int, node: int) -> bool:
        """Whether every way from the source to `node` passes `x`; so it is where they are the same."""
        if x in (node, self._start):
            return True
        entered, low, children = self._search
        below = children.get(x, [])
        place = bisect([entered[child] for child in below], entered[node]) - 1
        if place < 0 or entered[node] > self._last[below[place]]:
            return False
        return low[below[place]] >= entered[x]

    @cached_property
    def _search(self) -> tuple[dict[int, int], dict[int, int], dict[int, list[int]]]:
        """Order of entry, lowest entry led back to, and children in the search tree, by node."""
        entered, low, children = {self._start: 0}, {self._start: 0}, dict[int, list[int]]()
        stack = [(self._start, self._start, iter(self._feeds.edges.get(self._start, ())))]
        while stack:
            node, parent, edges = stack[-1]
            edge = next(edges, None)
            if edge is None:
                stack.pop()
                low[parent] = min(low[parent], low[node])
            elif edge.other not in entered:
                entered[edge.other] = low[edge.other] = len(entered)
                children.setdefault(node, []).append(edge.other)
                stack.append((edge.other, node, iter(self._feeds.edges[edge.other])))
            elif edge.other != parent:
                low[node] = min(low[node], entered[edge.other])
        return entered, low, children

    @cached_property
    def _last(self) -> dict[int, int]:
        """By node, the last order of entry of all that lies below it."""
        entered, _, children = self._search
        last = dict(entered)
        for node in sorted(entered, key=lambda one: -entered[one]):
            for child in children.get(node, ()):
                last[node] = max(last[node], last[child])
        return last


def _exposure(feeds: _Feeds, port: int, edge: _Edge, upstream: Guard | None, length: float, direct: bool) -> Exposure:
    near, far = feeds.near(edge), feeds.far(edge)
    bare = feeds.plan.runs[edge.run].length.si
    if near is not None:
        bare = near.protection.distance.si if near.protection.distance else 0.0
    elif far is not None:
        bare -= far.protection.distance.si if far.protection.distance else 0.0
    ahead = feeds.ahead(edge)
    return Exposure(edge.run, port, edge.end, near or upstream, upstream, max(bare, 0.0), length, ahead, direct)


def _returns(network: Network, port: int, start: int, carried: _Carried, found: Sections) -> None:
    """Give every return conductor of its own the highest-rated protection of the circuits beyond it."""
    plan = network.plan
    highest: dict[int, Guard] = {}
    for name in plan.point_names:
        for guard, _ in carried.get(network.feed(name), ()):
            _raise(highest, network.ret(name), guard)
    order, parents = _return_tree(network, start)
    for node in reversed(order):
        run, before = parents[node]
        guard = highest.get(node)
        if guard is not None and run >= 0 and plan.runs[run].conducts == "return":
            found.returns.setdefault(run, []).append((port, guard))
        if before != node:
            _raise(highest, before, guard)


def _raise(highest: dict[int, Guard], node: int, guard: Guard | None) -> None:
    """Keep the higher-rated of a node's protection and another."""
    known = highest.get(node)
    if guard is not None and (known is None or guard.rating_A > known.rating_A):
        highest[node] = guard


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
