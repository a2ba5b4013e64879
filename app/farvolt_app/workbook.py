"""The cable schedule as a live workbook: drops, totals and percentages are formulas on the sheets' own cells.

Currents are held while lengths are edited, which is right for small changes; the plan itself is solved again by
`farvolt check`. For the unchanged plan the recalculated values are the solver's.
"""

import io
from collections.abc import Callable
from typing import Any

from openpyxl import Workbook
from openpyxl.worksheet.worksheet import Worksheet

from farvolt.results import Study
from farvolt_app import schedule
from farvolt_app.schedule import Cable
from farvolt_app.sheets import HEADING_ROW, Column, Formula, fill, letters, mark_where, put
from farvolt_app.shown import CAUTION

_FIRST = HEADING_ROW + 1
_FEET = 0.3048
_HELD = "Currents are those of the case named and are held while you edit; run the check again for exact figures."
_OVER = "OVER"


def to_bytes(study: Study) -> bytes:
    """The whole workbook as a file's content."""
    book = Workbook()
    book.remove(book.active)
    found = schedule.cables(study)
    name = study.plan.plan.name
    _cables(book.create_sheet("Cables"), name, found)
    _loads(book.create_sheet("Loads"), name, study)
    _protection(book.create_sheet("Protection"), name, study)
    _shopping(book.create_sheet("Shopping"), name, study, found)
    _findings(book.create_sheet("Findings"), name, study)
    _assumptions(book.create_sheet("Assumptions"), name, study)
    _resistances(book.create_sheet("Resistances"), name, study, found)
    _ways(book.create_sheet("Ways"), name, study)
    out = io.BytesIO()
    book.save(out)
    return out.getvalue()


CABLES = (
    Column("Label", 7), Column("Run", 19), Column("From", 13), Column("To", 13),
    Column("Length one way (m)", 8, "0.00", input=True), Column("Length one way (ft)", 8, "0.0"),
    Column("All conductors (m)", 10, "0.00"), Column("Size", 11), Column("Area (mm²)", 8, "0.00"),
    Column("AWG (~ nearest)", 10), Column("Parallel", 8, "0", input=True), Column("Feed colour", 8, input=True),
    Column("Return colour", 8, input=True), Column("Insulation (°C)", 9, "0"), Column("Protection", 18),
    Column("Current (A)", 8, "0.00"), Column("Ampacity (A)", 9, "0.0"), Column("Used (%)", 7, "0"),
    Column("Drop (V)", 7, "0.000"), Column("Drop (%)", 7, "0.00"), Column("Loss (W)", 7, "0.00"), Column("Mark", 7),
)  # fmt: skip
_C = letters(CABLES)

RESISTANCES = (
    Column("Label", 7), Column("Run", 22), Column("Material", 12), Column("Case", 30),
    Column("Feed current (A)", 9, "0.00", input=True), Column("Return current (A)", 9, "0.00", input=True),
    Column("Nominal (V)", 9, "0.0"), Column("Feed cable (mΩ/m)", 10, "0.0000"),
    Column("Feed joints, protection (mΩ)", 12, "0.000"), Column("Feed in all (mΩ)", 10, "0.000"),
    Column("Return size", 10), Column("Return length (m)", 9, "0.00"), Column("Return cable (mΩ/m)", 10, "0.0000"),
    Column("Return joints, protection, bond (mΩ)", 13, "0.000"), Column("Return in all (mΩ)", 10, "0.000"),
)  # fmt: skip
_R = letters(RESISTANCES)


def _refs(row: int) -> tuple[Callable[[str], str], Callable[[str], str]]:
    """Cell references in one row of the cables sheet and of the resistances sheet, by heading."""
    return lambda heading: f"Cables!{_C[heading]}{row}", lambda heading: f"Resistances!{_R[heading]}{row}"


def _cables(sheet: Worksheet, name: str, found: list[Cable]) -> None:
    about = f"{_HELD} Yellow cells are meant to be changed."
    fill(sheet, name, about, CABLES, [_cable_row(cable, _FIRST + place) for place, cable in enumerate(found)])
    mark_where(sheet, len(CABLES), len(found), f'${_C["Mark"]}{_FIRST}="{_OVER}"')


