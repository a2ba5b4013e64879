"""The solver against ngspice on random plans of every kind: how many agree, and the largest difference.

    python tests/bench/against_spice.py [PLANS]

ngspice shares no line with the solver; its netlist comes from `circuit`, a second account of the plan. Ends with 1
where a node's volts differ by more than a microvolt, or where a case holds in one program and gives way in the other.
"""

import os
import random
import sys
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from circuit import Circuit, circuit_of
from farvolt import network, operating, rulebook
from farvolt.solve import State, solve
from spice import Answer, answer, largest_difference_V
from strategies import ANYTHING, Wishes, plan_of, random_draft

AGREE_V = 1e-6
QUICK_RISE_S, SLOW_RISE_S, SLOWEST_RISE_S = 2.0, 40.0, 400.0
PLANS = 2000

KINDS: dict[str, tuple[Wishes, int]] = {
    "anything": (ANYTHING, 150),
    "radial": (Wishes(loops=0), 50),
    "rings": (Wishes(loops=0, rings=1.0), 50),
    "meshed": (Wishes(loops=8, points=(6, 14)), 50),
    "cables side by side": (Wishes(doubled=1.0), 40),
    "through the chassis": (Wishes(chassis=1.0), 50),
    "strings, aged and not": (Wishes(linked=1.0, aged=0.5, extra_batteries=0.6, charger_only=0.0), 50),
    "converters, solar and diodes": (Wishes(converters=1.0, solar=0.7, diodes=1.0), 50),
    "converters behind converters": (Wishes(converters=1.0, chained=0.8), 50),
    "arrays behind controllers": (Wishes(solar=1.0, arrays=1.0, charger_only=0.0), 60),
    "inverters and surges": (Wishes(inverters=0.6, surges=0.7), 50),
    "busbars": (Wishes(busbars=0.5), 40),
    "nothing but a charger": (Wishes(charger_only=1.0, converters=0.0), 50),
    "heavily loaded": (replace(ANYTHING, load_share=2.5), 60),
}
"""What a random plan of each kind may hold, and how many the tests compare."""


@dataclass(frozen=True)
class Compared:
    """One plan solved twice."""

    seed: int
    circuit: Circuit
    state: State
    volts: dict[int, float]
    reference: Answer

    @property
    def difference_V(self) -> float:
        """The largest difference of a node's volts."""
        return largest_difference_V(self.circuit, self.volts, self.reference.volts[-1])

    @property
    def agrees(self) -> bool:
        """Whether the two say the same, where ngspice says anything."""
        if not self.reference.complete:
            return True
        return self.difference_V <= AGREE_V if self.state.solved else not self.reference.holds(self.circuit)

    def asked_again(self) -> "Compared":
        """The same with a rise so slow that ngspice does not step over a narrow branch of solutions.

        And with as much time to settle: behind a converter at its limit little drives the volts to where they end.
        """
        for rise_s in (SLOW_RISE_S, SLOWEST_RISE_S):
            slow = replace(self, reference=answer(self.circuit, rise_s))
            if slow.agrees:
                break
        return slow


@dataclass(frozen=True)
class Tally:
    """What came of the fed plans of one kind."""

    kind: str
    plans: list[Compared]
    asked_again: int

    @property
    def compared(self) -> list[Compared]:
        """Plans whose volts both programs found."""
        return [one for one in self.plans if one.state.solved and one.reference.complete]

    @property
    def gave_way(self) -> int:
        """Plans that the solver says give way."""
        return sum(not one.state.solved for one in self.plans)

    @property
    def unanswered(self) -> int:
        """Plans on which ngspice ended before the loads had risen and settled."""
        return sum(not one.reference.complete for one in self.plans)

    @property
    def worst_V(self) -> float:
        """The largest difference."""
        return max((one.difference_V for one in self.compared), default=0.0)

    @property
    def disagreeing(self) -> list[int]:
        """Seeds of the plans on which the two programs differ."""
        return [one.seed for one in self.plans if not one.agrees]

    def __str__(self) -> str:
        return (
            f"{self.kind:<30}{len(self.plans):>7}{self.gave_way:>10}{self.unanswered:>12}{self.asked_again:>8}"
            f"{len(self.compared):>10}{len(self.disagreeing):>10}{self.worst_V:>12.1e}"
        )


HEAD = (
    f"{'':<30}{'plans':>7}{'gave way':>10}{'unanswered':>12}{'again':>8}{'compared':>10}{'differ':>10}{'worst, V':>12}"
)


def compare(seed: int, wishes: Wishes, rise_s: float = QUICK_RISE_S) -> Compared:
    """Solve the random plan of a seed with Farvolt and with ngspice."""
    plan = plan_of(random_draft(random.Random(seed), wishes))
    case = plan.checked_cases[0]
    built = network.build(plan, rulebook.load("small-craft-iso"))
    state = solve(built, operating.operating(built, case), np.ones(len(plan.runs)))
    circuit = circuit_of(plan, case)
    volts = {
        node: float(state.volts[built.nodes[name, 0 if pole == "+" else 1]])
        for (name, pole), node in circuit.pins.items()
        if node in circuit.live
    }
    return Compared(seed, circuit, state, volts, answer(circuit, rise_s) if circuit.live else Answer([], [], rise_s))


def compare_kind(kind: str, count: int) -> Tally:
    """The first plans of a kind, ngspice side by side on the cores there are; those that differ are asked again."""
    first = 10_000 * list(KINDS).index(kind)
    with ThreadPoolExecutor(os.cpu_count()) as pool:
        found = list(pool.map(lambda seed: compare(seed, KINDS[kind][0]), range(first, first + count)))
        found = [one for one in found if one.circuit.live]
        again = [one for one in found if not one.agrees]
        slow = {one.seed: one for one in pool.map(Compared.asked_again, again)}
    return Tally(kind, [slow.get(one.seed, one) for one in found], len(again))


def main(plans: int = PLANS) -> bool:
    """Print a table; whether all agree."""
    print(HEAD)
    whole, tallies = sum(count for _, count in KINDS.values()), []
    for kind, (_, count) in KINDS.items():
        tallies.append(compare_kind(kind, max(1, round(plans * count / whole))))
        print(tallies[-1], flush=True)
        if tallies[-1].disagreeing:
            print(f"    seeds that differ: {tallies[-1].disagreeing}")
    every = Tally("all", [one for tally in tallies for one in tally.plans], sum(one.asked_again for one in tallies))
    print(every)
    return not every.disagreeing


if __name__ == "__main__":
    sys.exit(0 if main(*map(int, sys.argv[1:])) else 1)
