"""What must hold of every solved plan, whatever it is: Kirchhoff's laws, energy, and the symmetries of a network."""

import copy
import math
import random
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from circuit import Circuit, currents, imbalance, run_ohm
from farvolt.network import FEED
from solving import Solved, solved
from strategies import ANYTHING, LINEAR, Draft, changed, drafts, plan_of, random_draft, times

EPSILON = float(np.finfo(float).eps)
HEAVY = replace(ANYTHING, load_share=3.0)
quick = settings(deadline=None, max_examples=60)


def close(one: dict[str, float], other: dict[str, float], *, factor: float = 1.0) -> bool:
    """Whether two accounts agree within 1e-7 of the other's largest value; NaN agrees with NaN."""
    scale = max((abs(value) for value in other.values() if math.isfinite(value)), default=0.0)
    return one == pytest.approx(
        {name: factor * value for name, value in other.items()}, abs=1e-7 * factor * max(scale, 1.0), nan_ok=True
    )


# Kirchhoff and energy --------------------------------------------------------------------------------------------


@quick
@given(drafts(ANYTHING) | drafts(HEAVY))
def test_no_node_is_out_of_balance(draft: Draft) -> None:
    """Kirchhoff's current law from the laws of the elements, at the share of the loads that the state is for."""
    found = solved(plan_of(draft))
    assert_balanced(found)


def assert_balanced(found: Solved) -> None:
    """Currents recomputed element by element meet at every node to the accuracy that a solution claims."""
    out = imbalance(found.circuit, found.node_volts, found.state.share_held)
    ohms = [one.ohm for one in (*found.circuit.resistors, *found.circuit.feeders)]
    largest = max(map(abs, found.node_volts.values()), default=0.0) / min(ohms, default=1.0)
    allowed = 2 * max(1e-9, 64 * EPSILON * largest)
    assert {node: amps for node, amps in out.items() if not abs(amps) <= allowed} == {}


@quick
@given(drafts(ANYTHING))
def test_what_sources_give_is_what_loads_and_conductors_take(draft: Draft) -> None:
    """Conservation of energy: the sum of u times i over all elements is zero (Tellegen's theorem)."""
    found = solved(plan_of(draft))
    volts = found.node_volts
    watts = [(volts[a] - volts[b]) * amps for a, b, amps in currents(found.circuit, volts, found.state.share_held)]
    assert abs(math.fsum(watts)) <= 1e-9 * math.fsum(map(abs, watts)) + 1e-9
    given_W, taken_W = found.state.power_in_W, found.state.power_loads_W + found.state.power_lost_W
    assert given_W == pytest.approx(taken_W, rel=1e-9, abs=1e-9)


@quick
@given(drafts(ANYTHING))
def test_a_solved_plan_draws_what_its_loads_are_rated_for(draft: Draft) -> None:
    found = solved(plan_of(draft))
    assume(found.state.solved)
    by_name = {drain.name: drain for drain in found.circuit.drains}
    for name, volts in found.load_volts.items():
        expected = by_name[name].current(volts) if name in by_name else 0.0
        assert found.load_amps[name] == pytest.approx(expected, rel=1e-9, abs=1e-12)
        drain = by_name.get(name)
        assert drain is None or drain.watts == drain.amps == 0 or volts >= drain.knee


def kept(draft: Draft, **changes: object) -> Draft:
    """The draft with other shares of its loads, and nothing in surge, so that the same elements are at work."""
    result = copy.deepcopy(draft)
    result["cases"][0] |= {"surge": [], **changes}
    return result


@quick
@given(drafts(replace(LINEAR, busbars=0.2)), st.floats(0.1, 0.9))
def test_volts_of_one_state_times_currents_of_another_sum_to_nothing(draft: Draft, share: float) -> None:
    """Tellegen's theorem: over one network, whatever its elements do, the sum of u times i' is zero."""
    names = [load["name"] for load in draft["loads"]]
    one = solved(plan_of(kept(draft, loads="all")))
    other = solved(plan_of(kept(draft, loads=dict.fromkeys(names, share))))
    assume(one.state.solved and other.state.solved)
    pairs = zip(
        currents(one.circuit, one.node_volts), currents(other.circuit, other.node_volts), strict=True
    )  # fmt: skip
    volts, watts = one.node_volts, []
    for (a, b, _), (same_a, same_b, amps) in pairs:
        assert (a, b) == (same_a, same_b)
        watts.append((volts[a] - volts[b]) * amps)
    assert abs(math.fsum(watts)) <= 1e-9 * math.fsum(map(abs, watts)) + 1e-9


