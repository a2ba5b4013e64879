"""Whole plans whose answer a person can work out: each names the closed form it is held against."""

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from farvolt import network, operating, planfile, rulebook
from farvolt.network import FEED, RETURN
from farvolt.solve import solve
from solving import Solved, solved


def plan_text(*tables: str, nominal: str = "12 V") -> str:
    """A plan of tables, each "kind name key = value; key = value"."""
    lines = ["format = 1", "[plan]", 'name = "By hand"', f'nominal = "{nominal}"']
    for table in tables:
        head, _, fields = table.partition(":")
        kind, name = head.split(" ", 1)
        lines += [f"[[{kind}]]", f'name = "{name}"', *(field.strip() for field in fields.split(";"))]
    return "\n".join(lines) + "\n"


def battery(name: str, at: str, emf: str, resistance: str = "1 uohm") -> str:
    return f'sources {name}: kind = "battery"; at = "{at}"; emf = "{emf}"; resistance = "{resistance}"'


def charger(name: str, at: str, volts: str, amps: str, more: str = "") -> str:
    return f'sources {name}: kind = "charger"; at = "{at}"; volts = "{volts}"; amps = "{amps}"' + (
        f"; {more}" if more else ""
    )


def wire(name: str, start: str, end: str, ohm: str, carries: str = "both") -> str:
    """A run of a measured resistance, all its conductors together."""
    both = "" if carries == "both" else f'; carries = "{carries}"'
    return f'runs {name}: from = "{start}"; to = "{end}"; length = "1 m"; size = "6 mm2"; resistance = "{ohm}"{both}'


def load(name: str, at: str, **rated: str) -> str:
    return f'loads {name}: at = "{at}"; ' + "; ".join(f'{key} = "{value}"' for key, value in rated.items())


def case(sources: str) -> str:
    return f"cases The case: sources = {{ {sources} }}"


EVERYTHING_ON = case("")


# Loads on one feed ------------------------------------------------------------------------------------------------

SIX_SQUARE = 'runs feed: from = "bank"; to = "lamp"; length = "10 m"; size = "6 mm2"; strand = "flexible"'


def test_a_constant_power_at_the_end_of_ten_metres() -> None:
    """IEC 60228 class 5: 3.30 mohm/m, so 66 mohm there and back; u = E/2 + sqrt(E²/4 − P·R) with R = 76 mohm."""
    found = solved(
        plan_text(battery("bank", "bank", "12.8 V", "10 mohm"), SIX_SQUARE, load("lamp", "lamp", power="120 W"))
    )
    assert found.volts("lamp") == pytest.approx(6.4 + math.sqrt(6.4**2 - 120 * 0.076), abs=1e-9)
    assert found.volts("lamp") == pytest.approx(12.0427, abs=5e-5)
    assert found.load_amps["lamp"] == pytest.approx(9.9645, abs=5e-5)


def test_feed_and_return_currents_are_apart_and_opposite() -> None:
    found = solved(
        plan_text(battery("bank", "bank", "12.8 V", "10 mohm"), SIX_SQUARE, load("lamp", "lamp", current="5 A"))
    )
    assert found.run_amps == pytest.approx({("feed", FEED): 5.0, ("feed", RETURN): -5.0})
    assert found.state.volts[found.network.ret("bank")] == 0.0


@pytest.mark.parametrize("watts", [538.9, 539.0, 700.0, 1500.0])
def test_one_constant_power_gives_way_at_half_the_voltage(watts: float) -> None:
    """Maximum power transfer: E²/4R = 12.8² / (4 · 76 mohm) = 538.95 W."""
    found = solved(
        plan_text(battery("bank", "bank", "12.8 V", "10 mohm"), SIX_SQUARE, load("pump", "lamp", power=f"{watts} W"))
    )
    most_W = 12.8**2 / (4 * 0.076)
    assert found.state.solved == (watts <= most_W)
    assert found.state.share_held == pytest.approx(min(1.0, most_W / watts), abs=1e-3)


SHARED_RETURN = (
    battery("bank", "bank", "12 V"),
    wire("feed A", "bank", "A", "20 mohm", "feed"),
    wire("feed B", "bank", "B", "60 mohm", "feed"),
    wire("back", "bank", "A", "15 mohm", "return"),
    wire("B back", "A", "B", "1 uohm", "return"),
    load("A", "A", current="10 A"),
)


def test_two_loads_on_a_shared_return() -> None:
    """Each drop is own feed times own current, and shared return times both: 0.2 + 0.225 V and 0.3 + 0.225 V."""
    both = solved(plan_text(*SHARED_RETURN, load("B", "B", current="5 A")))
    assert 12 - both.volts("A") == pytest.approx(0.425, abs=2e-5)
    assert 12 - both.volts("B") == pytest.approx(0.525, abs=3e-5)
    assert both.run_amps["back", RETURN] == pytest.approx(-15.0)
    assert 12 - solved(plan_text(*SHARED_RETURN)).volts("A") == pytest.approx(0.35, abs=2e-5)


