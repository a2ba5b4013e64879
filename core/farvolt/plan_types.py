"""The types of a plan's fields: each reads what the file says, holds it to its range, and says what it accepts.

Every refusal carries the problem, what is accepted and the nearest choice apart, for `planfile` to place.
"""

import difflib
import re
from collections.abc import Mapping
from typing import Annotated, Any, Literal, Self

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, TypeAdapter, WithJsonSchema
from pydantic_core import PydanticCustomError

from farvolt import conductors, units
from farvolt.errors import QuantityError
from farvolt.units import Quantity

NAME_LIMIT = 200
DAY_MINUTES = 24 * 60

# Besides controls: what breaks a line or turns the direction of the text around it.
_CONTROL = re.compile(r"[\x00-\x1f\x7f-\x9f\u2028\u2029\u202a-\u202e\u2066-\u2069]")
_SPAN = re.compile(r"([0-9]{1,2}):([0-9]{2})-([0-9]{1,2}):([0-9]{2})")
_TEMPERATURE_WORDS = ("rulebook", "rated", "ambient", "estimated")


class Entry(BaseModel):
    """Base of all tables: unknown fields are errors, values never change."""

    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True, arbitrary_types_allowed=True)

    def model_copy(self, *, update: Mapping[str, Any] | None = None, deep: bool = False) -> Self:
        """A copy with some fields changed; what was worked out from the old ones is forgotten."""
        copy = super().model_copy(update=update, deep=deep)
        fields = type(self).model_fields
        for name in [name for name in copy.__dict__ if name not in fields]:
            del copy.__dict__[name]
        return copy


def refusal(problem: str, accepted: str, nearest: str = "") -> PydanticCustomError:
    """What a validator raises: the problem in words, what is accepted, and the nearest choice."""
    return PydanticCustomError("refused", "{problem}", {"problem": problem, "accepted": accepted, "nearest": nearest})


def near(value: Any, *words: str) -> str:
    """The word nearest to `value`, in quotes, or nothing."""
    close = difflib.get_close_matches(value, words, n=1) if isinstance(value, str) else []
    return f'"{close[0]}"' if close else ""


def _translated(error: QuantityError) -> PydanticCustomError:
    return refusal(error.problem, error.accepted, error.nearest)


def _reader(
    dimension: str, *, minimum: float | None = None, above: float | None = None, maximum: float | None = None
) -> Any:
    """A validator that reads a quantity and holds it to a range in base units.

    The ranges are wide of anything that is built: what lies outside is a slip, such as a wrong unit.
    """

    def read(value: Any) -> Quantity:
        if isinstance(value, Quantity):
            return value
        example = units.EXAMPLES[dimension]
        if not isinstance(value, str):
            bare = _is_number(value)
            problem = "a bare number has no unit" if bare else "is not a text with a number and a unit"
            nearest = units.with_unit(f"{value:.15g}", dimension) if bare else ""
            raise refusal(problem, f"{units.a(dimension)} in quotes such as {example}", nearest)
        try:
            quantity = units.parse(value, dimension)
        except QuantityError as error:
            raise _translated(error) from None
        limit = _broken_limit(quantity, minimum, above, maximum)
        if limit:
            raise refusal(limit, f"{units.a(dimension)} such as {example}")
        return quantity

    return read


def _is_number(value: Any) -> bool:
    """True for a number that a float can hold."""
    return isinstance(value, int | float) and not isinstance(value, bool) and abs(value) < 1e300


def _broken_limit(value: Quantity, minimum: float | None, above: float | None, maximum: float | None) -> str:
    if above is not None and value.si <= above:
        return f"must be more than {_limit(above, value)}" if above else "must be more than zero"
    if minimum is not None and value.si < minimum:
        return f"must not be less than {_limit(minimum, value)}" if minimum else "must not be negative"
    if maximum is not None and value.si > maximum:
        return f"must not be more than {_limit(maximum, value)}"
    return ""


def _limit(si: float, of: Quantity) -> str:
    unit, factor = next(iter(units.DIMENSIONS[of.dimension].items()))
    return f"{units.number(si / factor, 6)} {unit}"


