"""The cable schedule as a live workbook: drops, totals and percentages are formulas on the sheets' own cells.

Currents are held while lengths are edited, which is right for small changes; the plan itself is solved again by
`farvolt check`. For the unchanged plan the recalculated values are the solver's.
"""

import io
import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any, BinaryIO

from openpyxl import Workbook
from openpyxl.worksheet.worksheet import Worksheet

from farvolt import cable_kinds, shopping
from farvolt.planfile import write_whole
from farvolt.results import Study
from farvolt.shopping import Wanted
from farvolt_app import plan_text, schedule, sheet_cables, sheet_shopping
from farvolt_app.schedule import LoadLine, ProtectionLine
from farvolt_app.sheet_cables import FOOT_M, HELD, OVER, live, of_number, pretty
from farvolt_app.sheets import FIRST, Column, Formula, Header, fill, letters, mark_where
from farvolt_app.shown import CAUTION, SEVERITIES
from farvolt_app.textsafe import cell_text


def write(study: Study, path: Path | BinaryIO, wanted: Wanted | None = None) -> None:
    """Write the workbook to a file, whole or not at all, or to a stream. Raises OSError."""
    data = to_bytes(study, wanted)
    if isinstance(path, Path):
        write_whole(path, data)
    else:
        path.write(data)


def to_bytes(study: Study, wanted: Wanted | None = None, text: str | None = None) -> bytes:
    """The whole workbook as a file's content; `wanted` says how its shopping list is to be made.

    With the plan's own `text` in a sheet the workbook can be read back as the plan.
    """
    book = Workbook()
    book.remove(book.active)
    plan = study.plan.plan.name
    book.properties.creator, book.properties.title = "Farvolt", cell_text(plan)
    found = schedule.cables(study)
    lines, guards = schedule.loads(study, found), schedule.protections(study)
    note = _not_held(study)
    sheet_cables.write(book.create_sheet(sheet_cables.TITLE), plan, found, note)
    _loads(book.create_sheet("Loads"), plan, lines, note)
    _protection(book.create_sheet("Protection"), plan, guards, note)
    bill = shopping.of_study(study, wanted)
    sheet_shopping.write_list(book.create_sheet("Shopping"), plan, bill, found, guards, _P)
    sheet_shopping.write_cuts(book.create_sheet("Cut list"), plan, bill)
    _findings(book.create_sheet("Findings"), plan, study)
    _assumptions(book.create_sheet("Assumptions"), plan, study)
    _ways(book.create_sheet("Ways"), plan, lines, len(found))
    if text is not None:
        plan_text.write(book.create_sheet(plan_text.TITLE), text)
    out = io.BytesIO()
    book.save(out)
    return out.getvalue()


def _not_held(study: Study) -> str:
    names = schedule.not_held(study)
    cases = ", ".join(f'"{name}"' for name in names)
    return f"Cases that give way have no numbers here, see the findings: {cases}." if names else ""


LOADS = (
    Column("No.", 5, "0"), Column("Load", 22), Column("At", 18), Column("Rating", 10), Column("Class", 11),
    Column("Case", 30), Column("Current (A)", 9, "0.00"), Column("Source (V)", 9, "0.000"),
    Column("Drop (V)", 9, "0.000"), Column("Load (V)", 9, "0.000"), Column("Nominal (V)", 9, "0.0"),
    Column("Drop (%)", 8, "0.00"), Column("Limit (%)", 8, "0.0", input=True), Column("Least (V)", 8, "0.00"),
    Column("Most (V)", 8, "0.00"), Column("Mark", 14),
)  # fmt: skip
_L = letters(LOADS)


def _loads(sheet: Worksheet, plan: str, lines: Sequence[LoadLine], note: str) -> None:
    about = (
        "Drop at the plan's conductor temperature in the case where it is largest, summed over the sheet Ways; the "
        "findings hold limits at the rulebook's own temperature."
    )
    ways = sum(len(line.way) for line in lines)
    rows = [_load_row(line, number, ways) for number, line in enumerate(lines, start=1)]
    fill(sheet, Header(plan, "loads", about, note), LOADS, rows)
    mark_where(sheet, len(LOADS), len(rows), f'LEFT(${_L["Mark"]}{FIRST},1)="!"')


