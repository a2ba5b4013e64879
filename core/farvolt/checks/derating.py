"""What a fuse or breaker carries where it sits: its rating, less in a warm place."""

from farvolt.plan import Case, Plan, Protection, Run
from farvolt.units import number

SPREAD = 0.05
"""Typical figures of a kind of part are not known to this share: less derating than that is left out."""


def ambient_degC(plan: Plan, run: Run, one: Protection, case: Case) -> float:
    """Ambient of a protection in a case: of the point it sits at where that has a zone, else of its run."""
    point = run.from_point if one.end == "from" else run.to_point
    return plan.ambient_degC(plan.zone_of_point(point) or plan.zone_of(run), case)


def carried_share(plan: Plan, run: Run, one: Protection, case: Case) -> float:
    """Share of its rating that a protection carries in the ambient of a case; nothing is gained in a cool place."""
    share = min(1.0, one.kind.rating_at_A(1.0, ambient_degC(plan, run, one, case)))
    return 1.0 if share >= 1 - SPREAD and not one.kind.own else share


def derated(plan: Plan, run: Run, one: Protection, case: Case) -> str:
    """The derating as a line of working; empty where the full rating counts."""
    share, kind = carried_share(plan, run, one, case), one.kind
    if share == 1:
        return ""
    each, warm = number(100 * kind.derating_per_K), number(ambient_degC(plan, run, one, case))
    rated = number(kind.reference_degC)
    return f"{one.rating} x (1 - {each} % x ({warm} - {rated}) K) = {number(one.rating.si * share, 4)} A at {warm} degC"
