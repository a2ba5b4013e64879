"""Conductor sizes, resistances and masses against published tables and plain physics."""

import contextlib
import csv
import math
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from farvolt.conductors import (
    MATERIALS,
    STRANDS,
    SYSTEMS,
    Size,
    made_sizes,
    mass_kg_per_m,
    other_system,
    parse_size,
    resistance_20_ohm_per_m,
    resistance_ohm_per_m,
    temperature_coefficient,
)
from farvolt.errors import SizeError

FEET_1000_M = 304.8
RHO20 = {"copper": 0.017241, "tinned copper": 0.017241, "aluminium": 0.028264}
"""Resistivity in ohm mm2 per metre at 20 degC: IEC 60028, IEC 60889."""
ALL_SIZES = [size for system in SYSTEMS for size in made_sizes(system)]


def reference(name: str) -> list[dict[str, str]]:
    with (Path(__file__).parent / "reference" / name).open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


@pytest.mark.parametrize(
    ("text", "name"),
    [
        ("6 mm2", "6 mm2"),
        ("6mm²", "6 mm2"),
        ("6 SQMM", "6 mm2"),
        ("1.0 mm2", "1 mm2"),
        ("10 AWG", "10 AWG"),
        ("10awg", "10 AWG"),
        ("AWG 10", "10 AWG"),
        ("13 AWG", "13 AWG"),
        ("2/0 AWG", "2/0 AWG"),
        ("2 / 0 awg", "2/0 AWG"),
        ("00 AWG", "2/0 AWG"),
        ("0 AWG", "1/0 AWG"),
        ("10 SAE", "10 SAE"),
        ("250 kcmil", "250 kcmil"),
    ],
)
def test_a_size_is_read_in_its_usual_spellings(text: str, name: str) -> None:
    assert parse_size(text).name == name


@pytest.mark.parametrize(
    ("text", "problem", "nearest"),
    [
        ("10", "different sizes", '"10 mm2" or "10 AWG" or "10 SAE"'),
        ("10 gauge", "AWG or SAE", '"10 AWG" or "10 SAE"'),
        ("5 mm2", "no table knows 5 mm2", '"6 mm2"'),
        ("26 AWG", "no table knows 26 AWG", '"20 AWG"'),
        ("7/0 AWG", "no table knows 7/0 AWG", '"4/0 AWG"'),
        ("9 SAE", "no table knows 9 SAE", '"8 SAE"'),
        ("2,5 mm2", "decimal comma", '"2.5 mm2"'),
        ("6 mm", "not a system", '"6 mm2"'),
        ("10 AGW", "not a system", '"10 AWG"'),
        ("#10 AWG", "not a conductor size", '"10 AWG"'),
        ("1/2 AWG", "no table knows", ""),
        ("", "is empty", ""),
        ("thick", "not a conductor size", ""),
    ],
)
def test_what_is_no_size_gets_its_reason_and_the_nearest_size(text: str, problem: str, nearest: str) -> None:
    with pytest.raises(SizeError) as caught:
        parse_size(text)
    assert problem in caught.value.problem
    assert caught.value.nearest == nearest
    assert caught.value.accepted


@given(st.text(max_size=30))
def test_any_text_is_a_size_or_a_size_error(text: str) -> None:
    with contextlib.suppress(SizeError):  # any other exception fails the test
        size = parse_size(text)
        assert parse_size(size.name) == size


def test_a_size_has_one_name_that_reads_back() -> None:
    assert [parse_size(size.name) for size in ALL_SIZES] == ALL_SIZES


def test_made_sizes_rise_from_the_thinnest_to_the_thickest_of_each_system() -> None:
    ends = {"metric": ("0.5 mm2", "240 mm2"), "AWG": ("20 AWG", "4/0 AWG"), "SAE": ("18 SAE", "4/0 SAE")}
    for system in SYSTEMS:
        sizes = made_sizes(system)
        assert (sizes[0].name, sizes[-1].name) == ends[system]
        areas = [size.area_mm2 for size in sizes]
        assert areas == sorted(set(areas))


@pytest.mark.parametrize(
    ("name", "diameter_inch"), [("4/0 AWG", 0.4600), ("10 AWG", 0.1019), ("18 AWG", 0.0403)]
)  # ASTM B258, Table 1
def test_awg_diameters_follow_astm_b258(name: str, diameter_inch: float) -> None:
    diameter_mm = math.sqrt(4 / math.pi * parse_size(name).area_mm2)
    assert diameter_mm / 25.4 == pytest.approx(diameter_inch, abs=0.00005)


