"""Prospective fault currents by hand: Ohm's law round the loop, with the conductors' resistance from IEC 60228."""

import pytest

from farvolt.faults import FarEnd, Fault, Faults
from farvolt.network import build
from farvolt.plan import Plan
from farvolt.rulebook import load
from wiring import CLASS_5_OHM_PER_KM, COPPER_PER_K, bank, cable, charger, fuse, lamp, plan_of

OHM_50_MM2 = 0.386e-3
"""Per metre, IEC 60228 Table 3, class 5, at 20 degC."""


def faults(plan: Plan) -> Faults:
    book = load(plan.plan.rulebook)
    return Faults(build(plan, book), book)


def device(plan: Plan, run: str, which: int = 0) -> Fault:
    return faults(plan).devices[[one.name for one in plan.runs].index(run), which]


def lowest(plan: Plan, run: str, end: str = "from") -> FarEnd:
    return faults(plan).lowest[[one.name for one in plan.runs].index(run), end]


def test_the_least_current_at_the_far_end_of_a_thin_cable() -> None:
    """12.0 V behind 20 mohm, 24 m of 1.5 mm2 at 70 degC: 13.3 x 24 x (1 + 0.00393 x 50) = 381.9 mohm; 29.86 A."""
    runs = [cable("feed", "bank", "lamp", "12 m", "1.5 mm2", insulation="70 degC", protection=fuse("10 A"))]
    sources = [bank(emf="12.0 V", resistance="20 mohm", aged_times=1)]
    far = lowest(plan_of(runs, [lamp("lamp", "lamp")], sources=sources), "feed")
    assert far.fault.amps == pytest.approx(29.86, abs=0.005)
    assert far.run_A == pytest.approx(far.fault.amps)
    assert far.fault.place == 'at "lamp"'
    assert far.fault.working[-1] == "12 V / (20 + 381.9 cable) mohm = 29.86 A"
    assert far.fault.by_source == (("bank", pytest.approx(29.86, abs=0.005)),)


def test_the_highest_current_at_a_busbar() -> None:
    """13.4 V / (1.6417 + 0.772 + 0.4) mohm = 4,762 A: 1 m there and back of 50 mm2, a lug of 0.2 mohm in each."""
    lugs = {"joints": 1, "joint_resistance": "0.2 mohm"}
    sources = [bank(emf="13.4 V", resistance="1.6417 mohm")]
    plan = plan_of([cable("main", "bank", "bus", "1 m", "50 mm2", **lugs)], [lamp("lamp", "bus")], sources=sources)
    found = faults(plan).points
    assert found["bus"].amps == pytest.approx(13.4 / (1.6417e-3 + 2 * OHM_50_MM2 + 0.4e-3), rel=1e-9)
    assert found["bus"].amps == pytest.approx(4762, abs=0.5)
    assert found["bus"].working[-1] == "13.4 V / (1.642 + 0.772 cable + 0.4 joints and contacts) mohm = 4762 A"
    assert found["bank"].amps == pytest.approx(13.4 / 1.6417e-3, rel=1e-9)


def test_contacts_that_the_plan_does_not_state_do_not_lower_the_highest_current() -> None:
    runs = [cable("main", "bank", "bus", "1 m", "50 mm2", joints=1, protection=fuse("100 A", kind="strip"))]
    del runs[0]["protection"]["resistance"]
    devices = [{"name": "switch", "kind": "switch", "from": "bus", "to": "panel"}]
    sources = [bank(emf="13.4 V", resistance="2 mohm", aged_times=1)]
    plan = plan_of(runs, [lamp("lamp", "panel")], sources=sources, devices=devices)
    assert faults(plan).points["panel"].amps == pytest.approx(13.4 / (2e-3 + 2 * OHM_50_MM2), rel=1e-3)
    # The lowest has them all: two joints of 0.2, the fuse's typical 0.9 and the switch's typical 0.5 mohm at least.
    hot = 2 * OHM_50_MM2 * (1 + COPPER_PER_K * (105 - 20))
    assert lowest(plan, "main").fault.amps < 13.4 / (2e-3 + hot + 0.4e-3 + 0.9e-3)


def test_conductors_are_at_the_coldest_ambient_and_never_above_20_degC() -> None:
    runs = [cable("feed", "bank", "lamp", "10 m", "2.5 mm2")]
    ohm = 20 * CLASS_5_OHM_PER_KM["2.5 mm2"] / 1000
    for ambient, degC in (("40 degC", 20), ("-10 degC", -10)):
        cases = [{"name": "Night", "ambient": ambient}]
        plan = plan_of(runs, [lamp("lamp", "lamp")], cases=cases)
        expected = 12.8 / (1e-3 + ohm * (1 + COPPER_PER_K * (degC - 20)))
        assert faults(plan).points["lamp"].amps == pytest.approx(expected, rel=1e-9)


