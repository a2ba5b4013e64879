"""Ampacity against spot values of each rulebook's published tables, and the rules around them."""

import math
import re

import pytest

from farvolt.ampacity import Ampacity, ampacity, at_current, conductor_temperature_degC
from farvolt.conductors import parse_size
from farvolt.rulebook import load


def allowed(
    book: str,
    size: str,
    insulation_degC: float,
    *,
    material: str = "copper",
    ambient_degC: float = 30,
    engine_space: bool = False,
    conductors: int = 2,
    parallel: int = 1,
) -> Ampacity:
    return ampacity(
        load(book),
        size=parse_size(size),
        material=material,
        insulation_degC=insulation_degC,
        ambient_degC=ambient_degC,
        engine_space=engine_space,
        conductors=conductors,
        parallel=parallel,
    )


@pytest.mark.parametrize(
    ("book", "size", "insulation_degC", "amps"),
    [
        # 33 CFR 183.425 Table 5 (105 degC also E-11), outside engine spaces.
        ("small-craft-us", "18 AWG", 105, 20),
        ("small-craft-us", "16 AWG", 60, 15),
        ("small-craft-us", "14 AWG", 75, 20),
        ("small-craft-us", "12 AWG", 80, 35),
        ("small-craft-us", "10 AWG", 105, 60),
        ("small-craft-us", "6 AWG", 90, 100),
        ("small-craft-us", "2/0 AWG", 105, 330),
        ("small-craft-us", "4/0 AWG", 125, 475),
        ("small-craft-us", "4/0 AWG", 200, 510),
        # ISO 10133:2012 Table A.1.
        ("small-craft-iso", "1.5 mm2", 60, 12),
        ("small-craft-iso", "1.5 mm2", 105, 25),
        ("small-craft-iso", "2.5 mm2", 105, 35),
        ("small-craft-iso", "4 mm2", 60, 22),
        ("small-craft-iso", "4 mm2", 105, 45),
        ("small-craft-iso", "6 mm2", 105, 60),
        # NEC Table 310.16, copper.
        ("cabin-nec", "14 AWG", 60, 15),
        ("cabin-nec", "10 AWG", 75, 35),
        ("cabin-nec", "3 AWG", 90, 115),
        ("cabin-nec", "4/0 AWG", 75, 230),
        ("cabin-nec", "500 kcmil", 90, 430),
        ("leisure-vehicle-us", "8 AWG", 75, 50),
        # IEC 60364-5-52 Tables B.52.2 and B.52.3, method C.
        ("cabin-iec", "1.5 mm2", 70, 19.5),
        ("cabin-iec", "16 mm2", 70, 85),
        ("cabin-iec", "2.5 mm2", 90, 33),
        ("leisure-vehicle-eu", "120 mm2", 90, 382),
    ],
)
def test_spot_values_of_the_tables(book: str, size: str, insulation_degC: float, amps: float) -> None:
    found = allowed(book, size, insulation_degC)
    assert found.amps == amps
    assert found.missing == ""
    assert found.working[-1] == f"= {amps:g} A"


@pytest.mark.parametrize(
    ("insulation_degC", "factor"),
    [(60, 0.58), (75, 0.75), (80, 0.78), (90, 0.82), (105, 0.85), (125, 0.89)],
)  # 33 CFR 183.425 Table 5, note 1
def test_engine_space_factors_are_near_the_heat_balance(insulation_degC: float, factor: float) -> None:
    found = allowed("small-craft-us", "10 AWG", insulation_degC, engine_space=True)
    assert found.engine_factor == factor
    assert factor == pytest.approx(math.sqrt((insulation_degC - 50) / (insulation_degC - 30)), abs=0.008)


