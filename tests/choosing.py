"""Small random plans whose cables are to be chosen, and the best choice by trying every combination of sizes.

The judge here is the list of findings of the whole program, not the model that chooses.
"""

import itertools
import random
from dataclasses import dataclass
from typing import Any

from farvolt import checks, rulebook
from farvolt.choice_options import Wishes, cable_cost
from farvolt.conductors import Size, parse_size
from farvolt.plan import Plan
from farvolt.study import build_context
from strategies import plan_of

STOCK = {
    "metric": ("1.5 mm2", "4 mm2", "10 mm2", "25 mm2"),
    "AWG": ("14 AWG", "10 AWG", "6 AWG", "2 AWG"),
}

RULES = {
    rule
    for one in checks.checks()
    for rule in one.rules
    if rule.startswith(("conductor.", "protection.", "drop.", "volts."))
}
GROUPS = ("conductor.", "protection.", "drop.", "volts.")

_CABLE = ("protection.over-conductor", "protection.missing")

Failed = frozenset[tuple[str, str]]


@dataclass(frozen=True)
class Tried:
    """Every combination of sizes with its cost and what fails in it."""

    costs: list[float]
    failed: list[Failed]

    @property
    def always(self) -> Failed:
        """What fails whatever is chosen."""
        return frozenset.intersection(*self.failed)

    @property
    def least(self) -> float | None:
        """The least cost of a combination that passes; None where no size is enough for a load or a rating.

        What else fails of protection in every combination is left out of account, and so is what devices can interrupt
        where no combination meets that and all the rest: thin cables are no cure for it.
        """
        if any(rule.startswith(("drop.", "volts.", "conductor.")) or rule in _CABLE for rule, _ in self.always):
            return None
        whole = self._least(self.always)
        if whole is not None:
            return whole
        interrupting = {one for failed in self.failed for one in failed if one[0] == "protection.interrupting"}
        return self._least(self.always | interrupting)

    def _least(self, allowed: Failed) -> float | None:
        passing = [cost for cost, failed in zip(self.costs, self.failed, strict=True) if failed <= allowed]
        return min(passing, default=None)


def draft(chance: random.Random, *, behaviours: tuple[str, ...] = ("power", "current"), charger: bool = False) -> Any:
    """A bank, a main run, one or two boards and two or three loads, as the tables of a plan file."""
    nominal = chance.choice((12, 24))
    book = chance.choice(("small-craft-iso", "leisure-vehicle-eu", "small-craft-us"))
    runs = [_run(chance, "main", "bank", "board", "terminal fuse", chance.choice((60, 100, 150)), (0.5, 3))]
    ends = ["board"]
    if chance.random() < 0.4:
        runs.append(_run(chance, "sub", "board", "far board", "terminal fuse", chance.choice((30, 60)), (1, 6)))
        ends.append("far board")
    loads = []
    for number in range(3 - len(runs)):
        amps = chance.uniform(1, 12)
        runs.append(
            _run(
                chance, f"run {number}", chance.choice(ends), f"end {number}", "blade", chance.choice((15, 20)), (1, 9)
            )
        )
        load = {"name": f"load {number}", "at": f"end {number}", "power": f"{amps * nominal:.4g} W"}
        load |= {"behaves": chance.choice(behaviours), "class": chance.choice(("critical", "other"))}
        if chance.random() < 0.5:
            load["min_volts"] = f"{nominal * chance.uniform(0.88, 1.02):.4g} V"
        if chance.random() < 0.3:
            load["max_volts"] = f"{nominal * chance.uniform(1.06, 1.3):.4g} V"
        loads.append(load)
    bank = {"name": "bank", "kind": "battery", "at": "bank", "emf": f"{nominal * 1.06:.4g} V"}
    bank |= {"resistance": f"{chance.uniform(4, 30):.3g} mohm", "capacity": "200 Ah"}
    shares = {load["name"]: round(chance.uniform(0, 1), 2) for load in loads}
    cases: list[dict[str, Any]] = [{"name": "all", "loads": "all"}, {"name": "some", "loads": shares}]
    cases[1]["sources"] = {"bank": {"emf": f"{nominal * 1.01:.4g} V"}}
    sources = [bank]
    if charger:
        sources.append(
            {"name": "mains", "kind": "charger", "at": "board", "volts": f"{nominal * 1.2} V", "amps": "30 A"}
        )
        cases[0]["sources"] = {"mains": "off"}
    return {
        "format": 1, "plan": {"name": "Small", "nominal": f"{nominal} V", "rulebook": book}, "sources": sources,
        "runs": runs, "devices": [], "loads": loads, "cases": cases,
    }  # fmt: skip


def _run(
    chance: random.Random, name: str, start: str, end: str, kind: str, rating: int, metres: tuple[float, float]
) -> dict[str, Any]:
    return {
        "name": name, "from": start, "to": end, "length": f"{chance.uniform(*metres):.3g} m",
        "protection": {"type": kind, "rating": f"{rating} A", "distance": "0.1 m"},
    }  # fmt: skip


def stock(plan: Plan) -> tuple[Size, ...]:
    """The sizes to try, of the system of the plan's rulebook."""
    return tuple(parse_size(name) for name in STOCK[rulebook.load(plan.plan.rulebook).default_system])


def every_combination(plan: Plan, sizes: tuple[Size, ...]) -> Tried:
    """Solve and check the plan with each combination of sizes."""
    book, costs, failed = rulebook.load(plan.plan.rulebook), [], []
    for combination in itertools.product(sizes, repeat=len(plan.runs)):
        pairs = zip(plan.runs, combination, strict=True)
        sized = plan.model_copy(update={"runs": tuple(run.model_copy(update={"size": size}) for run, size in pairs)})
        costs.append(sum(cable_cost(run, book, Wishes()) for run in sized.runs))
        failed.append(_failed(sized))
    return Tried(costs, failed)


def _failed(plan: Plan) -> Failed:
    found = checks.run_some(build_context(plan, rulebook.load(plan.plan.rulebook)), RULES)
    doubtful = ("protection.over-conductor", "drop.load", "drop.branch")
    return frozenset(
        (one.rule, one.subject)
        for one in found
        if one.rule.startswith(GROUPS)
        and (
            one.severity == "fail"
            or (one.severity == "warn" and one.rule in doubtful and "together" not in one.message)
        )
    )


def small(seed: int, **wishes: Any) -> Plan:
    """A random small plan."""
    return plan_of(draft(random.Random(seed), **wishes))