def _load_row(line: LoadLine, number: int, ways: int) -> list[Any]:
    solved = line.drop_V is not None and line.volts is not None
    row, last = FIRST + number - 1, FIRST + max(ways, 1) - 1
    keys, drops = (f"Ways!${_W[heading]}${FIRST}:${_W[heading]}${last}" for heading in ("Load no.", "Drop (V)"))

    def of(formula: str) -> Formula | None:
        return live(_L, row, formula) if solved else None

    low = '&IF([Load (V)]<[Least (V)],"! LOW","")' if line.min_volts is not None else ""
    high = '&IF([Load (V)]>[Most (V)],"! HIGH","")' if line.max_volts is not None else ""
    return [
        number, line.name, line.at, line.rating, line.drop_class, line.case, line.amps,
        line.volts + line.drop_V if line.volts is not None and line.drop_V is not None else None,
        of(f"=SUMIFS({drops},{keys},[No.])"), of("=[Source (V)]-[Drop (V)]"), line.nominal_V,
        of("=100*[Drop (V)]/[Nominal (V)]"), line.limit_percent, line.min_volts, line.max_volts,
        of(f'=IF([Drop (%)]>[Limit (%)]+0.000001,"{OVER} ","")' + low + high)
        or ("off" if line.case == schedule.OFF else "no answer"),
    ]  # fmt: skip


WAYS = (
    Column("Load no.", 7, "0"), Column("Load", 24), Column("Conductor or device", 26), Column("Cable no.", 8, "0"),
    Column("Kind", 10), Column("Pole", 9), Column("Current (A)", 11, "0.000"),
    Column("Resistance over that on Cables", 13, "0.0000"), Column("Resistance (mΩ)", 12, "0.000"),
    Column("Drop (V)", 11, "0.0000"),
)  # fmt: skip
_W = letters(WAYS)


def _ways(sheet: Worksheet, plan: str, lines: Sequence[LoadLine], cables: int) -> None:
    about = "What each load's drop is made of, in its worst case, at the plan's conductor temperature."
    rows: list[list[Any]] = []
    for number, line in enumerate(lines, start=1):
        for part in line.way:
            row = FIRST + len(rows)
            ohm: Any = _run_ohm(part.pole, row, cables) if part.run >= 0 else 1000 * part.ohm
            drop: Any = live(_W, row, "=[Current (A)]*[Resistance (mΩ)]/1000")
            rows.append([
                number, part.load, part.name, part.run + 1 or None, part.kind, part.pole, part.amps,
                part.warmth if part.run >= 0 else None, None if part.kind == "diode" else ohm,
                part.drop_V if part.kind == "diode" else drop,
            ])  # fmt: skip
    fill(sheet, Header(plan, "ways", about, HELD), WAYS, rows)


def _run_ohm(pole: str, row: int, cables: int) -> Formula:
    """A run's resistance from the sheet Cables, its cable part at the temperature of the load's own case."""
    word, bond = ("Feed", "") if pole == "feed" else ("Return", ", bond")
    headings = f"{word} in all (mΩ)", f"{word} joints, protection{bond} (mΩ)"
    whole, fixed = (of_number("[Cable no.]", heading, cables) for heading in headings)
    return live(_W, row, f"=[Resistance over that on Cables]*({whole}-{fixed})+{fixed}")


PROTECTION = (
    Column("No.", 5, "0"), Column("Label", 8), Column("Run", 24), Column("At", 18), Column("End", 7), Column("Pole", 8),
    Column("Type", 20), Column("Rating (A)", 9, "0.0", input=True), Column("From the end (m)", 9, "0.00"),
    Column("From the end (ft)", 9, "0.0"), Column("Largest current (A)", 10, "0.00"), Column("Used (%)", 8, "0"),
    Column("Ampacity of the cable (A)", 11, "0.0"), Column("Rating over ampacity (%)", 11, "0"),
    Column("Highest fault (A)", 9, "0"), Column("Interrupts (A)", 9, "0"), Column("Least fault (A)", 9, "0"),
    Column("Opens within (s)", 9, "0.00"), Column("Cable stands (s)", 9, "0.00"), Column("Mark", 17),
)  # fmt: skip
_P = letters(PROTECTION)


def _protection(sheet: Worksheet, plan: str, guards: Sequence[ProtectionLine], note: str) -> None:
    about = (
        "Every fuse and breaker, with the largest current through it and the least ampacity of its cable over all "
        "cases, and the fault currents of bolted shorts: the highest at the device, the least at the far end that is "
        "worst off, with the time to open and the time the cable stands. The findings judge whole sections of cable by "
        "the rulebook, with their working."
    )
    rows = [_protection_row(line, number) for number, line in enumerate(guards, start=1)]
    fill(sheet, Header(plan, "protection", about, note), PROTECTION, rows)
    mark_where(sheet, len(PROTECTION), len(rows), f'LEFT(${_P["Mark"]}{FIRST},1)="!"')


