"""What may be chosen for each run: conductor sizes, cables in parallel and, where it is left open, its protection.

An option is kept only if the cable can carry the current that it has at the very least, is allowed by the rulebook,
fits the terminals and is allowed behind the protection that stands before it. What depends on other runs is left to
the model.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Literal, Protocol

from farvolt.checks.rating import binding_guards, limit_for
from farvolt.checks.smallest import small_allowed
from farvolt.checks.ways import exempt, failing
from farvolt.conductors import Size, made_sizes, mass_kg_per_m, resistance_20_ohm_per_m
from farvolt.context import Context
from farvolt.interim import free
from farvolt.network import FEED, conductor_lengths_m, joints_ohm, protection_ohm, return_size, strand
from farvolt.plan import Plan, Protection, Run
from farvolt.protection_types import ProtectionType
from farvolt.rulebook import Rulebook
from farvolt.sections import Guard
from farvolt.temperatures import run_ampacity

Objective = Literal["mass", "cost"]

_AT_LIMIT = 1 + 1e-9
_PREFERENCE = 1e-7
"""Share of a cost by which, of two options that cost the same, the lower rating is preferred."""


class Prices(Protocol):
    """What a price list has to answer; None where it has no such thing."""

    def cable_per_m(self, size: Size, material: str, strand: str) -> float | None:
        """Price of a metre of one conductor."""

    def protection(self, kind: str, rating_A: float) -> float | None:
        """Price of a fuse or breaker of a type and rating."""


@dataclass(frozen=True, slots=True)
class Wishes:
    """What is to be chosen, and by what."""

    objective: Objective = "mass"
    prices: Prices | None = None
    sizes: tuple[Size, ...] = ()
    """Sizes in stock; all that are made of the plan's system where none is named."""
    most_sizes: int | None = None
    """The greatest number of different sizes to buy."""
    size_cost: float = 0.0
    """What each different size costs beside its length, in the unit of the objective."""
    runs: Literal["free", "all"] | frozenset[str] = "free"
    """Runs to choose: those without a size, all, or the ones named beside those without a size."""
    parallel: int = 1
    """Up to so many equal cables side by side, where the plan states no number of its own."""
    ratings: bool = False
    """Whether ratings of protection that the plan states on chosen runs may change as well."""
    gap: float = 1e-3
    """Share of the cost to which the choice is to be proven."""
    time_limit_s: float = 60.0
    drop_factor: float = 1.0
    """Times every limit on drop: for what a tighter or looser limit costs."""

    @property
    def unit(self) -> str:
        """Unit of the objective."""
        return "kg" if self.objective == "mass" else "of the price list"


@dataclass(frozen=True, slots=True)
class Option:
    """One way to build a run. Resistances in ohm by pole (feed, return)."""

    run: int
    size: Size
    parallel: int
    rating_A: float | None
    """The rating that goes with it; None where protection stays as the plan states it."""
    kind: str
    """Type of that protection, or nothing."""
    end: str
    cost: float
    cable_ohm_20: tuple[float, float]
    fixed_ohm: tuple[float, float]
    limit_A: float
    """The highest rating of a protection that this cable may stand behind."""
    area_mm2: float
    """Of all conductors of one pole together."""


@dataclass(slots=True)
class Options:
    """All options, by run of the plan; `refused` says of each run why its thinner sizes are out."""

    by_run: dict[int, list[Option]] = field(default_factory=dict)
    refused: dict[int, dict[str, str]] = field(default_factory=dict)
    """Run to (size, the rule that it breaks)."""

    @property
    def every(self) -> list[Option]:
        """The options of all runs, one after the other."""
        return [option for options in self.by_run.values() for option in options]


def chosen_runs(plan: Plan, wishes: Wishes) -> list[int]:
    """Places of the runs to choose: a run of measured resistance stays as it is."""
    named = wishes.runs if isinstance(wishes.runs, frozenset) else frozenset()
    return [
        index
        for index, run in enumerate(plan.runs)
        if run.resistance is None and (free(run) or wishes.runs == "all" or run.name in named)
    ]


