"""The tables of the report: cable schedule, shopping and cut lists, protection, loads."""

from collections.abc import Sequence
from typing import Any, Literal

from farvolt import shopping as shopping_list
from farvolt.conductors import other_system
from farvolt.results import Study
from farvolt.units import feet, number
from farvolt_app import schedule, shopping_rows, shown
from farvolt_app.paper import Document
from farvolt_app.paper_table import Column, table
from farvolt_app.schedule import Cable, LoadLine
from farvolt_app.sheet_cables import pretty

Units = Literal["metric", "american"]


def length(length_m: float, units: Units, digits: int = 3) -> str:
    """A length for reading."""
    return f"{number(feet(length_m), digits)} ft" if units == "american" else f"{number(length_m, digits)} m"


def cell(value: float | None, digits: int = 3) -> str:
    """A number for reading; nothing where there is no answer."""
    return "" if value is None else number(value, digits)


CABLES = (
    Column("Label", 13), Column("Run", 28), Column("From", 23), Column("To", 23), Column("One way", 13, "R"),
    Column("Cond. in all", 14, "R"), Column("Size", 26), Column("Side by side", 10, "R"), Column("Colours", 17),
    Column("Insul. °C", 11, "R"), Column("Protection", 29), Column("Most A", 11, "R"),
    Column("May carry A", 12, "R"), Column("Drop V", 12, "R"), Column("Drop %", 10, "R"), Column("Findings", 27),
)  # fmt: skip


def cables(document: Document, study: Study, found: Sequence[Cable], units: Units) -> None:
    """The cable schedule."""
    document.open_page("landscape")
    document.heading("Cable schedule")
    document.paragraph(
        "Most A: the largest current in any case. Drop: of the run alone, both conductors, in the case where it is "
        "largest, at the plan's conductor temperature. ~ marks the nearest size of the other system, which may be "
        "thinner.", 8.5,
    )  # fmt: skip
    marks = {row["Run"]: _marked(row["Findings"]) for row in shown.run_rows(study, None)}
    table(document, CABLES, [_cable(one, marks[one.run.name], units) for one in found], size=7,
          empty="The plan has no runs.")  # fmt: skip
    _not_held(document, study)


def _cable(cable: Cable, findings: str, units: Units) -> tuple[str, ...]:
    run = cable.run
    colours = " / ".join(one.colour for one in (cable.feed, cable.back) if one.length_m)
    return (
        run.label or "", run.name, run.from_point, run.to_point, length(run.length.si, units),
        length(cable.total_m, units), _size(cable, units), str(cable.parallel), colours, number(cable.insulation_degC),
        cable.protection, cell(cable.largest_A), cell(cable.ampacity_A), *_drop(cable.drop_V, cable.nominal_V),
        findings,
    )  # fmt: skip


def _drop(drop_V: float | None, nominal_V: float) -> tuple[str, str]:
    """A drop in volts and in percent, to a millivolt and a hundredth, as they are compared."""
    return ("", "") if drop_V is None else (f"{drop_V:.3f}", f"{100 * drop_V / nominal_V:.2f}")


def _size(cable: Cable, units: Units) -> str:
    """The size as stated, with the nearest of the system that is asked for beside it."""
    text = pretty(schedule.size_text(cable))
    others = [other_system(size).name for size in cable.sizes if (size.system == "metric") == (units == "american")]
    return f"{text} (~{pretty(', '.join(others))})" if others else text


def _marked(findings: str) -> str:
    """The findings of a subject, marked where one fails."""
    if findings == "none":
        return ""
    return f"! {findings}" if shown.SEVERITIES["fail"] in findings else findings


def _not_held(document: Document, study: Study) -> None:
    names = schedule.not_held(study)
    if names:
        listed = ", ".join(f'"{name}"' for name in names)
        document.paragraph(f"Cases that give way have no numbers here, see the findings: {listed}.", 9, bold=True)


LIST = (
    Column("Item", 40), Column("Size or rating", 24), Column("Material or type", 42), Column("Colour", 20),
    Column("Quantity", 18, "R"), Column("Unit", 14), Column("Note", 90),
)  # fmt: skip
CUTS = (
    Column("Reel", 9, "R"), Column("Cut from", 30), Column("Size", 20), Column("Material", 24), Column("Colour", 16),
    Column("Label", 16), Column("Run or battery", 38), Column("From", 30), Column("To", 30), Column("Pole", 12),
    Column("Cut to", 16, "R"), Column("Left on it", 16, "R"),
)  # fmt: skip


