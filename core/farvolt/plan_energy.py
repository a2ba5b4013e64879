"""The tables of a plan that speak of energy over days: the site, the bank that is asked for, and types of day."""

import difflib
import re
from typing import Annotated, Any

from pydantic import BeforeValidator, Field, WithJsonSchema, field_validator

from farvolt import units
from farvolt.plan_types import (
    Charge,
    DaySpan,
    DischargeHours,
    Efficiency,
    Entry,
    Hours,
    Latitude,
    Longitude,
    Name,
    Rating,
    Ratio,
    Share,
    Temperature,
    Text,
    Times,
    Voltage,
    day_use,
    near,
    refusal,
)

MONTHS = (
    "January", "February", "March", "April", "May", "June",
    "July", "August", "September", "October", "November", "December",
)  # fmt: skip
WEEKDAYS = ("Monday", "Tuesday", "Wednesday", "Thursday", "Friday", "Saturday", "Sunday")

_ZONE = re.compile(r"[A-Za-z0-9_+-]+(/[A-Za-z0-9_+-]+)*")


def _place_of(word: Any, words: tuple[str, ...]) -> int | None:
    """Place of a name, or of its first three letters, in `words`."""
    small = word.casefold() if isinstance(word, str) else ""
    found = [place for place, one in enumerate(words) if small in (one.casefold(), one[:3].casefold())]
    return found[0] if found else None


def _read_month(value: Any) -> int:
    if isinstance(value, int) and not isinstance(value, bool) and 1 <= value <= 12:
        return value
    place = _place_of(value, MONTHS)
    if place is None:
        raise refusal("is not a month", '1 to 12, or a name such as "December"', near(value, *MONTHS))
    return place + 1


def _read_weekday(value: Any) -> int:
    place = _place_of(value, WEEKDAYS)
    if place is None:
        raise refusal("is not a day of the week", 'a name such as "Saturday"', near(value, *WEEKDAYS))
    return place


def _read_time_zone(value: Any) -> Any:
    import zoneinfo

    accepted = 'the name of a time zone such as "Europe/Oslo" or "UTC"'
    if not isinstance(value, str) or not _ZONE.fullmatch(value):
        raise refusal("is not the name of a time zone", accepted)
    try:
        zoneinfo.ZoneInfo(value)
    except (zoneinfo.ZoneInfoNotFoundError, ValueError, OSError):
        # Looking for the nearest walks through all zones, so that only a wrong name costs the time.
        close = difflib.get_close_matches(value, sorted(zoneinfo.available_timezones()), n=1)
        raise refusal("there is no such time zone", accepted, f'"{close[0]}"' if close else "") from None
    return value


Month = Annotated[
    int,
    BeforeValidator(_read_month),
    WithJsonSchema(
        {
            "anyOf": [{"type": "integer", "minimum": 1, "maximum": 12}, {"type": "string"}],
            "description": 'a month, 1 to 12 or a name such as "December"',
        }
    ),
]
"""A month, 1 to 12."""

Weekday = Annotated[
    int,
    BeforeValidator(_read_weekday),
    WithJsonSchema({"type": "string", "description": 'a day of the week such as "Saturday"'}),
]
"""A day of the week, 0 (Monday) to 6."""

TimeZone = Annotated[
    str,
    BeforeValidator(_read_time_zone),
    WithJsonSchema({"type": "string", "description": 'a time zone such as "Europe/Oslo"'}),
]

DayUse = Annotated[
    float | tuple[DaySpan, ...],
    BeforeValidator(day_use),
    WithJsonSchema(
        {
            "anyOf": [
                {"type": "number", "minimum": 0, "maximum": 24},
                {"type": "array", "items": {"type": "string"}},
            ],
            "description": 'hours from 0 to 24, or a list of spans such as ["18:00-23:30"]',
        }
    ),
]
"""Hours on in a day, at no stated time, or the spans of the day in which it is on."""


class Site(Entry):
    """Table `site`: where on the earth the plan stands, for the sun."""

    latitude: Latitude
    """North of the equator; south is negative."""
    longitude: Longitude
    """East of Greenwich; west is negative."""
    time_zone: TimeZone
    clearness: tuple[Ratio, ...] = ()
    """Clearness index of each month, January first: sun on level ground over that outside the atmosphere."""
    albedo: Share = units.parse("20 %", "share")
    """Share of the light that the ground around the array throws back."""

    @field_validator("clearness")
    @classmethod
    def _a_year(cls, value: tuple[float, ...]) -> tuple[float, ...]:
        if len(value) not in (0, 12):
            raise refusal(f"has {len(value)} numbers, not one for each month", "12 numbers from 0 to 1, January first")
        return value


class DischargeRate(Entry):
    """A line of a data sheet's table: a constant current that the block gives for so long."""

    hours: DischargeHours
    current: Rating


class Block(Entry):
    """The block that a bank is made of, for sizing."""

    nominal: Voltage
    capacity: Charge
    rates: tuple[DischargeRate, ...] = ()
    """Its constant-current discharge table at 25 °C; by Peukert's law from its capacity unless stated."""


class Bank(Entry):
    """Table `bank`: what the bank of the reference battery is asked for."""

    autonomy: Annotated[float, Field(strict=True, gt=0, le=60, allow_inf_nan=False)] = 1.0
    """Days that it carries the loads alone."""
    depth_of_discharge: Efficiency | None = None
    """At the end of those days; all above the battery's `least_charge` unless stated."""
    daily_depth_of_discharge: Efficiency | None = None
    """In one day, where its maker states one for the sake of its life."""
    ageing: Times = 1.25
    """Capacity when new over that at the end of its life."""
    margin: Times = 1.1
    """For what is not foreseen."""
    coldest: Temperature | None = None
    """Lowest temperature of the battery itself; the ambient where it stands unless stated."""
    design_day: Name | None = None
    """The type of day it is sized for; the one that takes most unless stated."""
    block: Block | None = None
    """The block to build it of; one string of the battery unless stated."""


class DayType(Entry):
    """Table `days`: a type of day, and what is on in it. What it does not name keeps its own hours."""

    name: Name
    months: tuple[Month, ...] = ()
    """In which it occurs; all unless stated."""
    weekdays: tuple[Weekday, ...] = ()
    """On which it occurs; all unless stated."""
    loads: dict[str, DayUse] = Field(default_factory=dict)
    sources: dict[str, DayUse] = Field(default_factory=dict)
    """When chargers run."""
    peak_sun_hours: Hours | None = None
    """Sun on the plane of the array, in hours of 1 kW/m²."""
    notes: Text = ""

    def occurs(self, month: int, weekday: int) -> bool:
        """Whether it occurs in a month (1 to 12) on a day of the week (0: Monday)."""
        return (not self.months or month in self.months) and (not self.weekdays or weekday in self.weekdays)