def _cable_row(cable: Cable, row: int) -> list[Any]:
    c, r = _refs(row)
    run, solved = cable.run, cable.drop_V is not None
    size = cable.feed.size or cable.back.size
    feed_length = c("Length one way (m)") if cable.feed.length_m else "0"
    volts = "+".join(f"{r(f'{pole} current (A)')}*{r(f'{pole} in all (mΩ)')}/1000" for pole in ("Feed", "Return"))
    watts = "+".join(f"{r(f'{pole} current (A)')}^2*{r(f'{pole} in all (mΩ)')}/1000" for pole in ("Feed", "Return"))
    rated = solved and cable.ampacity_A
    return [
        run.label or "", run.name, run.from_point, run.to_point, run.length.si,
        Formula(f"={c('Length one way (m)')}/{_FEET}"),
        Formula(f"={c('Parallel')}*({feed_length}+{r('Return length (m)')})"),
        schedule.size_text(cable, size), size.area_mm2 if size else None, schedule.american_text(size),
        cable.parallel, cable.feed.colour if cable.feed.length_m else "",
        cable.back.colour if cable.back.length_m else "", cable.insulation_degC, cable.protection,
        Formula(f"=MAX({r('Feed current (A)')},{r('Return current (A)')})") if solved else None, cable.ampacity_A,
        Formula(f"=100*{c('Current (A)')}/{c('Ampacity (A)')}") if rated else None,
        Formula(f"={volts}") if solved else None,
        Formula(f"=100*{c('Drop (V)')}/{r('Nominal (V)')}") if solved else None,
        Formula(f"={watts}") if solved else None,
        Formula(f'=IF({c("Used (%)")}>100,"{_OVER}","")') if rated else "",
    ]  # fmt: skip


def _resistances(sheet: Worksheet, name: str, study: Study, found: list[Cable]) -> None:
    about = f"What each cable is solved as. Conductor temperature: {study.plan.plan.conductor_temperature}. {_HELD}"
    rows = [_resistance_row(cable, _FIRST + place) for place, cable in enumerate(found)]
    fill(sheet, name, about, RESISTANCES, rows)


def _resistance_row(cable: Cable, row: int) -> list[Any]:
    c, r = _refs(row)
    back_m = cable.back.length_m
    same = back_m == cable.run.length.si
    length, parallel = c("Length one way (m)"), c("Parallel")
    feed = f"={r('Feed cable (mΩ/m)')}*{length}/{parallel}+{r('Feed joints, protection (mΩ)')}"
    back = (
        f"={r('Return cable (mΩ/m)')}*{r('Return length (m)')}/{parallel}+{r('Return joints, protection, bond (mΩ)')}"
    )
    return [
        cable.run.label or "", cable.run.name, cable.run.material, cable.case, cable.feed.amps, cable.back.amps,
        cable.nominal_V, 1000 * cable.feed.ohm_per_m, 1000 * cable.feed.fixed_ohm, Formula(feed),
        schedule.size_text(cable, cable.back.size) if back_m else "",
        Formula(f"={length}") if same else back_m,
        1000 * cable.back.ohm_per_m, 1000 * cable.back.fixed_ohm, Formula(back),
    ]  # fmt: skip


WAYS = (
    Column("Load", 22), Column("Conductor or device", 24), Column("Kind", 9), Column("Pole", 8),
    Column("Current (A)", 10, "0.000"), Column("Resistance (mΩ)", 11, "0.000"), Column("Drop (V)", 10, "0.0000"),
)  # fmt: skip


def _ways(sheet: Worksheet, name: str, study: Study) -> None:
    about = f"What each load's drop is made of, in its worst case, at the plan's conductor temperature. {_HELD}"
    rows: list[list[Any]] = []
    for line in schedule.loads(study):
        for part in line.way:
            row = _FIRST + len(rows)
            cell = _R["Feed in all (mΩ)" if part.pole == "feed" else "Return in all (mΩ)"]
            ohm: Any = Formula(f"=Resistances!{cell}{_FIRST + part.run}") if part.kind == "run" else 1000 * part.ohm
            drop: Any = part.drop_V if part.kind == "diode" else Formula(f"=E{row}*F{row}/1000")
            rows.append([part.load, part.name, part.kind, part.pole, part.amps, ohm, drop])
    fill(sheet, name, about, WAYS, rows)