def test_engine_space_stands_for_its_own_50_degc_and_is_not_counted_twice() -> None:
    # 33 CFR 183.425: 10 AWG, 105 degC, 60 A x 0.85 = 51 A inside engine spaces.
    for ambient_degC in (20, 30, 50):
        found = allowed("small-craft-us", "10 AWG", 105, engine_space=True, ambient_degC=ambient_degC)
        assert found.amps == pytest.approx(51)
        assert found.ambient_factor == 1
    hotter = allowed("small-craft-us", "10 AWG", 105, engine_space=True, ambient_degC=60)
    assert hotter.amps == pytest.approx(51 * math.sqrt((105 - 60) / (105 - 50)))
    assert any("sqrt((105 - 60) / (105 - 50))" in line for line in hotter.working)


def test_a_rulebook_without_engine_spaces_takes_the_zone_as_it_is() -> None:
    engine = allowed("cabin-nec", "10 AWG", 75, engine_space=True, ambient_degC=50)
    plain = allowed("cabin-nec", "10 AWG", 75, ambient_degC=50)
    assert engine.amps == plain.amps == pytest.approx(35 * 0.75)
    assert any("no engine-space factor" in line for line in engine.working)


def test_insulation_of_60_degc_is_not_for_engine_spaces() -> None:
    # ISO 10133 Annex A.
    assert allowed("small-craft-iso", "6 mm2", 60, engine_space=True).amps == 0


@pytest.mark.parametrize(
    ("book", "insulation_degC", "ambient_degC", "factor"),
    [
        # NEC Table 310.15(B)(1): rows are ranges.
        ("cabin-nec", 75, 30, 1.00),
        ("cabin-nec", 75, 31, 0.94),
        ("cabin-nec", 75, 35, 0.94),
        ("cabin-nec", 75, 35.5, 0.88),
        ("cabin-nec", 60, 55, 0.41),
        ("cabin-nec", 90, 5, 1.15),
        # IEC 60364-5-52 Table B.52.14: the next higher listed ambient.
        ("cabin-iec", 70, 30, 1.00),
        ("cabin-iec", 70, 36, 0.87),
        ("cabin-iec", 90, 60, 0.71),
        ("leisure-vehicle-eu", 70, 60, 0.50),
    ],
)
def test_listed_ambient_factors(book: str, insulation_degC: float, ambient_degC: float, factor: float) -> None:
    assert allowed(book, "10 AWG", insulation_degC, ambient_degC=ambient_degC).ambient_factor == factor


def test_ambient_by_heat_balance_gives_no_credit_below_its_reference() -> None:
    for ambient_degC in (-20, 0, 30):
        assert allowed("small-craft-iso", "6 mm2", 105, ambient_degC=ambient_degC).ambient_factor == 1
    warm = allowed("small-craft-iso", "6 mm2", 105, ambient_degC=45)
    assert warm.ambient_factor == pytest.approx(math.sqrt(60 / 75))
    assert "ambient 45 degC: x sqrt((105 - 45) / (105 - 30)) = x 0.8944" in warm.working[1]


@pytest.mark.parametrize("book", ["small-craft-us", "small-craft-iso", "cabin-nec", "cabin-iec"])
@pytest.mark.parametrize("engine_space", [True, False])
def test_nothing_may_flow_where_it_is_as_hot_as_the_insulation_bears(book: str, engine_space: bool) -> None:
    for ambient_degC in (90, 120):
        found = allowed(book, "10 AWG", 90, ambient_degC=ambient_degC, engine_space=engine_space)
        assert found.amps == 0
        assert any("at or above the insulation's" in line for line in found.working)


@pytest.mark.parametrize(
    ("book", "conductors", "factor"),
    [
        # E-11 and 33 CFR 183.425 Table 5, note 2.
        ("small-craft-us", 2, 1.00),
        ("small-craft-us", 3, 0.70),
        ("small-craft-us", 6, 0.60),
        ("small-craft-us", 7, 0.50),
        ("small-craft-us", 40, 0.40),
        # NEC Table 310.15(C)(1).
        ("cabin-nec", 3, 1.00),
        ("cabin-nec", 4, 0.80),
        ("cabin-nec", 9, 0.70),
        ("cabin-nec", 20, 0.50),
        ("cabin-nec", 41, 0.35),
        # IEC 60364-5-52 Table B.52.17 item 1 counts circuits of two conductors.
        ("cabin-iec", 2, 1.00),
        ("cabin-iec", 3, 0.80),
        ("cabin-iec", 4, 0.80),
        ("cabin-iec", 12, 0.57),
        ("cabin-iec", 20, 0.45),
    ],
)
def test_factors_for_conductors_laid_together(book: str, conductors: int, factor: float) -> None:
    assert allowed(book, "10 AWG", 90, conductors=conductors).bundle_factor == factor


