"""The walk from every source: which protection each way has passed, how much cable lies bare, what lies ahead."""

import random
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt.network import build
from farvolt.plan import Plan
from farvolt.rulebook import load
from farvolt.sections import Exposure, Sections, sections, sheathed
from strategies import Wishes, random_draft
from strategies import plan_of as drafted
from wiring import bank, cable, fuse, lamp, plan_of


def walked(plan: Plan) -> Sections:
    return sections(build(plan, load(plan.plan.rulebook)))


def ways(plan: Plan, run: str) -> list[tuple[str, str, float | None, float | None]]:
    """(source, end, rating of the protection, rating upstream) of every way a run is fed."""
    index = [one.name for one in plan.runs].index(run)
    found = walked(plan).by_run.get(index, [])
    return sorted(
        (plan.sources[one.source].name, one.end, _amps(one.guard), _amps(one.upstream)) for one in found
    )  # fmt: skip


def _amps(guard: Any) -> float | None:
    return None if guard is None else guard.rating_A


def single(plan: Plan, run: str) -> Exposure:
    index = [one.name for one in plan.runs].index(run)
    (found,) = walked(plan).by_run[index]
    return found


CHAIN = [
    cable("main", "bank", "bus", "1 m", "35 mm2", protection=fuse("100 A", "0.2 m", "strip")),
    cable("feeder", "bus", "block", "2 m", "16 mm2"),
    cable("branch", "block", "lamp", "3 m", "4 mm2", protection=fuse("15 A", "0.3 m")),
]


def test_the_nearest_protection_is_carried_along() -> None:
    plan = plan_of(CHAIN, [lamp("lamp", "lamp")])
    assert ways(plan, "main") == [("bank", "from", 100, None)]
    assert ways(plan, "feeder") == [("bank", "from", 100, 100)]
    assert ways(plan, "branch") == [("bank", "from", 15, 100)]
    assert single(plan, "branch").own
    assert not single(plan, "feeder").own


def test_bare_lengths_and_what_lies_before() -> None:
    """Bare: up to a run's own protection, or all of it; before: from the source, where nothing protects."""
    plan = plan_of(CHAIN, [lamp("lamp", "lamp")])
    assert [single(plan, name).bare_m for name in ("main", "feeder", "branch")] == [0.2, 2, 0.3]
    bare = plan_of([CHAIN[0] | {"protection": []}, *CHAIN[1:]], [lamp("lamp", "lamp")])
    found = single(bare, "feeder")
    assert (found.before_m, found.bare_m, found.guard, found.direct) == (1, 2, None, False)
    assert single(bare, "main").direct


def test_protection_at_the_far_end_leaves_the_start_bare() -> None:
    far = cable("main", "bank", "bus", "1 m", "35 mm2", protection_to=fuse("100 A", "0.25 m", "strip"))
    found = single(plan_of([far, *CHAIN[1:]], [lamp("lamp", "lamp")]), "main")
    assert found.guard is None
    assert found.bare_m == pytest.approx(0.75)
    assert [guard.rating_A for guard in found.ahead] == [100]


def test_the_lowest_of_several_at_one_end_counts() -> None:
    guards = [fuse("60 A", kind="strip"), fuse("20 A"), fuse("5 A", pole="return")]
    plan = plan_of([cable("feed", "bank", "lamp", protection=guards)], [lamp("lamp", "lamp")])
    assert ways(plan, "feed") == [("bank", "from", 20, None)]


def test_what_leaves_a_point_protected_lies_ahead() -> None:
    lead = cable("lead", "bank", "block", "0.1 m", "16 mm2")
    branches = [cable(name, "block", name, "2 m", "4 mm2", protection=fuse("10 A")) for name in ("one", "two")]
    plan = plan_of([lead, *branches], [lamp("one", "one"), lamp("two", "two")])
    assert [guard.rating_A for guard in single(plan, "lead").ahead] == [10, 10]
    open_end = [lead, branches[0], cable("two", "block", "two", "2 m", "4 mm2")]
    assert single(plan_of(open_end, [lamp("one", "one"), lamp("two", "two")]), "lead").ahead == ()
    assert single(plan_of([lead, *branches], [lamp("one", "block")]), "lead").ahead == ()
    assert single(plan_of([lead], [lamp("one", "one")]), "lead").ahead == ()