LOADS = (
    Column("Load", 22), Column("At", 16), Column("Rating", 10), Column("Class", 10), Column("Case", 26),
    Column("Current (A)", 9, "0.00"), Column("Source (V)", 9, "0.000"), Column("Drop (V)", 9, "0.000"),
    Column("Load (V)", 9, "0.000"), Column("Nominal (V)", 9, "0.0"), Column("Drop (%)", 8, "0.00"),
    Column("Limit (%)", 8, "0.0", input=True), Column("Mark", 8), Column("Least (V)", 8, "0.00"),
    Column("Most (V)", 8, "0.00"),
)  # fmt: skip
_L = letters(LOADS)


def _loads(sheet: Worksheet, name: str, study: Study) -> None:
    about = (
        "Drop at the plan's conductor temperature, summed over the sheet Ways; the findings hold limits at the "
        "rulebook's own temperature."
    )
    lines = schedule.loads(study)
    count = sum(len(line.way) for line in lines)
    rows = [_load_row(line, _FIRST + place, count) for place, line in enumerate(lines)]
    fill(sheet, name, about, LOADS, rows)
    mark_where(sheet, len(LOADS), len(rows), f'${_L["Mark"]}{_FIRST}="{_OVER}"')


def _load_row(line: schedule.LoadLine, row: int, ways: int) -> list[Any]:
    solved = line.drop_V is not None and line.volts is not None
    last = _FIRST + max(ways, 1) - 1
    # The sum runs over the rows whose load is exactly this one; SUMPRODUCT compares text without wildcards.
    total = f"=SUMPRODUCT((Ways!$A${_FIRST}:$A${last}=A{row})*Ways!$G${_FIRST}:$G${last})"
    source = line.volts + line.drop_V if line.volts is not None and line.drop_V is not None else None
    return [
        line.name, line.at, line.rating, line.drop_class, line.case, line.amps, source,
        Formula(total) if solved else None,
        Formula(f"={_L['Source (V)']}{row}-{_L['Drop (V)']}{row}") if solved else None,
        line.nominal_V,
        Formula(f"=100*{_L['Drop (V)']}{row}/{_L['Nominal (V)']}{row}") if solved else None,
        line.limit_percent,
        Formula(f'=IF({_L["Drop (%)"]}{row}>{_L["Limit (%)"]}{row},"{_OVER}","")') if solved else "",
        line.min_volts, line.max_volts,
    ]  # fmt: skip


PROTECTION = (
    Column("Label", 8), Column("Run", 22), Column("At", 16), Column("End", 7), Column("Pole", 8), Column("Type", 18),
    Column("Rating (A)", 9, "0.0", input=True), Column("From the end (m)", 9, "0.00"),
    Column("Largest current (A)", 10, "0.00"), Column("Used (%)", 8, "0"), Column("Ampacity (A)", 10, "0.0"),
    Column("Rating over ampacity (%)", 11, "0"),
)  # fmt: skip
_P = letters(PROTECTION)


def _protection(sheet: Worksheet, name: str, study: Study) -> None:
    lines = schedule.protections(study)
    about = "Every fuse and breaker, with the largest current through it. The findings judge whole sections of cable."
    rows = [_protection_row(line, _FIRST + place) for place, line in enumerate(lines)]
    fill(sheet, name, about, PROTECTION, rows)


def _protection_row(line: schedule.ProtectionLine, row: int) -> list[Any]:
    run, one = line.run, line.protection
    return [
        run.label or "", run.name, run.from_point if one.end == "from" else run.to_point, one.end, one.pole, one.type,
        one.rating.si, one.distance.si if one.distance else None, line.amps,
        Formula(f"=100*{_P['Largest current (A)']}{row}/{_P['Rating (A)']}{row}") if line.amps is not None else None,
        line.ampacity_A,
        Formula(f"=100*{_P['Rating (A)']}{row}/{_P['Ampacity (A)']}{row}") if line.ampacity_A else None,
    ]  # fmt: skip


SHOPPING = (
    Column("Item", 26), Column("Size or rating", 14), Column("Material or type", 20), Column("Insulation", 12),
    Column("Colour", 10), Column("Needed", 10, "0.00"), Column("With spare", 10, "0.0"), Column("Unit", 7),
    Column("With spare (ft)", 10, "0"), Column("Metal (kg)", 10, "0.000"),
)  # fmt: skip


