"""Voltage drop on the branch: from the last protection on the way to a load, to the load."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from farvolt.checks.drop import drop_class, exceptional, line, loads_on, over_limit
from farvolt.checks.enlarge import Aim, Remedies
from farvolt.checks.registry import apart, check
from farvolt.context import Context
from farvolt.network import Floats
from farvolt.plan import Device, Run
from farvolt.results import Finding
from farvolt.solution import Solution, Step
from farvolt.units import number


@dataclass(frozen=True, slots=True)
class _Branch:
    """The last part of the way to a load, from the point at which its last protection sits."""

    load: int
    point: str
    protected: bool
    """It starts at a protection; else at the source, for want of one."""
    feed: tuple[Step, ...]
    whole_return: tuple[Step, ...]
    """Steps in the return from the load all the way to the source."""

    def percent(self, solution: Solution) -> float:
        """Drop of the branch in percent of nominal: volts at its start less volts at the load."""
        network, volts, group = solution.network, solution.state.volts, solution.supply.group
        feed, back, load_b = network.feed(self.point), network.ret(self.point), solution.condition.load_b[self.load]
        if group[back] == group[load_b]:
            drop = volts[feed] - volts[back] - solution.load_volts[self.load]
        else:  # its start has no return: all the way back counts
            drop = volts[feed] - volts[solution.condition.load_a[self.load]]
            drop += sum(step.drop_V for step in self.whole_return)
        return float(100 * drop / solution.load_nominal_V[self.load])

    def back(self, solution: Solution) -> tuple[Step, ...]:
        """The steps in the return from the load to the branch's start, as far as they lie on the way."""
        wanted = self.percent(solution) * float(solution.load_nominal_V[self.load]) / 100
        wanted -= sum(step.drop_V for step in self.feed)
        for count in range(len(self.whole_return) + 1):
            if abs(sum(step.drop_V for step in self.whole_return[:count]) - wanted) < 1e-9:
                return self.whole_return[:count]
        return ()


@check("drop.branch", title="Voltage drop from the last protection to each load", reads=("classes", "drop_basis"))
def drop_on_branch(context: Context) -> Iterator[Finding]:
    """The worst case of every load over its class's limit for the branch, where the rulebook has one.

    Starts, and what stands in for lost batteries, are told of only where no other case is over.
    """
    limits = [drop_class(context, load).branch_limit_percent for load in range(len(context.plan.loads))]
    if all(limit is None for limit in limits):
        return
    floors = np.array([np.inf if limit is None else limit for limit in limits])
    devices = {device.name: device for device in context.plan.devices}
    over: dict[int, list[tuple[float, int, _Branch]]] = {}
    for case, one in enumerate(context.cases):
        solution = one.solutions["basis"]
        # A branch loses no more than the highest voltage of any source less the load's: most need no walk.
        most = 100 * (_most_V(solution) - solution.load_volts) / solution.load_nominal_V
        for load in np.flatnonzero(loads_on(solution) & (most > floors)).tolist():
            branch = _branch(solution, load, devices)
            percent = branch.percent(solution) if branch is not None else 0.0
            if branch is not None and percent > floors[load] * (1 + 1e-9):
                over.setdefault(load, []).append((percent, case, branch))
    remedies = Remedies(context)
    for load, found in sorted(over.items()):
        in_service = [one for one in found if not exceptional(context.cases[one[1]].solutions["basis"], load)]
        yield _finding(context, in_service or found, remedies)


def _most_V(solution: Solution) -> Floats:
    """For every load, the highest feed less the lowest return at any source of its galvanic part.

    No node of a network of resistances lies beyond those at which current enters it.
    """
    c, volts, group = solution.condition, solution.state.volts, solution.supply.group
    on = solution.supply.source_on & np.isfinite(volts[c.source_a]) & np.isfinite(volts[c.source_b])
    found = np.full(len(solution.network.plan.loads), np.nan)
    loads = group[c.load_a[: len(found)]]
    for part in sorted(set(group[c.source_a[on]].tolist())):
        mine = on & (group[c.source_a] == part)
        found[loads == part] = volts[c.source_a[mine]].max() - volts[c.source_b[mine]].min()
    return found


def _branch(solution: Solution, load: int, devices: dict[str, Device]) -> _Branch | None:
    """Where the branch of a load starts on the shortest way from its reference source."""
    network, port, way = solution.network, solution.references[load], solution.way(load)
    if port is None or not way:
        return None
    feed = [step for step in way if step.pole == "feed"]
    here = start = network.plan.sources[port].at
    taken, protected = 0, False
    for place, step in enumerate(feed):
        run = network.plan.runs[step.run] if step.run >= 0 else None
        part: Run | Device = run if run is not None else devices[step.name]
        forward = network.feed(part.from_point) == network.feed(here)
        there = part.to_point if forward else part.from_point
        guarded = [one.end for one in run.protections if one.pole == "feed"] if run is not None else []
        near, far = ("from", "to") if forward else ("to", "from")
        if near in guarded:
            start, taken, protected = part.from_point if forward else part.to_point, place, True
        if far in guarded:
            start, taken, protected = there, place + 1, True
        here = there
    return _Branch(load, start, protected, tuple(feed[taken:]), tuple(step for step in way if step.pole == "return"))


def branch_steps(solution: Solution, load: int) -> tuple[Step, ...]:
    """The steps of a load's branch, feed and return; none where it is not fed."""
    branch = _branch(solution, load, {device.name: device for device in solution.network.plan.devices})
    return (*branch.feed, *branch.back(solution)) if branch is not None else ()


def _finding(context: Context, found: list[tuple[float, int, _Branch]], remedies: Remedies) -> Finding:
    percent, case, branch = max(found, key=lambda one: one[0])
    solution = context.cases[case].solutions["basis"]
    rule = drop_class(context, branch.load)
    limit, nominal = rule.branch_limit_percent or 0.0, float(solution.load_nominal_V[branch.load])
    name = context.plan.loads[branch.load].name
    where = f'the last protection at "{branch.point}"' if branch.protected else "the source, for want of protection,"
    message = (
        f'"{name}" loses {apart(percent, limit)} % of {number(nominal)} V from {where} on; '
        f'{number(limit)} % is the limit of the class "{rule.name}" for the branch'
    )
    special = exceptional(solution, branch.load)
    message += f"; {special}" if special else ""
    aim = Aim(
        branch.load, "basis", case, tuple(one for _, one, _ in found), (*branch.feed, *branch.back(solution)),
        branch.percent, limit, -100 / nominal, "%",
    )  # fmt: skip
    shown = tuple(_working(solution, branch))
    return over_limit(context, "drop.branch", aim, percent, message, shown, remedies.for_load(aim))


def _working(solution: Solution, branch: _Branch) -> Iterator[str]:
    percent, nominal = branch.percent(solution), float(solution.load_nominal_V[branch.load])
    back = branch.back(solution)
    drop = percent * nominal / 100
    yield f'Resistances {solution.conductors.text}; case "{solution.condition.case.name}"; from "{branch.point}".'
    for step in (*branch.feed, *back):
        yield line(step)
    rest = drop - sum(step.drop_V for step in (*branch.feed, *back))
    if abs(rest) > 1e-9:
        yield f'Return from the load to "{branch.point}", by other ways: {number(rest, 4)} V'
    yield f"{number(drop, 4)} V / {number(nominal)} V = {number(percent, 4)} %"
