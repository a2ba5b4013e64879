"""What the energy of a day goes into, as a chart of bars: largest first, the smallest together."""

from typing import Any

from farvolt.energy import Budget
from farvolt.units import number

WIDTH_PX, BAR_PX, MOST_BARS = 560, 24, 24
COLOUR = "#3c5aa6"

Chart = Any
"""An altair chart: the library carries no types of its own for it."""


def bars(budget: Budget) -> list[tuple[str, float]]:
    """Name and watt-hours of each bar."""
    parts = list(budget.shares)
    rest = parts[MOST_BARS - 1 :]
    if len(rest) < 2:
        return parts
    return [*parts[: MOST_BARS - 1], (f"{len(rest)} others", sum(Wh for _, Wh in rest))]


def chart(budget: Budget) -> Chart:
    """The shares of one type of day as an altair chart."""
    import altair as alt

    total = budget.bank.Wh
    rows = [
        {"name": name, "Wh": Wh, "words": f"{number(Wh)} Wh, {number(100 * Wh / total if total else 0.0, 2)} %"}
        for name, Wh in bars(budget)
    ]
    data = alt.Data(values=rows)
    names = alt.Y("name:N", sort=[row["name"] for row in rows], title=None, axis=alt.Axis(labelLimit=260))
    drawn = alt.Chart(data).mark_bar(color=COLOUR).encode(
        x=alt.X("Wh:Q", title="Energy (Wh a day)"), y=names, tooltip=["name:N", "words:N"]
    )  # fmt: skip
    words = alt.Chart(data).mark_text(align="left", dx=4).encode(x="Wh:Q", y=names, text="words:N")
    title = alt.Title(f'Where the energy of "{budget.day}" goes', subtitle=f"{number(total)} Wh from the bank",
                      anchor="start")  # fmt: skip
    return alt.layer(drawn, words).properties(width=WIDTH_PX, height=BAR_PX * max(1, len(rows)), title=title)


def svg(budget: Budget) -> str:
    """The chart as SVG text."""
    import vl_convert

    return str(vl_convert.vegalite_to_svg(chart(budget).to_json()))


def pdf(budget: Budget) -> bytes:
    """The chart as a PDF of one page."""
    import vl_convert

    return bytes(vl_convert.vegalite_to_pdf(chart(budget).to_json()))


def png(budget: Budget) -> bytes:
    """The chart as a PNG picture, at twice the size of the screen."""
    import vl_convert

    return bytes(vl_convert.vegalite_to_png(chart(budget).to_json(), scale=2))


def written(budget: Budget, suffix: str) -> bytes:
    """The chart as a file of this kind: .svg, .pdf or .png."""
    return {".svg": lambda: svg(budget).encode(), ".pdf": lambda: pdf(budget), ".png": lambda: png(budget)}[suffix]()