def test_unequal_cables_side_by_side_share_by_conductance() -> None:
    """Current divider: 20 A over 10 and 30 mohm is 15 and 5 A, and the drop that of 7.5 mohm."""
    cables = wire("thick", "bank", "bus", "10 mohm"), wire("thin", "bus", "bank", "30 mohm")
    found = solved(plan_text(battery("bank", "bank", "12 V"), *cables, load("pump", "bus", current="20 A")))
    assert found.run_amps["thick", FEED] == pytest.approx(15.0)
    assert found.run_amps["thin", FEED] == pytest.approx(-5.0)
    assert 12 - found.volts("bus") == pytest.approx(0.15, abs=3e-5)


def test_a_return_through_the_chassis_has_a_bond_at_each_end() -> None:
    """Feed 20 mohm, bond 2 mohm at the lamp, strap 5 mohm at the bank: 27 mohm in series carry 10 A."""
    strap = 'runs strap: from = "bank"; to = "chassis"; length = "1 m"; size = "35 mm2"; resistance = "5 mohm"'
    feed = wire("feed", "bank", "lamp", "20 mohm") + '; return = "chassis"'
    text = plan_text(battery("bank", "bank", "12 V"), strap, feed, load("lamp", "lamp", current="10 A"))
    found = solved(text.replace("[plan]", '[plan]\nchassis_bond = "2 mohm"'))
    assert 12 - found.volts("lamp") == pytest.approx(0.27, abs=2e-5)


def test_beyond_an_open_switch_nothing_is_fed() -> None:
    switch = 'devices switch: kind = "switch"; from = "bank"; to = "bus"; state = "open"'
    tables = battery("bank", "bank", "12 V"), switch, wire("feed", "bus", "lamp", "1 mohm")
    found = solved(plan_text(*tables, load("lamp", "lamp", power="50 W")))
    assert found.state.solved
    assert math.isnan(found.volts("lamp"))
    assert found.load_amps["lamp"] == 0.0
    assert found.volts("bank") == pytest.approx(12.0)


# Circuits of the textbooks ----------------------------------------------------------------------------------------


def test_two_loops() -> None:
    """A university physics textbook, Fig. 24.18: 10 V behind 6 ohm, 14 V the other way behind 4 ohm, 2 ohm between:
    -1, 2 and -3 A. No battery of a plan stands the wrong way round: its share comes from two others by linearity."""

    def currents(emf: str) -> np.ndarray:
        found = solved(
            plan_text(
                battery("ten", "A", "10 V"), battery("fourteen", "B", emf),
                wire("six", "A", "middle", "6 ohm"), wire("four", "B", "middle", "4 ohm"),
                load("two", "middle", resistance="2 ohm"),
            )
        )  # fmt: skip
        return np.array([found.load_amps["two"], *found.source_amps.values()])

    # With the currents linear in the EMFs, those at −14 V are twice those at 7 V less those at 28 V.
    assert 2 * currents("7 V") - currents("28 V") == pytest.approx([-1, 2, -3], abs=1e-5)


def test_a_bridge_out_of_balance() -> None:
    """Wheatstone bridge at 24 V: 150 and 50 ohm above, 300 and 250 ohm below, 100 ohm across; Kirchhoff's two
    equations give 17.655 and 19.310 V, 16.552 mA across and 136.092 mA from the source."""
    arms = wire("left", "top", "X", "150 ohm", "feed"), wire("right", "top", "Y", "50 ohm", "feed")
    backs = wire("X back", "X", "top", "1 uohm", "return"), wire("Y back", "Y", "top", "1 uohm", "return")
    below = load("under X", "X", resistance="300 ohm"), load("under Y", "Y", resistance="250 ohm")
    across = wire("across", "Y", "X", "100 ohm", "feed")
    found = solved(plan_text(battery("bank", "top", "24 V"), *arms, *backs, across, *below, nominal="24 V"))
    left, right = np.linalg.solve(
        [[1 / 150 + 1 / 300 + 1 / 100, -1 / 100], [-1 / 100, 1 / 50 + 1 / 250 + 1 / 100]], [24 / 150, 24 / 50]
    )
    assert [found.volts("X"), found.volts("Y")] == pytest.approx([left, right], abs=1e-6)
    assert [found.volts("X"), found.volts("Y")] == pytest.approx([17.655, 19.310], abs=5e-4)
    assert found.run_amps["across", FEED] == pytest.approx(16.552e-3, abs=5e-7)
    assert found.source_amps["bank"] == pytest.approx(136.092e-3, abs=5e-7)


