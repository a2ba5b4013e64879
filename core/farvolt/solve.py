"""The solution of a network in a case, and its certificate.

Nodal analysis on both wires, solved by Newton's method on the way the loads take when all are raised together from
zero. See `solve` for why that cannot end on a false solution.
"""

from dataclasses import dataclass

import numpy as np

from farvolt.equations import IMBALANCE_A, Equations
from farvolt.fed import Fed, fed, first_diode
from farvolt.linear import SingularError, factor
from farvolt.network import Floats, Network
from farvolt.operating import Operating

POWER_SHARE = 1e-9
"""The power balance holds to this share of the turnover."""

MARGIN_LIMIT = 100.0
"""Margins are looked for up to this many times the load."""

_FIRST_STEP = 1 / 16
_LEAST_STEP = 1e-5
_MARGIN_STEP = 4e-3


@dataclass(frozen=True)
class State:
    """Node voltages and port currents of a case at `share_held` of its loads, with the certificate.

    `volts` is NaN at unfed nodes. `delivered_A` is over source ports, `drawn_A` over load ports, `branch_A` over
    branches (from a to b). `imbalance_A` is the largest breach of Kirchhoff's current law at any fed node.
    """

    solved: bool
    share_held: float
    volts: Floats
    delivered_A: Floats
    drawn_A: Floats
    branch_A: Floats
    imbalance_A: float
    power_in_W: float
    power_loads_W: float
    power_lost_W: float
    weakest: int | None
    """The load that falls fastest where the case gives way."""


def solve(network: Network, condition: Operating, factor_of_20: Floats, supply: Fed | None = None) -> State:
    """Solve one case; `factor_of_20` is over runs, the resistance of a conductor over that at 20 °C.

    The solution is the one reached by raising all loads together from zero. Newton's method starts from the unloaded
    network and moves down: a step never jumps over the voltage at which an idle source joins in, and the Jacobian
    stays positive definite, so within a smooth piece the iterates fall monotonically on the highest solution. Where
    that fails, the loads are raised in small steps. A case gives way when a load has to fall below its knee;
    `share_held` then says where, to 0.1 %.
    """
    equations = Equations(network, condition, factor_of_20, supply or fed(network, condition))
    start = _newton(equations, equations.first_guess(), 0.0)
    if start is None:
        return _state(equations, equations.first_guess(), 0.0, None)
    end = _newton(equations, equations.inside(start), 1.0, falling=True)
    if end is not None and equations.above_knees(end):
        return _state(equations, end, 1.0, None)
    volts, share = _climb(equations, start, 0.0, 1.0, _FIRST_STEP, _LEAST_STEP)
    return _state(equations, volts, share, None if share >= 1 else _weakest(equations, volts, share))


def margin(network: Network, condition: Operating, factor_of_20: Floats, supply: Fed, state: State) -> float | None:
    """How many times its loads a solved case holds, to 0.5 %; None where it is more than `MARGIN_LIMIT` times."""
    equations = Equations(network, condition, factor_of_20, supply)
    _, share = _climb(equations, np.nan_to_num(state.volts), 1.0, MARGIN_LIMIT, 0.5, _MARGIN_STEP)
    return share if share < MARGIN_LIMIT else None


def _newton(equations: Equations, volts: Floats, share: float, *, falling: bool = False) -> Floats | None:
    """Newton's method from `volts`; None where it does not converge on a stable solution.

    With `falling` a load voltage that rises on the way also ends it: the caller then takes smaller steps.
    """
    volts = volts.copy()
    unknown = equations.position >= 0
    previous, entries, solution = np.inf, np.empty(0), None
    for _ in range(80):
        out = equations.residual(volts, share)
        done = equations.balanced(out, volts)
        if done and np.abs(out[unknown]).max(initial=0.0) >= previous / 2:
            return volts
        previous = np.abs(out[unknown]).max(initial=0.0) if done else np.inf
        try:
            rows, columns, values = equations.jacobian(volts, share)
            if solution is None or not np.array_equal(values, entries):
                # Where every law is straight, the Jacobian stays what it was.
                solution, entries = (
                    factor(equations.size, rows, columns, values, symmetric=not equations.converters), values,
                )  # fmt: skip
            if not solution.positive:
                return None
            step = np.zeros_like(volts)
            step[unknown] = -solution.solve(out[unknown])
        except SingularError:
            return volts if done else None
        step *= _step_length(equations, volts, step)
        if falling and np.any(equations.load_volts(step) > 1e-6 + 1e-9 * np.abs(equations.load_volts(volts))):
            return None
        volts += step
    return volts if equations.balanced(equations.residual(volts, share), volts) else None


