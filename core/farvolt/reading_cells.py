"""One row of a table of readings: the number and its unit, what the meter may be off by, and where it was taken."""

import re
from collections.abc import Mapping

from farvolt import units
from farvolt.errors import Fault, QuantityError
from farvolt.integrity import nearest, shorten
from farvolt.meter import percent_and_digits
from farvolt.network import FEED, RETURN
from farvolt.plan import CHASSIS, Plan
from farvolt.readings import ACCURACY, POLE_WORDS, POLES, Pin, Reading

_NUMBER = re.compile(r"\s*[+\-−]?(\d*)\.?(\d*)([eE][+-]?\d+)?")


def _unit_of(text: str) -> str:
    number = _NUMBER.match(text)
    return text[number.end() :].strip() if number else text.strip()


def _last_place(text: str) -> float:
    """What the last digit of a number as written stands for: 0.01 of "12.40"."""
    number = _NUMBER.match(text)
    return float(10.0 ** -len(number.group(2))) if number else 1.0


def digits(table: list[tuple[int, dict[str, str]]]) -> dict[tuple[str, str, int], float]:
    """The last place shown, by column, unit and order of magnitude: the finest written there, since a spreadsheet
    leaves the noughts at the end of a number out."""
    finest: dict[tuple[str, str, int], float] = {}
    for _, row in table:
        for column in ("volts", "amps"):
            text = row.get(column, "")
            if text:
                key = (column, _unit_of(text), _magnitude(text))
                finest[key] = min(finest.get(key, 1e9), _last_place(text))
    return finest


def _magnitude(text: str) -> int:
    number = _NUMBER.match(text)
    return len(number.group(1).lstrip("0")) if number else 0


def reading(
    number: int, row: Mapping[str, str], plan: Plan, digits: Mapping[tuple[str, str, int], float], faults: list[Fault]
) -> Reading | None:
    """The reading of a row; None where it has none, or is wrong, with the faults added."""
    before = len(faults)
    place = f"row {number}"
    columns = [column for column in ("volts", "amps") if row.get(column)]
    if len(columns) != 1:
        if columns or any(row.get(name) for name in ("from", "to", "run")):
            problem = "has both volts and amps" if columns else "has no reading"
            faults.append(Fault(place, "", "", problem, "one of volts, amps"))
        return None
    column = columns[0]
    text = row[column].replace("−", "-")
    value, scale = _value(place, column, text, faults)
    step = _resolution(place, row.get("resolution", ""), column, faults)
    if step is None:
        step = digits[column, _unit_of(text), _magnitude(text)] * scale
    limit = _limit(place, row.get("accuracy") or ACCURACY, value, step, faults)
    if column == "volts":
        start, end = _ends(place, row, plan, faults)
        made = Reading(number, value, limit, row[column], start, end)
    else:
        run, pole = _conductor(place, row, plan, faults)
        made = Reading(number, value, limit, row[column], run=run, pole=pole)
    return made if len(faults) == before else None


_DIMENSION = {"volts": ("voltage", "V"), "amps": ("current", "A")}


def _value(place: str, column: str, text: str, faults: list[Fault]) -> tuple[float, float]:
    """A reading and what its unit is worth in V or A; a bare number is in the unit of its column."""
    dimension, base = _DIMENSION[column]
    unit = _unit_of(text)
    try:
        return units.parse(text if unit else f"{text} {base}", dimension).si, units.DIMENSIONS[dimension].get(unit, 1.0)
    except QuantityError as error:
        faults.append(Fault(place, column, f'"{shorten(text)}"', str(error), error.accepted, error.nearest))
        return 0.0, 1.0


def _resolution(place: str, text: str, column: str, faults: list[Fault]) -> float | None:
    if not text:
        return None
    found, _ = _value(place, column, text, faults)
    if found < 0:
        faults.append(Fault(place, "resolution", f'"{text}"', "is below zero", '"0.01 V"'))
    return found


