"""Symbols after IEC 60617 as SVG, each centred on the place it is given; lines run left to right through y."""

from collections.abc import Callable

from farvolt_app.palette import Theme

RETURN_DASHES = ' stroke-dasharray="9 4"'
"""Of the line of a return conductor that has no feed beside it."""


def path(d: str, stroke: str, *, width: float = 1.4, fill: str = "none", more: str = "") -> str:
    """A path element."""
    return f'<path d="{d}" fill="{fill}" stroke="{stroke}" stroke-width="{width:g}"{more}/>'


def rectangle(x: float, y: float, w: float, h: float, stroke: str, fill: str, more: str = "") -> str:
    """A rectangle element."""
    return (
        f'<rect x="{x:.1f}" y="{y:.1f}" width="{w:.1f}" height="{h:.1f}" '
        f'fill="{fill}" stroke="{stroke}" stroke-width="1.2"{more}/>'
    )


def dot(x: float, y: float, radius: float, stroke: str, fill: str) -> str:
    """A circle element."""
    return f'<circle cx="{x:.1f}" cy="{y:.1f}" r="{radius:g}" fill="{fill}" stroke="{stroke}" stroke-width="1.4"/>'


def fuse(x: float, y: float, theme: Theme) -> str:
    """A fuse: a rectangle with the line through it."""
    box = rectangle(x - 11, y - 4.5, 22, 9, theme.ink, theme.paper)
    return box + path(f"M{x - 14:.1f} {y:.1f}h28", theme.ink)


def breaker(x: float, y: float, theme: Theme) -> str:
    """A circuit breaker: a contact with a cross at its fixed side."""
    gap = _gap(x, y, 22, theme)
    cross = path(f"M{x - 13.5:.1f} {y - 3.5:.1f}l7 7m0 -7l-7 7", theme.ink)
    return gap + cross + path(f"M{x + 11:.1f} {y:.1f}L{x - 9:.1f} {y - 8.5:.1f}", theme.ink, width=1.8)


def chassis(x: float, y: float, theme: Theme) -> str:
    """Frame or chassis: a stem down to a bar with three slanted strokes."""
    strokes = "".join(f"M{x + at:.1f} {y + 11:.1f}l-4 6" for at in (-7, 0, 7))
    return path(f"M{x:.1f} {y:.1f}v11M{x - 8:.1f} {y + 11:.1f}h16{strokes}", theme.ink)


def contact(x: float, y: float, theme: Theme, is_open: bool) -> str:
    """A switch contact, lying on its line when closed."""
    gap = _gap(x, y, 24, theme)
    blade = f"L{x - 9:.1f} {y - 9.5:.1f}" if is_open else f"L{x - 10:.1f} {y:.1f}"
    pivots = dot(x - 12, y, 3, theme.ink, theme.paper) + dot(x + 12, y, 3, theme.ink, theme.paper)
    return gap + pivots + path(f"M{x + 10:.1f} {y:.1f}{blade}", theme.ink, width=2)


def selector(x: float, y: float, theme: Theme, is_open: bool) -> str:
    """A switch with a second position."""
    other = dot(x - 10, y + 8.5, 2.4, theme.ink, theme.paper)
    return contact(x, y, theme, is_open) + other


def relay(x: float, y: float, theme: Theme, is_open: bool) -> str:
    """A contact moved by a coil."""
    link = path(f"M{x:.1f} {y + 1 if not is_open else y - 4:.1f}V{y + 7:.1f}", theme.ink, width=1, more=_DASHES)
    return contact(x, y, theme, is_open) + link + rectangle(x - 7, y + 7, 14, 7, theme.ink, theme.paper)


def shunt(x: float, y: float, theme: Theme, is_open: bool) -> str:
    """A resistor with its own terminals for measuring."""
    box = rectangle(x - 15, y - 5, 30, 10, theme.ink, theme.paper)
    return box + path(f"M{x - 9:.1f} {y - 5:.1f}v-3.5M{x + 9:.1f} {y - 5:.1f}v-3.5", theme.ink)


def diode(x: float, y: float, theme: Theme, is_open: bool) -> str:
    """A diode that lets current pass to the right."""
    triangle = path(f"M{x - 7:.1f} {y - 7:.1f}l14 7l-14 7Z", theme.ink, fill=theme.paper)
    return triangle + path(f"M{x + 7:.1f} {y - 7:.1f}v14M{x - 9:.1f} {y:.1f}h18", theme.ink)


