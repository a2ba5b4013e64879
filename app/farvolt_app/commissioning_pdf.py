"""The test sheet on paper, with room for readings, date and signature."""

from collections.abc import Sequence
from datetime import date

from farvolt.commissioning import TORQUE_NM, ConductorTest, Sheet
from farvolt.context import label
from farvolt.readings import pin_words
from farvolt.units import number
from farvolt_app import commissioning_rows as rows
from farvolt_app.paper import MARGIN_MM, Document, Paper, foot, line_mm
from farvolt_app.paper_table import Column, table
from farvolt_app.shown import CAUTION

BOX, OPEN = "☐", "________"
"""To be ticked, and to be written on."""

_SIZE = 8.0


def pdf(sheet: Sheet, paper: Paper, day: date) -> bytes:
    """The whole sheet as the content of a file; `day` is when it was made."""
    info = sheet.context.plan.plan
    document = Document(paper, f"Test sheet: {foot(info.name, day)}")
    document.set_title(f"Test sheet: {info.name}")
    document.open_page("landscape")
    _head(document, sheet)
    document.open_page("landscape")
    _dead(document, sheet)
    _protection(document, sheet)
    _points(document, sheet)
    _conductors(document, sheet)
    _parts(document, sheet)
    _torque(document)
    _signed(document)
    return bytes(document.output())


def _head(document: Document, sheet: Sheet) -> None:
    document.heading(f"Test sheet: {sheet.context.plan.plan.name}")
    fields = ("Date", "Tested by", "Meter: type, number, calibrated", "Clamp: type, number, calibrated",
              "Insulation tester: type, number", "Ambient, °C", "Bank before the tests, V")  # fmt: skip
    _to_write(document, fields, columns=2)
    document.paragraph(CAUTION, 9.5, bold=True, after_mm=2.5)
    document.heading("How the tests are done", 1)
    document.points(rows.how(sheet), 9)
    document.paragraph(rows.bands(sheet), 9)


