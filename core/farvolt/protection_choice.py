"""Which protection fits where a check found fault: standard ratings that pass every check, for the cable as it is.

Each offer is tried: put into the plan, with all offers at once, and held against the checks of protection again. What
is offered has therefore passed them. Where nothing passes, the offer says what stands in the way, and which cable
opens the window.
"""

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field, replace
from functools import partial

from farvolt import checks, network
from farvolt.checks.demand import Demands
from farvolt.checks.interrupting import Interrupts, devices
from farvolt.checks.rating import limit_for
from farvolt.checks.voltage import highest_V
from farvolt.checks.ways import ampacity_A, exempt
from farvolt.conductors import Size
from farvolt.context import CaseStudy, Context, label, larger_sizes
from farvolt.network import FEED
from farvolt.plan import Plan, Protection, Run
from farvolt.protection_types import ProtectionType, protection_type, protection_type_names
from farvolt.results import Finding
from farvolt.temperatures import run_ampacity
from farvolt.units import number

RULES = (
    "protection.missing", "protection.over-conductor", "protection.under-load", "protection.over-load-limit",
    "protection.interrupting", "protection.voltage-rating", "protection.far-end", "protection.let-through",
    "protection.rating-not-made",
)  # fmt: skip
"""What an offer has to pass; where protection sits and whether it is selective are no matters of its rating."""

SPARE = 1.25
"""Times its load that a protection is rated at where there is a choice (common practice)."""

_ROUNDS = 30
"""How often all places are tried together, at most; fewer times in larger plans."""

_RUNS_TRIED = 1500
"""Runs times rounds: what the search may take of a page's time."""

_SIZES = 4
"""How many larger sizes are tried to open a window."""


@dataclass(frozen=True, slots=True)
class Place:
    """Where a protection sits or is missing: an end of a run, in its feed."""

    run: int
    end: str


@dataclass(frozen=True, slots=True)
class Offer:
    """A protection for a place, with a thicker cable where the present one leaves no window."""

    kind: ProtectionType
    rating_A: float
    size: Size | None = None

    @property
    def text(self) -> str:
        """The offer in words."""
        cable = f"{self.size.name} cable and then " if self.size is not None else ""
        return f"{cable}{number(self.rating_A)} A {self.kind.name}"


Unfit = Callable[[ProtectionType], bool]


@dataclass(slots=True)
class Choice:
    """The offers for a place in order of preference, and how far they have been tried."""

    place: Place
    offers: list[Offer]
    tried: int = 0
    blocking: dict[str, None] = field(default_factory=dict)
    """Rules that the offers tried so far did not pass, in that order."""
    unfinished: bool = False
    """The rounds ended before an offer was shown to pass."""
    further: Iterator[Offer] = field(default_factory=lambda: iter(()))
    """Offers with thicker cables, made when the others have failed."""
    unfit: list[tuple[str, Unfit]] = field(default_factory=list)
    """Types that are ruled out, and the rule that they break."""
    fallen: Offer | None = None
    """An offer of a type that was ruled out."""

    @property
    def offer(self) -> Offer | None:
        """The offer that stands; None when all have failed."""
        if self.tried >= len(self.offers):
            self.offers += self._fit(list(self.further), self.unfit)
        return self.offers[self.tried] if self.tried < len(self.offers) else None

    def fails(self, rules: list[str]) -> None:
        """Go on to the next offer that may do better: what fails for its type, or for a rating too high or too low,
        fails with the others of that type as well."""
        failed = self.offer
        assert failed is not None
        self.blocking |= dict.fromkeys(rules)
        self.tried += 1
        for rule in _OF_TYPE.intersection(rules):
            self.rule_out(rule, partial(_is_named, failed.kind.name))
        while (offer := self.offer) is not None and offer.kind == failed.kind and offer.size == failed.size:
            higher = offer.rating_A > failed.rating_A
            if not (_WANT_LESS if higher else _WANT_MORE).intersection(rules):
                break
            self.tried += 1

    def rule_out(self, rule: str, unfit: Unfit) -> None:
        """Leave out the offers still to be tried that are of an unfit type."""
        self.unfit.append((rule, unfit))
        self.offers[self.tried :] = self._fit(self.offers[self.tried :], [(rule, unfit)])

    def _fit(self, offers: list[Offer], rules: list[tuple[str, Unfit]]) -> list[Offer]:
        """Those of some offers that no rule excludes."""
        for rule, unfit in rules:
            out = {kind.name for kind in {one.kind.name: one.kind for one in offers}.values() if unfit(kind)}
            if out:
                self.blocking[rule] = None
                self.fallen = self.fallen or offers[-1]
                offers = [one for one in offers if one.kind.name not in out]
        return offers

    @property
    def stand_in(self) -> Offer | None:
        """What stands here while the other places are tried: the offer, or the last that failed, so that nobody else is
        blamed for a place without protection."""
        return self.offer or (self.offers[-1] if self.offers else self.fallen)