@quick
@given(drafts(ANYTHING) | drafts(HEAVY))
def test_around_every_loop_of_runs_the_drops_cancel(draft: Draft) -> None:
    """Kirchhoff's voltage law, from the currents that are reported and the resistances of the plan's own tables."""
    falls = conductor_falls(solved(plan_of(draft)))
    level = levels(falls)
    # Along the tree that the levels were found by this says nothing; every other conductor closes a loop.
    wrong = [(a, b) for a, b, fall in falls if not math.isclose(level[a] - level[b], fall, abs_tol=1e-8)]
    assert wrong == []


def conductor_falls(found: Solved) -> list[tuple[int, int, float]]:
    """(from, to, V) of every conductor of a run: its resistance times the current that is reported."""
    bars = {point.name: point.resistance.si / 2 for point in found.plan.points if point.resistance is not None}
    runs, pins = {run.name: run for run in found.plan.runs}, found.circuit.pins
    falls = []
    for (name, pole), amps in found.run_amps.items():
        run, mark = runs[name], "+" if pole == FEED else "-"
        start, ohm = run.from_point, found.plan.plan.chassis_bond.si
        if run.return_path == "chassis" and mark == "-":
            start = "chassis"
        else:
            ohm = run_ohm(run)[mark] + bars.get(run.from_point, 0.0) + bars.get(run.to_point, 0.0)
        falls.append((pins[start, mark], pins[run.to_point, mark], ohm * amps))
    return falls


def levels(falls: list[tuple[int, int, float]]) -> dict[int, float]:
    """A voltage at every node, walking along the conductors from one node of each part at zero."""
    beside: dict[int, list[tuple[int, float]]] = {}
    for a, b, fall in falls:
        beside.setdefault(a, []).append((b, -fall))
        beside.setdefault(b, []).append((a, fall))
    level: dict[int, float] = {}
    for start in beside:
        level.setdefault(start, 0.0)
        stack = [start]
        while stack:
            node = stack.pop()
            ahead = [(other, level[node] + rise) for other, rise in beside[node] if other not in level]
            level.update(ahead)
            stack += [other for other, _ in ahead]
    return level


@quick
@given(drafts(replace(ANYTHING, chassis=0.0, extra_batteries=0.8, charger_only=0.0)), st.randoms(use_true_random=False))
def test_the_choice_of_a_reference_changes_no_volts(draft: Draft, chance: random.Random) -> None:
    """Which source's return is called zero is a matter of naming: differences of potential are what there is."""
    candidates = [source["name"] for source in draft["sources"] if source["kind"] != "converter"]
    other = copy.deepcopy(draft)
    draft["plan"]["reference"], other["plan"]["reference"] = candidates[0], chance.choice(candidates)
    assert same(solved(plan_of(other)), solved(plan_of(draft)))


# The highest solution --------------------------------------------------------------------------------------------


@settings(deadline=None, max_examples=120)
@given(drafts(replace(LINEAR, load_share=3.0)))
def test_the_solution_is_the_highest(draft: Draft) -> None:
    """Drawing at each round what the loads want at the volts of the last, from the unloaded network on, comes down
    on the highest solution and cannot pass it, where every load lowers every other's voltage (a monotone map)."""
    found = solved(plan_of(draft))
    assume(found.circuit.live)
    highest = come_down(found.circuit)
    if found.state.solved:
        assert highest is not None
        for drain in found.circuit.drains:
            reached = found.node_volts[drain.a] - found.node_volts[drain.b]
            assert reached == pytest.approx(highest[drain.name], abs=1e-6)
    else:
        assert highest is None


def come_down(circuit: Circuit) -> dict[str, float] | None:
    """Volts of the loads where the rounds end; None where a load falls below its knee."""
    open_V, transfer_ohm = ports(circuit)
    # Where one load raises another's voltage (a bridge out of balance) the map is not monotone and proves nothing.
    assume(bool(np.all(transfer_ohm > -1e-12)))
    volts = open_V
    for _ in range(200_000):
        demand = [replace(drain, siemens=0.0).current(float(u)) for drain, u in zip(circuit.drains, volts, strict=True)]
        lower = open_V - transfer_ohm @ np.array(demand)
        demanding = [drain.watts > 0 or drain.amps > 0 for drain in circuit.drains]
        if any(want and u < drain.knee for want, u, drain in zip(demanding, lower, circuit.drains, strict=True)):
            return None
        if np.abs(lower - volts).max(initial=0.0) < 1e-13:
            break
        volts = lower
    return {drain.name: float(u) for drain, u in zip(circuit.drains, volts, strict=True)}


