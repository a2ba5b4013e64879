"""Buying cable in reels: against every way there is, where there are few; bounds and lengths where there are many."""

import math
import random
from functools import cache

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import patterns
from farvolt.filling import Covering, Offer, best_filled, fullest
from farvolt.patterns import Answer, least_cost
from farvolt.prices import Reel
from farvolt.reels import Cutting, Piece, cut


def every_way(lengths: tuple[int, ...], offers: tuple[Offer, ...], per_cm: float | None) -> float:
    """The least cost over all ways to part the pieces into reels: by trying them, piece after piece."""

    @cache
    def cheapest(left: tuple[int, ...]) -> float:
        if not left:
            return 0.0
        first, rest = left[0], left[1:]
        best = math.inf if per_cm is None else per_cm * first + cheapest(rest)
        for chosen in range(2 ** len(rest)):
            beside = [one for at, one in enumerate(rest) if chosen >> at & 1]
            used = first + sum(beside)
            price = min((one.cost for one in offers if one.length_cm >= used), default=math.inf)
            if price < math.inf:
                best = min(best, price + cheapest(tuple(one for at, one in enumerate(rest) if not chosen >> at & 1)))
        return best

    return cheapest(tuple(sorted(lengths, reverse=True)))


def check(answer: Answer, lengths: tuple[int, ...], offers: tuple[Offer, ...], per_cm: float | None) -> None:
    """Every piece is there once, no reel holds more than its length, and the cost is that of what is bought."""
    assert sorted(one for reel in answer.bought for one in reel.lengths_cm) == sorted(lengths)
    cost = 0.0
    for reel in answer.bought:
        if reel.offer is None:
            assert per_cm is not None
            cost += per_cm * sum(reel.lengths_cm)
        else:
            assert sum(reel.lengths_cm) <= offers[reel.offer].length_cm
            cost += offers[reel.offer].cost
    assert answer.cost == pytest.approx(cost, abs=1e-9)
    assert answer.bound <= answer.cost + 1e-9


PROBLEMS = st.tuples(
    st.lists(st.integers(1, 60), min_size=1, max_size=7).map(tuple),
    st.lists(st.builds(Offer, st.integers(60, 120), st.integers(1, 40).map(float)), min_size=1, max_size=3).map(tuple),
    st.one_of(st.none(), st.integers(1, 60).map(lambda cents: cents / 100)),
)


@settings(max_examples=150, deadline=None)
@given(PROBLEMS)
def test_the_cheapest_of_every_way_is_found_and_proven(
    problem: tuple[tuple[int, ...], tuple[Offer, ...], float | None],
) -> None:
    """Up to seven pieces, three reels on offer and by the metre or not."""
    answer = least_cost(*problem)
    check(answer, *problem)
    assert answer.cost == pytest.approx(every_way(*problem), abs=1e-6)
    assert answer.gap == pytest.approx(0, abs=1e-6)


@settings(max_examples=100, deadline=None)
@given(PROBLEMS)
def test_the_total_length_bounds_the_cost_and_filled_sets_are_real(
    problem: tuple[tuple[int, ...], tuple[Offer, ...], float | None],
) -> None:
    """The bound is never above the least cost; a packing holds every piece once, and is never below it."""
    held, offers, per_cm = problem
    covering, least = Covering(sum(held), offers, per_cm), every_way(*problem)
    assert covering.bound <= least + 1e-9
    found = best_filled(held, covering, math.inf)
    if found is not None:
        assert found.cost >= least - 1e-9
        assert sorted([*found.loose, *(one for _, cut in found.reels for one in cut)]) == sorted(held)
        assert all(sum(cut) <= offers[place].length_cm for place, cut in found.reels)


@given(st.lists(st.integers(1, 30), max_size=8).map(sorted), st.integers(1, 80))
def test_a_reel_is_filled_as_far_as_any_choice_fills_it(lengths: list[int], room: int) -> None:
    """Against all subsets."""
    sums = [sum(one for at, one in enumerate(lengths) if chosen >> at & 1) for chosen in range(2 ** len(lengths))]
    assert sum(fullest(lengths, room)) == max(one for one in sums if one <= room)


