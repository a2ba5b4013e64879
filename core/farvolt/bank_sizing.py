"""How large a bank must be, and how long a given one lasts, each step with its working.

After IEEE 1013 (lead-acid batteries in stand-alone photovoltaic systems; from memory of its worksheet, provisional)
and, where loads have their times, the duty-cycle method of IEEE 485; the larger of the two decides. What the battery
loses in charging enters the charging, not its capacity: capacity is rated by what comes out.
"""

import math
from dataclasses import dataclass

import numpy as np

from farvolt import batteries, battery_figures, energy, operating
from farvolt.battery_figures import Figure
from farvolt.duty_cycle import Period, RateFactor, Sized, by_peukert, by_table, joined, sized
from farvolt.energy import Budget
from farvolt.feeders import TENTH
from farvolt.network import Floats, Network
from farvolt.plan import Battery, Block, Plan
from farvolt.plan_types import DAY_MINUTES
from farvolt.units import number

IEEE_1013 = "IEEE 1013 (from memory, provisional)"
IEEE_485 = "IEEE 485, duty cycle by sections"


@dataclass(frozen=True, slots=True)
class Step:
    """One line of a sizing: what, the number, and how it comes about."""

    what: str
    value: float
    unit: str
    working: str
    basis: str


@dataclass(frozen=True, slots=True)
class Terms:
    """What a bank is sized with: from the plan where it says so, else typical, with the words for it."""

    battery: Battery
    nominal_V: float
    """Of the battery itself: 12.8 V in a 12 V system."""
    depth: Figure
    degC: float
    temperature_times: float
    temperature_basis: str
    rated_hours: Figure
    exponent: Figure
    factor: RateFactor
    block: Block | None
    series: int
    """Blocks in series to a string."""


@dataclass(frozen=True)
class Sizing:
    """The bank that a plan asks for, for its design day."""

    day: str
    terms: Terms
    steps: tuple[Step, ...]
    capacity_Ah: float
    """Rated capacity that the bank must have."""
    strings: int | None
    """Strings of the block it is built of; None without a block and without a capacity in the plan."""
    duty: Sized
    days: float | None
    """How many days the bank of the plan lasts, at the end of its life; None where it states no capacity."""
    days_working: tuple[str, ...]

    @property
    def built_Ah(self) -> float | None:
        """Capacity of the bank of so many strings."""
        return self.strings * self.terms.block.capacity.si if self.strings and self.terms.block else None


def sizing(network: Network, budgets: tuple[Budget, ...]) -> Sizing | None:
    """The sizing of the reference battery; None where the plan has no battery."""
    battery = energy.reference_battery(network.plan)
    if battery is None:
        return None
    terms = _terms(network, battery)
    design = design_budget(network.plan, budgets)
    peak = peak_A(design, terms.nominal_V)
    duty = _duty(network.plan, design, terms)
    steps, capacity_Ah = _steps(network.plan, design, terms, peak, duty)
    strings = math.ceil(capacity_Ah / terms.block.capacity.si - 1e-9) if terms.block else None
    days, days_working = _days(network.plan, design, terms, peak)
    return Sizing(design.day, terms, steps, capacity_Ah, strings, duty, days, days_working)


def design_budget(plan: Plan, budgets: tuple[Budget, ...]) -> Budget:
    """The budget of the design day: the one the plan names, else the one that takes most from the bank."""
    named = [one for one in budgets if one.day == plan.bank.design_day]
    return (named or [max(budgets, key=lambda one: one.bank.Wh)])[0]


def battery_degC(plan: Plan, battery: Battery) -> float:
    """Lowest temperature of the battery: as the bank's table states, else the ambient where it stands."""
    if plan.bank.coldest is not None:
        return plan.bank.coldest.si
    return plan.ambient_degC(plan.zone_of_point(battery.at))


def _terms(network: Network, battery: Battery) -> Terms:
    plan = network.plan
    system_V = operating.islands(network).nominal(network.feed(battery.at))
    nominal_V = battery.nominal.si if battery.nominal else system_V
    depth = plan.bank.depth_of_discharge
    least = battery_figures.least_charge(battery)
    figure = Figure(depth.si, depth.si, "stated in the plan", True) if depth else Figure(
        1 - least.high, 1 - least.low, f"all above its least charge, {least.basis}", least.stated
    )  # fmt: skip
    degC = battery_degC(plan, battery)
    times, basis = battery_figures.sizing_times(battery.chemistry, degC)
    hours = battery_figures.figure(battery, "capacity_hours") or Figure(20, 20, "taken, as no chemistry is stated")
    exponent = battery_figures.figure(battery, "peukert") or Figure(1, 1, "none, as no chemistry is stated")
    block = plan.bank.block or _own_block(battery, nominal_V)
    factor = by_peukert(hours.middle, exponent.middle)
    if block is not None and block.rates:
        factor = by_table(block.capacity.si, block.rates)
    return Terms(battery, nominal_V, figure, degC, max(times, 1.0), basis, hours, exponent, factor, block,
                 _series(battery, nominal_V, block))  # fmt: skip


