"""The energy of a day and the demand of feeders, against sums by hand."""

from itertools import pairwise
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from farvolt import energy, feeders, network, planfile, rulebook
from farvolt.energy import Budget

PLAN = """format = 1
[plan]
name = "hut"
nominal = "12 V"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
chemistry = "agm"
capacity = "100 Ah"
[[sources]]
name = "supply"
kind = "converter"
from = "bus"
at = "radio bus"
nominal = "24 V"
volts = "24 V"
amps = "5 A"
efficiency = "80 %"
standby = "1 W"
[[runs]]
name = "main"
from = "bank"
to = "bus"
length = "1 m"
size = "10 mm2"
[[runs]]
name = "inner"
from = "bus"
to = "inner"
length = "1 m"
size = "4 mm2"
[[loads]]
name = "lamp"
at = "inner"
power = "12 W"
schedule = ["20:00-23:00", "22:00-01:00"]
[[loads]]
name = "fridge"
at = "inner"
power = "60 W"
hours_per_day = 24
duty = "25 %"
continuous = true
[[loads]]
name = "heater"
at = "bus"
resistance = "1.2 ohm"
hours_per_day = 0.5
[[loads]]
name = "inverter"
at = "bus"
power = "180 W"
efficiency = "90 %"
standby = "6 W"
hours_per_day = 1
[[loads]]
name = "radio"
at = "radio bus"
current = "2 A"
hours_per_day = 5
[[loads]]
name = "spare"
at = "bus"
power = "10 W"
[[days]]
name = "quiet"
loads = { "heater" = 0, "inverter" = ["9:00-10:00"], "lamp" = 2 }
[[days]]
name = "usual"
"""


def built(text: str) -> network.Network:
    plan = planfile.parse(text)
    return network.build(plan, rulebook.load(plan.plan.rulebook, None))


def days() -> tuple[Budget, ...]:
    return energy.budgets(built(PLAN))


def load(budget: Budget, name: str) -> energy.LoadEnergy:
    return next(one for one in budget.loads if one.load == name)


def test_a_day_by_hand() -> None:
    # 12 W from 20:00 to 1:00, 60 W at 25 % all day, 144 V2/ohm half an hour, 180 W / 0.9 an hour and 6 W all day.
    usual = days()[1]
    watt_hours = {one.load: one.Wh for one in usual.loads}
    expected = {"lamp": 60, "fridge": 360, "heater": 60, "inverter": 200 + 144, "radio": 240, "spare": 0}
    assert watt_hours == pytest.approx(expected)
    assert load(usual, "inverter").lost_Wh == pytest.approx(20)
    assert load(usual, "radio").Ah == pytest.approx(10)
    # The converter passes 240 Wh on, loses 240 / 0.8 - 240 = 60 Wh, and 24 Wh doing nothing.
    (supply,) = usual.converters
    assert (supply.delivered_Wh, supply.lost_Wh, supply.standby_Wh) == pytest.approx((240, 60, 24))
    assert load(usual, "radio").bank_Wh == pytest.approx(300)
    assert usual.bank.name == "bank"
    assert (usual.bank.Wh, usual.bank.Ah) == pytest.approx((824 + 324, 1148 / 12))
    assert (usual.systems[1].name, usual.systems[1].nominal_V, usual.systems[1].Ah) == ("supply", 24, pytest.approx(10))


def test_the_shares_sum_to_what_the_bank_gives() -> None:
    for budget in days():
        assert sum(Wh for _, Wh in budget.shares) == pytest.approx(budget.bank.Wh)
        assert [Wh for _, Wh in budget.shares] == sorted((Wh for _, Wh in budget.shares), reverse=True)


def test_a_type_of_day_replaces_what_it_names() -> None:
    quiet = days()[0]
    assert quiet.day == "quiet"
    assert {one.load: one.Wh for one in quiet.loads}["heater"] == 0
    # An inverter that is switched on by a schedule idles in it alone: 200 Wh + 6 Wh.
    assert load(quiet, "inverter").Wh == pytest.approx(206)
    assert load(quiet, "lamp").use == energy.Use(2.0)
    assert load(quiet, "fridge").Wh == pytest.approx(360)


def test_what_is_not_counted_is_said() -> None:
    (sentence,) = days()[0].left_out
    assert '"spare"' in sentence
    assert "hours_per_day" in sentence


@pytest.mark.parametrize(
    ("spans", "found"),
    [
        (["22:00-06:00"], ((0, 360), (1320, 1440))),
        (["20:00-23:00", "22:00-01:00"], ((0, 60), (1200, 1440))),
        (["00:00-24:00"], ((0, 1440),)),
        (["23:00-00:00"], ((1380, 1440),)),
        (["24:00-06:00"], ((0, 360),)),
        (["8:00-9:00", "9:00-10:00"], ((480, 600),)),
        ([], ()),
    ],
)
def test_spans_past_midnight_and_over_each_other(spans: list[str], found: tuple[Any, ...]) -> None:
    assert energy.merged(spans) == found


@given(st.lists(st.tuples(st.integers(0, 1439), st.integers(1, 1439)), max_size=6))
def test_merged_spans_cover_the_same_minutes(pairs: list[tuple[int, int]]) -> None:
    texts, minutes = [], set()
    for start, length in pairs:
        end = (start + length) % 1440
        texts.append(f"{start // 60:02}:{start % 60:02}-{end // 60:02}:{end % 60:02}")
        minutes |= {(start + step) % 1440 for step in range(length)}
    found = energy.merged(texts)
    assert {minute for start, end in found for minute in range(start, end)} == minutes
    assert all(one[1] < other[0] for one, other in pairwise(found))


# Feeders -----------------------------------------------------------------------------------------------------------


def test_two_columns_by_hand() -> None:
    # Column A: 5 A. Column B: 10 + 16.7 + 1 + 0.83 + the converter's 6.33 ... the largest is above a tenth of the sum.
    inner, main = sorted(feeders.demands(built(PLAN)), key=lambda one: one.run)
    assert [one.run for one in (inner, main)] == ["inner", "main"]
    assert (inner.column_a_A, inner.counted_b_A, inner.amps) == pytest.approx((5, 1, 6))
    # The converter: 2 A x 24 V / 0.8 + 1 W = 61 W, 5.083 A at 12 V.
    assert {one.name: round(one.amps, 3) for one in main.items} == {
        "lamp": 1.0, "fridge": 5.0, "heater": 10.0, "inverter": 17.167, "spare": 0.833, "supply": 5.083,
    }  # fmt: skip
    assert main.amps == pytest.approx(5 + 17.1667, abs=1e-3)


def test_many_small_intermittent_loads_count_with_a_tenth_of_their_sum() -> None:
    items = tuple(feeders.Item(f"lamp {index}", 1.0, False) for index in range(30))
    demand = feeders.Demand("feeder", (*items, feeders.Item("fridge", 4.0, True)))
    assert (demand.column_b_A, demand.counted_b_A, demand.amps) == (30, 3.0, 7.0)
    assert "4 A + 3 A = 7 A" in demand.working[-1]
