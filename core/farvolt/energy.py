"""The energy of a day: what each load takes, what converters and inverters lose, and what a bank must give for it.

Everything is counted at nominal voltage: a plan before copper knows no better, and the days themselves (`days`) are
worked out on the network. A load without hours takes nothing here, and is named.
"""

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from functools import cached_property

from farvolt import operating
from farvolt.network import Network
from farvolt.plan import Battery, Charger, Converter, DayType, Load, Plan
from farvolt.plan_types import DAY_MINUTES, span_minutes

Spans = tuple[tuple[int, int], ...]

EVERY_DAY = "every day"
"""What the day of a plan without types of day is called."""


@dataclass(frozen=True, slots=True)
class Use:
    """When something is on in a day: hours, and the times of day where they are stated, in rising minutes."""

    hours: float
    spans: Spans = ()
    stated: bool = True


def merged(spans: Iterable[str]) -> Spans:
    """Spans of a day as (start, end) in minutes from midnight, rising, apart; one past midnight is cut in two."""
    pieces: list[tuple[int, int]] = []
    for start, end in map(span_minutes, spans):
        pieces += [(start, end)] if start < end else [(0, end), (start, DAY_MINUTES)]
    found: list[tuple[int, int]] = []
    for start, end in sorted(one for one in pieces if one[0] < one[1]):
        if found and start <= found[-1][1]:
            found[-1] = (found[-1][0], max(end, found[-1][1]))
        else:
            found.append((start, end))
    return tuple(found)


def _use(given: float | tuple[str, ...]) -> Use:
    if isinstance(given, tuple):
        spans = merged(given)
        return Use(sum(end - start for start, end in spans) / 60, spans)
    return Use(given, ((0, DAY_MINUTES),) if given >= 24 else ())


def load_use(load: Load, day: DayType | None = None) -> Use:
    """When a load is on: as the type of day says, else its schedule, else its hours; all day where it is continuous."""
    if day is not None and load.name in day.loads:
        return _use(day.loads[load.name])
    return _own_use(load, 24.0 if load.continuous else None)


def charger_use(charger: Charger, day: DayType | None = None) -> Use:
    """When a charger runs, the same way; not at all unless something says so."""
    if day is not None and charger.name in day.sources:
        return _use(day.sources[charger.name])
    return _own_use(charger, None)


def _own_use(one: Load | Charger, otherwise: float | None) -> Use:
    if one.schedule:
        return _use(one.schedule)
    hours = one.hours_per_day if one.hours_per_day is not None else otherwise
    return _use(hours) if hours is not None else Use(0.0, stated=False)


@dataclass(frozen=True, slots=True)
class LoadEnergy:
    """A load's day at its own terminals, and at the bank behind the converters on its way."""

    load: str
    nominal_V: float
    watts: float
    """Drawn while on, without standby."""
    use: Use
    duty: float
    standby_Wh: float
    Wh: float
    """Drawn at its terminals, an inverter's loss and standby included."""
    lost_Wh: float
    """Of that, what its inverter loses."""
    bank_Wh: float

    @property
    def Ah(self) -> float:
        """At the nominal voltage of its own system."""
        return self.Wh / self.nominal_V


@dataclass(frozen=True, slots=True)
class ConverterEnergy:
    """A converter's day: what it passes on, and what it loses doing so and doing nothing."""

    converter: str
    delivered_Wh: float
    lost_Wh: float
    standby_Wh: float


@dataclass(frozen=True, slots=True)
class SystemEnergy:
    """A part of the plan with one nominal voltage: what its loads and the converters fed by it draw in a day."""

    name: str
    nominal_V: float
    loads_Wh: float
    converters_Wh: float

    @property
    def Wh(self) -> float:
        """All that it draws."""
        return self.loads_Wh + self.converters_Wh

    @property
    def Ah(self) -> float:
        """The same at its nominal voltage."""
        return self.Wh / self.nominal_V


