"""How well each cause, and each pair of causes, explains what was read: marginal likelihoods and probabilities.

Readings differ from what the plan says by the meter's error and by what sound parts may differ, both taken as normal
with the variance of an even spread over their limits. A cause moves them along a curve; its likelihood is averaged over
the values held possible, so that a cause with more freedom pays for it (Bayes factors: Kass and Raftery 1995, whose
bounds of 20 for strong and 150 for very strong evidence are used). Pairs are screened by non-negative least squares
(Lawson and Hanson 1974) and averaged by Laplace's method about their best values.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from farvolt.causes import Cause, Scaled
from farvolt.network import Floats
from farvolt.response import Response

PRIOR_SOUND, PRIOR_ONE, PRIOR_TWO = 0.5, 0.4, 0.1
"""Odds, before anything is read, that an installation worth measuring is sound, has one fault, has two: a judgement."""

STRONG = 20.0
"""Suspects whose odds are within this factor of the first's are not told apart (strong evidence: Kass and Raftery)."""

_SINGLES, _PAIRED = 14, 10
_THIN = 5
_NEAR = 3.0


@dataclass(frozen=True)
class Hypothesis:
    """Causes (their places in the list; none: all is sound) with their best values and how well they explain.

    `log_odds` is the logarithm of prior times marginal likelihood, against that of a sound installation's likelihood.
    """

    causes: tuple[int, ...]
    values: tuple[float, ...]
    log_odds: float
    moved: Floats = field(repr=False)
    """How the readings move under it."""
    probability: float = 0.0


