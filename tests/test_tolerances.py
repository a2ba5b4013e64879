"""Voltages under tolerances: closed forms, all corners by brute force, and plans of which nothing may be promised."""

import random
from itertools import product

import numpy as np
import pytest
from hypothesis import assume, given, settings

from farvolt import planfile, rulebook
from farvolt.context import Context
from farvolt.plan import Plan
from farvolt.proof import Proof, proof
from farvolt.study import build_context
from farvolt.swings import swings
from farvolt.tolerances import CaseSpread, LoadSpread, case_spread, spread, usual_samples
from farvolt.variants import solve_variant
from strategies import LINEAR, Draft, Wishes, drafts, plan_of, random_draft

RADIAL = Wishes(
    points=(3, 4), loops=0, behaviours=("power", "current"), extra_batteries=0.0, chargers=0.0, charger_only=0.0,
    limited_sources=False, solar=0.0, converters=0.0, diodes=0.0, devices=0.3, open_devices=0.0, chassis=0.0,
)  # fmt: skip

quick = settings(deadline=None, max_examples=15)


def context(plan: Plan) -> Context:
    return build_context(plan, rulebook.load("small-craft-iso"))


def read(*tables: str, tolerances: str = "", resistance: str = "10 mohm") -> Context:
    """A 12 V plan with a bank of 12.8 V at "bank", more tables, and everything on unless they state a case."""
    head = 'format = 1\n[plan]\nnominal = "12 V"\nambient = "20 degC"\n'
    if tolerances:
        head += f"[tolerances]\n{tolerances}\n"
    bank = f'[[sources]]\nname = "bank"\nkind = "battery"\nat = "bank"\nemf = "12.8 V"\nresistance = "{resistance}"\n'
    body = "".join(tables)
    case = "" if "[[cases]]" in body else '[[cases]]\nname = "everything on"\n'
    return context(planfile.parse(head + bank + body + case))


def run(start: str, end: str, more: str = "", name: str = "") -> str:
    """10 m of 6 mm²: 3.30 mΩ/m at 20 °C (IEC 60228, class 5), so 33 mΩ in each conductor."""
    name = name or f"{start} {end}"
    return (
        f'[[runs]]\nname = "{name}"\nfrom = "{start}"\nto = "{end}"\nlength = "10 m"\nsize = "6 mm2"\n'
        f'strand = "flexible"\ninsulation = "70 degC"\n{more}\n'
    )


def load(at: str, rated: str) -> str:
    return f'[[loads]]\nname = "{at}"\nat = "{at}"\n{rated}\n'


def only(found: CaseSpread, name: str) -> LoadSpread:
    return next(one for one in found.loads if one.name == name)


def reach(context: Context, case: int = 0) -> Proof:
    found = context.cases[case].solutions["plan"]
    return proof(found.network, found.condition, found.supply)


# Guaranteed ------------------------------------------------------------------------------------------------------


def test_one_run_with_a_constant_current_by_hand() -> None:
    """V = E(1 ± e) − I(1 ± i)(r + 2(R20(1 ± l)(1 + α ΔT) + joints)): 10 A, 33 mΩ a conductor, 2 joints of 0.2 mΩ.

    Worst: 12.8·0.98 − 11·(0.010 + 2(0.033·1.2·(1 + 0.00393·50) + 0.0004·5)); best at 20 °C with everything less.
    """
    tolerances = 'length = "20 %"\njoints = 5\nsource_volts = "2 %"\nloads = "10 %"'
    whole = read(run("bank", "lamp", "joints = 2"), load("lamp", 'current = "10 A"'), tolerances=tolerances)
    found = case_spread(whole, 0, 10, 0)
    assert found.guaranteed
    lamp = only(found, "lamp")
    worst = 12.8 * 0.98 - 11 * (0.010 + 2 * (0.033 * 1.2 * (1 + 0.00393 * 50) + 0.0004 * 5))
    best = 12.8 * 1.02 - 9 * (0.010 + 2 * (0.033 * 0.8 + 0.0004))
    assert lamp.lowest_V == pytest.approx(worst, abs=1e-9)
    assert lamp.highest_V == pytest.approx(best, abs=1e-9)


@quick
@given(drafts(RADIAL))
def test_no_corner_of_a_radial_plan_lies_beyond_the_guaranteed_bounds(draft: Draft) -> None:
    """All corners of a small plan solved: the lowest and the highest are the bounds, load by load."""
    whole = context(plan_of(draft))
    within = spread(whole, whole.cases[0])
    assume(len(within.factors) <= 12)
    found = case_spread(whole, 0, 10, 0)
    assume(found.guaranteed)
    corners = np.array(list(product(*((one.lowers, one.raises) for one in within.factors))))
    volts = within.solve(corners).load_volts
    names = [one.name for one in whole.plan.loads]
    for one in found.loads:
        at = volts[:, names.index(one.name)]
        assert at.min() == pytest.approx(one.lowest_V, abs=1e-7)
        assert at.max() == pytest.approx(one.highest_V, abs=1e-7)


