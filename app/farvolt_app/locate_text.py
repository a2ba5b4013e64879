"""What readings say of an installation, as tables on a terminal and as one object for machines."""

import math
from collections.abc import Iterator
from typing import Any

from rich.console import Console
from rich.text import Text

from farvolt.causes import Cause
from farvolt.evidence import Hypothesis
from farvolt.locate import ALARM, Located, Suspect
from farvolt.next_reading import NextReading
from farvolt.output import OUTPUT
from farvolt.plan import Battery, Run
from farvolt.suspect_words import amount, together
from farvolt.units import number
from farvolt_app.report_text import open_console, table
from farvolt_app.shown import CAUTION

SUSPECTS_SHOWN = 12
REMARKED = 4
_UNSEEN_SHOWN = 6

BASIS = (
    "Probabilities count sound, one fault and two faults as 50, 40 and 10 of 100 before anything is read, each place "
    "alike; the meter's error and the plan's tolerances as the spread of sound parts. Probable does not mean proven: "
    "look before parts are bought."
)


def show(located: Located, nexts: tuple[NextReading, ...]) -> None:
    """Print what the readings say, the suspects, and what to measure next."""
    out = open_console()
    out.print(Text(located.measured.installation.plan.plan.name, style="bold"))
    for line in verdict(located):
        out.print(Text(line))
    if not located.fits:
        table(out, "Suspects", SUSPECT_HEADINGS, suspect_rows(located))
        for line in remarks(located):
            out.print(Text(f"- {line}"))
    table(out, "Readings beside the plan", READING_HEADINGS, reading_rows(located))
    for one in located.measured.unfed:
        out.print(Text(f"{one.place}: nothing is fed {one.where} in the state of its set; not used"))
    if located.fits:
        _print_all(out, "What these readings would not show", unseen_lines(located))
    _print_all(out, "What to measure next", next_lines(located, nexts))
    out.print(Text(f"\n{BASIS} {CAUTION}"))


def _print_all(out: Console, title: str, lines: list[str]) -> None:
    out.print(Text(f"\n{title}", style="bold"))
    for line in lines:
        out.print(Text(f"- {line}"))


def verdict(located: Located) -> list[str]:
    """What the readings say, in a few lines."""
    if located.fits:
        return [f"All readings fit the plan, within the meter's accuracy and the plan's tolerances "
                f"(sound: {percent(located.sound_probability)})."]  # fmt: skip
    lines = [f"The readings do not fit the plan (sound: {percent(located.sound_probability)})."]
    evidence, first = located.evidence, located.explanations[0]
    lines.append(f"First suspect: {together(evidence, first)} ({percent(first.probability)}).")
    if located.others and not located.unique:
        others = "; ".join(together(evidence, one) for one in located.others[:SUSPECTS_SHOWN])
        lines.append(f"These readings cannot tell it apart from: {others}.")
    if not located.explained:
        lines.append(
            "Not even this explains what was read: more than two things are not as planned, or a reading is wrong, or "
            "the state of loads and sources was another."
        )
    return lines


SUSPECT_HEADINGS = (
    ("suspect", False), ("probability", True), ("not as planned by", True), ("watts now", True),
    ("watts at most", True), ("in case", False), ("not told apart", False),
)  # fmt: skip


def suspect_rows(located: Located) -> list[tuple[str, ...]]:
    """Suspects by falling probability."""
    return [
        (
            one.cause.words, percent(one.probability), amount(one.cause, one.value), _watts(one.watts),
            _watts(one.most_watts), one.worst_case or ("as read" if one.watts is not None else ""),
            "yes" if one.named and not located.unique else "",
        )
        for one in located.suspects[:SUSPECTS_SHOWN]
    ]  # fmt: skip


def remarks(located: Located) -> list[str]:
    """Of the suspects that explain the readings: what lies there, how dangerous it is, what else it may be."""
    return [line for one in located.named[:REMARKED] for line in _remarks(located, one)]


def _remarks(located: Located, one: Suspect) -> Iterator[str]:
    cause = one.cause
    if cause.parts:
        yield f"{cause.words}: no point of the plan lies between {', '.join(cause.parts)}; go along it with the meter"
    if one.danger and one.most_watts is not None:
        yield f"{cause.words}: {_watts(one.most_watts)} W there, {one.danger} (common practice, provisional)"
    hint = _hint(located, cause, one.value)
    if hint:
        yield hint


def _hint(located: Located, cause: Cause, value: float) -> str:
    plan = located.measured.installation.plan
    if cause.kind == "cable":
        return f"{cause.words}: {_as_cable(plan.runs[cause.at], value)}"
    if cause.kind == "source volts" and isinstance(plan.sources[cause.at], Battery) and value < 0:
        return f"{cause.words}: a battery lower in charge than the state of these readings says"
    return ""


def _as_cable(run: Run, value: float) -> str:
    """What length, or what size, a cable of another resistance would have."""
    from farvolt.conductors import made_sizes

    length = f"as if it were {number(run.length.si * (1 + value))} m long instead of {run.length}"
    if run.size is None:
        return length
    sizes = [one for one in made_sizes(run.size.system) if one.name != run.size.name]
    close = [one for one in sizes if abs(run.size.area_mm2 / one.area_mm2 / (1 + value) - 1) < 0.15]
    return length + (f", or of {close[0].name} instead of {run.size.name}" if close else "")