def sizes_for(plan: Plan, rulebook: Rulebook, wishes: Wishes) -> tuple[Size, ...]:
    """Sizes to choose from, by rising area: those in stock, else those made of the system of the plan's own sizes."""
    if wishes.sizes:
        return tuple(sorted(set(wishes.sizes), key=lambda size: size.area_mm2))
    systems = [run.size.system for run in plan.runs if run.size is not None]
    system = max(systems, key=systems.count) if systems else rulebook.default_system
    return made_sizes(system)


def with_options(plan: Plan, options: Mapping[int, Option]) -> Plan:
    """The plan with an option for each of some runs."""
    runs = tuple(_built(plan, run, options[index]) if index in options else run for index, run in enumerate(plan.runs))
    return plan.model_copy(update={"runs": runs})


def _built(plan: Plan, run: Run, option: Option) -> Run:
    changed = run.model_copy(update={"size": option.size, "parallel": option.parallel})
    if option.rating_A is None:
        return changed
    return protected_run(plan, changed, option.kind, option.rating_A, option.end)


def protected_run(plan: Plan, run: Run, kind: str, rating_A: float, end: str) -> Run:
    """The run with this protection in its feed at that end, instead of what is there."""
    present = next((one for one in run.protections if one.pole == "feed" and one.end == end), None)
    made = Protection.model_validate({
        "type": kind, "rating": f"{rating_A:.15g} A", "end": end,
        **({} if present is None or present.distance is None else {"distance": present.distance}),
    })  # fmt: skip
    made.is_of(plan.own_types)
    others = tuple(one for one in run.protections if one is not present and (one.pole, one.end) != ("feed", end))
    return run.model_copy(update={"protection": (*others, made), "protection_to": None})


@dataclass(frozen=True, slots=True)
class Seat:
    """Where the protection of a run is to be chosen."""

    end: str
    kind: ProtectionType
    least_A: float
    """What it has to carry."""