def test_more_circuits_than_the_table_lists_is_missing() -> None:
    found = allowed("cabin-iec", "6 mm2", 70, conductors=42)
    assert found.amps is None
    assert found.missing == "cabin-iec lists no factor for 42 conductors laid together (21 circuits)"


@pytest.mark.parametrize(
    ("book", "size", "listed", "amps"),
    [
        ("small-craft-us", "6 mm2", "10 AWG", 60),  # 5.26 mm2 is the largest not above 6 mm2
        ("small-craft-us", "10 SAE", "12 AWG", 45),  # 4.73 mm2 is thinner than 10 AWG
        ("small-craft-iso", "10 AWG", "4 mm2", 45),
        ("small-craft-iso", "240 mm2", "150 mm2", 475),
        ("small-craft-us", "13 AWG", "14 AWG", 35),
    ],
)
def test_a_size_not_listed_takes_the_next_thinner(book: str, size: str, listed: str, amps: float) -> None:
    found = allowed(book, size, 105)
    assert found.amps == amps
    assert found.table_size == parse_size(listed)
    assert found.working[0].startswith(f"{size} is not listed: the next thinner listed size is {listed}")


def test_an_insulation_not_listed_takes_the_next_lower_and_says_so() -> None:
    found = allowed("cabin-nec", "10 AWG", 105)
    assert (found.amps, found.column_degC) == (40, 90)
    assert "105 degC insulation is not listed: the next lower listed rating is 90 degC" in found.working


@pytest.mark.parametrize(
    ("book", "size", "insulation_degC", "material", "reason"),
    [
        ("small-craft-us", "10 AWG", 105, "aluminium", "its tables are for copper and tinned copper"),
        ("cabin-iec", "25 mm2", 70, "copper-clad aluminium", "its tables are for copper and tinned copper"),
        ("cabin-nec", "16 AWG", 75, "copper", "its thinnest conductor is 14 AWG"),
        ("small-craft-iso", "0.5 mm2", 105, "copper", "its thinnest conductor is 0.75 mm2"),
        ("cabin-iec", "6 mm2", 60, "copper", "its lowest is 70 degC"),
    ],
)
def test_what_no_table_holds_is_missing_with_its_reason(
    book: str, size: str, insulation_degC: float, material: str, reason: str
) -> None:
    found = allowed(book, size, insulation_degC, material=material)
    assert found.amps is None
    assert reason in found.missing
    assert found.working[-1] == found.missing


def test_no_ambient_factor_is_made_up_beyond_the_table() -> None:
    found = allowed("cabin-iec", "6 mm2", 70, ambient_degC=65)
    assert found.amps is None
    assert found.missing == "cabin-iec lists no ambient factor for 70 degC insulation at 65 degC ambient"


def test_aluminium_has_its_own_nec_column_and_is_provisional() -> None:
    # NEC Table 310.16, aluminium: 4 AWG, 75 degC, 65 A.
    found = allowed("cabin-nec", "4 AWG", 75, material="aluminium")
    assert (found.amps, found.provisional) == (65, True)


def test_small_vehicle_sizes_take_their_greatest_protection() -> None:
    # NEC 551.10(E)(1): 18 AWG 6 A, 16 AWG 8 A; 310.16 starts at 14 AWG.
    for size, amps in (("18 AWG", 6), ("16 AWG", 8), ("14 AWG", 25)):
        assert allowed("leisure-vehicle-us", size, 90).amps == amps
    assert allowed("leisure-vehicle-us", "18 AWG", 90).provisional


