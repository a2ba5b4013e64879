"""Conductor temperatures: the rulebook's basis, hot, cold, as the plan asks, and estimated from the current."""

from typing import Any

import numpy as np
import pytest

from farvolt import temperatures
from farvolt.plan import Plan
from farvolt.rulebook import load
from farvolt.temperatures import Conductors, Mode
from wiring import COPPER_PER_K, cable, context_of, fuse, lamp, plan_of

ZONES = {"zones": {"engine": {"ambient": "60 degC", "engine_space": True}, "cabin": {"ambient": "25 degC"}}}


def plan(rulebook: str = "small-craft-iso", **info: Any) -> Plan:
    runs = [
        cable("one", "bank", "a", "5 m", "4 mm2", zone="engine", protection=fuse("30 A")),
        cable("two", "bank", "b", "5 m", "4 mm2", insulation="70 degC", protection=fuse("30 A")),
    ]
    return plan_of(runs, [lamp("a", "a", "10 A"), lamp("b", "b", "20 A")], rulebook=rulebook, tables=ZONES, info=info)


def at(one: Plan, mode: Mode, **case: Any) -> Conductors:
    entry = plan_of([], cases=[{"name": "case", **case}]).cases[0]
    return temperatures.at(one, load(one.plan.rulebook), entry, mode)


def factor(degC: float) -> float:
    """R / R20 = 1 + 0.00393 (T - 20): IEC 60028."""
    return 1 + COPPER_PER_K * (degC - 20)


@pytest.mark.parametrize(("rulebook", "degC"), [("small-craft-us", 29), ("small-craft-iso", 20), ("cabin-nec", 75)])
def test_basis_is_the_rulebooks_temperature(rulebook: str, degC: float) -> None:
    """E-11: K = 10.75 ohm cmil/ft is copper at 29 degC; NEC: K = 12.9 is copper at 75 degC."""
    found = at(plan(rulebook), "basis")
    assert found.degC.tolist() == [degC, degC]
    assert found.factor_of_20 == pytest.approx([factor(degC)] * 2)


def test_k_of_the_trade_formulas_is_copper_at_these_temperatures() -> None:
    """0.017241 ohm mm2/m at 20 degC (IEC 60028); 1 ohm cmil/ft = 0.0005067 / 0.3048 ohm mm2/m."""
    per_k = 0.017241 * 0.3048 / 5.067075e-4
    assert factor(29) * per_k == pytest.approx(10.75, rel=2e-3)
    assert factor(75) * per_k == pytest.approx(12.9, rel=0.03)  # the trade's 12.9 includes the lay of the strand


def test_iec_basis_is_a_factor_on_the_resistance() -> None:
    """IEC 60364-5-52 Annex G: 1.25 times the resistivity at 20 degC, which copper has at 83.6 degC."""
    found = at(plan("cabin-iec"), "basis")
    assert found.factor_of_20.tolist() == [1.25, 1.25]
    assert found.degC == pytest.approx([20 + 0.25 / COPPER_PER_K] * 2)
    assert "1.25 times" in found.text


def test_hot_is_the_insulations_rating_and_cold_the_ambient() -> None:
    """The default insulation of small craft is 105 degC; a run in no zone lies at the plan's 30 degC."""
    assert at(plan(), "hot").degC.tolist() == [105, 70]
    assert at(plan(), "cold").degC.tolist() == [60, 30]
    assert at(plan(), "cold", ambient="10 degC").degC.tolist() == [10, 10]
    assert at(plan(), "cold").factor_of_20 == pytest.approx([factor(60), factor(30)])


@pytest.mark.parametrize(
    ("wish", "degC"),
    [("rulebook", [20, 20]), ("rated", [105, 70]), ("ambient", [60, 30]), ("60 degC", [60, 60]), ("86 degF", [30, 30])],
)
def test_a_plan_has_its_wish(wish: str, degC: list[float]) -> None:
    found = at(plan(conductor_temperature=wish), "plan")
    assert found.degC == pytest.approx(degC)
    # The limits keep the temperature they are meant for, whatever the plan asks.
    assert at(plan(conductor_temperature=wish), "basis").degC.tolist() == [20, 20]


def test_estimated_rise_goes_with_the_square_of_current_over_ampacity() -> None:
    """T = Ta + (Tc - Ta) (I / Iz)², at a current that itself comes from these temperatures."""
    one = plan(conductor_temperature="estimated")
    study = context_of(one).cases[0]
    solution = study.solutions["plan"]
    for run, (ambient, rated) in enumerate([(60.0, 105.0), (30.0, 70.0)]):
        found = study.ampacities[run]
        assert found is not None
        assert found.amps is not None
        expected = ambient + (rated - ambient) * (solution.largest_run_amps[run] / found.amps) ** 2
        assert solution.conductors.degC[run] == pytest.approx(expected, abs=1e-4)
        assert ambient < solution.conductors.degC[run] < rated


def test_estimated_temperature_stops_at_the_insulations_rating() -> None:
    """Over its ampacity, or without one, a conductor is taken at its rating."""
    one = plan()
    entry = one.checked_cases[0]
    limits: list[list[float | None]] = [[5.0, None], [None, 0.0]]
    for amps in limits:
        found = temperatures.estimated(one, load("small-craft-iso"), entry, lambda _: np.array([10.0, 20.0]), amps)
        assert found.degC.tolist() == [105, 70]


def test_conductors_laid_together_are_counted_by_route() -> None:
    """Two for a run of its own return, one for a chassis return, times parallel; a bond counts for nothing."""
    runs = [
        cable("pair", "bank", "a", route="loom"),
        cable("single", "bank", "b", route="loom", **{"return": "chassis"}),
        cable("double", "bank", "c", route="loom", parallel=2),
        cable("bond", "a", "b", route="loom", carries="return", purpose="bond"),
        cable("own word", "bank", "d", route="loom", bundled=3),
        cable("alone", "bank", "e", parallel=2),
        cable("counted", "bank", "f", route="conduit"),
    ]
    tables = {"routes": {"loom": {}, "conduit": {"conductors": 9}}}
    found = temperatures.laid_together(plan_of(runs, tables=tables))
    assert found == {
        "pair": 9, "single": 9, "double": 9, "bond": 9, "own word": 3, "alone": 4, "counted": 9,
    }  # fmt: skip


def test_ampacity_of_a_run_is_that_of_its_thinner_conductor() -> None:
    """33 CFR 183.425 Table 5, 105 degC: 10 AWG 60 A, 14 AWG 35 A; a free size has none."""
    runs = [
        cable("even", "bank", "a", size="10 AWG"),
        cable("thin return", "bank", "b", size="10 AWG", **{"return": {"size": "14 AWG"}}),
        cable("free", "bank", "c", size=None),
    ]
    one, book = plan_of(runs, rulebook="small-craft-us"), load("small-craft-us")
    found = [temperatures.run_ampacity(one, book, run, None, 2) for run in one.runs]
    assert [each.amps if each else None for each in found] == [pytest.approx(60), pytest.approx(35), None]
