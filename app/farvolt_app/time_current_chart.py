"""The time-current picture of a run as a chart: both axes logarithmic, lines told apart by colour, dash and name."""

from typing import Any

from farvolt.protected import LONGEST_S, SHORTEST_S, TimeCurrent
from farvolt.units import number

ROLES: dict[str, tuple[str, list[int]]] = {
    "opens at the latest": ("#b3261e", []),
    "opens at the earliest": ("#b3261e", [6, 3]),
    "upstream at the latest": ("#3c5aa6", [16, 3]),
    "upstream at the earliest": ("#3c5aa6", [6, 3, 1, 3, 1, 3]),
    "cable": ("#2b2b2b", [2, 2]),
    "load": ("#2e7d32", [10, 3, 2, 3]),
}
"""Colour and dash of each kind of line: told apart in black and white by the dash."""

WIDTH_PX, HEIGHT_PX = 640, 460

Chart = Any
"""An altair chart: the library carries no types of its own for it."""


def chart(picture: TimeCurrent) -> Chart:
    """The picture as an altair chart."""
    import altair as alt

    lines = alt.Data(values=_line_rows(picture))
    marks = alt.Data(values=[{"amps": one.amps, "name": f"{one.name}: {number(one.amps)} A"} for one in picture.marks])
    amps = alt.X("amps:Q", title="Current (A)", scale=alt.Scale(type="log"), axis=alt.Axis(grid=True, format="~g"))
    seconds = alt.Y(
        "seconds:Q", title="Time (s)", scale=alt.Scale(type="log", domain=[SHORTEST_S, LONGEST_S]),
        axis=alt.Axis(grid=True, format="~g"),
    )  # fmt: skip
    shown = list(dict.fromkeys(row["line"] for row in _line_rows(picture)))
    colours = alt.Scale(domain=shown, range=[ROLES[line.split(": ", 1)[0]][0] for line in shown])
    dashes = alt.Scale(domain=shown, range=[ROLES[line.split(": ", 1)[0]][1] or [1, 0] for line in shown])
    legend = alt.Legend(title=None, orient="bottom", columns=1, labelLimit=WIDTH_PX, symbolSize=400)
    drawn = alt.Chart(lines).mark_line(strokeWidth=2, clip=True).encode(
        x=amps, y=seconds, order="step:Q", detail="line:N",
        color=alt.Color("line:N", scale=colours, legend=legend),
        strokeDash=alt.StrokeDash("line:N", scale=dashes, legend=legend),
        tooltip=[alt.Tooltip("line:N"), alt.Tooltip("amps:Q", format=".4g"), alt.Tooltip("seconds:Q", format=".3g")],
    )  # fmt: skip
    rules = alt.Chart(marks).mark_rule(strokeDash=[1, 3], color="#6b4f00", strokeWidth=2).encode(
        x="amps:Q", tooltip=["name:N"]
    )  # fmt: skip
    words = alt.Chart(marks).mark_text(angle=270, align="left", dx=6, dy=-6, color="#6b4f00").encode(
        x="amps:Q", y=alt.value(HEIGHT_PX), text="name:N"
    )  # fmt: skip
    title = alt.Title(f"Time over current: {picture.title}", subtitle=picture.note, anchor="start", limit=WIDTH_PX)
    return alt.layer(drawn, rules, words).properties(width=WIDTH_PX, height=HEIGHT_PX, title=title)


def _line_rows(picture: TimeCurrent) -> list[dict[str, Any]]:
    return [
        {"line": f"{curve.role}: {curve.name}", "amps": amps, "seconds": seconds, "step": step}
        for curve in picture.curves
        for step, (amps, seconds) in enumerate(curve.points)
    ]


def svg(picture: TimeCurrent) -> str:
    """The chart as SVG text."""
    import vl_convert

    return str(vl_convert.vegalite_to_svg(chart(picture).to_json()))


def pdf(picture: TimeCurrent) -> bytes:
    """The chart as a PDF of one page."""
    import vl_convert

    return bytes(vl_convert.vegalite_to_pdf(chart(picture).to_json()))


def png(picture: TimeCurrent) -> bytes:
    """The chart as a PNG picture, at twice the size of the screen."""
    import vl_convert

    return bytes(vl_convert.vegalite_to_png(chart(picture).to_json(), scale=2))
