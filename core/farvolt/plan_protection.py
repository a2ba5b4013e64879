"""The tables of a plan that speak of protection: fuses and breakers on runs, and types of the plan's own."""

from collections.abc import Mapping
from functools import cached_property
from typing import Literal

from pydantic import PrivateAttr, field_validator, model_validator

from farvolt import units
from farvolt.plan_types import (
    AnyResistance,
    Distance,
    Duration,
    Entry,
    Name,
    Overload,
    Rating,
    Share,
    Temperature,
    Text,
    Voltage,
    refusal,
)
from farvolt.protection_types import ProtectionType, protection_type
from farvolt.time_current import Band, Gate, band, contradiction

STATED = "stated in the plan, from its data sheet"


class Protection(Entry):
    """A fuse or breaker on a run, at one of its ends and in one of its poles."""

    type: Name
    """A type shipped, or one of the plan's own."""
    rating: Rating
    distance: Distance | None = None
    """Along the conductor from that end of the run."""
    end: Literal["from", "to"] = "from"
    pole: Literal["feed", "return"] = "feed"
    volts: Voltage | None = None
    interrupting: Rating | None = None
    resistance: AnyResistance | None = None
    _own: ProtectionType | None = PrivateAttr(default=None)
    """Set by the plan, where `type` is one of its own."""

    @cached_property
    def kind(self) -> ProtectionType:
        """Its type. Raises QuantityError for a name that is neither shipped nor the plan's own."""
        return self._own or protection_type(self.type)

    def is_of(self, own: Mapping[str, ProtectionType]) -> None:
        """Let it know the plan's own types. For the plan alone, while it is being read."""
        self._own = own.get(self.type)
        self.__dict__.pop("kind", None)


class OpeningTime(Entry):
    """What a data sheet says of a device's opening time at one multiple of its rating."""

    times: Overload
    """Current over rated current."""
    within: Duration | None = None
    """It has opened by then."""
    not_before: Duration | None = None
    """It does not open before."""

    @model_validator(mode="after")
    def _says_something(self) -> "OpeningTime":
        if self.within is None and self.not_before is None:
            raise refusal("says nothing of the time", 'within = "600 s", not_before = "0.75 s", or both')
        if self.within is not None and self.within.si == 0:
            raise refusal("nothing opens within no time", 'within above zero, such as "20 ms"')
        return self

    @property
    def gate(self) -> Gate:
        """The same as numbers."""
        least, greatest = self.not_before, self.within
        return Gate(self.times, least.si if least else None, greatest.si if greatest else None)


class OwnProtection(Entry):
    """Table `protection_types`: a type of fuse or breaker that is not shipped, from its data sheet."""

    title: Name | None = None
    kind: Literal["fuse", "breaker"]
    ratings: tuple[Rating, ...]
    """Ratings that it is made in."""
    volts: Voltage
    interrupting: Rating
    """Greatest fault current it clears at `volts`."""
    drop: Voltage = units.parse("100 mV", "voltage")
    """Voltage across it at rated current."""
    band: tuple[OpeningTime, ...] = ()
    """Its time-current curve, by rising multiples of the rating; two entries at one multiple are a step."""
    derating: Share = units.parse("0 %", "share")
    """Share of its rating lost for each kelvin of ambient above `derating_above`."""
    derating_above: Temperature = units.parse("25 degC", "temperature")
    notes: Text = ""

    @field_validator("ratings")
    @classmethod
    def _some_rating(cls, value: tuple[units.Quantity, ...]) -> tuple[units.Quantity, ...]:
        if not value:
            raise refusal("is empty", 'a list of ratings such as ["20 A", "30 A"]')
        return value

    @field_validator("band")
    @classmethod
    def _one_curve(cls, value: tuple[OpeningTime, ...]) -> tuple[OpeningTime, ...]:
        problem = contradiction([one.gate for one in value])
        if problem:
            raise refusal(problem, "multiples that rise, and times that do not")
        return value

    @property
    def curve(self) -> Band:
        """The time-current band."""
        return band([one.gate for one in self.band])

    def as_type(self, name: str) -> ProtectionType:
        """The type as the checks know it."""
        return ProtectionType(
            name=name,
            title=self.title or name,
            kind=self.kind,
            ratings_A=tuple(sorted({one.si for one in self.ratings})),
            volts=self.volts.si,
            interrupting_A=self.interrupting.si,
            interrupting=((self.volts.si, self.interrupting.si),),
            drop_at_rating_mV=1000 * self.drop.si,
            basis=STATED,
            provisional=False,
            band=self.curve,
            derating_per_K=self.derating.si,
            reference_degC=self.derating_above.si,
            times_basis=STATED,
            own=True,
        )
