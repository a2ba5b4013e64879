"""Where no choice passes: the smallest set of limits in conflict, and the changes to the plan that would open it.

Limits are taken out as long as what is left cannot be met without them: none of those that stay can be spared (a
smallest set in that sense; there may be others). They are sought by halves, so that few are tried one by one.
"""

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace

from farvolt.choice_limits import Limit, Row, allowed_V, lost_V
from farvolt.choose import Choice, Problem, prepare
from farvolt.errors import ChoiceError
from farvolt.plan import Plan, Run
from farvolt.units import Quantity, number, parse

_TRY_S = 5.0
_ANY = 1e6
"""A gap with which the search ends at the first choice found."""

_SHORTER = (0.8, 0.6, 0.4, 0.2)


@dataclass(frozen=True, slots=True)
class Conflict:
    """What cannot be met together, in words, and what would open it."""

    limits: tuple[str, ...]
    openings: tuple[str, ...]


def conflict(choice: Choice) -> Conflict | None:
    """The conflict of a choice for which nothing passes; None where that is not shown."""
    if not choice.impossible:
        return None
    problem = choice.problem
    barred = [run for run, mine in problem.options.by_run.items() if not mine]
    if barred:
        return Conflict(tuple(_barred(problem, run) for run in barred), tuple(_openings(problem, [], barred)))
    rows = [*problem.model.rows, *problem.bound_rows()]
    kept = smallest(rows, lambda some: _possible(problem, some))
    told = dict.fromkeys(_said(problem, row) for row in kept)
    return Conflict(tuple(told), tuple(_openings(problem, kept, [])))


def smallest(rows: Sequence[Row], possible: Callable[[Sequence[Row]], bool]) -> list[Row]:
    """A set of rows that is not possible together, and is without any one of them (by halves, after Junker)."""

    def within(background: list[Row], added: bool, some: list[Row]) -> list[Row]:
        if added and not possible(background):
            return []
        if len(some) == 1:
            return some
        first, second = some[: len(some) // 2], some[len(some) // 2 :]
        from_second = within(background + first, bool(first), second)
        from_first = within(background + from_second, bool(from_second), first)
        return from_first + from_second

    return within([], False, list(rows)) if rows else []


def _possible(problem: Problem, rows: Sequence[Row]) -> bool:
    alone = replace(problem.model, rows=[])
    return not alone.solve(rows, _ANY, _TRY_S).impossible


def _barred(problem: Problem, run: int) -> str:
    refused = problem.options.refused[run]
    why = ", ".join(f"{size}: {rule}" for size, rule in list(refused.items())[-3:])
    return f'"{problem.plan.runs[run].name}" can be built of no size ({why or "none fits its terminals"})'


def _said(problem: Problem, row: Row) -> str:
    if row.limit is None:
        names = {problem.plan.runs[problem.options.every[place].run].name for place in row.coefficients}
        return f"{row.text or 'protection'} on {', '.join(sorted(names)[:4])}"
    limit, context = row.limit, problem.best
    load, case = context.plan.loads[limit.load].name, context.cases[limit.case].name
    lost, allowed = lost_V(limit, context), allowed_V(limit, context)
    least = f"{number(lost)} V are lost even with the thickest cables"
    return f'{limit.rule} of "{load}" in "{case}": {number(allowed)} V may be lost; {least}'


def _openings(problem: Problem, rows: Sequence[Row], barred: Sequence[int]) -> Iterator[str]:
    """Changes, each tried, that let a choice pass as far as the bound's model can tell."""
    runs = _runs(problem, rows, barred)
    plan = problem.plan
    for run in sorted(runs, key=lambda one: -plan.runs[one].length.si)[:3]:
        entry = plan.runs[run]
        share = next((one for one in _SHORTER if _opens(problem, _with(plan, run, _shorter(entry, one)))), None)
        if share is not None:
            yield f'"{entry.name}" no longer than {number(share * entry.length.si)} m, the device nearer to the battery'
            break
    if problem.wishes.parallel == 1 and _opens(problem, plan, parallel=2):
        yield "two equal cables side by side where one is not enough, or the load split between two runs (--parallel 2)"
    limits = [row.limit for row in rows if row.limit is not None]
    if limits:
        yield from _higher(problem, limits)
    if any(row.text.startswith("protection") for row in rows) or any(
        rule.startswith("protection") for run in barred for rule in problem.options.refused[run].values()
    ):
        yield "protection of a lower rating, or one of its own where the cable starts (--ratings tries other ratings)"


def _higher(problem: Problem, limits: Sequence[Limit]) -> Iterator[str]:
    """At twice the voltage the same power takes half the current, and the same percentage is twice the volts."""
    shares = [lost_V(limit, problem.best) / max(allowed_V(limit, problem.best), 1e-9) for limit in limits]
    if max(shares) / 4 <= 1:
        volts = problem.plan.plan.nominal.si
        yield f"{number(2 * volts)} V instead of {number(volts)} V: half the current, a quarter of the drop in percent"
    else:
        yield "less load on this way, or a converter near to the load"


def _runs(problem: Problem, rows: Sequence[Row], barred: Sequence[int]) -> list[int]:
    every = problem.options.every
    found = dict.fromkeys(barred)
    found |= dict.fromkeys(every[place].run for row in rows for place in row.coefficients)
    return list(found)


def _with(plan: Plan, index: int, run: Run) -> Plan:
    return plan.model_copy(update={"runs": (*plan.runs[:index], run, *plan.runs[index + 1 :])})


def _shorter(run: Run, share: float) -> Run:
    length: Quantity = parse(f"{share * run.length.si:.6g} m", "length")
    return run.model_copy(update={"length": length})


def _opens(problem: Problem, plan: Plan, parallel: int = 1) -> bool:
    wishes = replace(problem.wishes, parallel=max(parallel, problem.wishes.parallel))
    try:
        changed = prepare(plan, problem.rulebook, wishes)
    except ChoiceError:
        return False
    if not all(changed.options.by_run.values()):
        return False
    return not changed.model.solve(changed.bound_rows(), _ANY, _TRY_S).impossible