READING_HEADINGS = (
    ("row", True), ("reading", False), ("read", True), ("meter ±", True), ("by the plan", True),
    ("off by", True), ("in deviations", True), ("state", False),
)  # fmt: skip


def reading_rows(located: Located) -> list[tuple[str, ...]]:
    """Each reading beside what the plan says."""
    return [
        (
            str(one.reading.row), one.reading.where, _value(one.reading.value, one.reading.unit),
            _value(one.reading.limit, one.reading.unit), _value(one.planned, one.reading.unit),
            _value(one.reading.value - one.planned, one.reading.unit), number(one.deviations, 2), one.state,
        )
        for one in located.compared
    ]  # fmt: skip


def unseen_lines(located: Located) -> list[str]:
    """Where a bad joint could be that these readings would not show."""
    never = [one for one in located.unseen if math.isinf(one.ohm)]
    seen = [one for one in located.unseen if not math.isinf(one.ohm)]
    lines = [f"a bad joint of up to {_mohm(one.ohm)} in: {one.cause.words}" for one in seen[:_UNSEEN_SHOWN]]
    if never:
        names = ", ".join(one.cause.words for one in never[:_UNSEEN_SHOWN])
        more = f" and {len(never) - _UNSEEN_SHOWN} more" if len(never) > _UNSEEN_SHOWN else ""
        lines.append(f"any bad joint in: {names}{more}")
    return lines


def next_lines(located: Located, nexts: tuple[NextReading, ...]) -> list[str]:
    """The readings that tell the suspects apart best, with what each would show."""
    if not nexts:
        return ["no further reading between points of the plan tells more; go along the suspect with the meter"]
    lines = []
    for one in nexts:
        shown = "; ".join(
            f"{together(located.evidence, hypothesis) if hypothesis.causes else 'all as planned'}: {_value(volts, 'V')}"
            for hypothesis, volts in one.expected
        )
        lines.append(f'{one.where}, in state "{one.state.case.name}": {shown}')
    return lines


def percent(share: float) -> str:
    """A probability; never a certainty."""
    if share > 0.99:
        return "over 99 %"
    return f"{100 * share:.0f} %" if share >= 0.01 else "under 1 %"


def _value(value: float, unit: str) -> str:
    """Volts or amps for reading, small voltages in millivolts."""
    if unit == "V" and abs(value) < 1:
        return f"{1000 * value:.1f} mV"
    return f"{value:.3f} {unit}"


def _mohm(ohm: float) -> str:
    return f"{number(1000 * ohm, 2)} mohm"


def _watts(value: float | None) -> str:
    return "" if value is None else number(value, 2)


# For machines --------------------------------------------------------------------------------------------------------


def as_object(located: Located, nexts: tuple[NextReading, ...]) -> dict[str, Any]:
    """The object that `farvolt locate PLAN READINGS --json` prints: V, A, ohm, shares; null for no answer."""
    return {
        "output": OUTPUT,
        "plan": located.measured.installation.plan.plan.name,
        "fits": located.fits,
        "unique": located.unique,
        "explained": located.explained,
        "sound_probability": located.sound_probability,
        "alarm_below": ALARM,
        "suspects": [_suspect_object(one) for one in located.suspects] if not located.fits else [],
        "explanations": [_explanation(located, one) for one in located.explanations] if not located.fits else [],
        "readings": [
            {
                "row": one.reading.row, "where": one.reading.where, "unit": one.reading.unit,
                "value": one.reading.value, "limit": one.reading.limit, "planned": one.planned,
                "spread": one.spread, "deviations": one.deviations, "state": one.state,
            }
            for one in located.compared
        ],
        "not_used": [{"row": one.row, "where": one.where} for one in located.measured.unfed],
        "unseen": [
            {"place": one.cause.words, "ohm": one.ohm if math.isfinite(one.ohm) else None} for one in located.unseen
        ],
        "next": [_next_object(located, one) for one in nexts],
    }  # fmt: skip


def _suspect_object(one: Suspect) -> dict[str, Any]:
    cause = one.cause
    return {
        "kind": cause.kind, "name": cause.name, "pole": cause.pole or None, "words": cause.words,
        "parts": list(cause.parts), "value": one.value, "unit": _unit(cause), "probability": one.probability,
        "not_told_apart": one.named, "watts": one.watts, "most_watts": one.most_watts,
        "worst_case": one.worst_case or None, "danger": one.danger or None,
    }  # fmt: skip


def _unit(cause: Cause) -> str:
    return "ohm" if cause.kind in ("joint", "source resistance") else "share"


def _explanation(located: Located, one: Hypothesis) -> dict[str, Any]:
    causes = [located.evidence.causes[index] for index in one.causes]
    return {
        "probability": one.probability,
        "causes": [
            {"kind": cause.kind, "words": cause.words, "value": value, "unit": _unit(cause)}
            for cause, value in zip(causes, one.values, strict=True)
        ],
    }


def _next_object(located: Located, one: NextReading) -> dict[str, Any]:
    poles = ("feed", "return")
    return {
        "from": one.start[0], "from_pole": poles[one.start[1]], "to": one.end[0], "to_pole": poles[one.end[1]],
        "where": one.where, "state": one.state.case.name, "tells_apart": one.worth, "planned_V": one.sound_V,
        "expected": [
            {"suspect": together(located.evidence, hypothesis) if hypothesis.causes else None, "volts": volts}
            for hypothesis, volts in one.expected
        ],
    }  # fmt: skip
