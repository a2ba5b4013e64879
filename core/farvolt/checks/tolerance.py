"""Voltages within the tolerances that a plan states, where bounds on them are proven."""

from collections.abc import Iterator
from typing import TYPE_CHECKING

from farvolt.checks.registry import apart, check
from farvolt.context import CaseStudy, Context
from farvolt.results import Finding
from farvolt.solve import State
from farvolt.units import number

if TYPE_CHECKING:
    from farvolt.tolerances import Spread

_BASIS = "the load's own range and the tolerances, as the plan states them; bounds proven for a tree fed by one source"


@check("volts.tolerance", title="Voltage at each load when what is built differs within the stated tolerances")
def tolerance(context: Context) -> Iterator[Finding]:
    """Loads that pass as planned but may leave their range within the tolerances that the plan states."""
    if "tolerances" not in context.plan.model_fields_set:
        return
    from farvolt.proof import proof  # what most plans do not need takes a while to import

    sampled = []
    for one in context.cases:
        found = one.solutions["plan"]
        if not any(found.condition.load_W) and not any(found.condition.load_A):
            continue
        if proof(found.network, found.condition, found.supply).reach == "all":
            yield from _at_the_ends(context, one)
        else:
            sampled.append(one.name)
    if sampled:
        yield _not_proven(context, sampled)


def _at_the_ends(context: Context, one: CaseStudy) -> Iterator[Finding]:
    """What breaks a load's range with all tolerances at one end, and does not as planned."""
    from farvolt.tolerances import loads_on, spread

    within = spread(context, one)
    low, high = within.corner(within.lowers), within.corner(within.raises)
    if not low.solved:
        if one.solutions["hot"].state.solved:
            yield _gives_way(one, low)
        return
    loads = loads_on(within.condition, within.supply, len(context.plan.loads))
    for load in loads:
        yield from _beyond(context, one, within, load, (low, high))


def _beyond(
    context: Context, one: CaseStudy, within: "Spread", load: int, ends: tuple[State, State]
) -> Iterator[Finding]:
    entry = context.plan.loads[load]
    low_V, high_V = (float(within.load_volts(state)[load]) for state in ends)
    hot_V, cold_V = (float(one.solutions[mode].load_volts[load]) for mode in ("hot", "cold"))
    if entry.min_volts and hot_V >= entry.min_volts.si > low_V:
        remedy = (
            f'thicker or shorter cable; farvolt tolerances --load "{entry.name}" shows which tolerance matters most'
        )
        yield _finding(one, entry.name, low_V, entry.min_volts.si, hot_V, True, remedy)
    if entry.max_volts and cold_V <= entry.max_volts.si < high_V:
        remedy = "a source held more closely to its voltage, or a load that stands more; thinner cable is no cure"
        yield _finding(one, entry.name, high_V, entry.max_volts.si, cold_V, False, remedy)


def _finding(one: CaseStudy, load: str, volts: float, limit: float, planned: float, low: bool, remedy: str) -> Finding:
    bound, needs, sign = ("as little as", "at least", "<") if low else ("as much as", "at most", ">")
    told, end = apart(volts, limit, 4), "lowers" if low else "raises"
    return Finding(
        "volts.tolerance", "warn", load, "load", one.name, volts, limit, "V",
        f'Within the tolerances "{load}" may see {bound} {told} V; it needs {needs} {number(limit, 4)} V',
        _BASIS,
        (
            f"As planned, conductors {'hot' if low else 'cold'}: {number(planned, 4)} V.",
            f"Every tolerance at the end that {end} voltages, solved: {told} V {sign} {number(limit, 4)} V",
        ),
        remedy,
    )  # fmt: skip


def _gives_way(one: CaseStudy, state: State) -> Finding:
    held = number(100 * state.share_held)
    return Finding(
        "volts.tolerance", "warn", one.name, "case", one.name, state.share_held, 1.0, None,
        f"The case holds as planned, but gives way at {held} % of its loads with every tolerance at its worst",
        _BASIS,
        (f"Loads raised together from zero: the last share that holds is {number(state.share_held, 4)}.",),
        "fewer loads at once, thicker cable, or more source capacity",
    )  # fmt: skip


def _not_proven(context: Context, cases: list[str]) -> Finding:
    listed = ", ".join(f'"{name}"' for name in cases[:8]) + (f" and {len(cases) - 8} more" if len(cases) > 8 else "")
    return Finding(
        "volts.tolerance", "note", context.plan.plan.name, "plan", None, None, None, None,
        f"Not checked: voltages within the tolerances in {len(cases)} of {len(context.cases)} cases, where no bound on "
        f"them is proven: {listed}",
        _BASIS,
        ("Several sources, loops, converters, diodes or loads of constant resistance are at work there.",),
        "farvolt tolerances samples these cases, and says what the samples can claim",
    )  # fmt: skip
