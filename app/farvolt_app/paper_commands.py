"""The commands `draw`, `report` and `labels`: what they are asked for, and the content of the file they write."""

from datetime import date
from pathlib import Path
from typing import TYPE_CHECKING

import click

from farvolt.results import CaseResult, Study
from farvolt_app.report_text import place

if TYPE_CHECKING:
    from farvolt_app.labels import LabelSize


def suffix_of(output: str, accepted: tuple[str, ...]) -> str:
    """The suffix of an output; refuses any other than the accepted ones."""
    suffix = Path(output).suffix.lower()
    if suffix not in accepted:
        told = ", ".join(accepted)
        raise click.BadParameter(f'"{suffix or output}" is not written; accepted: {told}', param_hint="--output")
    return suffix


def drawing(study: Study, suffix: str, case_name: str | None, paper: str, units: str) -> bytes:
    """The drawing of a case by its name, else of the one with the largest drop."""
    from farvolt_app import drawing_file
    from farvolt_app.paper import PAPERS, foot

    case = _case(study, case_name)
    if suffix == ".pdf":
        return drawing_file.pdf(study, case, PAPERS[paper], units, foot(study.plan.plan.name, date.today()))
    picture = drawing_file.svg(study, case, units)
    return drawing_file.png(picture) if suffix == ".png" else picture.encode()


def _case(study: Study, name: str | None) -> CaseResult:
    from farvolt_app import drawing_file

    if name is None:
        return drawing_file.worst_case(study)
    return study.cases[place(name, [one.name for one in study.cases], "case")]


def report(study: Study, paper: str, units: str) -> bytes:
    """The report, of today."""
    from farvolt_app import report_file
    from farvolt_app.paper import PAPERS

    return report_file.pdf(study, PAPERS[paper], "american" if units == "american" else "metric", date.today())


def label_size(text: str) -> "LabelSize":
    """The size of a label; refuses what is none."""
    from farvolt.errors import FarvoltError
    from farvolt_app import labels

    try:
        return labels.parse_size(text)
    except FarvoltError as error:
        raise click.BadParameter(str(error), param_hint="--size") from None


def label_sheet(study: Study, size: "LabelSize", paper: str | None) -> bytes:
    """Wire labels of a size, on a paper or one to a page."""
    from farvolt_app import labels
    from farvolt_app.paper import PAPERS

    return labels.pdf(study, size, PAPERS[paper] if paper is not None else None)
