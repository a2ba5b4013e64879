"""How long a choice of cables takes, and how far it is proven.

python tests/bench/choice.py [RUNS ...]

Radial plans, invented: a bank, boards in a tree, loads of constant power and current on branches of their own, three
cases. Elapsed time depends on what else the machine does; processor time stands beside it.
"""

import random
import sys
import time
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).parents[1]))

from farvolt import rulebook
from farvolt.choice_options import Wishes
from farvolt.choose import choose
from strategies import plan_of

SIZES = (40, 200)

WISHES: dict[str, dict[str, Any]] = {
    "to 0.1 %": {"gap": 1e-3},
    "5 sizes, 0.5 %": {"gap": 5e-3, "most_sizes": 5},
    "cost per size, 0.5 %": {"gap": 5e-3, "size_cost": 0.2},
}


def radial(runs: int, seed: int = 1, watts: tuple[int, ...] = (5, 8, 12, 20, 30, 45, 60, 90)) -> dict[str, Any]:
    """A 24 V plan of so many runs, as the tables of a plan file."""
    chance, boards = random.Random(seed), max(1, runs // 20)
    rows = [_run("bank", "board 0", 1.2, "terminal fuse", 150)]
    for board in range(1, boards):
        rows.append(_run(f"board {(board - 1) // 3}", f"board {board}", chance.uniform(1, 5), "terminal fuse", 60))
    loads: list[dict[str, Any]] = []
    while len(rows) < runs:
        number = len(loads)
        rows.append(_run(f"board {number % boards}", f"point {number}", chance.uniform(1, 8), "blade", 15))
        load = {"name": f"load {number}", "at": f"point {number}", "power": f"{chance.choice(watts)} W"}
        load |= {"behaves": chance.choice(("power", "power", "current")), "rated_volts": "24 V", "min_volts": "18 V"}
        loads.append(load | {"class": chance.choice(("critical", "other"))})
    for number, row in enumerate(rows):
        row["name"] = f"run {number}"
    names = [load["name"] for load in loads]
    cases = [
        {"name": "all", "loads": dict.fromkeys(names, 0.4)},
        {"name": "evening", "loads": {name: round(chance.uniform(0, 0.6), 2) for name in names}},
        {"name": "low", "loads": {name: chance.choice((0.0, 1.0, 0.3)) for name in names},
         "sources": {"bank": {"emf": "24.4 V"}}},
    ]  # fmt: skip
    bank = {"name": "bank", "kind": "battery", "at": "bank", "emf": "25.6 V", "resistance": "25 mohm"}
    return {
        "format": 1, "plan": {"name": "Radial", "nominal": "24 V", "rulebook": "small-craft-iso"}, "sources": [bank],
        "runs": rows, "devices": [], "loads": loads, "cases": cases,
    }  # fmt: skip


def _run(start: str, end: str, length_m: float, kind: str, rating: int) -> dict[str, Any]:
    protection = {"type": kind, "rating": f"{rating} A", "distance": "0.05 m"}
    return {"from": start, "to": end, "length": f"{length_m:.2f} m", "protection": protection}


def measure(runs: int, seed: int, wishes: dict[str, Any]) -> dict[str, Any]:
    """One choice: elapsed and processor seconds, cost, and how far it is proven."""
    plan = plan_of(radial(runs, seed))
    book = rulebook.load(plan.plan.rulebook)
    begun, used = time.perf_counter(), time.process_time()
    found = choose(plan, book, Wishes(**wishes))
    return {
        "elapsed_s": time.perf_counter() - begun, "processor_s": time.process_time() - used,
        "kg": found.cost or float("nan"), "run_by_run_kg": found.run_by_run_cost,
        "gap_percent": 100 * found.gap if found.gap is not None else float("nan"), "ended": found.ended,
    }  # fmt: skip


def main(sizes: tuple[int, ...] = SIZES, seeds: tuple[int, ...] = (1, 2, 3)) -> None:
    """Print a table."""
    first = True
    for runs in sizes:
        for words, wishes in WISHES.items():
            for seed in seeds:
                row = {"runs": runs, "plan": seed, **measure(runs, seed, wishes), "wish": words}
                if first:
                    print("".join(f"{column:>14}" for column in row))
                first = False
                cells = (f"{one:>14.4g}" if isinstance(one, float) else f"{one:>14}" for one in row.values())
                print("".join(cells), flush=True)


if __name__ == "__main__":
    main(tuple(int(word) for word in sys.argv[1:]) or SIZES)
