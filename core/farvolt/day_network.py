"""The network reduced to its ports for days: one for each set of working sources, and the certificate of its steps.

The conductors are factorised once (`ports`); what is solved of them step after step is in `day_settle`.
"""

from dataclasses import dataclass

import numpy as np

from farvolt.equations import IMBALANCE_A
from farvolt.fed import Fed, fed, first_diode
from farvolt.network import Floats, Network
from farvolt.operating import KNEE_SHARE, Operating
from farvolt.ports import Ports


@dataclass
class Laws:
    """The laws of one step, over all source ports and all load ports of the plan."""

    volts: Floats
    ohm: Floats
    low: Floats
    high: Floats
    power: Floats
    watts: Floats
    amps: Floats
    siemens: Floats


@dataclass(frozen=True, slots=True)
class Matrix:
    """Newton's matrix: slopes of the ports, and the voltages that what they put in beside these makes at the ports."""

    source_S: tuple[float, ...]
    """Fall of each source's current with its voltage, a diode's leak not counted."""
    pull_S: Floats
    """Fall of what each load draws with its voltage, its constant conductance not counted."""
    toward: Floats


class StepNetwork:
    """The network of a set of working sources. Arrays over its ports have the sources first."""

    def __init__(self, network: Network, condition: Operating, factor_of_20: Floats, supply: Fed | None = None) -> None:
        self.network, self.condition, self.factor_of_20 = network, condition, factor_of_20
        self.supply = supply or fed(network, condition)
        self.ports = Ports(network, condition, factor_of_20, self.supply, {})
        e = self.ports.equations
        self.on, self.load_on = e.sources, e.loads
        self.split = len(self.on)
        self.every_load = len(self.load_on) == len(condition.load_a)
        self.leak: list[float] = condition.leak[self.on].tolist()
        self.floor: list[float] = (KNEE_SHARE * condition.nominal[self.on]).tolist()
        self.knee = condition.knee[self.load_on]
        self.nominal = np.append(condition.nominal[self.on], self.knee / KNEE_SHARE)
        self.held = self.ports.held_S
        self.part = self.supply.part[self.ports.a]
        parts, found = np.unique(self.part[: self.split], return_inverse=True)
        self.parts = len(parts)
        self.source_part: list[int] = found.tolist()
        self.load_part = np.searchsorted(parts, self.part[self.split :])
        self.place = {int(port): place for place, port in enumerate(self.on)}
        into = {int(port): place for place, port in enumerate(self.load_on)}
        self.converters = [(self.place[s], into[c], share, idle) for s, c, share, idle in e.converters]
        self.everywhere = np.append(self.on, len(condition.source_a) + self.load_on)
        """Places of the working ports among all source and load ports."""
        self.matrices: dict[tuple[int, object], Matrix] = {}

    def known(self, u: Floats) -> Floats:
        """Voltages of the working ports over all source and load ports; NaN elsewhere."""
        found = np.full(len(self.condition.source_a) + len(self.condition.load_a), np.nan)
        found[self.everywhere] = u
        return found

    def load_volts(self, u: Floats, loads: int) -> Floats:
        """Volts at the plan's loads; 0 where one is not fed."""
        found = np.zeros(len(self.condition.load_a))
        found[self.load_on] = u[self.split :]
        return found[:loads]

    def highest(self, volts: Floats) -> Floats:
        """Over ports: the highest voltage of a source in the part that a port belongs to; nominal without one."""
        high = np.zeros(int(self.part.max(initial=0)) + 1)
        np.maximum.at(high, self.part[: self.split], np.where(self.on < first_diode(self.network), volts, 0.0))
        found = high[self.part]
        return np.where(found > 0, found, self.nominal)

    def matrix(self, source_S: list[float], u: Floats, watts: Floats, siemens: Floats) -> Matrix:
        """The matrix of sources with these slopes, and of loads about the voltages `u`."""
        pull_S = watts / np.maximum(u, self.knee) ** 2
        slope = np.append(np.add(source_S, self.leak), siemens - pull_S)
        system = np.eye(len(slope)) - self.ports.impedance * (self.held - slope)
        try:
            toward = np.linalg.solve(system, self.ports.impedance)
        except np.linalg.LinAlgError:
            toward = np.full_like(system, np.nan)
        # Loads draw what they put in: with the sign in the matrix, a round need not turn it.
        toward[:, self.split :] *= -1.0
        return Matrix(tuple(source_S), pull_S, toward)


@dataclass(frozen=True)
class Certificate:
    """Steps of one network held to Kirchhoff's laws on all of its nodes, over steps."""

    lost_W: Floats
    """In conductors, protection, devices and diodes."""
    imbalance_A: Floats
    holds: np.ndarray


def certificate(step: StepNetwork, u: Floats, delivered: Floats, drawn: Floats) -> Certificate:
    """Node voltages, currents and losses of settled steps, (port, step), recomputed on the full network."""
    ports, e, live = step.ports, step.ports.equations, step.supply.live
    inward = step.held[:, None] * u
    inward[: step.split] += delivered
    inward[step.split :] -= drawn
    volts = ports.spread @ inward
    along = volts[e.a] - volts[e.b]
    flow = e.siemens[:, None] * along
    out = np.zeros((step.network.node_count, u.shape[1]))
    for nodes, amps, sign in (
        (e.a, flow, 1.0), (e.b, flow, -1.0),
        (ports.a[: step.split], delivered, -1.0), (ports.b[: step.split], delivered, 1.0),
        (ports.a[step.split :], drawn, 1.0), (ports.b[step.split :], drawn, -1.0),
    ):  # fmt: skip
        np.add.at(out, nodes, sign * amps)
    imbalance = np.abs(out[live])
    highest = np.abs(volts).max(axis=0, initial=0.0)
    allowed = np.maximum(IMBALANCE_A, e.scale[live, None] * highest)
    across = volts[ports.a] - volts[ports.b]
    # The currents are those of the laws at the ports' voltages: these must be the network's.
    consistent = np.abs(across - u).max(axis=0, initial=0.0) <= 1e-10 * np.maximum(1.0, highest)
    diodes = e.sources >= first_diode(step.network)
    lost = (along * flow).sum(axis=0) - (u[: step.split] * delivered)[diodes].sum(axis=0)
    return Certificate(lost, imbalance.max(axis=0, initial=0.0), consistent & np.all(imbalance <= allowed, axis=0))