def test_the_makers_short_circuit_current_goes_before_a_resistance_and_strings_add() -> None:
    runs = [cable("feed", "bank", "lamp", "1 m", "10 mm2")]
    sources = [bank(emf="12.8 V", resistance="9 mohm", short_circuit="2000 A", strings=2)]
    found = faults(plan_of(runs, [lamp("lamp", "lamp")], sources=sources)).points["bank"]
    assert found.amps == pytest.approx(4000, rel=1e-9)
    assert not found.estimated


def test_a_resistance_from_a_table_is_said_to_be_an_estimate() -> None:
    """Flooded, 100 Ah: 4 to 10 mohm from memory, 7 at the middle; full and warm."""
    estimated = {"name": "bank", "kind": "battery", "at": "bank", "chemistry": "flooded", "capacity": "100 Ah"}
    plan = plan_of(
        [cable("feed", "bank", "lamp", protection=fuse("20 A"))], [lamp("lamp", "lamp")], sources=[estimated]
    )
    found = faults(plan).points["bank"]
    assert found.estimated
    assert found.amps == pytest.approx(12.65 / 7e-3, rel=0.01)
    assert device(plan, "feed").estimated


def test_the_least_current_comes_from_an_aged_battery_cold_and_low() -> None:
    """Flooded at half charge 12.24 V, less 0.714 mV x 6 x 26.7 K at 0 degC; 1.4 times for cold,
    1.5 for age, 1.2 for half a charge."""
    battery = {
        "name": "bank", "kind": "battery", "at": "bank", "chemistry": "flooded", "capacity": "100 Ah",
        "resistance": "7 mohm",
    }  # fmt: skip
    run = cable("feed", "bank", "lamp", "5 m", "4 mm2", insulation="90 degC", protection=fuse("20 A"))
    cases = [{"name": "Frost", "ambient": "0 degC"}]
    plan = plan_of([run], [lamp("lamp", "lamp")], sources=[battery], cases=cases)
    emf = 12.24 - 6 * 0.714e-3 * 26.7
    ohm = 7e-3 * 1.4 * 1.5 * 1.2 + 10 * CLASS_5_OHM_PER_KM["4 mm2"] / 1000 * (1 + COPPER_PER_K * 70)
    assert lowest(plan, "feed").fault.amps == pytest.approx(emf / ohm, rel=1e-4)


def test_a_charger_alone_gives_its_limit_and_no_more() -> None:
    """14.4 V over 66 mohm would be 218 A; where the cable lets less through than the limit it is 14.4 V / R."""
    runs = [cable("feed", "charger", "lamp", "10 m", "6 mm2", protection=fuse("30 A"))]
    plan = plan_of(runs, [lamp("lamp", "lamp")], sources=[charger()])
    found = faults(plan)
    for fault in (found.points["lamp"], found.points["charger"], found.devices[0, 0], found.lowest[0, "from"].fault):
        assert fault.amps == pytest.approx(20, rel=1e-6)
        assert fault.limited
    far = plan_of([cable("feed", "charger", "lamp", "30 m", "1.5 mm2")], [lamp("lamp", "lamp")], sources=[charger()])
    ohm = 60 * CLASS_5_OHM_PER_KM["1.5 mm2"] / 1000 + 14.4e-3 / 20
    assert faults(far).points["lamp"].amps == pytest.approx(14.4 / ohm, rel=1e-5)
    assert not faults(far).points["lamp"].limited


def test_a_charger_adds_its_limit_to_a_batterys_current() -> None:
    """At the battery's own terminals: 12.8 V / 1 mohm + 20 A."""
    plan = plan_of([cable("lead", "bank", "x")], [lamp("lamp", "x")], sources=[bank(), charger(at="bank")])
    found = faults(plan).points["bank"]
    assert found.amps == pytest.approx(12800 + 20, rel=1e-9)
    assert dict(found.by_source) == pytest.approx({"bank": 12800, "charger": 20})
    assert "12800 A" in found.working[-1]
    assert not found.limited


