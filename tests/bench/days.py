"""Time of the days of the van plan: a year in hours, and a week in steps of 5 min, each step solved and certified.

    python tests/bench/days.py [DAYS]

The course (sun, schedules) is worked out beforehand and timed apart, in a process that has its libraries loaded.
"""

import datetime as dt
import sys
import time

from farvolt import day_course, day_setup, days, examples, planfile
from farvolt.day_course import Period
from farvolt.day_results import account

YEAR, WEEK = 365, 7


def measure(period: Period) -> dict[str, float]:
    """Seconds for a period (the better of two goes), and how exact it is."""
    ready = day_setup.prepare(planfile.parse(examples.text("instrument-repair-van")))
    day_course.course(ready.plan, Period(period.start, 1))
    start = time.perf_counter()
    course = day_course.course(ready.plan, period)
    course_s = time.perf_counter() - start
    best, outcome = float("inf"), None
    for _ in range(2):
        start, spent = time.perf_counter(), time.process_time()
        outcome = days.simulate(ready, course)
        seconds = time.perf_counter() - start
        if seconds < best:
            best, cpu_s = seconds, time.process_time() - spent
    assert outcome is not None
    sums = outcome.sums
    return {
        "steps": len(course), "solutions": sums.solutions, "uncertified": sums.uncertified, "course_s": course_s,
        "total_s": best, "cpu_s": cpu_s, "steps_per_s": len(course) / best, "imbalance_A": sums.imbalance_A,
        "energy_error": account(outcome).error,
    }  # fmt: skip


def rows(year: int = YEAR, week: int = WEEK) -> dict[str, dict[str, float]]:
    """The measurements by what they are of."""
    start = dt.date(2027, 1, 1)
    return {"a year in hours": measure(Period(start, year, 60)), "a week in 5 min": measure(Period(start, week, 5))}


def main(days_: int | None = None) -> None:
    """Print a table."""
    found = rows(days_ or YEAR, days_ or WEEK)
    columns = next(iter(found.values()))
    print(f"{'van':18}" + "".join(f"{column:>14}" for column in columns))
    for name, row in found.items():
        print(f"{name:18}" + "".join(f"{row[column]:>14.4g}" for column in columns))


if __name__ == "__main__":
    main(*(int(word) for word in sys.argv[1:2]))
