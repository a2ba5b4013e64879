"""Switches, relays, shunts, connectors, diodes, busbars and fuse blocks against what they carry and stand."""

from collections.abc import Iterator

import numpy as np

from farvolt.checks.array_side import devices_on_array_sides
from farvolt.checks.flows import Currents, Flow, Flows
from farvolt.checks.registry import apart, at_least, check
from farvolt.checks.upstream import Arrival, Upstream
from farvolt.checks.ways import PRACTICE
from farvolt.context import CaseStudy, Context, label
from farvolt.network import Floats
from farvolt.plan import Charger, Converter, Device, Point, Solar
from farvolt.results import Finding, Kind
from farvolt.solution import Solution
from farvolt.units import Quantity, number

_RATING = "the maker's continuous rating, as the plan states it"
_VOLTS = "the maker's voltage rating, as the plan states it"
_BARS = ("busbar", "fuse block")

Solved = list[tuple[CaseStudy, Currents]]


@check("device.rating", title="What devices, busbars and fuse blocks carry and stand against their ratings")
def device_rating(context: Context) -> Iterator[Finding]:
    """Devices and bars beyond a rating in some case, or behind protection above it; surges of a case do not count."""
    solved = _solved(context)
    array_sides = devices_on_array_sides(context)  # judged by the rules on solar, at currents and voltages of their own
    devices = [(index, one) for index, one in enumerate(context.plan.devices) if one.name not in array_sides]
    upstream, flows, highest = Upstream(context), Flows(context), _Highest(context)
    for index, device in devices:
        yield from _device_amps(context, index, device, solved, upstream)
        yield from _device_volts(context, device, highest)
    for point in context.plan.points:
        if point.rating is not None:
            yield from _point(context, point, point.rating, solved, upstream, flows)
    yield from _unstated(context, [device for _, device in devices])


def _solved(context: Context) -> Solved:
    """Every case without surges, with hot and with cold conductors: either may give the larger current."""
    lasting = [one for one in context.cases if not one.case.surge]
    every = [(one, one.solutions[mode]) for one in lasting for mode in ("hot", "cold")]
    return [(one, Currents(solution)) for one, solution in every if solution.state.solved]


def _device_amps(context: Context, index: int, device: Device, solved: Solved, upstream: Upstream) -> Iterator[Finding]:
    if device.continuous is None:
        return
    rating = device.continuous.si
    found = [(float(abs(currents.devices[:, index]).max()), one, currents.solution) for one, currents in solved]
    worst = max(found, key=lambda each: each[0], default=None)
    if worst is not None and worst[0] > rating * (1 + 1e-9):
        amps, one, solution = worst
        working = f"Conductors {solution.conductors.text}: {apart(amps, rating, 4)} A > {number(rating, 4)} A"
        yield _over(device.name, "device", device.kind, one.name, amps, rating, (working,))
        return
    behind = _protecting(context, device, upstream)
    if behind is not None and (behind.amps(context) or 0.0) > rating * (1 + 1e-9):
        yield _behind_more(context, device.name, "device", device.kind, device.continuous, behind)


def _protecting(context: Context, device: Device, upstream: Upstream) -> Arrival | None:
    """The protection that keeps the current of a device: the nearest before it, on either side; where a source
    reaches it with none, that of the one run it leads on to."""
    found: list[Arrival] = []
    for near, far in ((device.from_point, device.to_point), (device.to_point, device.from_point)):
        for one in upstream.at(near, device):
            leaving = upstream.leaving(far, device)
            if one.amps(context) is not None:
                found.append(one)
            elif len(leaving) == 1 and leaving[0][1] is not None:
                found.append(Arrival(one.source, *leaving[0]))
    return max(found, key=lambda one: one.amps(context) or 0.0, default=None)


def _device_volts(context: Context, device: Device, highest: "_Highest") -> Iterator[Finding]:
    if device.volts is None:
        return
    volts, why = highest.at(device.from_point)
    if volts > device.volts.si * (1 + 1e-9):
        limit = device.volts.si
        yield Finding(
            "device.rating", "fail", device.name, "device", None, volts, limit, "V",
            f'"{device.name}" ({device.kind}) is rated {device.volts}; its part of the plan reaches '
            f"{apart(volts, limit)} V",
            _VOLTS, (f"{why}: {apart(volts, limit, 4)} V > {number(limit, 4)} V",),
            f"a {device.kind} rated for at least {at_least(volts)} V DC",
        )  # fmt: skip