def _limit(place: str, text: str, value: float, step: float, faults: list[Fault]) -> float:
    """What a reading may be off by: percent of it and digits of `step` each."""
    found = percent_and_digits(text)
    if found is None or (found == (0.0, 0.0) and step > 0):
        faults.append(Fault(place, "accuracy", f'"{shorten(text)}"', "is no accuracy of a meter", f'"{ACCURACY}"'))
        return 1.0
    percent, digits = found
    return max(percent / 100 * abs(value) + digits * step, 1e-9)


def _ends(place: str, row: Mapping[str, str], plan: Plan, faults: list[Fault]) -> tuple[Pin | None, Pin | None]:
    """The two nodes of a voltage; a point alone is read from its feed to its return."""
    for column in ("run", "pole"):
        if row.get(column):
            faults.append(Fault(place, column, f'"{row[column]}"', "a run is for a current", "from and to"))
    start = _pin(place, row, "from", FEED, plan, faults)
    if not row.get("to"):
        if start is not None and start[1] == RETURN and not row.get("to pole"):
            accepted = "the other end in to, or the feed in from"
            faults.append(Fault(place, "to", "", "is missing", accepted))
        return start, _pin(place, {**row, "to": row.get("from", "")}, "to", RETURN, plan, faults)
    end = _pin(place, row, "to", start[1] if start else FEED, plan, faults)
    if start is not None and start == end:
        faults.append(Fault(place, "to", f'"{row["to"]}"', "starts and ends at the same node", "another node"))
    return start, end


def _pin(
    place: str, row: Mapping[str, str], column: str, usual: int, plan: Plan, faults: list[Fault]
) -> Pin | None:
    point, pole_column = row.get(column, ""), f"{column} pole"
    known = [*plan.point_names, *([CHASSIS] if _has_chassis(plan) else [])]
    if point not in known:
        problem = "there is no such point in the plan" if point else "is missing"
        accepted = ", ".join(f'"{name}"' for name in known[:12]) + (", …" if len(known) > 12 else "")
        faults.append(Fault(place, column, f'"{shorten(point)}"' if point else "", problem, accepted,
                            nearest(point, known)))  # fmt: skip
        return None
    if point == CHASSIS:
        return CHASSIS, RETURN
    pole = _pole(place, pole_column, row.get(pole_column, ""), usual, faults)
    return None if pole is None else (point, pole)


def _has_chassis(plan: Plan) -> bool:
    return any(CHASSIS in join for join in plan.joins) or any(run.return_path == CHASSIS for run in plan.runs)


def _pole(place: str, column: str, text: str, usual: int, faults: list[Fault]) -> int | None:
    if not text:
        return usual
    if text.lower() not in POLES:
        faults.append(Fault(place, column, f'"{shorten(text)}"', "is not a pole", "feed, return",
                            nearest(text.lower(), POLES)))  # fmt: skip
        return None
    return POLES[text.lower()]


def _conductor(place: str, row: Mapping[str, str], plan: Plan, faults: list[Fault]) -> tuple[str, int]:
    """The run of a current, and which of its conductors the clamp was around."""
    for column in ("from", "to"):
        if row.get(column):
            faults.append(Fault(place, column, f'"{row[column]}"', "a current is read in a run", "run and pole"))
    given, names = row.get("run", ""), {run.name: run for run in plan.runs}
    names |= {run.label: run for run in plan.runs if run.label is not None}
    if given not in names:
        problem = "there is no such run in the plan" if given else "is missing"
        faults.append(Fault(place, "run", f'"{shorten(given)}"' if given else "", problem, "the name of a run",
                            nearest(given, names)))  # fmt: skip
        return "", FEED
    run = names[given]
    has = [FEED] if run.return_path == CHASSIS else [POLES[run.conducts]] if run.conducts != "both" else [FEED, RETURN]
    pole = _pole(place, "pole", row.get("pole", ""), has[0], faults)
    if pole is not None and pole not in has:
        faults.append(Fault(place, "pole", f'"{row["pole"]}"', f'run "{run.name}" has no such conductor',
                            POLE_WORDS[has[0]]))  # fmt: skip
    return run.name, has[0] if pole is None else pole
