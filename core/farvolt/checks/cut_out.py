"""Loads that fall below their own cut-out, and where that leads when they let go."""

from collections.abc import Iterator

import numpy as np

from farvolt.checks.registry import check
from farvolt.context import CaseStudy, Context
from farvolt.letting_go import LettingGo, letting_go
from farvolt.results import Finding
from farvolt.units import number

_BASIS = "the load's own cut-out, as the plan states it"


@check("volts.cut-out", title="Loads below their cut-out, and which stay off or hunt when they let go")
def cut_out(context: Context) -> Iterator[Finding]:
    """Each load below its cut-out with hot conductors, solved as held on; then the second pass of its case."""
    for one in context.cases:
        solution = one.solutions["hot"]
        volts = solution.load_volts
        low = [
            index
            for index, load in enumerate(context.plan.loads)
            if load.cut_out is not None
            and one.case.share(load.name) > 0
            and (
                volts[index] < load.cut_out.si * (1 - 1e-12)
                or (not solution.state.solved and not np.isnan(volts[index]))
            )
        ]
        if not low:
            continue
        outcome = letting_go(context.plan, one.case, lambda case: context.solve_case(case, "hot"))
        for index in low:
            if solution.state.solved or context.plan.loads[index].name in (*outcome.shed, *outcome.hunting):
                yield _finding(context, one, index, float(volts[index]), outcome)


def _finding(context: Context, one: CaseStudy, index: int, volts: float, outcome: LettingGo) -> Finding:
    load = context.plan.loads[index]
    assert load.cut_out is not None
    end = "hunts: it lets go and comes back without end" if load.name in outcome.hunting else "lets go"
    if load.name not in (*outcome.shed, *outcome.hunting):
        end = "would let go, but holds once others have let go"
    solved = one.solutions["hot"].state.solved
    seen = (
        f"sees {number(volts, 4)} V, below its cut-out of {load.cut_out}"
        if solved
        else "stands in a case that gives way"
    )
    return Finding(
        rule="volts.cut-out",
        severity="fail",
        subject=load.name,
        kind="load",
        case=one.name,
        value=volts if solved else None,
        limit=load.cut_out.si,
        unit="V",
        message=f'"{load.name}" {seen}; it {end}',
        basis=_BASIS,
        working=(
            "Solved as held on, conductors hot; then the load farthest below its cut-out lets go, and so on.",
            f"Stay off: {_names(outcome.shed)}. Hunt: {_names(outcome.hunting)}. After {outcome.rounds} rounds.",
        ),
        remedy="thicker or shorter cable on its way, fewer loads at once, or a lower cut-out if the battery allows it",
    )


def _names(names: tuple[str, ...]) -> str:
    return ", ".join(f'"{name}"' for name in names) or "none"