def test_a_device_interrupts_what_comes_from_either_side() -> None:
    """Two batteries: behind its own fuse a stands at 12.8 V / 4 mohm; from the bus the stronger b drives more."""
    runs = [
        cable("lead a", "a", "bus", "2 m", "10 mm2", protection=fuse("60 A", "0 m", "strip")),
        cable("lead b", "b", "bus", "2 m", "10 mm2"),
    ]
    sources = [bank("a", resistance="40 mohm"), bank("b", resistance="1 mohm")]
    plan = plan_of(runs, [lamp("lamp", "bus")], sources=sources)
    lead = 4 * CLASS_5_OHM_PER_KM["10 mm2"] / 1000
    assert device(plan, "lead a").amps == pytest.approx(12.8 / (1e-3 + 2 * lead), rel=1e-9)
    weak = plan_of(runs, [lamp("lamp", "bus")], sources=[bank("a", resistance="4 mohm"), bank("b", resistance="1 ohm")])
    assert device(weak, "lead a").amps == pytest.approx(12.8 / 4e-3, rel=1e-9)


def test_a_device_some_way_along_its_cable_sees_that_much_of_it() -> None:
    """0.5 m of 4 m: the same share of feed and return."""
    runs = [cable("feed", "bank", "lamp", "4 m", "2.5 mm2", protection=fuse("20 A", "0.5 m"))]
    found = device(plan_of(runs, [lamp("lamp", "lamp")]), "feed")
    ohm = 1e-3 + 2 * 0.5 * CLASS_5_OHM_PER_KM["2.5 mm2"] / 1000
    assert found.amps == pytest.approx(12.8 / ohm, rel=1e-9)
    assert found.working[-1] == f"12.8 V / (1 + 7.98 cable) mohm = {12.8 / ohm:.0f} A"


def test_a_device_in_the_return_sees_the_same_loop() -> None:
    guards = [fuse("20 A"), fuse("20 A", pole="return")]
    plan = plan_of([cable("feed", "bank", "lamp", protection=guards)], [lamp("lamp", "lamp")])
    found = faults(plan).devices
    assert found[0, 0].amps == pytest.approx(found[0, 1].amps, rel=1e-9)
    assert found[0, 1].place == 'at the 20 A blade in the return of "feed" near "bank"'


def test_parallel_cables_share_a_fault_and_each_device_carries_its_own_part() -> None:
    """Two equal cables of 5 m to one panel: half of 12.8 V / (1 mohm + R / 2) through each fuse, hot."""
    sources = [bank(aged_times=1)]
    runs = [
        cable(name, "bank", "panel", "5 m", "6 mm2", insulation="70 degC", protection=fuse("30 A"))
        for name in ("one", "two")
    ]
    plan = plan_of(runs, [lamp("lamp", "panel")], sources=sources)
    ohm = 10 * CLASS_5_OHM_PER_KM["6 mm2"] / 1000 * (1 + COPPER_PER_K * 50)
    found = faults(plan)
    far = next(one for one in found.far_ends if one.stretch.guard.run == 0 and one.fault.place == 'at "panel"')
    assert far.fault.amps == pytest.approx(12.8 / (1e-3 + ohm / 2) / 2, rel=1e-9)
    # Right behind the other fuse less still comes this way, as long as that one has not opened.
    assert found.lowest[0, "from"].fault.place == 'in "two", 4.9 m from "panel"'
    assert far.fault.working[-1].startswith('From the network: "bank"')


def test_the_device_upstream_answers_for_taps_without_one_and_for_what_a_switch_leads_to() -> None:
    runs = [
        cable("main", "bank", "panel", "1 m", "10 mm2", protection=fuse("15 A")),
        cable("tap", "near", "lamp 1", "3 m", "1.5 mm2"),
        cable("onward", "lamp 1", "lamp 2", "3 m", "1.5 mm2"),
        cable("other", "near", "pump", "2 m", "2.5 mm2", protection=fuse("5 A", "0.5 m")),
    ]
    devices = [{"name": "switch", "kind": "switch", "from": "panel", "to": "near", "resistance": "1 mohm"}]
    plan = plan_of(runs, [lamp("lamp", "lamp 2"), lamp("pump", "pump")], devices=devices)
    found = faults(plan)
    assert found.lowest[0, "from"].fault.place == 'at "lamp 2"'
    mine = {one.fault.place for one in found.far_ends if one.stretch.guard.run == 0}
    assert mine == {'at "panel"', 'at "near"', 'at "lamp 1"', 'at "lamp 2"', 'in "other", 0.5 m from "near"'}
    assert found.lowest[3, "from"].fault.place == 'at "pump"'


