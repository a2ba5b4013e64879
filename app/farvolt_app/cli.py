"""The command line: arguments to the library, results to standard output, everything else to standard error.

Heavy libraries are imported by the commands that need them, so that each command answers quickly.
"""

import io
import json
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

import click

from farvolt import __version__
from farvolt.errors import FarvoltError
from farvolt_app import as_built_command, commissioning_command, shopping_command

if TYPE_CHECKING:
    from datetime import datetime

    from farvolt.planfile import PlanFile
    from farvolt.results import Study

FAILS, BAD_INPUT, INTERRUPTED = 1, 2, 130
"""Exit codes beside 0: a limit is broken; the input cannot be used; Ctrl+C, as a shell has it."""


# A plan's matrices are small: threads would only wait for each other. Set before numpy is first imported.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")


class _Commands(click.Group):
    """Turns the library's errors into one message and exit code 2."""

    def invoke(self, ctx: click.Context) -> object:
        for stream in (sys.stdout, sys.stderr):
            if isinstance(stream, io.TextIOWrapper):
                # A terminal that lacks a character gets a mark in its place, not an error.
                stream.reconfigure(errors="replace")
        try:
            result = super().invoke(ctx)
            sys.stdout.flush()
            return result
        except FarvoltError as error:
            from farvolt.integrity import plain

            for line in str(error).split("\n"):
                click.echo(plain(line), err=True)
            ctx.exit(BAD_INPUT)
        except KeyboardInterrupt:
            click.echo("Ended.", err=True)
            ctx.exit(INTERRUPTED)
        except BrokenPipeError:
            # The reader of our output has gone (`farvolt check … | head`): that is no fault.
            _discard_output()
            ctx.exit(0)
        except OSError as error:
            click.echo(f"The output cannot be written ({error.strerror})", err=True)
            _discard_output()
            ctx.exit(BAD_INPUT)


