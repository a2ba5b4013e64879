"""A plan as trees to draw: one for each connected part, with what closes a loop set apart. No places, no text.

A part grows from its source through runs and devices, nearest first; a converter is crossed only where nothing else
leads on, so that what it feeds hangs behind it. What only delivers (a charger and its cable) is turned to the left.
"""

import heapq
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Literal

from farvolt.plan import CHASSIS, Converter, Plan, Solar

Key = tuple[str, str]
"""Kind and name of an entry of the plan: ("run", "galley feed")."""


@dataclass(frozen=True, slots=True)
class Way:
    """What leads from one point to another: a run, a device or a converter; the lowest rank is followed first."""

    key: Key
    start: str
    end: str
    rank: int

    def other(self, point: str) -> str:
        """The end that is not `point`."""
        return self.end if point == self.start else self.start


@dataclass(slots=True, eq=False)
class Leaf:
    """What ends at a point: a load, a source, a run to the chassis, or one end of a way that closes a loop."""

    what: Literal["load", "source", "array", "chassis", "ring start", "ring end"]
    key: Key
    way: Way | None = None
    row: int = 0


@dataclass(slots=True, eq=False)
class Branch:
    """A point, the way that leads to it, and what hangs on it: `feeders` on its left, `children` onward."""

    point: str
    way: Way | None
    parent: "Branch | None"
    leftward: bool = False
    children: list["Branch | Leaf"] = field(default_factory=list)
    feeders: list["Branch | Leaf"] = field(default_factory=list)
    row: int = 0
    column: int = 0


@dataclass(frozen=True, slots=True)
class Part:
    """A connected part of a plan; one without a source is not fed whatever the case."""

    branches: tuple[Branch, ...]
    """Parents before children; the first is the root."""
    fed: bool


def parts(plan: Plan) -> tuple[Part, ...]:
    """The parts of a plan: first that of the reference source, last those that no source feeds."""
    ways = _ways(plan)
    leaves = _leaves(plan)
    at: dict[str, list[Way]] = {point: [] for point in plan.point_names}
    for way in ways:
        at[way.start].append(way)
        at[way.end].append(way)
    found: list[Part] = []
    seen: set[str] = set()
    for root in _roots(plan):
        if root not in seen:
            branches = _spread(root, at, seen)
            _hang(branches, ways, at, leaves)
            fed = any(leaf.what in ("source", "array") for branch in branches for leaf in leaves.get(branch.point, ()))
            _turn_left(branches)
            found.append(Part(tuple(branches), fed))
    return tuple(sorted(found, key=lambda part: not part.fed))


def _ways(plan: Plan) -> list[Way]:
    runs = [
        Way(("run", run.name), run.from_point, run.to_point, 1 if run.conducts == "return" else 0)
        for run in plan.runs
        if CHASSIS not in (run.from_point, run.to_point)
    ]
    devices = [Way(("device", one.name), one.from_point, one.to_point, 0) for one in plan.devices]
    converters = [
        Way(("source", one.name), one.from_point, one.at, 2) for one in plan.sources if isinstance(one, Converter)
    ]
    return [*runs, *devices, *(way for way in converters if way.start != way.end)]


def _leaves(plan: Plan) -> dict[str, list[Leaf]]:
    """Sources, loads and runs to the chassis, by the point they hang on."""
    found: dict[str, list[Leaf]] = {}
    for source in plan.sources:
        if not isinstance(source, Converter) or source.from_point == source.at:
            found.setdefault(source.at, []).append(Leaf("source", ("source", source.name)))
        if isinstance(source, Solar) and source.array is not None and source.array.at in plan.point_names:
            found.setdefault(source.array.at, []).append(Leaf("array", ("source", source.name)))
    for load in plan.loads:
        found.setdefault(load.at, []).append(Leaf("load", ("load", load.name)))
    for run in plan.runs:
        if CHASSIS in (run.from_point, run.to_point):
            way = Way(("run", run.name), run.from_point, run.to_point, 1)
            found.setdefault(way.other(CHASSIS), []).append(Leaf("chassis", way.key, way))
    return found


def _roots(plan: Plan) -> Iterator[str]:
    sources = [one for one in plan.sources if not isinstance(one, Converter)]
    yield from (one.at for one in sources if one.name == plan.reference)
    yield from (one.at for one in sources)
    yield from plan.point_names


def _spread(root: str, at: dict[str, list[Way]], seen: set[str]) -> list[Branch]:
    """The points reached from a root, each by its best way: lowest rank, then nearest, then first in the file."""
    branches = [Branch(root, None, None)]
    seen.add(root)
    queue: list[tuple[int, int, int, Way, Branch]] = []
    depth = {root: 0}
    order = 0
    grown = branches[0]
    while True:
        for way in at[grown.point]:
            order += 1
            heapq.heappush(queue, (way.rank, depth[grown.point], order, way, grown))
        while queue and queue[0][3].other(queue[0][4].point) in seen:
            heapq.heappop(queue)
        if not queue:
            return branches
        *_, way, parent = heapq.heappop(queue)
        grown = Branch(way.other(parent.point), way, parent)
        depth[grown.point] = depth[parent.point] + 1
        seen.add(grown.point)
        branches.append(grown)


def _hang(branches: list[Branch], ways: list[Way], at: dict[str, list[Way]], leaves: dict[str, list[Leaf]]) -> None:
    """Give each branch its sources on the left, and its loads and onward ways, in file order, on the right."""
    place = {way.key: index for index, way in enumerate(ways)}
    below: dict[str, list[tuple[int, Branch | Leaf]]] = {branch.point: [] for branch in branches}
    for branch in branches:
        if branch.way is not None and branch.parent is not None:
            below[branch.parent.point].append((place[branch.way.key], branch))
    tree = {branch.way.key for branch in branches if branch.way is not None}
    for branch in branches:
        for leaf in leaves.get(branch.point, ()):
            if leaf.what in ("source", "array"):
                branch.feeders.append(leaf)
            else:
                below[branch.point].append((-1 if leaf.what == "load" else len(ways), leaf))
        for way in at[branch.point]:
            if way.key not in tree:
                what: Literal["ring start", "ring end"] = "ring start" if way.start == branch.point else "ring end"
                below[branch.point].append((place[way.key], Leaf(what, way.key, way)))
        branch.children = [one for _, one in sorted(below[branch.point], key=lambda pair: pair[0])]


def _turn_left(branches: list[Branch]) -> None:
    """Turn what only delivers to the left of the point it delivers to."""
    delivers: dict[str, bool] = {}
    consumes: dict[str, bool] = {}
    for branch in reversed(branches):
        under = [one for one in branch.children if isinstance(one, Branch)]
        leaves = [one for one in branch.children if isinstance(one, Leaf)]
        delivers[branch.point] = bool(branch.feeders) or any(delivers[one.point] for one in under)
        onward = branch.way is not None and branch.way.rank == 2 and branch.way.end == branch.point
        consumes[branch.point] = onward or any(consumes[one.point] for one in under) or any(
            leaf.what != "chassis" for leaf in leaves
        )  # fmt: skip
    for branch in branches:
        if branch.parent is None:
            continue
        if branch.parent.leftward:
            branch.leftward = True
        elif delivers[branch.point] and not consumes[branch.point]:
            branch.leftward = True
            branch.parent.children.remove(branch)
            branch.parent.feeders.append(branch)
        if branch.leftward:
            branch.children = [*branch.feeders, *branch.children]
            branch.feeders = []
