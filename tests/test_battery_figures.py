"""Batteries by chemistry: figures from the tables, Peukert's law against published examples, temperature factors."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from farvolt import batteries, battery_figures, peukert, planfile
from farvolt.plan import Battery
from plan_text import EVERY_FIELD

CHEMISTRIES = ("flooded", "agm", "gel", "lfp", "nmc")
NAMES = (
    "capacity_hours", "peukert", "efficiency", "charge_efficiency", "self_discharge", "charge_rate", "discharge_rate",
    "absorption_V", "float_V", "charge_fall", "min_charge_temperature", "absorption_from", "tail_current", "end_V",
)  # fmt: skip


def battery(**fields: str) -> Battery:
    return Battery.model_validate({"name": "b", "kind": "battery", "at": "b", "resistance": "5 mohm", **fields})


@pytest.mark.parametrize("chemistry", CHEMISTRIES)
def test_every_chemistry_has_every_figure(chemistry: str) -> None:
    for name in NAMES:
        found = battery_figures.typical(chemistry, name)
        assert found.low <= found.middle <= found.high
        assert chemistry in found.basis
    cell = [battery_figures.typical(chemistry, name) for name in ("end_V", "float_V", "absorption_V")]
    assert cell[0].high < cell[1].low
    assert cell[1].high <= cell[2].high


def test_what_a_plan_states_goes_before_the_table() -> None:
    bank = planfile.parse(EVERY_FIELD.read_text()).sources[0]
    assert isinstance(bank, Battery)
    stated = {name: battery_figures.figure(bank, name) for name in ("peukert", "efficiency", "self_discharge")}
    assert [one.middle for one in stated.values() if one] == [1.03, 0.94, 0.03]
    assert battery_figures.least_charge(bank).middle == 0.15
    typical = battery_figures.typical("agm", "efficiency")
    assert battery_figures.figure(battery(chemistry="agm"), "efficiency") == typical
    assert battery_figures.figure(battery(emf="12 V"), "efficiency") is None


# Peukert ---------------------------------------------------------------------------------------------------------


def test_peukert_by_rated_hours() -> None:
    # Encyclopaedia article on Peukert's law: 100 Ah at the 20 h rate, k = 1.2, 10 A: 20 (100 / 200)^1.2 = 8.7 h.
    assert peukert.hours_at(10, 100, 20, 1.2) == pytest.approx(8.706, abs=5e-4)
    # By hand: k = 1.25, 2^-1.25 = 0.42045; 20 h x that = 8.409 h.
    assert peukert.hours_at(10, 100, 20, 1.25) == pytest.approx(8.409, abs=5e-4)


def test_peukert_by_one_ampere() -> None:
    # General electrical article: Cp = 100, k = 1.2, 5 A: 100 / 5^1.2 = 14.5 h.
    assert peukert.hours_by_one_ampere(5, 100, 1.2) == pytest.approx(14.5, abs=0.005)


def test_the_two_forms_agree_only_through_the_other_capacity() -> None:
    cp = peukert.capacity_at_one_ampere(100, 20, 1.2)
    assert cp == pytest.approx(100 * 5**0.2)
    assert peukert.hours_by_one_ampere(10, cp, 1.2) == pytest.approx(peukert.hours_at(10, 100, 20, 1.2))
    # Taking the label for Cp is the usual slip: 100 / 10^1.2 = 6.31 h, not 8.71 h.
    assert peukert.hours_by_one_ampere(10, 100, 1.2) == pytest.approx(6.310, abs=5e-4)


@given(st.floats(1, 500), st.floats(20, 1000), st.floats(1, 120), st.floats(1, 1.6))
def test_peukert_holds_together(current: float, capacity: float, hours: float, exponent: float) -> None:
    lasts = peukert.hours_at(current, capacity, hours, exponent)
    assert peukert.hours_at(capacity / hours, capacity, hours, exponent) == pytest.approx(hours)
    assert peukert.capacity_over(lasts, capacity, hours, exponent) == pytest.approx(current * lasts)
    assert peukert.capacity_at(current, capacity, hours, 1.0) == pytest.approx(capacity)
    longer = peukert.hours_at(current / 2, capacity, hours, exponent)
    assert peukert.exponent_from((current, lasts), (current / 2, longer)) == pytest.approx(exponent)


# Temperature and charge --------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("degF", "times"), [(40, 1.30), (50, 1.19), (60, 1.11), (70, 1.04), (77, 1.00)])
def test_capacity_is_raised_for_cold_as_ieee_485_does(degF: float, times: float) -> None:
    # IEEE 485 Table 1; the rows of 40, 50, 60 and 70 degF are printed in sizing worksheets for off-grid banks too.
    found, basis = battery_figures.sizing_times("flooded", (degF - 32) * 5 / 9)
    assert found == pytest.approx(times, abs=1e-3)
    assert "IEEE 485" in basis


@pytest.mark.parametrize("chemistry", CHEMISTRIES)
def test_cold_takes_capacity_and_low_charge_raises_resistance(chemistry: str) -> None:
    shares = [battery_figures.capacity_share(chemistry, degC) for degC in (-30, -20, -5, 0, 10, 25)]
    assert shares == sorted(shares)
    assert shares[-1] == 1
    times = [batteries.low_charge_times(chemistry, charge) for charge in (1, 0.5, 0.2, 0.1, 0, -1)]
    assert times == sorted(times)
    assert times[0] == 1
    one = battery(chemistry=chemistry)
    low = batteries.model(one, 0.1, 12, rises_at_low_charge=True)
    assert low.resistance_ohm == pytest.approx(0.005 * batteries.low_charge_times(chemistry, 0.1))
    assert batteries.model(one, 0.1, 12).resistance_ohm == 0.005


def test_charging_voltage_falls_with_temperature_for_lead_alone() -> None:
    # 6 cells, 14.4 to 14.8 V at 25 degC; 3 to 5 mV per K and cell over 10 K are 0.18 to 0.3 V.
    lead = battery(chemistry="flooded", nominal="12 V")
    at = {degC: battery_figures.charging_V(lead, 12, degC) for degC in (15, 25, 35)}
    volts = {degC: (round(one.low, 2), round(one.high, 2)) for degC, one in at.items() if one}
    assert volts == {15: (14.58, 15.1), 25: (14.4, 14.8), 35: (14.1, 14.62)}
    lithium = battery(chemistry="lfp", nominal="12.8 V")
    cold, warm = (battery_figures.charging_V(lithium, 12, degC) for degC in (0, 40))
    assert cold == warm
    assert cold is not None
    assert (cold.low, cold.high) == pytest.approx((14.2, 14.6))