def _protection_row(line: ProtectionLine, number: int) -> list[Any]:
    run, one = line.run, line.protection

    def of(formula: str, wanted: bool) -> Formula | None:
        return live(_P, FIRST + number - 1, formula) if wanted else None

    carries, rated, fault = line.amps is not None, bool(line.ampacity_A), line.faults
    clears = fault.highest_A is not None and fault.interrupts_A is not None
    opens = fault.opens_s if fault.opens_s is not None and math.isfinite(fault.opens_s) else None
    marks = [f'IF([Largest current (A)]>[Rating (A)],"{OVER} ","")'] if carries else []
    marks += ['IF([Rating (A)]>[Ampacity of the cable (A)],"! above cable","")'] if line.ampacity_A is not None else []
    marks += ['IF([Highest fault (A)]>[Interrupts (A)],"! INTERRUPTS","")'] if clears else []
    return [
        number, run.label or "", run.name, run.from_point if one.end == "from" else run.to_point, one.end, one.pole,
        one.type, one.rating.si, one.distance.si if one.distance else None,
        of(f"=[From the end (m)]/{FOOT_M}", one.distance is not None), line.amps,
        of("=100*[Largest current (A)]/[Rating (A)]", carries), line.ampacity_A,
        of("=100*[Rating (A)]/[Ampacity of the cable (A)]", rated),
        fault.highest_A, fault.interrupts_A, fault.lowest_A, opens, fault.allowed_s,
        of("=" + "&".join(marks), bool(marks)) or "no answer",
    ]  # fmt: skip


FINDINGS = (
    Column("Severity", 11), Column("Rule", 22), Column("Subject", 20), Column("Case", 22), Column("Message", 46),
    Column("Value", 9, "0.000"), Column("Limit", 9, "0.000"), Column("Unit", 7), Column("Remedy", 36),
    Column("Basis", 34), Column("Working", 62),
)  # fmt: skip


def _findings(sheet: Worksheet, plan: str, study: Study) -> None:
    about = "What the checks found, worst first. A plan without findings is not a proof that it is safe."
    rows = [
        [
            SEVERITIES[one.severity], one.rule, one.subject, one.case or "", one.message, one.value, one.limit,
            pretty(one.unit or ""), one.remedy or "", one.basis, "\n".join(one.working),
        ]
        for one in study.findings
    ]  # fmt: skip
    fill(sheet, Header(plan, "findings", about), FINDINGS, rows)
    mark_where(sheet, len(FINDINGS), len(rows), f'$A{FIRST}="{SEVERITIES["fail"]}"')


def _assumptions(sheet: Worksheet, plan: str, study: Study) -> None:
    book, info = study.rulebook, study.plan.plan
    not_held = _not_held(study)
    colours = cable_kinds.default_colours(book.name)
    rows = [
        ["Caution", CAUTION],
        ["Caution", "Fuse every cable at its source, work with the bank disconnected, and cover its terminals."],
        ["Caution", f"Colours where the plan states none: {colours[0]} feed, {colours[1]} return ({colours[2]}; "
                    "provisional). Change them to what your code asks for."],
        ["Caution", "~ marks the nearest gauge, which may be thinner. In its place take the next thicker one, or "
                    "change the size in the plan and check again."],
        *([["Caution", not_held]] if not_held else []),
        ["While you edit", f"{HELD} Sizes are not live: their resistances come from the plan."],
        ["While you edit", "The cable part of a resistance follows the length; joints, protection and bonds stay."],
        ["Plan", f"{info.name}; nominal {info.nominal}; conductor temperature: {info.conductor_temperature}"],
        ["Rulebook", f"{book.name}: {book.title}, {book.edition}"],
        ["Rulebook", " ".join(book.text.split())],
        *(["Taken as given", line] for line in study.assumptions),
        *(["Notes of the plan", line] for line in info.notes.splitlines() if line.strip()),
    ]  # fmt: skip
    fill(sheet, Header(plan, "assumptions and cautions", "What the numbers rest on."),
         (Column("About", 20), Column("Text", 120)), rows)  # fmt: skip
