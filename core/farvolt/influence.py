"""What drives a load's voltage: its drop by conductor and device, and what the next size of each run would gain.

The gains are adjoint sensitivities: F(v, g) = 0 makes dv = −J⁻¹ (∂F/∂g) dg, so with λ = J⁻ᵀ e for the load's port
e, the gain of a conductance g between nodes a and b is −(λa − λb)·(va − vb)·dg: one extra solution per load, not one
per run. They are first-order in the resistance: where the current changes with it, a whole step gains a little more
or less than they say.
"""

from dataclasses import dataclass

import numpy as np

from farvolt.conductors import Size, made_sizes, resistance_20_ohm_per_m
from farvolt.equations import Equations
from farvolt.linear import SingularError, factor
from farvolt.network import FEED, Floats, conductor_lengths_m, strand
from farvolt.plan import Run
from farvolt.rulebook import Rulebook
from farvolt.solution import Solution, Step


@dataclass(frozen=True, slots=True)
class Gain:
    """What one run's next larger size does to a load's voltage, to first order."""

    run: str
    size: Size
    gain_V: float


@dataclass(frozen=True, slots=True)
class Influence:
    """The drop of one load: `parts` sum to it; `gains` are by falling gain."""

    load: str
    drop_V: float
    parts: tuple[Step, ...]
    gains: tuple[Gain, ...]


def influence(solution: Solution, rulebook: Rulebook, load: int) -> Influence | None:
    """What drives the voltage of a load in a solved case; None where it is not fed or the case gives way."""
    if not solution.state.solved or not solution.supply.load_on[load]:
        return None
    plan = solution.network.plan
    weights = _adjoint(solution, load)
    gains = [_gain(solution, rulebook, index, run, weights) for index, run in enumerate(plan.runs)]
    found = sorted((gain for gain in gains if gain is not None), key=lambda gain: -gain.gain_V)
    return Influence(plan.loads[load].name, float(solution.load_drop_V[load]), solution.way(load), tuple(found))


def _adjoint(solution: Solution, load: int) -> Floats:
    """λ over all nodes: J transposed, solved for a unit current through the load's port."""
    equations = Equations(solution.network, solution.condition, solution.conductors.factor_of_20, solution.supply)
    volts = np.nan_to_num(solution.state.volts)
    rows, columns, values = equations.jacobian(volts, 1.0)
    port = np.zeros(len(volts))
    port[solution.condition.load_a[load]] += 1.0
    port[solution.condition.load_b[load]] -= 1.0
    unknown = equations.position >= 0
    found = np.zeros(len(volts))
    try:
        found[unknown] = factor(equations.size, columns, rows, values, symmetric=False).solve(port[unknown])
    except SingularError:
        found[unknown] = np.nan
    return found


def _gain(solution: Solution, rulebook: Rulebook, index: int, run: Run, weights: Floats) -> Gain | None:
    if run.size is None or run.resistance is not None:
        return None
    size = next((one for one in made_sizes(run.size.system) if one.area_mm2 > run.size.area_mm2), None)
    if size is None:
        return None
    network, volts = solution.network, np.nan_to_num(solution.state.volts)
    total = 0.0
    for pole, branches in enumerate(solution.run_branches):
        branch = int(branches[index])
        length = conductor_lengths_m(run)[pole]
        if branch < 0 or length == 0 or (pole != FEED and run.return_path != "same"):
            continue
        per_m = resistance_20_ohm_per_m(size, run.material, strand(run, rulebook)).value
        cable = per_m * length / run.parallel * solution.conductors.factor_of_20[index]
        # First order in the resistance, which is exact where the current stays: dg = −dR / R².
        step_S = (solution.ohm[branch] - network.fixed_ohm[branch] - cable) / solution.ohm[branch] ** 2
        a, b = network.a[branch], network.b[branch]
        total -= float((weights[a] - weights[b]) * (volts[a] - volts[b]) * step_S)
    return Gain(run.name, size, total)
