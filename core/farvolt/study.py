"""The study of a plan: file stages in order, from the plan to the numbers and the findings."""

from collections.abc import Mapping, Sequence
from functools import partial
from pathlib import Path

from farvolt import checks, interim, many, network, operating, protected, protection_choice, solve, temperatures
from farvolt.ampacity import Ampacity
from farvolt.assumptions import assumptions
from farvolt.conductors import Size
from farvolt.context import CaseStudy, Context
from farvolt.errors import Fault, PlanError
from farvolt.integrity import nearest, shown
from farvolt.network import Floats, Network
from farvolt.plan import Case, Plan
from farvolt.results import Study
from farvolt.rulebook import Rulebook, load
from farvolt.solution import Solution
from farvolt.temperatures import Conductors, Mode

MODES: tuple[Mode, ...] = ("plan", "basis", "hot", "cold")

MARGIN_RUNS = 400
"""Margins take some thirty solutions each; they are worked out for plans of up to this many runs."""


def study(plan: Plan, folder: Path | None = None, *, margins: bool = True) -> Study:
    """Solve and check a plan; `folder` is where a rulebook of the user's own is looked for.

    Without `margins` each case's margin is None, for a view that does not show it: they take longer than all the rest.

    Raises RulebookError, and PlanError where the plan names what its rulebook or the tables do not have.
    """
    context = prepared(plan, folder)
    results = tuple(
        one.solutions["plan"].result(
            _margin(one) if margins else None, [found.amps if found else None for found in one.ampacities]
        )
        for one in context.cases
    )
    findings = protection_choice.with_remedies(context, checks.run_all(context))
    taken = assumptions(context)
    # The study keeps the plan as it was written; interim sizes are the context's.
    return Study(
        plan, context.rulebook, results, findings, taken, context.interim, protected.protections(context),
        partial(protected.time_current, context),
    )  # fmt: skip


def prepared(plan: Plan, folder: Path | None = None) -> Context:
    """All cases of a plan solved, under its rulebook. Raises as `study` does."""
    rulebook = load(plan.plan.rulebook, folder)
    faults = _class_faults(plan, rulebook)
    if faults:
        raise PlanError(faults)
    return build_context(plan, rulebook)


def build_context(plan: Plan, rulebook: Rulebook) -> Context:
    """All cases of a plan solved at each conductor temperature, with interim sizes where it states none."""
    chosen = interim.sizes(plan, rulebook)
    plan = interim.with_sizes(plan, chosen)
    net = network.build(plan, rulebook)
    islands = operating.islands(net)
    together = temperatures.laid_together(plan)
    ampacities = [
        tuple(temperatures.run_ampacity(plan, rulebook, run, case, together[run.name]) for run in plan.runs)
        for case in plan.checked_cases
    ]
    conditions = [operating.operating(net, case, islands) for case in plan.checked_cases]
    solutions = _solutions(net, rulebook, conditions, ampacities)
    cases = map(CaseStudy, plan.checked_cases, ampacities, solutions)
    return Context(
        plan,
        rulebook,
        net,
        tuple(cases),
        together,
        partial(_resolve, plan, rulebook),
        partial(_solve_case, net, rulebook, islands),
        chosen,
    )


def _margin(one: CaseStudy) -> float | None:
    """How many times its loads a case holds; None where it does not hold, or where the plan is too large."""
    found = one.solutions["plan"]
    if not found.state.solved or len(found.network.plan.runs) > MARGIN_RUNS:
        return None
    return solve.margin(found.network, found.condition, found.conductors.factor_of_20, found.supply, found.state)


def _solutions(
    net: Network,
    rulebook: Rulebook,
    conditions: Sequence[operating.Operating],
    ampacities: Sequence[tuple[Ampacity | None, ...]],
) -> list[dict[Mode, Solution]]:
    """Every case at each conductor temperature. Cases at equal temperatures are solved together, and once."""
    supplies = [solve.fed(net, condition) for condition in conditions]
    alike: dict[bytes, list[tuple[int, Mode, Conductors]]] = {}
    for mode in MODES:
        for case, (condition, supply) in enumerate(zip(conditions, supplies, strict=True)):
            wanted = _conductors(net, rulebook, condition, supply, ampacities[case], mode)
            alike.setdefault(wanted.factor_of_20.tobytes(), []).append((case, mode, wanted))
    found: list[dict[Mode, Solution]] = [{} for _ in conditions]
    for group in alike.values():
        cases = sorted({case for case, _, _ in group})
        own, fed = [conditions[case] for case in cases], [supplies[case] for case in cases]
        states = dict(zip(cases, many.solve_together(net, own, group[0][2].factor_of_20, fed), strict=True))
        for case, mode, wanted in group:
            found[case][mode] = Solution(net, conditions[case], supplies[case], wanted, states[case])
    return found


def _conductors(
    net: Network,
    rulebook: Rulebook,
    condition: operating.Operating,
    supply: solve.Fed,
    ampacities: tuple[Ampacity | None, ...],
    mode: Mode,
) -> Conductors:
    """The conductor temperatures of a case in a mode; estimated ones are solved with the network."""
    if mode != "plan" or net.plan.plan.conductor_temperature != "estimated":
        return temperatures.at(net.plan, rulebook, condition.case, mode)

    def currents(wanted: Conductors) -> Floats:
        state = solve.solve(net, condition, wanted.factor_of_20, supply)
        return Solution(net, condition, supply, wanted, state).largest_run_amps

    amps = [one.amps if one else None for one in ampacities]
    return temperatures.estimated(net.plan, rulebook, condition.case, currents, amps)


def _resolve(plan: Plan, rulebook: Rulebook, sizes: Mapping[str, Size], case: int, mode: Mode) -> Solution:
    """One case again, with other sizes for some runs."""
    net = network.build(interim.with_sizes(plan, sizes), rulebook)
    return _solve_case(net, rulebook, operating.islands(net), plan.checked_cases[case], mode)


def _solve_case(net: Network, rulebook: Rulebook, islands: operating.Islands, case: Case, mode: Mode) -> Solution:
    """A case on a network as it is."""
    condition = operating.operating(net, case, islands)
    supply = solve.fed(net, condition)
    wanted = temperatures.at(net.plan, rulebook, case, mode)
    return Solution(net, condition, supply, wanted, solve.solve(net, condition, wanted.factor_of_20, supply))


def _class_faults(plan: Plan, rulebook: Rulebook) -> list[Fault]:
    known = list(rulebook.classes)
    accepted = ", ".join(f'"{name}"' for name in known)
    problem = f'the rulebook "{rulebook.name}" has no such class'
    return [
        Fault(f'loads "{one.name}"', "class", shown(one.drop_class), problem, accepted, nearest(one.drop_class, known))
        for one in plan.loads
        if one.drop_class is not None and one.drop_class not in rulebook.classes
    ]
