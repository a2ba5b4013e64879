"""Whether a cable fits where it ends: the terminals' largest conductor, and lugs for its size and their stud."""

import difflib
import math
from collections.abc import Iterator

from farvolt.checks.registry import check, run_finding
from farvolt.conductors import Size
from farvolt.context import Context, label
from farvolt.lugs import LUGS, STUDS, Lugs, known_stud
from farvolt.network import return_size
from farvolt.plan import Point, Run
from farvolt.results import Finding
from farvolt.units import number

_TERMINALS = "the largest conductor that the terminals take, as the plan states it (largest_size)"
_LUGS = "common practice: lugs and ring terminals usually stocked (provisional)"


@check("conductor.fit", title="Cable sizes against the terminals and studs where they end")
def fit(context: Context) -> Iterator[Finding]:
    """Runs too thick for a point's terminals, or of a size that no usual lug joins to its stud."""
    points = {one.name: one for one in context.plan.points if one.largest_size is not None or one.stud is not None}
    for point in points.values():
        if point.stud is not None and known_stud(point.stud) is None:
            yield _unknown(point, point.stud)
    for run in context.plan.runs:
        if run.name in context.interim:
            continue
        for name in dict.fromkeys((run.from_point, run.to_point)):
            if name in points:
                yield from _end(run, points[name])


def _end(run: Run, point: Point) -> Iterator[Finding]:
    sizes = [size for size in (run.size, return_size(run) if run.conducts == "both" else None) if size is not None]
    if not sizes:
        return
    thickest, thinnest = max(sizes, key=lambda one: one.area_mm2), min(sizes, key=lambda one: one.area_mm2)
    largest = point.largest_size
    if largest is not None and thickest.area_mm2 > largest.area_mm2 * (1 + 1e-9):
        yield _too_thick(run, point, thickest, largest)
    stud = known_stud(point.stud) if point.stud is not None else None
    if stud is None:
        return
    for size in dict.fromkeys((thickest, thinnest)):
        lugs = next(row for row in LUGS if size.area_mm2 <= row.area_up_to_mm2)
        if STUDS[stud] < STUDS[lugs.smallest] or STUDS[stud] > STUDS[lugs.largest]:
            yield _no_lug(run, point, size, stud, lugs)


def _too_thick(run: Run, point: Point, size: Size, largest: Size) -> Finding:
    return run_finding(
        "conductor.fit", "fail", run, size.area_mm2, largest.area_mm2, "mm2",
        f'{label(run)} is {size.name}; the terminals at "{point.name}" take {largest.name} at most', _TERMINALS,
        (f"{number(size.area_mm2)} mm2 > {number(largest.area_mm2)} mm2",),
        f"several cables in parallel of {largest.name} or less where the terminals allow it, a stud with lugs, or "
        f'terminals for {size.name} at "{point.name}"; never strands cut off to fit',
    )  # fmt: skip


def _no_lug(run: Run, point: Point, size: Size, stud: str, lugs: Lugs) -> Finding:
    small = STUDS[stud] < STUDS[lugs.smallest]
    fits = [row for row in LUGS if STUDS[row.smallest] <= STUDS[stud] <= STUDS[row.largest]]
    limit = max((row.area_up_to_mm2 for row in fits if math.isfinite(row.area_up_to_mm2)), default=0.0)
    other = f"thinner cables in parallel, up to about {number(limit)} mm2 each" if small else "a thicker cable"
    bound = f"from {lugs.smallest} up" if small else f"up to {lugs.largest}"
    return run_finding(
        "conductor.fit", "warn", run, STUDS[stud], STUDS[lugs.smallest if small else lugs.largest], "mm",
        f'{label(run)}: lugs for {size.name} are not usually made for the {stud} stud at "{point.name}"', _LUGS,
        (f"{size.name}: studs {bound} ({number(STUDS[stud])} mm is {stud})",),
        f'a stud {bound} at "{point.name}", or {other}',
    )  # fmt: skip


def _unknown(point: Point, stud: str) -> Finding:
    near = difflib.get_close_matches(stud, STUDS, n=1, cutoff=0.4)
    hint = f'; did you mean "{near[0]}"?' if near else "."
    return Finding(
        "conductor.fit", "warn", point.name, "point", None, None, None, None,
        f'"{point.name}": "{stud}" is not a known stud size{hint} Lugs for it are not checked',
        "the table of stud sizes", (f"Accepted: {', '.join(STUDS)}",), "one of the sizes accepted",
    )  # fmt: skip
