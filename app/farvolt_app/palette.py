"""Colours of a drawing: light and dark, and a ramp of one hue whose lightness alone carries the order."""

import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Theme:
    """Colours by what they are for; the ramp goes from the least voltage to the most."""

    paper: str
    ink: str
    quiet: str
    faint: str
    surface: str
    alarm: str
    doubt: str
    least: tuple[float, float]
    most: tuple[float, float]


LIGHT = Theme("#ffffff", "#16202b", "#4a5866", "#b9c3cd", "#f5f7f9", "#a3151f", "#7a4b00", (0.42, 0.11), (0.95, 0.03))
DARK = Theme("#12181f", "#eef2f5", "#a9b6c2", "#4b5864", "#1b232c", "#ff8f86", "#f3bd5e", (0.93, 0.05), (0.34, 0.07))
"""What has lost most stands out most from the paper: dark on white, light on black."""

_HUE = 245.0
"""Of the ramp, in degrees of OKLCH: a blue, which the common forms of colour blindness leave apart from grey."""


def ramp(theme: Theme, share: float) -> str:
    """The colour at `share` of the way from the least (0) to the most (1)."""
    at = min(1.0, max(0.0, share))
    (l0, c0), (l1, c1) = theme.least, theme.most
    return _hex(_oklch(l0 + at * (l1 - l0), c0 + at * (c1 - c0), _HUE))


def legible_on(colour: str) -> str:
    """Black or white, whichever contrasts more with `colour` (relative luminance as in WCAG 2.2)."""
    light = luminance(colour)
    return "#000000" if (light + 0.05) / 0.05 >= 1.05 / (light + 0.05) else "#ffffff"


def luminance(colour: str) -> float:
    """Relative luminance of a colour "#rrggbb", 0 to 1: WCAG 2.2, from the sRGB transfer curve of IEC 61966-2-1."""
    parts = [int(colour[index : index + 2], 16) / 255 for index in (1, 3, 5)]
    linear = [part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def _oklch(lightness: float, chroma: float, hue_deg: float) -> tuple[float, float, float]:
    """OKLCH to linear sRGB: the Oklab matrices as published by B. Ottosson, "A perceptual color space", 2020."""
    a, b = chroma * math.cos(math.radians(hue_deg)), chroma * math.sin(math.radians(hue_deg))
    long = (lightness + 0.3963377774 * a + 0.2158037573 * b) ** 3
    middle = (lightness - 0.1055613458 * a - 0.0638541728 * b) ** 3
    short = (lightness - 0.0894841775 * a - 1.2914855480 * b) ** 3
    return (
        4.0767416621 * long - 3.3077115913 * middle + 0.2309699292 * short,
        -1.2684380046 * long + 2.6097574011 * middle - 0.3413193965 * short,
        -0.0041960863 * long - 0.7034186147 * middle + 1.7076147010 * short,
    )


def _hex(linear: tuple[float, float, float]) -> str:
    parts = [min(1.0, max(0.0, part)) for part in linear]
    coded = [12.92 * part if part <= 0.0031308 else 1.055 * part ** (1 / 2.4) - 0.055 for part in parts]
    return "#" + "".join(f"{round(255 * part):02x}" for part in coded)
