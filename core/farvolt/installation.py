"""An installation as its plan says it is: sound parts in the middle of their tolerances, in any case."""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from farvolt import interim, network, operating
from farvolt.causes import Cause, Scaled, alphas, causes, lasting, sound_degC, sound_spread
from farvolt.errors import FarvoltError
from farvolt.evidence import Evidence
from farvolt.network import Floats, Network
from farvolt.plan import Case, Plan
from farvolt.readings import Reading, ReadingSet
from farvolt.response import Probe, Response, State, stacked
from farvolt.rulebook import Rulebook


class Installation:
    """A plan ready to be compared with readings. States are solved once for each case."""

    def __init__(self, plan: Plan, rulebook: Rulebook) -> None:
        self.plan = interim.with_sizes(plan, interim.sizes(plan, rulebook))
        self.rulebook = rulebook
        self.network: Network = network.build(self.plan, rulebook)
        self._islands = operating.islands(self.network)
        self._states: dict[str, State] = {}

    def state(self, case: Case) -> State:
        """The network in a case. Raises FarvoltError where the plan gives way in it."""
        key = case.model_dump_json(exclude={"name", "notes"})
        if key not in self._states:
            condition = operating.operating(self.network, case, self._islands)
            middle, _ = sound_degC(self.plan, self.rulebook, case)
            self._states[key] = State(self.network, condition, 1 + alphas(self.plan) * (middle - 20))
        return self._states[key]

    def planned_states(self) -> list[State]:
        """The plan's own cases, without those in which it gives way."""
        found = []
        for case in self.plan.checked_cases:
            try:
                found.append(self.state(case))
            except FarvoltError:
                continue
        return found

    def causes(self, state: State) -> tuple[Cause, ...]:
        """What may be wrong."""
        return causes(self.network, state.condition, state.atoms, state.factor_of_20)

    def sound(self, state: State) -> list[tuple[Scaled, float]]:
        """How sound parts may differ from the plan."""
        return sound_spread(self.network, self.rulebook, state.condition, state.atoms)


@dataclass(frozen=True)
class Measured:
    """The readings that can be compared with a plan, each in its state, and how they follow from what may be wrong."""

    installation: Installation
    readings: tuple[Reading, ...]
    states: tuple[State, ...]
    probes: tuple[Probe, ...]
    """Over readings."""
    unfed: tuple[Reading, ...]
    """Readings at what is not fed in their state: they tell nothing here."""
    response: Response = field(repr=False)

    @property
    def read(self) -> Floats:
        """What was read."""
        return np.array([one.value for one in self.readings], dtype=float)

    @property
    def limits(self) -> Floats:
        """What each reading may be off by."""
        return np.array([one.limit for one in self.readings], dtype=float)

    @property
    def by_state(self) -> list[tuple[State, list[int]]]:
        """Each state with the places of its readings."""
        found: dict[int, tuple[State, list[int]]] = {}
        for at, state in enumerate(self.states):
            found.setdefault(id(state), (state, []))[1].append(at)
        return list(found.values())

    def evidence(self) -> Evidence:
        """The readings held against all causes."""
        state = self.states[0]
        found = self.installation
        each = [
            lasting(cause, np.max([one.heat_W(cause.branch, cause.values) for one, _ in self.by_state], axis=0))
            if cause.kind == "joint"
            else cause
            for cause in found.causes(state)
        ]
        return Evidence(self.response, self.read, self.limits, found.sound(state), each)

    def exact(self, values: dict[int, float]) -> Floats | None:
        """What would be read with atoms at given values, the networks solved; None where one gives way."""
        whole = np.zeros(len(self.readings))
        for state, places in self.by_state:
            found = state.exact(values, [self.probes[at] for at in places])
            if found is None:
                return None
            whole[places] = found
        return whole


def measured(installation: Installation, sets: Sequence[ReadingSet]) -> Measured:
    """Readings with their places in the networks. Raises FarvoltError where none can be compared with the plan."""
    readings: list[Reading] = []
    states: list[State] = []
    probes: list[Probe] = []
    unfed: list[Reading] = []
    for one in sets:
        state = installation.state(one.case) if one.readings else None
        for reading in one.readings:
            probe = state.probe(reading) if state is not None else None
            if probe is None or state is None:
                unfed.append(reading)
            else:
                readings.append(reading)
                states.append(state)
                probes.append(probe)
    if not readings:
        raise FarvoltError("no reading is at a place that is fed in its state; accepted: readings where current flows")
    parts: dict[int, Response] = {}
    order: list[int] = []
    for state in dict.fromkeys(states):
        places = [at for at, one in enumerate(states) if one is state]
        parts[len(order)] = state.response([probes[at] for at in places])
        order += places
    back = np.argsort(np.array(order))
    whole = stacked(list(parts.values()))
    whole = Response(whole.planned[back], whole.gain[back], whole.back[back])
    return Measured(installation, tuple(readings), tuple(states), tuple(probes), tuple(unfed), whole)
