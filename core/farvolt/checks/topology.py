"""How the plan hangs together: what is not fed, what has no return, what looks like a slip of the pen."""

import difflib
from collections.abc import Iterator

import numpy as np

from farvolt.checks.joined import listed
from farvolt.checks.registry import check
from farvolt.context import CaseStudy, Context, label
from farvolt.network import FEED, RETURN
from farvolt.operating import device_closed
from farvolt.plan import CHASSIS, Converter, Run, Solar
from farvolt.results import Finding, Kind, Severity

_BASIS = "common practice: every load has a way from a source and a way back"
_SLIP = "common practice: a name used once is often a slip of the pen"
_LOOKS = 20
"""Nearest names looked up for one check."""


def _finding(
    rule: str, severity: Severity, subject: str, kind: Kind, message: str, basis: str, remedy: str | None = None,
    case: str | None = None, working: tuple[str, ...] = (),
) -> Finding:  # fmt: skip
    return Finding(rule, severity, subject, kind, case, None, None, None, message, basis, working, remedy)


@check("plan.unfed", "plan.no-return", title="Loads without a source, and loads without a way back")
def unfed(context: Context) -> Iterator[Finding]:
    """Each load that is on in a case and not fed there, or whose return does not lead back; said in its first case."""
    reached = {name for ends in context.plan.joins for name in ends} | {source.at for source in context.plan.sources}
    near = _Near(context)
    told: set[tuple[str, str]] = set()
    for one in context.cases:
        supply, condition = one.solutions["plan"].supply, one.solutions["plan"].condition
        stops = _stops(context, one)
        for index, load in enumerate(context.plan.loads):
            if supply.load_on[index] or one.case.share(load.name) == 0:
                continue
            fed = bool(supply.live[condition.load_a[index]])
            rule = "plan.no-return" if fed else "plan.unfed"
            if (rule, load.name) in told:
                continue
            told.add((rule, load.name))
            if fed:
                why = stops.get((int(supply.group[condition.load_b[index]]), RETURN), "")
                message = (
                    f'"{load.name}" at "{load.at}" is fed but its return leads back to no source that feeds it{why}'
                )
                remedy = 'a run that carries the return, or return = "chassis" with the source bonded to it'
            else:
                nothing = f"no run reaches that point{near.to(load.at)}" if load.at not in reached else ""
                why = stops.get((int(supply.group[condition.load_a[index]]), FEED), "")
                why = nothing or f"no closed way leads there from a source that is on{why}"
                message = f'"{load.name}" at "{load.at}" is not fed: {why}'
                remedy = f'a run to "{load.at}" that carries the feed, or a closed switch, or a working source'
            yield _finding(rule, "fail", load.name, "load", message, _BASIS, remedy, one.name)


def _stops(context: Context, one: CaseStudy) -> dict[tuple[int, int], str]:
    """By galvanic part and pole: what in a case stops current on its way into that part, in words."""
    network, plan = context.network, context.plan
    supply, condition = one.solutions["plan"].supply, one.solutions["plan"].condition
    found: dict[tuple[int, int], list[str]] = {}

    def stop(node: int, pole: int, why: str) -> None:
        found.setdefault((int(supply.group[node]), pole), []).append(why)

    for index, device in enumerate(plan.devices):
        if device.kind != "diode" and not device_closed(plan, index, one.case):
            for pole in [FEED] * (device.pole != "return") + [RETURN] * (device.pole != "feed"):
                for point in (device.from_point, device.to_point):
                    stop(network.nodes[point, pole], pole, f'"{device.name}" is open')
    for index, start, end in network.diodes:
        device = plan.devices[index]
        if supply.group[start] != supply.group[end]:
            inner, pole = (end, RETURN) if device.pole == "return" else (start, FEED)
            stop(inner, pole, f'the diode "{device.name}" lies the other way round')
    for port, source in enumerate(plan.sources):
        if not one.solutions["plan"].working(port):
            why = "is off" if not condition.source_on[port] else "is itself not fed"
            stop(network.feed(source.at), FEED, f'"{source.name}" {why}')
    return {part: f": {', '.join(reasons[:4])}" for part, reasons in found.items()}


