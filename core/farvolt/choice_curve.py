"""What it costs to tighten or loosen the limits of drop: a choice at each of several times what the rulebook allows."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from farvolt.choice_options import Wishes
from farvolt.choose import Report, choose
from farvolt.plan import Plan
from farvolt.rulebook import Rulebook

FACTORS = (0.5, 0.67, 0.8, 1.0, 1.25, 1.5, 2.0)
"""Times the limits of drop."""


@dataclass(frozen=True, slots=True)
class Point:
    """The cost of a choice under limits of drop that are so many times those of the rulebook."""

    factor: float
    cost: float | None
    """None where nothing passes, or nothing was found in time."""
    bound: float


def curve(
    plan: Plan, rulebook: Rulebook, wishes: Wishes, report: Report = lambda progress: None,
    factors: Sequence[float] = FACTORS,
) -> Iterator[Point]:  # fmt: skip
    """One point after the other, so that those found can be shown meanwhile; the time limit is for each."""
    for factor in factors:
        found = choose(plan, rulebook, replace(wishes, drop_factor=factor), report)
        yield Point(factor, found.cost, found.bound)