def test_the_weakest_battery_alone_gives_the_least_current() -> None:
    runs = [
        cable("lead a", "a", "bus", "1 m", "35 mm2"),
        cable("lead b", "b", "bus", "1 m", "35 mm2"),
        cable("feed", "bus", "lamp", "6 m", "4 mm2", protection=fuse("20 A")),
    ]
    sources = [bank("a", aged_times=1), bank("b", resistance="50 mohm", aged_times=1), charger(at="bus", amps="5 A")]
    far = lowest(plan_of(runs, [lamp("lamp", "lamp")], sources=sources), "feed")
    assert [name for name, _ in far.fault.by_source] == ["b"]
    hot = 1 + COPPER_PER_K * 85
    ohm = 50e-3 + hot * (2 * 0.554e-3 + 12 * CLASS_5_OHM_PER_KM["4 mm2"] / 1000)
    assert far.fault.amps == pytest.approx(12.8 / ohm, rel=1e-6)


def test_a_converter_gives_its_limit_whatever_stands_before_it() -> None:
    converter = {
        "name": "supply", "kind": "converter", "from": "bank", "at": "radio bus", "nominal": "12 V", "volts": "13.8 V",
        "amps": "10 A", "efficiency": "90 %",
    }  # fmt: skip
    runs = [cable("feed", "radio bus", "radio", "2 m", "2.5 mm2", protection=fuse("15 A"))]
    plan = plan_of(runs, [lamp("radio", "radio")], sources=[bank(), converter])
    for fault in (device(plan, "feed"), lowest(plan, "feed").fault):
        assert fault.amps == pytest.approx(10, rel=1e-6)
        assert fault.limited
        assert fault.by_source == (("supply", pytest.approx(10, rel=1e-6)),)


def test_an_array_gives_a_quarter_more_than_its_stated_current() -> None:
    """NEC 690.8(A): 1.25 x Isc, two strings of 5.5 A."""
    array = {"at": "roof", "modules": 2, "series": 1, "voc": "24 V", "isc": "5.5 A", "vmp": "20 V", "imp": "5 A"}
    solar = {
        "name": "sun", "kind": "solar", "from": "controller", "at": "bank", "power": "200 W", "ceiling": "14.4 V",
        "amps": "10 A", "array": array,
    }  # fmt: skip
    runs = [cable("array cable", "roof", "controller", "4 m", "4 mm2"), cable("feed", "bank", "lamp")]
    plan = plan_of(runs, [lamp("lamp", "lamp")], sources=[bank(), solar])
    found = faults(plan).points
    assert found["roof"].amps == pytest.approx(13.75, rel=1e-6)
    assert found["controller"].limited
    assert dict(found["bank"].by_source)["sun"] == pytest.approx(13.75)


def test_current_passes_a_diode_one_way_only() -> None:
    devices = [{"name": "diode", "kind": "diode", "from": "b1", "to": "b2", "drop": "0.5 V", "resistance": "2 mohm"}]
    runs = [cable("feed", "b2", "lamp", "5 m", "4 mm2"), cable("other", "b1", "x", "1 m", "4 mm2")]
    forward = plan_of(runs, [lamp("lamp", "lamp")], sources=[bank("b1")], devices=devices)
    ohm = 3e-3 + 10 * CLASS_5_OHM_PER_KM["4 mm2"] / 1000
    assert faults(forward).points["lamp"].amps == pytest.approx(12.3 / ohm, rel=1e-5)
    backward = plan_of(runs, [lamp("lamp", "lamp")], sources=[bank("b2")], devices=devices)
    assert "b1" not in faults(backward).points


def test_a_run_that_returns_through_the_chassis_is_shorted_to_it() -> None:
    """At the device: to the chassis, bonded to the bank with a stated 2 mohm, or to the bank's own return beside it."""
    runs = [cable("feed", "bank", "lamp", "4 m", "2.5 mm2", **{"return": "chassis"}, protection=fuse("20 A", "1 m"))]
    plan = plan_of(runs, [lamp("lamp", "lamp")], info={"chassis_bond": "2 mohm"})
    found = faults(plan)
    beside = 12.8 / (1e-3 + 7.98e-3)
    assert found.devices[0, 0].amps == pytest.approx(beside, rel=1e-9)
    assert found.points["lamp"].amps == pytest.approx(12.8 / (1e-3 + 4 * 7.98e-3 + 4e-3), rel=1e-9)


def test_what_nothing_feeds_has_no_fault_current() -> None:
    runs = [cable("feed", "bank", "lamp"), cable("apart", "x", "y", protection=fuse("10 A"))]
    found = faults(plan_of(runs, [lamp("lamp", "lamp"), lamp("other", "y")]))
    assert set(found.points) == {"bank", "lamp"}
    assert found.devices == {}
    assert found.far_ends == ()


