"""The sheet "Cables": what each run is bought as, and beside it, not printed, what its drop is worked out from.

All formulas of a row stay in the row, so that the sheet can be sorted and filtered; other sheets find a cable by
its number, never by its place.
"""

import re
from collections.abc import Mapping, Sequence
from typing import Any

from openpyxl.worksheet.worksheet import Worksheet

from farvolt_app import schedule
from farvolt_app.schedule import Cable, Conductor
from farvolt_app.sheets import FIRST, Column, Formula, Header, fill, letters, mark_where

TITLE = "Cables"
FOOT_M = 0.3048
HELD = "Currents are those of the case named and are held while you edit; run the check again for exact figures."
OVER = "! OVER"
NOT_STATED = "not stated"

COLUMNS = (
    Column("No.", 5, "0"), Column("Label", 8), Column("Run", 20), Column("From", 17), Column("To", 17),
    Column("Length one way (m)", 8.5, "0.00", input=True), Column("Length one way (ft)", 8.5, "0.0"),
    Column("All conductors (m)", 11, "0.00"), Column("All conductors (ft)", 11, "0.0"), Column("Size", 12),
    Column("Area (mm²)", 8, "0.00"), Column("AWG (~ nearest)", 10.5), Column("Parallel", 9, "0", input=True),
    Column("Material", 9.5), Column("Insulation (°C)", 10, "0"), Column("Feed colour", 9, input=True),
    Column("Return colour", 9, input=True), Column("Protection", 27), Column("Design current (A)", 9, "0.00"),
    Column("Ampacity (A)", 9.5, "0.0"), Column("Used (%)", 7.5, "0"), Column("Drop (V)", 8, "0.000"),
    Column("Drop (%)", 7.5, "0.00"), Column("Loss (W)", 7.5, "0.00"), Column("Mark", 11),
    Column("Strand", 10, printed=False), Column("Case of the drop", 30, printed=False),
    Column("Nominal (V)", 9, "0.0", printed=False),
    Column("Conductor (°C)", 10, "0.0", printed=False), Column("Current in other cases (A)", 11, "0.00", printed=False),
    Column("Feed size", 11, printed=False), Column("Feed length (m)", 9, "0.00", printed=False),
    Column("Feed current (A)", 9, "0.00", input=True, printed=False),
    Column("Feed cable (mΩ/m)", 10, "0.0000", printed=False),
    Column("Feed joints, protection (mΩ)", 12, "0.000", printed=False),
    Column("Feed in all (mΩ)", 10, "0.000", printed=False),
    Column("Return size", 11, printed=False), Column("Return length (m)", 9, "0.00", input=True, printed=False),
    Column("Return current (A)", 9, "0.00", input=True, printed=False),
    Column("Return cable (mΩ/m)", 10, "0.0000", printed=False),
    Column("Return joints, protection, bond (mΩ)", 14, "0.000", printed=False),
    Column("Return in all (mΩ)", 10, "0.000", printed=False),
)  # fmt: skip
LETTERS = letters(COLUMNS)


def write(sheet: Worksheet, plan: str, found: Sequence[Cable], note: str) -> None:
    """Fill the sheet."""
    about = f"Yellow cells are meant to be changed: drop, loss and totals follow. {HELD}"
    rows = [_row(cable, number) for number, cable in enumerate(found, start=1)]
    fill(sheet, Header(plan, "cables", about, note), COLUMNS, rows)
    mark_where(sheet, len(COLUMNS), len(found), f'LEFT(${LETTERS["Mark"]}{FIRST},1)="!"')


def live(where: Mapping[str, str], row: int, formula: str) -> Formula:
    """A formula on cells of its own row, named by their headings in brackets."""
    return Formula(re.sub(r"\[([^]]+)]", lambda match: f"{where[match[1]]}{row}", formula))


def column(heading: str, count: int) -> str:
    """All cells of a column of the sheet, seen from another sheet."""
    letter = LETTERS[heading]
    return f"{TITLE}!${letter}${FIRST}:${letter}${FIRST + max(count, 1) - 1}"


def of_number(cell: str, heading: str, count: int) -> str:
    """What a column says of the cable whose number is in `cell`."""
    return f"INDEX({column(heading, count)},MATCH({cell},{column('No.', count)},0))"


def pretty(text: str) -> str:
    """A size or temperature with its unit as printed."""
    return text.replace("mm2", "mm²").replace("degC", "°C")


def size_key(name: str) -> str:
    """What totals of a size go by."""
    return pretty(name) or NOT_STATED


def _row(cable: Cable, number: int) -> list[Any]:
    run, row = cable.run, FIRST + number - 1
    solved, rated = cable.drop_V is not None, cable.drop_V is not None and cable.ampacity_A is not None

    def of(formula: str, wanted: bool = True) -> Formula | None:
        return live(LETTERS, row, formula) if wanted else None

    return [
        number, run.label or "", run.name, run.from_point, run.to_point,
        run.length.si, of(f"=[Length one way (m)]/{FOOT_M}"),
        of("=[Parallel]*([Feed length (m)]+[Return length (m)])"), of(f"=[All conductors (m)]/{FOOT_M}"),
        pretty(schedule.size_text(cable)), cable.sizes[0].area_mm2 if cable.sizes else None,
        schedule.american_text(cable), cable.parallel, run.material, cable.insulation_degC,
        cable.feed.colour if cable.feed.length_m else "", cable.back.colour if cable.back.length_m else "",
        cable.protection,
        of("=MAX(ABS([Feed current (A)]),ABS([Return current (A)]),[Current in other cases (A)])", solved),
        cable.ampacity_A, of('=IF([Ampacity (A)]>0,100*[Design current (A)]/[Ampacity (A)],"")', rated),
        of("=([Feed current (A)]*[Feed in all (mΩ)]+[Return current (A)]*[Return in all (mΩ)])/1000", solved),
        of("=100*[Drop (V)]/[Nominal (V)]", solved),
        of("=([Feed current (A)]^2*[Feed in all (mΩ)]+[Return current (A)]^2*[Return in all (mΩ)])/1000", solved),
        of(f'=IF([Design current (A)]>[Ampacity (A)],"{OVER}","")', rated) or ("" if solved else "no answer"),
        cable.strand, cable.case, cable.nominal_V, cable.conductor_degC, _elsewhere(cable),
        *_pole(cable.feed, "Feed", row, run.length.si), *_pole(cable.back, "Return", row, run.length.si),
    ]  # fmt: skip


def _elsewhere(cable: Cable) -> float:
    """The largest current where it is of another case than the drop; 0 where the drop's own case has it."""
    here = max(abs(one.amps or 0.0) for one in (cable.feed, cable.back))
    most = cable.largest_A or 0.0
    return most if most > here * (1 + 1e-9) else 0.0


def _pole(one: Conductor, pole: str, row: int, length_m: float) -> list[Any]:
    follows = one.length_m == length_m
    sized = size_key(one.size.name if one.size else "") if one.length_m else ""
    fixed = "Feed joints, protection (mΩ)" if pole == "Feed" else "Return joints, protection, bond (mΩ)"
    whole = f"=[{pole} cable (mΩ/m)]*[{pole} length (m)]/[Parallel]+[{fixed}]"
    return [
        sized, live(LETTERS, row, "=[Length one way (m)]") if follows else one.length_m,
        one.amps, 1000 * one.ohm_per_m, 1000 * one.fixed_ohm, live(LETTERS, row, whole),
    ]  # fmt: skip
