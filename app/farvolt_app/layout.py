"""Where everything in a drawing goes: rows and columns, then places. Pure arithmetic on the sizes it is given.

Each way has a row to itself from the point it leaves to where it ends, and the first onward way of a point goes
straight on in the row of the way in. So the rest of a row is free, and what closes a loop can be led around at the
right of all it passes. Lengths are in pixels of the drawing, y downwards.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

from farvolt.plan import Plan
from farvolt_app.wiring_tree import Branch, Key, Leaf, Part, Way, parts

PAD = 10.0
MARGIN = 16.0
CHASSIS_WIDTH = 26.0
TRACK_GAP = 12.0
PART_GAP = 40.0

Room = tuple[float, float]
"""How far a piece reaches above and below the line of its row."""

_NAME: Room = (42.0, -27.0)
_HEAD: Room = (27.0, -10.0)
_BODY: Room = (10.0, 39.0)
_VOLTS: Room = (10.0, 25.0)
_FRAME: Room = (8.0, 24.0)
_SOURCE: Room = (30.0, 30.0)
_LOAD: Room = (23.0, 23.0)
_TAG: Room = (21.0, 24.0)
_ROW_GAP = 4.0

_LEVELS = {"name": (_NAME,), "head": (_HEAD,), "body": (_BODY,), "all": (_NAME, _HEAD, _BODY)}
"""Names of points stand above the text of ways, so that a column need not hold them side by side."""


@dataclass(frozen=True, slots=True)
class Box:
    """A rectangle that nothing else may overlap."""

    x: float
    y: float
    width: float
    height: float

    def overlaps(self, other: "Box") -> bool:
        """True when the two share more than an edge."""
        return (
            self.x < other.x + other.width - 1e-6
            and other.x < self.x + self.width - 1e-6
            and self.y < other.y + other.height - 1e-6
            and other.y < self.y + self.height - 1e-6
        )


@dataclass(frozen=True, slots=True)
class Sizes:
    """Widths of what is to be placed; `tags` are of what is written at the second end of a way that closes a loop.

    A way has a head above its line, and a body on and below it. A point has a name and, below the line, its volts; one
    without a name is not labelled.
    """

    ways: Mapping[Key, tuple[float, float]]
    points: Mapping[str, tuple[float, float]]
    sources: Mapping[Key, float]
    tags: Mapping[Key, float]
    load: float


@dataclass(frozen=True, slots=True)
class PlacedPoint:
    """A point: a vertical from `top` to `bottom` at `x`, with its label left or right of it in row `y`."""

    name: str
    x: float
    y: float
    top: float
    bottom: float
    joints: tuple[float, ...]
    """Where ways meet the vertical."""
    label: Box
    volts: Box
    label_left: bool


@dataclass(frozen=True, slots=True)
class PlacedWay:
    """A run, device or converter along y from x0 to x1; `head` holds its name, `box` its symbols and details.

    `flipped`: its `to` end is at the left. `around`: the corners of the rest of its line, where it closes a loop, up to
    the `tag` at its second end. `chassis`: where the frame symbol hangs, for a run to the chassis.
    """

    key: Key
    head: Box
    box: Box
    y: float
    x0: float
    x1: float
    flipped: bool
    around: tuple[tuple[float, float], ...] = ()
    tag: Box | None = None
    chassis: Box | None = None


@dataclass(frozen=True, slots=True)
class PlacedEnd:
    """A source or load in its box, joined to its point by a line along y from x0 to x1."""

    key: Key
    box: Box
    y: float
    x0: float
    x1: float
    is_array: bool = False


@dataclass(frozen=True, slots=True)
class Layout:
    """All places; `headings` are the unfed parts' tops."""

    width: float
    height: float
    points: tuple[PlacedPoint, ...]
    ways: tuple[PlacedWay, ...]
    sources: tuple[PlacedEnd, ...]
    loads: tuple[PlacedEnd, ...]
    unfed_y: tuple[float, ...]

    def boxes(self) -> Iterator[Box]:
        """Every rectangle that must stay clear of all others."""
        yield from (box for one in self.points for box in (one.label, one.volts))
        yield from (box for one in self.ways for box in (one.head, one.box))
        yield from (one.box for one in (*self.sources, *self.loads))
        yield from (box for one in self.ways for box in (one.tag, one.chassis) if box is not None)


