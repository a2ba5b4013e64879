"""The commands `shopping` and `prices`: options, and what is printed and written."""

from pathlib import Path

import click

EXAMPLE = "example"
"""The name by which the list shipped is asked for."""


@click.command()
@click.argument("plan")
@click.option("--prices", metavar="FILE", help='Your price list as CSV; "example" for the one shipped, invented.')
@click.option("--spare", default="10 %", show_default=True, help="What is added to every length of cable.")
@click.option(
    "--reel",
    "reels",
    multiple=True,
    metavar="LENGTH",
    help='A length of reel on offer where no price list has the cable, such as "25 m"; again for each.',
)
@click.option("--cuts", metavar="FILE", help="Write the cut list as well: .csv.")
@click.option("--output", "-o", help="Write the shopping list: .csv, or .xlsx for the whole workbook.")
def shopping(
    plan: str, prices: str | None, spare: str, reels: tuple[str, ...], cuts: str | None, output: str | None
) -> None:
    """List everything to buy for PLAN, and what to cut from each reel.

    With prices, cable is bought in the reels (and by the metre) that cost least in all; a piece is never joined. Loads
    are not on the list. Sizes that the plan leaves free are those of the schedule, still to be chosen. A file that is
    there already is kept as NAME.previous.
    """
    from farvolt_app import cli, shopping_rows, shopping_text

    _accepted(cuts, "--cuts", (".csv",))
    suffix = _accepted(output, "--output", (".csv", ".xlsx"))
    for file in (output, cuts):
        if file is not None:
            cli._refuse_plan(plan, file)
    how = shopping_rows.wanted(prices if prices != EXAMPLE else None, spare, reels, example=prices == EXAMPLE)
    read = cli._read(plan)
    found = cli._studied_of(read, plan, margins=False)
    from farvolt import shopping as core
    from farvolt import upsizing

    with cli._progress("Sharing the pieces out to reels"):
        bill = core.of_study(found, how)
        hints = upsizing.of_study(found, bill)
    if output is None and cuts is None:
        shopping_text.show(found, bill, hints)
    if cuts is not None:
        cli._write_beside(plan, cuts, shopping_rows.cuts_csv(bill).encode("utf-8-sig"))
    if output is not None and suffix == ".csv":
        cli._write_beside(plan, output, shopping_rows.list_csv(bill).encode("utf-8-sig"))
    elif output is not None:
        from farvolt_app import workbook

        cli._write_beside(plan, output, workbook.to_bytes(found, how, read.text))


@click.command()
@click.option("--output", "-o", help="File to write it to; standard output unless given.")
def prices(output: str | None) -> None:
    """Write the price list shipped, which is invented, to start one of your own from."""
    from farvolt import planfile, price_file
    from farvolt_app import cli

    if output is None or output == planfile.STDIN:
        cli._print_whole(price_file.example_text())
        return
    planfile.save(Path(output), price_file.example_text(), expected=None)
    click.echo(f"Wrote {output}. Next: farvolt shopping PLAN --prices {output}", err=True)


def _accepted(file: str | None, option: str, suffixes: tuple[str, ...]) -> str:
    """The suffix of a file to write; refuses any other than those accepted."""
    suffix = Path(file).suffix.lower() if file is not None else ""
    if file is not None and suffix not in suffixes:
        told = ", ".join(suffixes)
        raise click.BadParameter(f'"{suffix or file}" is not written; accepted: {told}', param_hint=option)
    return suffix