def _schema(dimension: str) -> WithJsonSchema:
    words = f"{units.a(dimension)}, such as {units.EXAMPLES[dimension]}"
    return WithJsonSchema({"type": "string", "description": words})


def _read_size(value: Any) -> conductors.Size | None:
    if value is None or isinstance(value, conductors.Size):
        return value
    if isinstance(value, str) and value.strip() == "free":
        return None
    try:
        return conductors.parse_size(value if isinstance(value, str) else f"{value:g}" if _is_number(value) else "-")
    except QuantityError as error:
        raise _translated(error) from None


def _read_stated_size(value: Any) -> conductors.Size:
    size = _read_size(value)
    if size is None:
        raise refusal("must be stated here", 'a size such as "50 mm2" or "1/0 AWG"')
    return size


def _read_name(value: Any) -> Any:
    if isinstance(value, str):
        if not value.strip():
            raise refusal("is empty", "a text")
        if len(value) > NAME_LIMIT:
            raise refusal(f"is longer than {NAME_LIMIT} characters", "a shorter text")
        if _CONTROL.search(value):
            raise refusal("holds a control character", "a text on one line")
        if value != value.strip():
            raise refusal("starts or ends with a space", "the text alone", f'"{value.strip()}"')
    return value


def _read_conductor_temperature(value: Any) -> Any:
    if value in _TEMPERATURE_WORDS or isinstance(value, Quantity):
        return value
    if not isinstance(value, str) or not re.match(r"\s*[+-]?\.?[0-9]", value):
        accepted = f'{", ".join(_TEMPERATURE_WORDS)}, or a temperature such as "60 degC"'
        raise refusal("is not a known choice", accepted, near(value, *_TEMPERATURE_WORDS))
    return _read_temperature(value)


def _day_span(span: str) -> str:
    match = _SPAN.fullmatch(span)
    parts = [int(part) for part in match.groups()] if match else []
    if not parts or parts[1] > 59 or parts[3] > 59 or max(span_minutes(span)) > DAY_MINUTES:
        raise refusal("is not a span of the day", 'a span such as "18:00-23:30"')
    start, end = span_minutes(span)
    if start == end:
        raise refusal("starts and ends at the same time", 'two times of the day, or "00:00-24:00" for all of it')
    return span


def span_minutes(span: str) -> tuple[int, int]:
    """Start and end of a span of the day, in minutes after midnight; one past midnight ends before it starts."""
    start, end = (one.split(":") for one in span.split("-"))
    return int(start[0]) * 60 + int(start[1]), int(end[0]) * 60 + int(end[1])


def day_use(value: Any) -> Any:
    """A type of day's word on one entry: its hours, or the spans of the day in which it is on."""
    accepted = 'hours from 0 to 24, or a list of spans such as ["18:00-23:30"]'
    if _is_number(value):
        if not 0 <= value <= 24:
            raise refusal("is not a number of hours in a day", accepted)
        return float(value)
    if isinstance(value, str):
        raise refusal("is neither a number nor a list", accepted, f'["{value}"]' if _SPAN.fullmatch(value) else "")
    if not isinstance(value, list | tuple) or not all(isinstance(one, str) for one in value):
        raise refusal("is neither a number nor a list", accepted)
    return tuple(_named_span(one) for one in value)


def _named_span(span: str) -> str:
    """A span among others, which a message must name."""
    try:
        return _day_span(span)
    except PydanticCustomError as error:
        context = error.context or {}
        raise refusal(f'"{span}" {context["problem"]}', context["accepted"]) from None


_read_temperature = _reader("temperature", minimum=-100, maximum=300)