def _step_length(equations: Equations, volts: Floats, step: Floats) -> float:
    """Longest part of a step that passes no idle source's voltage, nor a converter's limit, and at most halves a
    load's."""
    c, on, length = equations.condition, equations.sources, 1.0
    change = equations.source_volts(step)
    above = equations.source_volts(volts) - c.volts[on]
    joins = (c.low[on] == 0) & (above > 1e-12 * np.abs(c.volts[on]) + 1e-15) & (above + change < 0)
    if joins.any():
        # Land just inside the law of the source that joins in first.
        length = min(length, float(np.min((above[joins] + 1e-9) / -change[joins])))
    # Land where a converter's output reaches its limit: what its droop would make of its input beyond is out of reach.
    limit = equations.source_volts(volts) - equations.limit_volts(volts)
    passes = equations.fed_through & (limit > 1e-12 * np.abs(c.volts[on]) + 1e-15) & (limit + change < 0)
    if passes.any():
        length = min(length, float(np.min((limit[passes] + 1e-9) / -change[passes])))
    u, change = equations.load_volts(volts), equations.load_volts(step)
    halves = (change < -0.5 * u) & (u > c.knee[equations.loads])
    if halves.any():
        length = min(length, float(np.min(0.5 * u[halves] / -change[halves])))
    return length


def _climb(
    equations: Equations, volts: Floats, share: float, until: float, step: float, least: float
) -> tuple[Floats, float]:
    """Raise all loads together from `share`: the voltages and share where the case gives way, or at `until`."""
    while share < until:
        trial = min(until, share + step)
        found = _newton(equations, volts, trial)
        if found is not None and _near(equations, volts, found) and equations.above_knees(found):
            volts, share, step = found, trial, 2 * step if until > 1 else min(2 * step, _FIRST_STEP)
            continue
        step /= 2
        if step < least:
            ahead = min(until, share + 2 * step)
            settled = _settle(equations, volts, ahead)
            if settled is None:
                break
            volts, share, step = settled, ahead, _FIRST_STEP
    return volts, share


def _near(equations: Equations, before: Floats, after: Floats) -> bool:
    """No load voltage moved by more than a tenth: a larger move may have left the path."""
    u, moved = equations.load_volts(before), equations.load_volts(after - before)
    return bool(np.all(np.abs(moved) <= 0.1 * np.abs(u) + 1e-9))


def _settle(equations: Equations, volts: Floats, share: float) -> Floats | None:
    """Where the network falls to when a solution ends: the flow of charge out of a small capacitance at every load
    (implicit Euler, steps of at most 2 %), until Newton's method takes hold of a stable solution above the knees.

    Only an idle source that joins in on the way down can hold it there: without one, what the sources deliver is a
    concave function of the voltage, and no second solution lies below.
    """
    c, on = equations.condition, equations.sources
    if not np.any((c.low[on] == 0) & (equations.source_volts(volts) > c.volts[on])):
        return None
    volts = volts.copy()
    unknown = equations.position >= 0
    rows_held, columns_held, signs = _across_loads(equations)
    hold = 100.0
    for _ in range(2000):
        out = equations.residual(volts, share)
        rows, columns, values = equations.jacobian(volts, share)
        entries = np.append(rows, rows_held), np.append(columns, columns_held), np.append(values, hold * signs)
        try:
            held = factor(equations.size, *entries, symmetric=not equations.converters)
            step = np.zeros_like(volts)
            step[unknown] = -held.solve(out[unknown]) if held.positive else 0.0
        except SingularError:
            return None
        if not held.positive:
            hold *= 4
            if hold > 1e9:
                return None
            continue
        relative = np.abs(equations.load_volts(step)) / np.maximum(np.abs(equations.load_volts(volts)), 1e-3)
        worst = float(relative.max(initial=0.0))
        volts += step * min(1.0, 0.02 / worst if worst > 0 else 1.0)
        if not equations.above_knees(volts):
            return None
        hold = max(hold * (0.7 if worst < 0.02 else 1.3), 1e-6)
        if worst < 1e-4 and (found := _newton(equations, volts, share)) is not None and _near(equations, volts, found):
            return found if equations.above_knees(found) else None
    return None


