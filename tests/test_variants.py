"""Variants of a case solved together agree with the same ones alone; the elimination agrees with a library's."""

import random

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import network, operating, planfile, rulebook, solve, variants
from farvolt.elimination import Elimination
from farvolt.fed import Fed
from farvolt.operating import Operating
from farvolt.plan import Plan
from farvolt.tolerances import loads_on
from farvolt.variants import Variants, solve_variant, solve_variants
from strategies import LINEAR, Draft, Wishes, drafts, plan_of, random_draft

quick = settings(deadline=None, max_examples=25)

ALL_KINDS = Wishes(chargers=0.7, solar=0.6, converters=0.6, diodes=0.4)
HEAVY = Wishes(load_share=3.0)


def ready(plan: Plan) -> tuple[network.Network, Operating, Fed]:
    """Network, the first case and what it feeds."""
    net = network.build(plan, rulebook.load("small-craft-iso"))
    condition = operating.operating(net, plan.checked_cases[0])
    return net, condition, solve.fed(net, condition)


def scattered(net: network.Network, condition: Operating, count: int, seed: int = 1) -> Variants:
    """Resistances from 0.8 to 1.5 times, batteries and chargers within 2 %, demands from 0.7 to 1.3 times."""
    rng = np.random.default_rng(seed)
    ohm = net.fixed_ohm + net.cable_ohm_20
    volts = np.tile(condition.volts, (count, 1))
    own = len(net.plan.sources)
    volts[:, :own] *= rng.uniform(0.98, 1.02, (count, own))
    demand = rng.uniform(0.7, 1.3, (count, len(condition.load_a)))
    return Variants(ohm * rng.uniform(0.8, 1.5, (count, len(ohm))), volts, demand)


def assert_same_as_alone(draft: Draft, count: int = 5) -> variants.Answers:
    """Loads that draw are within 1 µV of `solve.solve`, which gives way in the same variants.

    Where nothing draws, the law of a source that idles holds at any voltage above its own, so none is compared.
    """
    net, condition, supply = ready(plan_of(draft))
    drawing = loads_on(condition, supply, len(net.plan.loads))
    every = scattered(net, condition, count)
    found = solve_variants(net, condition, supply, every)
    for row in range(count):
        state = solve_variant(net, condition, supply, every, row)
        assert found.solved[row] == state.solved
        assert found.share_held[row] == state.share_held
        if state.solved:
            alone = state.volts[condition.load_a[drawing]] - state.volts[condition.load_b[drawing]]
            assert found.load_volts[row, drawing] == pytest.approx(alone, abs=1e-6)
    return found


@quick
@given(drafts(ALL_KINDS) | drafts(LINEAR))
def test_together_is_the_same_as_alone(draft: Draft) -> None:
    """Meshes, chargers at their limit, full batteries, solar, converters, diodes."""
    assert_same_as_alone(draft)


@quick
@given(drafts(HEAVY))
def test_variants_that_give_way_are_told_from_those_that_hold(draft: Draft) -> None:
    """Loads near or beyond what the network can deliver."""
    assert_same_as_alone(draft)


def test_most_variants_of_ordinary_plans_are_solved_together() -> None:
    """Only what needs the smallest steps goes alone: of 20 random plans of every kind, less than one variant in ten."""
    together = [assert_same_as_alone(random_draft(random.Random(seed), ALL_KINDS), 4).together for seed in range(20)]
    assert np.mean(together) > 0.9


def test_the_size_of_a_batch_does_not_matter(monkeypatch: pytest.MonkeyPatch) -> None:
    """Batches meet without a seam, a last one of another size included."""
    net, condition, supply = ready(plan_of(random_draft(random.Random(4), LINEAR)))
    every = scattered(net, condition, 53)
    whole = solve_variants(net, condition, supply, every)
    monkeypatch.setattr(variants, "_CHUNK", 20)
    parts = solve_variants(net, condition, supply, every)
    assert whole.together.all()
    assert parts.together.all()
    assert parts.load_volts == pytest.approx(whole.load_volts, abs=1e-9)


def test_solar_arrays_with_runs_of_their_own() -> None:
    """What an array gives at its controller depends on the resistance on its way, so it is each variant's own."""
    plan = planfile.parse(
        'format = 1\n[plan]\nnominal = "12 V"\n'
        '[[sources]]\nname = "bank"\nkind = "battery"\nat = "bank"\nemf = "12.8 V"\nresistance = "10 mohm"\n'
        '[[sources]]\nname = "roof"\nkind = "solar"\nat = "bank"\nfrom = "in"\npower = "200 W"\nceiling = "14.4 V"\n'
        'array = { at = "roof", voc = "24 V", isc = "10 A", vmp = "20 V", imp = "9 A" }\n'
        '[[runs]]\nname = "down"\nfrom = "roof"\nto = "in"\nlength = "10 m"\nsize = "4 mm2"\n'
        '[[runs]]\nname = "feed"\nfrom = "bank"\nto = "lamp"\nlength = "10 m"\nsize = "6 mm2"\n'
        '[[loads]]\nname = "lamp"\nat = "lamp"\npower = "60 W"\n'
    )
    net, condition, supply = ready(plan)
    every = scattered(net, condition, 6)
    found = solve_variants(net, condition, supply, every)
    assert found.together.all()
    for row in range(6):
        state = solve_variant(net, condition, supply, every, row)
        alone = state.volts[condition.load_a[0]] - state.volts[condition.load_b[0]]
        assert found.load_volts[row, 0] == pytest.approx(alone, abs=1e-9)
    assert np.ptp(found.load_volts[:, 0]) > 0.01


@quick
@given(st.integers(0, 10**6), st.integers(1, 25), st.integers(0, 60))
def test_elimination_agrees_with_a_dense_solver(seed: int, size: int, links: int) -> None:
    """Random grounded networks, some with a negative conductance: solutions and definiteness by LAPACK."""
    rng = np.random.default_rng(seed)
    a, b = rng.integers(0, size, (2, links))
    ends = np.arange(size)
    rows, columns = np.concatenate([a, b, a, b, ends]), np.concatenate([a, b, b, a, ends])
    matrices = np.zeros((3, size, size))
    elimination = Elimination(size, rows, columns)
    entries = np.zeros((elimination.places, 3))
    for copy in range(3):
        g, ground = rng.uniform(0.1, 10, links), rng.uniform(0.01, 1, size)
        ground[0] = rng.uniform(-3, 1)
        values = np.concatenate([g, g, -g, -g, ground])
        np.add.at(matrices[copy], (rows, columns), values)
        np.add.at(entries[:, copy], elimination.place(rows, columns), values)
    right = rng.normal(size=(size, 3))
    definite = np.linalg.eigvalsh(matrices)[:, 0]
    solution, positive = elimination.solve(entries, right.copy())
    for copy in np.flatnonzero(np.abs(definite) > 1e-6):
        assert positive[copy] == (definite[copy] > 0)
        if positive[copy]:
            assert matrices[copy] @ solution[:, copy] == pytest.approx(right[:, copy], abs=1e-6)