def _shopping(sheet: Worksheet, name: str, study: Study, found: list[Cable]) -> None:
    kinds = schedule.purchases(found)
    last = _FIRST + max(len(found), 1) - 1
    rows = [_cable_total(kind, _FIRST + place, last) for place, kind in enumerate(kinds)]
    lines = schedule.protections(study)
    devices = sorted({(one.protection.type, one.protection.rating.si) for one in lines})
    count = _FIRST + max(len(lines), 1) - 1
    for kind, rating in devices:
        row = _FIRST + len(rows)
        total = (
            f"=SUMPRODUCT((Protection!${_P['Type']}${_FIRST}:${_P['Type']}${count}=C{row})"
            f"*(Protection!${_P['Rating (A)']}${_FIRST}:${_P['Rating (A)']}${count}={rating:.12g}))"
        )
        rows.append(
            [
                "fuse or breaker, with holder",
                f"{rating:g} A",
                kind,
                "",
                "",
                Formula(total),
                Formula(f"=F{row}"),
                "pieces",
                None,
                None,
            ]
        )
    about = "Totals of the cables sheet. Spare for cable:"
    fill(sheet, name, about, SHOPPING, rows)
    put(sheet["F2"], 0.1)
    sheet["F2"].number_format = "0 %"


def _cable_total(kind: tuple[str, str, str, str], row: int, last: int) -> list[Any]:
    """Length of one kind of cable: the feed conductors of that size and colour, and the return conductors."""
    size, material, insulation, colour = kind

    def column(sheet: str, letter: str) -> str:
        return f"{sheet}!${letter}${_FIRST}:${letter}${last}"

    def sized(cells: str) -> str:
        # Sizes taken for the time being read "6 mm2, to be chosen"; they are bought as 6 mm2.
        return f'(({cells}=B{row})+({cells}=B{row}&", to be chosen"))'

    length, parallel = column("Cables", _C["Length one way (m)"]), column("Cables", _C["Parallel"])
    same = (
        f'({column("Resistances", _R["Material"])}=C{row})*({column("Cables", _C["Insulation (°C)"])}&" degC"=D{row})'
    )
    feed = f"{sized(column('Cables', _C['Size']))}*({column('Cables', _C['Feed colour'])}=E{row})*{length}"
    back = (
        f"{sized(column('Resistances', _R['Return size']))}*({column('Cables', _C['Return colour'])}=E{row})"
        f"*{column('Resistances', _R['Return length (m)'])}"
    )
    total = f"=SUMPRODUCT({same}*{parallel}*({feed}+{back}))"
    return [
        "cable", size, material, insulation, colour, Formula(total), Formula(f"=F{row}*(1+$F$2)"), "m",
        Formula(f"=G{row}/{_FEET}"), Formula(f"=G{row}*{schedule.mass_kg_per_m(size, material):.9g}"),
    ]  # fmt: skip


FINDINGS = (
    Column("Severity", 8), Column("Rule", 20), Column("Subject", 16), Column("Case", 16), Column("Message", 40),
    Column("Value", 9, "0.000"), Column("Limit", 9, "0.000"), Column("Unit", 6), Column("Remedy", 30),
    Column("Basis", 26), Column("Working", 46),
)  # fmt: skip


def _findings(sheet: Worksheet, name: str, study: Study) -> None:
    about = "What the checks found, worst first. A plan without findings is not a proof that it is safe."
    rows = [
        [
            "FAIL" if one.severity == "fail" else one.severity, one.rule, one.subject, one.case or "", one.message,
            one.value, one.limit, one.unit or "", one.remedy or "", one.basis, "\n".join(one.working),
        ]
        for one in study.findings
    ]  # fmt: skip
    fill(sheet, name, about, FINDINGS, rows)


def _assumptions(sheet: Worksheet, name: str, study: Study) -> None:
    book, plan = study.rulebook, study.plan.plan
    rows = [
        ["Caution", CAUTION],
        ["Caution", "Fuse every cable at its source, work with the bank disconnected, and cover its terminals."],
        ["Caution", "Colours are a default from common practice; change them to what your code asks for."],
        ["Plan", f"{plan.name}; nominal {plan.nominal}"],
        ["Rulebook", f"{book.name}: {book.title}, {book.edition}"],
        ["Rulebook", " ".join(book.text.split())],
        *(["Taken as given", line] for line in study.assumptions),
        *(["Notes of the plan", line] for line in plan.notes.splitlines() if line.strip()),
    ]
    fill(sheet, name, "What the numbers rest on.", (Column("About", 18), Column("Text", 120)), rows)
