"""Where an installation is not as planned: readings compared with the plan, and what may be wrong by falling odds."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from farvolt.causes import MOST_OHM, Cause
from farvolt.danger import danger
from farvolt.evidence import STRONG, Evidence, Hypothesis, probable
from farvolt.installation import Installation, Measured, measured
from farvolt.network import Floats
from farvolt.reading_slips import refuse_slips
from farvolt.readings import Reading, ReadingSet

ALARM = 0.2
"""Readings are said not to fit the plan where a sound installation is less probable than this."""

_EXACT = 6
_VISIBLE = 4.0
"""A fault that moves the readings by so many standard deviations is seen nearly always."""


@dataclass(frozen=True)
class Suspect:
    """One cause that the readings point to. `value` is in ohms more (joint, source resistance), else a share more
    than planned. Watts are those in its extra resistance: in the states read, and in the plan's worst case."""

    cause: Cause
    value: float
    probability: float
    named: bool
    """Among those that explain the readings: the first, or not to be told apart from it."""
    watts: float | None
    most_watts: float | None
    worst_case: str
    danger: str


@dataclass(frozen=True)
class Compared:
    """One reading beside what the plan says, and by how many standard deviations it is off."""

    reading: Reading
    state: str
    planned: float
    spread: float
    """Standard deviation of what a sound installation and this meter would show."""
    deviations: float


@dataclass(frozen=True)
class Unseen:
    """A place where these readings would show no bad joint of up to `ohm`; infinite: none at all."""

    cause: Cause
    ohm: float


@dataclass(frozen=True)
class Located:
    """The answer. `fits` when the readings fit the plan; else `suspects` by falling probability."""

    fits: bool
    sound_probability: float
    suspects: tuple[Suspect, ...]
    explanations: tuple[Hypothesis, ...]
    """The first, and what cannot be told apart from it: each one cause or two together."""
    explained: bool
    """Whether the first explanation fits what was read."""
    compared: tuple[Compared, ...]
    unseen: tuple[Unseen, ...]
    measured: Measured
    evidence: Evidence
    hypotheses: tuple[Hypothesis, ...]

    @property
    def unique(self) -> bool:
        """Whether all explanations that are left hold what is bad in the first: a battery's charge and a load's
        demand, which come and go, count where nothing else is bad."""
        if self.fits or not self.explanations:
            return False
        first = self.explanations[0]
        core = _lasting(self.evidence, first) or set(first.causes)
        return all(core <= set(one.causes) for one in self.explanations)

    @property
    def others(self) -> tuple[Hypothesis, ...]:
        """The explanations that are not told apart from the first, without those that only add to a likelier one."""
        found: list[Hypothesis] = []
        for one in self.explanations:
            if not any(set(before.causes) <= set(one.causes) for before in found):
                found.append(one)
        return tuple(found[1:])

    @property
    def named(self) -> tuple[Suspect, ...]:
        """The suspects that the readings do not tell apart."""
        return tuple(one for one in self.suspects if one.named)


def locate(installation: Installation, sets: Sequence[ReadingSet], *, as_read: bool = False) -> Located:
    """Compare readings with a plan. Raises ReadingsError for readings that look like slips, unless taken `as_read`."""
    found = measured(installation, sets)
    evidence = found.evidence()
    if not as_read:
        refuse_slips(found, evidence)
    hypotheses = _exact(found, evidence, evidence.hypotheses())
    sound = next(one.probability for one in hypotheses if not one.causes)
    fits = sound >= ALARM
    wrong = [one for one in hypotheses if one.causes]
    explanations = tuple(one for one in wrong if one.probability * STRONG >= wrong[0].probability) if wrong else ()
    return Located(
        fits=fits or not wrong,
        sound_probability=sound,
        suspects=_suspects(found, evidence, wrong, explanations),
        explanations=explanations,
        explained=bool(wrong) and _explains(evidence, wrong[0]),
        compared=_compared(found, evidence),
        unseen=_unseen(evidence),
        measured=found,
        evidence=evidence,
        hypotheses=tuple(hypotheses),
    )


def _lasting(evidence: Evidence, one: Hypothesis) -> set[int]:
    return {index for index in one.causes if evidence.causes[index].kind not in ("load", "source volts")}