def _is_named(name: str, kind: ProtectionType) -> bool:
    return kind.name == name


_OF_TYPE = {"protection.interrupting", "protection.voltage-rating"}
_WANT_LESS = {"protection.far-end", "protection.over-conductor", "protection.over-load-limit", "protection.let-through"}
_WANT_MORE = {"protection.under-load"}


def choices(context: Context, places: Iterable[Place]) -> list[Choice]:
    """For each place the first of its offers that passes, all tried together; see `Choice.offer`."""
    demands = Demands(context)
    found = [_choice(context, place, demands) for place in places]
    _made_for_the_volts(context, found)
    open_ones: list[Choice] = []
    for turn in range(min(_ROUNDS, max(2, _RUNS_TRIED // max(1, len(context.plan.runs))))):
        standing = [one for one in found if one.offer is not None]
        if not standing:
            return found
        changed = _changed(context, found)
        failed = _failed(changed, found)
        open_ones = [one for one in standing if one.place in failed]
        if not open_ones:
            return found
        # A protection is blamed for the runs that depend on it only once those have found their own.
        mine = [one for one in open_ones if failed[one.place].own]
        for one in mine or open_ones:
            one.fails(failed[one.place].rules)
        if turn == 0:
            _strong_enough(changed, open_ones)
    for one in open_ones:
        one.tried, one.unfinished = len(one.offers), one.offer is not None
    return found


def _made_for_the_volts(context: Context, found: list[Choice]) -> None:
    """Leave out types that are made for less than the voltage: no trial is needed to see that they do not pass."""
    volts = highest_V(context)
    for one in found:
        one.rule_out("protection.voltage-rating", partial(_made_for_less, volts[one.place.run]))


def _made_for_less(volts: float, kind: ProtectionType) -> bool:
    return kind.volts < volts


def _strong_enough(changed: Context, found: list[Choice]) -> None:
    """Leave out types that do not interrupt the fault currents, once a trial has shown these."""
    needed = {Place(one.index, one.one.end): one for one in devices(changed) if one.one.pole == "feed"}
    for one in found:
        place = needed.get(one.place)
        if place is not None:
            one.rule_out("protection.interrupting", partial(_too_weak, place))


def _too_weak(place: Interrupts, kind: ProtectionType) -> bool:
    rating_A = kind.interrupting_at(place.system_V)
    return rating_A is not None and rating_A < place.needed_A * (1 - 1e-9)


def fitting(context: Context, place: Place, kinds: Iterable[ProtectionType]) -> dict[str, tuple[float, ...]]:
    """By type, all ratings that pass at a place with its present cable; types of which none does are left out."""
    run, (demand, _) = context.plan.runs[place.run], Demands(context).worst(place.run, FEED)
    amps = ampacity_A(context, place.run)
    most = limit_for(context, run, amps).amps if amps is not None else 0.0
    found: dict[str, tuple[float, ...]] = {}
    for kind in kinds:
        choice, passing = Choice(place, [Offer(kind, rating) for rating in sorted(_between(kind, demand, most))]), []
        while (offer := choice.offer) is not None:
            failed = _failed(_changed(context, [choice]), [choice])
            if failed:
                choice.fails(failed[place].rules)
            else:
                passing.append(offer.rating_A)
                choice.tried += 1
        if passing:
            found[kind.name] = tuple(passing)
    return found


def with_remedies(context: Context, findings: tuple[Finding, ...]) -> tuple[Finding, ...]:
    """Findings of protection with what was found to pass as their remedy."""
    if not context.remedies_are_exact:
        return findings
    places: dict[Place, None] = {}
    for finding in findings:
        if finding.rule != "protection.let-through" or finding.severity == "fail":
            places |= dict.fromkeys(_places(context, finding))
    offers = {one.place: one for one in choices(context, places)}
    return tuple(_with_remedy(context, finding, offers) for finding in findings)


def _with_remedy(context: Context, finding: Finding, offers: dict[Place, Choice]) -> Finding:
    texts = [_text(context, offers[place], finding) for place in _places(context, finding) if place in offers]
    if finding.rule == "protection.let-through" and finding.severity != "fail":
        return finding
    said = "; ".join(dict.fromkeys(filter(None, texts)))
    if not said:
        return finding
    other = f"; or {finding.remedy}" if finding.remedy and finding.rule not in _SUPERSEDED else ""
    return replace(finding, remedy=f"{said}{other}")


_SUPERSEDED = ("protection.under-load", "protection.interrupting", "protection.rating-not-made")
"""Whose own remedy names a rating or a type without having tried it."""


def _text(context: Context, choice: Choice, finding: Finding) -> str:
    run, offer = context.plan.runs[choice.place.run], choice.offer
    at = run.from_point if choice.place.end == "from" else run.to_point
    on = "" if finding.subject == run.name else f" on {label(run)}"
    if offer is None:
        if finding.rule == "protection.missing" or not choice.blocking:
            return ""
        blocking = f"({', '.join(choice.blocking)} in the way)"
        if choice.unfinished:
            return f"none of the ratings tried in the time there is passes here{on} {blocking}"
        return f"no standard rating passes here{on} {blocking}"
    missing = ' in the feed at "' + at + '"' if finding.rule == "protection.missing" else ""
    return f"{offer.text}{missing}{on}: passes all checks of protection"


def _places(context: Context, finding: Finding) -> list[Place]:
    """The places whose protection a finding is about."""
    if finding.rule not in RULES or finding.severity == "note" or finding.kind != "run":
        return []
    index = context.run_index(finding.subject)
    if finding.rule == "protection.missing":
        bare = [one for one in context.sections.by_run.get(index, []) if one.guard is None and not one.own]
        return list(dict.fromkeys(Place(index, one.end) for one in bare))
    own = [Place(index, one.end) for one in context.plan.runs[index].protections if one.pole == "feed"]
    if own or finding.rule != "protection.over-conductor":
        return list(dict.fromkeys(own))
    guards = [one.guard for one in context.sections.by_run.get(index, []) if one.guard is not None]
    return list(dict.fromkeys(Place(one.run, one.protection.end) for one in guards))


def _choice(context: Context, place: Place, demands: Demands) -> Choice:
    """Ratings between the load and what the cable may carry: of the present type first, then of the others; then with
    a thicker cable."""
    run = context.plan.runs[place.run]
    demand, _ = demands.worst(place.run, FEED)
    amps = ampacity_A(context, place.run)
    present = _present(run, place)
    most = limit_for(context, run, amps).amps if amps is not None else 0.0
    kinds = [present.kind] if present is not None else []
    kinds += [kind for kind in _kinds(context.plan) if present is None or kind.name != present.kind.name]
    here = [Offer(kind, rating) for kind in kinds for rating in _between(kind, demand, most)]
    if present is None:
        # Of any type: the lowest rating with a quarter in hand comes first.
        here.sort(key=lambda one: (one.rating_A < SPARE * demand, one.rating_A))
    return Choice(place, here, further=_thicker(context, run, demand, kinds if present is None else kinds[:1]))


def _thicker(context: Context, run: Run, demand: float, kinds: list[ProtectionType]) -> Iterator[Offer]:
    if run.size is None or exempt(context, run):
        return
    for size in larger_sizes(run.size)[:_SIZES]:
        thicker = _resized(run, size)
        found = run_ampacity(context.plan, context.rulebook, thicker, None, context.together[run.name])
        limit = limit_for(context, thicker, found.amps).amps if found is not None and found.amps is not None else 0.0
        for kind in kinds:
            yield from (Offer(kind, rating, size) for rating in _between(kind, demand, limit))


def _between(kind: ProtectionType, demand: float, most: float) -> list[float]:
    """Ratings that carry the load and that the cable allows: first those with a quarter in hand, from the lowest."""
    fits = [rating for rating in kind.ratings_A if demand <= rating <= most * (1 + 1e-9)]
    roomy = [rating for rating in fits if rating >= SPARE * demand]
    return roomy + [rating for rating in reversed(fits) if rating < SPARE * demand]


def _kinds(plan: Plan) -> list[ProtectionType]:
    return [*plan.own_types.values(), *(protection_type(name) for name in protection_type_names())]


def _present(run: Run, place: Place) -> Protection | None:
    found = [one for one in run.protections if one.pole == "feed" and one.end == place.end]
    return min(found, key=lambda one: one.rating.si, default=None)


@dataclass(slots=True)
class _Failure:
    """Rules that an offer breaks, and whether on its own run."""

    rules: list[str] = field(default_factory=list)
    own: bool = False


def _failed(changed: Context, tried: list[Choice]) -> dict[Place, _Failure]:
    """The places whose offers do not pass, in a context that has them all in place."""
    broken: dict[Place, _Failure] = {}
    mine = {one.place for one in tried}
    # A finding names a run, not which of its ends: told apart where a type at one end is no fault of the other.
    weak = {Place(one.index, one.one.end) for one in devices(changed) if one.too_weak}
    for finding in checks.run_some(changed, RULES):
        if finding.severity == "note" or "not verified" in finding.message:
            continue
        for place in _places(changed, finding):
            if place in mine and (finding.rule != "protection.interrupting" or place in weak):
                failure = broken.setdefault(place, _Failure())
                failure.rules.append(finding.rule)
                failure.own |= finding.subject == changed.plan.runs[place.run].name
    return broken


def _changed(context: Context, tried: list[Choice]) -> Context:
    """The context of a plan with the offers in their places; currents are taken to stay as they are."""
    runs = list(context.plan.runs)
    resized: list[int] = []
    for one in tried:
        offer = one.stand_in
        if offer is None:
            continue
        run = runs[one.place.run]
        if offer.size is not None:
            run = _resized(run, offer.size)
            resized.append(one.place.run)
        runs[one.place.run] = _with_protection(context, run, one.place, offer)
    plan = context.plan.model_copy(update={"runs": tuple(runs), "cases": context.plan.checked_cases})
    cases = tuple(_reampacity(context, plan, case, resized) for case in context.cases)
    return replace(context, plan=plan, network=network.build(plan, context.rulebook), cases=cases, base=context)


def _reampacity(context: Context, plan: Plan, one: CaseStudy, resized: list[int]) -> CaseStudy:
    if not resized:
        return one
    amps = list(one.ampacities)
    for index in resized:
        run = plan.runs[index]
        amps[index] = run_ampacity(plan, context.rulebook, run, one.case, context.together[run.name])
    return replace(one, ampacities=tuple(amps))


def _resized(run: Run, size: Size) -> Run:
    """The run with both of its conductors at a size, or the return kept where it is thicker."""
    changed = run.model_copy(update={"size": size})
    back = run.return_path
    if not isinstance(back, str) and back.size is not None and back.size.area_mm2 < size.area_mm2:
        changed = changed.model_copy(update={"return_path": back.model_copy(update={"size": size})})
    return changed


def _with_protection(context: Context, run: Run, place: Place, offer: Offer) -> Run:
    """The run with the offer instead of what sits in its feed at that end."""
    present = _present(run, place)
    fields = {"type": offer.kind.name, "rating": f"{offer.rating_A:.15g} A", "end": place.end}
    distance = {"distance": present.distance} if present is not None and present.distance is not None else {}
    made = Protection.model_validate({**fields, **distance})
    made.is_of(context.plan.own_types)
    others = [one for one in run.protections if one.pole != "feed" or one.end != place.end]
    return run.model_copy(update={"protection": (*others, made), "protection_to": None})


__all__ = ["RULES", "Choice", "Offer", "Place", "choices", "fitting", "with_remedies"]
