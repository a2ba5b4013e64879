"""Time of the network and of its solution, beside ngspice on the same network.

    python tests/bench/network_and_solve.py [RUNS ...]

ngspice reads its netlist, finds one operating point and writes it: the whole process is timed.
"""

import shutil
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from grid import grid

from circuit import circuit_of
from farvolt import network, operating, rulebook
from farvolt.plan import Plan
from farvolt.solve import fed, solve
from spice import operating_point

SIZES = (50, 500, 5000, 50_000)
LARGEST_FOR_SPICE = 5000
Answer = TypeVar("Answer")


def timed(work: Callable[[], Answer]) -> tuple[float, Answer]:
    """Seconds of the best of up to three goes, and the answer."""
    best, spent, answer = float("inf"), 0.0, work()
    for _ in range(3):
        start = time.perf_counter()
        answer = work()
        took = time.perf_counter() - start
        best, spent = min(best, took), spent + took
        if spent > 5:
            break
    return best, answer


def measure(runs: int) -> dict[str, float]:
    """Seconds of each stage at a number of runs, and the largest difference to ngspice in volts."""
    plan = Plan.model_validate(grid(runs))
    book = rulebook.load("small-craft-iso")
    case, factor = plan.checked_cases[0], np.ones(len(plan.runs))
    built_s, built = timed(lambda: network.build(plan, book))
    condition_s, condition = timed(lambda: operating.operating(built, case))
    supply_s, supply = timed(lambda: fed(built, condition))
    solve_s, state = timed(lambda: solve(built, condition, factor, supply))
    assert state.solved
    row = {"runs": len(plan.runs), "nodes": built.node_count, "network_s": built_s, "case_s": condition_s}
    row |= {"supply_s": supply_s, "solve_s": solve_s, "imbalance_A": state.imbalance_A}
    if runs <= LARGEST_FOR_SPICE and shutil.which("ngspice"):
        circuit = circuit_of(plan, case)
        row["ngspice_s"], volts = timed(lambda: operating_point(circuit))
        ours = [state.volts[built.feed(load.at)] - state.volts[built.ret(load.at)] for load in plan.loads]
        if volts is not None:
            pins = circuit.pins
            theirs = [volts[pins[load.at, "+"]] - volts[pins[load.at, "-"]] for load in plan.loads]
            row["difference_V"] = float(np.abs(np.array(ours) - theirs).max())
    return row


def main(sizes: tuple[int, ...] = SIZES) -> None:
    """Print a table."""
    columns = (
        "runs",
        "nodes",
        "network_s",
        "case_s",
        "supply_s",
        "solve_s",
        "ngspice_s",
        "difference_V",
        "imbalance_A",
    )
    print("".join(f"{column:>14}" for column in columns))
    for runs in sizes:
        row = measure(runs)
        print("".join(f"{row[column]:>14.4g}" if column in row else f"{'-':>14}" for column in columns), flush=True)


if __name__ == "__main__":
    main(tuple(int(word) for word in sys.argv[1:]) or SIZES)
