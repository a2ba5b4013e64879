"""The cases of a plan that states none: the hours that an installer would think of.

Works on the plan alone, as a graph of its points with the devices as they stand; no voltage is needed to choose them.
"""

from collections.abc import Iterable, Iterator, Set
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Literal

from farvolt import units
from farvolt.plan import CHASSIS, Battery, Case, Charger, Converter, Load, Plan, Solar, Source, SourceState
from farvolt.plan_types import NAME_LIMIT
from farvolt.tables import read
from farvolt_data import ROOT

MOST_LOST = 6
"""Sources whose loss is checked: each further one is a further case to solve at every temperature."""

ON, OFF, FULL = SourceState(), SourceState(state="off"), SourceState(state="full")

States = dict[str, SourceState]
Shares = Literal["all", "none"] | dict[str, float]


@dataclass(frozen=True)
class StandardSet:
    """The cases, and in a sentence each what was left out of them and why."""

    cases: tuple[Case, ...]
    left_out: tuple[str, ...]


def standard_cases(plan: Plan) -> tuple[Case, ...]:
    """The standard set of cases for a plan, whatever cases it states itself."""
    return standard_set(plan).cases


def standard_set(plan: Plan) -> StandardSet:
    """The standard set, without cases that come to the same, and what was left out of it."""
    feeds = _Feeds(plan)
    resting = _resting(plan, feeds)
    low = ", low charge" if any(state.charge is not None for state in resting.values()) else ""
    first = Case(name=f"Everything on{low}", sources=resting)
    lost, left_out = _lost(plan, feeds)
    found: dict[object, Case] = {}
    for case in (first, *_charging(plan, low), *_start(plan, feeds, resting), *lost):
        found.setdefault(_meaning(plan, case), case)
    return StandardSet(tuple(found.values()), left_out)


@lru_cache
def _low_percents() -> dict[str, str]:
    return {row["chemistry"]: row["low_charge_percent"] for row in read(ROOT / "batteries" / "low_charge.csv")}


def low_charge(battery: Battery) -> units.Quantity | None:
    """The low charge a battery is checked at: typical of its chemistry, or its own where that is lower; None where
    the plan states its EMF, which no charge changes."""
    if battery.chemistry is None or battery.emf is not None:
        return None
    typical = units.parse(f"{_low_percents()[battery.chemistry]} %", "share")
    return min(typical, battery.charge, key=lambda share: share.si)


class _Feeds:
    """What sources feed: along runs and closed devices, through diodes and converters one way only."""

    def __init__(self, plan: Plan) -> None:
        self._plan = plan
        self._next: dict[str, list[tuple[str, str | None]]] = {}
        for run in plan.runs:
            if run.conducts != "return" and CHASSIS not in (run.from_point, run.to_point):
                self._join(run.from_point, run.to_point)
        for device in plan.devices:
            one_way = device.kind == "diode" and device.pole != "return"
            if one_way or device.pole == "return" or device.state == "closed":
                self._join(device.from_point, device.to_point, one_way=one_way)
        for source in plan.sources:
            if isinstance(source, Converter):
                self._join(source.from_point, source.at, source.name, one_way=True)
        self.every = frozenset(source.name for source in plan.sources)
        self._islands: dict[str, Set[str]] = {}

    def _join(self, start: str, end: str, converter: str | None = None, *, one_way: bool = False) -> None:
        self._next.setdefault(start, []).append((end, converter))
        if not one_way:
            self._next.setdefault(end, []).append((start, converter))

    def reached(self, starts: Iterable[str], converters: Set[str] = frozenset()) -> set[str]:
        """The points fed from `starts`, through these converters only."""
        todo = list(starts)
        found = set(todo)
        while todo:
            for point, converter in self._next.get(todo.pop(), ()):
                if point not in found and (converter is None or converter in converters):
                    found.add(point)
                    todo.append(point)
        return found

    def points(self, on: Set[str]) -> set[str]:
        """The points fed with these sources on."""
        starts = [one.at for one in self._plan.sources if one.name in on and not isinstance(one, Converter)]
        return self.reached(starts, on)

    def island(self, source: Source) -> Set[str]:
        """The points that a source feeds without passing a converter."""
        if source.at not in self._islands:
            self._islands[source.at] = frozenset(self.reached([source.at]))
        return self._islands[source.at]

    def nominal_V(self, point: str) -> float:
        """Nominal voltage at a point: the plan's on the reference source's island, else what a source there states."""
        return self._nominals.get(point, self._plan.plan.nominal.si)

    @cached_property
    def _nominals(self) -> dict[str, float]:
        plan, found = self._plan, dict[str, float]()
        for source in sorted(plan.sources, key=lambda one: one.name != plan.reference):
            if source.nominal is not None or source.name == plan.reference:
                own = None if source.name == plan.reference else source.nominal
                found = dict.fromkeys(self.island(source), (own or plan.plan.nominal).si) | found
        return found


def _loads(plan: Plan, names: Set[str]) -> Shares:
    """These loads on, as a case says it."""
    if all(load.name in names for load in plan.loads):
        return "all" if plan.loads else "none"
    return {load.name: 1.0 for load in plan.loads if load.name in names} or "none"


def _resting(plan: Plan, feeds: _Feeds) -> States:
    """Batteries low; chargers and solar off wherever all that they feed is fed without them."""
    charging = {one.name: one for one in plan.sources if isinstance(one, Charger | Solar)}
    rest = feeds.points(feeds.every - charging.keys())
    loads = {load.at for load in plan.loads}
    states = {}
    for source in plan.sources:
        mine = feeds.reached([source.at], feeds.every) if source.name in charging else set()
        replaced = bool(mine & rest) and (mine & loads) <= rest
        states[source.name] = _low(source) if isinstance(source, Battery) else OFF if replaced else ON
    return states