def ports(circuit: Circuit) -> tuple[np.ndarray, np.ndarray]:
    """Volts of the loads without their powers and currents, and the ohms between them (Thévenin)."""
    nodes = {node: row for row, node in enumerate(sorted(circuit.live))}
    matrix, injected = np.zeros((len(nodes), len(nodes))), np.zeros(len(nodes))
    conducting = [(one.a, one.b, 1 / one.ohm) for one in (*circuit.resistors, *circuit.feeders)]
    for a, b, siemens in [*conducting, *((one.a, one.b, one.siemens) for one in circuit.drains)]:
        np.add.at(matrix, ([nodes[a], nodes[b]], [nodes[a], nodes[b]]), siemens)
        np.add.at(matrix, ([nodes[a], nodes[b]], [nodes[b], nodes[a]]), -siemens)
    for feeder in circuit.feeders:
        injected[nodes[feeder.a]] += feeder.volts / feeder.ohm
        injected[nodes[feeder.b]] -= feeder.volts / feeder.ohm
    for part in circuit.parts:
        matrix[nodes[min(part)], nodes[min(part)]] += 1.0
    incidence = np.zeros((len(nodes), len(circuit.drains)))
    for column, drain in enumerate(circuit.drains):
        incidence[nodes[drain.a], column] += 1
        incidence[nodes[drain.b], column] -= 1
    return incidence.T @ np.linalg.solve(matrix, injected), incidence.T @ np.linalg.solve(matrix, incidence)


# Only up, or only down -------------------------------------------------------------------------------------------

ONE_SOURCE = replace(LINEAR, extra_batteries=0.0, linked=0.0, busbars=0.2)
"""Feed and return meet at one source alone: nothing but loads joins them elsewhere."""

TREES = replace(ONE_SOURCE, loops=0, doubled=0.0, chassis=0.0, behaviours=("power", "current"))


def nowhere_higher(lower: Solved, higher: Solved) -> bool:
    """Whether no load of the first stands above where it stands in the second; NaN where neither is fed."""
    pairs = [(lower.load_volts[name], volts) for name, volts in higher.load_volts.items()]
    return all(one <= other + 1e-9 for one, other in pairs if math.isfinite(other))


@quick
@given(drafts(ONE_SOURCE), st.randoms(use_true_random=False), st.floats(1.01, 1.5))
def test_with_one_source_more_load_raises_no_volts(draft: Draft, chance: random.Random, factor: float) -> None:
    """Transfer resistances of two networks that meet at one source are sums of entries of inverses of M-matrices, so
    none is negative (A. Berman and R. Plemmons, Nonnegative matrices in the mathematical sciences, ch. 6)."""
    before = kept(draft, loads="all")
    heavier = copy.deepcopy(before)
    load = chance.choice(heavier["loads"])
    key = next(one for one in ("power", "current", "resistance") if one in load)
    load[key] = times(load[key], 1 / factor if key == "resistance" else factor)
    found, after = solved(plan_of(before)), solved(plan_of(heavier))
    assert found.state.solved or not after.state.solved
    if after.state.solved:
        assert nowhere_higher(after, found)


@quick
@given(drafts(ONE_SOURCE), st.floats(1.001, 1.2))
def test_with_one_source_more_emf_lowers_no_volts(draft: Draft, factor: float) -> None:
    """For the same reason: without loads every voltage is the EMF, and all that loads draw falls with the voltage."""
    before = with_stated_resistance(draft)
    stronger = copy.deepcopy(before)
    stronger["sources"][0]["emf"] = times(before["sources"][0]["emf"], factor)
    found, after = solved(plan_of(before)), solved(plan_of(stronger))
    assert after.state.solved or not found.state.solved
    if found.state.solved:
        assert nowhere_higher(found, after)


