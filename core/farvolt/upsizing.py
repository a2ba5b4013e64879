"""Where buying a thicker cable that is bought anyway costs less: fewer reels for fewer sizes. Hints only.

Thicker cable carries more and drops less, yet it must fit its terminals, and in a mesh it shifts currents: a plan that
takes a hint is to be checked again.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

from farvolt.conductors import Size
from farvolt.interim import with_sizes
from farvolt.plan import Plan, ReturnConductor, Run
from farvolt.results import Study
from farvolt.rulebook import Rulebook
from farvolt.shopping import Bill, bill

_RUNS = 40
_LEAST_SHARE = 0.001


@dataclass(frozen=True, slots=True)
class Hint:
    """Runs to be bought in the next thicker size of the plan, and what that saves at least on the whole list."""

    runs: tuple[str, ...]
    present: Size
    size: Size
    saves: float


def of_study(study: Study, present: Bill) -> list[Hint]:
    """The hints for a study's plan, with the interim sizes of runs that state none."""
    return hints(with_sizes(study.plan, study.interim), study.rulebook, present)


def hints(plan: Plan, rulebook: Rulebook, present: Bill) -> list[Hint]:
    """What a thicker size saves against `present`, the most first; nothing without prices.

    Tried: all runs of a size in the next thicker one of the same material that the plan has, and each of the
    shortest runs alone. A line that had a price keeps one.
    """
    if present.wanted.prices is None:
        return []
    found = []
    for runs, size in _changes(plan):
        changed = with_sizes(plan, {run.name: size for run in runs})
        other = bill(changed, rulebook, present.wanted, thorough=False)
        saves = present.total - other.total
        if other.without_price <= present.without_price and saves > _LEAST_SHARE * present.total:
            assert runs[0].size is not None
            found.append(Hint(tuple(run.name for run in runs), runs[0].size, size, saves))
    return sorted(found, key=lambda hint: -hint.saves)


def _changes(plan: Plan) -> Iterator[tuple[list[Run], Size]]:
    """Sets of runs with the size to try for them; a whole size at once where it is of more than one run."""
    groups: dict[tuple[str, float, str], list[Run]] = {}
    for run in plan.runs:
        one_size = not (isinstance(run.return_path, ReturnConductor) and run.return_path.size is not None)
        if run.size is not None and run.resistance is None and one_size:
            groups.setdefault((run.material, run.size.area_mm2, run.size.name), []).append(run)
    ordered = [groups[key] for key in sorted(groups)]
    single: list[tuple[Run, Size]] = []
    for thin, thick in pairwise(ordered):
        size = thick[0].size
        if size is None or thick[0].material != thin[0].material or size.system != (thin[0].size or size).system:
            continue
        single += [(run, size) for run in thin]
        if len(thin) > 1:
            yield thin, size
    for run, size in sorted(single, key=lambda one: one[0].length.si)[:_RUNS]:
        yield [run], size
