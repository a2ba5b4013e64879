"""Sizing a bank and filling it again: standards' methods and worked examples, limits, and sums by hand."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from farvolt import bank_charging, bank_sizing, duty_cycle, energy, network, planfile, rulebook
from farvolt.bank_charging import Charging
from farvolt.bank_sizing import Sizing
from farvolt.duty_cycle import Period, by_peukert, by_table, sized
from farvolt.plan import Battery, DischargeRate
from farvolt.ventilation import ventilation


def plan_text(bank: str = "", battery: str = "", load: str = 'power = "41.6667 W"\nhours_per_day = 24') -> str:
    return f"""format = 1
[plan]
name = "hut"
nominal = "12 V"
ambient = "25 degC"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
chemistry = "flooded"
nominal = "12 V"
capacity = "200 Ah"
resistance = "5 mohm"
{battery}
[[sources]]
name = "array"
kind = "solar"
at = "bank"
power = "300 W"
ceiling = "14.6 V"
performance_ratio = "75 %"
[[sources]]
name = "alternator"
kind = "charger"
at = "bank"
volts = "14.6 V"
amps = "60 A"
hot_amps = "40 A"
[[loads]]
name = "all of it"
at = "bank"
{load}
[bank]
{bank}
"""


def studied(text: str) -> tuple[Sizing, Charging]:
    plan = planfile.parse(text)
    net = network.build(plan, rulebook.load(plan.plan.rulebook, None))
    budgets = energy.budgets(net)
    found = bank_sizing.sizing(net, budgets)
    assert found is not None
    return found, bank_charging.charging(net, budgets, found.terms)


def values(found: Sizing) -> dict[str, float]:
    return {step.what: step.value for step in found.steps}


# Published examples --------------------------------------------------------------------------------------------------


def test_the_off_grid_example_of_a_sizing_article() -> None:
    # Article on off-grid sizing, simplified IEEE method: 1000 Wh a day x 2.5 days, 50 % deep, 40 degF: 2500, 5000,
    # 6500 Wh; at 12 V that is 208.3, 416.7, 541.7 Ah.
    found, _ = studied(plan_text('autonomy = 2.5\nmargin = 1.0\ndepth_of_discharge = "50 %"\ncoldest = "40 degF"'))
    steps = values(found)
    assert steps["Days of autonomy"] * 12 == pytest.approx(2500, abs=0.1)
    assert steps["By depth of discharge"] * 12 == pytest.approx(5000, abs=0.2)
    assert steps["Temperature, 4.44 degC"] * 12 == pytest.approx(6500, abs=0.5)
    # At 41.7 W the capacity lasts for far longer than its 20 h: no loss by rate, and the duty cycle asks for less.
    assert found.capacity_Ah == pytest.approx(541.67, abs=0.1)
    assert found.strings == 3


def test_the_rule_of_five_days() -> None:
    # The same article: 1000 Wh a day x 5 / 12 V = 416.66 Ah.
    found, _ = studied(plan_text("autonomy = 5"))
    assert values(found)["Days of autonomy"] == pytest.approx(416.66, abs=0.02)


def test_the_worksheet_takes_the_largest_limit_not_their_product() -> None:
    # IEEE 1013 worksheet by hand: 83.33 Ah x 2 = 166.7; /80 % = 208.3; daily 83.33/20 % = 416.7; x 1.25 = 208.3.
    lines = 'autonomy = 2\ndepth_of_discharge = "80 %"\ndaily_depth_of_discharge = "20 %"\nageing = 1.25\nmargin = 1.1'
    found, _ = studied(plan_text(lines))
    steps = values(found)
    limits = [steps[name] for name in ("By depth of discharge", "By daily depth of discharge", "By ageing")]
    assert limits == pytest.approx([208.33, 416.67, 208.33], abs=0.01)
    assert steps["The largest of these"] == pytest.approx(416.67, abs=0.01)
    assert found.capacity_Ah == pytest.approx(458.33, abs=0.01)


# The duty-cycle method of IEEE 485 ------------------------------------------------------------------------------------


def test_the_duty_cycle_of_ieee_485_by_hand() -> None:
    # The load of the standard's example (currents and times from memory): 320 A 1 min, 100 A 29 min, 280 A 30 min,
    # 200 A 60 min, 40 A 59 min, 120 A 1 min, and 100 A for 1 min at any moment. With K(t) of a made-up cell that is
    # as long as the time plus a half hour, each section is a sum by hand.
    periods = [Period(320, 1 / 60), Period(100, 29 / 60), Period(280, 0.5), Period(200, 1.0), Period(40, 59 / 60),
               Period(120, 1 / 60)]  # fmt: skip
    found = sized(periods, lambda hours: hours + 0.5, Period(100, 1 / 60))
    first = 320 * (1 / 60 + 0.5)
    second = 320 * 1.0 - 220 * (29 / 60 + 0.5)
    third = 320 * 1.5 - 220 * (59 / 60 + 0.5) + 180 * 1.0
    fourth = 320 * 2.5 - 220 * (119 / 60 + 0.5) + 180 * 2.0 - 80 * 1.5
    last = 320 * 3.5 - 220 * (179 / 60 + 0.5) + 180 * 3.0 - 80 * 2.5 - 160 * 1.5 + 80 * (1 / 60 + 0.5)
    assert (*found.sections_Ah[:4], found.sections_Ah[5]) == pytest.approx((first, second, third, fourth, last))
    assert found.random_Ah == pytest.approx(100 * (1 / 60 + 0.5))
    assert found.section == 5
    assert found.capacity_Ah == pytest.approx(last + found.random_Ah)


def test_a_single_period_asks_for_what_peukert_says() -> None:
    # 10 A for 8.706 h empty 100 Ah of 20 h with k = 1.2 (the encyclopaedia's example), so K x 10 A = 100 Ah.
    assert sized([Period(10, 8.7055)], by_peukert(20, 1.2)).capacity_Ah == pytest.approx(100, abs=0.01)


@given(st.lists(st.tuples(st.floats(0, 100), st.floats(0.02, 5)), min_size=1, max_size=6))
def test_without_a_loss_by_rate_a_section_is_its_charge(pairs: list[tuple[float, float]]) -> None:
    found = sized([Period(*pair) for pair in pairs], by_peukert(1000, 1.0))
    assert found.sections_Ah == pytest.approx(np.cumsum([amps * hours for amps, hours in pairs]), abs=1e-6)


@given(st.floats(1, 1.5), st.floats(0.05, 60), st.floats(1.01, 3))
def test_more_time_never_asks_for_less(exponent: float, hours: float, times: float) -> None:
    factor = by_peukert(20, exponent)
    one, other = factor(np.array([hours, hours * times]))
    assert other >= one >= hours * (1 - 1e-12)


def test_a_data_sheet_s_own_table() -> None:
    rows = [{"hours": 10, "current": "10 A"}, {"hours": 1, "current": "60 A"}]
    factor = by_table(100, [DischargeRate.model_validate(row) for row in rows])
    # Between the rows linear in the logarithms: at sqrt(10) h, sqrt(600) A. Beyond them: no more of either.
    wanted = [100 / 60, 100 / 60, 100 / math.sqrt(600), 10, 20]
    assert factor(np.array([0.1, 1, math.sqrt(10), 10, 20])) == pytest.approx(wanted)


def test_a_heavy_load_asks_for_more_than_its_charge() -> None:
    # 100 A for 1 h: 100 Ah; / 0.8 = 125 Ah, lasting 1.25 h at 100 A; k = 1.21: (20/1.25)^(1 - 1/1.21).
    lines = 'depth_of_discharge = "80 %"\nmargin = 1.0\nageing = 1.0'
    found, _ = studied(plan_text(lines, "peukert = 1.21", 'current = "100 A"\nschedule = ["12:00-13:00"]'))
    assert values(found)["Discharge rate"] == pytest.approx(125 * 16 ** (1 - 1 / 1.21))
    # The duty cycle: 100 A for 1 h, nothing before: 100 A x 20 (1/20)^(1/1.21).
    assert values(found)["Duty cycle"] == pytest.approx(100 * 20 * (1 / 20) ** (1 / 1.21))
    lithium = plan_text(lines, "", 'current = "100 A"\nschedule = ["12:00-13:00"]').replace("flooded", "lfp")
    assert values(studied(lithium)[0])["Discharge rate"] < 1.05 * 125


# The other way, and back --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("lines", ["autonomy = 3", 'autonomy = 2\ncoldest = "0 degC"\nageing = 1.5', "autonomy = 0.5"])
def test_a_bank_of_the_size_that_is_asked_for_lasts_the_days_asked_for(lines: str) -> None:
    text = plan_text(f"{lines}\nmargin = 1.0", "peukert = 1.2")
    capacity = values(studied(text)[0])["Discharge rate"]
    found, _ = studied(text.replace('capacity = "200 Ah"', f'capacity = "{capacity!r} Ah"'))
    asked = planfile.parse(text).bank.autonomy
    assert found.days == pytest.approx(asked)
    assert f"= {asked:g} days" in found.days_working[-1]


def test_a_load_that_takes_nothing_asks_for_nothing() -> None:
    found, charging = studied(plan_text(load='power = "0 W"\nhours_per_day = 24'))
    assert (found.capacity_Ah, found.strings, found.days) == (0, 0, None)
    assert charging.days[0].needed_Wh == 0


def test_blocks_in_series_and_strings() -> None:
    block = 'autonomy = 5\nblock = { nominal = "6 V", capacity = "225 Ah" }'
    found, _ = studied(plan_text(block))
    assert (found.terms.series, found.strings) == (2, math.ceil(found.capacity_Ah / 225))
    assert found.built_Ah == found.strings * 225
    lithium = plan_text('block = { nominal = "3.2 V", capacity = "280 Ah" }').replace("flooded", "lfp")
    assert studied(lithium)[0].terms.series == 4


# Filling it again -----------------------------------------------------------------------------------------------------


def test_a_winter_day_by_hand() -> None:
    days = '\n[[days]]\nname = "winter"\npeak_sun_hours = 1.5\nsources = { "alternator" = 1 }\n[[days]]\nname = "dark"'
    _, charging = studied(plan_text() + days)
    winter, dark = charging.days
    # 1000 Wh over 77.5 % there and back; 40 A hot x 12 V x 1 h; 300 W x 1.5 h x 75 %.
    assert winter.needed_Wh == pytest.approx(1000 / 0.775, rel=1e-5)
    assert [(one.source, one.Wh) for one in winter.gains] == [("array", 337.5), ("alternator", 480.0)]
    assert winter.array_W == pytest.approx((1000 / 0.775 - 480) / (1.5 * 0.75), rel=1e-5)
    assert charging.worst is winter
    assert (dark.array_W, dark.gained_Wh) == (None, 0.0)


def test_charging_currents_together() -> None:
    _, charging = studied(plan_text(battery='max_charge = "30 A"'))
    assert charging.limit.amps == 60 + 25
    assert charging.limit.limit_A is not None
    assert charging.limit.limit_A.high == 30
    typical = bank_charging.rate_limit(Battery.model_validate(
        {"name": "b", "kind": "battery", "at": "b", "chemistry": "agm", "capacity": "100 Ah", "strings": 2}), "charge")
    assert typical is not None
    assert (typical.low, typical.high) == (40, 80)


def test_time_to_full_by_hand() -> None:
    # Flooded, 200 Ah, from half: bulk 0.275 x 200 / 0.85 = 64.7 Ah at 40 A; then 52.94 Ah while 40 A falls to 4 A.
    _, charging = studied(plan_text('depth_of_discharge = "50 %"'))
    (alternator,) = charging.to_full
    assert alternator.bulk_h == pytest.approx(64.706 / 40, abs=1e-4)
    assert alternator.absorption_h == pytest.approx(52.941 * math.log(10) / 36, abs=1e-4)


@given(st.floats(0.2, 100))
def test_the_falling_current_carries_the_charge_that_is_left(amps: float) -> None:
    battery = planfile.parse(plan_text()).sources[0]
    assert isinstance(battery, Battery)
    found = bank_charging.to_full(battery, "any", amps, 0.1)
    assert found.bulk_h == 0
    left, tail = 0.1 * 200 / 0.85, 4.0
    if amps > tail * 1.001:
        # Exponential from `amps` to `tail` over the time found: its charge is (I - I_end) t / ln(I / I_end).
        assert (amps - tail) * found.absorption_h / math.log(amps / tail) == pytest.approx(left)
    else:
        assert found.absorption_h >= left / tail * 0.99


# Ventilation ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("chemistry", "cells", "capacity", "charging", "air"),
    [
        # By the formula of IEC 62485-2: 0.05 x 24 x 5 mA/Ah x 500 Ah / 1000 = 3 m3/h; boost at 20 mA/Ah 12 m3/h;
        # sealed 0.6 and 4.8 m3/h.
        ("flooded", 24, 500, "float", 3.0),
        ("flooded", 24, 500, "boost", 12.0),
        ("agm", 24, 500, "float", 0.6),
        ("gel", 24, 500, "boost", 4.8),
    ],
)
def test_air_for_a_lead_bank(chemistry: str, cells: int, capacity: float, charging: str, air: float) -> None:
    found = ventilation(chemistry, cells, capacity, charging)  # type: ignore[arg-type]
    assert found is not None
    assert (found.air_m3_h, found.opening_cm2) == pytest.approx((air, 28 * air))
    assert ventilation("lfp", cells, capacity, charging) is None  # type: ignore[arg-type]


def test_minutes_are_joined_to_periods() -> None:
    assert duty_cycle.joined(np.repeat([1.0, 2.0], 30)) == (Period(1.0, 0.5), Period(2.0, 0.5))
    assert duty_cycle.joined(np.ones(1)) == (Period(1.0, 1 / 60),)