@check("plan.unfed", title="Parts of the plan that nothing feeds in any case")
def unfed_parts(context: Context) -> Iterator[Finding]:
    """Feed conductors that no source reaches in any case: nothing of them is checked. Said once for each part."""
    solutions = [one.solutions["plan"] for one in context.cases]
    live = np.any([one.supply.live for one in solutions], axis=0)
    parts: dict[int, list[str]] = {}
    islands = solutions[0].condition.islands.of_node
    fed_points = {
        name for run in context.plan.runs if run.conducts != "return" for name in (run.from_point, run.to_point)
    }
    for name in context.plan.point_names:
        node = context.network.feed(name)
        if name in fed_points and not live[node]:
            parts.setdefault(int(islands[node]), []).append(name)
    told = {load.at for load in context.plan.loads if any(one.case.share(load.name) > 0 for one in context.cases)}
    for names in parts.values():
        if told.isdisjoint(names):
            yield _unfed_part(names)


def _unfed_part(names: list[str]) -> Finding:
    return _finding(
        "plan.unfed", "warn", names[0], "point",
        f"No source feeds {listed(names)} in any case: the cables there are not checked", _BASIS,
        "a run from a source, a case with the switch closed or the source on, or delete what is not meant",
    )  # fmt: skip


class _Near:
    """Offers the point whose name is nearest; a limited number of times, since each look reads every name."""

    def __init__(self, context: Context) -> None:
        self._names, self._looks = context.plan.point_names, _LOOKS

    def to(self, point: str) -> str:
        self._looks -= 1
        if self._looks < 0:
            return ""
        others = [name for name in self._names if name != point]
        close = difflib.get_close_matches(point, others, n=1, cutoff=0.6)
        return f'; did you mean "{close[0]}"?' if close else ""


@check("plan.two-runs", title="Two runs between the same points")
def two_runs(context: Context) -> Iterator[Finding]:
    """Runs that join the same two points in the same pole: meant as parallel cables, or entered twice?"""
    seen: dict[tuple[frozenset[str], int], Run] = {}
    for run in context.plan.runs:
        ends = frozenset((run.from_point, run.to_point))
        poles = {"both": (FEED, RETURN), "feed": (FEED,), "return": (RETURN,)}[run.conducts]
        first = next((seen[ends, pole] for pole in poles if (ends, pole) in seen), None)
        for pole in poles:
            seen.setdefault((ends, pole), run)
        if first is not None:
            yield _finding(
                "plan.two-runs", "warn", run.name, "run",
                f"{label(run)} joins the same points as {label(first)}: they share the current as parallel cables",
                "common practice: parallel cables are equal, and each is protected",
                "delete one if it was entered twice; for equal cables in parallel write parallel = 2 on one run",
            )  # fmt: skip


@check("plan.lonely-point", title="Points that are named only once")
def lonely_point(context: Context) -> Iterator[Finding]:
    """Points at which a single run or device ends and nothing stands: a slip in the name?"""
    uses: dict[str, int] = {}
    for ends in context.plan.joins:
        for name in ends:
            uses[name] = uses.get(name, 0) + 1
    listed = {point.name for point in context.plan.points}
    for source in context.plan.sources:
        inlet = source.from_point if isinstance(source, Converter | Solar) else None
        for name in (source.at, *((inlet,) if inlet is not None else ())):
            uses[name] = uses.get(name, 0) + 1
        array = getattr(source, "array", None)
        if array is not None:
            uses[array.at] = uses.get(array.at, 0) + 1
    for load in context.plan.loads:
        uses[load.at] = uses.get(load.at, 0) + 1
    near = _Near(context)
    for name, count in uses.items():
        if count == 1 and name != CHASSIS and name not in listed:
            message = f'"{name}" is named only once{near.to(name)}'
            yield _finding(
                "plan.lonely-point", "warn", name, "point", message, _SLIP,
                "correct the name, or list the point under [[points]] if it is meant to end there",
            )  # fmt: skip


@check("plan.free-size", title="Runs whose size is still to be chosen")
def free_size(context: Context) -> Iterator[Finding]:
    """Runs without a size, and the interim size that everything else was solved with."""
    for run in context.plan.runs:
        size = context.interim.get(run.name)
        if size is not None:
            yield _finding(
                "plan.free-size", "warn", run.name, "run",
                f"{label(run)} has no size yet; {size.name} is taken for now",
                "common practice: each cable alone, at its share of the allowed drop by length, and its ampacity",
                f'size = "{size.name}", or any other that you choose',
            )  # fmt: skip