def _discard_output() -> None:
    """Let what is still buffered go nowhere, so that closing standard output at the end fails no more."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


@click.group(cls=_Commands, invoke_without_command=True, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="farvolt")
@click.pass_context
def main(ctx: click.Context) -> None:
    """Plan low-voltage DC wiring (12, 24, 48 V): every voltage, every limit, and the cable schedule to buy from.

    \b
    Start here:
      farvolt                          open the web pages on an example plan
      farvolt new my-van.toml          write a commented plan to start from
      farvolt check my-van.toml        solve it and hold it against its rulebook
      farvolt schedule my-van.toml -o cables.xlsx

    A plan is one text file; check and schedule read it from standard input where PLAN is -. Exit codes: 0 nothing
    fails, 1 something fails a check, 2 the input cannot be used. Figures are for planning: check local codes and
    have the work inspected.
    """
    if ctx.invoked_subcommand is None:
        ctx.invoke(open_pages, plan=None)


@main.command("open")
@click.argument("plan", required=False)
@click.option("--port", type=click.IntRange(1, 65535), help="Port of the pages; a free one unless given.")
@click.option("--address", default="127.0.0.1", show_default=True, help="Address to listen on.")
@click.option("--browser/--no-browser", default=True, help="Open them in the browser, or say their address.")
def open_pages(plan: str | None, port: int | None = None, address: str = "127.0.0.1", browser: bool = True) -> None:
    """Open the web pages on PLAN, or on an example plan; end with Ctrl+C."""
    from farvolt_app import server

    if plan is not None:
        from farvolt import planfile

        planfile.read_text(Path(plan))
    sys.exit(server.serve(Path(plan) if plan else None, port=port, address=address, open_browser=browser))


@main.command()
@click.argument("plan")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object for machines.")
@click.option("--case", "case_name", help="Show every number of this case instead of the worst of each.")
@click.option(
    "--working/--no-working", default=False, help="Show the working of each finding: formula, numbers, result."
)
@click.option("--tables", metavar="FOLDER", help="Write points, runs, loads and sources of all cases to FOLDER as CSV.")
def check(plan: str, as_json: bool, case_name: str | None, working: bool, tables: str | None) -> None:
    """Solve PLAN in all its cases and check it: voltages, drops, ampacity, protection, slips.

    Prints the findings, then the worst voltage of each load and the largest current of each run. The exit code is
    1 when anything fails. With --tables the numbers of every case go to points.csv, runs.csv, loads.csv and
    sources.csv as well; a file of such a name that is there already is kept as NAME.previous.
    """
    if as_json and (case_name is not None or working):
        raise click.UsageError("--json prints all cases and all workings; leave out --case and --working")
    found = _studied(plan, margins=as_json or case_name is not None)
    if as_json:
        from farvolt.output import as_object

        _print_whole(json.dumps(as_object(found), ensure_ascii=False, allow_nan=False) + "\n")
    else:
        from farvolt_app import report_text

        report_text.show(found, case_name, working)
    if tables is not None:
        _write_tables(found, tables)
    sys.exit(FAILS if found.failing else 0)


def _write_tables(found: "Study", folder: str) -> None:
    """Write the numbers of all cases, and say what was there before."""
    from farvolt_app import case_files
    from farvolt_app.shown import CAUTION

    kept = case_files.write(found, Path(folder))
    before = f" Kept what was there before as {', '.join(f'{name}.previous' for name in kept)}." if kept else ""
    click.echo(f"Wrote points.csv, runs.csv, loads.csv and sources.csv to {folder}.{before} {CAUTION}", err=True)


@main.command()
@click.argument("plan")
@click.option("--load", required=True, help="Name of the load.")
@click.option("--case", "case_name", help="Name of the case; the one with the largest drop unless given.")
def drop(plan: str, load: str, case_name: str | None) -> None:
    """Show what the voltage drop of a load of PLAN is made of, and what the next size of each run would gain.

    The parts are the conductors and devices on its way, at the rulebook's conductor temperature; they sum to the drop.
    """
    from farvolt_app import drop_text

    read = _read(plan)
    with _placed(read, plan), _progress("Solving"):
        from farvolt.study import prepared

        context = prepared(read.plan, read.folder)
    drop_text.show(context, load, case_name)


@main.command()
@click.argument("plan")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object for machines.")
@click.option("--case", "case_name", help="Name of the case; all cases unless given.")
@click.option("--load", help="Load to show what matters most to; the one that may come lowest unless given.")
@click.option(
    "--samples", type=click.IntRange(1, 100_000), help="Samples where nothing is proven; 10000, fewer for a large plan."
)
@click.option("--seed", type=click.IntRange(0, 2**32 - 1), default=0, show_default=True, help="Start of the samples.")
def tolerances(
    plan: str, as_json: bool, case_name: str | None, load: str | None, samples: int | None, seed: int
) -> None:
    """Show how low and how high the voltage at each load of PLAN may come within its [tolerances].

    Guaranteed where that is proven, else of samples, with what these can claim; then which tolerance matters most.
    """
    from farvolt_app import tolerances_text

    read = _read(plan)
    with _placed(read, plan), _progress("Solving the ends of the tolerances and samples between them"):
        from farvolt.study import prepared

        answer = tolerances_text.Answer(prepared(read.plan, read.folder), case_name, load, samples, seed)
    if as_json:
        _print_whole(json.dumps(tolerances_text.as_object(answer), ensure_ascii=False, allow_nan=False) + "\n")
    else:
        tolerances_text.show(answer)


@main.command()
@click.argument("plan")
@click.option("--run", "run_name", help="Show one run, with every rating that passes there.")
@click.option("--output", "-o", help="Write the run's time-current chart: .svg, .pdf or .png; needs --run.")
def protection(plan: str, run_name: str | None, output: str | None) -> None:
    """Show each protection of PLAN beside its load, its cables and the largest and least fault current.

    With --run also the ratings that pass every check there; with --output its time-current chart.
    """
    from farvolt_app import protection_text

    if output is not None and run_name is None:
        raise click.UsageError("--output draws the chart of one run; name it with --run")
    suffix = Path(output).suffix.lower() if output is not None else ""
    if output is not None and suffix not in (".svg", ".pdf", ".png"):
        raise click.BadParameter(f'"{suffix or output}" is not written; accepted: .svg, .pdf, .png',
                                 param_hint="--output")  # fmt: skip
    read = _read(plan)
    with _placed(read, plan), _progress("Solving"):
        from farvolt.study import prepared

        context = prepared(read.plan, read.folder)
    protection_text.show(context, run_name)
    if output is not None and run_name is not None:
        from farvolt.protected import time_current
        from farvolt_app import time_current_chart as charts

        picture = time_current(context, run_name)
        data = charts.svg(picture).encode() if suffix == ".svg" else (
            charts.pdf(picture) if suffix == ".pdf" else charts.png(picture))  # fmt: skip
        _write_beside(plan, output, data)


@main.command()
@click.argument("plan")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object for machines.")
@click.option("--apply", "apply_it", is_flag=True, help="Write the sizes and protection into PLAN; comments are kept.")
@click.option("--objective", type=click.Choice(["mass", "cost"]), help="Least metal, or least price (with --prices).")
@click.option("--prices", help="Price list, a CSV file; the objective is then the price.")
@click.option("--sizes", help='Sizes in stock, with commas: "4 mm2, 10 mm2"; all that are made unless given.')
@click.option("--most-sizes", type=click.IntRange(1), help="The greatest number of different sizes to buy.")
@click.option("--size-cost", type=click.FloatRange(0), default=0.0, help="What each different size costs on top.")
@click.option("--parallel", type=click.IntRange(1, 8), default=1, help="Up to so many equal cables side by side.")
@click.option("--ratings", is_flag=True, help="Choose the ratings of stated protection on these runs as well.")
@click.option("--all", "all_runs", is_flag=True, help="Choose all runs anew, not only those without a size.")
@click.option("--curve", "with_curve", is_flag=True, help="Show what tighter and looser limits of drop would cost.")
@click.option("--time-limit", type=click.FloatRange(0.1), default=60.0, show_default=True, help="Seconds to search.")
def choose(
    plan: str, as_json: bool, apply_it: bool, objective: str | None, prices: str | None, sizes: str | None,
    most_sizes: int | None, size_cost: float, parallel: int, ratings: bool, all_runs: bool, with_curve: bool,
    time_limit: float,
) -> None:  # fmt: skip
    """Choose the cables of PLAN, all at once: the least copper or price with which every check passes.

    Chosen are the runs without a size, with protection where they need it and state none. What is chosen has been held
    against the exact solution and all checks; a bound says how much cheaper any other could be. Ctrl+C ends the search
    with the best so far. The exit code is 1 when nothing passes.
    """
    from farvolt_app import choice_command

    wishes = choice_command.wishes(
        objective, prices, sizes, most_sizes, size_cost, parallel, ratings=ratings, every=all_runs, seconds=time_limit
    )
    found = choice_command.run(plan, wishes, as_json=as_json, apply_it=apply_it, with_curve=with_curve)
    sys.exit(0 if found else FAILS)


@main.command()
@click.argument("plan")
@click.argument("readings")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object for machines.")
@click.option("--as-read", is_flag=True, help="Take readings that look like slips as they stand.")
def locate(plan: str, readings: str, as_json: bool, as_read: bool) -> None:
    """Compare meter READINGS of the built installation with PLAN and find the bad joint.

    READINGS is a CSV file, or a workbook with a sheet "Readings": from, from pole, to, to pole, volts; or run, pole,
    amps; with case, loads, sources, devices of the state they were taken in. Prints suspects by probability, and what
    to measure next. The exit code is 0 when all readings fit the plan, 1 when they do not.
    """
    from farvolt_app import locate_text, readings_file

    read = _read(plan)
    with _placed(read, plan), _progress("Comparing the readings with the plan"):
        from farvolt import rulebook
        from farvolt.installation import Installation
        from farvolt.locate import locate as locate_in
        from farvolt.next_reading import next_readings

        sets = readings_file.read(readings, read.plan)
        installation = Installation(read.plan, rulebook.load(read.plan.plan.rulebook, read.folder))
        found = locate_in(installation, sets, as_read=as_read)
        nexts = next_readings(found)
    if as_json:
        _print_whole(json.dumps(locate_text.as_object(found, nexts), ensure_ascii=False, allow_nan=False) + "\n")
    else:
        locate_text.show(found, nexts)
    sys.exit(0 if found.fits else FAILS)


@main.command()
@click.argument("plan")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object for machines.")
@click.option("--day", help="Type of day to show loads of; the one the bank is sized for unless given.")
@click.option("--working/--no-working", default=False, help="Show the working of charging, time to full and fresh air.")
@click.option("--output", "-o", help="Write the chart of what the day's energy goes into: .svg, .pdf or .png.")
def bank(plan: str, as_json: bool, day: str | None, working: bool, output: str | None) -> None:
    """Show the energy of a day in PLAN, how large a bank and array it takes, and how the bank is filled again.

    Sizing follows IEEE 1013 and IEEE 485, every step with its working. The exit code is 1 when the bank fails a check.
    """
    from farvolt_app import bank_text, paper_commands

    suffix = paper_commands.suffix_of(output, (".svg", ".pdf", ".png")) if output is not None else ""
    found = _studied(plan, margins=False)
    from farvolt.bank_study import as_object, bank_study

    answer = bank_study(found)
    shown = bank_text.day_of(answer, day)
    if as_json:
        _print_whole(json.dumps(as_object(answer), ensure_ascii=False, allow_nan=False) + "\n")
    else:
        bank_text.show(answer, shown, working=working)
    if output is not None:
        from farvolt_app import energy_chart

        _write_beside(plan, output, energy_chart.written(shown, suffix))
    sys.exit(FAILS if any(one.severity == "fail" for one in answer.findings) else 0)


@main.command()
@click.argument("plan")
@click.option("--from", "start", type=click.DateTime(["%Y-%m-%d"]),
              help="First day; 1 December (south: June) unless given.")  # fmt: skip
@click.option("--days", "count", default=14, show_default=True, help="How many days.")
@click.option("--step", "step_min", default=60, show_default=True, help="Minutes of a step, 1 to 60.")
@click.option("--start-charge", help='Charge of the banks at the start, such as "90 %"; as the plan says unless given.')
@click.option("--low-charge", help='Count hours below this charge; the battery\'s least charge unless given.')
@click.option("--irradiance", help="Sun from a table of your own: CSV with time, ghi (W/m²), and where known dni, dhi, "
              "temp_air (°C), wind (m/s).")  # fmt: skip
@click.option("--day", help="Take every day as this type of day of the plan.")
@click.option("--ambient", help='Temperature of bank and air, such as "5 degC".')
@click.option("--aged", is_flag=True, help="Take the banks as they are at the end of their life.")
@click.option("--csv", "table", help="Write every step to this CSV file; - for standard output instead of the tables.")
@click.option("--chart", help="Write the chart of charge, power and voltage: .svg, .pdf or .png.")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object for machines.")
def days(
    plan: str, start: "datetime | None", count: int, step_min: int, start_charge: str | None, low_charge: str | None,
    irradiance: str | None, day: str | None, ambient: str | None, aged: bool, table: str | None, chart: str | None,
    as_json: bool,
) -> None:  # fmt: skip
    """Work through days of PLAN step by step: sun, chargers, loads, charge, and what cuts out when.

    Every step is solved on the plan's own cables. The exit code is 1 when some load is not served in full.
    """
    from farvolt_app import days_command, days_rows, paper_commands

    suffix = paper_commands.suffix_of(chart, (".svg", ".pdf", ".png")) if chart is not None else ""
    wishes = days_command.Wishes(start.date() if start else None, count, step_min, start_charge, low_charge, irradiance,
                                 day, ambient, aged)  # fmt: skip
    if table == "-" and as_json:
        raise click.UsageError("--json and --csv - both print to standard output; leave one out")
    for output in (one for one in (table, chart) if one is not None):
        _refuse_plan(plan, output)
    found = days_command.run(plan, wishes, as_json=as_json, quiet=table == "-")
    if table == "-":
        _print_whole(days_rows.to_csv(found))
    elif table is not None:
        _write_beside(plan, table, days_rows.to_csv(found).encode("utf-8-sig"))
    if chart is not None:
        from farvolt_app import days_chart

        _write_beside(plan, chart, days_chart.written(found, suffix))
    sys.exit(FAILS if found.unserved_Wh > 0 else 0)


@main.command()
@click.argument("plan")
@click.option("--output", "-o", required=True, help="File to write: .xlsx or .csv; - writes CSV to standard output.")
def schedule(plan: str, output: str) -> None:
    """Write the cable schedule of PLAN: cables, loads, protection, shopping totals, findings.

    The workbook is live: change a length in it and the drop changes. A file of that name that is there already is
    kept beside it as NAME.previous.
    """
    from farvolt import planfile

    suffix = Path(output).suffix.lower()
    if output != planfile.STDIN and suffix not in (".xlsx", ".csv"):
        raise click.BadParameter(f'"{suffix or output}" is not written; accepted: .xlsx, .csv', param_hint="--output")
    _refuse_plan(plan, output)
    read = _read(plan)
    found = _studied_of(read, plan, margins=False)
    from farvolt_app import schedule as rows
    from farvolt_app import workbook

    if output == planfile.STDIN:
        _print_whole(rows.to_csv(found))
        return
    data = workbook.to_bytes(found, text=read.text) if suffix == ".xlsx" else rows.to_csv(found).encode("utf-8-sig")
    _write_beside(plan, output, data)


_PAPER = click.option(
    "--paper", type=click.Choice(["a4", "letter"]), default="a4", show_default=True, help="Paper of a PDF."
)
_UNITS = click.option(
    "--units", type=click.Choice(["metric", "american"]), default="metric", show_default=True, help="Of lengths."
)


@main.command()
@click.argument("plan")
@click.option("--output", "-o", required=True, help="File to write: .svg, .png or .pdf.")
@click.option("--case", "case_name", help="Name of the case; the one with the largest drop unless given.")
@_PAPER
@_UNITS
def draw(plan: str, output: str, case_name: str | None, paper: str, units: str) -> None:
    """Draw PLAN as a single-line diagram, with the voltages and currents of one case.

    A PDF is made for paper: on one page where its letters stay legible, else in numbered parts that overlap, after a
    page that shows where they lie. A file of that name that is there already is kept as NAME.previous.
    """
    from farvolt_app import paper_commands

    suffix = paper_commands.suffix_of(output, (".svg", ".png", ".pdf"))
    _refuse_plan(plan, output)
    found = _studied(plan, margins=False)
    with _progress("Drawing"):
        data = paper_commands.drawing(found, suffix, case_name, paper, units)
    _write_beside(plan, output, data)


@main.command()
@click.argument("plan")
@click.option("--output", "-o", required=True, help="File to write: .pdf.")
@_PAPER
@_UNITS
def report(plan: str, output: str, paper: str, units: str) -> None:
    """Write everything about PLAN into one PDF to hand over, legible in black and white.

    Cover and summary, drawing, cable schedule, shopping and cut lists, protection with time-current charts of runs that
    have findings, loads, bank, findings with their working, assumptions and sources. A file of that name that is there
    already is kept as NAME.previous.
    """
    from farvolt_app import paper_commands

    paper_commands.suffix_of(output, (".pdf",))
    _refuse_plan(plan, output)
    found = _studied(plan, margins=False)
    with _progress("Writing the report"):
        data = paper_commands.report(found, paper, units)
    _write_beside(plan, output, data)


@main.command()
@click.argument("plan")
@click.option("--output", "-o", required=True, help="File to write: .pdf.")
@click.option("--size", default="62x12mm", show_default=True, help="Width x height of a label: 62x12mm, 2.5x0.5in.")
@click.option("--sheet", is_flag=True, help="As many labels as fit on sheets of paper, with lines to cut along.")
@click.option("--paper", type=click.Choice(["a4", "letter"]), help="Paper of the sheets; implies --sheet.")
def labels(plan: str, output: str, size: str, sheet: bool, paper: str | None) -> None:
    """Write wire labels for PLAN: both ends and both poles of every run, each of several parallel cables.

    A label names its run, from where to where, the end it goes to, size, colour and protection. Without --sheet each
    is a page of its own, for label printers. A file of that name that is there already is kept as NAME.previous.
    """
    from farvolt_app import paper_commands

    paper_commands.suffix_of(output, (".pdf",))
    _refuse_plan(plan, output)
    wanted = paper_commands.label_size(size)
    found = _studied(plan, margins=False)
    with _progress("Setting the labels"):
        data = paper_commands.label_sheet(found, wanted, paper or ("a4" if sheet else None))
    _write_beside(plan, output, data)


main.add_command(shopping_command.shopping)
main.add_command(shopping_command.prices)
main.add_command(commissioning_command.write_sheet)
main.add_command(as_built_command.as_built)


@main.command()
@click.argument("file")
@click.option("--load", "loads", multiple=True, metavar="APPLIANCE=LENGTH",
              help="An appliance and its cable's length one way, such as \"water pump=3 m\"; again for each.")
@click.option("--name", default="My plan", show_default=True, help="Name of the plan.")
@click.option("--volts", type=click.Choice(["12", "24", "48"]), default="12", show_default=True, help="System voltage.")
@click.option("--rulebook", default="leisure-vehicle-eu", show_default=True, help="Limits to hold the plan against.")
@click.option("--chemistry", default="lfp", show_default=True, help="Of the battery: lfp, agm, gel, flooded, nmc.")
@click.option("--capacity", default="100 Ah", show_default=True, help="Of the battery bank.")
@click.option("--short-circuit", default="", help="Short-circuit current of the battery, from its data sheet.")
@click.option("--bank-length", default="1 m", show_default=True, help="Cable from the battery to the fuse block.")
@click.option("--alternator", default="", help="Current of the charger at the alternator, such as \"30 A\".")
@click.option("--mains", default="", help="Current of the mains charger, such as \"20 A\".")
@click.option("--solar", default="", help="Power of the solar modules, such as \"200 W\".")
def new(file: str, loads: tuple[str, ...], **answers: str) -> None:
    """Write a plan to start from to FILE; - writes it to standard output.

    Without --load it is a short commented plan. With it, once for each appliance, a complete first plan with cables and
    fuses chosen. The appliances known are listed when one is not.
    """
    from farvolt import examples, planfile

    text = _guided(loads, answers) if loads else examples.starter_text()
    if file == planfile.STDIN:
        _print_whole(text)
        return
    planfile.save(Path(file), text, expected=None)
    click.echo(f"Wrote {file}. Next: farvolt check {file}", err=True)


def _guided(loads: tuple[str, ...], given: dict[str, str]) -> str:
    from farvolt.first_plan import Answers, Wanted, first_plan

    wanted = []
    for one in loads:
        appliance, equals, length = one.partition("=")
        if not equals:
            raise click.BadParameter(f'"{one}" has no length; accepted: "water pump=3 m"', param_hint="--load")
        wanted.append(Wanted(appliance.strip(), length.strip()))
    volts, length = int(given.pop("volts")), given.pop("bank_length")
    return first_plan(Answers(nominal_V=volts, bank_distance=length, loads=tuple(wanted), **given))


@main.command()
@click.argument("plan")
@click.argument("other")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object for machines.")
def compare(plan: str, other: str, as_json: bool) -> None:
    """Compare PLAN with OTHER: what differs, the volts of each load, findings that come and go, metal of the cables.

    PLAN is the one before, OTHER the one after. Entries are matched by name, quantities compared by value.
    """
    before, after = _studied(plan, margins=False), _studied(other, margins=False)
    from farvolt import differences
    from farvolt_app import compare_text

    found = differences.compare(before, after)
    if as_json:
        answer = compare_text.as_object(found, before.plan.plan.name, after.plan.plan.name)
        _print_whole(json.dumps(answer, ensure_ascii=False, allow_nan=False) + "\n")
    else:
        compare_text.show(found, plan, other)


@main.command("import")
@click.argument("workbook", required=False)
@click.option("--output", "-o", required=True, help="File to write: the plan, .toml; with --template, .xlsx.")
@click.option("--template", is_flag=True, help="Write a workbook to fill in, with an example row on each sheet.")
def import_workbook(workbook: str | None, output: str, template: bool) -> None:
    """Read a plan from a WORKBOOK: the template filled in, or an exported cable schedule; - writes to output.

    What is wrong is told by sheet, row and column, and nothing is written then. Formulas are not calculated, macros and
    links are not looked at. An exported workbook gives back its plan with the lengths changed on its sheet Cables.
    """
    from farvolt_app import import_command

    if template == (workbook is not None):
        raise click.UsageError("name a workbook to read, or ask for one to fill in with --template")
    import_command.run(workbook, output)


@main.command("examples")
@click.argument("name", required=False)
@click.option("--output", "-o", help="File to copy it to; NAME.toml here unless given, - for output.")
def list_examples(name: str | None, output: str | None) -> None:
    """List the example plans, or copy the one called NAME. All are invented."""
    from farvolt import examples, planfile

    if name is None:
        for one in examples.names():
            click.echo(f"{one:30}{examples.title(one)}")
        click.echo("Copy one with: farvolt examples NAME", err=True)
        return
    text = examples.text(name)
    if output == planfile.STDIN:
        _print_whole(text)
        return
    path = Path(output or f"{name}.toml")
    planfile.save(path, text, expected=None)
    click.echo(f"Wrote {path}. Next: farvolt check {path}", err=True)


@main.command("cases")
@click.argument("plan")
def standard_cases(plan: str) -> None:
    """Print the standard set of cases for PLAN, as text to put into its file.

    A plan that states no cases is checked in these; put them in to change them, and add hours of your own.
    """
    from farvolt_app import case_grid, edits

    head = "format = 1\n"  # what the cases are written under, as in a plan
    text = edits.apply(head, case_grid.standard(_read(plan).plan))
    _print_whole(text.removeprefix(head).lstrip("\n"))


@main.command()
def schema() -> None:
    """Print the JSON Schema of the plan format, for editors that check a file while it is typed."""
    from farvolt.schema import json_schema

    _print_whole(json.dumps(json_schema(), indent=2, ensure_ascii=False) + "\n")


def _studied(path: str, *, margins: bool) -> "Study":
    """The study of a plan file, with each case's margin where it is shown: margins take longest."""
    return _studied_of(_read(path), path, margins=margins)


