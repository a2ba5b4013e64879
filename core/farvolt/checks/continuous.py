"""Continuous loads on conductors: some rulebooks ask for more than the current, before any correction."""

from collections.abc import Iterator

from farvolt.checks.demand import Demands
from farvolt.checks.registry import check, run_finding
from farvolt.context import Context, basis_text, label
from farvolt.results import Finding
from farvolt.units import number


@check("conductor.ampacity", title="Uncorrected ampacity against continuous loads", reads=("protection.continuous",))
def continuous(context: Context) -> Iterator[Finding]:
    """Runs whose table ampacity, before correction factors, is below their load with its continuous part raised."""
    rule, demands = context.rulebook.protection.continuous, Demands(context)
    if rule is None or rule.factor == 1:
        return
    for index, run in enumerate(context.plan.runs):
        found = context.lowest_ampacity[index]
        if found is None or found.table_amps is None:
            continue
        allowed = found.table_amps * run.parallel
        for pole in (0, 1):
            counted, case = demands.worst(index, pole)
            amps, lasting = float(demands.amps[pole, case, index]), float(demands.continuous[pole, case, index])
            if counted > allowed * (1 + 1e-9) and counted > amps * (1 + 1e-9):
                yield run_finding(
                    "conductor.ampacity", "fail", run, counted, allowed, "A",
                    f"{label(run)} is to be sized for {number(counted)} A, its continuous load raised; "
                    f"{number(allowed)} A is its table ampacity",
                    basis_text(rule.basis),
                    (
                        f"{number(amps - lasting, 4)} A + {number(rule.factor)} x {number(lasting, 4)} A = "
                        f"{number(counted, 4)} A, before correction factors",
                        f"{number(counted, 4)} A > {number(allowed, 4)} A",
                    ),
                    "a size with a higher table ampacity, or less continuous load", context.cases[case].name,
                )  # fmt: skip
                break