class Evidence:
    """Readings held against the causes that may explain them."""

    def __init__(
        self, response: Response, read: Floats, limits: Floats, sound: Sequence[tuple[Scaled, float]],
        causes: Sequence[Cause],
    ) -> None:  # fmt: skip
        self.response, self.causes = response, causes
        self.read, self.limits, self._sound = read, limits, sound
        self.off = read - response.planned
        """What was read less what the plan says."""
        columns = [sum((scale * response.gain[:, atom] for atom, scale in one), np.zeros(len(read))) * wide
                   for one, wide in sound]  # fmt: skip
        self.sound = np.array(columns).reshape(len(columns), len(read)).T
        self.meter = limits / np.sqrt(3)
        self.covariance = np.diag(self.meter**2) + self.sound @ self.sound.T
        self.whitening = np.linalg.inv(np.linalg.cholesky(self.covariance))
        self._weight = sum(one.weight for one in causes)
        self._curves: dict[int, Floats] = {}

    def reread(self, at: int, value: float, limit: float) -> "Evidence":
        """The same with one reading another."""
        read, limits = self.read.copy(), self.limits.copy()
        read[at], limits[at] = value, limit
        return Evidence(self.response, read, limits, self._sound, self.causes)

    def log_likelihood(self) -> float:
        """Logarithm of how likely the readings are, whatever may be wrong: over all hypotheses, but for a constant."""
        odds = np.array([one.log_odds for one in self.hypotheses()])
        total = float(odds.max() + np.log(np.sum(np.exp(odds - odds.max()))))
        return total - self.sound_misfit / 2 + float(np.linalg.slogdet(self.whitening)[1])

    def white(self, moved: Floats) -> Floats:
        """Movements over (…, reading), made independent and of unit variance."""
        return np.asarray(moved @ self.whitening.T)

    def moves(self, cause: Cause, values: Floats) -> Floats:
        """How the readings move at each of some values of a cause: over (value, reading)."""
        return sum(
            (self.response.move(atom, scale * values) for atom, scale in cause.atoms),
            np.zeros((len(values), len(self.off))),
        )

    def curve(self, index: int) -> Floats:
        """How the readings move with a cause over its values, made independent."""
        if index not in self._curves:
            cause = self.causes[index]
            self._curves[index] = self.white(self.moves(cause, cause.values))
        return self._curves[index]

    @property
    def sound_misfit(self) -> float:
        """Squared distance of the readings from the plan, in standard deviations: chi-squared if all is sound."""
        return float(np.sum(self.white(self.off) ** 2))

    def sound_only(self) -> Hypothesis:
        """All is as planned, within tolerances."""
        return Hypothesis((), (), float(np.log(PRIOR_SOUND)), np.zeros(len(self.off)))

    def single(self, index: int, beside: Floats | None = None) -> Hypothesis:
        """One cause, averaged over its values. `beside` are movements that the linear response leaves out."""
        cause = self.causes[index]
        rest = self.off if beside is None else self.off - beside
        curve = self.curve(index)
        fits = curve @ self.white(rest) - np.sum(curve**2, axis=1) / 2 + _prior(cause, cause.values)
        if beside is not None:
            fits += (np.sum(self.white(self.off) ** 2) - np.sum(self.white(rest) ** 2)) / 2
        best = int(np.argmax(fits))
        average = float(fits[best] + np.log(np.mean(np.exp(fits - fits[best]))))
        odds = average + float(np.log(PRIOR_ONE * cause.weight / self._weight))
        value = _peak(cause.values, fits, best)
        moved = self.moves(cause, np.array([value]))[0] + (0.0 if beside is None else beside)
        return Hypothesis((index,), (value,), odds, moved)

    def pair(self, first: int, second: int, beside: Floats | None = None, worth: float = -np.inf) -> Hypothesis:
        """Two causes together, their movements added. Far below `worth`, a log likelihood ratio, no care is taken."""
        one, other = self.causes[first], self.causes[second]
        rest = self.white(self.off if beside is None else self.off - beside)
        a, b = self.curve(first)[::_THIN], self.curve(second)[::_THIN]
        alone = [moved @ rest - np.sum(moved**2, axis=1) / 2 + _prior(cause, cause.values[::_THIN])
                 for moved, cause in ((a, one), (b, other))]  # fmt: skip
        fits = alone[0][:, None] + alone[1][None] - a @ b.T
        at = np.unravel_index(int(np.argmax(fits)), fits.shape)
        values = np.array([one.values[::_THIN][at[0]], other.values[::_THIN][at[1]]])
        values, fit, slopes = self._refine((one, other), values, rest, float(fits[at]) > worth - _NEAR)
        if beside is not None:
            fit += float(np.sum(self.white(self.off) ** 2) - np.sum(rest**2)) / 2
        fit += sum(float(_prior(cause, values[at : at + 1])[0]) for at, cause in enumerate((one, other)))
        average = fit + _laplace((one, other), values, slopes)
        weights = 2 * one.weight * other.weight / self._weight**2
        moved = self._together((one, other), values) + (0.0 if beside is None else beside)
        odds = float(average + np.log(PRIOR_TWO * weights))
        return Hypothesis((first, second), (float(values[0]), float(values[1])), odds, moved)

    def again(self, one: Hypothesis, beside: Floats) -> Hypothesis:
        """A hypothesis of one or two causes fitted anew, with movements that the linear response leaves out."""
        if len(one.causes) == 1:
            return self.single(one.causes[0], beside)
        return self.pair(one.causes[0], one.causes[1], beside)

    def _together(self, causes: Sequence[Cause], values: Floats) -> Floats:
        moved: Floats = np.sum([self.moves(one, values[at : at + 1])[0] for at, one in enumerate(causes)], axis=0)
        return moved

    def _refine(
        self, causes: tuple[Cause, Cause], values: Floats, rest: Floats, careful: bool
    ) -> tuple[Floats, float, Floats]:
        """Gauss and Newton's method on two values: the values, the log likelihood ratio, and the slopes there."""
        fit, slopes = -np.inf, np.zeros((len(rest), 2))
        for _ in range(5 if careful else 1):
            moved = self.white(self._together(causes, values))
            now = float(moved @ rest - moved @ moved / 2)
            steps = 1e-4 * np.abs(values)
            ahead = [self.moves(one, values[at : at + 1] + steps[at])[0] - self.moves(one, values[at : at + 1])[0]
                     for at, one in enumerate(causes)]  # fmt: skip
            slope = self.white(np.array(ahead) / steps[:, None]).T
            if now <= fit + 1e-6:
                break
            fit, slopes, best = now, slope, values
            step = np.linalg.lstsq(slope, rest - moved, rcond=None)[0]
            ends = np.array([_ends(one.values, at) for one, at in zip(causes, values, strict=True)]).T
            step = np.clip(step, -0.5 * np.abs(values), 1.0 * np.abs(values))
            values = np.clip(values + step, *ends)
        return best, fit, slopes

    def hypotheses(self) -> list[Hypothesis]:
        """Sound, every cause alone and the likely pairs, by falling odds."""
        singles = [self.single(index) for index in self._that_matter()]
        best = max((one.log_odds for one in singles), default=0.0)
        pairs = (self.pair(*both, worth=best) for both in self._pairs(singles))
        found = [self.sound_only(), *singles, *pairs]
        return probable(found)

    def _that_matter(self) -> list[int]:
        """Causes that can move a reading at all."""
        return [
            at
            for at, cause in enumerate(self.causes)
            if np.abs(self.white(self.moves(cause, cause.values[[0, -1]]))).max(initial=0.0) > 0.1
        ]

    def _pairs(self, singles: Sequence[Hypothesis]) -> Iterator[tuple[int, int]]:
        """Pairs worth a look: of the best single causes, of what the rest left by each of these points to, and of
        what non-negative least squares takes."""
        if len(self.off) < 2:
            return
        ranked = [one.causes[0] for one in sorted(singles, key=lambda one: -one.log_odds)]
        chosen = dict.fromkeys(ranked[:_SINGLES])
        chosen |= dict.fromkeys(self._least_squares(ranked))
        pairs = {(min(a, b), max(a, b)) for a in chosen for b in chosen if a != b}
        best = {one.causes[0]: one for one in singles}
        for first in ranked[:6]:
            left = best[first].moved
            after = sorted((-self.single(index, left).log_odds, index) for index in ranked if index != first)
            pairs |= {(min(first, index), max(first, index)) for _, index in after[:_PAIRED]}
        yield from sorted(pairs)

    def _least_squares(self, ranked: Sequence[int]) -> list[int]:
        """The bad joints that non-negative least squares puts ohms into, all at once."""
        from scipy.optimize import nnls

        joints = [index for index in ranked if self.causes[index].kind == "joint"]
        if not joints:
            return []
        slopes = np.array([self.moves(self.causes[index], np.array([1e-3]))[0] for index in joints])
        ohms, _ = nnls(self.white(slopes).T, self.white(self.off), maxiter=30 * len(joints))
        order = np.argsort(-ohms)
        return [joints[at] for at in order[:6] if ohms[at] > 0]