def _own_block(battery: Battery, nominal_V: float) -> Block | None:
    """A string of the battery itself, taken as the block."""
    if battery.capacity is None:
        return None
    nominal = battery.nominal or f"{nominal_V:g} V"
    return Block.model_validate({"nominal": nominal, "capacity": battery.capacity})


def _series(battery: Battery, nominal_V: float, block: Block | None) -> int:
    if block is None:
        return 1
    if battery.chemistry is None:
        return max(1, round(nominal_V / block.nominal.si))
    cells = batteries.cells(battery.chemistry, nominal_V)
    return max(1, math.ceil(cells / batteries.cells(battery.chemistry, block.nominal.si)))


def peak_A(budget: Budget, nominal_V: float) -> float:
    """Largest lasting current of a day at the bank: what the times of day put together, with as much of the loads
    that are on at any time as two-column practice counts (the larger of the largest and a tenth of them)."""
    loose = [_bank_W(one) for one in budget.loads if not one.use.spans and one.use.hours > 0]
    return (float(_timed_W(budget, running=True).max()) + max(max(loose, default=0.0), TENTH * sum(loose))) / nominal_V


def _bank_W(one: energy.LoadEnergy) -> float:
    """Power that a load takes from the bank while on, through the converters on its way."""
    return one.watts * (one.bank_Wh / one.Wh if one.Wh else 1.0)


def _timed_W(budget: Budget, *, running: bool) -> Floats:
    """Over the minutes of a day: power from the bank of loads with times of day, and all standby; `running` together,
    else at their duty."""
    idle_Wh = sum(one.standby_Wh for one in budget.loads) + sum(one.standby_Wh for one in budget.converters)
    found = np.full(DAY_MINUTES, idle_Wh / 24)
    for one in budget.loads:
        for start, end in one.use.spans:
            found[start:end] += _bank_W(one) * (1.0 if running else one.duty)
    return found


def _duty(plan: Plan, budget: Budget, terms: Terms) -> Sized:
    """The duty cycle of all days of autonomy: loads by their times, the others as their average; of these the largest
    may come at any moment."""
    loose = [one for one in budget.loads if not one.use.spans and one.use.hours > 0]
    average_W = sum(one.bank_Wh - one.standby_Wh for one in loose) / 24
    day = (_timed_W(budget, running=False) + average_W) / terms.nominal_V
    whole = max(1, math.ceil(plan.bank.autonomy))
    minutes = np.tile(day, whole)[: max(1, round(plan.bank.autonomy * DAY_MINUTES))]
    random = max((Period(_bank_W(one) / terms.nominal_V, min(one.use.hours, 1.0)) for one in loose),
                 key=lambda period: period.current_A, default=None)  # fmt: skip
    return sized(joined(minutes), terms.factor, random)


def _steps(plan: Plan, design: Budget, terms: Terms, peak: float, duty: Sized) -> tuple[tuple[Step, ...], float]:
    bank, daily_Ah = plan.bank, design.bank.Wh / terms.nominal_V
    lasting = daily_Ah * bank.autonomy
    found = [
        Step("Charge of a day", daily_Ah, "Ah", f"{number(design.bank.Wh, 4)} Wh / {number(terms.nominal_V)} V = "
             f"{number(daily_Ah, 4)} Ah", f'budget of "{design.day}"'),
        Step("Days of autonomy", lasting, "Ah", f"{number(daily_Ah, 4)} Ah x {number(bank.autonomy)} = "
             f"{number(lasting, 4)} Ah", IEEE_1013),
        *_adjusted(plan, terms, daily_Ah, lasting),
    ]  # fmt: skip
    largest = max(one.value for one in found[2:])
    found.append(Step("The largest of these", largest, "Ah", "depth of discharge and ageing are not multiplied: the "
                      "reserve that one leaves serves the other", IEEE_1013))  # fmt: skip
    cold = largest * terms.temperature_times
    found.append(Step(f"Temperature, {number(terms.degC)} degC", cold, "Ah", f"{number(largest, 4)} Ah x "
                      f"{number(terms.temperature_times, 4)} = {number(cold, 4)} Ah (never below 1)",
                      terms.temperature_basis))  # fmt: skip
    with_margin = cold * bank.margin
    found.append(Step("Margin", with_margin, "Ah", f"{number(cold, 4)} Ah x {number(bank.margin)} = "
                      f"{number(with_margin, 4)} Ah", IEEE_1013))  # fmt: skip
    found.append(_rate_step(terms, with_margin, peak))
    cycle = duty.capacity_Ah * terms.temperature_times * bank.margin * bank.ageing
    found.append(Step("Duty cycle", cycle, "Ah", f"section {duty.section + 1} of {len(duty.sections_Ah)}: "
                      f"{number(max(duty.sections_Ah), 4)} Ah, at any moment {number(duty.random_Ah, 4)} Ah; "
                      f"x {number(terms.temperature_times, 4)} x {number(bank.margin)} x {number(bank.ageing)} = "
                      f"{number(cycle, 4)} Ah", IEEE_485))  # fmt: skip
    return tuple(found), max(found[-2].value, cycle)


