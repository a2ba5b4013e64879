"""Suspects in words: what is wrong there and by how much."""

from farvolt.causes import Cause
from farvolt.evidence import Evidence, Hypothesis
from farvolt.units import number


def amount(cause: Cause, value: float) -> str:
    """How far a cause is from the plan, with its unit."""
    if cause.kind in ("joint", "source resistance"):
        return f"{number(1000 * value, 3)} mohm more"
    word = "more" if value > 0 else "less"
    return f"{number(abs(100 * value), 3)} % {word}"


def together(evidence: Evidence, one: Hypothesis) -> str:
    """A hypothesis: its causes with their amounts."""
    causes = [evidence.causes[index] for index in one.causes]
    said = [f"{cause.words}, {amount(cause, value)}" for cause, value in zip(causes, one.values, strict=True)]
    return " together with ".join(said)
