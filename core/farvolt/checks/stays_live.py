"""What a switch, selector or relay leaves live when it opens: a graph search, with every source taken as on.

Runs and the devices that do not open join points into parts; only what opens, diodes and converters stand between
the parts, and they are few.
"""

from collections import deque
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field

import numpy as np

from farvolt.checks.joined import listed, names_between
from farvolt.checks.registry import check
from farvolt.checks.rings import edges_at
from farvolt.context import Context
from farvolt.network import FEED, RETURN, Network
from farvolt.operating import components
from farvolt.plan import Battery, Converter, Solar
from farvolt.results import Finding, Kind, Severity

OPENS = ("switch", "selector", "relay")
"""Kinds of device that a person or a control opens."""

_LOOKS = 20
"""Ways round a device that one check looks up, since each look reads every conductor."""

_PRACTICE = "common practice: whoever opens a switch takes what lies beyond it for dead"


@dataclass(slots=True)
class _Parts:
    """The feeds of a plan in parts, with every device as the plan states it."""

    network: Network
    switches: dict[int, tuple[int, int]]
    """Closed device to the parts at its `from` and `to`."""
    one_way: list[tuple[int, int]]
    """(part, part that it feeds) by a diode, a converter or a solar controller."""
    sources: dict[int, list[int]]
    """Part to the sources that stand in it, by place in the plan."""
    loads: dict[int, list[int]]
    """Part to the loads that stand in it, likewise."""
    near: dict[int, list[tuple[int, int]]] = field(default_factory=dict)
    """Part to (device, part at its other side)."""

    def reach(self, start: Iterable[int], without: frozenset[int] | None, *, against: bool = False) -> set[int]:
        """Parts that current reaches from some; `against` it, the parts it comes from. `without` some devices, or
        without any of them (None)."""
        leads: dict[int, list[int]] = {}
        for a, b in self.one_way:
            leads.setdefault(b if against else a, []).append(a if against else b)
        found, waiting = set(start), deque(start)
        while waiting:
            part = waiting.popleft()
            beyond = leads.get(part, [])
            if without is not None:
                beyond = beyond + [other for device, other in self.near.get(part, ()) if device not in without]
            for other in beyond:
                if other not in found:
                    found.add(other)
                    waiting.append(other)
        return found

    def sources_in(self, parts: set[int]) -> list[int]:
        """The sources that stand in some parts, in the order of the plan."""
        return sorted({port for part in parts for port in self.sources.get(part, ())})

    def loads_in(self, parts: set[int]) -> list[str]:
        """The loads that stand in some parts, in the order of the plan."""
        places = sorted(place for part in parts for place in self.loads.get(part, ()))
        return [self.network.plan.loads[place].name for place in places]


def _parts(network: Network) -> _Parts:
    plan = network.plan
    opens = np.array([device.kind in OPENS for device in plan.devices] + [False])
    joins = (network.pole == FEED) & ~opens[network.device]
    of_node = components(network.node_count, network.a[joins], network.b[joins])

    def part(name: str) -> int:
        return int(of_node[network.feed(name)])

    switches = {
        index: (part(device.from_point), part(device.to_point))
        for index, device in enumerate(plan.devices)
        if device.kind in OPENS and device.pole != "return" and device.state == "closed"
    }
    one_way = [
        (int(of_node[a]), int(of_node[b])) for index, a, b in network.diodes if plan.devices[index].pole != "return"
    ]
    sources: dict[int, list[int]] = {}
    for port, source in enumerate(plan.sources):
        seat = source.at
        if isinstance(source, Converter):
            one_way.append((part(source.from_point), part(source.at)))
            continue
        if isinstance(source, Solar) and source.array is not None:
            one_way.append((part(source.input_point), part(source.at)))
            seat = source.array.at
        sources.setdefault(part(seat), []).append(port)
    loads: dict[int, list[int]] = {}
    for place, load in enumerate(plan.loads):
        loads.setdefault(part(load.at), []).append(place)
    found = _Parts(network, switches, one_way, sources, loads)
    devices = list(switches)
    found.near = {
        node: [(devices[place], other) for place, other in steps]
        for node, steps in edges_at(list(switches.values())).items()
    }
    return found


def _between_sources(parts: _Parts) -> list[int]:
    """The devices that do not merely end in something without a source: opening one of those cuts off all of it."""
    kept = {part for pair in parts.one_way for part in pair} | set(parts.sources)
    left = {part: set(steps) for part, steps in parts.near.items()}
    waiting = deque(part for part, steps in left.items() if len(steps) == 1 and part not in kept)
    gone: set[int] = set()
    while waiting:
        part = waiting.popleft()
        for device, other in left[part]:
            gone.add(device)
            left[other].discard((device, part))
            if len(left[other]) == 1 and other not in kept:
                waiting.append(other)
        left[part] = set()
    return [device for device in parts.switches if device not in gone]


