"""What holds of fault currents on any plan: they balance, fall with distance, and grow with what feeds them."""

import random
from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from grid import grid
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import shorts
from farvolt.fault_network import coldest
from farvolt.faults import Fault, Faults
from farvolt.network import build
from farvolt.operating import islands
from farvolt.plan import Plan
from farvolt.rulebook import load
from farvolt.spurs import spurs
from strategies import ANYTHING, Wishes, plan_of, random_draft
from wiring import bank, cable, fuse, lamp
from wiring import plan_of as written

SEEDS = st.integers(0, 10**6)


def faults(plan: Plan) -> Faults:
    book = load(plan.plan.rulebook)
    return Faults(build(plan, book), book)


@settings(max_examples=60, deadline=None)
@given(SEEDS)
def test_every_short_balances_and_none_gives_less_at_its_highest_than_at_its_lowest(seed: int) -> None:
    """Kirchhoff's current law at every node; the highest of a point is not below what a far end there gets."""
    found = faults(plan_of(random_draft(random.Random(seed), ANYTHING)))
    everything = [*found.points.values(), *found.devices.values(), *(one.fault for one in found.far_ends)]
    assert [one.place for one in everything if not one.certified] == []
    highest = {one.place: one.amps for one in found.points.values()}
    for far in found.far_ends:
        assert far.fault.amps <= highest.get(far.fault.place, float("inf")) * (1 + 1e-9)


@settings(max_examples=40, deadline=None)
@given(SEEDS)
def test_a_device_interrupts_at_least_what_opens_it(seed: int) -> None:
    """On radial plans: the highest current through each protection is not below the lowest."""
    found = faults(plan_of(random_draft(random.Random(seed), Wishes(loops=0))))
    for (run, end), far in found.lowest.items():
        guards = [amps for amps in found.devices if amps[0] == run]
        most = max(found.devices[key].amps for key in guards)
        assert far.fault.amps <= most * (1 + 1e-9), (run, end)


@settings(max_examples=40, deadline=None)
@given(st.lists(st.floats(0.05, 10), min_size=1, max_size=6), st.sampled_from(["1.5 mm2", "6 mm2", "25 mm2"]))
def test_the_fault_level_falls_with_distance(lengths: list[float], size: str) -> None:
    places = ["bank", *(f"p{index}" for index in range(len(lengths)))]
    runs = [
        cable(f"run {index}", places[index], places[index + 1], f"{length:.4f} m", size)
        for index, length in enumerate(lengths)
    ]
    found = faults(written(runs, [lamp("lamp", places[-1])])).points
    amps = [found[name].amps for name in places]
    assert all(near > far for near, far in pairwise(amps))


@settings(max_examples=40, deadline=None)
@given(SEEDS, st.sampled_from(["battery", "charger"]))
def test_a_further_source_never_lowers_the_highest(seed: int, kind: str) -> None:
    """On radial plans whose returns run beside their feeds. In others a further source may raise the return that a
    fault's current needs, and lower it by a little."""
    chance = random.Random(seed)
    draft = random_draft(chance, Wishes(loops=0, chassis=0, converters=0))
    together = [one for one in draft["runs"] if one.get("carries") != "return"]
    draft["runs"] = [{key: value for key, value in one.items() if key != "carries"} for one in together]
    volts = f"{chance.uniform(0.5, 1.2) * float(draft['plan']['nominal'].split()[0]):.4g} V"
    more: dict[str, Any] = {"name": "further", "kind": kind, "at": chance.choice(draft["runs"])["to"]}
    more |= {"emf": volts, "resistance": "5 mohm"} if kind == "battery" else {"volts": volts, "amps": "25 A"}
    before = faults(plan_of(draft)).points
    after = faults(plan_of(draft | {"sources": [*draft["sources"], more]})).points
    assert {
        name: (one.amps, after[name].amps) for name, one in before.items() if after[name].amps < one.amps * (1 - 1e-6)
    } == {}


