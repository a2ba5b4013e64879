"""Two-wire drops that others worked out in print, through the whole program: plan file, network, solver, result."""

import pytest

from farvolt import planfile
from farvolt.study import study

FOOT_M = 0.3048

PLAN = """
format = 1
[plan]
name = "Worked example"
nominal = "{nominal} V"
conductor_temperature = "{degC} degC"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "{nominal} V"
resistance = "1 mohm"
[[runs]]
name = "run"
from = "bank"
to = "load"
length = "{length_m} m"
{run}
[[loads]]
name = "load"
at = "load"
current = "{amps} A"
"""


def drop_V(run: str, length_m: float, amps: float, *, degC: float = 20.0, nominal: float = 48.0) -> float:
    """The drop of the one load of a plan, as the program reports it, from the bank's terminals to the load."""
    text = PLAN.format(run=run, length_m=repr(length_m), amps=amps, degC=degC, nominal=nominal)
    case = study(planfile.parse(text)).cases[0]
    assert case.solved
    assert case.loads[0].drop_V is not None
    return case.loads[0].drop_V


def measured(ohm: float) -> str:
    return f'size = "10 AWG"\nresistance = "{ohm!r} ohm"'


def one_way_ft(feet: float) -> float:
    return feet * FOOT_M


# Aircraft: one wire, back through the airframe ------------------------------------------------------------------


@pytest.mark.parametrize(
    ("feet", "amps", "ohm_per_ft", "printed_V"),
    [(107, 20, 0.00044, 0.942), (90, 20, 0.00028, 0.504), (88, 20, 0.00202, 3.60), (100, 20, 0.00306, 6.12)],
)
def test_chosen_wires_of_the_aviation_circular(feet: float, amps: float, ohm_per_ft: float, printed_V: float) -> None:
    """FAA AC 43.13-1B change 1, Table 11-7 (its 3.60 V is 3.555 V rounded up): No. 6, 4, 12 and 14 wire."""
    found = drop_V(measured(ohm_per_ft * feet), one_way_ft(feet), amps)
    assert found == pytest.approx(ohm_per_ft * feet * amps, rel=1e-9)
    assert found == pytest.approx(printed_V, abs=0.05)


@pytest.mark.parametrize(("feet", "printed_V"), [(39, 0.98), (156, 3.93), (273, 6.88)])
def test_longest_runs_of_the_aviation_circular(feet: float, printed_V: float) -> None:
    """FAA AC 43.13-1B change 1, Table 11-8: No. 10 wire of 0.00126 ohm/ft with 20 A at limits of 1, 4 and 7 V.
    (The 0.366 V printed for 19.5 ft is a misprint: 0.491 V.)"""
    assert drop_V(measured(0.00126 * feet), one_way_ft(feet), 20) == pytest.approx(printed_V, abs=0.005)


# Buildings: American sizes at 75 °C ------------------------------------------------------------------------------


def test_sixteen_gauge_in_a_building() -> None:
    """NEC chapter 9 Table 8, as US trade texts work it: 16 AWG of 4.99 ohm/kFT, 100 ft one way, 4 A at 24 V:
    4.0 V. The table's strand lies a little longer than the 2 % counted here."""
    found = drop_V('size = "16 AWG"\nstrand = "stranded"', one_way_ft(100), 4, degC=75, nominal=24)
    assert found == pytest.approx(3.992, rel=5e-3)
    assert found / 24 == pytest.approx(0.1663, rel=5e-3)


def test_twelve_gauge_in_a_building() -> None:
    """NEC chapter 9 Table 8, in a US trade guide: 12 AWG of 1.98 ohm/kFT, 100 ft one way, 20 A: 7.92 V."""
    found = drop_V('size = "12 AWG"\nstrand = "stranded"', one_way_ft(100), 20, degC=75)
    assert found == pytest.approx(7.92, rel=7e-3)


