"""Fault currents as limits on the resistance of a way, where one battery feeds trees of conductors.

A bolted short draws E / Z, and Z is a sum over the runs on the way. For each way to build the run at stake, the fault
currents at which its protection saves it lie in a window; the sum has to lie in the window of the option taken:

    sum of resistances  ≤  sum over options of (E / least current − what is fixed) · x, and likewise from below.
"""

import math
from collections.abc import Callable, Collection, Iterator
from dataclasses import dataclass, field

import numpy as np

from farvolt.checks.far_end import opens_s, thinnest
from farvolt.checks.ways import ampacity_A, exempt
from farvolt.choice_limits import Row
from farvolt.choice_options import Option, Options, ohm_of
from farvolt.choice_verify import runs_on_way
from farvolt.conductors import temperature_coefficient
from farvolt.context import Context
from farvolt.fault_sources import coldest_degC, fault_sources
from farvolt.faults import FarEnd
from farvolt.network import Floats, Network
from farvolt.operating import components, islands
from farvolt.plan import Battery
from farvolt.protection_types import ProtectionType
from farvolt.temperatures import at, run_ambient_degC
from farvolt.withstand import Withstand

_STEPS = 400
_LARGEST_A = 1e5
_ROOM = 1e-6


@dataclass(slots=True)
class FaultRows:
    """Makes rows of what each protection and cable withstand together."""

    context: Context
    """The plan with every run to choose at its thickest."""
    options: Options
    places: dict[int, list[int]]
    aside: frozenset[tuple[str, str]] = frozenset()
    """What no choice cures: rule and run."""
    seats: Collection[int] = ()
    """Runs whose own protection is to be chosen."""
    _windows: dict[tuple[object, ...], tuple[float, float] | None] = field(default_factory=dict)

    def rows(self) -> Iterator[Row]:
        """The rows of every far end and of every device that interrupts, where one battery feeds trees."""
        batteries = [one for one in self.context.plan.sources if isinstance(one, Battery)]
        if len(batteries) == 1 and trees(self.context.network):
            yield from self._far_ends()
            if len(self.context.plan.sources) == 1:
                yield from self._interrupting()

    def _far_ends(self) -> Iterator[Row]:
        rule = self.context.rulebook.protection.fault_damage
        if rule is None or rule.severity != "fail":
            return
        factors = self._hot()
        network = self.context.network
        lowest = {one.source: one.volts for one in fault_sources(network, islands(network), "lowest")}
        for far in self.context.faults.far_ends:
            if ("protection.far-end", self.context.plan.runs[far.stretch.guard.run].name) not in self.aside:
                yield from self._far_end(far, lowest[far.stretch.source], factors)

    def _interrupting(self) -> Iterator[Row]:
        """For each device a resistance before it that holds the highest fault current within its rating.

        Cables count cold, and of contacts those alone that the plan states (see `faults`).
        """
        plan, network = self.context.plan, self.context.network
        part = islands(network)
        volts = fault_sources(network, part, "highest")[0].volts
        for (index, which), fault in self.context.faults.devices.items():
            run = plan.runs[index]
            one = run.protections[which]
            rating = one.interrupting.si if one.interrupting else one.kind.interrupting_at(plan.plan.nominal.si)
            out = index in self.seats or ("protection.interrupting", run.name) in self.aside
            if out or rating is None or fault.amps <= rating:
                continue
            along = (one.distance.si if one.distance else 0.0) / run.length.si
            fixed_ohm, ohm = volts / fault.amps, dict[int, float]()
            for on_way in runs_on_way(self.context, 0, index):
                if on_way in self.options.by_run:
                    share = along if on_way == index else 1.0
                    factor = share * (1 + temperature_coefficient(run.material).value * (coldest_degC(plan) - 20))
                    fixed_ohm -= factor * sum(ohm_of(plan.runs[on_way], self.context)[0])
                    for place, option in zip(self.places[on_way], self.options.by_run[on_way], strict=True):
                        ohm[place] = -factor * sum(option.cable_ohm_20)
            yield Row(ohm, fixed_ohm - volts / rating, text="protection.interrupting")

    def _hot(self) -> Floats:
        plan, book = self.context.plan, self.context.rulebook
        found: Floats = np.max([at(plan, book, one.case, "hot").factor_of_20 for one in self.context.cases], axis=0)
        return found

    def _far_end(self, far: FarEnd, volts: float, factors: Floats) -> Iterator[Row]:
        stretch, plan = far.stretch, self.context.plan
        whole = stretch.run >= 0 and stretch.until_m >= plan.runs[stretch.run].length.si * (1 - 1e-9)
        if not whole or exempt(self.context, plan.runs[stretch.run]) or abs(far.run_A - far.fault.amps) > _ROOM:
            return
        way = [run for run in runs_on_way(self.context, stretch.source, stretch.run) if run in self.options.by_run]
        ohm, fixed_ohm = dict[int, float](), volts / far.fault.amps
        for run in way:
            cable, fixed = ohm_of(plan.runs[run], self.context)
            fixed_ohm -= sum(cable) * float(factors[run]) + sum(fixed)
            for place, one in zip(self.places[run], self.options.by_run[run], strict=True):
                ohm[place] = sum(one.cable_ohm_20) * float(factors[run]) + sum(one.fixed_ohm)
        most_ohm = fixed_ohm + sum(max(ohm[place] for place in self.places[run]) for run in way)
        yield from self._rows(far, volts, fixed_ohm, ohm, volts / most_ohm)

    def _rows(
        self, far: FarEnd, volts: float, fixed_ohm: float, ohm: dict[int, float], least_A: float
    ) -> Iterator[Row]:
        """From above and from below; from above only where no fault current, `least_A` being the least, can be so low
        that the cable carries it for good."""
        run, guard = far.stretch.run, far.stretch.guard
        carried_A = ampacity_A(self.context, run) or 0.0
        if run not in self.options.by_run:
            stands = thinnest(self.context, self.context.plan.runs[run])
            window = self._window(guard.protection.kind, self._rating(far, guard.rating_A), stands)
            if window is not None:
                if least_A > carried_A:
                    yield Row(dict(ohm), volts / window[0] - fixed_ohm, text="protection.far-end")
                yield Row({place: -value for place, value in ohm.items()}, fixed_ohm - volts / window[1],
                          text="protection.far-end")  # fmt: skip
            return
        most, least = dict(ohm), {place: -value for place, value in ohm.items()}
        for place, one in zip(self.places[run], self.options.by_run[run], strict=True):
            window = self._of_option(far, one)
            if window is None:
                if least_A > one.limit_A:
                    yield Row({place: 1.0}, 0.0, text="protection.far-end")
                continue
            most[place] -= volts / window[0] - fixed_ohm
            least[place] += volts / window[1] - fixed_ohm
        if least_A > max(one.limit_A for one in self.options.by_run[run]):
            yield Row(most, 0.0, text="protection.far-end")
        yield Row(least, 0.0, text="protection.far-end")

    def _of_option(self, far: FarEnd, one: Option) -> tuple[float, float] | None:
        guard = far.stretch.guard
        built = self.context.plan.runs[one.run].model_copy(update={"size": one.size, "parallel": one.parallel})
        rating = one.rating_A if guard.run == one.run and one.rating_A is not None else guard.rating_A
        return self._window(guard.protection.kind, self._rating(far, rating), thinnest(self.context, built))

    def _rating(self, far: FarEnd, rating_A: float) -> float:
        """As the check has it: in the cold a protection opens last."""
        kind, seat = far.stretch.guard.protection.kind, self.context.plan.runs[far.stretch.guard.run]
        coldest = min(run_ambient_degC(self.context.plan, seat, one.case) for one in self.context.cases)
        return kind.rating_at_A(rating_A, min(coldest, kind.reference_degC))

    def _window(self, kind: ProtectionType, rating_A: float, stands: Withstand) -> tuple[float, float] | None:
        """The least and the greatest fault current that damages nothing; None where every one does."""
        key = kind.name, rating_A, stands.joule_A2s
        if key not in self._windows:
            self._windows[key] = _window(kind, rating_A, stands)
        return self._windows[key]


