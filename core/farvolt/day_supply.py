"""Which sources work in a step, and the network of each such set: built once, kept."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from farvolt.day_bank import BankUnit
from farvolt.day_network import StepNetwork
from farvolt.day_setup import Ready
from farvolt.fed import fed
from farvolt.operating import Operating
from farvolt.plan import Charger, Solar

Cut = tuple[bool, ...]
"""Over banks: which are empty and feed nothing."""


def movable(ready: Ready) -> list[int]:
    """The sources that work at some hours and rest at others."""
    return [index for index, one in enumerate(ready.plan.sources) if isinstance(one, Charger | Solar)]


class Supply:
    """The networks of a plan by the sources that work; `running` is over (piece of a step, source)."""

    def __init__(self, ready: Ready, banks: Sequence[BankUnit], running: np.ndarray) -> None:
        self.ready, self.running = ready, running
        self.ports = [one.port for one in banks]
        self._movable = movable(ready)
        self._names = [row.tobytes() for row in running]
        self._networks: dict[tuple[bytes, Cut], StepNetwork | None] = {}
        self._fed: dict[Cut, np.ndarray] = {}

    def network(self, piece: int, cut: Cut) -> StepNetwork | None:
        """The network of the sources that work in a piece of a step; None where nothing feeds anything."""
        key = self._names[piece], cut
        if key not in self._networks:
            self._networks[key] = self._built(self.running[piece], cut)
        return self._networks[key]

    def fed_by_banks(self, cut: Cut) -> np.ndarray:
        """Over loads: False where only an empty bank would feed it."""
        if cut not in self._fed:
            count, none = len(self.ready.plan.loads), np.zeros(len(self.ready.plan.sources), dtype=bool)
            cases = (self._condition(none, one) for one in ((False,) * len(cut), cut))
            every, left = (fed(self.ready.network, one).load_on[:count] for one in cases)
            self._fed[cut] = left | ~every
        return self._fed[cut]

    def _built(self, running: np.ndarray, cut: Cut) -> StepNetwork | None:
        condition = self._condition(running, cut)
        supply = fed(self.ready.network, condition)
        if not supply.source_on.any():
            return None
        return StepNetwork(self.ready.network, condition, self.ready.factor_of_20, supply)

    def _condition(self, running: np.ndarray, cut: Cut) -> Operating:
        """The condition in which some chargers run; an empty bank is in it only to be charged."""
        ready = self.ready
        on = ready.condition.source_on.copy()
        on[self._movable] = running[self._movable]
        first_array = len(ready.plan.sources) + len(ready.network.strings)
        for place, (index, _, _) in enumerate(ready.network.arrays):
            on[first_array + place] = running[index]
        for port, empty in zip(self.ports, cut, strict=True):
            on[port] = not empty or bool(running.any())
        return replace(ready.condition, source_on=on)
