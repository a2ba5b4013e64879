"""What is given over days, step by step: which loads are on and how far, which chargers run, what the sun gives.

Times of day are those of the site's clock. A load with hours but no times is spread over the waking day at a share of
its power, and a charger with hours but no times runs in one block of the morning: both are said in the notes.
"""

import datetime as dt
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from farvolt import irradiance_file
from farvolt.day_light import Sky, bank_degC, listed, sunlight
from farvolt.energy import Spans, Use, charger_use, load_use
from farvolt.errors import FarvoltError
from farvolt.irradiance_file import IrradianceTable
from farvolt.network import Floats
from farvolt.plan import Charger, DayType, Plan
from farvolt.plan_types import DAY_MINUTES

WAKING: Spans = ((7 * 60, 23 * 60),)
"""Where hours without times are spread: from 7 to 23 o'clock."""

WAKING_HOURS = 16.0

CHARGING_FROM = 9 * 60
"""When a charger with hours but no times starts."""

MOST_STEPS = 600_000

STEP_MINUTES = tuple(minutes for minutes in range(1, 61) if DAY_MINUTES % minutes == 0)
"""Lengths of step that divide a day."""


@dataclass(frozen=True)
class Course:
    """Over steps: `edges_s` (UTC, one more than steps), shares of loads and of sources, temperature of the banks."""

    edges_s: Floats
    zone: dt.tzinfo
    loads: Floats
    """(step, load): share of its rated power, its duty included."""
    idle: Floats
    """(step, load): share of the step in which an inverter idles."""
    sources: Floats
    """(step, source): share of a charger's current; of a solar source's rated power."""
    bank_degC: Floats
    day_types: tuple[str, ...]
    """The type of each day."""
    notes: tuple[str, ...]

    def __len__(self) -> int:
        return len(self.edges_s) - 1

    @property
    def hours(self) -> float:
        """Length of a step."""
        return float(self.edges_s[1] - self.edges_s[0]) / 3600

    def first(self, steps: int) -> "Course":
        """The first steps alone."""
        return replace(
            self, edges_s=self.edges_s[: steps + 1], loads=self.loads[:steps], idle=self.idle[:steps],
            sources=self.sources[:steps], bank_degC=self.bank_degC[:steps],
        )  # fmt: skip

    def clock(self, step: int) -> dt.datetime:
        """When a step begins, on the clock of the site."""
        return dt.datetime.fromtimestamp(float(self.edges_s[step]), dt.UTC).astimezone(self.zone)


