"""Many cases at once agree with the same cases one by one, and keep the right solution."""

import random
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt import examples, many, network, operating, planfile, rulebook, solve
from farvolt.equations import Equations
from farvolt.many import Changes, Many, shared_demand, solve_many, solve_together
from farvolt.network import Network
from farvolt.operating import Operating
from farvolt.plan import Plan
from strategies import LINEAR, Draft, Wishes, drafts, plan_of, random_draft

BATTERY = '[[sources]]\nname = "bank"\nkind = "battery"\nat = "bank"\nemf = "25.6 V"\nresistance = "5 mohm"\n'
CHARGER = '[[sources]]\nname = "charger"\nkind = "charger"\nat = "bank"\nvolts = "28.8 V"\namps = "30 A"\n'

AGREE_V = 1e-9


def chain(sources: str, loads: int, watts: float) -> Plan:
    """A chain of runs with a constant-power, a constant-current or a resistance load at every point."""
    ratings = (f'power = "{watts} W"', f'current = "{watts / 24:.4f} A"', f'resistance = "{576 / watts:.4f} ohm"')
    text = f'format = 1\n[plan]\nnominal = "24 V"\n{sources}'
    for i in range(loads):
        start = "bank" if i % 5 == 0 else f"p{i - 1}"
        text += f'[[runs]]\nname = "r{i}"\nfrom = "{start}"\nto = "p{i}"\nlength = "{2 + i % 3} m"\nsize = "4 mm2"\n'
        text += f'[[loads]]\nname = "l{i}"\nat = "p{i}"\n{ratings[i % 3]}\n'
    return planfile.parse(text + '[[cases]]\nname = "all"\nloads = "all"\n')


def ready(plan: Plan, case: int = 0) -> tuple[Network, Operating, np.ndarray]:
    """Network, one of its cases, and conductors at 20 °C."""
    net = network.build(plan, rulebook.load("small-craft-iso"))
    return net, operating.operating(net, plan.checked_cases[case]), np.ones(len(plan.runs))


def scattered(condition: Operating, cases: int, seed: int = 1) -> dict[str, np.ndarray]:
    """Shares from 0 to 1.5, voltages within 3 %, resistances within 10 %, sun from none to full."""
    rng, sources = np.random.default_rng(seed), len(condition.volts)
    changes = shared_demand(condition, rng.uniform(0, 1.5, (cases, len(condition.load_a))))
    changes["volts"] = condition.volts * np.where(condition.volts > 0, rng.uniform(0.97, 1.03, (cases, sources)), 1)
    changes["ohm"] = condition.ohm * rng.uniform(0.9, 1.1, (cases, sources))
    changes["power"] = condition.power * rng.uniform(0, 1, (cases, 1))
    return changes


def assert_same_as_alone(net: Network, condition: Operating, factors: np.ndarray, changes: Changes) -> Many:
    """Every case holds or gives way as it does alone, at the same voltages and currents."""
    found = solve_many(net, condition, factors, changes)
    for case in range(len(found)):
        alone = solve.solve(net, replace(condition, **{name: rows[case] for name, rows in changes.items()}), factors)
        state = found.state(case)
        assert (state.solved, state.share_held, state.weakest) == (alone.solved, alone.share_held, alone.weakest)
        assert state.volts == pytest.approx(alone.volts, rel=0, abs=AGREE_V, nan_ok=True)
        # A source's current is its voltage's difference over a resistance that may be a third of a milliohm.
        for name in ("delivered_A", "drawn_A", "branch_A"):
            assert getattr(state, name) == pytest.approx(getattr(alone, name), rel=1e-9, abs=1e-6)
        assert state.power_in_W == pytest.approx(alone.power_in_W, rel=1e-8, abs=1e-5)
        assert state.imbalance_A <= _allowed_A(net, condition, factors, alone.volts)
    return found


def _allowed_A(net: Network, condition: Operating, factors: np.ndarray, volts: np.ndarray) -> float:
    """What the certificate allows, with a tenth more because resistances of sources are within a tenth."""
    equations = Equations(net, condition, factors, solve.fed(net, condition))
    return 1.1 * float(equations.allowed(np.nan_to_num(volts)).max())


@settings(deadline=None, max_examples=25)
@given(drafts(Wishes(chargers=0.7, solar=0.5, diodes=0.3)) | drafts(LINEAR) | drafts(Wishes(load_share=3.0)))
def test_random_plans_agree_with_each_case_alone(draft: Draft) -> None:
    net, condition, factors = ready(plan_of(draft))
    assert_same_as_alone(net, condition, factors, scattered(condition, 12))


def test_cases_about_to_give_way_agree() -> None:
    """Rising shares of heavy loads: some cases hold, some give way, and each as it does alone."""
    held, together = [], []
    for seed in range(8):
        draft = random_draft(random.Random(seed), Wishes(load_share=2.0, converters=0.0))
        net, condition, factors = ready(plan_of(draft))
        changes = shared_demand(condition, np.linspace(0, 8, 25)[:, None] * np.ones(len(condition.load_a)))
        found = assert_same_as_alone(net, condition, factors, changes)
        assert not np.any(found.together & ~found.solved)
        held.append(found.solved.mean())
        together.append(found.together.mean())
    assert 0.2 < np.mean(held) < 0.9
    assert np.mean(together) > 0.75 * np.mean(held)