def test_a_star_stands_for_a_triangle() -> None:
    """A. E. Kennelly, 1899: a star of a, b, c equals a triangle whose side across from c is (ab + bc + ca) / c.

    20, 30 and 60 mohm give 3600/60 = 60, 3600/30 = 120 and 3600/20 = 180 mohm.
    """
    draws = load("B", "B", current="8 A"), load("C", "C", current="5 A")
    backs = wire("B back", "B", "A", "1 uohm", "return"), wire("C back", "C", "A", "1 uohm", "return")
    bank = battery("bank", "A", "12 V")
    star = (
        wire("a", "A", "star", "20 mohm", "feed"), wire("b", "B", "star", "30 mohm", "feed"),
        wire("c", "C", "star", "60 mohm", "feed"),
    )  # fmt: skip
    triangle = (
        wire("ab", "A", "B", "60 mohm", "feed"), wire("ac", "A", "C", "120 mohm", "feed"),
        wire("bc", "B", "C", "180 mohm", "feed"),
    )  # fmt: skip
    one, other = (solved(plan_text(bank, *arms, *backs, *draws)) for arms in (star, triangle))
    # Through a: 13 A; then each its own.
    assert 12 - one.volts("B") == pytest.approx(13 * 0.02 + 8 * 0.03, abs=5e-5)
    assert 12 - one.volts("C") == pytest.approx(13 * 0.02 + 5 * 0.06, abs=5e-5)
    assert [other.volts("B"), other.volts("C")] == pytest.approx([one.volts("B"), one.volts("C")], abs=1e-10)


def test_a_thicker_cable_to_a_heater_lowers_its_neighbour() -> None:
    """More copper does not raise every voltage. 12 V behind 50 mohm; a lamp of 1 A at the bus; a heater of 1 ohm
    behind 1 ohm, then behind 0.2 ohm: u = (12 − 0.05 · 1) / (1 + 0.05/R), with R = 2 ohm, then 1.2 ohm."""

    def lamp(ohm: str) -> float:
        tables = (
            battery("bank", "bank", "12 V"),
            wire("feed", "bank", "bus", "50 mohm"),
            load("lamp", "bus", current="1 A"),
        )
        return solved(
            plan_text(*tables, wire("branch", "bus", "heater", ohm), load("heater", "heater", resistance="1 ohm"))
        ).volts("bus")

    assert lamp("1 ohm") == pytest.approx(11.95 / (1 + 0.05 / 2), abs=2e-5)
    assert lamp("0.2 ohm") == pytest.approx(11.95 / (1 + 0.05 / 1.2), abs=2e-5)


@pytest.mark.parametrize(("stages", "ohm"), [(1, 2.0), (2, 5 / 3), (3, 13 / 8), (30, (1 + math.sqrt(5)) / 2)])
def test_a_ladder_of_ones(stages: int, ohm: float) -> None:
    """Ladder of 1 ohm in line and 1 ohm across: ratios of every other Fibonacci number, in the end the golden ratio."""
    rungs = [wire(f"line {n}", f"p{n}", f"p{n + 1}", "1 ohm") for n in range(stages)]
    loads = [load(f"rung {n}", f"p{n + 1}", resistance="1 ohm") for n in range(stages)]
    found = solved(plan_text(battery("bank", "p0", "12 V", "0.1 ohm"), *rungs, *loads))
    assert found.volts("p0") / found.source_amps["bank"] == pytest.approx(ohm, rel=1e-12)


@pytest.mark.parametrize(("corner", "ohm"), [("001", 7 / 12), ("011", 3 / 4), ("111", 5 / 6)])
def test_a_cube_of_ones(corner: str, ohm: float) -> None:
    """Cube with 1 ohm along every edge (classical): along an edge, across a face, along the body's diagonal."""
    corners = ["".join(bits) for bits in itertools.product("01", repeat=3)]
    pairs = [
        (a, b) for a, b in itertools.combinations(corners, 2) if sum(x != y for x, y in zip(a, b, strict=True)) == 1
    ]
    edges = [wire(f"edge {a} {b}", a, b, "1 ohm", "feed") for a, b in pairs]
    tables = battery("bank", "000", "12 V"), *edges, wire("back", corner, "000", "1 ohm", "return")
    found = solved(plan_text(*tables, load("one ampere", corner, current="1 A")))
    volts, feed = found.state.volts, found.network.feed
    assert len(edges) == 12
    assert volts[feed("000")] - volts[feed(corner)] == pytest.approx(ohm, abs=1e-12)


# Several strings, bars, surges ---------------------------------------------------------------------------------------


def strings(take_off: str, count: int = 4) -> str:
    """Strings of 4.84 mohm, with links of 0.5 m of 16 mm²: 1.21 mohm/m, so 0.605 mohm in each pole."""
    bank = battery("bank", "bank", "12.8 V", "4.84 mohm")
    return bank + f'; strings = {count}; take_off = "{take_off}"; link = {{ length = "0.5 m", size = "16 mm2" }}'


def string_amps(found: Solved) -> list[float]:
    return [float(amps) for amps in found.state.delivered_A[1 : 1 + len(found.network.strings)]]