def _across_loads(equations: Equations) -> tuple[np.ndarray, np.ndarray, Floats]:
    """Rows, columns and signs of a unit conductance across every load, in the unknowns."""
    c, on = equations.condition, equations.loads
    a, b = equations.position[c.load_a[on]], equations.position[c.load_b[on]]
    rows, columns = np.concatenate([a, b, a, b]), np.concatenate([a, b, b, a])
    known = (rows >= 0) & (columns >= 0)
    return rows[known], columns[known], np.repeat([1.0, -1.0], 2 * len(on))[known]


def _weakest(equations: Equations, volts: Floats, share: float) -> int | None:
    """The load whose voltage falls fastest as the loads are raised further."""
    unknown = equations.position >= 0
    try:
        solution = factor(equations.size, *equations.jacobian(volts, share), symmetric=False)
        rate = np.zeros_like(volts)
        ahead = equations.residual(volts, share + 1e-6) - equations.residual(volts, share)
        rate[unknown] = -solution.solve(ahead[unknown])
    except SingularError:
        return None
    fall = -equations.load_volts(rate) / equations.condition.knee[equations.loads]
    named = equations.loads < len(equations.network.plan.loads)
    return int(equations.loads[named][np.argmax(fall[named])]) if named.any() else None


def _state(equations: Equations, volts: Floats, share: float, weakest: int | None) -> State:
    """The answer with its certificate, recomputed from the element laws."""
    network, live = equations.network, equations.supply.live
    out = equations.residual(volts, share)
    _, delivered, _ = equations.source_law(volts)
    _, drawn, _ = equations.load_law(volts, share)
    flow = equations.all_siemens * (volts[network.a] - volts[network.b])
    source_W, load_W = equations.source_volts(volts) * delivered, equations.load_volts(volts) * drawn
    diodes = equations.sources >= first_diode(network)
    inputs = equations.loads >= len(network.plan.loads)
    power_in = float(source_W[~diodes].sum() - load_W[inputs].sum())
    power_loads = float(load_W[~inputs].sum())
    power_lost = float(np.sum(flow * (volts[network.a] - volts[network.b])) - source_W[diodes].sum())
    turnover = float(np.abs(source_W).sum() + np.abs(load_W).sum()) + abs(power_lost)
    allowed = equations.allowed(volts)[live]
    certified = bool(np.all(np.abs(out[live]) <= allowed))
    # Where hardly any power flows, the balance is no better than the imbalance that the nodes are allowed.
    least = float(np.sum(allowed * np.abs(volts[live])))
    certified &= abs(power_in - power_loads - power_lost) <= max(POWER_SHARE * turnover, least)
    return State(
        solved=share >= 1.0 and certified,
        share_held=min(share, 1.0),
        volts=np.where(live, volts, np.nan),
        delivered_A=_spread(len(equations.condition.source_a), equations.sources, delivered),
        drawn_A=_spread(len(equations.condition.load_a), equations.loads, drawn),
        branch_A=flow,
        imbalance_A=float(np.abs(out[live]).max(initial=0.0)),
        power_in_W=power_in,
        power_loads_W=power_loads,
        power_lost_W=power_lost,
        weakest=weakest,
    )


def _spread(count: int, places: np.ndarray, values: Floats) -> Floats:
    full = np.zeros(count)
    full[places] = values
    return full


__all__ = ["IMBALANCE_A", "MARGIN_LIMIT", "Fed", "State", "fed", "margin", "solve"]
