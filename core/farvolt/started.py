"""The starts of loads, each with the solution of the network meanwhile: those that cases ask for, and of small plans
that of each load alone in every case that has it on.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from farvolt import many, operating, solve, temperatures
from farvolt.network import Network
from farvolt.plan import Case, Load
from farvolt.rulebook import Rulebook
from farvolt.solution import Solution

MOST = 400
"""So many starts that no case asks for are tried, in the order of the cases and loads."""


@dataclass(frozen=True)
class Starts:
    """What was solved, with hot conductors, and which loads' starts were not tried in every case for want of time."""

    solved: tuple[tuple[Case, Solution], ...]
    left_out: tuple[str, ...]


def starts(
    network: Network, rulebook: Rulebook, cases: Sequence[tuple[Case, Solution]], *, alone: bool
) -> Starts:
    """The starts of a plan whose `cases` are solved; `alone`: also of each load by itself, as far as `MOST` goes."""
    surging = [load for load in network.plan.loads if load.surge is not None]
    solved = [(case, solution) for case, solution in cases if case.surge]
    known = [_unnamed(case) for case, _ in solved]
    others = [
        (load, made)
        for case, _ in cases
        for load in surging
        if not case.surge and case.share(load.name) > 0 and _unnamed(made := _with_start(case, load)) not in known
    ]
    tried = others[:MOST] if alone else []
    solved += zip([case for _, case in tried], solved_hot(network, rulebook, [case for _, case in tried]), strict=True)
    asked = {name for case, _ in cases for name in case.surge}
    left = dict.fromkeys(load.name for load, _ in others[len(tried) :] if alone or load.name not in asked)
    return Starts(tuple(solved), tuple(left))


def solved_hot(network: Network, rulebook: Rulebook, cases: Sequence[Case]) -> list[Solution]:
    """Cases with hot conductors; those at equal temperatures together."""
    islands = operating.islands(network) if cases else None
    alike: dict[bytes, list[int]] = {}
    wanted = [temperatures.at(network.plan, rulebook, case, "hot") for case in cases]
    for place, conductors in enumerate(wanted):
        alike.setdefault(conductors.factor_of_20.tobytes(), []).append(place)
    found: dict[int, Solution] = {}
    for group in alike.values():
        assert islands is not None
        conditions = [operating.operating(network, cases[place], islands) for place in group]
        supplies = [solve.fed(network, condition) for condition in conditions]
        states = many.solve_together(network, conditions, wanted[group[0]].factor_of_20, supplies)
        for place, condition, supply, state in zip(group, conditions, supplies, states, strict=True):
            found[place] = Solution(network, condition, supply, wanted[place], state)
    return [found[place] for place in range(len(cases))]


def _with_start(case: Case, load: Load) -> Case:
    return case.model_copy(update={"surge": (load.name,)})


def _unnamed(case: Case) -> Case:
    """The case for comparison: two of other names may ask for the same."""
    return case.model_copy(update={"name": "", "notes": ""})