@quick
@given(drafts(TREES), st.randoms(use_true_random=False), st.floats(1.01, 2.0))
def test_in_trees_of_powers_and_currents_a_longer_cable_raises_no_volts(
    draft: Draft, chance: random.Random, factor: float
) -> None:
    """Where feed and return are both trees each conductor carries all that stands beyond it: by induction from the
    source on, a greater resistance lowers what is beyond, which then draws no less. Not so with resistances: see
    `test_a_thicker_cable_to_a_heater_lowers_its_neighbour`."""
    assume(draft["runs"])
    longer = copy.deepcopy(draft)
    run = chance.choice(longer["runs"])
    for key in ("length", "resistance"):
        if key in run:
            run[key] = times(run[key], factor)
    found, after = solved(plan_of(draft)), solved(plan_of(longer))
    assert found.state.solved or not after.state.solved
    if after.state.solved:
        assert nowhere_higher(after, found)


# Linear networks --------------------------------------------------------------------------------------------------

RESISTIVE = replace(LINEAR, behaviours=("resistance",), extra_batteries=0.7)
CURRENTS = replace(LINEAR, behaviours=("current",), load_share=0.2)


def with_stated_resistance(draft: Draft) -> Draft:
    """The draft with every battery's resistance stated, so that it does not follow the EMF."""
    result = copy.deepcopy(draft)
    for source in result["sources"]:
        source["resistance"] = "8 mohm"
    return result


@quick
@given(drafts(RESISTIVE), st.randoms(use_true_random=False))
def test_sources_of_a_linear_network_add_up(draft: Draft, chance: random.Random) -> None:
    """Superposition: what two sets of EMFs cause together is the sum of what each causes alone."""
    whole = with_stated_resistance(draft)
    one, other = copy.deepcopy(whole), copy.deepcopy(whole)
    for index, source in enumerate(whole["sources"]):
        share = chance.uniform(0.05, 0.95)
        one["sources"][index]["emf"] = times(source["emf"], share)
        other["sources"][index]["emf"] = times(source["emf"], 1 - share)
    alone, beside = solved(plan_of(one)).load_volts, solved(plan_of(other)).load_volts
    assert close({name: alone[name] + beside[name] for name in alone}, solved(plan_of(whole)).load_volts)


@quick
@given(drafts(CURRENTS), st.randoms(use_true_random=False))
def test_a_current_drawn_here_lowers_there_as_there_here(draft: Draft, chance: random.Random) -> None:
    """Reciprocity of a network of resistances (Lorentz)."""
    plan = plan_of(draft)
    here, there = chance.sample(plan.point_names, 2)
    volts = {at: solved(plan_of(with_ampere_at(draft, at))) for at in (here, there)}
    before = solved(plan)
    assume(before.state.solved and all(found.state.solved for found in volts.values()))
    pins = before.circuit.pins
    whole = [
        part for part in before.circuit.parts if {pins[point, pole] for point in (here, there) for pole in "+-"} <= part
    ]
    assume(whole)
    fall_here = before.volts(here) - volts[there].volts(here)
    fall_there = before.volts(there) - volts[here].volts(there)
    assert fall_here == pytest.approx(fall_there, abs=1e-9)


def with_ampere_at(draft: Draft, point: str) -> Draft:
    """The draft with one ampere more drawn at a point."""
    result = copy.deepcopy(draft)
    result["loads"].append({"name": "one ampere", "at": point, "current": "1 A"})
    if "loads" in result["cases"][0]:
        result["cases"][0]["loads"]["one ampere"] = 1.0
    return result


# Symmetries -----------------------------------------------------------------------------------------------------


def same(one: Solved, other: Solved, **factors: float) -> bool:
    """Whether two solutions agree in all that is named by the plan; factors scale the other's volts and amps."""
    assert one.state.solved == other.state.solved
    if not one.state.solved:
        return math.isclose(one.state.share_held, other.state.share_held, abs_tol=2e-3)
    volts, amps = factors.get("volts", 1.0), factors.get("amps", 1.0)
    return (
        close(one.load_volts, other.load_volts, factor=volts)
        and close(one.load_amps, other.load_amps, factor=amps)
        and close(one.source_amps, other.source_amps, factor=amps)
    )


@quick
@given(drafts(ANYTHING), st.sampled_from([0.5, 2.0, 3.0]))
def test_volts_and_amps_scale_together(draft: Draft, factor: float) -> None:
    """With every voltage and current times k and every power times k², the same network gives k times the answer."""
    volts = {"emf", "volts", "ceiling", "nominal", "rated_volts", "drop", "vmp", "voc"}
    amps, watts = {"amps", "current", "short_circuit", "imp", "isc"}, {"power", "standby"}

    def scaled(table: str, key: str, value: object) -> object:
        power = 1 if key in volts | amps else 2 if key in watts else 0
        return times(str(value), factor**power) if power and table in ("sources", "loads", "devices") else value

    larger = changed(draft, scaled)
    larger["plan"]["nominal"] = times(draft["plan"]["nominal"], factor)
    assert same(solved(plan_of(larger)), solved(plan_of(draft)), volts=factor, amps=factor)


