"""How a voltage is judged for colour: in percent of its island's nominal, from the worst of a case to the best."""

import math

from farvolt.plan import CHASSIS, Battery, Device, Plan, Run
from farvolt.results import CaseResult
from farvolt_app.palette import Theme, ramp

_LEAST_SPAN = 3.0
"""Percent between the ends of the scale at least, so that it does not make much of little."""


class Scale:
    """The ramp of a case, its ends in whole percents of nominal; `least` equals `most` where nothing is fed."""

    def __init__(self, plan: Plan, case: CaseResult | None, theme: Theme) -> None:
        self.theme = theme
        self._nominal = nominals(plan)
        volts = {one.name: one.volts for one in case.points if one.volts is not None} if case else {}
        percents = [100 * value / self._nominal[name] for name, value in volts.items()]
        self.most = float(math.ceil(max(percents))) if percents else 0.0
        self.least = min(float(math.floor(min(percents))), self.most - _LEAST_SPAN) if percents else 0.0

    def colour(self, point: str, volts: float | None) -> str:
        """The colour of a voltage at a point; that of the paper where there is none."""
        if volts is None or self.least == self.most:
            return self.theme.paper
        percent = 100 * volts / self._nominal[point]
        return ramp(self.theme, (percent - self.least) / (self.most - self.least))


def nominals(plan: Plan) -> dict[str, float]:
    """Nominal voltage in volt of the island that each point lies in, by the rule the solver goes by.

    A source that is not a battery may state the nominal of its island; the reference source has the plan's.
    """
    joined: dict[str, list[str]] = {point: [] for point in plan.point_names}
    between: list[Run | Device] = [*(run for run in plan.runs if run.conducts != "return"), *plan.devices]
    for one in between:
        if CHASSIS not in (one.from_point, one.to_point):
            joined[one.from_point].append(one.to_point)
            joined[one.to_point].append(one.from_point)
    found = dict.fromkeys(joined, plan.plan.nominal.si)
    for source in sorted(plan.sources, key=lambda one: one.name == plan.reference):
        stated = None if isinstance(source, Battery) else source.nominal
        if source.name == plan.reference:
            stated = plan.plan.nominal
        if stated is not None:
            found.update(dict.fromkeys(_reached(source.at, joined), stated.si))
    return found


def _reached(start: str, joined: dict[str, list[str]]) -> set[str]:
    waiting, seen = [start], {start}
    while waiting:
        fresh = [one for one in joined[waiting.pop()] if one not in seen]
        seen.update(fresh)
        waiting += fresh
    return seen
