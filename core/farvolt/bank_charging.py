"""How a bank is filled again: what each charger and the sun give in a day, the array for the worst days, the limits on
charging current, and the time to full."""

import math
from dataclasses import dataclass

from farvolt import battery_figures, energy, operating
from farvolt.bank_sizing import Terms
from farvolt.battery_figures import Figure
from farvolt.energy import Budget
from farvolt.network import Network
from farvolt.plan import Battery, Charger, Converter, DayType, Solar
from farvolt.units import number

DEFAULT_RATIO = 0.75
"""Performance ratio of an array that the plan does not have yet: common practice."""

ALL_TAKEN = Figure(1.0, 1.0, "none lost, as no chemistry is stated")


@dataclass(frozen=True, slots=True)
class Gain:
    """What a source gives in a day at the bank."""

    source: str
    Wh: float
    working: str


@dataclass(frozen=True, slots=True)
class DayBalance:
    """A type of day: what must go into the bank, and what can."""

    day: str
    needed_Wh: float
    """What the loads take, over the battery's efficiency there and back."""
    gains: tuple[Gain, ...]
    array_W: float | None
    """Rated power of all arrays that would cover the day beside the chargers; None where no sun is stated."""
    working: tuple[str, ...]

    @property
    def gained_Wh(self) -> float:
        """What all sources can give."""
        return sum(one.Wh for one in self.gains)


@dataclass(frozen=True, slots=True)
class Limit:
    """All chargers together against what the bank takes."""

    amps: float
    parts: tuple[tuple[str, float], ...]
    """Each source and its greatest current."""
    limit_A: Figure | None
    """Of the whole bank, as a range where only that is known."""


@dataclass(frozen=True, slots=True)
class ToFull:
    """Hours from the depth of discharge that the bank is planned for to full, with everything else off."""

    source: str
    bulk_h: float
    absorption_h: float
    working: tuple[str, ...]


@dataclass(frozen=True)
class Charging:
    """Everything about filling the reference battery."""

    days: tuple[DayBalance, ...]
    worst: DayBalance | None
    """The day that asks for the largest array; None where no day states its sun."""
    limit: Limit
    to_full: tuple[ToFull, ...]


def charging(network: Network, budgets: tuple[Budget, ...], terms: Terms) -> Charging:
    """How the reference battery is charged on each type of day."""
    plan = network.plan
    mine = feeding(network, terms.battery)
    types: tuple[DayType | None, ...] = plan.days or (None,)
    days = tuple(_balance(budget, day, mine, terms) for budget, day in zip(budgets, types, strict=True))
    sunny = [one for one in days if one.array_W is not None]
    worst = max(sunny, key=lambda one: one.array_W or 0.0, default=None)
    return Charging(days, worst, limit(network, terms.battery, terms.nominal_V), tuple(_all_to_full(mine, terms)))


def feeding(network: Network, battery: Battery) -> tuple[Charger | Solar, ...]:
    """The chargers and solar controllers that deliver to a battery's own part of the plan."""
    of_node = operating.islands(network).of_node
    home = of_node[network.feed(battery.at)]
    return tuple(
        one
        for one in network.plan.sources
        if isinstance(one, Charger | Solar) and of_node[network.feed(one.at)] == home
    )


def lasting_A(one: Charger | Solar, nominal_V: float) -> float:
    """What a source delivers for long: an alternator's hot output, a controller's limit or its power at nominal."""
    if isinstance(one, Charger):
        return (one.hot_amps or one.amps).si
    amps = one.power.si / nominal_V
    return min(amps, one.amps.si) if one.amps else amps


def most_A(one: Charger | Solar, nominal_V: float) -> float:
    """The greatest current that a source delivers."""
    return one.amps.si if isinstance(one, Charger) else lasting_A(one, nominal_V)


def _balance(
    budget: Budget, day: DayType | None, mine: tuple[Charger | Solar, ...], terms: Terms
) -> DayBalance:  # fmt: skip
    efficiency = battery_figures.figure(terms.battery, "efficiency") or ALL_TAKEN
    needed = budget.bank.Wh / efficiency.middle
    sun_h = day.peak_sun_hours if day is not None else None
    gains = [gain for one in mine if (gain := _gain(one, day, sun_h, terms.nominal_V)) is not None]
    working = [
        f"needed: {number(budget.bank.Wh, 4)} Wh / {number(100 * efficiency.middle)} % there and back "
        f"({efficiency.basis}) = {number(needed, 4)} Wh"
    ]
    array = None
    if sun_h:
        solar = {one.name: one.performance_ratio.si for one in mine if isinstance(one, Solar)}
        chargers = sum(gain.Wh for gain in gains if gain.source not in solar)
        ratio = min(solar.values(), default=DEFAULT_RATIO)
        array = max(0.0, needed - chargers) / (sun_h * ratio)
        working.append(
            f"array: ({number(needed, 4)} Wh - {number(chargers, 4)} Wh from chargers, not below 0) / "
            f"({number(sun_h)} h of full sun x {number(100 * ratio)} % performance ratio) = {number(array)} W"
        )
    return DayBalance(budget.day, needed, tuple(gains), array, tuple(working))