def test_awg_areas_in_circular_mils_are_those_of_the_nec() -> None:
    # NEC chapter 9 Table 8, column "circular mils".
    cmil = {"18 AWG": 1620, "14 AWG": 4110, "10 AWG": 10380, "6 AWG": 26240, "4/0 AWG": 211600}
    for name, expected in cmil.items():
        diameter_mil = math.sqrt(4 / math.pi * parse_size(name).area_mm2) / 0.0254
        assert diameter_mil**2 == pytest.approx(expected, rel=0.003)


def test_sae_gauges_are_smaller_than_awg_of_the_same_number() -> None:
    # SAE J1127 and J1128 give least areas: 10 gauge 9343 circular mils, AWG 10380.
    for size in made_sizes("SAE"):
        ratio = size.area_mm2 / parse_size(size.name.replace("SAE", "AWG")).area_mm2
        assert 0.89 < ratio < 0.98, size.name
    assert parse_size("10 SAE").area_mm2 == pytest.approx(4.734, abs=0.001)


@pytest.mark.parametrize("strand", STRANDS)
@pytest.mark.parametrize("material", ["copper", "tinned copper", "aluminium"])
def test_resistance_lies_a_little_above_that_of_the_pure_metal(material: str, strand: str) -> None:
    # A conductor is never better than annealed metal of its area (IEC 60028, 60889); tin adds up to 4 % more.
    most = 1.20 if material == "tinned copper" else 1.16
    for size in ALL_SIZES:
        ratio = resistance_20_ohm_per_m(size, material, strand).value * size.area_mm2 / RHO20[material]
        assert 1 - 1e-9 <= ratio <= most, size.name


@pytest.mark.parametrize("strand", STRANDS)
@pytest.mark.parametrize("material", MATERIALS)
def test_a_thicker_conductor_of_a_system_has_less_resistance(material: str, strand: str) -> None:
    for system in SYSTEMS:
        ohms = [resistance_20_ohm_per_m(size, material, strand).value for size in made_sizes(system)]
        assert ohms == sorted(ohms, reverse=True)


@pytest.mark.parametrize(
    ("name", "material", "strand", "ohm_per_km"),
    [
        ("1.5 mm2", "copper", "flexible", 13.3),
        ("6 mm2", "copper", "flexible", 3.30),
        ("6 mm2", "copper", "stranded", 3.08),
        ("6 mm2", "copper", "solid", 3.08),
        ("6 mm2", "tinned copper", "flexible", 3.39),
        ("50 mm2", "copper", "flexible", 0.386),
        ("95 mm2", "copper", "stranded", 0.193),
        ("16 mm2", "aluminium", "stranded", 1.91),
    ],
)  # IEC 60228:2004 Tables 1, 2 and 3
def test_metric_resistances_are_those_of_iec_60228(
    name: str, material: str, strand: str, ohm_per_km: float
) -> None:
    value = resistance_20_ohm_per_m(parse_size(name), material, strand)
    assert value.value * 1000 == pytest.approx(ohm_per_km, rel=1e-12)
    assert "IEC 60228" in value.source
    assert value.provisional == (material == "aluminium")


def test_where_the_standard_lists_no_conductor_the_source_says_computed() -> None:
    flexible_aluminium = resistance_20_ohm_per_m(parse_size("25 mm2"), "aluminium", "flexible")
    assert flexible_aluminium.source.startswith("computed")
    assert flexible_aluminium.provisional
    tinned_solid = resistance_20_ohm_per_m(parse_size("35 mm2"), "tinned copper", "solid")
    assert tinned_solid.value * 1000 == 0.529  # IEC 60228 class 2, metal-coated
    assert "class 1 lists no tinned" in tinned_solid.note


@pytest.mark.parametrize("row", reference("nec_ch9_t8.csv"), ids=lambda row: row["size"])
def test_awg_resistances_at_75_degc_agree_with_the_nec(row: dict[str, str]) -> None:
    # NEC chapter 9 Table 8, ohm per 1000 ft at 75 degC; the table itself is rounded to three digits.
    columns = {
        "solid_copper": ("copper", "solid", 0.015),
        "stranded_copper": ("copper", "stranded", 0.015),
        "stranded_tinned": ("tinned copper", "stranded", 0.02),
        "stranded_aluminium": ("aluminium", "stranded", 0.02),
    }
    size = parse_size(row["size"])
    for column, (material, strand, tolerance) in columns.items():
        text = row[f"{column}_ohm_per_1000_ft_75degC"]
        if text:
            ohm = resistance_ohm_per_m(size, material, strand, 75) * FEET_1000_M
            assert ohm == pytest.approx(float(text), rel=tolerance), column


