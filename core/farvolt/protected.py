"""Each protection of a plan beside what it stands before: its load, its cables, the largest and the least fault.

And the same as curves of time over current, for a drawing on logarithmic axes.
"""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import overload

from farvolt.checks.demand import Demands
from farvolt.checks.far_end import Opening, opening, opens_s, thinnest
from farvolt.checks.rating import limit_for
from farvolt.checks.under_load import protected_by
from farvolt.checks.ways import ampacity_A, limited_A
from farvolt.context import Context, label
from farvolt.faults import FarEnd
from farvolt.network import FEED, RETURN
from farvolt.plan import Load, Protection
from farvolt.sections import Exposure, Guard
from farvolt.units import number

LONGEST_S, SHORTEST_S = 10_000.0, 0.001
"""Ends of the axis of time."""

Points = tuple[tuple[float, float], ...]
"""(ampere, second), by rising current."""


@dataclass(frozen=True, slots=True)
class ProtectionResult:
    """One protection: currents in ampere, times in second; None where there is no answer."""

    run: str
    end: str
    pole: str
    type: str
    rating_A: float
    load_A: float
    """The largest lasting current, continuous loads counted as the rulebook asks."""
    cable_A: float | None
    """The highest rating that all cables it protects allow."""
    highest_A: float | None
    """Largest prospective fault current through it."""
    interrupts_A: float | None
    lowest_A: float | None
    """Least fault current through it, from the far end that is worst off."""
    far_end: str
    opens_s: float | None
    """The greatest time in which it opens there; infinite where it need not."""
    allowed_s: float | None
    """The time until the cable there is at its limit, at most five seconds; None where nothing has to open in time or
    nothing is known of the cable."""
    carried: bool
    """Whether the cables at every far end are known to carry the fault current for good."""
    estimated: bool
    """Some fault current comes from a battery whose resistance is an estimate."""


@dataclass(frozen=True, slots=True)
class Curve:
    """A line of time over current; `role` says how to draw it."""

    name: str
    role: str
    """"opens at the latest", "opens at the earliest", "upstream at the latest", "upstream at the earliest", "cable",
    "load"."""
    points: Points


@dataclass(frozen=True, slots=True)
class Mark:
    """A current to mark on the axis."""

    name: str
    amps: float


@dataclass(frozen=True, slots=True)
class TimeCurrent:
    """The time-current picture of one run."""

    title: str
    curves: tuple[Curve, ...]
    marks: tuple[Mark, ...]
    note: str


class Protections(Sequence[ProtectionResult]):
    """Every protection of a plan, in the order of its runs; worked out when it is first looked at."""

    def __init__(self, context: Context) -> None:
        self._context = context

    @cached_property
    def _rows(self) -> tuple[ProtectionResult, ...]:
        context = self._context
        demands, behind = Demands(context), protected_by(context)
        ends: dict[tuple[int, str], list[FarEnd]] = {}
        for far in context.faults.far_ends:
            ends.setdefault((far.stretch.guard.run, far.stretch.guard.protection.end), []).append(far)
        found = []
        for index, run in enumerate(context.plan.runs):
            for place, one in enumerate(run.protections):
                far_ends = ends.get((index, one.end), []) if one.pole == "feed" else []
                found.append(_result(context, index, place, demands, behind[id(one)], far_ends))
        return tuple(found)

    @overload
    def __getitem__(self, place: int) -> ProtectionResult: ...

    @overload
    def __getitem__(self, place: slice) -> Sequence[ProtectionResult]: ...

    def __getitem__(self, place: int | slice) -> ProtectionResult | Sequence[ProtectionResult]:
        return self._rows[place]

    def __len__(self) -> int:
        return sum(len(run.protections) for run in self._context.plan.runs)


def protections(context: Context) -> Protections:
    """Every protection of a plan, in the order of its runs."""
    return Protections(context)


