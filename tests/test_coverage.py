"""What samples can claim: published numbers of samples, and a simulation."""

import numpy as np
import pytest

from farvolt.coverage import confidence, samples_needed, together


@pytest.mark.parametrize(("before", "samples"), [(0, 59), (1, 93), (2, 124), (3, 153), (4, 181)])
def test_samples_for_95_of_95_percent(before: int, samples: int) -> None:
    """One-sided tolerance limits of first to fifth order at 95 %/95 %: Wilks 1941 and 1942, and as tabulated since."""
    assert samples_needed(0.95, 0.95, before) == samples


def test_ten_thousand_samples() -> None:
    """By hand: 0.999^10000 = exp(10000 ln 0.999) = exp(-10.005) = 4.52e-5, so 99.9 % with 99.9955 % confidence."""
    assert 1 - confidence(10_000, 0.999) == pytest.approx(4.517e-5, rel=1e-3)


def test_a_claim_with_some_left_out_below_agrees_with_counting() -> None:
    """Of 20,000 sets of 100 uniform numbers, how often the fourth lowest leaves at least 95 % above it."""
    drawn = np.sort(np.random.default_rng(2).uniform(size=(20_000, 100)), axis=1)
    assert confidence(100, 0.95, 3) == pytest.approx(np.mean(drawn[:, 3] <= 0.05), abs=0.01)


def test_many_figures_claim_less_than_one() -> None:
    """By hand: 59 samples claim 95 % with 1 - 0.95^59 = 95.15 %; four figures with 1 - 4 * 0.0485 = 80.6 %."""
    assert together(59, 0.95, 2, 2) == pytest.approx(1 - 4 * 0.95**59)
    assert together(20, 0.95, 5, 5) == 0.0


@pytest.mark.parametrize(("samples", "share"), [(0, 0.9), (1, 1.0), (5, 0.0)])
def test_nothing_is_claimed_of_nothing(samples: int, share: float) -> None:
    assert confidence(samples, share) == 0.0
