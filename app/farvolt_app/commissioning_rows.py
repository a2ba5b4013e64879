"""The test sheet in words and cells: what paper, workbook and page share, and the table of readings to fill in."""

import csv
import io
from collections.abc import Iterator

from farvolt.commissioning import Band, ConductorTest, DeviceTest, Sheet, UnderCurrent
from farvolt.context import label
from farvolt.reading_table import MOST_ROWS
from farvolt.readings import ACCURACY, COLUMNS, POLE_WORDS, Pin, pin_words
from farvolt.units import number
from farvolt_app.textsafe import csv_text

LBF_IN_PER_NM = 8.8507
"""Pound-force inches in a newton metre: 1 / (0.45359237 x 9.80665 x 0.0254)."""

TORQUE_NOTE = (
    "Typical torque by the size of the stud, from memory of IEC 60947-1 (provisional): the figure of the maker of the "
    "terminal goes before it. Where no figure stands, the plan states no stud, or its maker's figure is needed."
)


def how(sheet: Sheet) -> list[str]:
    """How the tests are done, in their order (common practice)."""
    test = sheet.insulation
    return [
        "First with everything dead: the battery isolated at both poles, chargers and arrays disconnected, and the "
        "meter says at each point that nothing is live. A battery welds tools to a bar: rings off, tools insulated.",
        "Polarity: each conductor goes from the feed (+) of one end to the feed of the other, or return to return, and "
        "its colour and label are those of the plan. Both ends are looked at before power is put on.",
        "Continuity: end to end with the protection in and parallel ways open, the leads' own resistance taken off. An "
        "ordinary meter does not show milliohms: it shows that there is a way, and the millivolts under current show "
        "how good it is. What to expect is for a milliohm meter, at the ambient of the run.",
        f"Insulation: at {number(test.test_V)} V DC between feed and return, and from each to the chassis or earth; at "
        f"least {number(test.least_Mohm)} MΩ ({test.source}; provisional). Before it, loads and all electronics are "
        "disconnected at both poles, because the test can destroy them: batteries, chargers, controllers, converters, "
        "gauges, lamps with drivers. Bonds of the return to the chassis are opened, and closed again afterwards.",
        "Torque: each terminal tightened with a torque tool, then marked. Lugs are pulled by hand.",
        "Protection: what is fitted is read off the part itself (type, rating, the short-circuit current that it may "
        "break) and compared with what is planned.",
        f"Voltages: in the case {state(sheet)}. Red lead on the feed, black lead on the return; a minus sign means "
        "that poles are exchanged: stop there.",
        f"Millivolts: {currents(sheet)} Leads on the two points named, or on both sides of one joint, on the metal of "
        "the terminals themselves. At another current than the one given, what to expect changes in proportion: clamp "
        "the current and write it down.",
    ]  # fmt: skip


def bands(sheet: Sheet) -> str:
    """What the bands rest on."""
    return (
        f"Bands: from one end of the plan's tolerances to the other, wider by the meter's ±({sheet.meter.text}) in its "
        "smallest range that is large enough (6000 counts). Parts without a tolerance in the plan (protection, "
        "devices) up to 20 % above what is stated or typical. Voltages of points take all tolerances at their worst "
        "together."
    )  # fmt: skip


def state(sheet: Sheet) -> str:
    """The case in words: its name, and what is on and off."""
    case, plan = sheet.case.case, sheet.context.plan
    on = [load.name for load in plan.loads if case.share(load.name) > 0]
    loads = "all loads on" if len(on) == len(plan.loads) else "loads on: " + (", ".join(on) or "none")
    solution = sheet.case.solutions["plan"]
    working = [one.name for at, one in enumerate(plan.sources) if solution.working(at)]
    return f'"{case.name}" ({loads}; sources on: {", ".join(working) or "none"})'


def currents(sheet: Sheet) -> str:
    """Which current is meant."""
    if sheet.amps is not None:
        return f"with {number(sheet.amps)} A through the run, from a test load at its far end."
    return "with the currents of the same case."