def _gain(one: Charger | Solar, day: DayType | None, sun_h: float | None, nominal_V: float) -> Gain | None:
    if isinstance(one, Solar):
        if sun_h is None:
            return None
        watt_hours = one.power.si * sun_h * one.performance_ratio.si
        return Gain(one.name, watt_hours, f"{one.power} x {number(sun_h)} h of full sun x {one.performance_ratio} = "
                    f"{number(watt_hours, 4)} Wh")  # fmt: skip
    use, amps = energy.charger_use(one, day), lasting_A(one, nominal_V)
    watt_hours = amps * nominal_V * use.hours
    hot = "hot output " if one.hot_amps else ""
    return Gain(one.name, watt_hours, f"{hot}{number(amps)} A x {number(nominal_V)} V x {number(use.hours)} h = "
                f"{number(watt_hours, 4)} Wh")  # fmt: skip


def limit(network: Network, battery: Battery, nominal_V: float) -> Limit:
    """All that can charge at once, converters into its part of the plan too, against `max_charge` of all strings."""
    of_node = operating.islands(network).of_node
    home = of_node[network.feed(battery.at)]
    parts = [(one.name, most_A(one, nominal_V)) for one in feeding(network, battery)]
    parts += [
        (one.name, one.amps.si)
        for one in network.plan.sources
        if isinstance(one, Converter) and of_node[network.feed(one.at)] == home != of_node[network.feed(one.from_point)]
    ]
    return Limit(sum(amps for _, amps in parts), tuple(parts), rate_limit(battery, "charge"))


def rate_limit(battery: Battery, way: str) -> Figure | None:
    """Greatest current of a whole bank in "charge" or "discharge": as its maker states, else typical by capacity."""
    stated = battery.max_charge if way == "charge" else battery.max_discharge
    if stated is not None:
        amps = battery.strings * stated.si
        return Figure(amps, amps, "the maker's limit for one string, as the plan states it", stated=True)
    if battery.chemistry is None or battery.capacity is None:
        return None
    rate, capacity = battery_figures.typical(battery.chemistry, f"{way}_rate"), battery.capacity.si * battery.strings
    return Figure(rate.low * capacity, rate.high * capacity, rate.basis)


def _all_to_full(mine: tuple[Charger | Solar, ...], terms: Terms) -> list[ToFull]:
    battery = terms.battery
    if battery.capacity is None or battery.chemistry is None:
        return []
    found = []
    for one in mine:
        if isinstance(one, Charger):
            found.append(to_full(battery, one.name, lasting_A(one, terms.nominal_V), terms.depth.middle))
    return found


def to_full(battery: Battery, source: str, amps: float, depth: float) -> ToFull:
    """Hours to fill a battery from a depth of discharge with a constant current, then a falling one.

    Bulk: the charge up to where absorption begins, over the current. Absorption: the current falls from there to the
    current at which charging ends by equal shares in equal times, so that the charge left Q lasts
    Q · ln(I / I_end) / (I − I_end).
    """
    assert battery.capacity is not None
    assert battery.chemistry is not None
    capacity = battery.capacity.si * battery.strings
    taken = battery_figures.typical(battery.chemistry, "charge_efficiency").middle
    start = battery_figures.typical(battery.chemistry, "absorption_from").middle
    tail = battery_figures.typical(battery.chemistry, "tail_current").middle * capacity
    bulk_Ah = max(0.0, start - (1 - depth)) * capacity / taken
    rest_Ah = min(1 - start, depth) * capacity / taken
    falling = rest_Ah / amps if amps <= tail else rest_Ah * math.log(amps / tail) / (amps - tail)
    return ToFull(source, bulk_Ah / amps, falling, (
        f"bulk: {number(bulk_Ah, 4)} Ah / {number(amps)} A = {number(bulk_Ah / amps)} h, up to {number(100 * start)} % "
        f"of charge; {number(100 * taken)} % of what goes in is kept",
        f"absorption: {number(rest_Ah, 4)} Ah while {number(amps)} A falls to {number(tail)} A: {number(falling)} h",
        f"{number(bulk_Ah / amps)} h + {number(falling)} h = {number(bulk_Ah / amps + falling)} h",
    ))  # fmt: skip