def shopping(document: Document, study: Study, units: Units) -> None:
    """What to buy, and how the cable is cut from it. Without prices: those are of a list of the buyer's own."""
    bill = shopping_list.of_study(study)
    document.open_page("landscape")
    document.heading("Shopping list")
    document.paragraph(f"With {number(100 * bill.wanted.spare)} % added to every length. Loads are left out.", 8.5)
    table(document, LIST, [_line(row, units) for row in shopping_rows.list_rows(bill)], size=7.5, empty="Nothing.")
    document.heading("Cut list")
    document.paragraph(shopping_rows.MEASURE, 8.5)
    rows = [
        (
            str(row["Reel no."]), row["Cut from"], pretty(row["Size"]), row["Material"], row["Colour"], row["Label"],
            row["Run or battery"], row["From"], row["To"], row["Pole"], length(row["Cut to (m)"], units, 4),
            length(row["Left on it (m)"], units, 4),
        )
        for row in shopping_rows.cut_rows(bill)
    ]  # fmt: skip
    table(document, CUTS, rows, size=7, empty="Nothing to cut.")


def _line(row: dict[str, Any], units: Units) -> tuple[str, ...]:
    metres = row["Unit"] == "m"
    quantity = length(row["Quantity"], units, 4).split()[0] if metres else number(row["Quantity"])
    unit = "ft" if metres and units == "american" else row["Unit"]
    return (
        row["Item"], pretty(row["Size or rating"]), pretty(row["Material or type"]), row["Colour"], quantity, unit,
        row["Note"],
    )  # fmt: skip


PROTECTION = (
    Column("Label", 14), Column("Run", 32), Column("Protection", 32), Column("End", 14), Column("Load A", 14, "R"),
    Column("Cable allows A", 15, "R"), Column("Highest fault A", 16, "R"), Column("Interrupts A", 18, "R"),
    Column("Least fault A", 15, "R"), Column("Opens within s", 15, "R"), Column("Cable stands s", 15, "R"),
    Column("Least fault is", 40), Column("Findings", 34),
)  # fmt: skip


def protection(document: Document, study: Study) -> None:
    """Each protection beside its load, its cables and its faults."""
    document.open_page("landscape")
    document.heading("Protection")
    document.paragraph(shown.PROTECTION_NOTES, 8.5)
    numbers = ("Load (A)", "Cable allows (A)", "Highest fault (A)", "Interrupts (A)", "Least fault (A)",
               "Opens within (s)", "Cable stands (s)")  # fmt: skip
    rows = [
        (row["Label"], row["Run"], row["Protection"], row["End"], *(cell(row[name]) for name in numbers),
         row["Least fault is"], _marked(row["Findings"]))
        for row in shown.protection_rows(study)
    ]  # fmt: skip
    table(document, PROTECTION, rows, size=7, empty="The plan states no protection.")


LOADS = (
    Column("Load", 30), Column("At", 24), Column("Rated", 16), Column("Lowest V", 13, "R"), Column("May be V", 17, "R"),
    Column("Current A", 13, "R"), Column("Drop V", 12, "R"), Column("Drop %", 11, "R"), Column("Limit %", 11, "R"),
    Column("In case", 36), Column("Findings", 24),
)  # fmt: skip


def loads(document: Document, study: Study, found: Sequence[Cable]) -> None:
    """Each load: the lowest voltage it sees, and its drop where that is largest."""
    document.open_page("landscape")
    document.heading("Loads")
    document.paragraph(
        "Lowest V: in any case in which the load is on. Current and drop: in the case named, where the drop is "
        "largest, at the plan's conductor temperature; the findings hold limits at the rulebook's own.", 8.5,
    )  # fmt: skip
    marks = {row["Load"]: _marked(row["Findings"]) for row in shown.load_rows(study, None)}
    rows = [
        (
            line.name, line.at, line.rating, cell(_lowest(study, index), 4), _range(line), cell(line.amps),
            *_drop(line.drop_V, line.nominal_V), cell(line.limit_percent), line.case, marks[line.name],
        )
        for index, line in enumerate(schedule.loads(study, found))
    ]  # fmt: skip
    table(document, LOADS, rows, size=7.5, empty="The plan has no loads.")


def _lowest(study: Study, index: int) -> float | None:
    name = study.plan.loads[index].name
    pairs = zip(study.plan.checked_cases, study.cases, strict=True)
    seen = [result.loads[index].volts for case, result in pairs if case.share(name) > 0]
    return min((volts for volts in seen if volts is not None), default=None)


def _range(line: LoadLine) -> str:
    """The voltages that a load tolerates, as far as the plan states them."""
    least, most = cell(line.min_volts), cell(line.max_volts)
    return f"{least} to {most}" if least and most else f"from {least}" if least else f"to {most}" if most else ""
