"""How a voltage is judged for colour: in percent of its island's nominal, from the worst of a case to the best."""

import math

from farvolt.plan import Plan
from farvolt.results import CaseResult
from farvolt_app.palette import Theme, ramp

_LEAST_SPAN = 3.0
"""Percent between the ends of the scale at least, so that it does not make much of little."""


class Scale:
    """The ramp of a case, its ends in whole percents of nominal; `least` equals `most` where nothing is fed."""

    def __init__(self, plan: Plan, case: CaseResult | None, theme: Theme) -> None:
        self.theme = theme
        self._nominal = dict.fromkeys(plan.point_names, plan.plan.nominal.si) | dict(case.nominal_V if case else {})
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