def _prior(cause: Cause, values: Floats) -> Floats:
    """Logarithm of how likely some values of a cause are beside an even spread."""
    if cause.prior is None:
        return np.zeros(len(values))
    return np.interp(values, cause.values, cause.prior)


def _ends(values: Floats, at: float) -> tuple[float, float]:
    """The ends of the values held possible that have the sign of `at`."""
    same = values[np.sign(values) == np.sign(at)]
    return float(same.min()), float(same.max())


def _peak(values: Floats, fits: Floats, best: int) -> float:
    """The best value, between grid points by a parabola where it is an inner one."""
    if not 0 < best < len(values) - 1 or values[best - 1] * values[best + 1] <= 0:
        return float(values[best])
    below, at, above = fits[best - 1 : best + 2]
    bend = below - 2 * at + above
    shift = 0.5 * (below - above) / bend if bend < 0 else 0.0
    sign = np.sign(values[best])
    logs = np.log(np.abs(values[best - 1 : best + 2]))
    return float(sign * np.exp(logs[1] + shift * (logs[2] - logs[0]) / 2))


def _laplace(causes: Sequence[Cause], values: Floats, slopes: Floats) -> float:
    """Logarithm of the share of the values held possible that lies under the peak, in their logarithms."""
    wide = np.array([np.log(np.abs(one.values).max() / np.abs(one.values).min()) for one in causes])
    wide *= np.array([1 + bool(one.values.min() < 0 < one.values.max()) for one in causes])
    bend = (slopes * values).T @ (slopes * values) + np.diag(2 * np.pi / wide**2)
    return float(len(causes) / 2 * np.log(2 * np.pi) - np.log(wide).sum() - 0.5 * np.linalg.slogdet(bend)[1])


def probable(found: Sequence[Hypothesis]) -> list[Hypothesis]:
    """Hypotheses with their probabilities, which sum to 1, by falling ones."""
    odds = np.array([one.log_odds for one in found])
    share = np.exp(odds - odds.max())
    share /= share.sum()
    named = [replace(one, probability=float(share[at])) for at, one in enumerate(found)]
    return sorted(named, key=lambda one: -one.probability)