def _to_write(document: Document, fields: Sequence[str], columns: int) -> None:
    """Labels, each with a line to write on."""
    wide, y = document.across_mm / columns, document.get_y() + 2
    document.set_draw_color(90)
    document.set_line_width(0.2)
    for at, name in enumerate(fields):
        row, place = divmod(at, columns)
        x, top = MARGIN_MM + place * wide, y + row * 9
        document.put(name, x, top, 9)
        document.line(x + 58, top + line_mm(9), x + wide - 6, top + line_mm(9))
    document.set_y(y + -(-len(fields) // columns) * 9 + 1)


DEAD = (
    Column("Conductor", 44), Column("From", 25), Column("To", 25), Column("Size", 16), Column("Polarity", 15),
    Column("Continuity: expect mΩ (passes)", 33), Column("Read mΩ", 16), Column("To the other pole, MΩ", 18),
    Column("To chassis, earth, MΩ", 18), Column("Torque at from", 22), Column("Done", 11), Column("Torque at to", 22),
    Column("Done", 11),
)  # fmt: skip


def _dead(document: Document, sheet: Sheet) -> None:
    document.heading("Before power is put on")
    document.paragraph(rows.TORQUE_NOTE, 8.5)
    table(document, DEAD, [_dead_row(one) for one in sheet.conductors], size=7.5, empty="The plan has no runs.")
    devices = [
        (f'{one.device.kind} "{one.device.name}", {one.pole}', one.device.from_point, one.device.to_point,
         one.device.state, BOX, OPEN, rows.torque(one.torque_Nm[0]), BOX, rows.torque(one.torque_Nm[1]), BOX)
        for one in sheet.devices
    ]  # fmt: skip
    if devices:
        document.heading("Devices", 1)
        columns = (Column("Device", 60), Column("From", 36), Column("To", 36), Column("State", 16),
                   Column("Polarity", 18), Column("Continuity", 22), Column("Torque at from", 26), Column("Done", 13),
                   Column("Torque at to", 26), Column("Done", 13))  # fmt: skip
        table(document, columns, devices, size=_SIZE)


def _dead_row(one: ConductorTest) -> tuple[str, ...]:
    size = "" if one.bond or one.run.size is None else one.run.size.name.replace("mm2", "mm²")
    return (
        rows.what(one), *one.ends, size, BOX, rows.milliohms(one.ohm), OPEN, OPEN, OPEN,
        rows.torque(one.torque_Nm[0]), BOX, rows.torque(one.torque_Nm[1]), BOX,
    )  # fmt: skip


def _protection(document: Document, sheet: Sheet) -> None:
    document.heading("Fitted protection")
    columns = (Column("Run", 50), Column("At", 40), Column("Pole", 14), Column("Planned", 44),
               Column("Fitted type", 34), Column("Fitted rating", 24), Column("Breaks, A", 24),
               Column("As planned", 16))  # fmt: skip
    found = [
        (label(one.run), one.point, one.planned.pole, f"{one.planned.type} {one.planned.rating}", OPEN, OPEN, OPEN, BOX)
        for one in sheet.protections
    ]
    table(document, columns, found, size=_SIZE, empty="The plan states no protection.")


def _points(document: Document, sheet: Sheet) -> None:
    document.heading("Voltages of the points")
    document.paragraph(f"In the case {rows.state(sheet)}.", 8.5)
    columns = (Column("Point", 80), Column("Expect V", 22, "R"), Column("Passes, V", 36, "R"), Column("Read V", 28),
               Column("Passed", 16), Column("Note", 60))  # fmt: skip
    found = [
        (one.point, *(rows.volts(one.volts) if one.volts else ("", "not fed in this case")), OPEN, BOX, OPEN)
        for one in sheet.points
    ]
    table(document, columns, found, size=_SIZE)


CONDUCTORS = (
    Column("Conductor", 46), Column("Red lead", 36), Column("Black lead", 36), Column("At A", 13, "R"),
    Column("Expect mV", 15, "R"), Column("Passes, mV", 24, "R"), Column("Read A", 17), Column("Read mV", 17),
    Column("Each joint, up to mV", 18, "R"), Column("Joint at red, mV", 17), Column("Joint at black, mV", 17),
    Column("Passed", 15),
)  # fmt: skip


def _conductors(document: Document, sheet: Sheet) -> None:
    document.heading("Millivolts over conductors and joints")
    document.paragraph(f"What to expect is {rows.currents(sheet)}", 8.5)
    table(document, CONDUCTORS, [_conductor(one) for one in sheet.conductors], size=7.5, empty="The plan has no runs.")


def _conductor(one: ConductorTest) -> tuple[str, ...]:
    if one.test is None:
        return rows.what(one), "no current in this case", "", "", "", "", OPEN, OPEN, "", OPEN, OPEN, BOX
    expected, passes = rows.millivolts(one.test.volts)
    joint = "" if one.joint is None else f"{1000 * one.joint.high:.1f}"
    return (
        rows.what(one), *rows.leads(one.test), number(one.test.amps), expected, rows.too_small(one.test) or passes,
        OPEN, OPEN, joint, *(("", "") if one.bond else (OPEN, OPEN)), BOX,
    )  # fmt: skip


def _parts(document: Document, sheet: Sheet) -> None:
    document.heading("Millivolts over protection and devices")
    columns = (Column("Part", 70), Column("Red lead, or at", 46), Column("Black lead", 46), Column("At A", 15, "R"),
               Column("Expect mV", 18, "R"), Column("Up to mV", 18, "R"), Column("Read A", 20), Column("Read mV", 20),
               Column("Passed", 14))  # fmt: skip
    found: list[tuple[str, ...]] = []
    for guard in sheet.protections:
        if guard.volts is not None and guard.amps is not None:
            name = f"{guard.planned.type} {guard.planned.rating} of {label(guard.run)} with its holder"
            found.append((name, guard.point, "", number(guard.amps), f"{1000 * guard.volts.expected:.1f}",
                          f"{1000 * guard.volts.high:.1f}", OPEN, OPEN, BOX))  # fmt: skip
    for one in sheet.devices:
        if one.test is not None:
            red, black = pin_words(one.test.red), pin_words(one.test.black)
            found.append((f'{one.device.kind} "{one.device.name}"', red, black, number(one.test.amps),
                          f"{1000 * one.test.volts.expected:.1f}", f"{1000 * one.test.volts.high:.1f}", OPEN, OPEN,
                          BOX))  # fmt: skip
    table(document, columns, found, size=_SIZE, empty="No current flows through any in this case.")


def _torque(document: Document) -> None:
    document.heading("Torque by size of stud", 1)
    columns = (Column("Stud", 30), Column("Typical", 50), Column("The maker's figure", 50), Column("Note", 100))
    found = [(stud, rows.torque(value), OPEN, OPEN) for stud, value in TORQUE_NM.items()]
    table(document, columns, found, size=_SIZE)


def _signed(document: Document) -> None:
    document.heading("Result", 1, keep_mm=55)
    document.paragraph(f"{BOX} All tests passed.   {BOX} Passed but for what is noted here:", 10, after_mm=8)
    document.set_draw_color(90)
    document.set_line_width(0.2)
    for _ in range(2):
        document.line(MARGIN_MM, document.get_y(), document.w - MARGIN_MM, document.get_y())
        document.set_y(document.get_y() + 8)
    _to_write(document, ("Date", "Name", "Signature", "Inspected by"), columns=2)