def place(plan: Plan, sizes: Sizes) -> Layout:
    """Place a plan, its upper left corner at (0, 0)."""
    found = parts(plan)
    rows = _rows(found)
    _columns(found)
    return _Placing(found, rows, sizes).layout()


# Rows and columns ------------------------------------------------------------------------------------------------


def _rows(found: tuple[Part, ...]) -> int:
    """Give each branch and leaf its row; returns the number of rows."""
    height: dict[int, int] = {}

    def size(one: Branch | Leaf) -> int:
        return height[id(one)] if isinstance(one, Branch) else 1

    start = 0
    for part in found:
        for branch in reversed(part.branches):
            trunk = 1 if branch.parent is not None else 0
            height[id(branch)] = max(
                1, sum(map(size, branch.children)), trunk + sum(map(size, branch.feeders)) if branch.feeders else 0
            )
        part.branches[0].row = start
        start += size(part.branches[0])
        for branch in part.branches:
            row = branch.row
            for one in branch.children:
                one.row, row = row, row + size(one)
            row = branch.row + (1 if branch.parent is not None else 0)
            for one in branch.feeders:
                one.row, row = row, row + size(one)
    return start


def _columns(found: tuple[Part, ...]) -> None:
    """Give each branch its column, leaving room for what is turned to the left of it."""
    need: dict[int, int] = {}

    def room(one: Branch | Leaf) -> int:
        return 1 + need[id(one)] if isinstance(one, Branch) else 1

    for part in found:
        for branch in reversed(part.branches):
            inward = branch.children if branch.leftward else branch.feeders
            need[id(branch)] = max(map(room, inward), default=0 if branch.leftward else 1)
        for branch in part.branches:
            if branch.parent is None:
                branch.column = need[id(branch)]
            elif branch.leftward:
                branch.column = branch.parent.column - 1
            else:
                branch.column = max(branch.parent.column + 1, _bar_before(branch).column + need[id(branch)])


def _bar_before(branch: Branch) -> Branch:
    """The nearest branch before this one whose vertical reaches below the row of this one, or the root."""
    path, before = branch, branch.parent
    while before is not None and before.parent is not None and before.children[-1] is path and not before.feeders:
        path, before = before, before.parent
    assert before is not None
    return before


# Places ----------------------------------------------------------------------------------------------------------


