"""The test sheet as a workbook: what to expect, cells for what is read, and a verdict beside each reading.

Its sheet "Readings" has the columns that a comparison with the plan reads.
"""

import io
from typing import Any

from openpyxl import Workbook
from openpyxl.worksheet.worksheet import Worksheet

from farvolt.commissioning import TORQUE_NM, Band, ConductorTest, Sheet
from farvolt.context import label
from farvolt.readings import COLUMNS
from farvolt_app import commissioning_rows as rows
from farvolt_app import readings_file
from farvolt_app.sheet_cables import live, pretty
from farvolt_app.sheets import FIRST, Column, Header, fill, letters, mark_where
from farvolt_app.shown import CAUTION
from farvolt_app.textsafe import cell_text

OPEN = ""
"""A cell to fill in."""

VERDICT = (
    '=IF([Read {unit}]="","",IF(AND([Read {unit}]>=[Least {unit}]*{k},[Read {unit}]<=[Most {unit}]*{k}),'
    '"passes","! look"))'
)
SCALED = 'IF(N([Read A])>0,N([Read A])/[At A],1)'
"""Millivolts go with the current that was clamped."""


def to_bytes(sheet: Sheet) -> bytes:
    """The whole workbook as a file's content."""
    book = Workbook()
    book.remove(book.active)
    plan = sheet.context.plan.plan.name
    book.properties.creator, book.properties.title = "Farvolt", cell_text(f"Test sheet: {plan}")
    _how(book.create_sheet("How to test"), plan, sheet)
    _dead(book.create_sheet("Before power"), plan, sheet)
    _protection(book.create_sheet("Protection"), plan, sheet)
    _points(book.create_sheet("Voltages"), plan, sheet)
    _conductors(book.create_sheet("Conductors"), plan, sheet)
    _parts(book.create_sheet("Devices"), plan, sheet)
    _torque(book.create_sheet("Torque"), plan)
    _readings(book.create_sheet(readings_file.SHEET), plan, sheet)
    out = io.BytesIO()
    book.save(out)
    return out.getvalue()


def _how(sheet: Worksheet, plan: str, tests: Sheet) -> None:
    columns = (Column("Test", 110), Column("Filled in", 40, input=True))
    found = [[text, None] for text in (*rows.how(tests), rows.bands(tests), CAUTION)]
    asked = ("Date", "Tested by", "Meter", "Clamp", "Insulation tester", "Ambient, °C", "Bank before the tests, V",
             "Result", "Signature", "Inspected by")  # fmt: skip
    fill(sheet, Header(plan, "test sheet", "Yellow cells are to be filled in."), columns,
         found + [[text, OPEN] for text in asked])  # fmt: skip


DEAD = (
    Column("Run", 26), Column("Conductor", 11), Column("From", 20), Column("To", 20), Column("Size", 12),
    Column("Polarity", 10, input=True), Column("Expect (mΩ)", 10, "0.000"), Column("Least mΩ", 9, "0.000"),
    Column("Most mΩ", 9, "0.000"), Column("Read mΩ", 10, "0.000", input=True), Column("Verdict", 10),
    Column("To the other pole (MΩ)", 11, "0.00", input=True), Column("To chassis, earth (MΩ)", 11, "0.00", input=True),
    Column("Torque at from (Nm)", 10, "0.0"), Column("Done at from", 8, input=True),
    Column("Torque at to (Nm)", 10, "0.0"), Column("Done at to", 8, input=True),
)  # fmt: skip


def _dead(sheet: Worksheet, plan: str, tests: Sheet) -> None:
    found = [_dead_row(one, FIRST + at) for at, one in enumerate(tests.conductors)]
    about = "Continuity is for a milliohm meter, cold. " + rows.TORQUE_NOTE
    fill(sheet, Header(plan, "before power is put on", about), DEAD, found)
    mark_where(sheet, len(DEAD), len(found), f'LEFT(${letters(DEAD)["Verdict"]}{FIRST},1)="!"')


def _dead_row(one: ConductorTest, row: int) -> list[Any]:
    size = "" if one.bond or one.run.size is None else pretty(one.run.size.name)
    verdict = live(letters(DEAD), row, VERDICT.format(unit="mΩ", k="1"))
    return [
        label(one.run), "bond" if one.bond else one.pole, *one.ends, size, OPEN, *_thousandths(one.ohm), OPEN, verdict,
        OPEN, OPEN, one.torque_Nm[0], OPEN, one.torque_Nm[1], OPEN,
    ]  # fmt: skip


def _thousandths(band: Band) -> list[float]:
    return [1000 * band.expected, 1000 * band.low, 1000 * band.high]


def _protection(sheet: Worksheet, plan: str, tests: Sheet) -> None:
    columns = (
        Column("Run", 26), Column("At", 22), Column("Pole", 9), Column("Planned type", 18),
        Column("Planned rating", 12),
        Column("Fitted type", 18, input=True), Column("Fitted rating", 12, input=True),
        Column("Breaks (A)", 12, input=True), Column("At A", 9, "0.00"), Column("Expect (mV)", 10, "0.0"),
        Column("Up to (mV)", 10, "0.0"), Column("Read mV", 10, "0.0", input=True),
    )  # fmt: skip
    found: list[list[Any]] = [
        [label(one.run), one.point, one.planned.pole, one.planned.type, one.planned.rating.text, OPEN, OPEN, OPEN,
         one.amps, 1000 * one.volts.expected if one.volts else None, 1000 * one.volts.high if one.volts else None, OPEN]
        for one in tests.protections
    ]  # fmt: skip
    fill(sheet, Header(plan, "fitted protection", "What is fitted is read off the part itself."), columns, found)


