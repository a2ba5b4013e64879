"""What flows into a point in a solved case: runs, devices, sources and loads, by pole."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from farvolt.context import Context
from farvolt.network import FEED, RETURN, Floats
from farvolt.plan import Converter, Device, Load, Run, Source
from farvolt.solution import Solution
from farvolt.units import number

_SHOWN = 6
"""Flows named in a working; the smaller ones beyond are summed."""

_Ends = dict[str, list[tuple[int, float]]]
"""Point to (index, 1 at `to`, -1 at `from`)."""


class Currents:
    """The currents of one solved case as arrays, worked out once. Runs and devices are positive from `from` to `to`."""

    def __init__(self, solution: Solution) -> None:
        self.solution = solution
        self.runs = tuple(np.nan_to_num(solution.run_amps(pole)) for pole in (FEED, RETURN))
        """Over runs, by pole."""
        self.devices = _device_amps(solution)
        """Over (pole, device); 0 in a pole that passes straight through."""
        self.sources = _source_amps(solution)
        """What every source delivers, all strings of a battery together."""
        on, drawn = solution.supply.load_on, solution.state.drawn_A
        self.loads: Floats = np.where(on, np.nan_to_num(drawn), 0.0)
        """Over load ports: what loads and the inputs of converters draw."""


@dataclass(frozen=True, slots=True)
class Flow:
    """The total that flows into one pole of a point, or out of it where more is known of that."""

    amps: float
    working: str


class Flows:
    """Flows at the points of a plan, looked up by name."""

    def __init__(self, context: Context) -> None:
        plan = self._plan = context.plan
        self._runs, self._devices = _ends(plan.runs), _ends(plan.devices)
        self._sources = _at(plan.sources)
        self._loads = _at(plan.loads)

    def into(self, currents: Currents, point: str) -> Flow:
        """The larger of a point's two poles. By Kirchhoff's law what flows in flows out again; where a part of it is
        not known apart (the pole that passes straight through a device), the fuller side counts."""
        poles = [self._pole(currents, point, pole) for pole in (FEED, RETURN)]
        return max(poles, key=lambda flow: round(flow.amps, 6))  # of two alike, the feed's

    def _pole(self, currents: Currents, point: str, pole: int) -> Flow:
        terms = self._terms(currents, point, pole)
        ways = [(word, sorted(((sign * amps, name) for name, amps in terms if sign * amps > 0), reverse=True))
                for word, sign in (("into", 1.0), ("out of", -1.0))]  # fmt: skip
        word, listed = max(ways, key=lambda way: round(sum(amps for amps, _ in way[1]), 6))
        total = sum(amps for amps, _ in listed)
        parts = [f'{number(amps, 4)} A of "{name}"' for amps, name in listed[:_SHOWN]]
        rest = sum(amps for amps, _ in listed[_SHOWN:])
        parts += [f"{number(rest, 4)} A of {len(listed) - _SHOWN} more"] if len(listed) > _SHOWN else []
        side = "feed" if pole == FEED else "return"
        return Flow(total, f"Flows {word} its {side} side: {' + '.join(parts)} = {number(total, 4)} A")

    def _terms(self, currents: Currents, point: str, pole: int) -> list[tuple[str, float]]:
        """Name and current of everything at a pole of a point, positive into it."""
        plan = self._plan
        terms = [
            (plan.runs[index].name, sign * float(currents.runs[pole][index]))
            for index, sign in self._runs.get(point, ())
            if not (pole == RETURN and sign < 0 and plan.runs[index].return_path == "chassis")
        ]
        for index, sign in self._devices.get(point, ()):
            terms.append((plan.devices[index].name, sign * float(currents.devices[pole, index])))
        feeds = 1.0 if pole == FEED else -1.0
        for port in self._sources.get(point, ()):
            terms.append((plan.sources[port].name, feeds * float(currents.sources[port])))
        for place in self._loads.get(point, ()):
            terms.append((plan.loads[place].name, -feeds * float(currents.loads[place])))
        for port, place, *_ in currents.solution.condition.converters:
            source = plan.sources[port]
            if isinstance(source, Converter) and source.from_point == point:
                terms.append((source.name, -feeds * float(currents.loads[place])))
        return terms


def _ends(parts: Sequence[Run | Device]) -> _Ends:
    at: _Ends = {}
    for index, part in enumerate(parts):
        at.setdefault(part.from_point, []).append((index, -1.0))
        at.setdefault(part.to_point, []).append((index, 1.0))
    return at


def _at(entries: Sequence[Source | Load]) -> dict[str, list[int]]:
    at: dict[str, list[int]] = {}
    for place, entry in enumerate(entries):
        at.setdefault(entry.at, []).append(place)
    return at


def _device_amps(solution: Solution) -> Floats:
    network = solution.network
    found = np.zeros((2, len(network.plan.devices)))
    branches = np.flatnonzero(network.device >= 0)
    amps = np.nan_to_num(solution.state.branch_A[branches])
    np.add.at(found, (network.pole[branches], network.device[branches]), amps)
    for place, (index, _, _) in enumerate(network.diodes):
        pole = RETURN if network.plan.devices[index].pole == "return" else FEED
        found[pole, index] = solution.diode_amps[place]
    return found


def _source_amps(solution: Solution) -> Floats:
    network, supply = solution.network, solution.supply
    count = len(network.plan.sources)
    delivered = np.where(supply.source_on, np.nan_to_num(solution.state.delivered_A), 0.0)
    amps: Floats = delivered[:count].copy()
    for place, (index, _, _) in enumerate(network.strings):
        amps[index] += delivered[count + place]
    return amps
