"""The days of a plan as plain rows and sentences, for the terminal and for the page alike, and as CSV."""

import csv
import io

from farvolt.day_results import DaysStudy, Spell, series
from farvolt.units import number
from farvolt_app.shown import Cells
from farvolt_app.textsafe import csv_text


def answer(study: DaysStudy) -> list[str]:
    """What happened, in sentences."""
    found = [_served(study)]
    for one in study.banks:
        found.append(
            f'"{one.bank}": from {_percent(one.first_charge)} to {_percent(one.last_charge)} of charge, at the lowest '
            f"{_percent(one.lowest_charge)}; {number(one.hours_below)} h below {_percent(study.low_charge)}; "
            f"{number(one.cycles)} full cycles; deepest discharge {_percent(one.deepest_discharge)}."
        )
        if one.empty_hours:
            found.append(f'"{one.bank}" was empty for {number(one.empty_hours)} h.')
        if one.cold_hours:
            found.append(f'"{one.bank}" was too cold to be charged for {number(one.cold_hours)} h.')
    if study.longest_unserved is not None:
        found.append(f"The longest time with something not served {_spell(study.longest_unserved)}.")
    if study.longest_below is not None:
        found.append(f"The longest time below {_percent(study.low_charge)} {_spell(study.longest_below)}.")
    return found


def _served(study: DaysStudy) -> str:
    missing = [one for one in study.loads if one.unserved_Wh > 0]
    if not missing:
        return "Every load is served whenever it is asked for."
    worst = max(missing, key=lambda one: one.unserved_Wh)
    wanted = sum(one.wanted_Wh for one in study.loads)
    return (
        f"Not served: {number(study.unserved_Wh)} Wh of {number(wanted)} Wh, of {len(missing)} loads; most of "
        f'"{worst.load}", {number(worst.unserved_Wh)} Wh in {number(worst.off_hours)} h.'
    )


def _percent(share: float) -> str:
    return f"{number(100 * share)} %"


def _spell(spell: Spell) -> str:
    length = f"{number(spell.hours)} h" if spell.hours < 48 else f"{number(spell.hours / 24)} days"
    return f"began on {spell.start:%Y-%m-%d at %H:%M} and lasted {length}"


def load_rows(study: DaysStudy) -> list[Cells]:
    """Each load, those that missed most first."""
    return [
        {
            "Load": one.load,
            "Wanted (Wh)": one.wanted_Wh,
            "Drawn (Wh)": one.drawn_Wh,
            "Not served (Wh)": one.unserved_Wh,
            "Off (h)": one.off_hours,
            "Cut out (times)": one.times_off,
            "Lowest (V)": one.lowest_V,
        }
        for one in sorted(study.loads, key=lambda one: (-one.unserved_Wh, -one.wanted_Wh))
    ]


def bank_rows(study: DaysStudy) -> list[Cells]:
    """Each bank."""
    return [
        {
            "Bank": one.bank,
            "Charge at start (%)": 100 * one.first_charge,
            "At the end (%)": 100 * one.last_charge,
            "Lowest (%)": 100 * one.lowest_charge,
            f"Below {_percent(study.low_charge)} (h)": one.hours_below,
            "Empty (h)": one.empty_hours,
            "Full cycles": one.cycles,
            "Most given (A)": one.most_given_A,
            "Most taken (A)": one.most_taken_A,
        }
        for one in study.banks
    ]


def source_rows(study: DaysStudy) -> list[Cells]:
    """What each source delivered."""
    return [{"Source": name, "Delivered (Wh)": Wh} for name, Wh in study.sources]


def account_rows(study: DaysStudy) -> list[Cells]:
    """The account of energy: what came in, and where it went."""
    one = study.account
    return [
        {"Energy": name, "Wh": Wh}
        for name, Wh in (
            ("Came in from chargers and sun", one.given_Wh),
            ("Drawn by loads", one.loads_Wh),
            ("Lost in cables, protection, devices", one.cables_Wh),
            ("Lost in converters", one.converters_Wh),
            ("Lost in the banks' resistance", one.banks_Wh),
            ("Charged but not kept", one.unkept_Wh),
            ("Self-discharge", one.self_discharge_Wh),
            ("Gained by the banks", one.stored_Wh),
        )
    ]


def certificate(study: DaysStudy) -> str:
    """How exact the numbers are."""
    sums = study.outcome.sums
    told = f"{sums.solutions} solutions of the network; no node out of balance by more than {sums.imbalance_A:.1e} A"
    if sums.uncertified:
        told += f", but {sums.uncertified} of them miss their tolerance"
    return f"{told}. Energy: what came in is what went out, to {study.account.error:.1e} of all that flowed."


def to_csv(study: DaysStudy) -> str:
    """Every step as CSV, full precision; the time is when it begins, on the clock of the site."""
    columns = series(study)
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(["time", *map(csv_text, columns)])
    values = [one.tolist() for one in columns.values()]
    course = study.outcome.course
    for step, row in enumerate(zip(*values, strict=True)):
        cells = ["" if value != value else repr(value) for value in row]
        writer.writerow([course.clock(step).isoformat(timespec="minutes"), *cells])
    return out.getvalue()