VOLTS = (
    Column("Point", 34), Column("Expect (V)", 11, "0.00"), Column("Least V", 11, "0.00"), Column("Most V", 11, "0.00"),
    Column("Read V", 11, "0.00", input=True), Column("Verdict", 12), Column("Note", 40, input=True),
)  # fmt: skip


def _points(sheet: Worksheet, plan: str, tests: Sheet) -> None:
    found: list[list[Any]] = []
    for at, one in enumerate(tests.points):
        band = one.volts
        verdict = live(letters(VOLTS), FIRST + at, VERDICT.format(unit="V", k="1"))
        found.append(
            [one.point, band.expected, band.low, band.high, OPEN, verdict, OPEN] if band
            else [one.point, None, None, None, OPEN, "not fed", OPEN]
        )  # fmt: skip
    fill(sheet, Header(plan, "voltages of the points", f"In the case {rows.state(tests)}."), VOLTS, found)
    mark_where(sheet, len(VOLTS), len(found), f'LEFT(${letters(VOLTS)["Verdict"]}{FIRST},1)="!"')


UNDER = (
    Column("Part", 32), Column("Conductor", 11), Column("Red lead", 26), Column("Black lead", 26),
    Column("At A", 9, "0.00"), Column("Expect (mV)", 10, "0.0"), Column("Least mV", 10, "0.0"),
    Column("Most mV", 10, "0.0"), Column("Read A", 10, "0.00", input=True), Column("Read mV", 10, "0.0", input=True),
    Column("Verdict", 12), Column("Each joint, up to (mV)", 11, "0.0"),
    Column("Joint at red (mV)", 10, "0.0", input=True), Column("Joint at black (mV)", 10, "0.0", input=True),
    Column("Note", 24),
)  # fmt: skip


def _conductors(sheet: Worksheet, plan: str, tests: Sheet) -> None:
    found = []
    for at, one in enumerate(tests.conductors):
        name, pole = label(one.run), "bond" if one.bond else one.pole
        joint = None if one.joint is None else 1000 * one.joint.high
        found.append(_under(name, pole, one, FIRST + at, joint, joints=not one.bond))
    about = f"What to expect is {rows.currents(tests)} The verdict goes with the amps that were read."
    fill(sheet, Header(plan, "millivolts over conductors and joints", about), UNDER, found)
    mark_where(sheet, len(UNDER), len(found), f'LEFT(${letters(UNDER)["Verdict"]}{FIRST},1)="!"')


def _under(name: str, pole: str, one: Any, row: int, joint: float | None, *, joints: bool) -> list[Any]:
    cell = OPEN if joints else None
    if one.test is None:
        return [name, pole, *[None] * 6, OPEN, OPEN, "no current", None, cell, cell, ""]
    verdict = live(letters(UNDER), row, VERDICT.format(unit="mV", k=SCALED))
    return [name, pole, *rows.leads(one.test), one.test.amps, *_thousandths(one.test.volts), OPEN, OPEN, verdict, joint,
            cell, cell, rows.too_small(one.test)]  # fmt: skip


def _parts(sheet: Worksheet, plan: str, tests: Sheet) -> None:
    found = [
        _under(f'{one.device.kind} "{one.device.name}"', one.pole, one, FIRST + at, None, joints=True)
        for at, one in enumerate(tests.devices)
    ]
    fill(sheet, Header(plan, "millivolts over devices", f"What to expect is {rows.currents(tests)}"), UNDER, found)
    mark_where(sheet, len(UNDER), len(found), f'LEFT(${letters(UNDER)["Verdict"]}{FIRST},1)="!"')


def _torque(sheet: Worksheet, plan: str) -> None:
    columns = (Column("Stud", 12), Column("Typical (Nm)", 12, "0.0"), Column("Typical (lbf in)", 12, "0"),
               Column("The maker's figure", 20, input=True))  # fmt: skip
    found = [[stud, value, value * rows.LBF_IN_PER_NM, OPEN] for stud, value in TORQUE_NM.items()]
    fill(sheet, Header(plan, "torque by size of stud", rows.TORQUE_NOTE), columns, found)


def _readings(sheet: Worksheet, plan: str, tests: Sheet) -> None:
    wide = {"case": 26, "from": 22, "to": 22, "run": 24, "notes": 60}
    filled = ("volts", "amps", "accuracy", "resolution", "time")
    columns = tuple(Column(name, wide.get(name, 11), input=name in filled) for name in COLUMNS)
    about = (
        "Volts and amps as the meter shows them, or with a unit (31.2 mV). Rows left open are passed over. Compare "
        "them with the plan: farvolt locate PLAN, and the name of this file."
    )  # fmt: skip
    fill(sheet, Header(plan, "readings", about), columns, [list(row.values()) for row in rows.reading_rows(tests)])