class _Placing:
    """One placing: the widths of the columns, the heights of the rows, and what has been put where."""

    def __init__(self, found: tuple[Part, ...], rows: int, sizes: Sizes) -> None:
        self.found = found
        self.sizes = sizes
        self.branches = [branch for part in found for branch in part.branches]
        self.x = self._column_places()
        self.y, self.unfed_y, self.height = self._row_places(rows)
        self.reach = [MARGIN] * rows
        """How far to the right each row is taken."""

    def layout(self) -> Layout:
        points = tuple(map(self._point, self.branches))
        ways = [self._tree_way(branch) for branch in self.branches if branch.way is not None]
        leaves = [(branch, one) for branch in self.branches for one in _leaves(branch)]
        ways += [self._chassis(branch, one.way, one) for branch, one in leaves if one.what == "chassis" and one.way]
        sources = tuple(self._source(branch, one) for branch, one in leaves if one.what in ("source", "array"))
        ways += self._rings(leaves)
        load_x = max(self.reach, default=MARGIN) + 2 * PAD
        loads = tuple(self._load(branch, one, load_x) for branch, one in leaves if one.what == "load")
        width = (load_x + self.sizes.load if loads else max(self.reach, default=MARGIN)) + MARGIN
        return Layout(width, self.height, points, tuple(ways), sources, loads, self.unfed_y)

    def _column_places(self) -> list[float]:
        """The x of each column, from the widest row of pieces between it and the column before."""
        widths: dict[tuple[int, int, Room], float] = {}

        def add(zone: int, row: int, level: str, width: float) -> None:
            for room in _LEVELS[level]:
                widths[zone, row, room] = widths.get((zone, row, room), PAD) + (width + PAD if width else 0.0)

        for branch in self.branches:
            name, volts = self.sizes.points[branch.point]
            zone = branch.column + 1 if branch.leftward else branch.column
            add(zone, branch.row, "name", name)
            add(zone, branch.row, "body", volts)
            if branch.way is not None and branch.parent is not None:
                head, body = self.sizes.ways[branch.way.key]
                first = zone if branch.leftward else branch.parent.column + 1
                add(first, branch.row, "head", head)
                add(first, branch.row, "body", body)
            for leaf in _leaves(branch):
                for level, width in self._leaf_widths(leaf):
                    add(self._zone(branch, leaf), leaf.row, level, width)
        zones: dict[int, float] = {}
        for (zone, _, _), width in widths.items():
            zones[zone] = max(zones.get(zone, 0.0), width)
        places = [MARGIN]
        for zone in range(1, max(zones, default=0) + 1):
            places.append(places[-1] + zones.get(zone, 0.0))
        return places

    def _zone(self, branch: Branch, leaf: Leaf) -> int:
        """Between which columns a leaf lies: that of its branch and the one before, or the next."""
        return branch.column if branch.leftward or leaf in branch.feeders else branch.column + 1

    def _leaf_widths(self, leaf: Leaf) -> Iterator[tuple[str, float]]:
        if leaf.what in ("source", "array"):
            yield "all", self.sizes.sources[leaf.key]
        elif leaf.what == "ring end":
            yield "body", self.sizes.tags[leaf.key]
        elif leaf.what != "load":
            head, body = self.sizes.ways[leaf.key]
            yield "head", head
            yield "body", body + (CHASSIS_WIDTH if leaf.what == "chassis" else 0.0)

    def _row_places(self, rows: int) -> tuple[list[float], tuple[float, ...], float]:
        """The y of the line of each row, the tops of the unfed parts, and the height of all."""
        above, below = [0.0] * rows, [0.0] * rows

        def take(row: int, *rooms: Room) -> None:
            above[row] = max(above[row], *(room[0] for room in rooms))
            below[row] = max(below[row], *(room[1] for room in rooms))

        kinds = {"source": _SOURCE, "array": _SOURCE, "load": _LOAD, "ring end": _TAG}
        for branch in self.branches:
            take(branch.row, _NAME if self.sizes.points[branch.point][0] else _VOLTS, _VOLTS)
            if branch.way is not None:
                take(branch.row, _HEAD, _BODY)
            for leaf in _leaves(branch):
                take(leaf.row, *((kinds[leaf.what],) if leaf.what in kinds else (_HEAD, _BODY)))
        tops = {part.branches[0].row: part.fed for part in self.found}
        y, unfed, at = [], [], MARGIN
        for row in range(rows):
            if row in tops and (row > 0 or not tops[row]):
                unfed += [at + PART_GAP / 2] if not tops[row] else []
                at += PART_GAP
            y.append(at + above[row])
            at += above[row] + below[row] + _ROW_GAP
        return y, tuple(unfed), at + MARGIN

    def _take(self, row: int, right: float) -> None:
        self.reach[row] = max(self.reach[row], right)

    def _box(self, x: float, width: float, row: int, room: Room) -> Box:
        self._take(row, x + width)
        return Box(x, self.y[row] - room[0], width, room[0] + room[1])

    def _point(self, branch: Branch) -> PlacedPoint:
        x, (name, volts) = self.x[branch.column], self.sizes.points[branch.point]
        taken = sorted({branch.row, *(one.row for one in (*branch.children, *branch.feeders))})
        for row in range(taken[0], taken[-1] + 1):
            self._take(row, x + PAD)
        left = branch.leftward
        label = self._box(x + PAD if left else x - PAD - name, name, branch.row, _NAME)
        figure = self._box(x + PAD if left else x - PAD - volts, volts, branch.row, _VOLTS)
        joints = tuple(self.y[row] for row in taken)
        return PlacedPoint(branch.point, x, self.y[branch.row], joints[0], joints[-1], joints, label, figure, not left)

    def _tree_way(self, branch: Branch) -> PlacedWay:
        assert branch.way is not None
        assert branch.parent is not None
        here, there = self.x[branch.column], self.x[branch.parent.column]
        head, box = self._way_boxes(branch.way.key, branch.row, there, branch.leftward)
        starts_left = branch.way.start == (branch.point if branch.leftward else branch.parent.point)
        x0, x1 = min(here, there), max(here, there)
        return PlacedWay(branch.way.key, head, box, self.y[branch.row], x0, x1, not starts_left)

    def _way_boxes(self, key: Key, row: int, x: float, leftward: bool) -> tuple[Box, Box]:
        """Head and body of a way that leaves the column at x."""
        head, body = self.sizes.ways[key]
        lefts = (x - PAD - head, x - PAD - body) if leftward else (x + PAD, x + PAD)
        return self._box(lefts[0], head, row, _HEAD), self._box(lefts[1], body, row, _BODY)

    def _chassis(self, branch: Branch, way: Way, leaf: Leaf) -> PlacedWay:
        x = self.x[branch.column]
        head, box = self._way_boxes(way.key, leaf.row, x, branch.leftward)
        end = box.x - CHASSIS_WIDTH if branch.leftward else box.x + box.width
        frame = self._box(end, CHASSIS_WIDTH, leaf.row, _FRAME)
        middle = end + CHASSIS_WIDTH / 2
        starts_left = (way.start == branch.point) != branch.leftward
        x0, x1 = min(x, middle), max(x, middle)
        return PlacedWay(way.key, head, box, self.y[leaf.row], x0, x1, not starts_left, chassis=frame)

    def _source(self, branch: Branch, leaf: Leaf) -> PlacedEnd:
        x, width = self.x[branch.column], self.sizes.sources[leaf.key]
        is_root = branch.parent is None
        # At a root the boxes stand in line at the far left, and leave the label of the point its room.
        left = MARGIN + PAD if is_root else x - PAD - width
        box = self._box(left, width, leaf.row, _SOURCE)
        return PlacedEnd(leaf.key, box, self.y[leaf.row], left + width, x, leaf.what == "array")

    def _load(self, branch: Branch, leaf: Leaf, x: float) -> PlacedEnd:
        box = self._box(x, self.sizes.load, leaf.row, _LOAD)
        return PlacedEnd(leaf.key, box, self.y[leaf.row], self.x[branch.column], x)

    def _rings(self, leaves: list[tuple[Branch, Leaf]]) -> list[PlacedWay]:
        """Place what closes loops, shortest first, each on a track at the right of all that it passes."""
        ends = {leaf.key: (branch, leaf) for branch, leaf in leaves if leaf.what == "ring end"}
        starts = [(branch, leaf) for branch, leaf in leaves if leaf.what == "ring start"]
        placed = []
        for branch, leaf in starts:
            x = self.x[branch.column]
            head, box = self._way_boxes(leaf.key, leaf.row, x, False)
            far, end = ends[leaf.key]
            tag = self._box(self.x[far.column] + PAD, self.sizes.tags[leaf.key], end.row, _TAG)
            way = PlacedWay(leaf.key, head, box, self.y[leaf.row], x, box.x + box.width, False, tag=tag)
            placed.append((abs(end.row - leaf.row), way, leaf.row, end.row, self.x[far.column]))
        tracks: list[tuple[float, int, int]] = []
        finished = {}
        for _, way, row, other, far_x in sorted(placed, key=lambda one: one[0]):
            track = self._track(min(row, other), max(row, other), tracks)
            around = ((way.x1, way.y), (track, way.y), (track, self.y[other]), (far_x, self.y[other]))
            finished[way.key] = replace(way, around=around)
        for x, first, last in tracks:
            for row in range(first, last + 1):
                self._take(row, x)
        return [finished[way.key] for _, way, *_ in placed]

    def _track(self, first: int, last: int, tracks: list[tuple[float, int, int]]) -> float:
        """The leftmost x free for a vertical between two rows; it is taken from then on."""
        x = max(self.reach[first : last + 1]) + TRACK_GAP
        while any(abs(x - at) < TRACK_GAP and first <= bottom and top <= last for at, top, bottom in tracks):
            x += TRACK_GAP
        tracks.append((x, first, last))
        return x


def _leaves(branch: Branch) -> Iterator[Leaf]:
    return (one for one in (*branch.feeders, *branch.children) if isinstance(one, Leaf))
