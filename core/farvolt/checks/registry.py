"""Where a check says its rule, its title and what it reads of the rulebook."""

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass

from farvolt.context import Context
from farvolt.plan import Run
from farvolt.results import Finding, Severity
from farvolt.units import number

Function = Callable[[Context], Iterator[Finding]]


@dataclass(frozen=True, slots=True)
class Check:
    """A registered check."""

    rules: tuple[str, ...]
    title: str
    reads: tuple[str, ...]
    """Entries of the rulebook that the check needs."""
    run: Function


_CHECKS: dict[str, Check] = {}


def check(*rules: str, title: str, reads: tuple[str, ...] = ()) -> Callable[[Function], Function]:
    """Register a check that reports under `rules`."""

    def register(function: Function) -> Function:
        _CHECKS[f"{function.__module__}.{function.__name__}"] = Check(rules, title, reads, function)
        return function

    return register


def cannot_be_made(context: Context, rule: str, entry: str, what: str, severity: Severity = "warn") -> Finding:
    """What a check says, once, where the rulebook lacks the entry it needs: never silence."""
    book = context.rulebook
    reason = book.missing.get(entry, "the rulebook gives no reason")
    return Finding(
        rule, severity, context.plan.plan.name, "plan", None, None, None, None,
        f'Not checked: {what}. The rulebook "{book.name}" has no entry "{entry}"', book.title,
        (f"{entry}: {reason}",), "judge it by hand, or add the entry to a rulebook of your own",
    )  # fmt: skip


def run_finding(
    rule: str, severity: Severity, run: Run, value: float | None, limit: float | None, unit: str | None,
    message: str, basis: str, working: tuple[str, ...], remedy: str | None, case: str | None = None,
) -> Finding:  # fmt: skip
    """A finding on a run."""
    shown = tuple(line for line in working if line)
    return Finding(rule, severity, run.name, "run", case, value, limit, unit, message, basis, shown, remedy)


def apart(value: float, limit: float, digits: int = 3) -> str:
    """A value rounded for reading, with as many digits as keep it apart from the limit it breaks."""
    enough = (more for more in range(digits, 12) if number(value, more) != number(limit, more))
    return number(value, next(enough, digits))


def at_least(value: float, digits: int = 3) -> str:
    """A value rounded up for reading: what a remedy asks for must not fall short of what is needed."""
    step = 10 ** (math.floor(math.log10(value)) - digits + 1) if value > 0 else 1.0
    return number(math.ceil(value / step - 1e-9) * step, digits)


def registered() -> tuple[Check, ...]:
    """All checks registered so far."""
    return tuple(_CHECKS.values())
