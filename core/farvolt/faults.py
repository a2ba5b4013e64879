"""Prospective fault currents: what a bolted short between feed and return draws, from the whole network.

The highest is what a protective device has to interrupt: all sources on, batteries new, full and warm, conductors
cold. The device itself counts as a link of negligible impedance, which is how IEC 60050-441-17-01 defines prospective
current; so does any contact, joint or protection whose resistance the plan does not state. The lowest is what has to
open a device in time: one source alone, an aged battery, cold and at low charge, conductors hot, contacts as stated
or typical. An arc or a loose joint draws less than a bolted short.
"""

from collections.abc import Callable, Hashable, Iterator
from dataclasses import dataclass, field
from functools import cached_property, partial
from typing import TypeVar

import numpy as np

from farvolt import fault_working
from farvolt.fault_network import TRACE_A, FaultNetwork, coldest, hottest
from farvolt.network import FEED, RETURN, Network
from farvolt.operating import islands
from farvolt.plan import CHASSIS, Battery
from farvolt.rulebook import Rulebook
from farvolt.sections import Sections, Stretch, sections, stretches
from farvolt.shorts import Place, Shorted

_Key = TypeVar("_Key")

_KEPT = 1000
"""Node voltages that are kept with a short to tell how it comes about."""


@dataclass(frozen=True, slots=True)
class Fault:
    """A bolted short at a place. Currents in ampere."""

    place: str
    amps: float
    """Through the device in question, or in the short itself where it is a point that is asked for."""
    by_source: tuple[tuple[str, float], ...]
    """What each source delivers into the network during the fault, negative where it takes current."""
    estimated: bool
    """Some of it comes from a battery whose resistance is an estimate."""
    limited: bool
    """All of it comes from sources at their own limit: no more ever flows, and a device may not open."""
    certified: bool
    """Kirchhoff's current law was found to hold at every node."""
    imbalance_A: float
    told: Callable[[], tuple[str, ...]] = field(repr=False, compare=False)
    """Works out `working`: few faults are ever told of."""

    @property
    def working(self) -> tuple[str, ...]:
        """How the current comes about, in lines that a person can redo."""
        return self.told()


@dataclass(frozen=True, slots=True)
class FarEnd:
    """The least fault current at the far end of a stretch that a protection guards against a source."""

    stretch: Stretch
    fault: Fault
    """`amps` is the current through the protection."""
    run_A: float
    """Current in the feed conductor of the stretch itself, where it is fed; through the protection for a device."""
    returns: tuple[tuple[int, float], ...] = ()
    """Runs with a return conductor only by which it comes back: (index of the run, current)."""


class Faults:
    """The fault currents of a plan, each worked out when it is first asked for."""

    def __init__(self, network: Network, rulebook: Rulebook, found: Sections | None = None) -> None:
        self._network, self._rulebook, self._sections = network, rulebook, found
        self._islands = islands(network)

    @cached_property
    def points(self) -> dict[str, Fault]:
        """The highest fault current at each point that is fed, between its feed and its return."""
        names = self._network.plan.point_names
        best: dict[str, Fault] = {}
        for net in self._highest:
            for name, found in zip(names, net.circuit.shorted([net.point(name) for name in names]), strict=True):
                _keep_larger(best, name, net, found, abs(found.amps), f'at "{name}"')
        return best

    @cached_property
    def devices(self) -> dict[tuple[int, int], Fault]:
        """The highest current that each protection may have to interrupt, by (run, place among its protections).

        The short is at the device, on either side of it: a device has to interrupt what comes from the other one. Or
        it is at a point, where that drives more through it: as where the way back from there is a better one.
        """
        best: dict[tuple[int, int], Fault] = {}
        for net in self._highest:
            shorts = list(self._at_devices(net))
            for (key, pole, _), found in zip(shorts, net.circuit.shorted([one[2] for one in shorts]), strict=True):
                near, _ = found.parts_A(found.place.feed if pole == FEED else found.place.back)
                words = fault_working.at_device(self._network.plan.runs[key[0]], key[1])
                _keep_larger(best, key, net, found, abs(near), words)
            self._at_points(net, best)
        return best

    def _at_points(self, net: FaultNetwork, best: dict[tuple[int, int], Fault]) -> None:
        """Put in the shorts at points that drive more through a device than one beside it."""
        names, guards = self._network.plan.point_names, net.guarded
        branches = np.array([branch for _, branch in guards], dtype=np.int64)
        most, where = np.array([best[key].amps if key in best else 0.0 for key, _ in guards]), np.full(len(guards), -1)
        if not guards:
            return
        for place, currents in enumerate(net.circuit.through([net.point(name) for name in names], branches)):
            amps = np.abs(currents)
            higher = amps > most * (1 + 1e-9)
            most, where = np.where(higher, amps, most), np.where(higher, place, where)
        places = sorted(set(where[where >= 0].tolist()))
        for place, found in zip(places, net.circuit.shorted([net.point(names[one]) for one in places]), strict=True):
            for number in np.flatnonzero(where == place):
                _keep_larger(best, guards[number][0], net, found, float(most[number]), f'at "{names[place]}"')

    def _at_devices(self, net: FaultNetwork) -> Iterator[tuple[tuple[int, int], int, Place]]:
        """Every protection and its pole, with each of the shorts that may be the worst for it: what comes from the
        near side of the place counts. Its own resistance lies beyond."""
        for index, run in enumerate(self._network.plan.runs):
            for number, one in enumerate(run.protections):
                along = one.distance.si if one.distance else 0.0
                other_end = "to" if one.end == "from" else "from"
                pole, opposite = (FEED, RETURN) if one.pole == "feed" else (RETURN, FEED)
                against = net.opposite(index, opposite, one.end, along)
                for end, metres in ((one.end, along), (other_end, run.length.si - along)):
                    spot = net.spot(index, pole, end, metres, one.resistance.si if one.resistance else 0.0)
                    if spot is None or net.ends_at(spot):
                        continue
                    for back in against:
                        yield (index, number), pole, Place(spot, back) if pole == FEED else Place(back, spot)

    @cached_property
    def far_ends(self) -> tuple[FarEnd, ...]:
        """The lowest fault current at the far end of every stretch, against each source that counts.

        These are the batteries behind a protection, one at a time; sources that limit themselves only where there
        is none. The switches are as the cases have them, and all closed.
        """
        wanted = self._guarded
        least: dict[int, FarEnd] = {}
        for source in dict.fromkeys(one.source for one in wanted):
            mine = [place for place, one in enumerate(wanted) if one.source == source]
            for net in hottest(self._network, self._islands, self._rulebook, source):
                for place, far in _far_ends(net, {place: wanted[place] for place in mine}):
                    if place not in least or far.fault.amps < least[place].fault.amps:
                        least[place] = far
        return tuple(least[place] for place in sorted(least))

    @cached_property
    def lowest(self) -> dict[tuple[int, str], FarEnd]:
        """The far end that gives each protection the least current, by (run, end at which it sits)."""
        least: dict[tuple[int, str], FarEnd] = {}
        for far in self.far_ends:
            key = _seat(far.stretch)
            if key not in least or far.fault.amps < least[key].fault.amps:
                least[key] = far
        return least

    @property
    def _guarded(self) -> list[Stretch]:
        plan = self._network.plan
        every = stretches(plan, self._sections if self._sections is not None else sections(self._network))
        strong = {_seat(one) for one in every if isinstance(plan.sources[one.source], Battery)}
        return [one for one in every if isinstance(plan.sources[one.source], Battery) or _seat(one) not in strong]

    @cached_property
    def _highest(self) -> list[FaultNetwork]:
        return coldest(self._network, self._islands)


