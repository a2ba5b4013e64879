"""Reads the fields of a TOML table one by one, with their type and range; what is left unread is unknown.

Every fault is raised as one sentence that names the table, the field, the value and what is accepted.
"""

import difflib
import itertools
from collections.abc import Callable, Sequence

Raise = Callable[[str], Exception]


class Fields:
    """One TOML table being read. `fault` makes the exception to raise from a sentence."""

    def __init__(self, values: dict[str, object], place: str, fault: Raise) -> None:
        self._values = values
        self.place = place
        self.fault = fault
        self._known: list[str] = []

    def __contains__(self, key: str) -> bool:
        return key in self._values

    def fail(self, key: str, problem: str) -> Exception:
        """The exception for a fault of one field."""
        where = f"{self.place}, {key}" if self.place else key
        given = f" (given: {_short(repr(self._values[key]))})" if key in self._values else ""
        sentence = f"{where}: {problem}{given}"
        # A quoted key may hold line ends and worse; the message stays one line of plain text.
        return self.fault("".join(c if c.isprintable() else "?" for c in sentence))

    def text(self, key: str, default: str | None = None) -> str:
        """A text that is not empty, unless the default is taken."""
        value = self._take(key, default, "a text")
        if not isinstance(value, str):
            raise self.fail(key, "must be a text in quotes")
        if not value.strip() and default is None:
            raise self.fail(key, "must not be empty")
        return value.strip()

    def flag(self, key: str, default: bool | None = None) -> bool:
        """true or false."""
        value = self._take(key, default, "true or false")
        if not isinstance(value, bool):
            raise self.fail(key, "must be true or false")
        return value

    def number(self, key: str, low: float, high: float, default: float | None = None) -> float:
        """A number from `low` to `high`, both included; a field without default must be there."""
        value = self._take(key, default, f"a number from {low:g} to {high:g}")
        return self._checked(key, value, low, high)

    def number_or_none(self, key: str, low: float, high: float) -> float | None:
        """The same for a field that may be absent."""
        self._known.append(key)
        return self.number(key, low, high) if key in self else None

    def numbers(self, key: str, low: float, high: float) -> tuple[float, ...]:
        """A list of rising numbers from `low` to `high`, at least one."""
        values = self._list(key, None)
        found = tuple(self._checked(key, value, low, high) for value in values)
        if not found or any(a >= b for a, b in itertools.pairwise(found)):
            raise self.fail(key, "must be a list of rising numbers")
        return found

    def choice(self, key: str, accepted: Sequence[str], default: str | None = None) -> str:
        """One of the accepted texts."""
        return self._one_of(key, self.text(key, default), accepted)

    def choices(self, key: str, accepted: Sequence[str], default: Sequence[str] | None = None) -> tuple[str, ...]:
        """A list of accepted texts."""
        return tuple(self._one_of(key, value, accepted) for value in self.texts(key, default))

    def texts(self, key: str, default: Sequence[str] | None = None) -> tuple[str, ...]:
        """A list of texts."""
        found: list[str] = []
        for value in self._list(key, default):
            if not isinstance(value, str):
                raise self.fail(key, "must be a list of texts in quotes")
            found.append(value)
        return tuple(found)

    def table(self, key: str) -> "Fields | None":
        """A table within this one, or None where it is absent."""
        self._known.append(key)
        if key not in self:
            return None
        return self._sub(key, self._values[key], key)

    def tables(self, key: str) -> list["Fields"]:
        """A list of tables; empty where it is absent."""
        return [self._sub(key, v, f"{key} {n}") for n, v in enumerate(self._list(key, ()), start=1)]

    def named_tables(self) -> dict[str, "Fields"]:
        """Every field as a table under its name."""
        self._known.extend(self._values)
        return {key: self._sub(key, value, key) for key, value in self._values.items()}

    def know(self, keys: Sequence[str]) -> None:
        """Marks fields as known though they may be absent."""
        self._known.extend(keys)

    def done(self) -> None:
        """Raises for a field that nothing has read, naming the nearest known one."""
        for key in self._values:
            if key not in self._known:
                near = difflib.get_close_matches(key, self._known, n=1, cutoff=0.5)
                hint = f"; did you mean {near[0]}?" if near else f"; known: {', '.join(self._known)}"
                raise self.fail(key, f"unknown field{hint}")

    def _take(self, key: str, default: object, accepted: str) -> object:
        self._known.append(key)
        if key in self._values:
            return self._values[key]
        if default is None:
            raise self.fail(key, f"is missing; accepted: {accepted}")
        return default

    def _list(self, key: str, default: Sequence[object] | None) -> list[object]:
        value = self._take(key, default, "a list")
        if not isinstance(value, (list, tuple)):
            raise self.fail(key, "must be a list in square brackets")
        return list(value)

    def _checked(self, key: str, value: object, low: float, high: float) -> float:
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise self.fail(key, f"must be a number from {low:g} to {high:g}")
        if not low <= value <= high:  # true of NaN as well
            raise self.fail(key, f"must lie from {low:g} to {high:g}")
        return float(value)

    def _one_of(self, key: str, value: str, accepted: Sequence[str]) -> str:
        if value in accepted:
            return value
        near = difflib.get_close_matches(value, accepted, n=1, cutoff=0.5)
        hint = f'; did you mean "{near[0]}"?' if near else ""
        raise self.fail(key, f'"{value}" is not known; accepted: {", ".join(accepted)}{hint}')

    def _sub(self, key: str, value: object, name: str) -> "Fields":
        if not isinstance(value, dict):
            raise self.fail(key, "must be a table")
        return Fields(value, f"{self.place}.{name}" if self.place else name, self.fault)


def _short(text: str) -> str:
    return text if len(text) <= 60 else text[:57] + "..."