def diode_left(x: float, y: float, theme: Theme, is_open: bool) -> str:
    """A diode that lets current pass to the left."""
    return f'<g transform="rotate(180 {x:.1f} {y:.1f})">{diode(x, y, theme, is_open)}</g>'


def connector(x: float, y: float, theme: Theme, is_open: bool) -> str:
    """A plug in its socket."""
    gap = _gap(x, y, 8, theme)
    plug = rectangle(x - 8, y - 2.5, 10, 5, theme.ink, theme.ink)
    socket = path(f"M{x - 1:.1f} {y - 7:.1f}a7 7 0 0 1 0 14M{x + 6:.1f} {y:.1f}h3", theme.ink)
    return gap + plug + socket


DEVICES: dict[str, Callable[[float, float, Theme, bool], str]] = {
    "switch": contact,
    "selector": selector,
    "relay": relay,
    "shunt": shunt,
    "diode": diode,
    "connector": connector,
}


def battery(x: float, y: float, theme: Theme) -> str:
    """Two cells: long thin lines and short thick ones."""
    thin = f"M{x - 9:.1f} {y - 11:.1f}v22M{x + 3:.1f} {y - 11:.1f}v22M{x - 15:.1f} {y:.1f}h6M{x + 9:.1f} {y:.1f}h6"
    return path(thin, theme.ink) + path(f"M{x - 3:.1f} {y - 5:.1f}v10M{x + 9:.1f} {y - 5:.1f}v10", theme.ink, width=3)


def charger(x: float, y: float, theme: Theme) -> str:
    """A rectifier: from alternating to direct current."""
    wave = f"M{x - 10:.1f} {y - 5:.1f}q2.5 -5 5 0t5 0"
    return _converts(x, y, theme, wave, _direct(x + 2, y + 5))


def converter(x: float, y: float, theme: Theme) -> str:
    """From direct current to direct current."""
    return _converts(x, y, theme, _direct(x - 10, y - 6), _direct(x + 2, y + 5))


def solar(x: float, y: float, theme: Theme) -> str:
    """A photovoltaic generator: a cell in a box, with light falling on it."""
    box = rectangle(x - 13, y - 13, 26, 26, theme.ink, theme.paper)
    cell = path(f"M{x - 2:.1f} {y - 4:.1f}v14M{x - 10:.1f} {y + 3:.1f}h8M{x + 3:.1f} {y + 3:.1f}h7", theme.ink)
    cell += path(f"M{x + 3:.1f} {y - 1:.1f}v8", theme.ink, width=3)
    light = "".join(f"M{x + at:.1f} {y - 11:.1f}l4 5m-3.4 -1l3.4 1l-0.2 -3.5" for at in (-11, -4))
    return box + cell + path(light, theme.ink, width=1)


SOURCES: dict[str, Callable[[float, float, Theme], str]] = {
    "battery": battery,
    "charger": charger,
    "solar": solar,
    "converter": converter,
}


def fails(x: float, y: float, theme: Theme) -> str:
    """A filled triangle with an exclamation mark."""
    shape = path(f"M{x:.1f} {y - 7.5:.1f}l8 14h-16Z", theme.alarm, fill=theme.alarm, more=' stroke-linejoin="round"')
    return shape + path(f"M{x:.1f} {y - 3:.1f}v5M{x:.1f} {y + 3.6:.1f}v1.6", theme.paper, width=1.8)


def doubtful(x: float, y: float, theme: Theme) -> str:
    """An open diamond with a bar."""
    shape = path(f"M{x:.1f} {y - 7.5:.1f}l7.5 7.5l-7.5 7.5l-7.5 -7.5Z", theme.doubt, fill=theme.paper, width=1.8)
    return shape + path(f"M{x:.1f} {y - 3.5:.1f}v4M{x:.1f} {y + 2.2:.1f}v1.6", theme.doubt, width=1.8)


_DASHES = ' stroke-dasharray="2 2"'


def _gap(x: float, y: float, width: float, theme: Theme) -> str:
    """Clears the line where a contact stands in it."""
    return path(f"M{x - width / 2:.1f} {y:.1f}h{width:g}", theme.paper, width=6)


def _direct(x: float, y: float) -> str:
    return f"M{x:.1f} {y - 1.5:.1f}h8M{x:.1f} {y + 1.5:.1f}h2m1 0h2m1 0h2"


def _converts(x: float, y: float, theme: Theme, taken: str, given: str) -> str:
    box = rectangle(x - 13, y - 13, 26, 26, theme.ink, theme.paper)
    return box + path(f"M{x - 13:.1f} {y + 13:.1f}l26 -26{taken}{given}", theme.ink, width=1.2)
