"""What conductors withstand in a short circuit, against the published factors and a calculation by hand."""

import math

import pytest

from farvolt.conductors import MATERIALS
from farvolt.withstand import LONGEST_S, k_factor, limit, withstand

# IEC 60364-4-43 Table 43A and IEC 60364-5-54 Tables A.54.2 to A.54.6: metal, initial and final degC, k.
PUBLISHED = [
    ("copper", 70, 160, 115), ("copper", 70, 140, 103), ("copper", 90, 160, 100), ("copper", 90, 140, 86),
    ("copper", 90, 250, 143), ("copper", 60, 200, 141), ("copper", 85, 220, 134), ("copper", 105, 250, 135),
    ("aluminium", 70, 160, 76), ("aluminium", 70, 140, 68), ("aluminium", 90, 250, 94), ("aluminium", 85, 220, 89),
    ("copper", 30, 160, 143), ("copper", 30, 220, 166), ("copper", 30, 250, 176), ("copper", 30, 500, 228),
    ("copper", 30, 200, 159), ("copper", 30, 150, 138),
]  # fmt: skip


@pytest.mark.parametrize(("material", "initial", "final", "published"), PUBLISHED)
def test_k_is_that_of_the_published_tables(material: str, initial: float, final: float, published: float) -> None:
    assert k_factor(material, initial, final) == pytest.approx(published, abs=0.75)


def test_a_calculation_by_hand() -> None:
    # 10 mm2 copper, PVC, k = 115 (IEC 60364-4-43 Table 43A): 1000 A for t = (115 x 10)² / 1000² = 1.32 s.
    found = withstand("copper", 10, 70)
    assert found.reaches_limit_s(1000) == pytest.approx(1.3225, rel=0.005)
    # A fault of 29.86 A for 5 s is far from what 1.5 mm2 withstands: (115 x 1.5)² = 29,756 A2s.
    assert withstand("copper", 1.5, 70).joule_A2s == pytest.approx(29_756, rel=0.005)
    assert withstand("copper", 1.5, 70).joule_A2s > 29.86**2 * 5


@pytest.mark.parametrize("material", ["copper", "aluminium"])
def test_the_limit_is_reached_where_the_heat_balance_says(material: str) -> None:
    # The same, integrated step by step: ohmic heat of 1 m of 10 mm2 at its own temperature into its heat capacity.
    heat = {"copper": 3.45, "aluminium": 2.5}[material] * 1e-3 * 1000 * 10  # J/K; IEC 60364-5-54 Annex A
    resistivity = {"copper": 0.017241, "aluminium": 0.028264}[material]  # ohm mm2/m; IEC 60028, IEC 60889
    beta = {"copper": 234.5, "aluminium": 228}[material]
    temperature, time, step = 70.0, 0.0, 1e-4
    while temperature < 160:
        ohm = resistivity / 10 * (beta + temperature) / (beta + 20)
        temperature += 1000**2 * ohm * step / heat
        time += step
    assert withstand(material, 10, 70).reaches_limit_s(1000) == pytest.approx(time, rel=1e-3)


def test_a_higher_rated_insulation_has_less_room_for_heat_unless_its_limit_is_higher() -> None:
    assert [limit(rating).final_degC for rating in (60, 75, 90, 105, 125, 200)] == [160, 160, 160, 160, 250, 250]
    assert withstand("copper", 10, 105).joule_A2s < withstand("copper", 10, 70).joule_A2s
    assert withstand("copper", 10, 125).joule_A2s > withstand("copper", 10, 105).joule_A2s
    assert withstand("copper", 10, 105).provisional
    assert not withstand("copper", 10, 70).provisional


def test_thick_thermoplastic_conductors_stand_less() -> None:
    # IEC 60364-4-43 Table 43A: above 300 mm2 PVC ends at 140 degC, k = 103.
    assert withstand("copper", 400, 70).k == pytest.approx(103, abs=0.5)
    assert withstand("copper", 300, 70).k == pytest.approx(115, abs=0.5)


@pytest.mark.parametrize("material", MATERIALS)
def test_every_metal_has_its_figures(material: str) -> None:
    # Between aluminium and copper, and twice the conductors withstand four times the heat.
    assert 75 < withstand(material, 10, 70).k < 116
    assert withstand(material, 10, 70, parallel=2).joule_A2s == pytest.approx(4 * withstand(material, 10, 70).joule_A2s)


def test_the_damage_curve_ends_where_it_is_claimed() -> None:
    found = withstand("copper", 10, 70)
    (low, longest), (high, shortest) = found.points()
    assert longest == LONGEST_S
    assert low**2 * longest == pytest.approx(found.joule_A2s)
    assert high**2 * shortest == pytest.approx(found.joule_A2s)
    assert found.reaches_limit_s(0) == math.inf


def test_a_conductor_that_starts_at_its_limit_withstands_nothing() -> None:
    assert k_factor("copper", 160, 160) == 0
    assert withstand("copper", 10, 260).reaches_limit_s(1) == 0