def _result(
    context: Context, index: int, place: int, demands: Demands, behind: list[int], ends: list[FarEnd]
) -> ProtectionResult:
    run = context.plan.runs[index]
    one = run.protections[place]
    highest = context.faults.devices.get((index, place))
    nominal = context.cases[0].solutions["plan"].condition.islands.nominal(context.network.feed(_point(context, index)))
    worst = _worst(context, one, ends)
    least = min(ends, key=lambda far: far.fault.amps, default=None)
    at = worst.far if worst is not None else least
    return ProtectionResult(
        run=run.name,
        end=one.end,
        pole=one.pole,
        type=one.type,
        rating_A=one.rating.si,
        load_A=demands.worst(index, FEED if one.pole == "feed" else RETURN)[0],
        cable_A=_cable_A(context, index, one, behind),
        highest_A=highest.amps if highest is not None else None,
        interrupts_A=one.interrupting.si if one.interrupting else one.kind.interrupting_at(nominal),
        lowest_A=at.fault.amps if at is not None else None,
        far_end=at.fault.place if at is not None else "",
        opens_s=worst.opens_s if worst is not None else _opens_s(one, least),
        allowed_s=worst.allowed_s if worst is not None else None,
        carried=bool(ends) and all(_carried(context, far) for far in ends),
        estimated=any(fault.estimated for fault in (highest, at.fault if at else None) if fault is not None),
    )


def _point(context: Context, index: int) -> str:
    """An end of a run that is not the chassis."""
    run = context.plan.runs[index]
    return run.from_point if (run.from_point, FEED) in context.network.nodes else run.to_point


def _worst(context: Context, one: Protection, ends: list[FarEnd]) -> Opening | None:
    """The far end at which a protection is worst off against the cable, as the check of far ends has it."""
    found = [opened for far in ends if (opened := opening(context, far, one)) is not None]
    return max(found, key=lambda each: (each.damaging, each.times_late), default=None)


def _carried(context: Context, far: FarEnd) -> bool:
    index = far.stretch.run if far.stretch.run >= 0 else far.stretch.guard.run
    return all(amps <= (ampacity_A(context, run) or 0.0) for run, amps in ((index, far.run_A), *far.returns))


def _opens_s(one: Protection, far: FarEnd | None) -> float | None:
    return opens_s(one.kind, far.fault.amps, one.rating.si) if far is not None else None


def _cable_A(context: Context, own: int, one: Protection, behind: list[int]) -> float | None:
    """The highest rating that all cables allow which it guards against a source without a limit of its own."""
    limits = []
    for index in behind:
        ways = context.sections.by_run.get(index, [])
        strong = any(way.guard is not None and way.guard.protection is one for way in ways if _strong(context, way))
        amps = ampacity_A(context, index)
        if amps is not None and (strong or index == own):
            limits.append(limit_for(context, context.plan.runs[index], amps).amps)
    return min(limits, default=None)


def _strong(context: Context, way: Exposure) -> bool:
    return limited_A(context, way.source) is None


def time_current(context: Context, run_name: str) -> TimeCurrent:
    """The picture of a run: its own protection or the one it depends on, what stands upstream, its cable, its load
    with its start, and the fault currents near and far."""
    index = context.run_index(run_name)
    run = context.plan.runs[index]
    guard, upstream = _guards(context, index)
    marks = tuple(_marks(context, index, guard))
    largest = 1.5 * max([10.0, *(mark.amps for mark in marks)])
    curves: list[Curve] = []
    if guard is not None:
        curves += _band(guard.protection, largest, "opens", label(context.plan.runs[guard.run]))
    if upstream is not None:
        curves += _band(upstream.protection, largest, "upstream", label(context.plan.runs[upstream.run]))
    stands = thinnest(context, run) if run.size is not None else None
    if run.size is not None and stands is not None and stands.joule_A2s > 0:
        points = tuple(reversed(stands.points(5.0, SHORTEST_S)))
        curves.append(Curve(f"{run.size.name} at its insulation's limit", "cable", tuple(sorted(points))))
    curves += _loads(context, index)
    note = "No protection stands before this run. " if guard is None else ""
    return TimeCurrent(
        label(run), tuple(curves), marks,
        f"{note}Typical bands of the types, hot conductors for the far end, cold for the near; bolted shorts only.",
    )  # fmt: skip