def test_a_switch_that_a_case_opens_may_send_more_through_a_device() -> None:
    """Two ways to the fault: with the switch of one open, the device in the other carries all of it."""
    runs = [
        cable("a way", "bank", "panel", "5 m", "6 mm2", protection=fuse("30 A")),
        cable("b way", "bank", "b end", "5 m", "6 mm2"),
        cable("feed", "panel", "lamp", "5 m", "6 mm2"),
    ]
    devices = [{"name": "switch", "kind": "switch", "from": "b end", "to": "panel", "resistance": "0.1 mohm"}]
    cases = [{"name": "Both"}, {"name": "One", "devices": {"switch": "open"}}]
    sources = [bank(aged_times=1)]
    both = plan_of(runs, [lamp("lamp", "lamp")], sources=sources, devices=devices, cases=cases[:1])
    one = plan_of(runs, [lamp("lamp", "lamp")], sources=sources, devices=devices, cases=cases)
    assert lowest(one, "a way").fault.amps == pytest.approx(lowest(both, "a way").fault.amps)
    amps = {name: fault.amps for name, fault in faults(both).points.items()}
    assert {name: fault.amps for name, fault in faults(one).points.items()} == pytest.approx(amps)


def test_a_device_itself_is_a_link_but_stated_resistance_before_it_counts() -> None:
    """IEC 60050-441-17-01. Main fuse of 0.5 mohm, then a branch fuse of 3 mohm: 12.8 V / (1 + 0.5 + cable) mohm."""
    runs = [
        cable("main", "bank", "panel", "1 m", "10 mm2", protection=fuse("80 A", "0 m", "strip", resistance="0.5 mohm")),
        cable("branch", "panel", "lamp", "4 m", "4 mm2", protection=fuse("15 A", "0 m", resistance="3 mohm")),
    ]
    found = faults(plan_of(runs, [lamp("lamp", "lamp")]))
    feeder = 2 * CLASS_5_OHM_PER_KM["10 mm2"] / 1000
    assert found.devices[0, 0].amps == pytest.approx(12800, rel=1e-9)
    assert found.devices[1, 0].amps == pytest.approx(12.8 / (1.5e-3 + feeder), rel=1e-9)
    assert found.devices[1, 0].working[-1] == "12.8 V / (1 + 3.82 cable + 0.5 joints and contacts) mohm = 2406 A"
    branch = 8 * CLASS_5_OHM_PER_KM["4 mm2"] / 1000
    assert found.points["lamp"].amps == pytest.approx(12.8 / (4.5e-3 + feeder + branch), rel=1e-9)


def test_a_short_further_on_counts_where_its_way_back_is_better() -> None:
    """Beside the fuse the way back is 10 m of 1.5 mm2; a metre on, a thick return of its own leads home."""
    runs = [
        cable("feed", "bank", "near", "1 m", "16 mm2", carries="feed", protection=fuse("60 A", "0 m", "strip")),
        cable("thin back", "near", "bank", "10 m", "1.5 mm2", carries="return"),
        cable("onward", "near", "far", "1 m", "16 mm2", carries="feed"),
        cable("thick back", "far", "bank", "2 m", "16 mm2", carries="return"),
    ]
    found = faults(plan_of(runs, [lamp("lamp", "far")]))
    ohm = 4 * CLASS_5_OHM_PER_KM["16 mm2"] / 1000
    beyond = 12.8 / (1e-3 + ohm)
    assert found.points["far"].amps == pytest.approx(beyond, rel=1e-6)
    # The device's own point of reference is the return at its end, the bank's: right beside it nothing limits it.
    assert found.devices[0, 0].amps == pytest.approx(12800, rel=1e-9)
    away = [runs[0] | {"protection": [], "protection_to": fuse("60 A", "0 m", "strip")}, *runs[1:]]
    moved = faults(plan_of(away, [lamp("lamp", "far")])).devices[0, 0]
    assert moved.amps == pytest.approx(beyond, rel=1e-6)
    assert moved.place == 'at "far"'


def test_a_source_stated_to_give_nothing_gives_nothing() -> None:
    solar = {"name": "sun", "kind": "solar", "at": "x", "power": "0 W", "ceiling": "14 V"}
    plan = plan_of([cable("feed", "x", "y", protection=fuse("5 A"))], [lamp("lamp", "y")], sources=[solar])
    assert faults(plan).points == {}
    assert faults(plan).far_ends == ()
