"""A solved case read back: ways that add up to the drop, references, currents, demand, and what is left unanswered."""

import random

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt.network import FEED, RETURN
from farvolt.plan import Plan
from farvolt.rulebook import load
from farvolt.solution import Solution
from strategies import plan_of as drafted
from strategies import random_draft
from wiring import CLASS_5_OHM_PER_KM, bank, cable, charger, context_of, fuse, lamp, plan_of

FOUR, TEN = (CLASS_5_OHM_PER_KM[size] / 1000 for size in ("4 mm2", "10 mm2"))


def solved(plan: Plan, case: int = 0) -> Solution:
    """At 20 degC, the basis of small-craft-iso."""
    return context_of(plan).cases[case].solutions["basis"]


def chain() -> Plan:
    """Bank, 3 m of 10 mm2 with 1 mohm of switch, 2 m of 4 mm2; 6 A at the end and 4 A half-way."""
    devices = [
        {"name": "switch", "kind": "switch", "from": "stud", "to": "bus", "pole": "feed", "resistance": "1 mohm"}
    ]
    runs = [
        cable("main", "bank", "stud", "3 m", "10 mm2", protection=fuse("60 A", kind="strip")),
        cable("tail", "bus", "far", "2 m", "4 mm2", protection=fuse("15 A")),
    ]
    return plan_of(runs, [lamp("far", "far", "6 A"), lamp("near", "bus", "4 A", continuous=True)], devices=devices)


def test_a_way_lists_each_conductor_with_its_ohms_law() -> None:
    """10 A through main and switch, 6 A through the tail, and back: 2 x 57.3 + 10 + 2 x 59.4 mV."""
    solution = solved(chain())
    steps = [(step.name, step.pole, step.amps, step.ohm) for step in solution.way(0)]
    assert [step[:2] for step in steps] == [
        ("main", "feed"), ("switch", "feed"), ("tail", "feed"), ("tail", "return"), ("main", "return"),
    ]  # fmt: skip
    assert [step[2] for step in steps] == pytest.approx([10, 10, 6, 6, 10])
    assert [step[3] for step in steps] == pytest.approx([3 * TEN, 1e-3, 2 * FOUR, 2 * FOUR, 3 * TEN])
    expected = 2 * 10 * 3 * TEN + 10 * 1e-3 + 2 * 6 * 2 * FOUR
    assert solution.load_drop_V[0] == pytest.approx(expected)
    assert solution.load_drop_V[1] == pytest.approx(2 * 10 * 3 * TEN + 10 * 1e-3)


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 10**6))
def test_ways_add_up_to_the_drop_on_any_network(seed: int) -> None:
    """Kirchhoff's voltage law along one way, in meshes, through diodes, chassis and converters alike."""
    solution = solved(drafted(random_draft(random.Random(seed))))
    if not solution.state.solved:
        return
    for index in range(len(solution.network.plan.loads)):
        way = solution.way(index)
        if way:
            total = sum(step.drop_V for step in way)
            assert total == pytest.approx(float(solution.load_drop_V[index]), abs=1e-9)
            for step in way:
                if step.kind != "diode":
                    assert step.amps * step.ohm == pytest.approx(step.drop_V, abs=1e-9)


def test_demand_is_the_loads_beyond_a_run() -> None:
    every, continuous = solved(chain()).feed_demand
    assert every == pytest.approx([10, 6])
    assert continuous == pytest.approx([4, 0])


def test_feed_and_return_are_reported_apart() -> None:
    """The feed of one cable, two returns: the lamp's own, and a second way back in parallel with it."""
    runs = [
        cable("feed", "bank", "lamp", "2 m", "4 mm2", protection=fuse("15 A")),
        cable("second back", "lamp", "bank", "2 m", "4 mm2", carries="return"),
    ]
    solution = solved(plan_of(runs, [lamp("lamp", "lamp", "10 A")]))
    assert solution.run_amps(FEED)[0] == pytest.approx(10)
    assert np.isnan(solution.run_amps(FEED)[1])
    # Both are positive from `from` to `to`: the current comes back against the first, along the second.
    assert solution.run_amps(RETURN) == pytest.approx([-5, 5])
    assert solution.largest_run_amps == pytest.approx([10, 5])
    result = solution.result(None, [None, None])
    assert result.runs[0].drop_V == pytest.approx(10 * 2 * FOUR + 5 * 2 * FOUR)
    assert result.runs[0].loss_W == pytest.approx((10**2 + 5**2) * 2 * FOUR)