def test_four_strings_taken_off_at_the_same_end() -> None:
    """A link (both poles) is a quarter of a string's resistance r, so with x in the last: x, x + x/4, then each
    more by a quarter of all that lie beyond it: 1 : 1.25 : 1.8125 : 2.828125 of 100 A."""
    found = solved(plan_text(strings("same end"), load("inverter", "bank", current="100 A")))
    last = 100 / (1 + 1.25 + 1.8125 + 2.828125)
    assert string_amps(found) == pytest.approx([2.828125 * last, 1.8125 * last, 1.25 * last, last], abs=1e-6)
    assert string_amps(found) == pytest.approx([41.04, 26.30, 18.14, 14.51], abs=5e-3)
    assert found.volts("bank") == pytest.approx(12.8 - 2.828125 * last * 4.84e-3, abs=1e-9)


def test_three_strings_taken_off_at_both_ends() -> None:
    """By symmetry the outer two are alike, i₁ = i₃. Between the first two the feed link carries i₂ + i₃ and the
    return link i₁, so around that loop r·(i₁ − i₂) = l·(i₂ + i₃) − l·i₁ = l·i₂: i₁ = i₂·(1 + l/r)."""
    found = solved(plan_text(strings("ends", 3), load("inverter", "bank", current="100 A")))
    middle = 100 / (1 + 2 * (1 + 0.605 / 4.84))
    assert string_amps(found) == pytest.approx([1.125 * middle, middle, 1.125 * middle], abs=1e-6)


def test_strings_on_a_bar_share_alike() -> None:
    """Each has its own two links: (4.84 + 1.21) / 4 mohm carry 100 A."""
    found = solved(plan_text(strings("bar"), load("inverter", "bank", current="100 A")))
    assert string_amps(found) == pytest.approx([25.0] * 4, abs=1e-6)
    assert found.volts("bank") == pytest.approx(12.8 - 100 * 6.05e-3 / 4, abs=1e-9)


def test_an_aged_string_has_a_multiple_of_its_resistance() -> None:
    """12.8 V behind 2.5 · 10 mohm give 20 A: 12.3 V."""
    bank = battery("bank", "bank", "12.8 V", "10 mohm") + "; aged_times = 2.5"
    found = solved(plan_text(bank, load("pump", "bank", current="20 A"), case('"bank" = { aged = true }')))
    assert found.volts("bank") == pytest.approx(12.3, abs=1e-9)


def test_half_of_a_bar_lies_in_every_conductor_that_ends_at_it() -> None:
    """A bar of 4 mohm in each pole between 20 and 30 mohm, with a lamp on the bar itself: 2 mohm more in each
    conductor, so 24 mohm carry 15 A to the bar and 34 mohm carry 5 A on."""
    bar = 'points bus: kind = "busbar"; resistance = "4 mohm"'
    runs = wire("feed", "bank", "bus", "20 mohm"), wire("branch", "bus", "radio", "30 mohm")
    loads = load("lamp", "bus", current="10 A"), load("radio", "radio", current="5 A")
    found = solved(plan_text(battery("bank", "bank", "12 V"), bar, *runs, *loads))
    assert 12 - found.volts("bus") == pytest.approx(15 * 0.024, abs=2e-5)
    assert found.volts("bus") - found.volts("radio") == pytest.approx(5 * 0.034, abs=1e-9)


INVERTER = load("inverter", "bank", power="900 W", efficiency="90 %", standby="10 W")


@pytest.mark.parametrize(
    ("loads", "surge", "watts"),
    [
        ('"all"', "[]", 900 / 0.9 + 10),
        ('{ "inverter" = 0.5 }', "[]", 450 / 0.9 + 10),
        ('{ "inverter" = 0.0 }', "[]", 10.0),
        ('"none"', "[]", 0.0),
        ('"all"', '["inverter"]', 2 * 900 / 0.9 + 10),
    ],
)
def test_an_inverter_draws_what_it_delivers_over_its_efficiency(loads: str, surge: str, watts: float) -> None:
    """E²/4r = 4.1 kW is far; u = E/2 + sqrt(E²/4 − P·r) with 12.8 V and 10 mohm."""
    inverter = INVERTER + "; surge = { times = 2 }"
    state = f"cases The case: loads = {loads}; surge = {surge}"
    found = solved(plan_text(battery("bank", "bank", "12.8 V", "10 mohm"), inverter, state))
    assert found.volts("bank") == pytest.approx(6.4 + math.sqrt(6.4**2 - watts * 0.01), abs=1e-9)


@pytest.mark.parametrize(("state", "amps"), [("on", 0.0), ("off", 1000 / 12)])
def test_an_inverter_of_a_charger_draws_while_that_is_off(state: str, amps: float) -> None:
    """They are one apparatus. A constant current is rated at its rated volts: 900 W / 90 % at 12 V."""
    inverter = load("inverter", "bank", power="900 W", efficiency="90 %", behaves="current", inverter_of="charger")
    sources = battery("bank", "bank", "12.8 V", "10 mohm"), charger("charger", "bank", "14.4 V", "30 A")
    found = solved(plan_text(*sources, inverter, case(f'"charger" = "{state}"')))
    assert found.load_amps["inverter"] == pytest.approx(amps)


