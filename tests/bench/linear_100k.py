"""Time of one linear solution, beside the whole run of ngspice on the same network, and how it grows.

    python tests/bench/linear_100k.py [RUNS ...]

A battery, resistances of the conductors, and loads that are resistances. ngspice reads the netlist, solves for the
operating point and writes the volts of ten loads; ours is the solution of the built network with its certificate and
all its volts. The exponent is that of a straight line through the points, both axes logarithmic: 1 is linear growth.
"""

import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from grid import grid

from farvolt import network, operating, rulebook
from farvolt.fed import fed
from farvolt.network import Network
from farvolt.operating import Operating
from farvolt.plan import Plan
from farvolt.solve import solve

SIZES = (1000, 3000, 10_000, 30_000, 100_000)
COMPARED = (10_000, 100_000)
"""ngspice takes a minute and more on the largest: it is run on these sizes, or on all that are asked for."""

SHOWN = 10


def resistive(runs: int) -> Plan:
    """The large plan with a battery alone and loads that are resistances."""
    tables: dict[str, Any] = grid(runs)
    tables["sources"] = tables["sources"][:1]
    tables["cases"] = [{"name": "All", "loads": "all"}]
    for load in tables["loads"]:
        load["behaves"] = "resistance"
    return Plan.model_validate(tables)


def netlist(built: Network, condition: Operating, shown: list[int]) -> str:
    """The same network for ngspice, with the volts of some loads to be written."""
    ohms = built.fixed_ohm + built.cable_ohm_20
    lines = ["* resistances of a plan", f"Vground n{condition.source_b[0]} 0 0"]
    branches = zip(built.a, built.b, map(float, ohms), strict=True)
    lines += [f"R{i} n{a} n{b} {ohm!r}" for i, (a, b, ohm) in enumerate(branches)]
    lines += [f"Vbank emf n{condition.source_b[0]} {float(condition.volts[0])!r}"]
    lines += [f"Rbank emf n{condition.source_a[0]} {float(condition.ohm[0])!r}"]
    loads = zip(condition.load_a, condition.load_b, map(float, condition.load_S), strict=True)
    lines += [f"Rload{i} n{a} n{b} {1 / siemens!r}" for i, (a, b, siemens) in enumerate(loads)]
    names = " ".join(f"v(n{condition.load_a[i]},n{condition.load_b[i]})" for i in shown)
    control = ["set numdgt=12", "set wr_singlescale", "op", f"wrdata volts.txt {names}", "quit"]
    return "\n".join([*lines, ".control", *control, ".endc", ".end", ""])


def ngspice(deck: str, seconds: float) -> tuple[float, list[float]]:
    """Seconds of its whole run, and the volts it wrote; infinity and nothing where it takes longer than allowed."""
    with tempfile.TemporaryDirectory() as folder:
        Path(folder, "deck.cir").write_text(deck, encoding="utf-8")
        start = time.perf_counter()
        try:
            subprocess.run(["ngspice", "-b", "deck.cir"], cwd=folder, capture_output=True, timeout=seconds, check=False)
        except subprocess.TimeoutExpired:
            return float("inf"), []
        spent = time.perf_counter() - start
        return spent, [float(word) for word in Path(folder, "volts.txt").read_text(encoding="utf-8").split()[1:]]


def measure(runs: int, compared: bool, seconds: float = 1200) -> dict[str, float]:
    """Seconds of our solution (the best of three) and of ngspice, and the largest difference in volts."""
    plan = resistive(runs)
    start = time.perf_counter()
    built = network.build(plan, rulebook.load("small-craft-iso"))
    row = {"runs": len(plan.runs), "nodes": built.node_count, "network_s": time.perf_counter() - start}
    condition = operating.operating(built, plan.checked_cases[0])
    factor, supply = np.ones(len(plan.runs)), fed(built, condition)
    took = []
    for _ in range(3):
        start = time.perf_counter()
        state = solve(built, condition, factor, supply)
        took.append(time.perf_counter() - start)
    assert state.solved
    row |= {"solve_s": min(took), "imbalance_A": state.imbalance_A}
    if compared and shutil.which("ngspice"):
        shown = np.unique(np.linspace(0, len(plan.loads) - 1, SHOWN).astype(int)).tolist()
        row["ngspice_s"], theirs = ngspice(netlist(built, condition, shown), seconds)
        ours = state.volts[condition.load_a[shown]] - state.volts[condition.load_b[shown]]
        row["times"] = row["ngspice_s"] / row["solve_s"]
        if theirs:
            row["difference_V"] = float(np.abs(ours - theirs).max())
    return row


def exponent(rows: list[dict[str, float]]) -> float:
    """Growth of our time with the number of runs: the slope of a straight line, both axes logarithmic."""
    runs, took = (np.log([row[name] for row in rows]) for name in ("runs", "solve_s"))
    return float(np.polyfit(runs, took, 1)[0])


def main(sizes: tuple[int, ...] = ()) -> None:
    """Print a table and the exponent."""
    columns = ("runs", "nodes", "network_s", "solve_s", "ngspice_s", "times", "difference_V", "imbalance_A")
    print("".join(f"{column:>14}" for column in columns))
    rows = []
    for runs in sizes or SIZES:
        row = measure(runs, bool(sizes) or runs in COMPARED)
        rows.append(row)
        print("".join(f"{row[column]:>14.4g}" if column in row else f"{'-':>14}" for column in columns), flush=True)
    if len(rows) > 1:
        print(f"time of the solution goes with runs to the power of {exponent(rows):.2f}")


if __name__ == "__main__":
    main(tuple(int(word) for word in sys.argv[1:]))
