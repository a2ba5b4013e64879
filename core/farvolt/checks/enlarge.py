"""Which cable to enlarge so that a load gets its voltage: the remedy a buyer can act on, tried on the network."""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

from farvolt.conductors import Size, resistance_20_ohm_per_m
from farvolt.context import Context, label, larger_sizes
from farvolt.network import FEED, RETURN, conductor_lengths_m, return_size, strand
from farvolt.plan import ReturnConductor, Run
from farvolt.solution import Solution, Step
from farvolt.temperatures import Mode
from farvolt.units import number

_TRIES = 4
"""Solutions tried for one remedy: where currents change with the cable, a size or two more than estimated."""

_MOST_STEPS = 60

_OTHERWISE = "shorten the way, draw less, or raise the system voltage"

_CAUTION = 0.1
"""An estimate that is not tried on the network must better the value by this much more than is needed."""


@dataclass(frozen=True, slots=True)
class Aim:
    """A value of one load that is to come within its limit in some cases, and the way that can be thickened."""

    load: int
    mode: Mode
    case: int
    """The worst case: estimates are made in it."""
    cases: tuple[int, ...]
    """The cases to hold the limit in."""
    steps: tuple[Step, ...]
    value: Callable[[Solution], float]
    limit: float
    per_volt: float
    """Change of the value with each volt saved on the way: negative where less is better."""
    unit: str

    def met(self, value: float, spare: float = 0.0) -> bool:
        """Whether a value is within the limit with something to spare."""
        return (self.limit - value) * (1 if self.per_volt < 0 else -1) >= spare - 1e-9


@dataclass(slots=True)
class Remedies:
    """Finds remedies for one check; so many of them are tried on the network, the rest estimated."""

    context: Context
    trials: int = field(default=12)

    def for_load(self, aim: Aim) -> str:
        """The cheapest single cable, else the fewest steps of several, that bring the value within its limit; where
        no cable does, what stands in the way."""
        return self._found(aim) or self._ruled_out(aim)

    def _ruled_out(self, aim: Aim) -> str:
        way = _Way(self.context, aim)
        bare = way.start + aim.per_volt * sum(way.cable_V.values())
        why = f"sizes that are made still leave too much; {_OTHERWISE}"
        if not way.cable_V:
            why = f"none states a size of its own; {_OTHERWISE}"
        elif not aim.met(bare):
            rest = f"protection, joints, devices and other cables alone make it {_number(bare, aim)} {aim.unit}"
            why = f"{rest}; fewer or better ones of these, or less load"
        return f"no thicker cable on the way is enough: {why}"

    def _found(self, aim: Aim) -> str | None:
        exact = self.context.remedies_are_exact and self.trials > 0
        self.trials -= 1
        way = _Way(self.context, aim)
        for run in way.by_copper():
            found = self._settle(aim, way, {run: way.enough(run)}, exact)
            if found is not None:
                return found
        several = way.several()
        return self._settle(aim, way, several, exact) if several else None

    def _settle(self, aim: Aim, way: "_Way", sizes: dict[int, Size | None], exact: bool) -> str | None:
        """Sizes that hold on the network, from estimated ones upward; None where none do."""
        for _ in range(_TRIES):
            chosen = {run: size for run, size in sizes.items() if size is not None}
            if len(chosen) < len(sizes):
                return None
            if exact:
                values = [aim.value(self._resolved(aim, chosen, case)) for case in aim.cases]
                worst, spare = max(values) if aim.per_volt < 0 else min(values), 0.0
            else:
                worst, spare = way.estimate(chosen), _CAUTION * abs(way.start - aim.limit)
            if aim.met(worst, spare):
                return _told(self.context, chosen, ("" if exact else "about ") + _number(worst, aim), aim)
            sizes = {run: _next(size) for run, size in chosen.items()}
        return None

    def _resolved(self, aim: Aim, sizes: dict[int, Size], case: int) -> Solution:
        named = {self.context.plan.runs[run].name: size for run, size in sizes.items()}
        return self.context.resolve(named, case, aim.mode)


