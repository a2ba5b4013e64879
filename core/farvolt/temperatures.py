"""Conductor temperatures: the three that matter and are not mixed, and the one the plan asks for.

`basis` is what the rulebook's drop limits are meant for, `hot` the insulation's rating (lowest voltage at a load),
`cold` the ambient (highest voltage), `plan` what the plan's `conductor_temperature` says.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from farvolt import conductors
from farvolt.ampacity import Ampacity, ampacity
from farvolt.network import Floats, insulation_degC, return_size
from farvolt.plan import Case, Plan, Run
from farvolt.rulebook import Rulebook
from farvolt.units import Quantity, number

Mode = Literal["plan", "basis", "hot", "cold"]


@dataclass(frozen=True)
class Conductors:
    """Over runs: the conductor temperature in °C, and resistance over that at 20 °C."""

    degC: Floats
    factor_of_20: Floats
    text: str
    """How a working names the temperature."""


def run_ambient_degC(plan: Plan, run: Run, case: Case | None) -> float:
    """Ambient of a run in a case (None: the zones' own)."""
    return plan.ambient_degC(plan.zone_of(run), case)


def laid_together(plan: Plan) -> dict[str, int]:
    """Current-carrying conductors that lie together with each run, by its name, the run's own included."""
    counts = {
        run.name: (2 if run.conducts == "both" and run.return_path != "chassis" else 1) * run.parallel
        for run in plan.runs
    }
    by_route: dict[str, int] = {}
    for run in plan.runs:
        if run.route is not None and run.purpose != "bond":
            by_route[run.route] = by_route.get(run.route, 0) + counts[run.name]
    for name, route in plan.routes.items():
        if route.conductors is not None:
            by_route[name] = route.conductors
    return {run.name: run.bundled or by_route.get(run.route or "", counts[run.name]) for run in plan.runs}


def run_ampacity(plan: Plan, rulebook: Rulebook, run: Run, case: Case | None, together: int) -> Ampacity | None:
    """Ampacity of a run's conductors in a case: the lesser of feed and return; None where its size is free."""
    sizes = {run.size, return_size(run)} if run.conducts == "both" and run.return_path != "chassis" else {run.size}
    zone = plan.zone_of(run)
    found = [
        ampacity(
            rulebook,
            size=size,
            material=run.material,
            insulation_degC=insulation_degC(run, rulebook),
            ambient_degC=run_ambient_degC(plan, run, case),
            engine_space=zone is not None and plan.zones[zone].engine_space,
            conductors=together,
            parallel=run.parallel,
        )
        for size in sizes
        if size is not None
    ]
    return min(found, key=lambda one: -1.0 if one.amps is None else one.amps) if found else None


def at(plan: Plan, rulebook: Rulebook, case: Case, mode: Mode) -> Conductors:
    """Conductor temperatures of a mode, except "estimated", which needs the network (`estimated`)."""
    wish = plan.plan.conductor_temperature
    if mode == "plan" and wish != "rulebook":
        if isinstance(wish, Quantity):
            return _uniform(plan, wish.si, f"at {wish}")
        mode = "hot" if wish == "rated" else "cold"
    if mode == "basis" or mode == "plan":
        return _basis(plan, rulebook)
    if mode == "hot":
        # A case may state an ambient above the rating: then the cable is at least as hot as that.
        degC = [max(insulation_degC(run, rulebook), run_ambient_degC(plan, run, case)) for run in plan.runs]
        return _from_temperatures(plan, degC, "hot, at the insulation's rating")
    degC = [run_ambient_degC(plan, run, case) for run in plan.runs]
    return _from_temperatures(plan, degC, "cold, at ambient")


def _basis(plan: Plan, rulebook: Rulebook) -> Conductors:
    basis = rulebook.drop_basis
    if basis.temperature_degC is not None:
        return _uniform(plan, basis.temperature_degC, f"at {number(basis.temperature_degC)} degC, the rulebook's basis")
    assert basis.factor_on_R20 is not None
    factor = basis.factor_on_R20
    degC = [20 + (factor - 1) / _alpha(run) for run in plan.runs]
    text = f"at {number(factor)} times the resistance at 20 degC, the rulebook's basis"
    return Conductors(np.array(degC, dtype=float), np.full(len(plan.runs), factor), text)


def basis_factor(rulebook: Rulebook, run: Run) -> float:
    """Resistance of a run at the rulebook's basis over that at 20 °C."""
    basis = rulebook.drop_basis
    if basis.temperature_degC is not None:
        return 1 + _alpha(run) * (basis.temperature_degC - 20)
    return basis.factor_on_R20 or 1.0


def _uniform(plan: Plan, degC: float, text: str) -> Conductors:
    return _from_temperatures(plan, [degC] * len(plan.runs), text)


def _from_temperatures(plan: Plan, degC: list[float], text: str) -> Conductors:
    factors = [1 + _alpha(run) * (temperature - 20) for run, temperature in zip(plan.runs, degC, strict=True)]
    return Conductors(np.array(degC, dtype=float), np.array(factors, dtype=float), text)


def _alpha(run: Run) -> float:
    return conductors.temperature_coefficient(run.material).value


def estimated(
    plan: Plan, rulebook: Rulebook, case: Case, currents: Callable[[Conductors], Floats], amps: list[float | None]
) -> Conductors:
    """Temperatures that agree with the currents they cause: rise goes with the square of current over ampacity.

    `currents` solves the network and gives the larger conductor current of each run; `amps` are the ampacities.
    A run without an ampacity is taken at its insulation's rating, and so is one over its ampacity.
    """
    ambient = np.array([run_ambient_degC(plan, run, case) for run in plan.runs], dtype=float)
    rated = np.array([insulation_degC(run, rulebook) for run in plan.runs], dtype=float)
    limits = np.array([limit or 0.0 for limit in amps], dtype=float)
    text = "at the temperature estimated from the current"
    degC = ambient
    for _ in range(50):
        current = currents(_from_temperatures(plan, degC.tolist(), text))
        with np.errstate(divide="ignore", invalid="ignore"):
            target = np.minimum(ambient + (rated - ambient) * (current / limits) ** 2, rated)
        target = np.where(limits > 0, target, rated)
        if np.abs(target - degC).max(initial=0.0) < 1e-6:
            break
        degC = target
    return _from_temperatures(plan, degC.tolist(), text)