def two_banks(**case: object) -> Plan:
    runs = [cable(name, name, "bus", "1 m", "10 mm2", protection=fuse("60 A", kind="strip")) for name in ("a", "b")]
    sources = [bank("a"), bank("b", emf="13 V"), charger(at="bus")]
    loads, cases = [lamp("lamp", "bus", "5 A")], [{"name": "case", **case}]
    return plan_of(runs, loads, sources=sources, info={"reference": "b"}, cases=cases)


@pytest.mark.parametrize(
    ("off", "reference"),
    [([], "b"), (["b"], "a"), (["a", "b"], "charger")],
)
def test_drop_is_counted_from_the_reference_or_the_next_that_works(off: list[str], reference: str) -> None:
    """The plan's own reference, else the first battery that works, else whatever does."""
    plan = two_banks(sources=dict.fromkeys(off, "off"))
    port = solved(plan).references[0]
    assert port is not None
    assert plan.sources[port].name == reference


def test_a_load_behind_a_converter_is_counted_from_its_output() -> None:
    supply = {
        "name": "supply", "kind": "converter", "from": "bank", "at": "out", "nominal": "24 V", "volts": "25 V",
        "amps": "10 A", "resistance": "1 mohm", "efficiency": "90 %",
    }  # fmt: skip
    runs = [cable("feed", "out", "lamp", "2 m", "4 mm2")]
    solution = solved(plan_of(runs, [lamp("lamp", "lamp", "5 A")], sources=[bank(), supply]))
    assert solution.references == (1,)
    assert solution.load_nominal_V.tolist() == [24]
    assert solution.load_drop_V == pytest.approx([2 * 5 * 2 * FOUR])


def test_what_is_not_fed_has_no_numbers() -> None:
    plan = plan_of(
        [cable("feed", "bank", "lamp"), cable("lost", "shed", "door")], [lamp("lamp", "lamp"), lamp("door", "door")]
    )
    solution = solved(plan)
    result = solution.result(None, [None, None])
    assert result.solved
    assert [one.volts is None for one in result.loads] == [False, True]
    assert result.loads[1].amps == 0
    assert result.runs[1].feed_A is None
    assert {one.name for one in result.points if one.volts is None} == {"shed", "door"}
    assert solution.way(1) == ()
    assert solution.references[1] is None


def test_a_case_that_gives_way_has_no_numbers_at_all() -> None:
    runs = [cable("feed", "bank", "heater", size=None, resistance="199 mohm")]
    plan = plan_of(runs, [{"name": "heater", "at": "heater", "power": "1 kW"}])
    result = solved(plan).result(None, [None])
    assert not result.solved
    assert result.share_held < 1
    assert {one.volts for one in (*result.points, *result.loads)} == {None}
    assert {one.feed_A for one in result.runs} == {None}


def test_voltages_are_told_against_the_return_of_the_reference_source() -> None:
    result = solved(chain()).result(None, [None, None])
    points = {one.name: one for one in result.points}
    assert points["bank"].return_V == 0
    assert points["bank"].feed_V == pytest.approx(12.8 - 10 * 1e-3)
    # The far end's return stands above the bank's by what its own current drops on the way back.
    assert points["far"].return_V == pytest.approx(10 * 3 * TEN + 6 * 2 * FOUR)
    assert points["stud"].return_V == points["bus"].return_V


def test_power_of_every_part_adds_up() -> None:
    result = solved(chain()).result(None, [None, None])
    devices = sum((one.amps or 0) * (one.drop_V or 0) for one in result.devices)
    lost = sum(one.loss_W or 0 for one in result.runs) + devices
    assert lost == pytest.approx(result.power_lost_W)
    assert sum(one.watts or 0 for one in result.loads) == pytest.approx(result.power_loads_W)
    assert result.power_in_W == pytest.approx(result.power_loads_W + result.power_lost_W)


def test_an_open_device_carries_nothing_and_drops_nothing_that_it_could_tell() -> None:
    devices = [{"name": "switch", "kind": "switch", "from": "bank", "to": "stud"}]
    cases = [{"name": "off", "devices": {"switch": "open"}}]
    plan = plan_of([cable("feed", "stud", "lamp")], [lamp("lamp", "lamp")], devices=devices, cases=cases)
    (device,) = solved(plan).result(None, [None]).devices
    assert (device.amps, device.drop_V) == (0, None)


def test_equal_temperatures_are_solved_once() -> None:
    """The plan's own temperature is the rulebook's unless it says otherwise: one state serves both."""
    solutions = context_of(chain()).cases[0].solutions
    assert solutions["plan"].state is solutions["basis"].state
    assert solutions["hot"].state is not solutions["basis"].state
    assert load("small-craft-iso").drop_basis.temperature_degC == 20
