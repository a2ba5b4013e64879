"""Opening times of fuses and breakers: the published gates, and what holds of every band."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from farvolt.protection_types import protection_type, protection_type_names
from farvolt.time_current import UNSTATED, Gate, band, contradiction

# ISO 8820-3 by data sheets (secondary copies): percent of rating, least and greatest opening time in s.
MEDIUM = [(135, 0.75, 600), (160, 0.25, 50), (200, 0.15, 5)]
LARGE = [(135, 60, 1800), (200, 2, 50), (350, 0.2, 7), (600, 0.04, 1)]

currents = st.floats(0.01, 100_000)


@pytest.mark.parametrize(("name", "rating", "gates"), [("blade", 20, MEDIUM), ("large blade", 40, LARGE)])
def test_blade_fuses_open_within_the_published_times(
    name: str, rating: float, gates: list[tuple[float, float, float]]
) -> None:
    kind = protection_type(name)
    for percent, least, greatest in gates:
        current = rating * percent / 100
        assert kind.holds_for_s(current, rating) == pytest.approx(least, rel=1e-12)
        assert kind.opens_within_s(current, rating) == pytest.approx(greatest, rel=1e-12)


@pytest.mark.parametrize(("percent", "least", "greatest"), [(350, 0.08, 0.5), (600, None, 0.15)])
def test_the_medium_blade_covers_its_35_and_40_A_as_well(percent: float, least: float | None, greatest: float) -> None:
    # Data sheet of 35 and 40 A fuses to ISO 8820-3 (secondary copy); up to 30 A the least time is lower.
    kind = protection_type("blade")
    assert kind.opens_within_s(0.35 * percent, 35) == pytest.approx(greatest)
    assert least is None or kind.holds_for_s(0.35 * percent, 35) <= least


def test_a_fault_that_one_rating_clears_at_once_another_carries_for_long() -> None:
    # 29.86 A is 149 % of 20 A: between the gates of 135 % (600 s) and 160 % (50 s). It is 299 % of 10 A: past the
    # gate of 200 % (5 s). By hand: 29.86² x 5 = 4458 A2s.
    kind = protection_type("blade")
    assert 50 < kind.opens_within_s(29.86, 20) < 600
    assert kind.opens_within_s(29.86, 10) < 5
    assert kind.let_through_A2s(29.86, 10) < 4458.1 == pytest.approx(29.86**2 * 5, abs=0.1)


def test_between_gates_the_line_is_straight_on_logarithms() -> None:
    # By hand: the middle of 200 and 350 % is 100 % x sqrt(2 x 3.5) = 264.58 %, of 5 and 0.5 s sqrt(2.5) = 1.5811 s.
    assert protection_type("blade").opens_within_s(26.45751311, 10) == pytest.approx(1.58114, rel=1e-5)


def test_a_rail_breaker_trips_at_once_on_dc_from_7_to_15_times_its_rating() -> None:
    # IEC 60898-2, characteristic C on DC (from memory): not within 0.1 s at 7 In, within 0.1 s at 15 In.
    kind = protection_type("rail breaker")
    assert kind.holds_for_s(70, 10) == 0.1
    assert kind.holds_for_s(70.1, 10) == 0
    assert kind.opens_within_s(149.9, 10) == pytest.approx(30, rel=1e-2)
    assert kind.opens_within_s(150, 10) == 0.1
    # IEC 60898-1: at 1.13 In not within an hour, at 1.45 In within one, at 2.55 In after 1 s and within 120 s.
    assert (kind.holds_for_s(11.3, 10), kind.opens_within_s(14.5, 10)) == (3600, 3600)
    assert (kind.holds_for_s(25.5, 10), kind.opens_within_s(25.5, 10)) == (1, 120)
    assert kind.opens_within_s(14.4, 10) == math.inf


@given(st.sampled_from(protection_type_names()), currents, currents, st.floats(0.5, 500))
def test_more_current_never_takes_longer(name: str, one: float, other: float, rating: float) -> None:
    kind, (low, high) = protection_type(name), sorted((one, other))
    rounding = 1 + 1e-12
    assert kind.opens_within_s(high, rating) <= kind.opens_within_s(low, rating) * rounding
    assert kind.holds_for_s(high, rating) <= kind.holds_for_s(low, rating) * rounding


@given(st.sampled_from(protection_type_names()), currents, st.floats(0.5, 500))
def test_the_least_time_is_not_above_the_greatest(name: str, current: float, rating: float) -> None:
    kind = protection_type(name)
    assert kind.holds_for_s(current, rating) <= kind.opens_within_s(current, rating)
    assert kind.holds_A2s(current, rating) <= kind.let_through_A2s(current, rating)


@given(st.sampled_from(protection_type_names()), st.floats(0.01, 1, exclude_max=True), st.floats(0.5, 500))
def test_below_its_rating_nothing_opens(name: str, share: float, rating: float) -> None:
    kind = protection_type(name)
    assert kind.holds_for_s(share * rating, rating) == kind.opens_within_s(share * rating, rating) == math.inf


@given(st.sampled_from(protection_type_names()), st.floats(0.1, 50), st.floats(0.5, 500), st.floats(0.1, 10))
def test_only_the_multiple_of_the_rating_matters(name: str, times: float, rating: float, scale: float) -> None:
    kind = protection_type(name)
    found = kind.opens_within_s(times * rating, rating)
    scaled = kind.opens_within_s(times * rating * scale, rating * scale)
    steps = [gate for gate, _ in kind.band.greatest]
    if all(abs(times - gate) > 1e-6 for gate in steps):
        assert scaled == pytest.approx(found, rel=1e-6)


def test_what_melts_a_fuse_does_not_rise_with_the_current() -> None:
    # By hand: the last gate of a medium blade is 600 % in 0.15 s: (6 x 20 A)² x 0.15 s = 2160 A2s.
    kind = protection_type("blade")
    assert kind.let_through_A2s(120, 20) == pytest.approx(2160)
    assert kind.let_through_A2s(1000, 20) == pytest.approx(2160)
    assert kind.let_through_A2s(20, 20) == math.inf
    # A breaker takes its time instead: 100 A, 3 kA, 0.03 s.
    assert protection_type("rail breaker").let_through_A2s(3000, 100) == pytest.approx(3000**2 * 0.03)


def test_a_current_limiting_fuse_lets_through_its_stated_joule_integral() -> None:
    # UL 248-15 (from memory), brackets of ratings: 40,000 A2s up to 100 A, 150,000 up to 200 A, 550,000 up to 400 A.
    kind = protection_type("cartridge")
    assert [kind.let_through_A2s(20_000, rating) for rating in (100, 200, 400)] == [40_000, 150_000, 550_000]
    assert kind.let_through_A2s(3000, 200) > 150_000


@pytest.mark.parametrize("name", protection_type_names())
def test_a_warm_device_carries_less_and_a_cold_one_more(name: str) -> None:
    kind = protection_type(name)
    assert kind.rating_at_A(100, kind.reference_degC) == 100
    assert kind.rating_at_A(100, 60) <= 100 <= kind.rating_at_A(100, -20)
    assert kind.rating_at_A(100, 290) > 0
    # Common practice: no device loses more than a third of its rating at 60 degC.
    assert kind.rating_at_A(100, 60) > 66


@pytest.mark.parametrize("name", protection_type_names())
def test_a_cold_device_has_no_more_resistance_than_a_warm_one(name: str) -> None:
    kind = protection_type(name)
    assert 0 < kind.resistance_ohm(50, cold=True) <= kind.resistance_ohm(50)


@pytest.mark.parametrize("name", protection_type_names())
def test_the_points_of_the_drawing_lie_on_the_band(name: str) -> None:
    kind = protection_type(name)
    least, greatest = kind.points(50, 5000)
    assert least[-1][0] == greatest[-1][0] == 5000
    for points, limit in ((least, kind.holds_for_s), (greatest, kind.opens_within_s)):
        (low, low_s), (high, high_s) = points[0], points[1]
        middle = math.sqrt(low * high)
        assert limit(middle, 50) == pytest.approx(math.sqrt(low_s * high_s), rel=1e-9)
        assert points == sorted(points, key=lambda point: (point[0], -point[1]))
    assert kind.points(50, 10) == ([], [])


@st.composite
def gates(draw: st.DrawFn) -> list[Gate]:
    """Gates as a data sheet may state them: rising multiples, falling times, some of them left out."""
    count = draw(st.integers(1, 6))
    times = sorted(draw(st.lists(st.floats(1, 50), min_size=count, max_size=count)))
    seconds = st.lists(st.floats(1e-4, 1e6), min_size=count, max_size=count)
    greatest = sorted(draw(seconds), reverse=True)
    least = sorted(draw(seconds), reverse=True)
    stated = draw(st.lists(st.tuples(st.booleans(), st.booleans()), min_size=count, max_size=count))
    return [
        Gate(at, min(low, high) if one else None, high if other else None)
        for at, low, high, (one, other) in zip(times, least, greatest, stated, strict=True)
    ]


@given(gates(), st.floats(0.1, 100), st.floats(0.1, 100))
def test_any_band_falls_and_passes_its_gates(stated: list[Gate], one: float, other: float) -> None:
    found, (low, high) = band(stated), sorted((one, other))
    rounding = 1 + 1e-9
    assert found.greatest_s(high) <= found.greatest_s(low) * rounding
    assert found.least_s(high) <= found.least_s(low) * rounding
    for gate in stated:
        # Of two gates at one multiple both hold there.
        assert gate.greatest_s is None or found.greatest_s(gate.times) <= gate.greatest_s * rounding
        assert gate.least_s is None or found.least_s(gate.times) * rounding >= gate.least_s


@given(gates(), st.lists(st.floats(0.1, 100), min_size=1, max_size=20))
def test_many_multiples_at_once_are_as_one_by_one(stated: list[Gate], times: list[float]) -> None:
    for found in (band(stated), UNSTATED):
        every = np.array([*times, 1.0, *(gate.times for gate in stated)])
        assert found.greatest_over(every) == pytest.approx([found.greatest_s(one) for one in every], rel=1e-9)
        assert found.least_over(every) == pytest.approx([found.least_s(one) for one in every], rel=1e-9)


def test_a_band_that_states_nothing_promises_nothing() -> None:
    assert UNSTATED.greatest_s(1000) == math.inf
    assert UNSTATED.least_s(1.01) == 0
    assert UNSTATED.least_s(1) == math.inf


@pytest.mark.parametrize(
    ("gates", "words"),
    [
        ([Gate(2, None, 5), Gate(1.35, None, 600)], "must rise"),
        ([Gate(1.35, 1, None), Gate(2, None, 9), Gate(3, 2, None)], "at 3 times the rating it holds longer"),
        ([Gate(1.35, None, 5), Gate(2, 1, None), Gate(3, None, 6)], "at 3 times the rating it takes longer"),
        ([Gate(1.35, 5, 1)], "the least time is above the greatest"),
        ([Gate(1.35, None, 1), Gate(2, 2, None)], "the least time is above the greatest"),
    ],
)
def test_gates_that_contradict_each_other_are_refused(gates: list[Gate], words: str) -> None:
    assert words in contradiction(gates)
    with pytest.raises(ValueError, match=words):
        band(gates)
