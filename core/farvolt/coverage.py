"""What the lowest and highest of a number of samples can claim, whatever the distribution they are drawn from.

Order statistics: the share of a distribution beyond the r-th of n samples is a beta variable, so that the claim needs
no assumption on its form (S. S. Wilks, Annals of Mathematical Statistics 12, 1941, and 13, 1942).
"""

import math

COVERAGES = (0.999, 0.99, 0.95, 0.9)
"""Shares that a claim is made for, the greatest that the samples allow."""

SURE = 0.95
"""Confidence that a claim on a whole table shall have."""


def confidence(samples: int, coverage: float, before: int = 0) -> float:
    """Confidence that at least a share `coverage` of the distribution lies above the lowest sample but `before`.

    1 − coverage^n for the lowest itself: the chance that not all n samples fall into that share. With `before`
    samples left out below it, 1 − Σ C(n, i) (1 − coverage)^i coverage^(n − i) for i from 0 to `before`.
    """
    if samples <= before or not 0 < coverage < 1:
        return 0.0
    missed = sum(_binomial(samples, i, 1 - coverage) for i in range(before + 1))
    return max(0.0, 1.0 - missed)


def _binomial(count: int, hits: int, chance: float) -> float:
    """Chance of so many hits, by logarithms: the coefficients of thousands of samples overflow."""
    ways = math.lgamma(count + 1) - math.lgamma(hits + 1) - math.lgamma(count - hits + 1)
    return math.exp(ways + hits * math.log(chance) + (count - hits) * math.log1p(-chance))


def samples_needed(coverage: float, wanted: float, before: int = 0) -> int:
    """The fewest samples whose lowest, but `before`, claims a share with a confidence below 1."""
    count = before + 1
    while confidence(count, coverage, before) < wanted:
        count += 1
    return count


def together(samples: int, coverage: float, lows: int, highs: int, before: int = 0) -> float:
    """Confidence that so many lowest and highest figures all claim the share at once, however they hang together.

    Bonferroni's inequality: the chances that single claims fail add up at most.
    """
    failing = lows * (1 - confidence(samples, coverage, before)) + highs * (1 - confidence(samples, coverage))
    return max(0.0, 1.0 - failing)