def _low(battery: Battery) -> SourceState:
    charge = low_charge(battery)
    return ON if charge is None else SourceState(charge=charge)


def _charging(plan: Plan, low: str) -> Iterator[Case]:
    """Highest voltage: nothing takes current. Highest charging current: the bank takes all, the loads little."""
    if not any(isinstance(source, Charger | Solar) for source in plan.sources):
        return
    little = _loads(plan, {load.name for load in plan.loads if load.continuous})
    sun = SourceState(irradiance=units.parse("100 %", "share"))
    states = {one.name: sun if isinstance(one, Solar) else ON for one in plan.sources}
    banks = [one for one in plan.sources if isinstance(one, Battery)]
    name = "Charging, bank full, little load" if banks else "Little load"
    yield Case(name=name, loads=little, sources=states | {one.name: FULL for one in banks})
    if banks:
        states |= {one.name: _low(one) for one in banks}
        yield Case(name=f"Charging{low}, little load", loads=little, sources=states)


def _start(plan: Plan, feeds: _Feeds, resting: States) -> Iterator[Case]:
    """The largest start on top of everything else, at low charge."""
    starts = [(_surge_A(load, feeds.nominal_V(load.at)), load) for load in plan.loads if load.surge is not None]
    if starts:
        _, load = max(starts, key=lambda one: one[0])
        yield Case(name=_called("Start of", load.name), sources=resting, surge=(load.name,))


def _rated_A(load: Load, nominal_V: float) -> float:
    volts = load.rated_volts.si if load.rated_volts else nominal_V
    if load.power is not None:
        drawn_W = load.power.si / (load.efficiency.si if load.efficiency else 1.0)
        return (drawn_W + (load.standby.si if load.standby else 0.0)) / volts
    if load.resistance is not None:
        return volts / load.resistance.si
    assert load.current is not None
    return load.current.si


def _surge_A(load: Load, nominal_V: float) -> float:
    """Current of a start at nominal voltage."""
    assert load.surge is not None
    if load.surge.current is not None:
        return load.surge.current.si
    if load.surge.resistance is not None:
        return nominal_V / load.surge.resistance.si
    assert load.surge.times is not None
    return load.surge.times * _rated_A(load, nominal_V)


def _lost(plan: Plan, feeds: _Feeds) -> tuple[list[Case], tuple[str, ...]]:
    """Each source off in turn where others feed all that it fed, and can carry it: banks first."""
    cases: list[Case] = []
    left_out: list[str] = []
    everything = feeds.points(feeds.every)
    wanted = {load.at for load in plan.loads}
    for source in sorted(plan.sources, key=lambda one: not isinstance(one, Battery)):
        mine = feeds.reached([source.at], feeds.every) & wanted
        rest = feeds.points(feeds.every - {source.name})
        if not mine or everything & wanted != rest & wanted:
            continue
        if len(cases) == MOST_LOST:
            left_out.append(f"The loss of {MOST_LOST} sources is checked, batteries first; that of the others is not.")
            break
        loads = _carried(plan, feeds, source)
        if loads is None:
            left_out.append(f'The loss of "{source.name}" is not checked: what remains cannot carry its loads.')
            continue
        states = {one.name: OFF if one.name == source.name else ON for one in plan.sources}
        cases.append(Case(name=_called("Without", source.name), loads=loads, sources=states))
    return cases, tuple(left_out)


def _carried(plan: Plan, feeds: _Feeds, lost: Source) -> Shares | None:
    """What the other sources of an island carry at their rating: all loads, else the continuous ones, else nothing."""
    island = feeds.island(lost)
    others = [one for one in plan.sources if one is not lost and island & feeds.island(one)]
    if any(isinstance(one, Battery) for one in others):
        return "all"
    limit_A = sum(_output_A(one) for one in others)
    every = {load.name for load in plan.loads}
    lasting = {load.name for load in plan.loads if load.continuous}
    for names in (every, lasting):
        if names and _drawn_A(plan, feeds, island, names, lost) <= limit_A:
            return _loads(plan, names)
    return None


def _output_A(source: Source) -> float:
    if isinstance(source, Solar):
        amps = source.power.si / source.ceiling.si
        return min(amps, source.amps.si) if source.amps else amps
    assert not isinstance(source, Battery)
    return source.amps.si


def _drawn_A(plan: Plan, feeds: _Feeds, points: Set[str], names: Set[str], lost: Source) -> float:
    """Current of an island at nominal voltage: its loads, and what its converters draw at their rating."""
    on = feeds.every - {lost.name}
    total = sum(
        _rated_A(load, feeds.nominal_V(load.at))
        for load in plan.loads
        if load.name in names and load.at in points and load.inverter_of not in on
    )
    for source in plan.sources:
        if isinstance(source, Converter) and source.name in on and source.from_point in points:
            drawn_W = source.volts.si * source.amps.si / source.efficiency.si + source.standby.si
            total += drawn_W / feeds.nominal_V(source.from_point)
    return total


def _called(what: str, name: str) -> str:
    """A case's name with that of an entry in it, cut where it would be too long for a name."""
    room = NAME_LIMIT - len(what) - 3
    return f'{what} "{name if len(name) <= room else name[: room - 1] + "…"}"'


def _meaning(plan: Plan, case: Case) -> object:
    """What a case comes to, however it is written: equal for cases that are solved alike."""
    states = []
    for source in plan.sources:
        state = case.sources[source.name]
        charge = None
        if isinstance(source, Battery) and source.emf is None and state.state == "on":
            charge = (state.charge or source.charge).si
        states.append((state.state, charge))
    return tuple(case.share(load.name) for load in plan.loads), tuple(states), case.surge
