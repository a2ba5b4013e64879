"""One plan of one case solved at 20 °C, and its answer by the names of the plan."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from circuit import Circuit, circuit_of
from farvolt import network, operating, planfile, rulebook
from farvolt.network import FEED, RETURN, Network
from farvolt.plan import Plan
from farvolt.solve import State, solve


@dataclass(frozen=True)
class Solved:
    """A plan with its network and the state that was found."""

    plan: Plan
    network: Network
    state: State

    @cached_property
    def circuit(self) -> Circuit:
        """The second account of the plan's circuit."""
        return circuit_of(self.plan, self.plan.checked_cases[0])

    @cached_property
    def node_volts(self) -> dict[int, float]:
        """Volts by the circuit's own node numbers, of all that is fed."""
        pins = {node: pin for pin, node in self.circuit.pins.items()}
        poles = {"+": FEED, "-": RETURN}
        return {
            node: float(self.state.volts[self.network.nodes[pins[node][0], poles[pins[node][1]]]])
            for node in self.circuit.live
        }

    def volts(self, point: str) -> float:
        """Feed less return of a point; NaN where it is not fed."""
        return float(self.state.volts[self.network.feed(point)] - self.state.volts[self.network.ret(point)])

    @property
    def load_volts(self) -> dict[str, float]:
        """Volts at every load by its name."""
        return {load.name: self.volts(load.at) for load in self.plan.loads}

    @property
    def load_amps(self) -> dict[str, float]:
        """Current of every load by its name."""
        return {load.name: float(self.state.drawn_A[index]) for index, load in enumerate(self.plan.loads)}

    @property
    def source_amps(self) -> dict[str, float]:
        """Current that every source delivers by its name, that of a battery with all its strings."""
        found = {source.name: float(self.state.delivered_A[index]) for index, source in enumerate(self.plan.sources)}
        for place, (index, _, _) in enumerate(self.network.strings):
            found[self.plan.sources[index].name] += float(self.state.delivered_A[len(self.plan.sources) + place])
        return found

    @property
    def run_amps(self) -> dict[tuple[str, int], float]:
        """Current of every conductor of a run, from `from` to `to`, by the run's name and the pole."""
        found = {}
        for branch in np.flatnonzero(self.network.run >= 0):
            name = self.plan.runs[self.network.run[branch]].name
            found[name, int(self.network.pole[branch])] = float(self.state.branch_A[branch])
        return found


def solved(plan: Plan | str) -> Solved:
    """Solve the first case of a plan with all conductors at 20 °C."""
    if isinstance(plan, str):
        plan = planfile.parse(plan)
    built = network.build(plan, rulebook.load("small-craft-iso"))
    condition = operating.operating(built, plan.checked_cases[0])
    return Solved(plan, built, solve(built, condition, np.ones(len(plan.runs))))