def _adjusted(plan: Plan, terms: Terms, daily_Ah: float, lasting: float) -> list[Step]:
    """What each limit on its own asks for."""
    bank, depth = plan.bank, terms.depth.middle
    found = [Step("By depth of discharge", lasting / depth, "Ah", f"{number(lasting, 4)} Ah / {number(100 * depth)} % "
                  f"= {number(lasting / depth, 4)} Ah", terms.depth.basis)]  # fmt: skip
    if bank.daily_depth_of_discharge is not None:
        daily = bank.daily_depth_of_discharge.si
        found.append(Step("By daily depth of discharge", daily_Ah / daily, "Ah", f"{number(daily_Ah, 4)} Ah / "
                          f"{number(100 * daily)} % = {number(daily_Ah / daily, 4)} Ah",
                          "stated in the plan"))  # fmt: skip
    aged = lasting * bank.ageing
    found.append(Step("By ageing", aged, "Ah", f"{number(lasting, 4)} Ah x {number(bank.ageing)} = {number(aged, 4)} "
                      "Ah", f"{IEEE_1013}; 1.25 for an end of life at 80 %"))  # fmt: skip
    return found


def rate_times(terms: Terms, capacity_Ah: float, current_A: float) -> tuple[float, float]:
    """What discharge at a current takes off the rated capacity, as a factor to raise it by, and the hours that the
    capacity lasts at it; 1 where it lasts for the rated hours or longer."""
    if current_A <= 0:
        return 1.0, math.inf
    hours = capacity_Ah / current_A
    if hours >= terms.rated_hours.middle:
        return 1.0, hours
    return float(terms.factor(np.array([hours]))[0]) / hours, hours


def _rate_step(terms: Terms, capacity_Ah: float, peak: float) -> Step:
    times, hours = rate_times(terms, capacity_Ah, peak)
    lasts = f"{number(capacity_Ah, 4)} Ah / {number(peak)} A = {number(hours)} h"
    rated = number(terms.rated_hours.middle)
    if times == 1.0:
        why = f"{lasts}, not below the rated {rated} h: no change"
        return Step("Discharge rate", capacity_Ah, "Ah", why, IEEE_1013)
    law = f"({rated} / {number(hours)})^(1 - 1/{number(terms.exponent.middle, 4)})"
    if terms.block is not None and terms.block.rates:
        law = "by the block's own discharge table"
    return Step("Discharge rate", capacity_Ah * times, "Ah", f"{lasts}, below the rated {rated} h: x {law} = "
                f"{number(times, 4)}; {number(capacity_Ah * times, 4)} Ah",
                f"Peukert's law, exponent {terms.exponent.basis}")  # fmt: skip


def _days(plan: Plan, design: Budget, terms: Terms, peak: float) -> tuple[float | None, tuple[str, ...]]:
    """How many days the bank of the plan lasts, by the same steps taken back, without the margin."""
    battery, daily_Ah = terms.battery, design.bank.Wh / terms.nominal_V
    if battery.capacity is None or daily_Ah <= 0:
        return None, ()
    rated = battery.capacity.si * battery.strings
    depth, lasting = terms.depth.middle, 1 / plan.bank.ageing
    share, why = min((depth, "depth of discharge"), (lasting, "end of life"))
    times, _ = rate_times(terms, rated, peak)
    usable = rated * share / terms.temperature_times / times
    days = usable / daily_Ah
    return days, (
        f"{battery.strings} x {battery.capacity} = {number(rated, 4)} Ah",
        f"usable: the lesser of {number(100 * depth)} % (depth of discharge) and 1 / {number(plan.bank.ageing)} (end "
        f"of life) is {number(100 * share)} %, {why}",
        f"{number(rated, 4)} Ah x {number(100 * share)} % / {number(terms.temperature_times, 4)} (temperature) / "
        f"{number(times, 4)} (rate) = {number(usable, 4)} Ah",
        f"{number(usable, 4)} Ah / {number(daily_Ah, 4)} Ah a day = {number(days)} days",
    )
