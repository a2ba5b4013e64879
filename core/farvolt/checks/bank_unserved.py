"""Whether the loads are served to the end of the days that the bank is to carry alone, on the plan's own cables."""

import datetime as dt
import math
from collections.abc import Iterator
from typing import TYPE_CHECKING

from farvolt import energy
from farvolt.bank_sizing import sizing
from farvolt.checks.registry import check
from farvolt.context import Context
from farvolt.plan import Battery
from farvolt.results import Finding
from farvolt.units import number

if TYPE_CHECKING:
    from farvolt.day_results import DaysStudy, LoadDays

_MOST_DAYS = 14
_MOST_RUNS = 400
"""Longer plans and times are for `farvolt days`: a check answers at once."""


@check("bank.unserved", title="Loads not served in the days that the bank carries alone, hour by hour")
def unserved(context: Context) -> Iterator[Finding]:
    """Loads that are off before the autonomy asked for is over, where the plan states it: by the drop of their cables,
    or because the bank is empty. Starts full, without sun and chargers, at the end of the bank's life."""
    plan = context.plan
    banks = [one for one in plan.sources if isinstance(one, Battery)]
    asked = plan.bank.autonomy
    if "autonomy" not in plan.bank.model_fields_set or not banks or any(one.capacity is None for one in banks):
        return
    if asked > _MOST_DAYS or len(plan.runs) > _MOST_RUNS:
        yield _not_made(context, asked)
        return
    found = _alone(context, asked)
    for one in found.loads:
        if one.times_off:
            yield _cuts_out(context, found, one, asked)
    if any(one.unserved_Wh > 0 and not one.times_off for one in found.loads):
        yield _empty(found, asked)


def _alone(context: Context, asked: float) -> "DaysStudy":
    """The days of autonomy on the design day, in hours, from a full bank."""
    # Many modules that other plans do without.
    from farvolt import day_course, day_setup, days
    from farvolt.day_results import days_study

    plan = context.plan
    sized = sizing(context.network, energy.budgets(context.network))
    day = sized.day if sized is not None and sized.day in {one.name for one in plan.days} else None
    ready = day_setup.of_network(context.network, context.rulebook)
    # Any date serves: the type of day is given, and no sun shines.
    period = day_course.Period(dt.date(2027, 1, 1), math.ceil(asked))
    course = day_course.course(plan, period, day=day, charging=False)
    hours = max(round(asked * 24), 1)
    return days_study(days.simulate(ready, course.first(hours), day_setup.Start(1.0, aged=True)))


_BASIS = "bank.autonomy of the plan, hour by hour on its cables, from full, at the end of the bank's life"
_LOOK = "look at it with: farvolt days PLAN"


def _cuts_out(context: Context, found: "DaysStudy", one: "LoadDays", asked: float) -> Finding:
    index = next(place for place, load in enumerate(context.plan.loads) if load.name == one.load)
    first = int((found.outcome.off[:, index] * found.outcome.wanted_W[:, index] > 0).argmax())
    charge = found.outcome.sums.charge[max(first - 1, 0)].max()
    return Finding(
        "bank.unserved", "warn", one.load, "load", None, one.unserved_Wh, 0.0, "Wh",
        f'"{one.load}" lets go below its cut-out after {number(first * found.outcome.course.hours)} h of the '
        f"{number(asked)} days that the bank is to carry alone, at {number(100 * charge)} % of charge: it misses "
        f"{number(one.unserved_Wh)} Wh of {number(one.wanted_Wh)} Wh",
        _BASIS, (f"off for {number(one.off_hours)} h in which it is asked for, {one.times_off} times",),
        f"a thicker cable to it, a larger bank, a lower cut-out, or less load; {_LOOK}",
    )  # fmt: skip


def _empty(found: "DaysStudy", asked: float) -> Finding:
    bank = max(found.banks, key=lambda one: one.empty_hours)
    return Finding(
        "bank.unserved", "warn", bank.bank, "source", None, found.unserved_Wh, 0.0, "Wh",
        f'"{bank.bank}" is empty {number(bank.empty_hours)} h before the {number(asked)} days are over that it is to '
        f"carry the loads alone: they miss {number(found.unserved_Wh)} Wh",
        _BASIS, (f"{number(bank.capacity_Ah)} Ah are left of it at the end of its life",),
        f"a larger bank, or less load; {_LOOK}",
    )  # fmt: skip


def _not_made(context: Context, asked: float) -> Finding:
    return Finding(
        "bank.unserved", "note", context.plan.plan.name, "plan", None, None, None, None,
        f"Not worked out hour by hour here: {number(asked)} days of {len(context.plan.runs)} runs take long",
        "bank.autonomy of the plan", (), _LOOK,
    )  # fmt: skip