def test_a_second_battery_feeds_from_the_other_end() -> None:
    runs = [
        cable("lead a", "a", "bus", protection=fuse("60 A", kind="strip")),
        cable("lead b", "b", "bus", protection=fuse("80 A", kind="strip")),
    ]
    plan = plan_of(runs, [lamp("lamp", "bus")], sources=[bank("a"), bank("b")])
    assert ways(plan, "lead a") == [("a", "from", 60, None), ("b", "to", 80, 80)]
    assert ways(plan, "lead b") == [("a", "to", 60, 60), ("b", "from", 80, None)]


def test_every_run_of_a_ring_is_fed_from_both_ends() -> None:
    runs = [
        cable("one", "bank", "x", protection=fuse("50 A", kind="strip")),
        cable("two", "x", "y"),
        cable("three", "y", "bank", protection_to=fuse("10 A")),
    ]
    plan = plan_of(runs, [lamp("lamp", "y")])
    assert ways(plan, "one") == [("bank", "from", 50, None), ("bank", "to", 10, 10)]
    assert ways(plan, "two") == [("bank", "from", 50, 50), ("bank", "to", 10, 10)]
    assert ways(plan, "three") == [("bank", "from", 50, 50), ("bank", "to", 10, None)]


def test_switches_are_walked_through_open_or_closed_and_keep_the_source_direct() -> None:
    devices = [{"name": "switch", "kind": "switch", "from": "bank", "to": "stud", "state": "open"}]
    plan = plan_of([cable("feed", "stud", "lamp")], [lamp("lamp", "lamp")], devices=devices)
    assert ways(plan, "feed") == [("bank", "from", None, None)]
    assert single(plan, "feed").direct


def test_a_converter_starts_a_walk_of_its_own() -> None:
    supply = {
        "name": "supply", "kind": "converter", "from": "bank", "at": "radio bus", "nominal": "12 V",
        "volts": "13.8 V", "amps": "10 A", "efficiency": "90 %",
    }  # fmt: skip
    plan = plan_of([cable("feed", "radio bus", "radio")], [lamp("radio", "radio")], sources=[bank(), supply])
    assert ways(plan, "feed") == [("supply", "from", None, None)]


def test_return_runs_take_the_highest_protection_of_the_circuits_beyond() -> None:
    """A common return of two circuits, 15 A and 30 A: a fault in the stronger one comes back through it."""
    runs = [
        cable("out one", "bank", "one", carries="feed", protection=fuse("15 A")),
        cable("out two", "bank", "two", carries="feed", protection=fuse("30 A")),
        cable("back one", "one", "common", carries="return"),
        cable("back two", "two", "common", carries="return"),
        cable("trunk", "common", "bank", carries="return"),
    ]
    plan = plan_of(runs, [lamp("one", "one"), lamp("two", "two")])
    found = walked(plan)
    ratings = {plan.runs[run].name: [guard.rating_A for _, guard in each] for run, each in found.returns.items()}
    assert ratings == {"back one": [15], "back two": [30], "trunk": [30]}
    assert set(found.by_run) == {0, 1}


def test_a_run_lies_sheathed_by_its_own_word_or_its_routes() -> None:
    runs = [
        cable("own", "bank", "a", sheathed=True),
        cable("route", "bank", "b", route="loom"),
        cable("not", "bank", "c", route="loom", sheathed=False),
        cable("bare", "bank", "d"),
    ]
    plan = plan_of(runs, tables={"routes": {"loom": {"sheathed": True}}})
    assert [sheathed(plan, run) for run in plan.runs] == [True, True, False, False]


