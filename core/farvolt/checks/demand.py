"""What protection is to carry: the current of each run with hot conductors, continuous loads counted as asked."""

from functools import cached_property

import numpy as np

from farvolt.context import Context
from farvolt.network import FEED, RETURN, Floats


class Demands:
    """Lasting currents over (pole, case, run), and their continuous part, with hot conductors.

    A case with a start counts as after it: what a start asks of protection is a question of time.
    """

    def __init__(self, context: Context) -> None:
        self._context = context
        rule = context.rulebook.protection.continuous
        self.factor = rule.factor if rule else 1.0

    @cached_property
    def amps(self) -> Floats:
        """Current in A; 0 in a case that gives way."""
        found = [[one.run_amps(pole) * one.state.solved for one in self._context.lasting] for pole in (FEED, RETURN)]
        amps: Floats = np.nan_to_num(np.abs(np.array(found)))
        return amps

    @cached_property
    def continuous(self) -> Floats:
        """The part of it that goes to continuous loads: as their share in all loads beyond."""
        shares = []
        for one in self._context.lasting:
            every, lasting = one.feed_demand
            shares.append(np.divide(lasting, every, out=np.zeros_like(every), where=every > 0))
        found: Floats = self.amps * np.array(shares)
        return found

    @cached_property
    def counted(self) -> Floats:
        """Current to be counted in A: continuous loads raised as the rulebook asks."""
        return self.amps if self.factor == 1 else self.amps + (self.factor - 1) * self.continuous

    def worst(self, run: int, pole: int) -> tuple[float, int]:
        """The largest current to be counted for one pole of a run, and its case."""
        counted = self.counted[pole, :, run]
        case = int(np.argmax(counted))
        return float(counted[case]), case