def atoms_at(evidence: Evidence, one: Hypothesis) -> dict[int, float]:
    """The values of all atoms under a hypothesis."""
    values: dict[int, float] = {}
    for index, value in zip(one.causes, one.values, strict=True):
        for atom, scale in evidence.causes[index].atoms:
            values[atom] = values.get(atom, 0.0) + scale * value
    return values


def _exact(found: Measured, evidence: Evidence, hypotheses: list[Hypothesis]) -> list[Hypothesis]:
    """The leading hypotheses fitted anew at the network itself, and all of them by their new odds."""
    leading = [one for one in hypotheses[:_EXACT] if one.causes and one.probability > 5e-3]
    done = {one.causes: _exactly(found, evidence, one) for one in leading}
    return probable([done.get(one.causes, one) for one in hypotheses])


def _exactly(found: Measured, evidence: Evidence, one: Hypothesis) -> Hypothesis:
    """What the network says beyond the linear response is taken from the readings, and the values are fitted again."""
    fitted = one
    for _ in range(2):
        read = found.exact(atoms_at(evidence, fitted))
        if read is None:
            return one
        linear = sum(
            (
                evidence.moves(evidence.causes[index], np.array([value]))[0]
                for index, value in zip(fitted.causes, fitted.values, strict=True)
            ),
            np.zeros(len(read)),
        )
        beside = read - evidence.response.planned - linear
        if np.abs(evidence.white(beside)).max() < 0.02:
            break
        fitted = evidence.again(one, beside)
    return replace(fitted, probability=one.probability)


def _explains(evidence: Evidence, one: Hypothesis) -> bool:
    """Whether what a hypothesis leaves is within what the meter and sound parts make likely (1 in 1,000)."""
    from scipy.special import chdtrc

    left = float(np.sum(evidence.white(evidence.off - one.moved) ** 2))
    return float(chdtrc(len(evidence.off), left)) >= 1e-3


def _suspects(
    found: Measured, evidence: Evidence, wrong: Sequence[Hypothesis], explanations: Sequence[Hypothesis]
) -> tuple[Suspect, ...]:
    """Every cause by the probability of all hypotheses that hold it, with the value of the first of these."""
    share: dict[int, float] = {}
    value: dict[int, float] = {}
    for one in wrong:
        for index, fitted in zip(one.causes, one.values, strict=True):
            share[index] = share.get(index, 0.0) + one.probability
            value.setdefault(index, fitted)
    named = {index for one in explanations for index in one.causes}
    ranked = sorted(share, key=lambda index: -share[index])
    kept = [index for index in ranked if index in named or share[index] >= 0.01]
    return tuple(_suspect(found, evidence.causes[at], value[at], share[at], at in named) for at in kept)


def _suspect(found: Measured, cause: Cause, value: float, share: float, named: bool) -> Suspect:
    if cause.kind != "joint":
        return Suspect(cause, value, share, named, None, None, "", "")
    ohm = np.array([value])
    here = max(float(state.heat_W(cause.branch, ohm)[0]) for state, _ in found.by_state)
    worst, case = here, ""
    for state in found.installation.planned_states():
        watts = float(state.heat_W(cause.branch, ohm)[0])
        if watts > worst:
            worst, case = watts, state.case.name
    return Suspect(cause, value, share, named, here, worst, case, danger(worst))


def _compared(found: Measured, evidence: Evidence) -> tuple[Compared, ...]:
    spread = np.sqrt(np.diag(evidence.covariance))
    return tuple(
        Compared(one, state.case.name, float(planned), float(wide), float(off / wide))
        for one, state, planned, wide, off in zip(
            found.readings, found.states, evidence.response.planned, spread, evidence.off, strict=True
        )
    )


def _unseen(evidence: Evidence) -> tuple[Unseen, ...]:
    """Places by the least bad joint that the readings would show."""
    found = []
    for cause in evidence.causes:
        if cause.kind == "joint":
            seen = np.linalg.norm(evidence.white(evidence.moves(cause, cause.values)), axis=1) >= _VISIBLE
            found.append(Unseen(cause, _first(cause.values, seen)))
    return tuple(sorted(found, key=lambda one: -one.ohm))


def _first(values: Floats, seen: np.ndarray) -> float:
    return float(values[int(np.argmax(seen))]) if seen.any() else float("inf")


__all__ = ["ALARM", "MOST_OHM", "Compared", "Located", "Suspect", "Unseen", "atoms_at", "locate"]
