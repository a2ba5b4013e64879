"""What flows into a point in a solved case: runs, devices, sources and loads, by pole."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from farvolt.context import Context
from farvolt.network import FEED, RETURN, Floats
from farvolt.plan import Converter, Device, Run
from farvolt.solution import Solution
from farvolt.units import number

_SHOWN = 6
"""Flows named in a working; the smaller ones beyond are summed."""


_Ends = dict[str, list[tuple[int, float]]]
"""Point to (index, 1 at `to`, -1 at `from`)."""


@dataclass(frozen=True, slots=True)
class Flow:
    """The total that flows into one pole of a point, or out of it where more is known of that."""

    amps: float
    working: str


class Flows:
    """Flows at the points of a plan, looked up by name."""

    def __init__(self, context: Context) -> None:
        plan = self._plan = context.plan
        self._runs: _Ends = {}
        self._devices: _Ends = {}
        tables: list[tuple[_Ends, Sequence[Run | Device]]] = [(self._runs, plan.runs), (self._devices, plan.devices)]
        for at, parts in tables:
            for index, part in enumerate(parts):
                at.setdefault(part.from_point, []).append((index, -1.0))
                at.setdefault(part.to_point, []).append((index, 1.0))

    def into(self, solution: Solution, point: str) -> Flow:
        """The larger of a point's two poles. By Kirchhoff's law what flows in flows out again; where a part of it is
        not known apart (the pole that passes straight through a device), the fuller side counts."""
        poles = [self._pole(solution, point, pole) for pole in (FEED, RETURN)]
        return max(poles, key=lambda flow: round(flow.amps, 6))  # of two alike, the feed's

    def _pole(self, solution: Solution, point: str, pole: int) -> Flow:
        terms = [(name, amps) for name, amps in self._terms(solution, point, pole) if np.isfinite(amps)]
        ways = [(word, sorted(((sign * amps, name) for name, amps in terms if sign * amps > 0), reverse=True))
                for word, sign in (("into", 1.0), ("out of", -1.0))]  # fmt: skip
        word, listed = max(ways, key=lambda way: round(sum(amps for amps, _ in way[1]), 6))
        total = sum(amps for amps, _ in listed)
        parts = [f'{number(amps, 4)} A of "{name}"' for amps, name in listed[:_SHOWN]]
        rest = sum(amps for amps, _ in listed[_SHOWN:])
        parts += [f"{number(rest, 4)} A of {len(listed) - _SHOWN} more"] if len(listed) > _SHOWN else []
        side = "feed" if pole == FEED else "return"
        return Flow(total, f"Flows {word} its {side} side: {' + '.join(parts)} = {number(total, 4)} A")

    def _terms(self, solution: Solution, point: str, pole: int) -> list[tuple[str, float]]:
        """Name and current of everything at a pole of a point, positive into it."""
        plan, amps = self._plan, solution.run_amps(pole)
        terms = [
            (plan.runs[index].name, sign * float(amps[index]))
            for index, sign in self._runs.get(point, ())
            if not (pole == RETURN and sign < 0 and plan.runs[index].return_path == "chassis")
        ]
        for index, sign in self._devices.get(point, ()):
            terms.append((plan.devices[index].name, sign * device_amps(solution, index, pole)))
        feeds = 1.0 if pole == FEED else -1.0
        for port, source in enumerate(plan.sources):
            if source.at == point:
                terms.append((source.name, feeds * float(source_amps(solution)[port])))
        drawn = [(load.name, load.at, place) for place, load in enumerate(plan.loads)]
        for port, place, *_ in solution.condition.converters:
            source = plan.sources[port]
            if isinstance(source, Converter):
                drawn.append((source.name, source.from_point, place))
        for name, at, place in drawn:
            if at == point and solution.supply.load_on[place]:
                terms.append((name, -feeds * float(solution.state.drawn_A[place])))
        return terms


def device_amps(solution: Solution, device: int, pole: int) -> float:
    """Current of a device in one pole, positive from `from` to `to`; 0 in a pole that passes straight through."""
    network = solution.network
    for place, (index, _, _) in enumerate(network.diodes):
        entry = network.plan.devices[index]
        if index == device and pole == (RETURN if entry.pole == "return" else FEED):
            return float(solution.diode_amps[place])
    branches = (network.device == device) & (network.pole == pole)
    return float(np.nan_to_num(solution.state.branch_A[branches]).sum())


def source_amps(solution: Solution) -> Floats:
    """What every source delivers in A, all strings of a battery together."""
    network, supply = solution.network, solution.supply
    count = len(network.plan.sources)
    delivered = np.where(supply.source_on, np.nan_to_num(solution.state.delivered_A), 0.0)
    amps: Floats = delivered[:count].copy()
    for place, (index, _, _) in enumerate(network.strings):
        amps[index] += delivered[count + place]
    return amps