def test_most_cases_of_random_plans_are_solved_together() -> None:
    """Of plans without a converter at work; else being right would be easy."""
    shares = []
    for seed in range(30):
        net, condition, factors = ready(plan_of(random_draft(random.Random(seed), Wishes(converters=0.0))))
        if not any(condition.source_on[port] for port, *_ in condition.converters):
            shares.append(solve_many(net, condition, factors, scattered(condition, 20)).together.mean())
    assert np.mean(shares) > 0.8


def test_linear_sources_are_solved_together() -> None:
    net, condition, factors = ready(chain(BATTERY, 20, 30.0))
    changes = shared_demand(condition, np.random.default_rng(3).uniform(0, 2, (40, 20)))
    assert assert_same_as_alone(net, condition, factors, changes).together.all()


def test_a_charger_passes_from_its_voltage_to_its_limit_and_is_still_solved_together() -> None:
    net, condition, factors = ready(chain(BATTERY + CHARGER, 12, 60.0))
    changes = shared_demand(condition, np.linspace(2, 0, 12)[:, None] * np.ones(12))
    changes["volts"] = np.stack([np.linspace(25.0, 28.75, 12), np.full(12, 28.8)], axis=1)
    found = assert_same_as_alone(net, condition, factors, changes)
    assert found.together.all()
    assert found.delivered_A[:, 1].min() < 29 < 29.9 < found.delivered_A[:, 1].max()


def test_a_full_battery_under_a_charger_joins_in_where_the_charger_is_at_its_limit() -> None:
    """Cases on either side: with the charger at its voltage and the bank idle, and with both at work."""
    plan = chain(BATTERY + CHARGER, 12, 100.0)
    full = plan.checked_cases[0].model_copy(update={"sources": {"bank": planfile_state("full")}})
    net = network.build(plan, rulebook.load("small-craft-iso"))
    condition, factors = operating.operating(net, full), np.ones(len(plan.runs))
    changes = shared_demand(condition, np.linspace(0, 1.5, 20)[:, None] * np.ones(12))
    found = assert_same_as_alone(net, condition, factors, changes)
    assert (found.delivered_A[:, 0] == 0).any()
    assert (found.delivered_A[:, 0] > 1).any()


def planfile_state(state: str) -> object:
    """The state of a source as a case of a plan holds it."""
    text = 'format = 1\n[plan]\nnominal = "24 V"\n' + BATTERY + CHARGER
    text += f'[[cases]]\nname = "one"\nloads = "none"\nsources = {{ "bank" = "{state}" }}\n'
    return planfile.parse(text).checked_cases[0].sources["bank"]


@pytest.mark.parametrize("rows", [1, 7, 8, 499, 501])
def test_the_number_of_cases_does_not_matter(rows: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Chunks of cases meet without a seam."""
    monkeypatch.setattr(many, "_CHUNK", 1000)
    net, condition, factors = ready(chain(BATTERY, 6, 30.0))
    shares = np.linspace(0.1, 1.9, rows)[:, None] * np.ones(6)
    found = solve_many(net, condition, factors, shared_demand(condition, shares))
    assert found.solved.all()
    last = assert_same_as_alone(net, condition, factors, shared_demand(condition, shares[-1:]))
    assert np.allclose(found.volts[-1], last.volts[0], rtol=0, atol=AGREE_V, equal_nan=True)


def test_sources_and_devices_may_be_on_in_some_cases_only() -> None:
    """The van's hours: each charger on in some, the bank switch open in some."""
    net, condition, factors = ready(planfile.parse(examples.text("instrument-repair-van")), 1)
    rng = np.random.default_rng(4)
    changes = scattered(condition, 24)
    changes["source_on"] = np.append(np.ones((24, 1), dtype=bool), rng.random((24, 3)) < 0.5, axis=1)
    open_switch = np.tile(condition.branch_on, (24, 1))
    open_switch[::5, np.flatnonzero(net.device == 0)] = False
    assert_same_as_alone(net, condition, factors, changes | {"branch_on": open_switch})


@settings(deadline=None, max_examples=15)
@given(drafts(Wishes()), st.integers(2, 24))
def test_conditions_of_every_kind_agree_with_each_alone(draft: Draft, count: int) -> None:
    """Lists of conditions are grouped by what they feed; the answers come back in their order."""
    net, condition, factors = ready(plan_of(draft))
    changes = scattered(condition, count)
    conditions = [replace(condition, **{name: rows[case] for name, rows in changes.items()}) for case in range(count)]
    if len(condition.source_on) > 1:
        off = condition.source_on.copy()
        off[1] = False
        conditions[1::2] = [replace(one, source_on=off) for one in conditions[1::2]]
    for one, state in zip(conditions, solve_together(net, conditions, factors), strict=True):
        alone = solve.solve(net, one, factors)
        assert (state.solved, state.share_held) == (alone.solved, alone.share_held)
        assert state.volts == pytest.approx(alone.volts, rel=0, abs=AGREE_V, nan_ok=True)