def _seat(stretch: Stretch) -> tuple[int, str]:
    return stretch.guard.run, stretch.guard.protection.end


def _far_ends(net: FaultNetwork, wanted: dict[int, Stretch]) -> Iterator[tuple[int, FarEnd]]:
    """The far ends of some stretches in one setting, those left out to which no current comes."""
    shorts: dict[Hashable, tuple[Place, str]] = {}
    groups: dict[Hashable, list[int]] = {}
    for number, stretch in wanted.items():
        found = _far_place(net, stretch)
        if found is not None:
            shorts.setdefault(found[0], found[1:])
            groups.setdefault(found[0], []).append(number)
    for key, short in zip(shorts, net.circuit.shorted([place for place, _ in shorts.values()]), strict=True):
        returns = net.returns_A(short)
        faults: dict[float, Fault] = {}  # most protections on the way to a short carry all of it
        for number in groups[key]:
            stretch = wanted[number]
            amps = net.feed_A(short, *_seat(stretch))
            if amps >= TRACE_A:
                if amps not in faults:
                    faults[amps] = _fault(net, short, amps, shorts[key][1])
                in_run = net.feed_A(short, stretch.run, stretch.end) if stretch.run >= 0 else amps
                yield number, FarEnd(stretch, faults[amps], in_run, returns)


def _far_place(net: FaultNetwork, stretch: Stretch) -> tuple[Hashable, Place, str] | None:
    """The short at the far end of a stretch, what tells it from others, and its name."""
    plan = net.network.plan
    if stretch.run < 0:
        passed = plan.devices[stretch.device]
        name = passed.to_point if stretch.end == "from" else passed.from_point
        return name, net.point(name), f'at "{name}"'
    run = plan.runs[stretch.run]
    if stretch.until_m >= run.length.si * (1 - 1e-9):
        name = run.to_point if stretch.end == "from" else run.from_point
        return None if name == CHASSIS else (name, net.point(name), f'at "{name}"')
    spot = net.spot(stretch.run, FEED, stretch.end, stretch.until_m)
    others = net.opposite(stretch.run, RETURN, stretch.end, stretch.until_m)
    if spot is None or not others:
        return None
    words = fault_working.along(run, stretch.end, stretch.until_m)
    return (stretch.run, stretch.end, stretch.until_m), Place(spot, others[0]), words


def _keep_larger(
    best: dict[_Key, Fault], key: _Key, net: FaultNetwork, found: Shorted, amps: float, place: str
) -> None:
    if amps >= TRACE_A and (key not in best or amps > best[key].amps):
        best[key] = _fault(net, found, amps, place)


def _fault(net: FaultNetwork, found: Shorted, amps: float, place: str) -> Fault:
    part = net.taking_part(found)
    giving = [one for one in part if found.port_A[one] > 0]
    told = partial(fault_working.working, net, found, amps)
    if len(found.volts) > _KEPT:  # those of thousands of shorts are not kept: one is soon worked out again
        told = partial(_told_again, net, found.place, amps)
    return Fault(
        place, amps, fault_working.by_source(net, found, part), any(net.sources[one].estimated for one in giving),
        bool(giving) and all(found.limited[one] for one in giving), found.certified, found.imbalance_A,
        told,
    )  # fmt: skip


def _told_again(net: FaultNetwork, place: Place, amps: float) -> tuple[str, ...]:
    (found,) = net.circuit.shorted([place])
    return fault_working.working(net, found, amps)
