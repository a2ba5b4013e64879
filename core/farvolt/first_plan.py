"""A complete first plan from a few answers: voltage, where, bank, charging, appliances with their distances.

Cables get the sizes that the trade's method gives run by run (`interim`), protection what passes every check of it
(`protection_choice`). Everything is written out, so that each figure can be changed.
"""

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import lru_cache

from farvolt import planfile, units
from farvolt.checks import run_some
from farvolt.conductors import Size
from farvolt.context import Context
from farvolt.errors import FarvoltError, QuantityError
from farvolt.integrity import nearest, shorten
from farvolt.plan import Plan
from farvolt.protection_choice import RULES, Offer, Place, choices
from farvolt.rulebook import load as load_rulebook
from farvolt.study import build_context
from farvolt.tables import read
from farvolt.units import number
from farvolt_data import ROOT

VOLTAGES = (12, 24, 48)

BLOCK_V = {"flooded": 12.0, "agm": 12.0, "gel": 12.0, "lfp": 12.8, "nmc": 14.6}
"""Nominal voltage of the block that 12 V of a system stand for (common practice)."""

CHARGE_V = {"flooded": 14.4, "agm": 14.4, "gel": 14.1, "lfp": 14.2, "nmc": 16.6}
"""Usual charging voltage for 12 V of a system (common practice; the battery's data sheet goes before it)."""

HIGHEST_SHARE = 1.25
"""Highest voltage that appliances usually stand, over the system's nominal: 15 V for 12 V (common practice)."""


@dataclass(frozen=True, slots=True)
class Appliance:
    """A common appliance with typical figures."""

    name: str
    power_W: float
    hours_per_day: float
    duty: float
    drop_class: str
    surge_times: float
    surge_s: float
    continuous: bool
    least_volts_share: float

    @property
    def inverter(self) -> bool:
        """Whether its power is what it delivers."""
        return self.name.startswith("inverter")


@dataclass(frozen=True, slots=True)
class Wanted:
    """An appliance of the plan to be: how far its cable goes from the fuse block, and its power if not the typical."""

    appliance: str
    distance: str
    power: str = ""
    name: str = ""


@dataclass(frozen=True, slots=True)
class Answers:
    """What a first plan is made from. Lengths and currents are quantities as text: "4 m", "15 ft", "30 A"."""

    name: str
    nominal_V: int
    rulebook: str
    chemistry: str
    capacity: str
    bank_distance: str
    """From the battery to the fuse block."""
    loads: tuple[Wanted, ...]
    short_circuit: str = ""
    """Short-circuit current of the battery from its data sheet; without it fuses cannot be verified."""
    alternator: str = ""
    mains: str = ""
    solar: str = ""
    """Power of the modules: "200 W"."""
    charging_distance: str = "2 m"
    """From each charger to the fuse block."""


@lru_cache(maxsize=1)
def appliances() -> dict[str, Appliance]:
    """The common appliances, by name."""
    rows = read(ROOT / "loads" / "appliances.csv")
    return {
        row["appliance"]: Appliance(
            row["appliance"], float(row["power_W"]), float(row["hours_per_day"]), float(row["duty_percent"]) / 100,
            row["class"], float(row["surge_times"]), float(row["surge_seconds"]), row["continuous"] == "yes",
            float(row["least_volts_share"]),
        )
        for row in rows
    }  # fmt: skip


def appliance(name: str) -> Appliance:
    """A common appliance. Raises FarvoltError with the nearest name."""
    found = appliances().get(name)
    if found is None:
        near = nearest(name, appliances())
        hint = f"; did you mean {near}?" if near else ""
        raise FarvoltError(f'no appliance is called "{shorten(name)}"; accepted: {", ".join(appliances())}{hint}')
    return found


def first_plan(answers: Answers) -> str:
    """The text of a first plan, with cables and protection chosen. Raises FarvoltError for answers of no sense."""
    context = _context(_text(answers, {}, {}))
    sizes, offers = dict(context.interim), dict[str, Offer]()
    for _ in range(_ROUNDS):
        _choose(context, sizes, offers)
        text = _text(answers, sizes, offers)
        context = _context(text)
        if all(one.severity != "fail" for one in run_some(context, RULES)):
            break
    return text


_ROUNDS = 3
"""How often protection is chosen, at most: chargers share otherwise when the cables have become thicker."""


def _context(text: str) -> Context:
    plan = planfile.parse(text, "the answers")
    return build_context(plan, load_rulebook(plan.plan.rulebook, None))


def _choose(context: Context, sizes: dict[str, Size], offers: dict[str, Offer]) -> None:
    """Put in the protection that passes with the currents of a plan, and the cables that it wants."""
    runs = context.plan.runs
    for one in choices(context, [Place(index, _end(run.name)) for index, run in enumerate(runs)]):
        if one.offer is not None:
            name = runs[one.place.run].name
            offers[name] = one.offer
            if one.offer.size is not None:
                sizes[name] = one.offer.size


def _end(run: str) -> str:
    """Where a run of a first plan has its protection: a charger's at the fuse block, all others at their start."""
    return "to" if run.endswith(" charging") else "from"