@pytest.mark.parametrize(
    ("surge", "volts"),
    [
        ('{ current = "40 A" }', 12 - 40 * 0.02),
        ('{ resistance = "0.1 ohm" }', 12 * 0.1 / 0.12),
        ("{ times = 3 }", 12 - 3 * 10 * 0.02),
    ],
)
def test_a_surge_is_drawn_instead_of_the_rating(surge: str, volts: float) -> None:
    """A pump of 10 A behind 20 mohm at 12 V: so many amps more, a divider of voltage, three times its current."""
    pump = load("pump", "bank", current="10 A") + f"; surge = {surge}"
    found = solved(plan_text(battery("bank", "bank", "12 V", "20 mohm"), pump, 'cases Start: surge = ["pump"]'))
    assert found.volts("bank") == pytest.approx(volts, abs=1e-9)


def test_the_loss_in_an_arrays_cable_is_taken_from_what_its_controller_gives() -> None:
    """Two modules of 18 V and 5 A side by side, 1 mohm · 18/10 of droop and 150 mohm of cable: 18 − 10 · 0.1518 V
    arrive with 10 A, of which 95 % leave: 156.6 W, under the controller's 300 W, into 12.8 V behind 10 mohm."""
    array = '{ at = "roof", modules = 2, voc = "22 V", isc = "5.5 A", vmp = "18 V", imp = "5 A" }'
    roof = 'sources sun: kind = "solar"; from = "input"; at = "bank"; power = "300 W"; ceiling = "14.4 V"'
    roof += f'; efficiency = "95 %"; array = {array}'
    tables = battery("bank", "bank", "12.8 V", "10 mohm"), roof, wire("down", "roof", "input", "150 mohm")
    for sun in (1.0, 0.5):
        found = solved(plan_text(*tables, case(f'"sun" = {{ irradiance = "{100 * sun} %" }}')))
        arriving = 18 - 10 * sun * (1e-3 * 18 / 10 + 0.15)
        given = 0.95 * arriving * 10 * sun
        assert found.volts("bank") == pytest.approx(6.4 + math.sqrt(6.4**2 + given * 0.01), abs=1e-9)
        assert found.volts("input") == pytest.approx(arriving, abs=1e-9)


def test_a_chain_of_converters_draws_through_every_efficiency() -> None:
    """48 V to 24 V at 90 %, on to 12 V at 80 %, each with 1 mohm of droop: what the second takes is what the first
    gives, so 11.99 V · 10 A / 0.8 / 0.9 = 166.53 W from 51.2 V behind 20 mohm."""
    down = 'sources {}: kind = "converter"; from = "{}"; at = "{}"; nominal = "{}"; volts = "{}"; amps = "20 A"; '
    down += 'efficiency = "{}"; resistance = "1 mohm"; isolated = true'
    chain = (
        down.format("first", "bank", "24 bus", "24 V", "24 V", "90 %"),
        down.format("second", "24 bus", "12 bus", "12 V", "12 V", "80 %"),
    )
    bank = battery("bank", "bank", "51.2 V", "20 mohm")
    found = solved(plan_text(bank, *chain, load("radio", "12 bus", current="10 A"), nominal="48 V"))
    watts = 11.99 * 10 / 0.8 / 0.9
    assert found.volts("bank") == pytest.approx(25.6 + math.sqrt(25.6**2 - watts * 0.02), abs=1e-9)
    assert found.source_amps["bank"] == pytest.approx(watts / found.volts("bank"), rel=1e-9)


def test_an_array_behind_a_long_cable_charges_a_battery_while_nothing_else_draws() -> None:
    """Its controller's power of 74.342 W is under what arrives of 23.83 V · 4.65 A: u = E/2 + sqrt(E²/4 + P·r)."""
    array = '{ at = "roof", voc = "28.6 V", isc = "5.1 A", vmp = "23.83 V", imp = "4.65 A" }'
    roof = 'sources sun: kind = "solar"; from = "input"; at = "bank"; power = "74.342 W"; ceiling = "28.988 V"'
    tables = battery("bank", "bank", "24.981 V", "8 mohm"), roof + f"; array = {array}"
    down = wire("down", "roof", "input", "500 mohm")
    found = solved(plan_text(*tables, down, case('"sun" = { irradiance = "100 %" }'), nominal="24 V"))
    assert found.state.solved
    assert found.volts("bank") == pytest.approx(24.981 / 2 + math.sqrt(24.981**2 / 4 + 74.342 * 8e-3), abs=1e-9)


