"""Charge, power and voltage over the days as one chart of three panels; lines told apart by colour, dash and name."""

from typing import Any

import numpy as np

from farvolt.day_results import DaysStudy, series
from farvolt.units import number

WIDTH_PX, CHARGE_PX, POWER_PX, VOLTS_PX = 720, 170, 200, 130
MOST_POINTS = 1500
"""Longer series are drawn in parts of several steps: the lowest charge and voltage of each, and its mean power."""

COLOURS = ("#3c5aa6", "#b3261e", "#2e7d32", "#8a5a00", "#6a3d9a", "#2b2b2b")
DASHES: tuple[list[int], ...] = ([1, 0], [6, 3], [2, 2], [10, 3, 2, 3], [4, 2], [1, 3])

Chart = Any
"""An altair chart: the library carries no types of its own for it."""


def chart(study: DaysStudy) -> Chart:
    """The three panels, one above the other."""
    import altair as alt

    columns = series(study)
    charge = {name.removesuffix(" charge %"): one for name, one in columns.items() if name.endswith(" charge %")}
    banks = list(charge)
    power = {name.removesuffix(" W"): one for name, one in columns.items() if name.endswith(" W") and name != "lost W"}
    volts = {name: columns[f"{name} V"] for name in banks}
    size = -(-len(study.outcome.course) // MOST_POINTS)
    low = alt.Chart(alt.Data(values=[{"low": 100 * study.low_charge}])).mark_rule(strokeDash=[2, 2]).encode(y="low:Q")
    course = study.outcome.course
    grouped = f"; each point is the lowest (of power: the mean) of {size} steps" if size > 1 else ""
    title = alt.Title(
        f"{study.plan}: the days from {course.clock(0):%Y-%m-%d}", anchor="start",
        subtitle=f"Dotted: {number(100 * study.low_charge)} % of charge{grouped}",
    )  # fmt: skip
    panels = (
        alt.layer(_lines(alt, study, charge, "Charge (%)", CHARGE_PX, size, zero=True), low),
        _lines(alt, study, power, "Power (W)", POWER_PX, size, zero=True, mean=True),
        _lines(alt, study, volts, "At the bank (V)", VOLTS_PX, size, zero=False),
    )
    return alt.vconcat(*panels).resolve_scale(color="independent", strokeDash="independent").properties(title=title)


def _lines(
    alt: Any, study: DaysStudy, columns: dict[str, Any], unit: str, height: int, size: int, *, zero: bool,
    mean: bool = False,
) -> Chart:  # fmt: skip
    shown = {name: one for name, one in columns.items() if np.any(one != 0)} or columns
    names = list(shown)
    legend = alt.Legend(title=None, orient="right", labelLimit=200, symbolSize=300)
    colour = alt.Scale(domain=names, range=[COLOURS[k % len(COLOURS)] for k in range(len(names))])
    dash = alt.Scale(domain=names, range=[DASHES[k % len(DASHES)] for k in range(len(names))])
    days = alt.Axis(format="%d %b %H:%M", labelOverlap=True)
    return alt.Chart(alt.Data(values=_rows(study, shown, size, mean))).mark_line(
        strokeWidth=1.5, interpolate="step-after"
    ).encode(
        x=alt.X("time:T", title=None, scale=alt.Scale(type="utc"), axis=days),
        y=alt.Y("value:Q", title=unit, scale=alt.Scale(zero=zero)),
        color=alt.Color("name:N", scale=colour, legend=legend),
        strokeDash=alt.StrokeDash("name:N", scale=dash, legend=legend),
        tooltip=[alt.Tooltip("name:N"), alt.Tooltip("words:N", title="time"), alt.Tooltip("value:Q", format=".4g")],
    ).properties(width=WIDTH_PX, height=height)  # fmt: skip


def _rows(study: DaysStudy, columns: dict[str, Any], size: int, mean: bool) -> list[dict[str, Any]]:
    """Points of each line. The clock of the site is drawn as it stands, whatever the clock of the reader."""
    course = study.outcome.course
    starts = np.arange(0, len(course), size)
    clocks = [course.clock(int(step)) for step in starts]
    rows = []
    for name, values in columns.items():
        parts = np.add.reduceat(values, starts) / np.diff(np.append(starts, len(course))) if mean else (
            np.minimum.reduceat(values, starts))  # fmt: skip
        rows += [
            {"name": name, "time": f"{clock:%Y-%m-%dT%H:%M:00}Z", "words": f"{clock:%Y-%m-%d %H:%M}", "value": value}
            for clock, value in zip(clocks, np.round(parts, 6).tolist(), strict=True)
        ]
    return rows


def written(study: DaysStudy, suffix: str) -> bytes:
    """The chart as a file of this kind: .svg, .pdf or .png."""
    import vl_convert

    made = chart(study).to_json()
    if suffix == ".svg":
        return str(vl_convert.vegalite_to_svg(made)).encode()
    return bytes(vl_convert.vegalite_to_pdf(made) if suffix == ".pdf" else vl_convert.vegalite_to_png(made, scale=2))
