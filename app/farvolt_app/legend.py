"""The head of a drawing: what is drawn, how it is read, and what the symbols in it mean."""

from collections.abc import Iterator, Set

from farvolt.plan import Plan
from farvolt.results import CaseResult
from farvolt.units import number
from farvolt_app import symbols
from farvolt_app.lettering import element, words
from farvolt_app.palette import Theme, ramp
from farvolt_app.shown import CAUTION
from farvolt_app.volt_scale import Scale

_LEFT = 26.0
_TEXT = 11.0
_STEPS = 6


def description(plan: Plan, case: CaseResult | None) -> str:
    """The drawing in a sentence, for those who cannot see it."""
    counts = ((len(plan.runs), "run"), (len(plan.loads), "load"), (len(plan.sources), "source"))
    held = ", ".join(f"{count} {word}{'' if count == 1 else 's'}" for count, word in counts)
    return f"Single-line diagram, {plan.plan.nominal.text}: {held}. {_state(case)}"


def head(plan: Plan, case: CaseResult | None, scale: Scale, used: Set[str], width: float) -> tuple[str, float]:
    """Title, case and legend across `width`, and the y below them; `used` names the symbols to explain."""
    theme, room = scale.theme, width - 2 * _LEFT
    arrows = "; arrows show the current of the feed" if case is not None and case.solved else ""
    reading = f"Nominal {plan.plan.nominal.text}. Each line is feed and return together unless marked{arrows}."
    parts = [
        element(words(plan.plan.name, 20, limit=room, bold=True), _LEFT, 36, theme.ink),
        element(words(_state(case), 14, limit=room), _LEFT, 58, theme.ink),
        element(words(reading, _TEXT, limit=room), _LEFT, 77, theme.quiet),
        element(words(CAUTION, _TEXT, limit=room), _LEFT, 92, theme.quiet),
    ]
    x, y = _LEFT, 115.0
    for text, symbol, symbol_width in _entries(scale, used):
        piece = words(text, _TEXT)
        taken = symbol_width + 6 + piece.width
        if x > _LEFT and x + taken > width - _LEFT:
            x, y = _LEFT, y + 26
        parts.append(f'<g transform="translate({x:.1f} {y:.1f})">{symbol}</g>')
        parts.append(element(piece, x + symbol_width + 6, y + 4, theme.ink))
        x += taken + 22
    parts.append(symbols.path(f"M{_LEFT:g} {y + 20:.1f}H{width - _LEFT:.1f}", theme.faint, width=1))
    return "\n".join(parts), y + 24


def _state(case: CaseResult | None) -> str:
    if case is None:
        return "Wiring only; no case is drawn."
    if case.solved:
        return f"Case: {case.name}"
    return f"Gives way at {number(100 * case.share_held)} % of its loads, so without voltages. Case: {case.name}"


def _entries(scale: Scale, used: Set[str]) -> Iterator[tuple[str, str, float]]:
    """Text, symbol drawn about its left middle, and the symbol's width."""
    theme = scale.theme
    if scale.most > scale.least:
        text = f"volts at a point: {scale.least:.0f} % of nominal (left) to {scale.most:.0f} %"
        yield text, _ramp(theme), 12.0 * _STEPS
    return_line = symbols.path("M0 0h30", theme.ink, width=2, more=symbols.RETURN_DASHES)
    known = {
        "fail": ("fails a stated limit", symbols.fails(8, 0, theme), 16.0),
        "warn": ("doubtful, or not verified", symbols.doubtful(8, 0, theme), 16.0),
        "fuse": ("fuse", symbols.fuse(14, 0, theme), 28.0),
        "breaker": ("breaker", _line(28, theme) + symbols.breaker(14, 0, theme), 28.0),
        "open": ("open", _line(34, theme) + symbols.contact(17, 0, theme, True), 34.0),
        "chassis": ("return through the chassis", symbols.chassis(9, -8, theme), 18.0),
        "return": ("return conductor alone", return_line, 30.0),
    }
    yield from (entry for key, entry in known.items() if key in used)
    sizes = symbols.path("M0 -4h24", theme.ink, width=1.6) + symbols.path("M0 4h24", theme.ink, width=4)
    yield "thicker line: larger conductor", sizes, 24.0


def _line(width: float, theme: Theme) -> str:
    return symbols.path(f"M0 0h{width:g}", theme.ink)


def _ramp(theme: Theme) -> str:
    colours = (ramp(theme, at / (_STEPS - 1)) for at in range(_STEPS))
    return "".join(symbols.rectangle(12 * at, -7, 12, 14, theme.ink, one) for at, one in enumerate(colours))
