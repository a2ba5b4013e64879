"""The protection that stands before a point, a device or a load: what is nearest on every way that feeds it."""

from collections.abc import Iterator
from dataclasses import dataclass

from farvolt.checks.ways import limited_A
from farvolt.context import Context
from farvolt.plan import Device, Protection, Run


@dataclass(frozen=True, slots=True)
class Arrival:
    """One way that a source feeds a point: behind which protection, and how much that lets through for long."""

    source: int
    run: int
    """The run that the protection is on, or -1 where there is none."""
    protection: Protection | None

    def amps(self, context: Context) -> float | None:
        """The lesser of the protection's rating and the source's own limit in A; None where neither limits it."""
        limits = [limited_A(context, self.source), self.protection.rating.si if self.protection else None]
        return min((one for one in limits if one is not None), default=None)


class Upstream:
    """Looks up what arrives at the points of a plan, through the feed conductors, with every device closed."""

    def __init__(self, context: Context) -> None:
        self._context = context
        network = context.network
        self._runs: dict[int, list[tuple[int, str]]] = {}
        self._devices: dict[int, list[tuple[Device, int]]] = {}
        self._sources: dict[int, list[int]] = {}
        for index, run in enumerate(context.plan.runs):
            if run.conducts in ("both", "feed"):
                self._runs.setdefault(network.feed(run.from_point), []).append((index, "from"))
                self._runs.setdefault(network.feed(run.to_point), []).append((index, "to"))
        for device in context.plan.devices:
            a, b = network.feed(device.from_point), network.feed(device.to_point)
            if a != b:
                self._devices.setdefault(a, []).append((device, b))
                self._devices.setdefault(b, []).append((device, a))
        for port, source in enumerate(context.plan.sources):
            self._sources.setdefault(network.feed(source.at), []).append(port)

    def at(self, point: str, without: Device | None = None) -> list[Arrival]:
        """What feeds a point, not counting what comes through one device."""
        start = self._context.network.feed(point)
        passed, nodes, found = {without.name} if without is not None else set[str](), [start], dict[Arrival, None]()
        for node in nodes:  # grows while devices lead on to other nodes
            found |= dict.fromkeys(self._arrivals(node))
            for device, other in self._devices.get(node, ()):
                if device.name not in passed:
                    passed.add(device.name)
                    nodes.append(other)
        return list(found)

    def leaving(self, point: str, without: Device) -> list[tuple[int, Protection | None]]:
        """The runs at a point, and their protection there; a run is -1 where a device leaves it too."""
        node = self._context.network.feed(point)
        runs = [(index, _lowest(self._context.plan.runs[index], end)) for index, end in self._runs.get(node, ())]
        return runs + [(-1, None) for device, _ in self._devices.get(node, ()) if device is not without]

    def _arrivals(self, node: int) -> Iterator[Arrival]:
        """What a node's own sources and runs bring to it."""
        for port in self._sources.get(node, ()):
            yield Arrival(port, -1, None)
        for index, end in self._runs.get(node, ()):
            here = _lowest(self._context.plan.runs[index], end)
            for way in self._context.sections.by_run.get(index, ()):
                if way.end == end:
                    continue
                if here is not None:
                    yield Arrival(way.source, index, here)
                elif way.guard is not None:
                    yield Arrival(way.source, way.guard.run, way.guard.protection)
                else:
                    yield Arrival(way.source, -1, None)


def _lowest(run: Run, end: str) -> Protection | None:
    """The lowest-rated protection in the feed at one end of a run."""
    there = [one for one in run.protections if one.end == end and one.pole == "feed"]
    return min(there, key=lambda one: one.rating.si, default=None)
