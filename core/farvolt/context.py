"""What the checks look at: the plan, its rulebook, and every case solved at each conductor temperature."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property

from farvolt.ampacity import Ampacity
from farvolt.conductors import Size, made_sizes
from farvolt.faults import Faults
from farvolt.network import Network
from farvolt.plan import Case, Plan, Run
from farvolt.rulebook import Basis, Rulebook
from farvolt.sections import Sections, sections
from farvolt.solution import Solution
from farvolt.started import Starts, starts
from farvolt.temperatures import Mode

Resolve = Callable[[Mapping[str, Size], int, Mode], Solution]
"""Solve one case again with other sizes: (run name to size, index of the case, mode)."""

SolveCase = Callable[[Case, Mode], Solution]
"""Solve the plan as it is in another case."""


@dataclass(frozen=True)
class CaseStudy:
    """One case: its ampacities over runs, and its solutions by conductor temperature."""

    case: Case
    ampacities: tuple[Ampacity | None, ...]
    solutions: Mapping[Mode, Solution]

    @property
    def name(self) -> str:
        """The case's name."""
        return self.case.name


@dataclass(frozen=True)
class Context:
    """Everything a check may read."""

    plan: Plan
    rulebook: Rulebook
    network: Network
    cases: tuple[CaseStudy, ...]
    together: Mapping[str, int]
    """Current-carrying conductors laid with each run."""
    resolve: Resolve
    solve_case: SolveCase
    interim: Mapping[str, Size]
    """Sizes taken for the runs that state none; `plan` has them filled in."""
    base: "Context | None" = None
    """What this one was made from by trying other protection or cables; its currents are taken to stay as they are."""

    @cached_property
    def _run_places(self) -> dict[str, int]:
        return {run.name: index for index, run in enumerate(self.plan.runs)}

    def run_index(self, name: str) -> int:
        """Where a run stands in the plan, by its name."""
        return self._run_places[name]

    @cached_property
    def sections(self) -> Sections:
        """Protection by section, walked once."""
        return sections(self.network)

    @cached_property
    def faults(self) -> Faults:
        """Prospective fault currents, each worked out when first asked for."""
        return Faults(self.network, self.rulebook, self.sections)

    @cached_property
    def lowest_ampacity(self) -> tuple[Ampacity | None, ...]:
        """Over runs: the ampacity in the case where it is lowest; None for a free size."""
        per_run = zip(*(one.ampacities for one in self.cases), strict=True)
        return tuple(
            min((one for one in several if one), key=lambda one: -1.0 if one.amps is None else one.amps, default=None)
            for several in per_run
        )

    @cached_property
    def lasting(self) -> tuple[Solution, ...]:
        """Every case with hot conductors as it lasts: a case with a start counts as after it."""
        if self.base is not None:
            return self.base.lasting
        found = []
        for one in self.cases:
            after = one.case.model_copy(update={"surge": ()}) if one.case.surge else None
            found.append(self.solve_case(after, "hot") if after is not None else one.solutions["hot"])
        return tuple(found)

    @cached_property
    def starts(self) -> Starts:
        """The starts of loads, solved once."""
        if self.base is not None:
            return self.base.starts
        solved = [(one.case, one.solutions["hot"]) for one in self.cases]
        return starts(self.network, self.rulebook, solved, alone=self.remedies_are_exact)

    @property
    def remedies_are_exact(self) -> bool:
        """Whether a plan is small enough to solve it again for each remedy."""
        return len(self.plan.runs) <= 300


def label(run: Run) -> str:
    """How a text names a run: its label and name."""
    return f'{run.label} "{run.name}"' if run.label else f'"{run.name}"'


def larger_sizes(size: Size) -> list[Size]:
    """The commonly made sizes of the same system above `size`, rising."""
    return [one for one in made_sizes(size.system) if one.area_mm2 > size.area_mm2]


def basis_text(basis: Basis) -> str:
    """A basis as a finding shows it."""
    return str(basis)