Length = Annotated[Quantity, BeforeValidator(_reader("length", above=0, minimum=1e-3, maximum=1e5)), _schema("length")]
Distance = Annotated[Quantity, BeforeValidator(_reader("length", minimum=0, maximum=1e5)), _schema("length")]
Power = Annotated[Quantity, BeforeValidator(_reader("power", minimum=0, maximum=1e7)), _schema("power")]
Current = Annotated[Quantity, BeforeValidator(_reader("current", minimum=0, maximum=1e6)), _schema("current")]
Rating = Annotated[
    Quantity, BeforeValidator(_reader("current", above=0, minimum=1e-3, maximum=1e6)), _schema("current")
]
Voltage = Annotated[
    Quantity, BeforeValidator(_reader("voltage", above=0, minimum=1e-3, maximum=1500)), _schema("voltage")
]
Resistance = Annotated[
    Quantity, BeforeValidator(_reader("resistance", above=0, minimum=1e-9, maximum=1e6)), _schema("resistance")
]
AnyResistance = Annotated[
    Quantity, BeforeValidator(_reader("resistance", minimum=0, maximum=1e6)), _schema("resistance")
]
Charge = Annotated[Quantity, BeforeValidator(_reader("charge", above=0, minimum=1e-3, maximum=1e7)), _schema("charge")]
Share = Annotated[Quantity, BeforeValidator(_reader("share", minimum=0, maximum=1)), _schema("share")]
Reserve = Annotated[Quantity, BeforeValidator(_reader("share", minimum=0, maximum=0.99)), _schema("share")]
Efficiency = Annotated[Quantity, BeforeValidator(_reader("share", above=0, minimum=0.01, maximum=1)), _schema("share")]
Duration = Annotated[Quantity, BeforeValidator(_reader("time", minimum=0, maximum=1e7)), _schema("time")]
Latitude = Annotated[Quantity, BeforeValidator(_reader("angle", minimum=-90, maximum=90)), _schema("angle")]
Longitude = Annotated[Quantity, BeforeValidator(_reader("angle", minimum=-180, maximum=180)), _schema("angle")]
Tilt = Annotated[Quantity, BeforeValidator(_reader("angle", minimum=0, maximum=90)), _schema("angle")]
Bearing = Annotated[Quantity, BeforeValidator(_reader("angle", minimum=0, maximum=360)), _schema("angle")]
Temperature = Annotated[Quantity, BeforeValidator(_read_temperature), _schema("temperature")]
ConductorTemperature = Annotated[
    Quantity | Literal["rulebook", "rated", "ambient", "estimated"],
    BeforeValidator(_read_conductor_temperature),
    WithJsonSchema({"type": "string", "description": 'rulebook | rated | ambient | estimated | such as "60 degC"'}),
]
CableSize = Annotated[
    conductors.Size | None,
    BeforeValidator(_read_size),
    WithJsonSchema(
        {"type": "string", "description": 'a conductor size, such as "6 mm2", "10 AWG", "10 SAE", or "free"'}
    ),
]
StatedSize = Annotated[
    conductors.Size,
    BeforeValidator(_read_stated_size),
    WithJsonSchema({"type": "string", "description": 'a conductor size, such as "50 mm2" or "1/0 AWG"'}),
]
Name = Annotated[str, BeforeValidator(_read_name), Field(strict=True)]
Text = Annotated[str, Field(strict=True, max_length=10_000)]
Count = Annotated[int, Field(strict=True, ge=1, le=1000)]
WholeNumber = Annotated[int, Field(strict=True, ge=0, le=1000)]
Flag = Annotated[bool, Field(strict=True)]
Factor = Annotated[float, Field(strict=True, ge=0, le=1000, allow_inf_nan=False)]
Multiple = Annotated[float, Field(strict=True, gt=0, le=1000, allow_inf_nan=False)]
Overload = Annotated[float, Field(strict=True, ge=1, le=1000, allow_inf_nan=False)]
Times = Annotated[float, Field(strict=True, ge=1, le=10, allow_inf_nan=False)]
Exponent = Annotated[float, Field(strict=True, ge=1, le=2, allow_inf_nan=False)]
Ratio = Annotated[float, Field(strict=True, ge=0, le=1, allow_inf_nan=False)]
Seconds = Annotated[float, Field(strict=True, gt=0, le=3600, allow_inf_nan=False)]
Hours = Annotated[float, Field(strict=True, ge=0, le=24, allow_inf_nan=False)]
DischargeHours = Annotated[float, Field(strict=True, gt=0, le=1000, allow_inf_nan=False)]
DaySpan = Annotated[str, Field(strict=True), AfterValidator(_day_span)]

shares = TypeAdapter(dict[str, Factor])
"""Reads the loads of a case, by name."""