@dataclass(frozen=True)
class Period:
    """Which days: from midnight of `start`, `days` of them, in steps of so many minutes."""

    start: dt.date
    days: int
    step_min: int = 60

    def __post_init__(self) -> None:
        if self.step_min not in STEP_MINUTES:
            near = min(STEP_MINUTES, key=lambda one: abs(one - self.step_min))
            raise FarvoltError(f"a step of {self.step_min} min does not divide the day; accepted: 1 to 60 min that do, "
                               f"such as {near} min")  # fmt: skip
        if not 1 <= self.days <= 3660:
            raise FarvoltError(f"{self.days} days; accepted: 1 to 3660")
        if not 1950 <= self.start.year <= 2150:
            raise FarvoltError(f"the year {self.start.year}; accepted: 1950 to 2150")
        if self.days * (DAY_MINUTES // self.step_min) > MOST_STEPS:
            raise FarvoltError(f"{self.days} days of {self.step_min} min are more than {MOST_STEPS} steps; accepted: "
                               "fewer days, or longer steps")  # fmt: skip


def course(
    plan: Plan,
    period: Period,
    *,
    table: IrradianceTable | None = None,
    day: str | None = None,
    ambient_degC: float | None = None,
    charging: bool = True,
) -> Course:
    """The course of a plan over a period. `day` names a type of day that all days are; without `charging` no
    charger and no sun work. Raises FarvoltError."""
    zone = clock(plan)
    start = dt.datetime.combine(period.start, dt.time(), zone).timestamp()
    last = dt.datetime.combine(period.start + dt.timedelta(days=period.days), dt.time(), zone).timestamp()
    edges = np.arange(start, last + 1, 60.0 * period.step_min)
    local = [dt.datetime.fromtimestamp(one, zone) for one in edges[:-1].tolist()]
    minutes = np.array([one.hour * 60 + one.minute for one in local], dtype=float)
    dates = np.array([one.toordinal() for one in local])
    types = [_day_type(plan, dt.date.fromordinal(one), day) for one in np.unique(dates).tolist()]
    kind = np.searchsorted(np.unique(dates), dates)
    spans = _Spread(types, kind, minutes, float(period.step_min))
    notes: list[str] = []
    loads, idle = _loads(plan, spans, notes)
    sources = np.zeros((len(minutes), len(plan.sources)))
    air = None
    if charging:
        _chargers(plan, spans, sources, notes)
        hours = np.array([(one.peak_sun_hours or 0.0) if one else 0.0 for one in types])[kind]
        sky = Sky(edges, dates, minutes, hours, table, ambient_degC)
        air = sunlight(plan, sky, sources, notes)
    degC = bank_degC(plan, air, ambient_degC, len(minutes))
    return Course(edges, zone, loads, idle, sources, degC, tuple(one.name if one else "every day" for one in types),
                  tuple(notes))  # fmt: skip


def clock(plan: Plan) -> dt.tzinfo:
    """The clock of the plan's site; UTC without one."""
    if plan.site is None:
        return dt.UTC
    return irradiance_file.time_zone(plan.site.time_zone, plan.site.longitude.si)


def _day_type(plan: Plan, date: dt.date, named: str | None) -> DayType | None:
    """The type of a date: the first of the plan's that occurs then."""
    if named is not None:
        found = next((one for one in plan.days if one.name == named), None)
        if found is None:
            known = ", ".join(f'"{one.name}"' for one in plan.days) or "none, the plan states no types of day"
            raise FarvoltError(f'no type of day is called "{named}"; accepted: {known}')
        return found
    return next((one for one in plan.days if one.occurs(date.month, date.weekday())), None)


@dataclass(frozen=True)
class _Spread:
    """Brings the uses of each type of day to shares of steps."""

    types: Sequence[DayType | None]
    kind: np.ndarray
    """Over steps: the day, a place in `types`."""
    minutes: Floats
    """Over steps: minutes after midnight at which they begin."""
    step_min: float

    @cached_property
    def kinds(self) -> list[DayType | None]:
        """Every type of day that occurs, once."""
        return list({one.name if one else None: one for one in self.types}.values())

    def share(self, use: Callable[[DayType | None], tuple[Spans, float]]) -> Floats:
        """Over steps: the part of each that lies in the spans of its day, times the factor that goes with them."""
        found = np.zeros(len(self.minutes))
        known: dict[str | None, np.ndarray] = {}
        for place, day in enumerate(self.types):
            known.setdefault(day.name if day else None, np.zeros(len(self.types), dtype=bool))[place] = True
        for name, days in known.items():
            spans, factor = use(next(one for one in self.types if (one.name if one else None) == name))
            steps = days[self.kind]
            begin = self.minutes[steps]
            inside = np.zeros(len(begin))
            for start, end in spans:
                inside += np.clip(np.minimum(begin + self.step_min, end) - np.maximum(begin, start), 0.0, None)
            found[steps] = factor * inside / self.step_min
        return found


def _spread(use: Use) -> tuple[Spans, float]:
    """The times of a load's use and its share then: as stated, else over the waking day, else over all of it."""
    if use.spans or use.hours == 0:
        return use.spans, 1.0
    if use.hours <= WAKING_HOURS:
        return WAKING, use.hours / WAKING_HOURS
    return ((0, DAY_MINUTES),), use.hours / 24


def _block(use: Use) -> Spans:
    """The times of a charger: as stated, else one block."""
    if use.spans or use.hours == 0:
        return use.spans
    length = round(use.hours * 60)
    start = min(CHARGING_FROM, DAY_MINUTES - length)
    return ((start, start + length),)


def _loads(plan: Plan, spans: _Spread, notes: list[str]) -> tuple[Floats, Floats]:
    shares, idle = np.zeros((2, len(spans.minutes), len(plan.loads)))
    spread, silent = [], []
    for index, load in enumerate(plan.loads):
        uses = [load_use(load, day) for day in spans.kinds]
        if not any(use.stated for use in uses):
            silent.append(load.name)
        if any(use.hours > 0 and not use.spans for use in uses):
            spread.append(load.name)
        duty = load.duty.si if load.duty is not None else 1.0
        shares[:, index] = duty * spans.share(lambda day, load=load: _spread(load_use(load, day)))  # type: ignore[misc]
        if load.standby is not None:
            idle[:, index] = spans.share(lambda day, load=load: _idle(load_use(load, day)))  # type: ignore[misc]
    if spread:
        notes.append(f"Spread evenly from 7 to 23 o'clock (over 16 h: the whole day), as no times are stated: "
                     f"{listed(spread)}. Shorter peaks draw more than this and drop more.")  # fmt: skip
    if silent:
        notes.append(f"Never on, for want of hours_per_day or schedule: {listed(silent)}.")
    return shares, idle


def _idle(use: Use) -> tuple[Spans, float]:
    """When an inverter idles: by its times where they are stated, else all day if it is used at all."""
    if use.hours == 0:
        return (), 0.0
    return (use.spans, 1.0) if use.spans else (((0, DAY_MINUTES),), 1.0)


def _chargers(plan: Plan, spans: _Spread, sources: Floats, notes: list[str]) -> None:
    blocks, never = [], []
    for index, one in enumerate(plan.sources):
        if isinstance(one, Charger):
            uses = [charger_use(one, day) for day in spans.kinds]
            never += [one.name] if not any(use.hours > 0 for use in uses) else []
            blocks += [one.name] if any(use.hours > 0 and not use.spans for use in uses) else []
            sources[:, index] = spans.share(lambda day, one=one: (_block(charger_use(one, day)), 1.0))  # type: ignore[misc]
    if blocks:
        notes.append(f"Run in one block from 9 o'clock, as no times are stated: {listed(blocks)}.")
    if never:
        notes.append(f"Never charge, as the plan states no hours for them: {listed(never)}.")