def test_circular_mils_at_75_degrees() -> None:
    """Electricians' examination guide: VD = 2·K·I·D/CM, K = 12.9, 16 A, 70 ft one way, 6530 circular mils: 4.43 V."""
    found = drop_V('size = "12 AWG"\nstrand = "stranded"', one_way_ft(70), 16, degC=75)
    assert found == pytest.approx(2 * 12.9 * 16 * 70 / 6530, rel=5e-3)
    assert found == pytest.approx(4.43, rel=5e-3)


@pytest.mark.parametrize(("size", "feet", "ohm"), [("12 AWG", 2500, 4.05), ("7 AWG", 6000, 3.048)])
def test_resistance_of_a_length_of_wire(size: str, feet: float, ohm: float) -> None:
    """NEETS (US Navy), module 4, question 1-12: solid No. 12 (1.62 ohm/kFT) and No. 7 (0.508 ohm/kFT) at 25 °C.
    The run has two wires, so half the length each; 1 A drops as many volts as it has ohms."""
    found = drop_V(f'size = "{size}"\nstrand = "solid"', one_way_ft(feet / 2), 1, degC=25)
    assert found == pytest.approx(ohm, rel=1e-3)


# Small craft ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("size", "circular_mils", "amps", "loop_ft"),
    [("16 AWG", 2583, 5, 30), ("10 AWG", 10383, 20, 40), ("6 AWG", 26251, 40, 50), ("1/0 AWG", 105534, 150, 30)],
)
def test_circular_mils_of_the_small_craft_standard(
    size: str, circular_mils: float, amps: float, loop_ft: float
) -> None:
    """ABYC E-11: CM = K·I·L/E with K = 10.75 and L there and back, turned round to the drop E. K is copper at 29 °C
    without any lay of the strand, which this size's solid wire has not either."""
    found = drop_V(f'size = "{size}"\nstrand = "solid"', one_way_ft(loop_ft / 2), amps, degC=29)
    assert found == pytest.approx(10.75 * amps * loop_ft / circular_mils, rel=3e-3)


ISO_TABLE = [(1, 1, 22), (2.5, 2, 27), (6, 3, 44), (10, 10, 22), (35, 4, 192), (70, 5, 307), (120, 10, 263)]
"""ISO 10133:2012, 3 % of 12 V: mm², metres there and back, ampere; as printed in an appendix that summarises it."""


@pytest.mark.parametrize(("area_mm2", "loop_m", "amps"), ISO_TABLE)
def test_metric_formula_of_the_small_craft_standard(area_mm2: float, loop_m: float, amps: float) -> None:
    """S = 0.0164·I·L/E with E = 0.36 V: the printed currents are whole ampere, so the drop is right to 0.75 A."""
    ohm = 0.0164 * loop_m / area_mm2
    assert drop_V(measured(ohm), loop_m / 2, amps, nominal=12) == pytest.approx(0.36, abs=0.75 * ohm)


@pytest.mark.parametrize(("area_mm2", "loop_m", "amps"), ISO_TABLE)
def test_real_copper_drops_more_than_that_formula_says(area_mm2: float, loop_m: float, amps: float) -> None:
    """0.0164 ohm·mm²/m is below pure copper at 20 °C (0.01724, IEC 60028); cable to IEC 60228 class 5 is up to a
    quarter above it."""
    found = drop_V(f'size = "{area_mm2:g} mm2"\nstrand = "flexible"', loop_m / 2, amps, nominal=12)
    assert 1.05 <= found / (0.0164 * loop_m * amps / area_mm2) <= 1.25


def test_metric_formula_with_conductivity() -> None:
    """Common European form, S = 2·l·I/(56·U): 2.1 A over 18 m one way within 0.6 V takes 2.25 mm², so 2.5 mm²."""
    assert drop_V(measured(2 * 18 / (56 * 2.25)), 18, 2.1, nominal=12) == pytest.approx(0.6, rel=1e-6)
    flexible = drop_V('size = "2.5 mm2"\nstrand = "flexible"', 18, 2.1, nominal=12)
    assert flexible == pytest.approx(2 * 18 * 2.1 / (56 * 2.5), rel=0.13)