def test_an_array_at_its_controller_charges_beside_a_charger_at_its_limit() -> None:
    """23.6 A of the charger and what 105 W give: u = E' / 2 + sqrt(E'²/4 + P·r), with E' = 13 V + 23.6 A · 12 mohm."""
    array = '{ at = "input", voc = "52 V", isc = "5 A", vmp = "43.478 V", imp = "4.57 A" }'
    roof = 'sources sun: kind = "solar"; at = "bus"; power = "105 W"; ceiling = "14.025 V"'
    sources = battery("bank", "bank", "13 V", "8 mohm"), charger("charger", "bus", "14.364 V", "23.6 A")
    tables = *sources, roof + f"; array = {array}", wire("feed", "bank", "bus", "4 mohm")
    found = solved(plan_text(*tables, case('"sun" = { irradiance = "100 %" }')))
    half = (13 + 23.6 * 0.012) / 2
    assert found.state.solved
    assert found.volts("bus") == pytest.approx(half + math.sqrt(half**2 + 105 * 0.012), abs=1e-9)


def test_converters_in_a_chain_that_draw_nothing_leave_a_charger_to_the_bank() -> None:
    """12.2 A over 42 mohm from the bus down to 51.6 V: 52.1124 V, and each output at its own voltage."""
    sources = battery("bank", "bank", "51.6 V", "10 mohm"), charger("charger", "bus", "58.4 V", "12.2 A")
    chain = 'sources {0}: kind = "converter"; from = "{1}"; at = "{2}"; nominal = "{3}"; volts = "{3}"; amps = "{4}"; '
    chain += 'efficiency = "84 %"'
    steps = (("1", "bus", "A", "24 V", "5 A"), ("2", "B", "C", "12 V", "2.7 A"), ("3", "C", "D", "12 V", "0.8 A"))
    wires = (
        wire("feed", "bank", "bus", "2 mohm", "feed"), wire("back", "bank", "bus", "30 mohm", "return"),
        wire("A to B", "A", "B", "10 mohm"), wire("C to E", "C", "E", "28 mohm"), wire("D to F", "D", "F", "10 mohm"),
    )  # fmt: skip
    converters = [chain.format(*step) for step in steps]
    found = solved(plan_text(*sources, *converters, *wires, case('"bank" = "on"'), nominal="48 V"))
    assert found.state.solved
    assert found.volts("bus") == pytest.approx(51.6 + 12.2 * 0.042, abs=1e-9)
    assert [found.volts(point) for point in "ABCDEF"] == pytest.approx([24, 24, 12, 12, 12, 12], abs=1e-9)


# Sources that know one way only ----------------------------------------------------------------------------------


def test_a_charger_alone_does_not_sit_at_its_limit() -> None:
    """14.4 V with 0.48 mohm of droop, 200 W: u = V/2 + sqrt(V²/4 − P·r) = 14.3933 V; 200 W / 30 A = 6.67 V is false."""
    found = solved(plan_text(charger("charger", "bus", "14.4 V", "30 A"), load("heater", "bus", power="200 W")))
    assert found.volts("bus") == pytest.approx(7.2 + math.sqrt(7.2**2 - 200 * 0.48e-3), abs=1e-9)
    assert found.volts("bus") == pytest.approx(14.39, abs=5e-3)
    assert found.state.solved


@given(st.floats(12.5, 15.0), st.floats(2.0, 150.0), st.floats(0.05, 0.995))
def test_a_charger_alone_never_takes_the_false_solution(volts: float, amps: float, share: float) -> None:
    """The same closed form, for any load that the charger can carry at its rated voltage less its droop."""
    watts = share * amps * volts * 0.999
    found = solved(
        plan_text(charger("charger", "bus", f"{volts!r} V", f"{amps!r} A"), load("heater", "bus", power=f"{watts!r} W"))
    )
    assert found.state.solved
    assert found.volts("bus") == pytest.approx(
        volts / 2 + math.sqrt(volts**2 / 4 - watts * 1e-3 * volts / amps), abs=1e-8
    )


FULL = battery("bank", "bus", "12.8 V", "10 mohm"), charger("charger", "bus", "14.4 V", "30 A")


def test_a_full_battery_takes_nothing() -> None:
    found = solved(plan_text(*FULL, load("lamp", "bus", power="200 W"), case('"bank" = "full"')))
    assert found.source_amps["bank"] == 0.0
    assert found.volts("bus") == pytest.approx(14.3933, abs=5e-5)


def test_a_full_battery_helps_a_charger_at_its_limit() -> None:
    """30 A + (E − u)/r = P/u: u² − (E + 30 A · r)·u + P·r = 0 with 12.8 V, 10 mohm, 600 W."""
    found = solved(plan_text(*FULL, load("inverter", "bus", power="600 W"), case('"bank" = "full"')))
    half = (12.8 + 30 * 0.01) / 2
    assert found.volts("bus") == pytest.approx(half + math.sqrt(half**2 - 600 * 0.01), abs=1e-9)
    assert found.source_amps["charger"] == pytest.approx(30.0)


def test_a_battery_that_is_not_full_is_charged() -> None:
    """30 A into 10 mohm from 12.8 V: 13.1 V, under the charger's 14.4 V."""
    found = solved(plan_text(*FULL, EVERYTHING_ON))
    assert found.volts("bus") == pytest.approx(13.1, abs=1e-9)
    assert found.source_amps == pytest.approx({"bank": -30.0, "charger": 30.0})


