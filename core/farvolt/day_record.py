"""What the steps of days come to: kept as they are settled, held to Kirchhoff's laws in batches, summed by step."""

from dataclasses import dataclass, field

import numpy as np

from farvolt.day_bank import BankPart
from farvolt.day_network import StepNetwork, certificate
from farvolt.day_settle import Settled
from farvolt.network import Floats, Network
from farvolt.plan import Charger, Converter, Plan, Solar

_BATCH = 1024


@dataclass(frozen=True)
class _Part:
    step: int
    hours: float
    network: StepNetwork
    settled: Settled
    banks: tuple[BankPart, ...]


@dataclass
class Sums:
    """Over steps (and loads, sources, banks): energies in Wh unless they say otherwise."""

    charge: Floats
    bank_V: Floats
    bank_A: Floats
    source_Wh: Floats
    """(step, source): delivered at the terminals of chargers, solar controllers and converters."""
    given_Wh: Floats
    """What comes into the plan from outside: chargers, solar sources or their arrays."""
    loads_Wh: Floats
    network_Wh: Floats
    """Lost in conductors, protection, devices, diodes."""
    converters_Wh: Floats
    """Lost in converters and in controllers with an array."""
    resistance_Wh: Floats
    unkept_Wh: Floats
    gone_Wh: Floats
    load_Wh: Floats
    """(load): drawn over the whole time."""
    load_V: Floats
    """(load): lowest voltage while it drew."""
    lowest_V: Floats
    """(step): lowest voltage at any load that drew, over its system's nominal voltage."""
    peak_A: Floats
    """(bank, 2): greatest current out and in."""
    imbalance_A: float = 0.0
    uncertified: int = 0
    solutions: int = 0


@dataclass
class Record:
    """Keeps settled parts of steps and sums them up, a batch at a time."""

    network: Network
    steps: int
    banks: int
    load_nominal_V: Floats
    sums: Sums = field(init=False)
    _parts: list[_Part] = field(default_factory=list)

    def __post_init__(self) -> None:
        plan, n, banks = self.network.plan, self.steps, self.banks
        self.sums = Sums(
            charge=np.zeros((n, banks)), bank_V=np.zeros((n, banks)), bank_A=np.zeros((n, banks)),
            source_Wh=np.zeros((n, len(plan.sources))), given_Wh=np.zeros(n), loads_Wh=np.zeros(n),
            network_Wh=np.zeros(n), converters_Wh=np.zeros(n), resistance_Wh=np.zeros(n), unkept_Wh=np.zeros(n),
            gone_Wh=np.zeros(n), load_Wh=np.zeros(len(plan.loads)), load_V=np.full(len(plan.loads), np.inf),
            lowest_V=np.full(n, np.inf), peak_A=np.zeros((banks, 2)),
        )  # fmt: skip

    def keep(
        self, step: int, hours: float, network: StepNetwork, settled: Settled, banks: tuple[BankPart, ...]
    ) -> None:
        """Keep a part of a step."""
        self.rest(step, hours, banks)
        self._parts.append(_Part(step, hours, network, settled, banks))
        if len(self._parts) >= _BATCH:
            self._sum_up()

    def rest(self, step: int, hours: float, banks: tuple[BankPart, ...]) -> None:
        """Keep a part of a step for the banks alone: nothing else flows in it."""
        sums = self.sums
        for index, one in enumerate(banks):
            sums.charge[step, index] = one.charge
            sums.bank_V[step, index] += one.volts * hours
            sums.bank_A[step, index] += one.amps * hours
            sums.resistance_Wh[step] += one.resistance_Wh
            sums.unkept_Wh[step] += one.unkept_Wh
            sums.gone_Wh[step] += one.gone_Wh

    def finish(self, hours: float) -> Sums:
        """All of it, volts and amps as means over their steps."""
        self._sum_up()
        self.sums.bank_V /= hours
        self.sums.bank_A /= hours
        return self.sums

    def _sum_up(self) -> None:
        alike: dict[int, list[_Part]] = {}
        for part in self._parts:
            alike.setdefault(id(part.network), []).append(part)
        for parts in alike.values():
            self._add(parts)
        self._parts.clear()

    def _add(self, parts: list[_Part]) -> None:
        net, sums, plan = parts[0].network, self.sums, self.network.plan
        u = np.array([one.settled.u for one in parts]).T
        delivered = np.array([one.settled.delivered for one in parts]).T
        drawn = np.array([one.settled.drawn for one in parts]).T
        found = certificate(net, u, delivered, drawn)
        sums.solutions += len(parts)
        sums.uncertified += int(np.sum(~found.holds))
        sums.imbalance_A = max(sums.imbalance_A, float(found.imbalance_A.max(initial=0.0)))
        steps = np.array([one.step for one in parts])
        hours = np.array([one.hours for one in parts])
        source_W, load_W = u[: net.split] * delivered, u[net.split :] * drawn
        own = net.load_on < len(plan.loads)
        np.add.at(sums.network_Wh, steps, found.lost_W * hours)
        np.add.at(sums.loads_Wh, steps, load_W[own].sum(axis=0) * hours)
        sums.load_Wh[net.load_on[own]] += (load_W[own] * hours).sum(axis=1)
        given, passed = _kinds(net, plan)
        np.add.at(sums.given_Wh, steps, source_W[given].sum(axis=0) * hours)
        through = load_W[~own].sum(axis=0) - source_W[passed].sum(axis=0)
        np.add.at(sums.converters_Wh, steps, through * hours)
        named = net.on < len(plan.sources)
        for place in np.flatnonzero(named):
            np.add.at(sums.source_Wh[:, net.on[place]], steps, source_W[place] * hours)
        self._volts(net, u[net.split :][own], drawn[own] > 0, steps, net.load_on[own])
        for index in range(self.banks):
            amps = np.array([one.banks[index].amps for one in parts])
            sums.peak_A[index] = np.maximum(sums.peak_A[index], [amps.max(), -amps.min()])

    def _volts(self, net: StepNetwork, volts: Floats, on: np.ndarray, steps: np.ndarray, loads: np.ndarray) -> None:
        at = np.where(on, volts, np.inf)
        self.sums.load_V[loads] = np.minimum(self.sums.load_V[loads], at.min(axis=1, initial=np.inf))
        share = (at / self.load_nominal_V[loads, None]).min(axis=0, initial=np.inf)
        np.minimum.at(self.sums.lowest_V, steps, share)


def _kinds(net: StepNetwork, plan: Plan) -> tuple[np.ndarray, np.ndarray]:
    """Over working source ports: what gives from outside, and what passes on what it drew elsewhere."""
    first_array = len(plan.sources) + len(net.network.strings)
    arrays = range(first_array, first_array + len(net.network.arrays))
    behind = {index for index, _, _ in net.network.arrays}
    given, passed = np.zeros((2, len(net.on)), dtype=bool)
    for place, port in enumerate(net.on.tolist()):
        source = plan.sources[port] if port < len(plan.sources) else None
        passed[place] = isinstance(source, Converter) or port in behind
        given[place] = port in arrays or (isinstance(source, Charger | Solar) and port not in behind)
    return given, passed