def _studied_of(read: "PlanFile", path: str, *, margins: bool) -> "Study":
    from farvolt.study import study

    with _placed(read, path), _progress("Solving and checking"):
        return study(read.plan, read.folder, margins=margins)


def _read(path: str) -> "PlanFile":
    from farvolt import planfile

    return planfile.read(path)


@contextmanager
def _placed(read: "PlanFile", path: str) -> Iterator[None]:
    """What a study finds wrong in a plan is told with its lines."""
    from farvolt import planfile
    from farvolt.errors import PlanError, RulebookError

    try:
        yield
    except (PlanError, RulebookError) as error:
        raise planfile.placed(error, read.text, path if read.path else "standard input") from None


def _refuse_plan(plan: str, output: str) -> None:
    """An output is never written over the plan itself."""
    if output != "-" and Path(output).resolve() == Path(plan).resolve():
        raise click.BadParameter(f'"{output}" is the plan itself; accepted: another file', param_hint="--output")


def _write_beside(plan: str, output: str, data: bytes) -> None:
    """Write a file whole, keeping one that is there already as NAME.previous, and say so with the usual caution."""
    from farvolt import planfile
    from farvolt.errors import SaveError
    from farvolt_app.shown import CAUTION

    _refuse_plan(plan, output)
    path = Path(output)
    try:
        if path.is_file():
            planfile.write_whole(path.with_name(f"{path.name}.previous"), path.read_bytes())
        planfile.write_whole(path, data)
    except OSError as error:
        raise SaveError(f"{output}: cannot be written ({error.strerror})") from None
    click.echo(f"Wrote {output}. {CAUTION}", err=True)


def _print_whole(text: str) -> None:
    """What is for machines goes out as UTF-8, whatever the terminal's own encoding."""
    click.echo(text.encode(), nl=False)


@contextmanager
def _progress(what: str) -> Iterator[None]:
    """Show on a terminal that work goes on; silent elsewhere."""
    if not sys.stderr.isatty():
        yield
        return
    from rich.console import Console

    with Console(stderr=True).status(f"{what} …"):
        yield
