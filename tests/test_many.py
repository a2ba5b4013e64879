"""Many cases at once agree with the same cases one by one, and keep the right solution."""

import numpy as np
import pytest

from farvolt import many, network, operating, planfile, rulebook, solve
from farvolt.operating import Operating

BATTERY = '[[sources]]\nname = "bank"\nkind = "battery"\nat = "bank"\nemf = "25.6 V"\nresistance = "5 mohm"\n'
CHARGER = '[[sources]]\nname = "charger"\nkind = "charger"\nat = "bank"\nvolts = "28.8 V"\namps = "30 A"\n'


def chain(sources: str, loads: int, watts: float) -> str:
    """A chain of runs with a constant-power, a constant-current or a resistance load at every point."""
    ratings = (f'power = "{watts} W"', f'current = "{watts / 24:.4f} A"', f'resistance = "{576 / watts:.4f} ohm"')
    text = f'format = 1\n[plan]\nnominal = "24 V"\n{sources}'
    for i in range(loads):
        start = "bank" if i % 5 == 0 else f"p{i - 1}"
        text += f'[[runs]]\nname = "r{i}"\nfrom = "{start}"\nto = "p{i}"\nlength = "{2 + i % 3} m"\nsize = "4 mm2"\n'
        text += f'[[loads]]\nname = "l{i}"\nat = "p{i}"\n{ratings[i % 3]}\n'
    return text + '[[cases]]\nname = "Everything on"\n'


def ready(text: str) -> tuple[network.Network, Operating, np.ndarray]:
    """Network, its one case with everything on, and conductors at 20 °C."""
    plan = planfile.parse(text)
    net = network.build(plan, rulebook.load("small-craft-iso"))
    return net, operating.operating(net, plan.checked_cases[0]), np.ones(len(plan.runs))


def compare(text: str, shares: np.ndarray) -> many.Many:
    """Solve together and one by one; node volts agree to 1e-9 V in every case that holds."""
    net, condition, factors = ready(text)
    found = many.solve_many(net, condition, factors, shares)
    for case, share in enumerate(shares):
        alone = solve.solve(net, many.scaled(condition, share), factors)
        assert found.solved[case] == alone.solved
        if alone.solved:
            assert np.allclose(found.volts[case], alone.volts, rtol=0, atol=1e-9, equal_nan=True)
            assert found.imbalance_A[case] <= 1e-9 or found.imbalance_A[case] <= 10 * max(alone.imbalance_A, 1e-9)
    return found


def test_linear_sources_are_solved_together() -> None:
    """Batteries only: every case is accepted by the contraction and agrees with the single solution."""
    shares = np.random.default_rng(3).uniform(0, 2, (40, 20))
    assert compare(chain(BATTERY, 20, 30.0), shares).together.all()


def test_cases_near_giving_way_go_one_by_one_and_still_agree() -> None:
    """Rising shares of a heavy load: the contraction fails before the case gives way, never after."""
    shares = np.linspace(0, 8, 25)[:, None] * np.ones(10)
    found = compare(chain(BATTERY, 10, 200.0), shares)
    assert found.together.any()
    assert not found.solved.all()
    assert not np.any(found.together & ~found.solved)


def test_limited_sources_are_solved_one_by_one() -> None:
    """A charger's limit is no straight line: nothing is solved together, everything agrees."""
    found = compare(chain(BATTERY + CHARGER, 12, 60.0), np.random.default_rng(5).uniform(0, 2, (12, 12)))
    assert not found.together.any()
    assert found.solved.all()


@pytest.mark.parametrize("rows", [1, 499, 500, 501])
def test_the_number_of_cases_does_not_matter(rows: int) -> None:
    """Chunks of cases meet without a seam."""
    net, condition, factors = ready(chain(BATTERY, 6, 30.0))
    shares = np.linspace(0.1, 1.9, rows)[:, None] * np.ones(6)
    found = many.solve_many(net, condition, factors, shares)
    assert found.solved.all()
    last = solve.solve(net, many.scaled(condition, shares[-1]), factors)
    assert np.allclose(found.volts[-1], last.volts, rtol=0, atol=1e-9, equal_nan=True)