def _point(
    context: Context, point: Point, rating: Quantity, solved: Solved, upstream: Upstream, flows: Flows
) -> Iterator[Finding]:
    found: list[tuple[Flow, CaseStudy]] = [(flows.into(currents, point.name), one) for one, currents in solved]
    worst = max(found, key=lambda each: each[0].amps, default=None)
    limit = rating.si
    if worst is not None and worst[0].amps > limit * (1 + 1e-9):
        flow, one = worst
        compared = f"{apart(flow.amps, limit, 4)} A > {number(limit, 4)} A"
        told = "The whole of it is counted; less passes any one place of the bar where feeds and loads alternate."
        yield _over(point.name, "point", point.kind, one.name, flow.amps, limit, (flow.working, compared, told))
        return
    ways = upstream.at(point.name)
    behind = max((one for one in ways if one.protection), key=lambda one: one.amps(context) or 0.0, default=None)
    if behind is not None and (behind.amps(context) or 0.0) > limit * (1 + 1e-9):
        yield _behind_more(context, point.name, "point", point.kind, rating, behind)


def _over(
    name: str, kind: Kind, what: str, case: str, amps: float, rating: float, working: tuple[str, ...]
) -> Finding:  # fmt: skip
    return Finding(
        "device.rating", "fail", name, kind, case, amps, rating, "A",
        f'"{name}" ({what}) carries {apart(amps, rating)} A; it is rated {number(rating)} A', _RATING, working,
        f"a {what} rated for at least {at_least(amps)} A continuous, or less load through it",
    )  # fmt: skip


def _behind_more(context: Context, name: str, kind: Kind, what: str, rating: Quantity, behind: Arrival) -> Finding:
    amps = behind.amps(context) or 0.0
    if behind.protection is not None:
        run = label(context.plan.runs[behind.run])
        by, less = f"the {behind.protection.rating} on {run}", f"a lower protection on {run}"
    else:
        by, less = f'the {number(amps)} A of "{context.plan.sources[behind.source].name}"', "a smaller source"
    return Finding(
        "device.rating", "warn", name, kind, None, amps, rating.si, "A",
        f'"{name}" ({what}) is rated {rating}, less than {by} that protects it',
        f"{PRACTICE}: what stands behind a protection is rated at least as high, or it may be overloaded unnoticed",
        (f"{apart(amps, rating.si)} A > {number(rating.si)} A",),
        f"a {what} rated for at least {at_least(amps)} A, or {less}",
    )  # fmt: skip


class _Highest:
    """The highest voltage that each part of a plan reaches: in any case with cold conductors, or as a source is set."""

    def __init__(self, context: Context) -> None:
        self._context = context
        self._islands = context.cases[0].solutions["cold"].condition.islands.of_node
        self._found: dict[int, tuple[float, str]] = {}
        for source in context.plan.sources:
            if isinstance(source, Charger | Converter | Solar):
                volts = source.ceiling.si if isinstance(source, Solar) else source.volts.si
                self._take(source.at, volts, f'"{source.name}" is set to it')
        names = context.plan.point_names
        for one in context.cases:
            solution = one.solutions["cold"]
            for name, volts in zip(names, self._volts(solution, names), strict=True) if solution.state.solved else ():
                self._take(name, float(volts), f'At "{name}" in the case "{one.name}", cold conductors')

    def _volts(self, solution: Solution, names: tuple[str, ...]) -> Floats:
        network, volts = self._context.network, solution.state.volts
        feed = np.array([network.feed(name) for name in names], dtype=np.int64)
        back = np.array([network.ret(name) for name in names], dtype=np.int64)
        joined = solution.supply.group[feed] == solution.supply.group[back]
        found: Floats = np.where(joined, np.nan_to_num(volts[feed] - volts[back]), 0.0)
        return found

    def _take(self, point: str, volts: float, why: str) -> None:
        island = int(self._islands[self._context.network.feed(point)])
        # What a case adds by the way of a rounding error is no higher voltage.
        if volts > self._found.get(island, (0.0, ""))[0] * (1 + 1e-9):
            self._found[island] = (volts, why)

    def at(self, point: str) -> tuple[float, str]:
        """The highest voltage in V at a point's part of the plan, and what sets it; 0 where nothing feeds it."""
        return self._found.get(int(self._islands[self._context.network.feed(point)]), (0.0, ""))


def _unstated(context: Context, devices: list[Device]) -> Iterator[Finding]:
    """One note that lists what states no rating."""
    amps = [device.name for device in devices if device.continuous is None]
    volts = [device.name for device in devices if device.volts is None]
    bars = [point.name for point in context.plan.points if point.kind in _BARS and point.rating is None]
    if not amps and not volts and not bars:
        return
    lines = (("No continuous", amps), ("No volts", volts), ("No rating", bars))
    working = tuple(f"{what}: {', '.join(map(_quoted, names))}" for what, names in lines if names)
    yield Finding(
        "device.rating", "note", context.plan.plan.name, "plan", None, None, None, None,
        f"Not checked: the current of {len(amps)} and the voltage of {len(volts)} devices, and the current of "
        f"{len(bars)} busbars and fuse blocks, which state no rating",
        _RATING, working, "state continuous and volts of each device, and the rating of each bar, from its data sheet",
    )  # fmt: skip


def _quoted(name: str) -> str:
    return f'"{name}"'
