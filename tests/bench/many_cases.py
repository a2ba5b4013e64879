"""Time of many cases of one network at once, the certificate of each included, beside a sample of them one by one.

    python tests/bench/many_cases.py [CASES]

Two plans: 200 runs with 100 constant-power loads on a battery, each case with other load shares; and the van of the
examples through a year of hours (8,760 cases unless told otherwise): other shares, battery voltage and sun each hour.
Beside the time on the clock stands that of the processor, which grows little when other work runs beside.
"""

import os
import sys
import time
from dataclasses import replace
from pathlib import Path
from typing import Any

# Threads for matrices as small as these only wait for each other; the command line does the same.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from farvolt import examples, network, operating, planfile, rulebook
from farvolt.fed import fed
from farvolt.many import Changes, Many, shared_demand, solve_many
from farvolt.network import Network
from farvolt.operating import Operating
from farvolt.plan import Plan
from farvolt.solve import solve

CASES, HOURS, SAMPLE = 10_000, 8760, 20
LOADS = 100


def boards() -> Plan:
    """Ten boards in a chain, ten loads of 30 W at each, every load with a feeder and a last stretch: 200 runs."""
    runs, loads = [], []
    for board in range(LOADS // 10):
        before = f"board {board - 1}" if board else "bank"
        runs.append(_run(before, f"board {board}", "50 mm2", 1))
        for place in range(10 * board, 10 * board + 10):
            runs.append(_run(f"board {board}", f"load point {place}", "4 mm2", 2 + place % 5))
            if len(runs) + LOADS - place - 1 < 2 * LOADS:
                runs.append(_run(f"load point {place}", f"outlet {place}", "2.5 mm2", 1))
            loads.append({"name": f"load {place}", "at": runs[-1]["to"], "power": "30 W"})
    for number, run in enumerate(runs):
        run["name"] = f"run {number}"
    bank = {"name": "bank", "kind": "battery", "at": "bank", "emf": "51.2 V", "resistance": "5 mohm"}
    head, case = {"name": "Boards", "nominal": "48 V"}, {"name": "All", "loads": "all"}
    rows = {"sources": [bank], "runs": runs, "loads": loads, "cases": [case]}
    return Plan.model_validate({"format": 1, "plan": head, **rows})


def _run(start: str, end: str, size: str, length_m: float) -> dict[str, Any]:
    return {"from": start, "to": end, "length": f"{length_m} m", "size": size, "strand": "flexible"}


def ready(plan: Plan, case: int = 0) -> tuple[Network, Operating]:
    """Network and condition of one of a plan's cases."""
    built = network.build(plan, rulebook.load(plan.plan.rulebook))
    return built, operating.operating(built, plan.checked_cases[case])


def year(condition: Operating, hours: int) -> dict[str, np.ndarray]:
    """Hours of the van while it drives: shares of its loads, battery volts, and the power that the roof panels have."""
    chance = np.random.default_rng(8760)
    changes = shared_demand(condition, chance.uniform(0, 1, (hours, len(condition.load_a))))
    volts, power = np.tile(condition.volts, (hours, 1)), np.tile(condition.power, (hours, 1))
    volts[:, 0] *= chance.uniform(0.95, 1.01, hours)
    sun = np.maximum(np.sin(2 * np.pi * np.arange(hours) / 24), 0.01)
    power[:, np.isfinite(condition.power)] *= sun[:, None]
    return changes | {"volts": volts, "power": power}


def measure(built: Network, condition: Operating, changes: Changes) -> dict[str, float]:
    """Seconds for all cases (the best of three goes), and what the same cost one by one, from a sample."""
    factor = np.ones(len(built.plan.runs))
    best, spent, found = float("inf"), float("inf"), None
    for _ in range(3):
        start, before = time.perf_counter(), time.process_time()
        found = solve_many(built, condition, factor, changes)
        best, spent = min(best, time.perf_counter() - start), min(spent, time.process_time() - before)
    assert found is not None
    assert found.solved.all()
    cases = len(found)
    sample = np.linspace(0, cases - 1, min(SAMPLE, cases)).astype(int)
    start = time.perf_counter()
    difference = max(_difference_V(built, condition, factor, changes, found, int(case)) for case in sample)
    alone_s = (time.perf_counter() - start) / len(sample)
    return {
        "runs": len(built.plan.runs), "loads": len(built.plan.loads), "cases": cases, "together": found.together.sum(),
        "total_s": best, "processor_s": spent, "each_us": 1e6 * best / cases, "alone_us": 1e6 * alone_s,
        "difference_V": difference, "imbalance_A": found.imbalance_A.max(),
    }  # fmt: skip


def _difference_V(
    built: Network, condition: Operating, factor: np.ndarray, changes: Changes, found: Many, case: int
) -> float:
    alone = solve(built, replace(condition, **{name: values[case] for name, values in changes.items()}), factor)
    return float(np.nanmax(np.abs(alone.volts - found.volts[case])))


def rows(cases: int = CASES, hours: int = HOURS) -> dict[str, dict[str, float]]:
    """The measurements by the name of the plan."""
    built, condition = ready(boards())
    shares = np.random.default_rng(200).uniform(0, 1, (cases, LOADS))
    found = {"boards": measure(built, condition, shared_demand(condition, shares))}
    van = planfile.parse(examples.text("instrument-repair-van"))
    driving = next(place for place, case in enumerate(van.checked_cases) if "Driving" in case.name)
    built, condition = ready(van, driving)
    assert fed(built, condition).source_on.sum() > 1
    return found | {"van, a year of hours": measure(built, condition, year(condition, hours))}


def main(cases: int | None = None) -> None:
    """Print a table."""
    found = rows(cases or CASES, cases or HOURS)
    columns = next(iter(found.values()))
    print(f"{'plan':22}" + "".join(f"{column:>14}" for column in columns))
    for name, row in found.items():
        print(f"{name:22}" + "".join(f"{row[column]:>14.4g}" for column in columns))


if __name__ == "__main__":
    main(*(int(word) for word in sys.argv[1:2]))
