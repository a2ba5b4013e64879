"""Time from the text of a plan to its findings, by stage.

python tests/bench/file_to_findings.py [RUNS ...]
"""

import sys
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

from grid import grid

from farvolt import planfile
from farvolt.study import study
from strategies import text_of

SIZES = (50, 500, 5000)


def measure(runs: int) -> dict[str, float]:
    """Seconds to read and to study a plan, and how many findings it has."""
    text = text_of(grid(runs))
    start = time.perf_counter()
    plan = planfile.parse(text)
    read_s = time.perf_counter() - start
    found = study(plan)
    return {
        "runs": len(plan.runs),
        "text_kB": len(text) / 1000,
        "read_s": read_s,
        "study_s": time.perf_counter() - start - read_s,
        "total_s": time.perf_counter() - start,
        "findings": len(found.findings),
    }


def main(sizes: tuple[int, ...] = SIZES) -> None:
    """Print a table."""
    for place, runs in enumerate(sizes):
        row = measure(runs)
        if place == 0:
            print("".join(f"{column:>12}" for column in row))
        print("".join(f"{value:>12.4g}" for value in row.values()), flush=True)


if __name__ == "__main__":
    main(tuple(int(word) for word in sys.argv[1:]) or SIZES)