class Builder:
    """Finds the options of a plan's runs. `best` is the plan solved with every chosen run at its thickest."""

    def __init__(self, best: Context, wishes: Wishes, runs: list[int], sizes: tuple[Size, ...]) -> None:
        self.best, self.wishes, self.runs, self.sizes = best, wishes, runs, sizes
        self.points = {point.name: point for point in best.plan.points}

    def options(self, original: Plan, seats: Mapping[int, Seat]) -> Options:
        """The options of every run to choose; `seats` are the runs whose protection is to be chosen as well."""
        found = Options()
        for index in self.runs:
            found.refused[index] = {}
            found.by_run[index] = list(self._of_run(original.runs[index], index, seats, found.refused[index]))
        return found

    def _of_run(self, run: Run, index: int, seats: Mapping[int, Seat], refused: dict[str, str]) -> Iterator[Option]:
        most = max(run.parallel, self.wishes.parallel) if run.parallel == 1 else run.parallel
        for parallel in range(run.parallel, most + 1):
            for size in self.sizes:
                built = self.best.plan.runs[index].model_copy(update={"size": size, "parallel": parallel})
                why, limit_A = self._refused(built, index, seats)
                if why:
                    refused[size.name] = why
                    continue
                for rating in self._ratings(seats.get(index), limit_A):
                    yield self._option(built, index, seats.get(index), rating, limit_A)

    def _ratings(self, seat: Seat | None, limit_A: float) -> list[float | None]:
        if seat is None:
            return [None]
        return [one for one in seat.kind.ratings_A if seat.least_A <= one * _AT_LIMIT and one <= limit_A * _AT_LIMIT]

    def _refused(self, run: Run, index: int, seats: Mapping[int, Seat]) -> tuple[str, float]:
        """The rule that forbids a size ("" where none does), and the highest rating its cable allows."""
        context = self.best
        extra = (run.parallel - context.plan.runs[index].parallel) * (2 if run.conducts == "both" else 1)
        together = context.together[run.name] + extra
        lowest = float("inf")
        for one in context.cases:
            found = run_ampacity(context.plan, context.rulebook, run, one.case, together)
            if found is None or found.amps is None:
                return "conductor.ampacity", 0.0
            lowest = min(lowest, found.amps)
            if not one.case.surge and one.solutions["hot"].largest_run_amps[index] > found.amps * _AT_LIMIT:
                return "conductor.ampacity", 0.0
        if not small_allowed(context, index, run):
            return "conductor.minimum-size", 0.0
        if self._too_thick(run):
            return "conductor.fit", 0.0
        limit_A = float("inf") if exempt(context, run) else limit_for(context, run, lowest).amps
        if index not in seats and failing(context, index, lowest):
            return "protection.missing", limit_A
        fixed = [one for one in binding_guards(context, index, lowest) if one.run not in seats]
        if any(one.rating_A > limit_A * _AT_LIMIT for one in fixed):
            return "protection.over-conductor", limit_A
        return "", limit_A

    def _too_thick(self, run: Run) -> bool:
        ends = [self.points.get(name) for name in (run.from_point, run.to_point)]
        largest = [one.largest_size.area_mm2 for one in ends if one is not None and one.largest_size is not None]
        return run.size is not None and run.size.area_mm2 > min(largest, default=float("inf")) * _AT_LIMIT

    def _option(self, run: Run, index: int, seat: Seat | None, rating: float | None, limit_A: float) -> Option:
        assert run.size is not None
        if seat is not None and rating is not None:
            run = protected_run(self.best.plan, run, seat.kind.name, rating, seat.end)
        assert run.size is not None
        cable, fixed = ohm_of(run, self.best)
        cost = self.cost(run) * (1 + _PREFERENCE * (rating or 0.0))
        prices = self.wishes.prices if self.wishes.objective == "cost" else None
        if seat is not None and rating is not None and prices is not None:
            cost += prices.protection(seat.kind.name, rating) or 0.0
        kind, end = (seat.kind.name, seat.end) if seat is not None else ("", "")
        area = run.size.area_mm2 * run.parallel
        return Option(index, run.size, run.parallel, rating, kind, end, cost, cable, fixed, limit_A, area)

    def cost(self, run: Run) -> float:
        """What the cable of a run costs, in the unit of the objective; infinite where it cannot be bought."""
        return cable_cost(run, self.best.rulebook, self.wishes)


def cable_cost(run: Run, rulebook: Rulebook, wishes: Wishes) -> float:
    """Metal in kg, or price, of the conductors of a run that follow its size; infinite where none is for sale."""
    feed_m, return_m = conductor_lengths_m(run)
    total = 0.0
    for length_m, size in ((feed_m, run.size), (return_m, return_size(run))):
        if length_m == 0 or size is None:
            continue
        if wishes.objective == "mass" or wishes.prices is None:
            each: float | None = mass_kg_per_m(size, run.material)
        else:
            each = wishes.prices.cable_per_m(size, run.material, strand(run, rulebook))
        total += float("inf") if each is None else each * length_m * run.parallel
    return total


def ohm_of(run: Run, context: Context) -> tuple[tuple[float, float], tuple[float, float]]:
    """Cable at 20 °C and what is fixed, in ohm by pole, as the network has them; bars excepted."""
    cable, fixed = [], []
    for pole, (length_m, size) in enumerate(zip(conductor_lengths_m(run), (run.size, return_size(run)), strict=True)):
        per_m = resistance_20_ohm_per_m(size, run.material, strand(run, context.rulebook)).value if size else 0.0
        there = length_m > 0
        cable.append(per_m * length_m / run.parallel if there else 0.0)
        fixed.append(joints_ohm(run) + protection_ohm(run, "feed" if pole == FEED else "return") if there else 0.0)
    return (cable[0], cable[1]), (fixed[0], fixed[1])


def guards_to_choose(context: Context, index: int, seats: Mapping[int, Seat]) -> list[Guard]:
    """The protections before a run, its own left out, whose ratings are to be chosen."""
    found = context.lowest_ampacity[index]
    amps = found.amps if found is not None and found.amps is not None else 0.0
    return [one for one in binding_guards(context, index, amps) if one.run in seats and one.run != index]
