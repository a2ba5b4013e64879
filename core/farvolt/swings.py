"""Which uncertainty matters most to a load: its voltage with one factor, or one group of factors, at either end.

All others stand in the middle of their ranges; every figure is the difference of two solved networks.
"""

from dataclasses import dataclass

import numpy as np

from farvolt.network import Floats
from farvolt.solution import Solution
from farvolt.tolerances import GROUPS, Factor, Group, Spread

MOST_FACTORS = 1_500
"""Above so many factors only those of the load's own way, its sources and itself are moved one at a time."""


@dataclass(frozen=True, slots=True)
class GroupSwing:
    """All factors of a group moved together from one end to the other; `share` is of the sum over the groups."""

    group: Group
    factors: int
    swing_V: float
    share: float


@dataclass(frozen=True, slots=True)
class FactorSwing:
    """One factor moved from the end that raises voltages to the one that lowers them; below 0 it does the opposite."""

    group: Group
    name: str
    swing_V: float


@dataclass(frozen=True)
class Swings:
    """What moves a load's voltage: groups and single factors, the largest first. `whole` is False where only the
    factors of the load's own way were moved singly."""

    load: str
    case: str
    middle_V: float
    groups: tuple[GroupSwing, ...]
    factors: tuple[FactorSwing, ...]
    whole: bool


def swings(spread: Spread, solution: Solution, load: int) -> Swings | None:
    """What moves the voltage of a load (its place in the plan); None where the case gives way in the middle."""
    middle = (spread.lowers + spread.raises) / 2
    single = _moved_singly(spread, solution, load)
    sets = [spread.places(group) for group in GROUPS] + [np.array([place]) for place in single]
    values = np.tile(middle, (1 + 2 * len(sets), 1))
    for row, places in enumerate(sets):
        values[1 + 2 * row, places] = spread.raises[places]
        values[2 + 2 * row, places] = spread.lowers[places]
    volts: Floats = spread.solve(values).load_volts[:, load]
    if not np.isfinite(volts[0]):
        return None
    # An end at which the case gives way has no voltage: the load loses all of it.
    volts = np.nan_to_num(volts, nan=0.0)
    moved = volts[1::2] - volts[2::2]
    total = float(np.abs(moved[: len(GROUPS)]).sum()) or 1.0
    groups = [
        GroupSwing(group, len(sets[row]), float(moved[row]), float(abs(moved[row])) / total)
        for row, group in enumerate(GROUPS)
    ]
    factors = [
        FactorSwing(spread.factors[place].group, spread.factors[place].name, float(swing))
        for place, swing in zip(single, moved[len(GROUPS) :], strict=True)
    ]
    return Swings(
        spread.network.plan.loads[load].name,
        spread.case.name,
        float(volts[0]),
        tuple(sorted(groups, key=lambda one: -abs(one.swing_V))),
        tuple(sorted(factors, key=lambda one: -abs(one.swing_V))),
        len(single) == len(spread.factors),
    )


def _moved_singly(spread: Spread, solution: Solution, load: int) -> list[int]:
    """The factors to move one at a time."""
    if len(spread.factors) <= MOST_FACTORS:
        return list(range(len(spread.factors)))
    way = {step.run for step in solution.way(load)}

    def near(one: Factor) -> bool:
        return one.at == load if one.group == "loads" else one.group == "source voltage" or one.at in way

    return [place for place, one in enumerate(spread.factors) if near(one)]