def _guards(context: Context, index: int) -> tuple[Guard | None, Guard | None]:
    """The protection that a run depends on against its strongest source, and the next one upstream."""
    ways = context.sections.by_run.get(index, [])
    batteries = [one for one in ways if context.plan.sources[one.source].kind == "battery"] or ways
    found = next((one for one in batteries if one.guard is not None), None)
    if found is None or found.guard is None:
        return None, None
    guard = found.guard
    if found.own:
        return guard, found.upstream
    further = context.sections.by_run.get(guard.run, [])
    own = next((one for one in further if one.own and one.guard == guard and one.source == found.source), None)
    return guard, own.upstream if own is not None else None


def _band(one: Protection, largest: float, role: str, where: str) -> list[Curve]:
    least, greatest = one.kind.points(one.rating.si, largest)
    joule = one.kind.let_through_A2s(largest, one.rating.si)
    if greatest and math.isfinite(joule):
        greatest[-1] = (largest, min(greatest[-1][1], joule / largest**2))  # a fuse needs no more than its melting I2t
    name = f"{one.rating} {one.type} of {where}"
    shown = [
        (f"{role} at the latest", greatest),
        (f"{role} at the earliest", least),
    ]
    return [Curve(name, word, _clipped(points)) for word, points in shown if len(points) > 1]


def _clipped(points: list[tuple[float, float]]) -> Points:
    """Within the axis of time; a time of nothing stated stands at its foot."""
    return tuple((amps, min(max(time_s, SHORTEST_S), LONGEST_S)) for amps, time_s in points)


def _loads(context: Context, index: int) -> Iterator[Curve]:
    """The lasting current of a run, and its largest start as a step for as long as it lasts."""
    amps, case = Demands(context).worst(index, FEED)
    if amps <= 0:
        return
    one = context.cases[case].case
    starts = [(load, _start_A(context, load)) for load in context.plan.loads if load.surge and one.share(load.name) > 0]
    run = context.plan.runs[index]
    mine = [(load, extra) for load, extra in starts if load.at in (run.to_point, run.from_point)]
    points = [(amps, LONGEST_S)]
    if mine:
        load, extra = max(mine, key=lambda pair: pair[1])
        seconds = load.surge.seconds if load.surge is not None and load.surge.seconds is not None else 1.0
        points += [(amps, seconds), (amps + extra, seconds), (amps + extra, SHORTEST_S)]
        name = f'{number(amps)} A, and the start of "{load.name}"'
    else:
        points.append((amps, SHORTEST_S))
        name = f"load of {number(amps)} A"
    yield Curve(name, "load", tuple(points))


def _start_A(context: Context, load: Load) -> float:
    """How much more a load draws at its start than afterwards, at nominal voltage."""
    nominal = context.cases[0].solutions["plan"].condition.islands.nominal(context.network.feed(load.at))
    rated = load.power.si / nominal if load.power else load.current.si if load.current else 0.0
    if load.resistance is not None:
        rated = nominal / load.resistance.si
    surge = load.surge
    assert surge is not None
    if surge.current is not None:
        return max(surge.current.si - rated, 0.0)
    if surge.resistance is not None:
        return max(nominal / surge.resistance.si - rated, 0.0)
    return max(((surge.times or 1.0) - 1) * rated, 0.0)


def _marks(context: Context, index: int, guard: Guard | None) -> Iterator[Mark]:
    if guard is not None:
        seated = enumerate(context.plan.runs[guard.run].protections)
        near = [context.faults.devices.get((guard.run, place)) for place, one in seated if one == guard.protection]
        amps = max((one.amps for one in near if one is not None), default=math.nan)
        if math.isfinite(amps):
            yield Mark("largest short, near", amps)
        far = [one for one in context.faults.far_ends if one.stretch.guard == guard and one.stretch.run == index]
        if far:
            least = min(far, key=lambda one: one.fault.amps)
            yield Mark("least short, far", least.fault.amps)


__all__ = ["Curve", "Mark", "ProtectionResult", "Protections", "TimeCurrent", "protections", "time_current"]
