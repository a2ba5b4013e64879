"""Loops that have no good answer: converters that feed each other in a ring, and rings without resistance."""

from collections import deque
from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np

from farvolt.checks.joined import listed
from farvolt.checks.registry import check
from farvolt.checks.rings import ring_numbers
from farvolt.context import CaseStudy, Context
from farvolt.network import FEED, LEAST_OHM, Network
from farvolt.operating import components
from farvolt.results import Finding

_FROM_A_SOURCE = "common practice: a converter draws from a source, not from what it feeds"
_OHM = "Ohm's law: the parts of a ring share by their resistances"


@dataclass(slots=True)
class _Ring:
    """Converters of which each feeds the next, and the last the first."""

    names: list[str]
    case: str
    fed: bool = False
    """In some case a source outside the ring starts it."""


@check("plan.converter-loop", title="Converters that feed each other in a ring")
def converter_loop(context: Context) -> Iterator[Finding]:
    """Rings of converters that are on: without a source nothing starts them, with one power goes round and is lost."""
    rings: dict[frozenset[str], _Ring] = {}
    for one in context.cases:
        supply = one.solutions["plan"].supply
        for start, names in _rings(context.network, one):
            ring = rings.setdefault(frozenset(names), _Ring(names, one.name))
            ring.fed |= bool(supply.source_on[start])
    for ring in rings.values():
        yield _loop(ring)


def _loop(ring: _Ring) -> Finding:
    first, way = ring.names[0], " feeds ".join(f'"{name}"' for name in (*ring.names, ring.names[0]))
    alone = len(ring.names) == 1
    told = f'"{first}" draws from what it feeds itself' if alone else f"A ring of converters: {way}"
    lost = "power goes round and is lost" if alone else "with all of them on, power goes round and is lost"
    ends = lost if ring.fed else "no source starts it, so it is dead"
    return Finding(
        "plan.converter-loop", "warn" if ring.fed else "fail", first, "source", ring.case, None, None, None,
        f"{told}; {ends}", _FROM_A_SOURCE, (way,),
        "one of them off wherever another is on, or its input at a source"
        if ring.fed and not alone
        else f'take the input of "{first}" from a source, on the far side of what it feeds',
    )  # fmt: skip


@dataclass(slots=True)
class _Leads:
    """What leads from one part of the feeds to another, in one direction: converters that are on, and diodes."""

    out: dict[int, list[tuple[str, int, bool]]] = field(default_factory=dict)
    """Part to (name, part fed, whether it is a converter)."""

    def round(self, start: int, end: int) -> list[str] | None:
        """The converters on the shortest way from one part to another; None without any."""
        came: dict[int, tuple[str, int, bool]] = {}
        waiting = deque([start])
        while waiting and end not in came and start != end:
            part = waiting.popleft()
            for name, other, converts in self.out.get(part, ()):
                if other != start and other not in came:
                    came[other] = (name, part, converts)
                    waiting.append(other)
        names, part = list[str](), end
        while part != start:
            if part not in came:
                return None
            name, part, converts = came[part]
            names += [name] if converts else []
        return names[::-1]


def _rings(network: Network, one: CaseStudy) -> Iterator[tuple[int, list[str]]]:
    """Every converter whose output leads to its own input: (its port, the ring from it on)."""
    condition = one.solutions["plan"].condition
    if not condition.converters:
        return
    on = condition.branch_on & (network.pole == FEED)
    part = components(network.node_count, network.a[on], network.b[on])
    leads, sources = _Leads(), network.plan.sources
    working = [(port, int(part[condition.load_a[load]]), int(part[condition.source_a[port]]))
               for port, load, _, _ in condition.converters if condition.source_on[port]]  # fmt: skip
    for port, into, out in working:
        leads.out.setdefault(into, []).append((sources[port].name, out, True))
    for index, a, b in network.diodes:
        if network.plan.devices[index].pole != "return":
            leads.out.setdefault(int(part[a]), []).append(("", int(part[b]), False))
    for port, into, out in working:
        beyond = leads.round(out, into)
        if beyond is not None:
            yield port, [sources[port].name, *beyond]


@check("plan.zero-ohm-ring", title="Rings of devices and bars that are said to have no resistance")
def zero_ohm_ring(context: Context) -> Iterator[Finding]:
    """Rings in which nothing has any resistance: how their parts share the current is not determined."""
    network = context.network
    none = np.flatnonzero(network.fixed_ohm + network.cable_ohm_20 <= LEAST_OHM * (1 + 1e-9))
    edges = list(zip(network.a[none].tolist(), network.b[none].tolist(), strict=True))
    meshes: dict[int, dict[str, None]] = {}
    for branch, mesh in zip(none.tolist(), ring_numbers(edges), strict=True):
        if mesh >= 0 and network.device[branch] >= 0:
            meshes.setdefault(mesh, {})[context.plan.devices[network.device[branch]].name] = None
    for names in dict.fromkeys(tuple(mesh) for mesh in meshes.values()):
        yield Finding(
            "plan.zero-ohm-ring", "warn", names[0], "device", None, 0.0, None, "ohm",
            f"{listed(list(names))} lie in a ring without resistance: how they share the current is not determined, "
            "and their currents are not shown to be right",
            _OHM, ("0 ohm round the ring: any current through it satisfies Ohm's law",),
            "state their resistances from a data sheet, or take one of them out of the plan",
        )  # fmt: skip