def _text(answers: Answers, sizes: dict[str, Size], offers: dict[str, Offer]) -> str:
    lines = [
        "# A first plan, made from a few answers. Powers, hours and voltages of the appliances are typical figures:",
        "# put in those of the rating plates, and measure the cables' ways. The battery's short_circuit is in its data",
        "# sheet: what the fuses have to interrupt follows from it.",
        "format = 1",
        "",
        "[plan]",
        *_fields({"name": answers.name, "nominal": f"{answers.nominal_V} V", "rulebook": answers.rulebook}),
        *_source_lines(answers),
    ]
    for name, start, end, length in _runs(answers):
        fields: dict[str, object] = {"name": name, "from": start, "to": end, "length": length}
        fields["size"] = sizes[name].name if name in sizes else "free"
        lines += ["", "[[runs]]", *_fields(fields), *_protection_line(name, offers.get(name))]
    switch = {"name": "main switch", "kind": "switch", "from": "switch stud", "to": "fuse block"}
    lines += ["", "[[devices]]", *_fields(switch)]
    for name, one, wanted in _named(answers):
        lines += ["", "[[loads]]", *_load_lines(answers, name, one, wanted)]
    return "\n".join(lines) + "\n"


def _source_lines(answers: Answers) -> Iterator[str]:
    blocks = answers.nominal_V / 12
    if answers.chemistry not in BLOCK_V:
        raise FarvoltError(f'"{shorten(answers.chemistry)}" is no chemistry; accepted: {", ".join(BLOCK_V)}')
    own, charging = BLOCK_V[answers.chemistry] * blocks, CHARGE_V[answers.chemistry] * blocks
    bank = {"name": "bank", "kind": "battery", "at": "bank", "chemistry": answers.chemistry,
            "nominal": f"{number(own)} V", "capacity": answers.capacity}  # fmt: skip
    if answers.short_circuit:
        bank["short_circuit"] = answers.short_circuit
    yield from ("", "[[sources]]", *_fields(bank))
    for kind, amps in (("alternator", answers.alternator), ("mains", answers.mains)):
        if amps:
            charger = {"name": f"{kind} charger", "kind": "charger", "at": f"{kind} charger",
                       "volts": f"{number(charging)} V", "amps": amps, "self_limiting": True}  # fmt: skip
            yield from ("", "[[sources]]", *_fields(charger))
    if answers.solar:
        try:
            amps_A = units.parse(answers.solar, "power").si / answers.nominal_V
        except QuantityError as error:
            given = f'solar "{shorten(answers.solar)}"'
            raise FarvoltError(f"{given}: {error.problem}; accepted: {error.accepted}") from None
        solar = {"name": "solar", "kind": "solar", "at": "solar controller", "power": answers.solar,
                 "ceiling": f"{number(charging)} V", "amps": f"{number(max(1.0, 1.1 * amps_A))} A"}  # fmt: skip
        yield from ("", "[[sources]]", *_fields(solar))


def _runs(answers: Answers) -> Iterator[tuple[str, str, str, str]]:
    """(name, from, to, length) of every run."""
    yield "bank main", "bank", "switch stud", answers.bank_distance
    for kind, given in (("alternator", answers.alternator), ("mains", answers.mains)):
        if given:
            yield f"{kind} charging", f"{kind} charger", "fuse block", answers.charging_distance
    if answers.solar:
        yield "solar charging", "solar controller", "fuse block", answers.charging_distance
    for name, _, wanted in _named(answers):
        yield f"{name} feed", "fuse block", name, wanted.distance


def _named(answers: Answers) -> Iterator[tuple[str, Appliance, Wanted]]:
    """The appliances, each under a name of its own."""
    used: set[str] = {"bank", "fuse block", "switch stud", "solar controller", "alternator charger", "mains charger"}
    for wanted in answers.loads:
        base = wanted.name or wanted.appliance
        name, count = base, 1
        while name in used:
            count += 1
            name = f"{base} {count}"
        used.add(name)
        yield name, appliance(wanted.appliance), wanted


def _load_lines(answers: Answers, name: str, one: Appliance, wanted: Wanted) -> Iterator[str]:
    book = load_rulebook(answers.rulebook, None)
    fields: dict[str, object] = {"name": name, "at": name, "power": wanted.power or f"{number(one.power_W)} W"}
    if one.inverter:
        fields |= {"efficiency": "90 %", "standby": "5 W"}
    if one.drop_class in book.classes:
        fields["class"] = one.drop_class
    least, most = one.least_volts_share * answers.nominal_V, HIGHEST_SHARE * answers.nominal_V
    fields |= {"min_volts": f"{number(least)} V", "max_volts": f"{number(most)} V"}
    fields["hours_per_day"] = one.hours_per_day
    if one.duty < 1:
        fields["duty"] = f"{number(100 * one.duty)} %"
    if one.continuous:
        fields["continuous"] = True
    yield from _fields(fields)
    if one.surge_times > 1:
        yield f"surge = {{ times = {one.surge_times:g}, seconds = {one.surge_s:g} }}"


def _protection_line(run: str, offer: Offer | None) -> Iterator[str]:
    if offer is not None:
        field = "protection_to" if _end(run) == "to" else "protection"
        rating = f"{number(offer.rating_A, 6)} A"
        yield f'{field} = {{ type = "{offer.kind.name}", rating = "{rating}", distance = "0.1 m" }}'


def _fields(values: Mapping[str, object]) -> list[str]:
    return [f"{key} = {json.dumps(value, ensure_ascii=False)}" for key, value in values.items()]


__all__ = ["Answers", "Appliance", "Plan", "Wanted", "appliance", "appliances", "first_plan"]
