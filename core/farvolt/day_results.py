"""What days come to: energy not served, hours at low charge, cycles, the longest bad times, the account of energy."""

import datetime as dt
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from farvolt import battery_figures
from farvolt.days import Outcome
from farvolt.network import Floats
from farvolt.output import OUTPUT, plain
from farvolt.plan import Battery, Converter

_EMPTY = 1e-6
"""Less than this is shown as empty."""


@dataclass(frozen=True, slots=True)
class LoadDays:
    """A load over the days."""

    load: str
    wanted_Wh: float
    """At its nominal voltage, in the hours in which it was asked for."""
    drawn_Wh: float
    unserved_Wh: float
    """Of what was wanted, that of the hours in which it was off."""
    off_hours: float
    times_off: int
    """How often it let go below its cut-out."""
    lowest_V: float | None
    """While it drew."""


@dataclass(frozen=True, slots=True)
class BankDays:
    """A bank, or one of its strings, over the days; charge in shares of its capacity."""

    bank: str
    capacity_Ah: float
    first_charge: float
    last_charge: float
    lowest_charge: float
    hours_below: float
    """Below the charge that was asked about."""
    empty_hours: float
    cold_hours: float
    """Too cold to be charged."""
    cycles: float
    """All that it gave, in full capacities."""
    most_given_A: float
    most_taken_A: float

    @property
    def deepest_discharge(self) -> float:
        """Share of its capacity that was gone at the lowest."""
        return 1 - self.lowest_charge


@dataclass(frozen=True, slots=True)
class Spell:
    """A time in which something lasted: its first step, when that began, and how long it was."""

    step: int
    start: dt.datetime
    hours: float


@dataclass(frozen=True, slots=True)
class Account:
    """Energy over the days, Wh: what came in went out, was lost, or is stored."""

    given_Wh: float
    loads_Wh: float
    cables_Wh: float
    """Lost in conductors, protection, devices and diodes."""
    converters_Wh: float
    banks_Wh: float
    """Lost in the banks' resistance."""
    unkept_Wh: float
    """Of what the banks were charged with, what they did not keep."""
    self_discharge_Wh: float
    stored_Wh: float
    """Gained by the banks; negative where they gave more than they took."""

    @property
    def error(self) -> float:
        """What is missing or too much, as a share of all that flows."""
        out = self.loads_Wh + self.cables_Wh + self.converters_Wh + self.banks_Wh + self.unkept_Wh
        out += self.self_discharge_Wh
        turnover = self.given_Wh + out + abs(self.stored_Wh)
        return abs(self.given_Wh - out - self.stored_Wh) / turnover if turnover > 0 else 0.0


@dataclass(frozen=True)
class DaysStudy:
    """The days of a plan."""

    plan: str
    outcome: Outcome
    low_charge: float
    """The charge that hours are counted below."""
    loads: tuple[LoadDays, ...]
    banks: tuple[BankDays, ...]
    sources: tuple[tuple[str, float], ...]
    """What each charger, solar source and converter delivered, Wh."""
    longest_unserved: Spell | None
    """The longest time in which something was asked for and off."""
    longest_below: Spell | None
    """The longest time in which a bank was below the charge asked about."""
    account: Account
    notes: tuple[str, ...]

    @property
    def unserved_Wh(self) -> float:
        """What all loads wanted and did not get."""
        return sum(one.unserved_Wh for one in self.loads)


def low_charge_of(outcome: Outcome) -> float:
    """The charge below which the reference battery is not to be taken."""
    plan = outcome.ready.plan
    banks = [one for one in plan.sources if isinstance(one, Battery)]
    battery = next((one for one in banks if one.name == plan.reference), banks[0])
    return battery_figures.least_charge(battery).middle


def days_study(outcome: Outcome, low_charge: float | None = None) -> DaysStudy:
    """Sum up what happened; hours are counted below `low_charge`, else below the least charge of the battery."""
    low = low_charge_of(outcome) if low_charge is None else low_charge
    below = np.any(outcome.sums.charge < low, axis=1)
    unserved = np.any(unserved_W(outcome) > 0, axis=1)
    plan = outcome.ready.plan
    sources = tuple(
        (one.name, float(outcome.sums.source_Wh[:, index].sum()))
        for index, one in enumerate(plan.sources)
        if not isinstance(one, Battery)
    )
    return DaysStudy(
        plan.plan.name, outcome, low, tuple(_loads(outcome)), tuple(_banks(outcome, low)), sources,
        longest(outcome, unserved), longest(outcome, below), account(outcome),
        (*outcome.course.notes, *_notes(outcome)),
    )  # fmt: skip


def unserved_W(outcome: Outcome) -> Floats:
    """Over (step, load): what was wanted and not served, at nominal voltage, mean of the step."""
    return outcome.off * outcome.wanted_W


def longest(outcome: Outcome, states: np.ndarray) -> Spell | None:
    """The longest run of steps in which something is the case; the first of equally long ones."""
    edges = np.flatnonzero(np.diff(np.concatenate([[0], states.astype(int), [0]])))
    starts, ends = edges[::2], edges[1::2]
    if len(starts) == 0:
        return None
    best = int(np.argmax(ends - starts))
    step = int(starts[best])
    return Spell(step, outcome.course.clock(step), float(ends[best] - starts[best]) * outcome.course.hours)


