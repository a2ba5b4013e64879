"""What goes on the ends of conductors: lugs by stud, terminals, splices, and what holds the protection in between."""

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise

from farvolt.cable_kinds import BoughtConductor
from farvolt.conductors import Size
from farvolt.lugs import known_stud
from farvolt.plan import CHASSIS, Plan, Point, Protection, Run
from farvolt.tables import read
from farvolt_data import ROOT

NOT_STATED = "stud not stated"

_WITH_STUDS = ("busbar", "stud", "battery", "fuse block")


@dataclass(frozen=True, slots=True)
class Fitting:
    """One fitting: "lug", "terminal" or "splice", for a conductor; `stud` of a lug, as its one name or as stated."""

    item: str
    size: Size
    stud: str | None = None


@dataclass(frozen=True, slots=True)
class Mounting:
    """How a type of protection is held, and how often the cable is joined there beyond the ends of its run."""

    holder: str
    """Empty for what needs none."""
    joint: str
    joints: int
    stud: str | None


@lru_cache(maxsize=1)
def _mountings() -> dict[str, Mounting]:
    return {
        row["type"]: Mounting(row["holder"], row["joint"], int(row["joints"]), row["stud"] or None)
        for row in read(ROOT / "protection" / "mounting.csv")
    }


def mounting(one: Protection) -> Mounting:
    """The mounting of a protection; a type of the plan's own is taken to have studs, not known which."""
    shipped = _mountings().get(" ".join(one.type.lower().split()))
    fallback = Mounting("holder" if one.kind.kind == "fuse" else "", "lug", 2, None)
    return shipped if shipped is not None and not one.kind.own else fallback


def in_block(plan: Plan, run: Run, one: Protection) -> bool:
    """Whether a protection sits in a way of a fuse block, which holds it."""
    point = run.from_point if one.end == "from" else run.to_point
    return any(known.name == point and known.kind == "fuse block" for known in plan.points)


def fittings(plan: Plan, conductors: list[BoughtConductor]) -> Iterator[Fitting]:
    """Everything that goes on the ends of these conductors and where protection parts them; none without a size."""
    points = {one.name: one for one in plan.points}
    device_ends = {end for one in plan.devices for end in (one.from_point, one.to_point)}
    spliced: dict[tuple[str, str], list[Size]] = {}
    for one in conductors:
        size = one.kind.size
        if size is None:
            continue
        for end in (one.start, one.end):
            point = points.get(end)
            if point is not None and point.kind == "splice":
                spliced.setdefault((end, one.pole), []).append(size)
            else:
                yield _at_end(one, size, end, point, end in device_ends)
        yield from _at_protection(plan, one, size)
    for sizes in spliced.values():
        rising = sorted(sizes, key=lambda size: size.area_mm2)
        yield from (Fitting("splice", thicker) for _, thicker in pairwise(rising))


def _at_end(one: BoughtConductor, size: Size, end: str, point: Point | None, device_end: bool) -> Fitting:
    """A lug where a stud is stated or to be expected, else a terminal."""
    kind = point.kind if point is not None else "terminals"
    if kind == "fuse block" and one.run is not None and _guarded_at(one.run, end):
        return Fitting("terminal", size)
    if point is not None and point.stud is not None:
        return Fitting("lug", size, known_stud(point.stud) or point.stud)
    if kind in _WITH_STUDS or end == CHASSIS or device_end or one.run is None:
        return Fitting("lug", size)
    return Fitting("terminal", size)


def _guarded_at(run: Run, end: str) -> bool:
    return any((run.from_point if one.end == "from" else run.to_point) == end for one in run.protections)


def _at_protection(plan: Plan, one: BoughtConductor, size: Size) -> Iterator[Fitting]:
    """Joints at protection in the conductor; of conductors in parallel each has them, as it has its own ends."""
    if one.run is None:
        return
    for guard in one.run.protections:
        if guard.pole == one.pole and not in_block(plan, one.run, guard):
            held = mounting(guard)
            for _ in range(held.joints):
                yield Fitting(held.joint, size, held.stud if held.joint == "lug" else None)


@dataclass(frozen=True, slots=True)
class Tube:
    """Heat-shrink tubing over a lug: its width before shrinking, and the length that covers one."""

    width_mm: float
    length_mm: float


def tube(size: Size) -> Tube:
    """The tubing for a lug of a conductor (provisional: common practice)."""
    return next(one for up_to, one in _tubes() if size.area_mm2 <= up_to)


@lru_cache(maxsize=1)
def _tubes() -> list[tuple[float, Tube]]:
    rows = read(ROOT / "devices" / "heat_shrink.csv")
    found = [(float(row["area_up_to_mm2"]), Tube(float(row["tube_mm"]), float(row["length_mm"]))) for row in rows]
    assert math.isinf(found[-1][0]), "the last row holds for every larger conductor"
    return found
