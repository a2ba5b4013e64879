"""Metric or American units in tables of results, whatever the plan is written in. The plan itself never changes."""

from collections.abc import Sequence
from typing import Any, Literal

from farvolt.units import feet

Units = Literal["metric", "american"]
NAMES: dict[Units, str] = {"metric": "metric", "american": "American"}

_POUND_KG = 0.45359237  # exact by the international yard and pound agreement of 1959
_AMERICAN = {"m": "ft", "kg": "lb", "degC": "degF", "°C": "°F"}
_METRIC = {american: metric for metric, american in _AMERICAN.items()}


def rows(given: Sequence[dict[str, Any]], units: Units) -> list[dict[str, Any]]:
    """The rows with lengths, masses and temperatures in one system, under headings such as "Length (ft)".

    Of a column that is there in both systems the other one is left out; one that is there in metric is converted.
    """
    return [_row(row, units) for row in given]


def _row(row: dict[str, Any], units: Units) -> dict[str, Any]:
    found = {}
    for heading, value in row.items():
        stem, unit = _split(heading)
        other = (_METRIC if units == "metric" else _AMERICAN).get(unit)
        twin = f"{stem} ({other})"
        if other is None or (units == "metric" and twin not in row):
            found[heading] = value
        elif twin not in row:
            found[twin] = _converted(value, unit)
    return found


def _split(heading: str) -> tuple[str, str]:
    """A heading and the unit in brackets at its end."""
    stem, bracket, unit = heading.rpartition(" (")
    return (stem, unit.removesuffix(")")) if bracket and unit.endswith(")") else (heading, "")


def _converted(value: Any, unit: str) -> Any:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return value
    if unit == "m":
        return feet(value)
    return value / _POUND_KG if unit == "kg" else value * 9 / 5 + 32
