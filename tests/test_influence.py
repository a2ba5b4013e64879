"""What drives a load's voltage: parts that sum to the drop, gains that agree with solving again."""

import pytest

from farvolt import examples, planfile, rulebook
from farvolt.context import Context
from farvolt.influence import influence
from farvolt.study import build_context


def context(name: str) -> Context:
    plan = planfile.parse(examples.text(name))
    return build_context(plan, rulebook.load(plan.plan.rulebook))


@pytest.mark.parametrize("name", examples.names())
def test_parts_sum_to_the_drop(name: str) -> None:
    """Kirchhoff's voltage law: the drops along the way are the drop of the load."""
    found = 0
    for one in context(name).cases:
        solution = one.solutions["basis"]
        for load in range(len(solution.network.plan.loads)):
            answer = influence(solution, context_rulebook(name), load)
            if answer is not None:
                found += 1
                assert sum(part.drop_V for part in answer.parts) == pytest.approx(answer.drop_V, abs=1e-9)
    assert found > 10


def context_rulebook(name: str) -> rulebook.Rulebook:
    return rulebook.load(planfile.parse(examples.text(name)).plan.rulebook)


@pytest.mark.parametrize("name", examples.names())
def test_gains_agree_with_solving_the_plan_again(name: str) -> None:
    """The adjoint's first-order gain against the exact difference of two solutions (closed check, no table)."""
    whole = context(name)
    solution = whole.cases[0].solutions["basis"]
    tried = 0
    for load in range(0, len(whole.plan.loads), 3):
        answer = influence(solution, whole.rulebook, load)
        for gain in answer.gains[:3] if answer else ():
            if abs(gain.gain_V) < 1e-3:
                continue
            again = whole.resolve({gain.run: gain.size}, 0, "basis")
            exact = float(again.load_volts[load] - solution.load_volts[load])
            assert gain.gain_V == pytest.approx(exact, rel=0.02)
            tried += 1
    assert tried >= 3


def test_a_series_cable_with_a_constant_current_gains_what_its_resistance_loses() -> None:
    """By hand: 10 A through 10 m of 6 mm² (3.30 mΩ/m, IEC 60228 class 5) both ways drops 0.66 V; 10 mm²
    (1.91 mΩ/m) 0.382 V; the gain is 0.278 V, and exact because the current stays."""
    plan = planfile.parse(
        'format = 1\n[plan]\nnominal = "12 V"\n'
        '[[sources]]\nname = "bank"\nkind = "battery"\nat = "bank"\nemf = "12.8 V"\nresistance = "10 mohm"\n'
        '[[runs]]\nname = "feed"\nfrom = "bank"\nto = "lamp"\nlength = "10 m"\nsize = "6 mm2"\n'
        '[[loads]]\nname = "lamp"\nat = "lamp"\ncurrent = "10 A"\n'
    )
    book = rulebook.load("small-craft-iso")
    answer = influence(build_context(plan, book).cases[0].solutions["basis"], book, 0)
    assert answer is not None
    assert answer.drop_V == pytest.approx(0.66, abs=1e-9)
    assert (answer.gains[0].run, answer.gains[0].size.name) == ("feed", "10 mm2")
    assert answer.gains[0].gain_V == pytest.approx(0.278, abs=1e-9)
