"""The command `test-sheet`: its options, and the content of the file it writes."""

import click


@click.command("test-sheet")
@click.argument("plan")
@click.option("--output", "-o", required=True, help="File to write: .pdf, .xlsx, or .csv of readings to fill in.")
@click.option("--case", "case_name", help="Case to read in; the one in which loads draw most unless given.")
@click.option("--amps", type=click.FloatRange(0, min_open=True), help="Test current through every run, in A.")
@click.option("--accuracy", help='Of the meter, as its data sheet has it; "0.5 % + 2 digits" unless given.')
@click.option("--paper", type=click.Choice(["a4", "letter"]), default="a4", show_default=True, help="Paper of a PDF.")
def write_sheet(
    plan: str, output: str, case_name: str | None, amps: float | None, accuracy: str | None, paper: str
) -> None:
    """Write the test sheet of PLAN for commissioning, with room for readings, date and signature.

    For each run and device: polarity, continuity, insulation, torque, the protection fitted; then the volts of each
    point and the millivolts over each run, joint and device, with the band that passes by the plan's tolerances and
    the meter's accuracy. The CSV, and the sheet "Readings" of the workbook, are what farvolt locate reads once they
    are filled in. A file of that name that is there already is kept as NAME.previous.
    """
    from farvolt import meter, readings
    from farvolt.commissioning import sheet_of
    from farvolt.study import prepared
    from farvolt_app import cli, paper_commands

    suffix = paper_commands.suffix_of(output, (".pdf", ".xlsx", ".csv"))
    cli._refuse_plan(plan, output)
    with_meter = meter.parse(accuracy if accuracy is not None else readings.ACCURACY)
    read = cli._read(plan)
    with cli._placed(read, plan), cli._progress("Working out what to expect"):
        sheet = sheet_of(prepared(read.plan, read.folder), with_meter, case_name, amps)
    cli._write_beside(plan, output, written(sheet, suffix, paper))
    from farvolt_app import commissioning_rows

    if suffix != ".pdf" and (more := commissioning_rows.left_out(sheet)):
        click.echo(f"The readings to fill in leave {more} out: a table of them has at most 2000 rows.", err=True)


def written(sheet: object, suffix: str, paper: str = "a4") -> bytes:
    """A test sheet as the content of a file of a kind, as of today."""
    from datetime import date

    from farvolt.commissioning import Sheet
    from farvolt_app import commissioning_pdf, commissioning_rows, commissioning_sheets
    from farvolt_app.paper import PAPERS

    assert isinstance(sheet, Sheet)
    if suffix == ".pdf":
        return commissioning_pdf.pdf(sheet, PAPERS[paper], date.today())
    if suffix == ".xlsx":
        return commissioning_sheets.to_bytes(sheet)
    return commissioning_rows.to_csv(sheet).encode("utf-8-sig")