@pytest.mark.parametrize(("watts", "volts"), [(110, 57.5), (115, 57.5), (120, 53.0)])
def test_of_two_stable_states_the_one_reached_from_above(watts: float, volts: float) -> None:
    """A charger of 57.6 V and 2 A carries 115 W, not 120 W; then the full battery of 53 V takes over. At 110 W both
    57.5 V (charger alone) and 53 V (charger at its limit, battery helping) obey Kirchhoff's laws and are stable."""
    sources = battery("bank", "bus", "53 V", "10 mohm"), charger("charger", "bus", "57.6 V", "2 A")
    text = plan_text(*sources, load("lights", "bus", power=f"{watts} W"), case('"bank" = "full"'), nominal="48 V")
    found = solved(text)
    assert found.state.solved
    assert found.volts("bus") == pytest.approx(volts, abs=0.06)
    assert (found.source_amps["bank"] > 0) == (watts > 115)


DIODE = 'devices diode: kind = "diode"; from = "starter"; to = "bus"; drop = "0.4 V"; resistance = "2 mohm"'
BESIDE_DIODE = DIODE, wire("back", "starter", "bus", "1 uohm", "return"), load("pump", "bus", current="20 A")


def test_a_diode_conducts_above_its_drop() -> None:
    """(12.8 − u)/10 mohm + (13.6 − 0.4 − u)/10 mohm = 20 A: u = 12.9 V, 30 A through the diode, 10 A into the bank."""
    sources = battery("bank", "bus", "12.8 V", "10 mohm"), battery("starter", "starter", "13.6 V", "8 mohm")
    found = solved(plan_text(*sources, *BESIDE_DIODE))
    assert found.volts("bus") == pytest.approx(12.9, abs=1e-4)
    assert found.source_amps == pytest.approx({"bank": -10.0, "starter": 30.0}, abs=0.01)


@pytest.mark.parametrize(("start", "end", "pole"), [("bus", "lamp", "feed"), ("lamp", "bus", "return")])
def test_a_diode_ahead_of_a_constant_power(start: str, end: str, pole: str) -> None:
    """E − drop behind r = 12 mohm in all, in either pole: u = E'/2 + sqrt(E'²/4 − P·r) with E' = 12.4 V, 120 W."""
    diode = f'devices diode: kind = "diode"; from = "{start}"; to = "{end}"; pole = "{pole}"; drop = "0.4 V"'
    tables = battery("bank", "bus", "12.8 V", "10 mohm"), diode + '; resistance = "2 mohm"'
    found = solved(plan_text(*tables, load("lamp", "lamp", power="120 W")))
    assert found.state.solved
    assert found.volts("lamp") == pytest.approx(6.2 + math.sqrt(6.2**2 - 120 * 0.012), abs=1e-5)


def test_a_diode_blocks_the_other_way() -> None:
    """20 A from 12.8 V behind 10 mohm: 12.6 V; the starter battery at 12 V stays as it is."""
    sources = battery("bank", "bus", "12.8 V", "10 mohm"), battery("starter", "starter", "12 V", "8 mohm")
    found = solved(plan_text(*sources, *BESIDE_DIODE))
    assert found.volts("bus") == pytest.approx(12.6, abs=1e-4)
    assert found.volts("starter") == pytest.approx(12.0, abs=1e-4)
    assert abs(found.source_amps["starter"]) < 1e-5


def test_a_full_battery_behind_a_blocking_diode_is_solved() -> None:
    """What it hangs on is the diode's leak alone; the charger's 30 A go into the bank: 12.8 V + 30 A · 10 mohm."""
    sources = battery("bank", "bus", "12.8 V", "10 mohm"), charger("charger", "bus", "14.4 V", "30 A")
    diode = DIODE.replace('from = "starter"; to = "bus"', 'from = "bus"; to = "starter"')
    tables = *sources, battery("starter", "starter", "12.5 V", "3 mohm"), diode, BESIDE_DIODE[1]
    found = solved(plan_text(*tables, case('"starter" = "full"')))
    assert found.state.solved
    assert found.volts("bus") == pytest.approx(13.1, abs=1e-6)
    assert found.volts("starter") == pytest.approx(13.1, abs=5e-3)


