"""The bank of a plan as plain rows, for the terminal and for the page alike. Figures keep full precision."""

from farvolt.bank_study import BankStudy
from farvolt.energy import Budget
from farvolt.plan_types import DAY_MINUTES
from farvolt.units import number
from farvolt_app.shown import Cells


def times(spans: tuple[tuple[int, int], ...]) -> str:
    """Spans of a day as they are read: "18:00-23:30"."""
    if spans == ((0, DAY_MINUTES),):
        return "all day"
    return ", ".join(f"{a // 60:02}:{a % 60:02}-{b // 60:02}:{b % 60:02}" for a, b in spans)


def load_rows(budget: Budget) -> list[Cells]:
    """Each load in one type of day, those that take most first."""
    return [
        {
            "Load": one.load,
            "System (V)": one.nominal_V,
            "Power (W)": one.watts,
            "Hours": one.use.hours,
            "When": times(one.use.spans) or ("at any time" if one.use.stated else "not stated"),
            "Duty (%)": 100 * one.duty,
            "Lost, standby (Wh)": one.lost_Wh + one.standby_Wh,
            "Energy (Wh)": one.Wh,
            "Charge (Ah)": one.Ah,
            "At the bank (Wh)": one.bank_Wh,
        }
        for one in sorted(budget.loads, key=lambda one: -one.bank_Wh)
    ]


def converter_rows(budget: Budget) -> list[Cells]:
    """Each converter in one type of day."""
    return [
        {"Converter": one.converter, "Passed on (Wh)": one.delivered_Wh, "Lost (Wh)": one.lost_Wh,
         "Standby (Wh)": one.standby_Wh}
        for one in budget.converters
    ]  # fmt: skip


def system_rows(study: BankStudy) -> list[Cells]:
    """Each type of day and system: what is drawn there."""
    return [
        {"Day": day.day, "Fed by": one.name, "System (V)": one.nominal_V, "Loads (Wh)": one.loads_Wh,
         "Converters (Wh)": one.converters_Wh, "Energy (Wh)": one.Wh, "Charge (Ah)": one.Ah}
        for day in study.budgets
        for one in day.systems
    ]  # fmt: skip


def step_rows(study: BankStudy) -> list[Cells]:
    """Each step of the sizing."""
    steps = study.sizing.steps if study.sizing else ()
    return [{"Step": one.what, "Ah": one.value, "Working": one.working, "Basis": one.basis} for one in steps]


def charging_rows(study: BankStudy) -> list[Cells]:
    """Each type of day: what must go in, what can, and the array that would do."""
    days = study.charging.days if study.charging else ()
    return [
        {
            "Day": one.day,
            "Needed (Wh)": one.needed_Wh,
            "Can give (Wh)": one.gained_Wh,
            "Left (Wh)": one.gained_Wh - one.needed_Wh,
            "Array that covers it (W)": one.array_W,
            "Sources": "; ".join(f"{gain.source}: {gain.working}" for gain in one.gains) or "none runs",
        }
        for one in days
    ]


def feeder_rows(study: BankStudy) -> list[Cells]:
    """Each feeder with its demand in two columns."""
    return [
        {"Run": one.run, "Column A (A)": one.column_a_A, "Column B (A)": one.column_b_A,
         "Counted of B (A)": one.counted_b_A, "Demand (A)": one.amps}
        for one in study.demands
    ]  # fmt: skip


def answer(study: BankStudy) -> list[str]:
    """The bank in a few sentences."""
    sizing, charging = study.sizing, study.charging
    if sizing is None or charging is None:
        return ["The plan has no battery: there is no bank to size."]
    terms = sizing.terms
    found = [f'"{terms.battery.name}" should have {number(sizing.capacity_Ah)} Ah at its {number(terms.nominal_V)} V, '
             f'rated over {number(terms.rated_hours.middle)} h, for "{sizing.day}".']  # fmt: skip
    if sizing.built_Ah is not None and terms.block is not None:
        blocks = f"{terms.block.nominal}, {terms.block.capacity}"
        found.append(
            f"Built of blocks of {blocks}: {terms.series} in series, {sizing.strings} strings, "
            f"{terms.series * (sizing.strings or 0)} blocks, {number(sizing.built_Ah)} Ah."
        )
    if sizing.days is not None:
        found.append(f"The bank of the plan lasts {number(sizing.days)} such days at the end of its life.")
    if charging.worst is not None:
        array = number(charging.worst.array_W or 0.0)
        found.append(f'Beside the chargers, an array of {array} W covers "{charging.worst.day}" by itself.')
    limit = charging.limit.limit_A
    if limit is not None:
        span = f"{number(limit.low)} to " if limit.low != limit.high else ""
        found.append(f"All that charges gives up to {number(charging.limit.amps)} A at once; the bank takes {span}"
                     f"{number(limit.high)} A ({limit.basis}).")  # fmt: skip
    return found


def workings(study: BankStudy) -> list[tuple[str, tuple[str, ...]]]:
    """The workings that are not in a table, each under its title."""
    found: list[tuple[str, tuple[str, ...]]] = []
    if study.sizing is not None and study.sizing.days_working:
        found.append(("How long the bank of the plan lasts", study.sizing.days_working))
    for day in study.charging.days if study.charging else ():
        found.append((f'Charging on "{day.day}"', day.working))
    for one in study.charging.to_full if study.charging else ():
        found.append((f'Time to full with "{one.source}"', one.working))
    for air in study.air:
        found.append((f"Fresh air on {air.charging} charge (IEC 62485-2, from memory, provisional)", air.working))
    return found