@check("plan.stays-live", title="What stays live when a switch, selector or relay opens")
def stays_live(context: Context) -> Iterator[Finding]:
    """Each device that opens with a source on both its sides, or with another way round it. Once for each device."""
    parts, looks = _parts(context.network), iter(range(_LOOKS))
    for index in _between_sources(parts):
        device, (start, end) = context.plan.devices[index], parts.switches[index]
        alone = frozenset((index,))
        before, beyond = parts.reach([start], alone, against=True), parts.reach([end], alone, against=True)
        fed = (parts.sources_in(before), parts.sources_in(beyond))
        if end in before and start in beyond:
            if fed[0]:
                named = next(looks, None) is not None
                yield _led_round(
                    context.network, index, FEED, _way_round(context.network, index, FEED) if named else []
                )
        elif fed[0] and fed[1]:
            # A diode or converter round the device feeds on one side what stands on the other.
            far = 1 if start in beyond else 0 if end in before else _far_side(context, fed)
            yield _live_beyond(context, parts, index, far, fed)
    for index, device in enumerate(context.plan.devices):
        if device.kind in OPENS and device.pole == "return" and device.state == "closed":
            yield _in_the_return(context, index)


def _live_beyond(context: Context, parts: _Parts, index: int, far: int, fed: tuple[list[int], list[int]]) -> Finding:
    plan, device = context.plan, context.plan.devices[index]
    points = (device.from_point, device.to_point)
    names = [[plan.sources[port].name for port in ports] for ports in fed]
    loads = parts.loads_in(parts.reach([parts.switches[index][far]], frozenset((index,))))
    count = f" with {len(loads)} {'loads' if len(loads) > 1 else 'load'}" if loads else ""
    still = f'what lies beyond it at "{points[far]}"{count} stays live from {listed(names[far])}'
    return _finding(
        "note", device.name, "device",
        f'With "{device.name}" open, {still}',
        tuple(f'at "{point}": {listed(side)}' for point, side in zip(points, names, strict=True)),
        f'switch off or cut off {listed(names[far])} as well before work there; a mark at "{device.name}" that says so',
    )  # fmt: skip


def _far_side(context: Context, fed: tuple[list[int], list[int]]) -> int:
    """Which side of a device lies beyond it: the one without the reference source, or else without a battery."""
    sources, reference = context.plan.sources, context.plan.reference
    rank = [
        min((sources[port].name != reference, not isinstance(sources[port], Battery)) for port in ports)
        for ports in fed
    ]
    return 1 if rank[0] <= rank[1] else 0


def _led_round(network: Network, index: int, pole: int, way: list[str]) -> Finding:
    device = network.plan.devices[index]
    by = f" by {listed(way)}" if way else ""
    word = "feed" if pole == FEED else "return"
    return _finding(
        "warn", device.name, "device",
        f'Opening "{device.name}" cuts off nothing: the {word} leads round it{by}',
        (f'"{device.from_point}" and "{device.to_point}" stay joined without "{device.name}"{by}',),
        f'another device that opens together with "{device.name}" on that way, or no such way',
    )  # fmt: skip


def _in_the_return(context: Context, index: int) -> Finding:
    network, device = context.network, context.plan.devices[index]
    way = _way_round(network, index, RETURN)
    if way:
        return _led_round(network, index, RETURN, way)
    return _finding(
        "note", device.name, "device",
        f'"{device.name}" opens the return alone: with it open, the feed beyond stays live',
        (f'pole = "return": the feeds of "{device.from_point}" and "{device.to_point}" stay joined',),
        "a switch in the feed, or in both poles, where dead means dead",
    )  # fmt: skip


def _way_round(network: Network, index: int, pole: int) -> list[str]:
    """What leads from one end of a device to the other without it, in one pole: names, the fewest first."""
    device = network.plan.devices[index]
    start, end = network.nodes[device.from_point, pole], network.nodes[device.to_point, pole]
    if start == end:
        return _passing(network, pole, start)
    return names_between(network, start, end, pole, without=index)


def _passing(network: Network, pole: int, node: int) -> list[str]:
    """The devices in the other pole that a node passes straight through."""
    other = "return" if pole == FEED else "feed"
    devices = [device for device in network.plan.devices if device.pole == other]
    return [device.name for device in devices if network.nodes[device.from_point, pole] == node]


@check("plan.stays-live", title="Loads that no switch, selector or relay cuts off")
def always_live(context: Context) -> Iterator[Finding]:
    """The loads that a battery feeds with everything open that opens, where other loads are cut off. Said once."""
    parts = _parts(context.network)
    sources = context.plan.sources
    batteries = [
        part for part, ports in parts.sources.items() if any(isinstance(sources[one], Battery) for one in ports)
    ]
    live = parts.loads_in(parts.reach(batteries, None))
    if parts.switches and 0 < len(live) < len(context.plan.loads):
        yield _finding(
            "note", context.plan.plan.name, "plan",
            f"With every switch, selector and relay open, these stay live: {listed(live)}",
            (f"{len(live)} of {len(context.plan.loads)} loads have a way from a battery that nothing opens",),
            "as meant for an alarm or an automatic pump; else feed it from behind the switch",
        )  # fmt: skip


def _finding(
    severity: Severity, subject: str, kind: Kind, message: str, working: tuple[str, ...], remedy: str
) -> Finding:
    return Finding(
        "plan.stays-live", severity, subject, kind, None, None, None, None, message, _PRACTICE, working, remedy
    )
