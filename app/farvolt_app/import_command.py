"""The command `import`: a plan out of a workbook, or the workbook to fill in."""

from pathlib import Path

import click

from farvolt import planfile
from farvolt.errors import Fault
from farvolt_app import workbook_cells, workbook_plan
from farvolt_app.paper_commands import suffix_of
from farvolt_app.workbook_cells import WorkbookError


def run(workbook: str | None, output: str) -> None:
    """Write the plan in a workbook, or without one the template. Raises WorkbookError, SaveError."""
    if workbook is None:
        _template(output)
        return
    if output != planfile.STDIN:
        suffix_of(output, (".toml",))
    found = workbook_plan.read(_content(workbook), workbook)
    if found.faults:
        raise WorkbookError(list(found.faults), workbook)
    for note in found.notes:
        click.echo(note, err=True)
    if output == planfile.STDIN:
        click.echo(found.text.encode(), nl=False)
        return
    planfile.save(Path(output), found.text, expected=None)
    click.echo(f"Wrote {output}. Next: farvolt check {output}", err=True)


def _content(path: str) -> bytes:
    try:
        with Path(path).open("rb") as file:
            return file.read(workbook_cells.FILE_LIMIT_BYTES + 1)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise WorkbookError([Fault("", "", "", f"cannot be read ({reason})", "the path of a workbook")], path) from None


def _template(output: str) -> None:
    from farvolt.errors import SaveError
    from farvolt_app import template

    suffix_of(output, (".xlsx",))
    path = Path(output)
    if path.exists():
        raise SaveError(f"{output}: it exists already; nothing was written. Write it under another name.")
    try:
        planfile.write_whole(path, template.to_bytes())
    except OSError as error:
        raise SaveError(f"{output}: cannot be written ({error.strerror})") from None
    click.echo(f"Wrote {output}. Fill it in, then: farvolt import {output} -o plan.toml", err=True)