@pytest.mark.parametrize("isolated", ["true", "false"])
def test_a_converter_draws_what_it_delivers_over_its_efficiency(isolated: str) -> None:
    """(13.8 V · 10 A)/90 % + 1 W = 154.33 W from 25.6 V behind 50 mohm: u = E/2 + sqrt(E²/4 − P·R). A bond between
    the two returns is a single joint and carries nothing."""
    converter = (
        'sources converter: kind = "converter"; from = "bus"; at = "radio bus"; nominal = "12 V";'
        'volts = "13.8 V"; amps = "20 A"; efficiency = "90 %"; standby = "1 W"; resistance = "1 uohm";'
        f"isolated = {isolated}"
    )
    found = solved(
        plan_text(
            battery("bank", "bank", "25.6 V", "5 mohm"), wire("feed", "bank", "bus", "45 mohm"), converter,
            wire("out", "radio bus", "radio", "30 mohm"), load("radio", "radio", current="10 A"), nominal="24 V",
        )
    )  # fmt: skip
    power = 13.8 * 10 / 0.9 + 1
    assert found.volts("bus") == pytest.approx(12.8 + math.sqrt(12.8**2 - power * 0.05), abs=1e-5)
    assert found.volts("bus") == pytest.approx(25.295, abs=5e-4)
    assert found.source_amps["bank"] == pytest.approx(6.101, abs=5e-4)
    assert found.volts("radio") == pytest.approx(13.5, abs=2e-5)


def test_a_solar_controller_gives_its_power_up_to_its_ceiling() -> None:
    """200 W into 12.8 V behind 10 mohm: i = P/u and u = E + r·i, so u = E/2 + sqrt(E²/4 + P·r)."""
    roof = 'sources roof: kind = "solar"; at = "bus"; power = "200 W"; ceiling = "14.4 V"'
    found = solved(plan_text(battery("bank", "bus", "12.8 V", "10 mohm"), roof, EVERYTHING_ON))
    assert found.volts("bus") == pytest.approx(6.4 + math.sqrt(6.4**2 + 200 * 0.01), abs=1e-9)
    full = solved(plan_text(battery("bank", "bus", "12.8 V", "10 mohm"), roof, case('"bank" = "full"')))
    assert full.volts("bus") == pytest.approx(14.4, abs=1e-6)


def test_warmer_copper_has_more_resistance() -> None:
    """IEC 60028: 0.393 % per kelvin, so at 70 °C the 66 mohm are 66 · (1 + 0.00393 · 50); 10 A drop that much more."""
    plan = planfile.parse(plan_text(battery("bank", "bank", "12 V"), SIX_SQUARE, load("lamp", "lamp", current="10 A")))
    built = network.build(plan, rulebook.load("small-craft-iso"))
    state = solve(built, operating.operating(built, plan.checked_cases[0]), np.array([1 + 0.00393 * 50]))
    found = Solved(plan, built, state)
    assert 12 - found.volts("lamp") == pytest.approx(0.66 * (1 + 0.00393 * 50), abs=2e-5)


def test_a_diode_the_wrong_way_round_feeds_nothing() -> None:
    wrong = DIODE.replace('from = "starter"; to = "bus"', 'from = "bus"; to = "starter"')
    found = solved(plan_text(battery("starter", "starter", "12.8 V", "8 mohm"), wrong, *BESIDE_DIODE[1:]))
    assert found.state.solved
    assert found.load_amps["pump"] == 0.0
    assert math.isnan(found.state.volts[found.network.feed("bus")])


def test_a_full_battery_alone_stands_at_its_emf() -> None:
    """Behind an open switch, whatever a charger beyond it would hold."""
    switch = 'devices switch: kind = "switch"; from = "bank"; to = "bus"; state = "open"'
    sources = battery("bank", "bank", "12.8 V", "10 mohm"), charger("charger", "bus", "14.4 V", "30 A")
    found = solved(plan_text(*sources, switch, case('"bank" = "full"')))
    assert found.volts("bank") == pytest.approx(12.8, abs=1e-6)
    assert found.volts("bus") == pytest.approx(14.4, abs=1e-6)


@pytest.mark.parametrize("watts", ["0.1 W", "2.3 W", "17 W"])
def test_a_bank_of_little_resistance_with_a_small_load_is_solved(watts: str) -> None:
    """48 V and 1 µohm: the current of a small load is all but lost in the rounding of the bank's own voltage."""
    feed = wire("feed", "bank", "lamp", "20 mohm")
    found = solved(
        plan_text(battery("bank", "bank", "51.237 V"), feed, load("lamp", "lamp", power=watts), nominal="48 V")
    )
    assert found.state.solved


def test_where_it_gives_way_no_load_is_below_its_knee() -> None:
    """A controller at 1 % of its light holds 0.2 W at 40 % of 12 V: 4.8 V times the share's current."""
    tables = [
        battery("bank", "bank", "13 V", "2 mohm"),
        'sources roof: kind = "solar"; at = "bus"; power = "20 W"; ceiling = "14 V"',
        wire("back", "bank", "bus", "10 mohm", "return"),
        'devices switch: kind = "switch"; from = "bank"; to = "bus"; state = "open"',
        load("pump", "bus", current="8.75 A"),
        case('"bank" = "full", "roof" = { irradiance = "1 %" }'),
    ]
    found = solved(plan_text(*tables))
    assert found.volts("bus") >= 4.8
    assert found.state.share_held == pytest.approx(0.2 / 4.8 / 8.75, abs=1e-3)
