"""Time of `farvolt check` on an example plan from a cold start: a new process each time.

Beside the time on the clock stands that of the processor, which does not grow when other work runs beside.

python tests/bench/cold_start.py [TIMES]
"""

import resource
import subprocess
import sys
import time

from farvolt_data import ROOT

PLAN = ROOT / "examples" / "instrument-repair-van.toml"
COMMAND = [sys.executable, "-c", "from farvolt_app.cli import main; main()", "check", str(PLAN)]


def measure(times: int) -> list[tuple[float, float]]:
    """Seconds on the clock and of the processor, of each of so many runs; raises where the command does not work."""
    found = []
    for _ in range(times):
        start, spent = time.perf_counter(), processor_s()
        done = subprocess.run(COMMAND, capture_output=True, text=True, check=False)
        found.append((time.perf_counter() - start, processor_s() - spent))
        # 1 is a plan with findings that fail.
        if done.returncode not in (0, 1) or not done.stdout:
            raise RuntimeError(f"farvolt check ended with {done.returncode}: {done.stderr.strip()}")
    return found


def processor_s() -> float:
    """Processor time of all ended child processes."""
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


def main(times: int = 7) -> None:
    """Print the spread."""
    for name, seconds in zip(("clock", "processor"), zip(*measure(times), strict=True), strict=True):
        ordered = sorted(seconds)
        middle = ordered[len(ordered) // 2]
        print(f"farvolt check, {name:>9}: best {ordered[0]:.3f} s, median {middle:.3f} s, worst {ordered[-1]:.3f} s")


if __name__ == "__main__":
    main(*(int(word) for word in sys.argv[1:2]))