def test_a_ring_behind_a_point_protects_nothing_at_that_point() -> None:
    """20 A feed a point; a ring of 100 A hangs on it. What else leaves that point is behind the 20 A alone."""
    runs = [
        cable("main", "bank", "x", protection=fuse("20 A")),
        cable("out", "x", "y", protection=fuse("100 A", kind="strip")),
        cable("round", "y", "z"),
        cable("back", "z", "x"),
        cable("lamp", "x", "lamp"),
    ]
    plan = plan_of(runs, [lamp("lamp", "lamp"), lamp("y", "y")])
    assert ways(plan, "lamp") == [("bank", "from", 20, 20)]
    # Round the ring both ways: through its 100 A, and from the point itself.
    assert ways(plan, "back") == [("bank", "from", 100, 100), ("bank", "to", 20, 20)]


Edge = tuple[int, str, str, str]
"""Run or -1, the end it is entered at, the point there, the point at its other end."""


Ways = set[tuple[int, str, float | None]]
"""Runs with the end they are fed at and the rating of the protection they are behind."""


def simple_ways(plan: Plan, source: str) -> Ways:
    """(run, end, rating) by following every way that passes no point twice: what the walk must find, the slow way."""
    edges: list[Edge] = []
    for index, run in enumerate(plan.runs):
        if run.conducts in ("both", "feed"):
            edges += [(index, "from", run.from_point, run.to_point), (index, "to", run.to_point, run.from_point)]
    joined = _merged(plan)
    for device in plan.devices:
        if device.pole != "return":
            edges += [(-1, "", device.from_point, device.to_point), (-1, "", device.to_point, device.from_point)]
    found: Ways = set()

    def follow(point: str, passed: tuple[str, ...], rating: float | None, came: int) -> None:
        for run, end, start, other in edges:
            if joined[start] != point or (run >= 0 and run == came):
                continue
            if run < 0:
                if joined[other] not in passed:
                    follow(joined[other], (*passed, joined[other]), rating, run)
                continue
            near, far = _lowest(plan, run, end), _lowest(plan, run, "to" if end == "from" else "from")
            found.add((run, end, near if near is not None else rating))
            beyond = next((one for one in (far, near) if one is not None), rating)
            if joined[other] not in passed:
                follow(joined[other], (*passed, joined[other]), beyond, run)

    start = next(joined[one.at] for one in plan.sources if one.name == source)
    follow(start, (start,), None, -1)
    return found


def _lowest(plan: Plan, run: int, end: str) -> float | None:
    mine = [one for one in plan.runs[run].protections if (one.end, one.pole) == (end, "feed")]
    return min((one.rating.si for one in mine), default=None)


def _merged(plan: Plan) -> dict[str, str]:
    """Points by the first of those whose feeds are one: a device in the return has none in the feed."""
    first = {name: name for name in plan.point_names}
    for device in plan.devices:
        if device.pole != "return":
            continue
        a, b = first[device.from_point], first[device.to_point]
        first = {name: a if one == b else one for name, one in first.items()}
    return first


def compared(seed: int, loops: int) -> list[tuple[Ways, Ways]]:
    """For each source of a random plan: what the walk tells, and what every simple way tells."""
    chance = random.Random(seed)
    draft = random_draft(chance, Wishes(points=(3, 6), loops=loops, converters=0.0))
    for run in draft["runs"]:
        for guard in run.get("protection", ()):
            guard["rating"] = f"{chance.randint(1, 400)} A"
    plan = drafted(draft)
    every = [one for each in walked(plan).by_run.values() for one in each]
    return [
        ({(one.run, one.end, _amps(one.guard)) for one in every if one.source == port}, simple_ways(plan, source.name))
        for port, source in enumerate(plan.sources)
    ]


@settings(max_examples=100, deadline=None)
@given(st.integers(0, 10**6))
def test_the_walk_misses_nothing_that_a_simple_way_finds(seed: int) -> None:
    """On random meshes, for every source: each run with each protection it can be behind.

    A run without protection that the same one feeds at both of its ends may be told of one end only.
    """
    for told, true in compared(seed, loops=4):
        assert {(run, amps) for run, _, amps in told} >= {(run, amps) for run, _, amps in true}


@settings(max_examples=100, deadline=None)
@given(st.integers(0, 10**6))
def test_the_walk_finds_nothing_else_in_trees_and_rings(seed: int) -> None:
    """In denser meshes it may name a way that has to pass a point twice: a finding too many, never one too few."""
    for told, true in compared(seed, loops=1):
        assert told <= true