def account(outcome: Outcome) -> Account:
    """The account of energy."""
    sums = outcome.sums
    both = zip(outcome.banks, outcome.first_charge, strict=True)
    stored = sum(one.stored_Wh(one.charge) - one.stored_Wh(first) for one, first in both)
    return Account(
        given_Wh=float(sums.given_Wh.sum()), loads_Wh=float(sums.loads_Wh.sum()),
        cables_Wh=float(sums.network_Wh.sum()), converters_Wh=float(sums.converters_Wh.sum()),
        banks_Wh=float(sums.resistance_Wh.sum()), unkept_Wh=float(sums.unkept_Wh.sum()),
        self_discharge_Wh=float(sums.gone_Wh.sum()), stored_Wh=stored,
    )  # fmt: skip


def _loads(outcome: Outcome) -> Iterator[LoadDays]:
    hours, missing = outcome.course.hours, unserved_W(outcome)
    asked = outcome.wanted_W > 0
    for index, load in enumerate(outcome.ready.plan.loads):
        lowest = float(outcome.sums.load_V[index])
        yield LoadDays(
            load.name, float(outcome.wanted_W[:, index].sum()) * hours, float(outcome.sums.load_Wh[index]),
            float(missing[:, index].sum()) * hours, float((outcome.off[:, index] * asked[:, index]).sum()) * hours,
            int(outcome.times_off[index]), lowest if np.isfinite(lowest) else None,
        )  # fmt: skip


def _banks(outcome: Outcome, low: float) -> Iterator[BankDays]:
    sums, hours = outcome.sums, outcome.course.hours
    for index, one in enumerate(outcome.banks):
        charge = np.append(outcome.first_charge[index], sums.charge[:, index])
        charge = np.where(charge < _EMPTY, 0.0, charge)
        given_Ah = float(np.maximum(sums.bank_A[:, index], 0.0).sum()) * hours
        yield BankDays(
            one.name, one.capacity_Ah, outcome.first_charge[index], float(charge[-1]), float(charge.min()),
            float((charge[1:] < low).sum()) * hours, float(outcome.cut_hours[index]), float(outcome.cold_hours[index]),
            given_Ah / one.capacity_Ah, float(sums.peak_A[index, 0]), float(sums.peak_A[index, 1]),
        )  # fmt: skip


def _notes(outcome: Outcome) -> Iterator[str]:
    plan = outcome.ready.plan
    never = [one.name for index, one in enumerate(plan.loads)
             if outcome.times_off[index] and one.cut_out is not None and one.recovery is None]  # fmt: skip
    if never:
        names = ", ".join(f'"{name}"' for name in never)
        yield f"Off for good once they had cut out, as no recovery voltage is stated: {names}."
    if any(isinstance(one, Converter) for one in plan.sources):
        yield "Converters are always on."
    if outcome.unsolved:
        yield f"In {outcome.unsolved} parts of steps the network held with no load at all on: nothing flowed in them."
    yield "Charge counts what can be drawn slowly: a high rate of discharge and cold leave less of it."


SERIES_UNITS = "Charge in %, volts and amps at each bank (positive: it gives), mean power in W over each step."


def series(study: DaysStudy) -> dict[str, Floats]:
    """Every step by the names of its columns, full precision: charge at its end, all else its mean."""
    outcome = study.outcome
    sums, hours = outcome.sums, outcome.course.hours
    found: dict[str, Floats] = {}
    names = [one.name for one in outcome.banks]
    for index, name in enumerate(names):
        own = name if names.count(name) == 1 else f"{name} {names[: index + 1].count(name)}"
        found[f"{own} charge %"] = 100 * sums.charge[:, index]
        found[f"{own} V"] = sums.bank_V[:, index]
        found[f"{own} A"] = sums.bank_A[:, index]
    for index, one in enumerate(outcome.ready.plan.sources):
        if not isinstance(one, Battery):
            found[f"{one.name} W"] = sums.source_Wh[:, index] / hours
    lost = sums.network_Wh + sums.converters_Wh + sums.resistance_Wh + sums.unkept_Wh + sums.gone_Wh
    found["all loads W"] = sums.loads_Wh / hours
    found["not served W"] = unserved_W(outcome).sum(axis=1)
    found["lost W"] = lost / hours
    found["lowest at a load %"] = np.where(np.isfinite(sums.lowest_V), 100 * sums.lowest_V, np.nan)
    return found


def as_object(study: DaysStudy) -> dict[str, Any]:
    """The object that `farvolt days PLAN --json` prints: Wh, hours, SI numbers, or null."""
    course, sums = study.outcome.course, study.outcome.sums
    found: dict[str, Any] = plain({
        "output": OUTPUT,
        "plan": study.plan,
        "start": course.clock(0).isoformat(),
        "steps": len(course),
        "step_hours": course.hours,
        "day_types": sorted(set(course.day_types)),
        "low_charge": study.low_charge,
        "unserved_Wh": study.unserved_Wh,
        "loads": [asdict(one) for one in study.loads],
        "banks": [{**asdict(one), "deepest_discharge": one.deepest_discharge} for one in study.banks],
        "sources": [{"name": name, "Wh": Wh} for name, Wh in study.sources],
        "longest_unserved": _spell(study.longest_unserved),
        "longest_below": _spell(study.longest_below),
        "account": {**asdict(study.account), "error": study.account.error},
        "solutions": sums.solutions,
        "imbalance_A": sums.imbalance_A,
        "uncertified": sums.uncertified,
        "notes": study.notes,
    })  # fmt: skip
    return found


def _spell(spell: Spell | None) -> dict[str, Any] | None:
    return None if spell is None else {"start": spell.start.isoformat(), "hours": spell.hours}