@dataclass(frozen=True)
class Budget:
    """The energy of one type of day."""

    day: str
    loads: tuple[LoadEnergy, ...]
    converters: tuple[ConverterEnergy, ...]
    systems: tuple[SystemEnergy, ...]
    """That of the reference battery first."""
    left_out: tuple[str, ...]
    """What is not counted, each in a sentence."""

    @property
    def bank(self) -> SystemEnergy:
        """What the bank of the reference source must give."""
        return self.systems[0]

    @cached_property
    def shares(self) -> tuple[tuple[str, float], ...]:
        """What the day goes into, largest first: each load, and what converters and inverters lose."""
        parts = [(one.load, one.Wh - one.lost_Wh - one.standby_Wh) for one in self.loads]
        parts += [(f"{one.load}: lost and standby", one.lost_Wh + one.standby_Wh) for one in self.loads]
        parts += [(f"{one.converter}: lost and standby", one.lost_Wh + one.standby_Wh) for one in self.converters]
        return tuple(sorted((part for part in parts if part[1] > 0), key=lambda part: -part[1]))


def budgets(network: Network) -> tuple[Budget, ...]:
    """One budget for each type of day of the plan; one of every day where it has none."""
    systems = _Systems(network)
    return tuple(_budget(systems, day) for day in network.plan.days or (None,))


def budget(network: Network, day: DayType | None = None) -> Budget:
    """The energy of a type of day; of the loads' own hours without one."""
    return _budget(_Systems(network), day)


def reference_battery(plan: Plan) -> Battery | None:
    """The battery that a bank is sized for: the reference, else the first."""
    found = [source for source in plan.sources if isinstance(source, Battery)]
    return next((one for one in found if one.name == plan.reference), next(iter(found), None))


class _Systems:
    """Which system each load and converter belongs to, and which converters feed a system without a battery."""

    def __init__(self, network: Network) -> None:
        self.network, self.plan = network, network.plan
        self.islands = operating.islands(network)
        self._of = self.islands.of_node
        self.banked = {self.at(one.at) for one in self.plan.sources if isinstance(one, Battery)}
        self.into: dict[int, list[Converter]] = {}
        for one in self.plan.sources:
            if isinstance(one, Converter) and self.at(one.at) not in self.banked | {self.at(one.from_point)}:
                self.into.setdefault(self.at(one.at), []).append(one)

    def at(self, point: str) -> int:
        """The system of a point."""
        return int(self._of[self.network.feed(point)])

    def nominal_V(self, system: int) -> float:
        """Nominal voltage of a system."""
        return self.islands.nominal_V[system]

    def name(self, system: int) -> str:
        """The source that a system is known by: the reference, its battery, what feeds it."""
        reference = self.plan.reference
        order = sorted(self.plan.sources, key=lambda one: (one.name != reference, not isinstance(one, Battery)))
        return next((one.name for one in order if self.at(one.at) == system), "no source")

    @cached_property
    def order(self) -> list[int]:
        """Systems that draw, each before the ones that feed it; a ring of converters is cut where it closes."""
        mine = [self.at(load.at) for load in self.plan.loads]
        mine += [self.at(one.from_point) for found in self.into.values() for one in found]
        if self.plan.reference is not None:
            reference = next(one for one in self.plan.sources if one.name == self.plan.reference)
            mine.insert(0, self.at(reference.at))
        after: list[int] = []
        seen: set[int] = set()

        def visit(system: int) -> None:
            if system not in seen:
                seen.add(system)
                for one in self.into.get(system, ()):
                    visit(self.at(one.from_point))
                after.append(system)

        for system in dict.fromkeys(mine):
            visit(system)
        return after[::-1]