@pytest.mark.parametrize(("name", "ohm_per_1000_ft"), [("12 AWG", 1.62), ("7 AWG", 0.508)])
def test_solid_wire_at_25_degc_agrees_with_neets_module_4(name: str, ohm_per_1000_ft: float) -> None:
    # US Navy NEETS Module 4, standard annealed solid copper at 25 degC.
    ohm = resistance_ohm_per_m(parse_size(name), "copper", "solid", 25) * FEET_1000_M
    assert ohm == pytest.approx(ohm_per_1000_ft, rel=0.002)


def test_resistance_at_a_temperature_follows_the_faa_formula() -> None:
    # FAA AC 43.13-1B 11-66: the length of equal drop goes with 254.5 / (234.5 + T).
    at_20, at_105 = (resistance_ohm_per_m(parse_size("16 mm2"), "copper", "flexible", t) for t in (20, 105))
    ratio = at_20 / at_105
    assert ratio == pytest.approx(254.5 / (234.5 + 105), rel=2e-4)


@pytest.mark.parametrize("material", MATERIALS)
def test_the_formula_is_refused_where_it_gives_no_resistance(material: str) -> None:
    zero_degC = 20 - 1 / temperature_coefficient(material).value
    with pytest.raises(ValueError, match="does not hold"):
        resistance_ohm_per_m(parse_size("6 mm2"), material, "flexible", zero_degC - 0.1)
    with pytest.raises(ValueError, match="does not hold"):
        resistance_ohm_per_m(parse_size("6 mm2"), material, "flexible", math.nan)
    assert resistance_ohm_per_m(parse_size("6 mm2"), material, "flexible", zero_degC + 1) > 0


def test_temperature_coefficients_agree_with_the_zero_resistance_temperatures() -> None:
    # IEC 60364-5-54 Annex A: beta = 234.5 for copper, 228 for aluminium, 1 / alpha - 20.
    assert 1 / temperature_coefficient("copper").value - 20 == pytest.approx(234.5, abs=0.1)
    assert 1 / temperature_coefficient("aluminium").value - 20 == pytest.approx(228, abs=0.2)


def test_clad_aluminium_lies_between_copper_and_aluminium() -> None:
    # ASTM B566 class 10: a tenth of the area is copper. The two conduct 0.1 + 0.9 x 0.61 = 64.9 % at best.
    size = parse_size("10 AWG")
    rho = resistance_20_ohm_per_m(size, "copper-clad aluminium", "solid").value * size.area_mm2
    assert RHO20["copper"] / 0.649 < rho < RHO20["aluminium"]
    clad = mass_kg_per_m(size, "copper-clad aluminium")
    mixture = 0.1 * mass_kg_per_m(size, "copper") + 0.9 * mass_kg_per_m(size, "aluminium")
    assert clad == pytest.approx(mixture, rel=0.002)
    assert resistance_20_ohm_per_m(size, "copper-clad aluminium", "solid").provisional


def test_mass_is_density_times_area() -> None:
    # IEC 60028: 8890 kg/m3, so 1 mm2 weighs 8.89 g per metre.
    assert mass_kg_per_m(parse_size("10 mm2"), "copper") == pytest.approx(0.0889)


@pytest.mark.parametrize(
    ("name", "other"),
    [
        ("6 mm2", "10 AWG"),
        ("10 AWG", "6 mm2"),
        ("4/0 AWG", "120 mm2"),
        ("240 mm2", "500 kcmil"),
        ("4 SAE", "16 mm2"),
    ],
)
def test_the_other_system_shows_the_nearest_area(name: str, other: str) -> None:
    assert other_system(parse_size(name)).name == other


def test_every_figure_of_every_made_conductor_names_its_source() -> None:
    for size in ALL_SIZES:
        for material in MATERIALS:
            for strand in STRANDS:
                assert resistance_20_ohm_per_m(size, material, strand).source


def test_sizes_are_compared_by_value() -> None:
    assert parse_size("6 mm2") == Size("metric", "6 mm2", 6.0)
    assert parse_size("6mm²") == parse_size("6 SQMM")