@quick
@given(drafts(RADIAL))
def test_no_sample_of_a_radial_plan_lies_beyond_the_guaranteed_bounds(draft: Draft) -> None:
    """300 samples between the ends."""
    whole = context(plan_of(draft))
    found, within = case_spread(whole, 0, 10, 0), spread(whole, whole.cases[0])
    assume(found.guaranteed)
    shares = np.random.default_rng(1).uniform(size=(300, len(within.factors)))
    answers = within.solve(within.lowers + shares * (within.raises - within.lowers))
    assert answers.solved.all()
    names = [one.name for one in whole.plan.loads]
    for one in found.loads:
        at = answers.load_volts[:, names.index(one.name)]
        assert one.lowest_V is not None
        assert one.highest_V is not None
        assert one.lowest_V - 1e-7 <= at.min()
        assert at.max() <= one.highest_V + 1e-7


def test_radial_plans_of_power_and_current_are_guaranteed() -> None:
    """The two properties above are not empty: most such plans are proven."""
    found = [case_spread(context(plan_of(random_draft(random.Random(seed), RADIAL))), 0, 5, 0) for seed in range(12)]
    assert sum(one.guaranteed for one in found) >= 6


# Not guaranteed --------------------------------------------------------------------------------------------------


def test_a_thicker_branch_to_a_heater_lowers_its_neighbour() -> None:
    """A shared feeder, a heater of 0.2 Ω on a long branch and a lamp: a shorter branch takes more of the feeder."""
    whole = read(
        run("bank", "block"), run("block", "heater", name="branch"), run("block", "lamp"),
        load("heater", 'resistance = "0.2 ohm"'), load("lamp", 'current = "1 A"'),
    )  # fmt: skip
    within = spread(whole, whole.cases[0])
    middle = (within.lowers + within.raises) / 2
    at = next(i for i, one in enumerate(within.factors) if (one.group, one.name) == ("length", "branch"))
    short, long = middle.copy(), middle.copy()
    short[at], long[at] = within.raises[at], within.lowers[at]
    lamp = within.solve(np.array([short, long])).load_volts[:, 1]
    assert lamp[0] < lamp[1] - 0.01
    assert reach(whole).reach == "none"
    assert "heater" in reach(whole).because
    assert not case_spread(whole, 0, 20, 0).guaranteed


def test_a_larger_load_may_raise_its_neighbour_through_a_heater() -> None:
    """The motor shares only its feed with a heater, the lamp only its return: the motor takes volts from the heater,
    which then drops less in the lamp's return. So nothing is proven in loads either where a heater is on."""
    feed, back = 'carries = "feed"', 'carries = "return"'
    whole = read(
        run("bank", "block", feed, "shared feed"), run("block", "motor", feed), run("block", "heater", feed),
        run("bank", "bar", back, "shared return"), run("bar", "lamp", back), run("bar", "heater", back, "heater back"),
        run("bank", "lamp", feed), run("bank", "motor", back),
        load("heater", 'resistance = "0.5 ohm"'), load("lamp", 'current = "1 A"'), load("motor", 'power = "60 W"'),
        resistance = "0.1 mohm",
    )  # fmt: skip
    within = spread(whole, whole.cases[0])
    middle = (within.lowers + within.raises) / 2
    at = next(i for i, one in enumerate(within.factors) if (one.group, one.name) == ("loads", "motor"))
    small, large = middle.copy(), middle.copy()
    small[at], large[at] = within.raises[at], within.lowers[at]
    lamp = within.solve(np.array([small, large])).load_volts[:, 1]
    assert lamp[1] > lamp[0] + 5e-4
    assert reach(whole).reach == "none"


RING = (run("bank", "a"), run("a", "b"), run("b", "bank", name="back"))
LAMP = load("b", 'power = "40 W"')
CHARGER = '[[sources]]\nname = "charger"\nkind = "charger"\nat = "b"\nvolts = "14 V"\namps = "5 A"\n'
DIODE = '[[devices]]\nname = "diode"\nkind = "diode"\nfrom = "a"\nto = "b"\ndrop = "0.5 V"\n'
CONVERTER = (
    '[[sources]]\nname = "converter"\nkind = "converter"\nfrom = "a"\nat = "b"\nnominal = "12 V"\nvolts = "13 V"\n'
    'amps = "10 A"\nefficiency = "90 %"\nisolated = true\n'
)


@pytest.mark.parametrize(
    ("tables", "expected", "because"),
    [
        ((run("bank", "b"), LAMP), "all", ""),
        ((*RING, LAMP), "loads", "loop"),
        ((run("bank", "b"), LAMP, CHARGER), "none", "2 sources"),
        ((run("bank", "a"), DIODE, LAMP), "none", "diode"),
        ((run("bank", "a"), CONVERTER, LAMP), "none", "2 sources"),
        ((run("bank", "b"), load("b", 'resistance = "2 ohm"')), "none", "constant resistance"),
    ],
)
def test_how_far_the_proof_reaches(tables: tuple[str, ...], expected: str, because: str) -> None:
    found = reach(read(*tables))
    assert found.reach == expected
    assert because in found.because