def _window(kind: ProtectionType, rating_A: float, stands: Withstand) -> tuple[float, float] | None:
    def safe(amps: float) -> bool:
        return opens_s(kind, amps, rating_A) <= stands.reaches_limit_s(amps) * (1 + 1e-9)

    every = np.geomspace(rating_A, _LARGEST_A, _STEPS).tolist()
    good = [place for place, amps in enumerate(every) if safe(amps)]
    if not good:
        return None
    first, last = good[0], good[-1]
    low = every[0] if first == 0 else _edge(safe, every[first - 1], every[first])
    high = math.inf if last == len(every) - 1 else _edge(safe, every[last + 1], every[last])
    return low, high


def _edge(safe: Callable[[float], bool], bad: float, good: float) -> float:
    for _ in range(40):
        middle = math.sqrt(bad * good)
        bad, good = (bad, middle) if safe(middle) else (middle, good)
    return good


def trees(network: Network) -> bool:
    """Whether the conductors of a network form no loop."""
    part = components(network.node_count, network.a, network.b)
    counts = {int(one): int(np.count_nonzero(part == one)) for one in np.unique(part)}
    edges: dict[int, int] = {}
    for node in network.a.tolist():
        edges[int(part[node])] = edges.get(int(part[node]), 0) + 1
    return all(edges.get(one, 0) == count - 1 for one, count in counts.items()) and not network.diodes