@settings(max_examples=100, deadline=None)
@given(PROBLEMS)
def test_generated_patterns_bound_the_cheapest_from_below_and_never_miss_by_more_than_they_say(
    problem: tuple[tuple[int, ...], tuple[Offer, ...], float | None],
) -> None:
    """The way of large problems, taken on small ones whose least cost is known."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(patterns, "LISTED_LIMIT", 0)
        patch.setattr(patterns, "_NEAR", 0.0)
        patch.setattr(patterns, "best_filled", lambda *_: None)
        answer = least_cost.__wrapped__(*problem)
    check(answer, *problem)
    least = every_way(*problem)
    assert answer.bound <= least + 1e-6
    assert least <= answer.cost + 1e-6


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("most_cm", [250, 900])
def test_a_large_problem_is_near_its_bound(seed: int, most_cm: int) -> None:
    """100 pieces from reels of 10 to 50 m: more patterns than can be listed; sound, and within what it says."""
    draw = random.Random(seed)
    lengths = tuple(draw.randint(30, most_cm) for _ in range(100))
    offers = (Offer(1000, 9.9), Offer(2500, 21.8), Offer(5000, 39.5))
    answer = least_cost(lengths, offers, None)
    check(answer, lengths, offers, None)
    assert answer.bound >= sum(lengths) * 39.5 / 5000  # the cheapest metre, and nothing left over
    assert answer.gap < 0.02


def named(*lengths_m: float) -> list[Piece]:
    """Pieces named by their number."""
    return [Piece(length, f"W{number}") for number, length in enumerate(lengths_m, start=1)]


def lengths(found: Cutting) -> list[tuple[float, ...]]:
    """The lengths cut from each reel, in cm."""
    return [tuple(one.cut_cm for one in reel.pieces) for reel in found.reels]


def test_reels_by_hand() -> None:
    """6 + 4, 5 + 5 m are two reels of 10 m without offcut; first-fit decreasing finds them too."""
    found = cut(named(5, 6, 4, 5), [Reel(10, 8.0)])
    assert lengths(found) == [(600, 400), (500, 500)]
    assert [one.offcut_m for one in found.reels] == [0, 0]
    assert (found.price, found.gap) == (16.0, 0)


def test_where_first_fit_decreasing_needs_one_reel_more() -> None:
    """Reels of 10: 4+3+3 twice. First fit takes 4+4, then 3+3+3, then 3: three reels."""
    found = cut(named(4, 4, 3, 3, 3, 3), [Reel(10, 8.0)])
    assert found.price == 16.0
    assert sorted(map(sorted, lengths(found))) == [[300, 300, 400], [300, 300, 400]]


def test_a_long_reel_or_short_ones_or_by_the_metre_whatever_is_cheapest() -> None:
    """12 m of 3 m pieces. By hand: 25 m for 20; two of 10 m for 18; 12 m at 1.40 are 16.80; 10 m and 3 m are 13.20."""
    pieces = named(3, 3, 3, 3)
    assert cut(pieces, [Reel(25, 20.0)]).price == 20
    assert cut(pieces, [Reel(25, 20.0), Reel(10, 9.0)]).price == 18
    mixed = cut(pieces, [Reel(25, 20.0), Reel(10, 9.0)], 1.4)
    assert mixed.price == pytest.approx(9 + 3 * 1.4)
    assert [one.by_the_metre for one in mixed.reels] == [False, True]
    assert cut(pieces, [], 1.4).price == pytest.approx(16.8)


def test_a_piece_is_never_joined() -> None:
    """12 m do not come from two reels of 10 m: it is to be asked for; by the metre it can be had."""
    found = cut(named(12, 2), [Reel(10, 9.0)])
    assert [one.name for one in found.too_long] == ["W1"]
    assert found.price is None
    assert cut(named(12, 2), [Reel(10, 9.0)], 1.0).too_long == ()


def test_without_prices_the_least_length_is_bought_in_the_fewest_reels() -> None:
    """20 m are one reel of 20 m rather than two of 10; 21 m are 25 rather than 30."""
    reels = [Reel(10, None), Reel(20, None), Reel(25, None)]
    assert [one.length_m for one in cut(named(10, 10), reels).reels] == [20]
    assert [one.length_m for one in cut(named(7, 7, 7), reels).reels] == [25]
    assert cut(named(7), reels).price is None


def test_with_nothing_on_offer_it_is_bought_by_the_metre() -> None:
    """One length of all, at a price not known."""
    (reel,) = cut(named(2, 3.5), []).reels
    assert (reel.length_m, reel.price, reel.by_the_metre, reel.offcut_m) == (5.5, None, True, 0)
    assert cut([], []).reels == ()
    assert cut([], [Reel(10, 9.0)]).reels == ()


def test_lengths_are_cut_to_the_next_full_centimetre_and_reels_not_stretched() -> None:
    """1.101 m is cut at 1.11 m; a reel of 30.48 m holds 27 of them (29.97 m), not 28."""
    assert Piece(1.101, "").cut_cm == 111
    assert Piece(1.1 * 11, "").cut_cm == 1210
    assert len(cut(named(*[1.101] * 27), [Reel(30.48, 25.0)]).reels) == 1
    assert len(cut(named(*[1.101] * 28), [Reel(30.48, 25.0)]).reels) == 2


@settings(max_examples=60, deadline=None)
@given(PROBLEMS)
def test_together_never_costs_more_than_one_by_one(
    problem: tuple[tuple[int, ...], tuple[Offer, ...], float | None],
) -> None:
    """Run by run, each piece bought for itself, is one of the ways."""
    held, offers, per_cm = problem
    alone = sum(least_cost((one,), offers, per_cm).cost for one in held)
    assert least_cost(held, offers, per_cm).cost <= alone + 1e-9