def millivolts(band: Band) -> tuple[str, str]:
    """What to expect, and what passes, in mV."""
    return f"{1000 * band.expected:.1f}", f"{1000 * band.low:.1f} to {1000 * band.high:.1f}"


def volts(band: Band) -> tuple[str, str]:
    """What to expect, and what passes, in V."""
    return f"{band.expected:.2f}", f"{band.low:.2f} to {band.high:.2f}"


def milliohms(band: Band) -> str:
    """What to expect, and what passes, in mΩ."""
    return f"{number(1000 * band.expected)} ({number(1000 * band.low)} to {number(1000 * band.high)})"


def torque(value_Nm: float | None) -> str:
    """A torque in both systems; nothing where the maker's figure is needed."""
    return "" if value_Nm is None else f"{value_Nm:g} Nm, {number(value_Nm * LBF_IN_PER_NM, 2)} lbf in"


def what(one: ConductorTest) -> str:
    """A conductor in words."""
    return f"{label(one.run)}, {'bond' if one.bond else one.pole}"


def too_small(test: UnderCurrent) -> str:
    """What to say of a current at which the meter is not good enough."""
    return "" if test.amps_to_judge is None else f"needs {number(test.amps_to_judge, 2)} A"


# Readings to fill in -------------------------------------------------------------------------------------------------


def reading_rows(sheet: Sheet) -> list[dict[str, str]]:
    """Rows to fill in for the comparison with the plan, all in the sheet's case: volts of points, over conductors, and
    their amps. No more than a table may have; none over conductors where these are tested at a current of their own,
    which is no case of the plan."""
    same = {"set": "1", "case": sheet.case.name}
    if sheet.meter.text != ACCURACY:
        same["accuracy"] = sheet.meter.text
    rows = [same | row for row in _readings(sheet)]
    return [{name: row.get(name, "") for name in COLUMNS} for row in rows[: MOST_ROWS - 1]]


def left_out(sheet: Sheet) -> int:
    """Readings for which a table has no row left."""
    return max(len(_readings(sheet)) - MOST_ROWS + 1, 0)


def _readings(sheet: Sheet) -> list[dict[str, str]]:
    under = (*_over(sheet), *_clamped(sheet)) if sheet.amps is None else ()
    return [*_points(sheet), *under]


def _points(sheet: Sheet) -> Iterator[dict[str, str]]:
    for one in sheet.points:
        if one.volts is not None:
            expected, passes = volts(one.volts)
            yield {"from": one.point, "notes": f"expect {expected} V, {passes} V passes"}


def _over(sheet: Sheet) -> Iterator[dict[str, str]]:
    tests: list[ConductorTest | DeviceTest] = [*sheet.conductors, *sheet.devices]
    for one in tests:
        if one.test is not None:
            expected, passes = millivolts(one.test.volts)
            note = f"expect {expected} mV at {number(one.test.amps)} A, {passes} mV passes"
            yield {**_ends(one.test.red, one.test.black), "notes": note}


def _ends(red: Pin, black: Pin) -> dict[str, str]:
    return {"from": red[0], "from pole": POLE_WORDS[red[1]], "to": black[0], "to pole": POLE_WORDS[black[1]]}


def _clamped(sheet: Sheet) -> Iterator[dict[str, str]]:
    for one in sheet.conductors:
        if one.test is not None and not one.bond:
            note = f"expect {number(one.test.amps)} A, clamped"
            yield {"run": one.run.name, "pole": one.pole, "notes": note}


def to_csv(sheet: Sheet) -> str:
    """The readings to fill in as CSV."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(COLUMNS)
    writer.writerows([csv_text(cell) for cell in row.values()] for row in reading_rows(sheet))
    return out.getvalue()


def leads(test: UnderCurrent) -> tuple[str, str]:
    """Where the red and the black lead go."""
    return pin_words(test.red), pin_words(test.black)