@settings(max_examples=40, deadline=None)
@given(st.floats(0.5, 8), st.floats(0.01, 0.99), st.sampled_from(["1.5 mm2", "6 mm2"]), st.booleans())
def test_a_place_within_a_run_is_what_a_point_there_would_be(
    length: float, share: float, size: str, ring: bool
) -> None:
    """A run cut in two at its fuse, joined by a point: the currents of both parts add up to the short's there."""
    along = round(share * length, 6)
    beside = [cable("beside", "bank", "lamp", "3 m", "4 mm2")] if ring else []
    whole = [cable("feed", "bank", "lamp", f"{length!r} m", size, protection=fuse("20 A", f"{along!r} m"))]
    cut = [
        cable("near", "bank", "cut", f"{along!r} m", size),
        cable("far", "cut", "lamp", f"{length - along!r} m", size),
    ]
    sources = [bank(), bank("second", at="lamp", resistance="20 mohm")]
    loads = [lamp("lamp", "lamp")]
    one = faults(written([*whole, *beside], loads, sources=sources)).devices[0, 0]
    other = faults(written([*cut, *beside], loads, sources=sources)).points["cut"]
    assert dict(one.by_source) == pytest.approx(dict(other.by_source), rel=1e-6)
    assert one.amps <= other.amps * (1 + 1e-9)


def test_a_large_plan_balances_everywhere() -> None:
    """300 runs: a sparse factorisation, where small plans have a dense one."""
    found = faults(Plan.model_validate(grid(300)))
    assert len(found.points) > 280
    assert all(one.certified for one in found.points.values())


def test_spurs_are_what_hangs_by_single_conductors() -> None:
    """0-1-2-3 with a ring 1-2-4 and a source at 0; 5 and 6 hang on 3 in a row, 7 on 5. Node 8 stands alone."""
    a, b = np.array([0, 1, 2, 1, 3, 5, 5]), np.array([1, 2, 4, 4, 2, 3, 6])
    a, b = np.append(a, 7), np.append(b, 5)
    found = spurs(9, a, b, np.arange(1.0, 9.0), np.array([0]))
    assert found.root.tolist() == [0, 1, 2, 2, 4, 2, 2, 2, 8]
    assert found.ohm.tolist() == [0, 0, 0, 5, 0, 11, 18, 19, 0]
    assert found.way(7) == [7, 5, 3]
    assert found.beyond(np.array([4, 5, 6, 7]), 7).tolist() == [True, True, False, True]
    assert [found.holds(end, 6) for end in (3, 5, 6, 7)] == [True, True, True, False]


@settings(max_examples=30, deadline=None)
@given(SEEDS)
def test_currents_of_some_branches_are_those_of_all(seed: int) -> None:
    plan = plan_of(random_draft(random.Random(seed), ANYTHING))
    built = build(plan, load(plan.plan.rulebook))
    for net in coldest(built, islands(built)):
        every = np.arange(len(net.circuit.a))
        for found in net.circuit.shorted([net.point(name) for name in plan.point_names]):
            assert found.in_branches(every) == pytest.approx(found.branch_A, rel=1e-12, abs=1e-12)
            assert [found.in_branch(one) for one in every] == pytest.approx(found.branch_A, rel=1e-12, abs=1e-12)


@settings(max_examples=60, deadline=None)
@given(SEEDS)
def test_a_short_in_a_spur_is_the_same_as_in_the_whole_network(seed: int) -> None:
    """Against the same network of which every node is solved for, with its place and what each source gives."""
    plan = plan_of(random_draft(random.Random(seed), ANYTHING))

    def everything() -> list[Fault]:
        found = faults(plan)
        return [*found.points.values(), *found.devices.values(), *(one.fault for one in found.far_ends)]

    quick = [(one.place, one.amps, dict(one.by_source), one.limited) for one in everything()]
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(shorts, "spurs", lambda count, a, b, ohm, kept: spurs(count, a, b, ohm, np.arange(count)))
        whole = [(one.place, one.amps, dict(one.by_source), one.limited) for one in everything()]
    assert len(quick) == len(whole)
    for one, other in zip(quick, whole, strict=True):
        assert one[1] == pytest.approx(other[1], rel=1e-6, abs=1e-6)
        if one[0] == other[0]:
            assert one[2] == pytest.approx(other[2], rel=1e-6, abs=1e-5)
            assert one[3] == other[3]