def test_parallel_conductors_add_and_count_in_the_bundle() -> None:
    found = allowed("small-craft-us", "4/0 AWG", 105, conductors=4, parallel=2)
    assert found.amps == pytest.approx(445 * 0.60 * 2)
    assert found.working[-1] == "= 445 x 0.6 x 2 in parallel = 534 A"
    assert allowed("small-craft-us", "4/0 AWG", 105, conductors=1, parallel=3).bundle_factor == 0.70


def test_the_working_can_be_redone_with_a_calculator() -> None:
    found = allowed("small-craft-iso", "6 mm2", 105, engine_space=True, ambient_degC=60, conductors=4)
    assert found.working == (
        "6 mm2, 105 degC insulation: 60 A (ISO 10133 Table A.1, provisional)",
        "engine space (50 degC), 105 degC insulation: x 0.86 (ISO 10133:2012 Annex A, provisional)",
        "ambient 60 degC: x sqrt((105 - 60) / (105 - 50)) = x 0.9045 "
        "(common practice, on top of the engine-space factor)",
        "4 conductors laid together: x 0.70 (ISO 13297 Annex A, bundles of more than three conductors, provisional)",
        "= 60 x 0.86 x 0.9045 x 0.7 = 32.67 A",
    )
    assert found.amps == pytest.approx(60 * 0.86 * math.sqrt(45 / 55) * 0.7)


def test_provisional_follows_the_figures_used() -> None:
    assert not allowed("small-craft-us", "10 AWG", 105).provisional
    assert allowed("small-craft-us", "10 AWG", 200, engine_space=True).provisional  # the 1.00 is recalled
    assert allowed("cabin-iec", "6 mm2", 70).provisional
    assert allowed("small-craft-us", "10 AWG", 105).basis == "33 CFR 183.425 Table 5 and E-11"


def test_conductor_temperature_rises_with_the_square_of_the_current() -> None:
    # At its ampacity a conductor reaches its rating: 30 + 75 x 1; at half of it a quarter of the rise.
    assert conductor_temperature_degC(60, 60, 30, 105) == pytest.approx(105)
    assert conductor_temperature_degC(30, 60, 30, 105) == pytest.approx(30 + 75 / 4)
    assert conductor_temperature_degC(-30, 60, 30, 105) == pytest.approx(30 + 75 / 4)
    assert conductor_temperature_degC(0, 0, 110, 105) == 110
    assert conductor_temperature_degC(1, 0, 110, 105) == math.inf


@pytest.mark.parametrize(
    ("current_A", "degC", "mohm"),
    [
        (0.0, 30.0, 3.30 * (1 + 0.00393 * 10)),
        (35.0, 48.75, 3.30 * (1 + 0.00393 * 28.75)),
        (70.0, 105.0, 3.30 * (1 + 0.00393 * 85)),
    ],
)
def test_resistance_at_the_current_goes_with_the_temperature_it_causes(
    current_A: float, degC: float, mohm: float
) -> None:  # fmt: skip
    """Of 6 mm2, class 5: 3.30 mohm/m at 20 degC (IEC 60228 Table 3), 0.00393 per kelvin (IEC 60028).

    At half the ampacity a quarter of the rise: 30 + 75 / 4 = 48.75 degC.
    """
    size = parse_size("6 mm2")
    found = Ampacity(70.0, (), "", False, "", 70.0, size, 105.0)
    line = at_current(found, current_A, 30.0, size, "copper", "flexible")
    told = re.search(r" = ([\d.]+) degC, ([\d.]+) mohm/m$", line)
    assert told is not None
    assert float(told[1]) == pytest.approx(degC, rel=5e-3)
    assert float(told[2]) == pytest.approx(mohm, rel=5e-3)


def test_a_conductor_without_ampacity_has_no_temperature_to_tell() -> None:
    size = parse_size("6 mm2")
    for amps in (None, 0.0):
        found = Ampacity(amps, (), "", False, "", 70.0, size, 105.0)
        assert at_current(found, 10.0, 30.0, size, "copper", "flexible") == ""
