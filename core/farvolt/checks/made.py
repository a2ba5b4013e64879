"""Ratings that are not made: a plan may ask for a fuse that no shop has."""

from collections.abc import Iterator

from farvolt.checks.registry import check, run_finding
from farvolt.context import Context, label
from farvolt.plan import Plan
from farvolt.protection_types import ProtectionType, protection_type, protection_type_names
from farvolt.results import Finding
from farvolt.units import number


@check("protection.rating-not-made", title="Ratings that are not made of a type of protection")
def rating_not_made(context: Context) -> Iterator[Finding]:
    """Protection of a rating that its type's table does not list."""
    for run in context.plan.runs:
        for guard in run.protections:
            kind, rating = guard.kind, guard.rating.si
            if rating in kind.ratings_A or any(abs(rating - made) <= 1e-6 * made for made in kind.ratings_A):
                continue
            basis = f"{kind.basis} (provisional)" if kind.provisional else kind.basis
            yield run_finding(
                "protection.rating-not-made", "warn", run, rating, None, "A",
                f"{label(run)}: {guard.rating} is not a usual rating of the type {kind.name}", basis,
                (f"Made: {', '.join(number(made) for made in kind.ratings_A)} A",),
                _nearest(context.plan, kind, rating),
            )  # fmt: skip


def _nearest(plan: Plan, kind: ProtectionType, rating: float) -> str:
    near = min(kind.ratings_A, key=lambda made: abs(made - rating))
    known = [*plan.own_types.values(), *(protection_type(name) for name in protection_type_names())]
    others = [
        other.name
        for other in known
        if other != kind and any(abs(rating - made) <= 1e-6 * made for made in other.ratings_A)
    ]
    types = f"; {number(rating)} A is made as {', '.join(others)}" if others else ""
    return f"{number(near)} A is the nearest of this type{types}"
