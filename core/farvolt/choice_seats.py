"""Where protection is to be chosen along with the cable: where a run to choose has none and needs it, or it may change.

A run needs protection of its own where something feeds it that nothing stands before. The runs nearest to their
source are given theirs first: what lies behind them is then protected.
"""

from collections.abc import Mapping
from dataclasses import replace

from farvolt.checks.demand import Demands
from farvolt.checks.ways import failing
from farvolt.choice_options import Seat, Wishes, protected_run
from farvolt.context import Context
from farvolt.network import FEED, build
from farvolt.plan import Plan
from farvolt.protection_types import ProtectionType, protection_type, protection_type_names


def seats(context: Context, plan: Plan, runs: list[int], wishes: Wishes) -> dict[int, Seat]:
    """The runs whose protection is to be chosen. `context` has the runs to choose at their thickest."""
    demands = Demands(context)
    found = dict(_stated(plan, runs, demands)) if wishes.ratings else {}
    for _ in range(len(runs)):
        now = _with(context, found)
        bare = {index: failing(now, index, float("inf")) for index in runs if index not in found}
        ends = {
            index: min(way.before_m for way in ways)
            for index, ways in bare.items()
            if ways and len({way.end for way in ways}) == 1
        }
        if not ends:
            return found
        nearest = min(ends.values())
        for index in [one for one, metres in ends.items() if metres <= nearest + 1e-9]:
            end = bare[index][0].end
            least, _ = demands.worst(index, FEED)
            kind = _kind(context, plan, index, end, least)
            if kind is None:
                return found
            found[index] = Seat(end, kind, least)
    return found


def seated(plan: Plan, places: Mapping[int, Seat]) -> Plan:
    """The plan with protection at its highest rating, which has the least resistance, in every seat."""
    runs = list(plan.runs)
    for index, seat in places.items():
        runs[index] = protected_run(plan, runs[index], seat.kind.name, max(seat.kind.ratings_A), seat.end)
    return plan.model_copy(update={"runs": tuple(runs)})


def _with(context: Context, found: Mapping[int, Seat]) -> Context:
    plan = seated(context.plan, found)
    return replace(context, plan=plan, network=build(plan, context.rulebook))


def _stated(plan: Plan, runs: list[int], demands: Demands) -> list[tuple[int, Seat]]:
    """The seats of runs to choose that have a single protection in their feed, without figures of its own."""
    found = []
    for index in runs:
        mine = [one for one in plan.runs[index].protections if one.pole == "feed"]
        if len(mine) == 1 and mine[0].resistance is None and mine[0].interrupting is None and mine[0].volts is None:
            found.append((index, Seat(mine[0].end, mine[0].kind, demands.worst(index, FEED)[0])))
    return found


def _kind(context: Context, plan: Plan, index: int, end: str, least_A: float) -> ProtectionType | None:
    """The type for a new protection: the plan's own habit first, as long as it interrupts what may flow there."""
    run = context.plan.runs[index]
    point = run.from_point if end == "from" else run.to_point
    fault = context.faults.points.get(point)
    volts = context.cases[0].solutions["plan"].condition.islands.nominal(context.network.feed(point))
    used = [one.kind for other in plan.runs for one in other.protections]
    known = [*plan.own_types.values(), *(protection_type(name) for name in protection_type_names())]
    ranked = [*sorted(dict.fromkeys(used), key=used.count, reverse=True), *known]
    able = [one for one in ranked if one.volts >= volts and max(one.ratings_A) >= least_A]
    amps = fault.amps if fault is not None else 0.0
    enough = [one for one in able if (one.interrupting_at(volts) or 0.0) >= amps]
    best = max(able, key=lambda one: one.interrupting_at(volts) or 0.0, default=None)
    return enough[0] if enough else best
