"""Protection against what the maker of each load allows before it."""

from collections.abc import Iterator

from farvolt.checks.registry import apart, check
from farvolt.checks.upstream import Arrival, Upstream
from farvolt.context import Context, label
from farvolt.plan import Load
from farvolt.results import Finding
from farvolt.units import number

_MAKER = "the load's maker, as the plan states it (max_protection)"


@check("protection.over-load-limit", title="Nearest protection against the highest that each load's maker allows")
def over_load_limit(context: Context) -> Iterator[Finding]:
    """Loads with a stated highest protection that stand behind a higher one, or behind none."""
    if all(load.max_protection is None for load in context.plan.loads):
        return
    upstream = Upstream(context)
    for load in context.plan.loads:
        if load.max_protection is None:
            continue
        limit, ways = load.max_protection.si, upstream.at(load.at)
        bare = [one for one in ways if one.amps(context) is None]
        over = [one for one in ways if (one.amps(context) or 0.0) > limit * (1 + 1e-9)]
        if bare:
            yield _bare(context, load, bare)
        elif over:
            yield _over(context, load, max(over, key=lambda one: one.amps(context) or 0.0))


def _over(context: Context, load: Load, way: Arrival) -> Finding:
    """The way that lets through most: its protection, or a source's own limit that no lower protection cuts."""
    assert load.max_protection is not None
    amps, limit = way.amps(context) or 0.0, load.max_protection.si
    source = context.plan.sources[way.source].name
    compared = f"{apart(amps, limit)} A > {number(limit)} A"
    if way.protection is None:
        message = f'"{load.name}": "{source}" can feed it {apart(amps, limit)} A without protection'
        working, remedy = f'No protection on the way from "{source}": {compared}', _in_its_own_feed(load)
    else:
        on, rating = label(context.plan.runs[way.run]), number(way.protection.rating.si)
        message = f'"{load.name}" is protected by the {way.protection.rating} on {on}'
        working = f'Nearest protection from "{source}": {rating} A on {on}; {compared}'
        lower = max((one for one in way.protection.kind.ratings_A if one <= limit), default=None)
        less = f"{number(lower)} A on {on}, if that still carries all behind it" if lower else ""
        remedy = "; or ".join(filter(None, (less, _in_its_own_feed(load))))
    return Finding(
        "protection.over-load-limit", "fail", load.name, "load", None, amps, limit, "A",
        f"{message}; its maker allows at most {load.max_protection}", _MAKER, (working,), remedy,
    )  # fmt: skip


def _bare(context: Context, load: Load, ways: list[Arrival]) -> Finding:
    assert load.max_protection is not None
    names = " and ".join(dict.fromkeys(f'"{context.plan.sources[one.source].name}"' for one in ways))
    return Finding(
        "protection.over-load-limit", "fail", load.name, "load", None, None, load.max_protection.si, "A",
        f'"{load.name}": nothing protects it from {names}; its maker asks for at most {load.max_protection}',
        _MAKER, (f"No protection in the feed on the way from {names}",), _in_its_own_feed(load),
    )  # fmt: skip


def _in_its_own_feed(load: Load) -> str:
    return f'a protection of at most {load.max_protection} in the feed of "{load.name}" alone'
