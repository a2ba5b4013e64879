"""Which one or two readings would tell the remaining suspects apart best.

For each reading that could be taken near the suspects, in each state, every hypothesis says what the meter would show,
with a spread from its accuracy and from what the readings so far leave open. The worth of a reading is the share of
pairs of hypotheses, by their probabilities, that it would tell apart: 1 − exp(−d²/8) for a distance of d standard
deviations (one less the Bhattacharyya coefficient of two normal densities of equal spread). Worths of independent
readings add in d², which ranks pairs of readings as well.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from farvolt.evidence import Evidence, Hypothesis
from farvolt.locate import Located, atoms_at
from farvolt.network import FEED, RETURN, Floats
from farvolt.plan import CHASSIS
from farvolt.readings import Pin, between
from farvolt.response import Probe, State

_HYPOTHESES = 40
_PINS = 26
_PERCENT, _DIGITS = 0.005, 2

RANGES_V = ((0.4, 1e-4), (4.0, 1e-3), (40.0, 1e-2), (400.0, 0.1))
"""Ranges of an ordinary meter of 4,000 counts, each with its last digit (common practice)."""


@dataclass(frozen=True)
class NextReading:
    """A reading worth taking: where, in which state, what each of the leading hypotheses says it would show (V)."""

    start: Pin
    end: Pin
    state: State
    worth: float
    """Share of the pairs of hypotheses, by their probabilities, that it tells apart: 0 to 1."""
    expected: tuple[tuple[Hypothesis, float], ...]
    sound_V: float

    @property
    def where(self) -> str:
        """Between what to take it, in words."""
        return between(self.start, self.end)


@dataclass(frozen=True)
class _Offer:
    start: Pin
    end: Pin
    state: State
    probe: Probe


def meter_limit_V(volts: float) -> float:
    """What an ordinary meter may be off by at a voltage: 0.5 % and 2 digits of its range."""
    step = next((digit for most, digit in RANGES_V if abs(volts) < most), RANGES_V[-1][1])
    return _PERCENT * abs(volts) + _DIGITS * step


def next_readings(located: Located, states: Sequence[State] | None = None, count: int = 2) -> tuple[NextReading, ...]:
    """The readings, at most `count`, that tell the remaining suspects apart best; none where nothing would.

    `states` are those that readings can be taken in: those of the readings so far and the plan's cases unless given.
    """
    hypotheses = _remaining(located)
    if len(hypotheses) < 2:
        return ()
    usable = list(states or dict.fromkeys([*located.measured.states, *located.measured.installation.planned_states()]))
    offers = [offer for state in usable for offer in _offers(located, state, hypotheses)]
    if not offers:
        return ()
    shown, spread = _predicted(located, offers, hypotheses)
    weights = np.array([one.probability for one in hypotheses])
    weights /= weights.sum()
    apart = (shown[:, :, None] - shown[:, None, :]) ** 2 / ((spread[:, :, None] ** 2 + spread[:, None, :] ** 2) / 2)
    pairs = np.triu(weights[:, None] * weights[None], 1)
    chosen: list[int] = []
    so_far = np.zeros_like(pairs)
    found = []
    for _ in range(count):
        worth = np.sum(pairs * (1 - np.exp(-(so_far + apart) / 8)), axis=(1, 2)) / pairs.sum()
        before = float(np.sum(pairs * (1 - np.exp(-so_far / 8))) / pairs.sum())
        worth[chosen] = -1.0
        best = int(np.argmax(worth - _TROUBLE * np.array([_trouble(located, one) for one in offers])))
        if worth[best] - before < 0.01:
            break
        chosen.append(best)
        so_far = so_far + apart[best]
        found.append(_next(located, offers[best], float(worth[best]), hypotheses, shown[best]))
    return tuple(found)


_TROUBLE = 0.01


def _trouble(located: Located, offer: _Offer) -> float:
    """Another state of the loads than those of the readings so far is some trouble to set up."""
    return 0.0 if any(offer.state is one for one in located.measured.states) else 1.0


def _next(
    located: Located, offer: _Offer, worth: float, hypotheses: Sequence[Hypothesis], shown: Floats
) -> NextReading:
    sound = float(offer.state.read(offer.state.volts, offer.state.siemens, [offer.probe])[0])
    expected = tuple(zip(hypotheses[:6], map(float, shown[:6]), strict=True))
    return NextReading(offer.start, offer.end, offer.state, worth, expected, sound)


def _remaining(located: Located) -> list[Hypothesis]:
    """The likely hypotheses to tell apart, without those that only add something less likely to a likelier one."""
    found: list[Hypothesis] = []
    for one in located.hypotheses:
        if len(found) == _HYPOTHESES or one.probability < 1e-3:
            break
        if not any(before.causes and set(before.causes) < set(one.causes) for before in found):
            found.append(one)
    return found


def _offers(located: Located, state: State, hypotheses: Sequence[Hypothesis]) -> list[_Offer]:
    """Readings that could be taken: at every point near the suspects, and between any two of one pole."""
    pins = _pins(located, state, hypotheses)
    pairs = [(one, (one[0], RETURN)) for one in pins if one[1] == FEED and (one[0], RETURN) in state.network.nodes]
    for at, one in enumerate(pins):
        pairs += [(one, other) for other in pins[at + 1 :] if other[1] == one[1]]
    taken = {(one, _ends(probe)) for one, probe in zip(located.measured.states, located.measured.probes, strict=True)}
    found = []
    for start, end in pairs:
        probe = state.joined(state.network.nodes[start], state.network.nodes[end])
        if probe is not None and probe[0] != probe[1] and (state, _ends(probe)) not in taken:
            taken.add((state, _ends(probe)))
            found.append(_Offer(start, end, state, probe))
    return found


def _ends(probe: Probe) -> tuple[int, int]:
    return min(probe[:2]), max(probe[:2])


def _pins(located: Located, state: State, hypotheses: Sequence[Hypothesis]) -> list[Pin]:
    """The nodes at the ends of what is suspected, and those of the sources."""
    network, evidence = state.network, located.evidence
    names: dict[int, Pin] = {}
    for pin, node in network.nodes.items():
        if not pin[0].startswith("\x1f") and (pin[0] != CHASSIS or pin[1] == RETURN):
            names.setdefault(node, pin)
    wanted: dict[int, None] = {}
    for one in hypotheses:
        for index in one.causes:
            cause = evidence.causes[index]
            for atom, _ in cause.atoms:
                wanted |= dict.fromkeys(_atom_nodes(state, atom))
    for port in np.flatnonzero(state.supply.source_on[: len(network.plan.sources)]):
        wanted |= {int(state.condition.source_a[port]): None, int(state.condition.source_b[port]): None}
    return [names[node] for node in wanted if node in names][: 2 * _PINS]


def _atom_nodes(state: State, atom: int) -> list[int]:
    start, end = state.ends(atom)
    return [start, end]


def _predicted(
    located: Located, offers: Sequence[_Offer], hypotheses: Sequence[Hypothesis]
) -> tuple[Floats, Floats]:
    """What each offer would show under each hypothesis, and its standard deviation: over (offer, hypothesis)."""
    shown, spread = np.empty((len(offers), len(hypotheses))), np.empty((len(offers), len(hypotheses)))
    evidence = located.evidence
    for state in dict.fromkeys(one.state for one in offers):
        places = [at for at, one in enumerate(offers) if one.state is state]
        new = _New(evidence, located, state, [offers[at].probe for at in places])
        for column, one in enumerate(hypotheses):
            shown[places, column], spread[places, column] = new.under(one)
    return shown, spread


class _New:
    """Readings that might be taken in a state, given those that were."""

    def __init__(self, evidence: Evidence, located: Located, state: State, probes: Sequence[Probe]) -> None:
        self.evidence = evidence
        self.response = state.response(probes)
        sound = located.measured.installation.sound(located.measured.states[0])
        columns = [sum((scale * self.response.gain[:, atom] for atom, scale in one), np.zeros(len(probes))) * wide
                   for one, wide in sound]  # fmt: skip
        own = np.array(columns).reshape(len(columns), len(probes)).T
        whitened = evidence.white(own @ evidence.sound.T)
        self.draw = whitened
        """Covariance with the readings so far, which are made independent."""
        self.left = np.maximum(np.sum(own**2, axis=1) - np.sum(whitened**2, axis=1), 0.0)

    def under(self, one: Hypothesis) -> tuple[Floats, Floats]:
        """What the readings would show under a hypothesis, given the readings so far, and the standard deviation."""
        evidence = self.evidence
        moved = np.zeros(len(self.response.planned))
        for atom, value in atoms_at(evidence, one).items():
            moved = moved + self.response.move(atom, np.array([value]))[0]
        shown = self.response.planned + moved + self.draw @ evidence.white(evidence.off - one.moved)
        limits = np.array([meter_limit_V(value) for value in shown])
        return shown, np.sqrt(self.left + self._loose(one) + limits**2 / 3)

    def _loose(self, one: Hypothesis) -> Floats:
        """Variance from how loosely the readings so far hold the values of the hypothesis."""
        if not one.causes:
            return np.zeros(len(self.response.planned))
        evidence, old, new = self.evidence, [], []
        for index, value in zip(one.causes, one.values, strict=True):
            step = np.array([value, value * 1.001])
            old.append(np.diff(evidence.white(evidence.moves(evidence.causes[index], step)), axis=0)[0] / 1e-3)
            ahead = sum(
                (self.response.move(atom, scale * step) for atom, scale in evidence.causes[index].atoms),
                np.zeros((2, len(self.response.planned))),
            )
            new.append(np.diff(ahead, axis=0)[0] / 1e-3)
        slopes, ahead_slopes = np.array(old).T, np.array(new).T
        # In the logarithm of the values, of which no reading leaves more than about a factor of ten open.
        held = np.linalg.inv(slopes.T @ slopes + np.eye(len(one.causes)))
        rest = ahead_slopes - self.draw @ slopes
        return np.asarray(np.sum((rest @ held) * rest, axis=1))