class _Way:
    """The cables on the way to a load, with what each would save in its worst case at the currents found."""

    def __init__(self, context: Context, aim: Aim) -> None:
        self.context, self.aim = context, aim
        self.solution = context.cases[aim.case].solutions[aim.mode]
        self.start = aim.value(self.solution)
        self.cable_V = self._cable_V()

    def _cable_V(self) -> dict[int, float]:
        """Over the runs on the way whose size can grow: the drop in V in the cable itself."""
        solution, found = self.solution, dict[int, float]()
        for step in self.aim.steps:
            run = self.context.plan.runs[step.run] if step.run >= 0 else None
            if run is not None and run.size is not None and run.resistance is None and _follows(run, step.pole):
                branch = solution.run_branches[FEED if step.pole == "feed" else RETURN][step.run]
                ohm = solution.network.cable_ohm_20[branch] * solution.conductors.factor_of_20[step.run]
                found[step.run] = found.get(step.run, 0.0) + step.amps * float(ohm)
        return found

    def estimate(self, sizes: Mapping[int, Size]) -> float:
        """The value with other sizes, at the currents of the solution."""
        return self.start + self.aim.per_volt * sum(self._saved_V(run, size) for run, size in sizes.items())

    def _saved_V(self, index: int, size: Size) -> float:
        run = self.context.plan.runs[index]
        assert run.size is not None
        return self.cable_V[index] * (1 - self._ohm_per_m(run, size) / self._ohm_per_m(run, run.size))

    def _ohm_per_m(self, run: Run, size: Size) -> float:
        return resistance_20_ohm_per_m(size, run.material, strand(run, self.context.rulebook)).value

    def enough(self, run: int) -> Size | None:
        """The smallest larger size of one run that is estimated to be enough."""
        if not self.aim.met(self.start + self.aim.per_volt * self.cable_V[run]):
            return None  # not even without any resistance of its own
        size = self.context.plan.runs[run].size
        assert size is not None
        return next((one for one in larger_sizes(size) if self.aim.met(self.estimate({run: one}))), None)

    def by_copper(self) -> Iterator[int]:
        """The runs that are enough alone, by the metal that the larger size adds."""
        found = [(self._added(run, size), run) for run in self.cable_V if (size := self.enough(run)) is not None]
        return (run for _, run in sorted(found))

    def _added(self, index: int, size: Size) -> float:
        run = self.context.plan.runs[index]
        now = self.context.plan.runs[index].size
        assert now is not None
        return (size.area_mm2 - now.area_mm2) * sum(conductor_lengths_m(run)) * run.parallel

    def several(self) -> dict[int, Size | None] | None:
        """Sizes of several runs that are estimated to be enough: step by step where the metal saves most."""
        chosen: dict[int, Size] = {}
        for _ in range(_MOST_STEPS):
            if self.aim.met(self.estimate(chosen)):
                return dict(chosen)
            steps = [(run, size) for run in self.cable_V if (size := _next(self._size(chosen, run))) is not None]
            if not steps:
                return None
            run, size = max(steps, key=lambda step: self._worth(chosen, *step))
            chosen[run] = size
        return None

    def _size(self, chosen: dict[int, Size], run: int) -> Size:
        size = chosen.get(run, self.context.plan.runs[run].size)
        assert size is not None
        return size

    def _worth(self, chosen: dict[int, Size], run: int, size: Size) -> float:
        """Volts saved by a step of size, over the metal it adds."""
        now = self._size(chosen, run)
        saved = self._saved_V(run, size) - self._saved_V(run, now)
        return saved / (self._added(run, size) - self._added(run, now))


def _follows(run: Run, pole: str) -> bool:
    """Whether a conductor changes with the size of its run: a return with a size of its own does not."""
    return pole == "feed" or not (isinstance(run.return_path, ReturnConductor) and return_size(run) != run.size)


def _next(size: Size | None) -> Size | None:
    return next(iter(larger_sizes(size)), None) if size is not None else None


def _number(value: float, aim: Aim) -> str:
    """A value for reading; volts need a digit more than percentages to be told from their limit."""
    return number(value, 3 if aim.unit == "%" else 4)


def _told(context: Context, sizes: dict[int, Size], value: str, aim: Aim) -> str:
    """The remedy as a sentence."""
    runs = context.plan.runs
    if len(sizes) == 1:
        run, size = next(iter(sizes.items()))
        return f"{label(runs[run])}: {size.name} brings this to {value} {aim.unit}"
    listed = " and ".join(f"{label(runs[run])}: {size.name}" for run, size in sizes.items())
    return f"{listed}; together they bring this to {value} {aim.unit}"