@quick
@given(drafts(replace(ANYTHING, diodes=0.0, arrays=0.0)), st.sampled_from([0.5, 2.0, 3.0]))
def test_longer_cables_with_smaller_loads_keep_the_volts(draft: Draft, factor: float) -> None:
    """With every resistance times k and every current and power over k, volts stay and currents are over k.

    Left out is what has a resistance of its own that no plan states: diodes that leak, the controllers of arrays.
    """
    ohms = {"resistance", "joint_resistance", "return_bond", "length"}
    amps = {"amps", "current", "short_circuit", "power", "standby"}

    def scaled(table: str, key: str, value: object) -> object:
        return times(str(value), factor if key in ohms else 1 / factor) if key in ohms | amps else value

    larger = changed(draft, scaled)
    larger["plan"]["chassis_bond"] = times(draft["plan"]["chassis_bond"], factor)
    assert same(solved(plan_of(larger)), solved(plan_of(draft)), amps=1 / factor)


@quick
@given(drafts(ANYTHING), st.randoms(use_true_random=False))
def test_names_and_order_do_not_matter(draft: Draft, chance: random.Random) -> None:
    points = list(plan_of(draft).point_names)
    names = dict(
        zip(points, chance.sample([f"Punkt {index}" for index in range(len(points))], len(points)), strict=True)
    )
    places = {"at", "from", "to"}
    other = changed(
        draft,
        lambda table, key, value: (
            names.get(value, value) if key in places or (table, key) == ("points", "name") else value
        ),
    )
    for table in ("points", "sources", "runs", "devices", "loads"):
        chance.shuffle(other[table])
    for one in (draft, other):
        one["plan"]["reference"] = draft["sources"][0]["name"]
    assert same(solved(plan_of(other)), solved(plan_of(draft)))


@quick
@given(drafts(ANYTHING), st.randoms(use_true_random=False))
def test_a_run_drawn_the_other_way_round_only_turns_its_current(draft: Draft, chance: random.Random) -> None:
    either_way = [index for index, run in enumerate(draft["runs"]) if run.get("return") != "chassis"]
    assume(either_way)
    turned = chance.choice(either_way)
    other = copy.deepcopy(draft)
    run = other["runs"][turned]
    run["from"], run["to"] = run["to"], run["from"]
    before, after = solved(plan_of(draft)), solved(plan_of(other))
    assert same(after, before)
    if before.state.solved:
        sign = {True: -1.0, False: 1.0}
        expected = {key: sign[key[0] == run["name"]] * amps for key, amps in before.run_amps.items()}
        assert after.run_amps == pytest.approx(expected, abs=1e-6)


@quick
@given(drafts(replace(ANYTHING, extra_batteries=0.0, chargers=0.0, solar=0.0, converters=0.0)))
def test_twin_branches_see_the_same_volts(draft: Draft) -> None:
    """Everything beyond the source's point is there twice: by symmetry both twins are alike."""
    twins = copy.deepcopy(draft)
    stays = {"p0", "chassis"}
    for table in ("points", "runs", "devices", "loads"):
        for row in draft[table]:
            if row["name"] in stays:
                continue
            beside = {
                key: f"{row[key]} twin" for key in ("name", "from", "to", "at") if key in row and row[key] not in stays
            }
            twins[table].append({**row, **beside})
    for states in (twins["cases"][0]["devices"], twins["cases"][0].get("loads", {})):
        states.update({f"{name} twin": state for name, state in list(states.items())})
    twins["cases"][0]["surge"] = [
        twin for name in draft["cases"][0].get("surge", []) for twin in (name, f"{name} twin")
    ]
    found = solved(plan_of(twins))
    assume(found.state.solved)
    volts = found.load_volts
    originals = {name: volts[name] for name in volts if not name.endswith(" twin")}
    assert close({name: volts[f"{name} twin"] for name in originals}, originals)


@settings(deadline=None, max_examples=30)
@given(st.integers(0, 10_000))
def test_solving_twice_gives_the_same_bits(seed: int) -> None:
    plan = plan_of(random_draft(random.Random(seed)))
    assert np.array_equal(solved(plan).state.volts, solved(plan).state.volts, equal_nan=True)