def test_a_single_charger_has_a_limit_and_no_proof() -> None:
    text = f'format = 1\n[plan]\nnominal = "12 V"\n{CHARGER}{LAMP}[[cases]]\nname = "on"\n'
    assert reach(context(planfile.parse(text))) == Proof("none", '"charger" has a limit of current or power')


def test_in_a_ring_only_resistances_are_sampled() -> None:
    """Every sample stands at the worst of loads and EMF: none is above what the same resistances give as planned."""
    found = case_spread(read(*RING, LAMP, tolerances='length = "0 %"\njoints = 1\nhottest = "20 degC"'), 0, 5, 0)
    lamp = only(found, "b")
    # Nothing but the ambient is left of the resistances' ranges, so that samples are the two corners themselves.
    assert not found.guaranteed
    assert lamp.lowest_V == pytest.approx(lamp.ends_low_V, abs=1e-9)
    assert lamp.highest_V == pytest.approx(lamp.ends_high_V, abs=1e-9)


def test_where_the_worst_gives_way_nothing_is_guaranteed() -> None:
    """By hand: E²/4R of 12.8 V behind 0.076 Ω is 539 W, and 24 % more resistance brings it below 500 W."""
    whole = read(run("bank", "b"), load("b", 'power = "480 W"'), tolerances='length = "20 %"')
    found = case_spread(whole, 0, 200, 0)
    assert reach(whole).reach == "all"
    assert not found.guaranteed
    assert 0 < found.gave_way < 200
    assert found.ends_share_held < 1
    assert only(found, "b").ends_low_V is None


# Samples ---------------------------------------------------------------------------------------------------------


def test_samples_are_the_same_for_the_same_seed() -> None:
    whole = context(plan_of(random_draft(random.Random(3), LINEAR)))
    once, again, other = (case_spread(whole, 0, 50, seed) for seed in (7, 7, 8))
    assert once == again
    assert not once.guaranteed
    assert once.loads != other.loads


def test_samples_are_exact_solutions() -> None:
    """The lowest of the samples is that of solving each by itself (1 nV), certificate and all."""
    whole = read(*RING, LAMP, CHARGER)
    within, found = spread(whole, whole.cases[0]), case_spread(whole, 0, 40, 5)
    ends = np.minimum(within.lowers, within.raises), np.maximum(within.lowers, within.raises)
    drawn = np.random.default_rng([5, 0]).uniform(*ends, (40, len(within.factors)))
    every = within.variants(drawn)
    states = [solve_variant(within.network, within.condition, within.supply, every, row) for row in range(40)]
    volts = [float(within.load_volts(state)[0]) for state in states]
    assert min(volts) == pytest.approx(only(found, "b").lowest_V, abs=1e-9)
    assert max(volts) == pytest.approx(only(found, "b").highest_V, abs=1e-9)
    assert found.largest_imbalance_A < 1e-9


@pytest.mark.parametrize(("runs", "samples"), [(27, 10_000), (301, 1_000), (5_000, 300)])
def test_large_plans_get_fewer_samples(runs: int, samples: int) -> None:
    assert usual_samples(runs) == samples


# What is uncertain, and what matters -----------------------------------------------------------------------------


def test_what_is_measured_or_off_is_not_uncertain() -> None:
    """A measured run keeps its length and joints; a load that is off and a run without joints have no range."""
    whole = read(
        run("bank", "a", 'resistance = "50 mohm"\njoints = 2'), run("bank", "b", "joints = 1"), run("bank", "c"),
        LAMP, load("c", 'power = "9 W"'), '[[cases]]\nname = "one"\nloads = { "b" = 1.0 }\n',
    )  # fmt: skip
    factors = {(one.group, one.name) for one in spread(whole, whole.cases[0]).factors}
    assert factors == {
        ("temperature", "bank a"), ("length", "bank b"), ("joints", "bank b"), ("temperature", "bank b"),
        ("length", "bank c"), ("temperature", "bank c"), ("source voltage", "bank"), ("loads", "b"),
    }  # fmt: skip


def test_swings_of_one_run_by_hand() -> None:
    """10 A, constant: the EMF's ±1 % is 0.256 V, the load's ±10 % 2 A through 10 mΩ and the run at mid-length and
    45 °C with joints at 3 times, the length's ±10 % 10 A through 20 % of 66 mΩ at 45 °C."""
    whole = read(run("bank", "lamp", "joints = 2"), load("lamp", 'current = "10 A"'))
    found = swings(spread(whole, whole.cases[0]), whole.cases[0].solutions["plan"], 0)
    assert found is not None
    by_group = {one.group: one.swing_V for one in found.groups}
    warm = 1 + 0.00393 * 25
    expected = {
        "source voltage": 0.256,
        "loads": 2 * (0.010 + 0.066 * warm + 2 * 0.0004 * 3),
        "length": 10 * 0.066 * 0.2 * warm,
        "temperature": 10 * 0.066 * 0.00393 * 50,
        "joints": 10 * 2 * 0.0004 * 4,
    }
    assert by_group == pytest.approx(expected, abs=1e-9)
    assert sum(one.share for one in found.groups) == pytest.approx(1)
    assert {(one.group, one.swing_V) for one in found.factors} == {(one.group, one.swing_V) for one in found.groups}
