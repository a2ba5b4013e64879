"""The errors a caller may meet. All others are defects.

FarvoltError
├── PlanError        a plan file that cannot be used; carries every fault found
├── RulebookError    a rulebook that cannot be read, or does not exist
├── PriceListError   a price list that cannot be used; carries every fault found
├── DataError        a shipped table that contradicts itself
├── SaveError        a file that cannot be written, or changed on disk meanwhile
└── QuantityError    a text that is not a quantity of the expected kind
    └── SizeError    a conductor size that no table knows
"""

from dataclasses import dataclass


class FarvoltError(Exception):
    """Base of all errors meant for people; `str()` is one clear message."""


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing wrong in a plan file, with its place and the way out."""

    place: str
    """Table and entry, such as `runs "galley feed"`; empty for the file as a whole."""
    field: str
    """Field within the entry, such as `length`; empty when the entry as a whole is meant."""
    given: str
    """What stands there, as written."""
    problem: str
    """What is wrong, in words."""
    accepted: str = ""
    """What would be accepted."""
    nearest: str = ""
    """The nearest valid choice, if there is one."""
    line: int | None = None
    """Line in the file, counted from 1, where it can be known."""

    def __str__(self) -> str:
        where = ", ".join(part for part in (self.place, self.field) if part)
        text = f"{where}: {self.problem}" if where else self.problem
        if self.given:
            text += f" (given: {self.given})"
        if self.accepted:
            text += f"; accepted: {self.accepted}"
        if self.nearest:
            text += f"; did you mean {self.nearest}?"
        return f"line {self.line}: {text}" if self.line else text


class PlanError(FarvoltError):
    """A plan that cannot be used. `faults` holds every fault of the file, in file order."""

    def __init__(self, faults: list[Fault], source: str = "") -> None:
        self.faults = faults
        self.source = source
        head = f"{source}: " if source else ""
        super().__init__("\n".join(f"{head}{fault}" for fault in faults))


class RulebookError(FarvoltError):
    """A rulebook that does not exist or cannot be read."""


class PriceListError(FarvoltError):
    """A price list that cannot be used. `faults` holds what is wrong with it, by row."""

    def __init__(self, faults: list[Fault], source: str = "") -> None:
        self.faults = faults
        head = f"{source}: " if source else ""
        super().__init__("\n".join(f"{head}{fault}" for fault in faults))


class ChoiceError(FarvoltError):
    """A choice that cannot be begun: nothing to choose, or nothing to choose from."""

    def __init__(self, problem: str, accepted: str) -> None:
        self.problem, self.accepted = problem, accepted
        super().__init__(f"{problem}; accepted: {accepted}")


class DataError(FarvoltError):
    """A shipped table that contradicts itself or lacks what it must hold."""


class SaveError(FarvoltError):
    """A file that could not be written; what was there before is untouched."""


class QuantityError(FarvoltError):
    """A text that is not a quantity of the expected kind."""

    def __init__(self, problem: str, *, accepted: str = "", nearest: str = "") -> None:
        self.problem = problem
        self.accepted = accepted
        self.nearest = nearest
        super().__init__(problem)


class SizeError(QuantityError):
    """A conductor size that no table knows."""
