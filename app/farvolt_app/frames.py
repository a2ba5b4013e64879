"""The numbers of a study as data frames: one row for each case and point, run, load or source.

Columns carry their unit (`voltage_V`, `current_A`); what has no answer is NaN. Full precision, text as in the plan.
"""

from collections.abc import Callable, Iterable
from typing import TYPE_CHECKING, Any

from farvolt.results import CaseResult, Study

if TYPE_CHECKING:
    import pandas as pd

_ENTRIES: dict[str, tuple[str, Callable[[CaseResult], Iterable[Any]], tuple[str, ...]]] = {
    "points": ("point", lambda case: case.points, ("feed_V", "return_V", "volts")),
    "runs": (
        "run",
        lambda case: case.runs,
        ("feed_A", "return_A", "feed_ohm", "return_ohm", "drop_V", "loss_W", "conductor_degC", "ampacity_A"),
    ),
    "loads": ("load", lambda case: case.loads, ("volts", "amps", "watts", "drop_V", "drop_percent")),
    "sources": ("source", lambda case: case.sources, ("volts", "amps", "watts", "input_W")),
}
"""For each frame: what a row names, the entries of a case, and their numbers as `results` has them."""

_UNIT_IN_NAME = {"volts": "voltage_V", "amps": "current_A", "watts": "power_W"}


def frames(study: Study) -> "dict[str, pd.DataFrame]":
    """The frames `points`, `runs`, `loads` and `sources` of all cases.

    The first columns are the case, whether it is solved, and the name; numbers of a case that gives way are NaN.
    """
    import pandas as pd

    found = {}
    for name, (subject, entries, numbers) in _ENTRIES.items():
        rows = [
            [case.name, case.solved, entry.name, *(getattr(entry, number) for number in numbers)]
            for case in study.cases
            for entry in entries(case)
        ]
        columns = [_UNIT_IN_NAME.get(number, number) for number in numbers]
        frame = pd.DataFrame(rows, columns=["case", "solved", subject, *columns])
        found[name] = frame.astype(dict.fromkeys(columns, float))
    return found