def _budget(systems: _Systems, day: DayType | None) -> Budget:
    plan = systems.plan
    uses = {load.name: load_use(load, day) for load in plan.loads}
    own = {one.name: _at_terminals(one, systems.nominal_V(systems.at(one.at)), uses[one.name]) for one in plan.loads}
    drawn: dict[int, float] = {}
    for load in plan.loads:
        drawn[systems.at(load.at)] = drawn.get(systems.at(load.at), 0.0) + own[load.name].Wh
    converters, through = _through_converters(systems, drawn)
    at_bank = {one.name: own[one.name].Wh * through.get(systems.at(one.at), 1.0) for one in plan.loads}
    loads = tuple(replace(own[one.name], bank_Wh=at_bank[one.name]) for one in plan.loads)
    first = systems.at(next(one.at for one in plan.sources if one.name == plan.reference)) if plan.reference else None
    shown = sorted(systems.order, key=lambda system: system != first)
    parts = tuple(
        SystemEnergy(systems.name(one), systems.nominal_V(one), drawn.get(one, 0.0),
                     sum(_input_Wh(each) for each in converters if _draws_at(plan, each, systems) == one))
        for one in shown
    )  # fmt: skip
    return Budget(day.name if day else EVERY_DAY, loads, tuple(converters), parts, tuple(_left_out(systems, uses)))


def _at_terminals(load: Load, nominal_V: float, use: Use) -> LoadEnergy:
    watts, amps, siemens = operating.rated(load, nominal_V, idling=False)
    drawn_W = watts + nominal_V * (amps + nominal_V * siemens)
    duty = load.duty.si if load.duty else 1.0
    # An inverter idles whenever it is switched on: by its schedule where it has one, else all day if it is used at all.
    idle_h = (use.hours if use.spans else 24.0) if use.hours > 0 else 0.0
    standby_Wh = (load.standby.si if load.standby else 0.0) * idle_h
    running_Wh = drawn_W * use.hours * duty
    lost_Wh = running_Wh * (1 - load.efficiency.si) if load.efficiency else 0.0
    total_Wh = running_Wh + standby_Wh
    return LoadEnergy(load.name, nominal_V, drawn_W, use, duty, standby_Wh, total_Wh, lost_Wh, total_Wh)


def _through_converters(
    systems: _Systems, loads_Wh: Mapping[int, float]
) -> tuple[list[ConverterEnergy], dict[int, float]]:
    """The converters' day, and over systems what a watt-hour there takes from the bank that is behind it."""
    drawn = dict(loads_Wh)
    found: list[ConverterEnergy] = []
    for system in systems.order:
        into = systems.into.get(system, [])
        rated = sum(one.volts.si * one.amps.si for one in into)
        for one in into:
            given = drawn.get(system, 0.0) * one.volts.si * one.amps.si / rated
            energy = ConverterEnergy(one.name, given, given * (1 / one.efficiency.si - 1), one.standby.si * 24)
            above = systems.at(one.from_point)
            drawn[above] = drawn.get(above, 0.0) + _input_Wh(energy)
            found.append(energy)
    times: dict[int, float] = {}
    for system in reversed(systems.order):
        into = systems.into.get(system, [])
        rated = sum(one.volts.si * one.amps.si for one in into)
        times[system] = sum(
            one.volts.si * one.amps.si / rated / one.efficiency.si * times.get(systems.at(one.from_point), 1.0)
            for one in into
        ) if into else 1.0  # fmt: skip
    return found, times


def _input_Wh(one: ConverterEnergy) -> float:
    return one.delivered_Wh + one.lost_Wh + one.standby_Wh


def _draws_at(plan: Plan, one: ConverterEnergy, systems: _Systems) -> int:
    source = next(source for source in plan.sources if source.name == one.converter)
    assert isinstance(source, Converter)
    return systems.at(source.from_point)


def _left_out(systems: _Systems, uses: Mapping[str, Use]) -> Iterator[str]:
    plan = systems.plan
    without = [f'"{name}"' for name, use in uses.items() if not use.stated]
    if without:
        yield f"Counted as never on, for want of hours_per_day or schedule: {', '.join(without)}."
    charging = [one.name for one in plan.sources if isinstance(one, Converter) and systems.at(one.at) in systems.banked]
    for name in charging:
        yield f'"{name}" delivers to a bank: what it passes on in a day is not counted.'
    for load in plan.loads:
        if load.inverter_of is not None and uses[load.name].hours > 0:
            yield f'"{load.name}" is counted from the bank for all its hours, those of "{load.inverter_of}" too.'
