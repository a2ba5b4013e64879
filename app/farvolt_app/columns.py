"""The editor's tables: which fields each shows, under which heading, with which hint. Only words, no behaviour."""

from dataclasses import dataclass
from typing import Literal

from farvolt.conductors import MATERIALS, STRANDS
from farvolt.protection_types import protection_type_names

Kind = Literal["text", "count", "number", "flag", "list"]


@dataclass(frozen=True, slots=True)
class Column:
    """One field of an entry: its place in the file, its heading, and what to say about it."""

    path: tuple[str, ...]
    label: str
    hint: str
    kind: Kind = "text"
    choices: tuple[str, ...] = ()
    names_of: str = ""
    """The table whose names are choices (zones, routes, protection_types), or "classes" for those of the rulebook."""
    main: bool = True
    """Shown at once; the others only when asked for, or when one of them is filled in."""

    @property
    def id(self) -> str:
        """The field as a dotted name, such as `protection.rating`."""
        return ".".join(self.path)


@dataclass(frozen=True, slots=True)
class Sheet:
    """One table of the editor; of `sources` it shows those of one kind."""

    id: str
    title: str
    table: str
    hint: str
    columns: tuple[Column, ...]
    kind: str = ""


def _field(
    path: str,
    label: str,
    hint: str,
    kind: Kind = "text",
    *,
    choices: tuple[str, ...] = (),
    names_of: str = "",
    main: bool = True,
) -> Column:
    return Column(tuple(path.split(".")), label, hint, kind, choices, names_of, main)


def _more(
    path: str, label: str, hint: str, kind: Kind = "text", *, choices: tuple[str, ...] = (), names_of: str = ""
) -> Column:
    return _field(path, label, hint, kind, choices=choices, names_of=names_of, main=False)


_RATINGS = ("power", "current", "resistance")
_TAKE_OFFS = ("ends", "same end", "bar")
_PURPOSES = ("power", "cranking", "bond")

_NAME = _field("name", "Name", "What you call it; each needs its own name. References follow when you change it.")
_NOTES = _more("notes", "Notes", "For people; nothing is calculated from it.")
_FROM = _field("from", "From point", "The place where it starts, such as a busbar. A point exists by being named.")
_TO = _field("to", "To point", "The place where it ends. Runs that name the same point meet there.")
_AT = _field("at", "At point", "The place it is connected to, such as `main bus`.")
_OWN_NOMINAL = _more("nominal", "Nominal", "Nominal voltage, where it is not the plan's: 12 V.")
_COMPENSATED = _more("temperature_compensated", "Compensated",
                     "Its voltages follow the battery's temperature; they are set for 25 degC.", "flag")  # fmt: skip
_ZONE = _field("zone", "Zone", "The place whose temperature counts; zones are a table of their own.", names_of="zones")


def _protection(path: str, end: str, mark: str, *, main: bool) -> tuple[Column, ...]:
    where = f"fuse or breaker at the {end} end"
    types = protection_type_names()
    return (
        _field(f"{path}.type", f"Protection{mark}", f"Type of the {where}; empty: none.", choices=types,
               names_of="protection_types", main=main),
        _field(f"{path}.rating", f"Rated{mark}", f"Rated current of the {where}: 20 A.", main=main),
        _more(f"{path}.distance", f"Distance{mark}", f"How far from that end the {where} sits: 0.15 m."),
        _more(f"{path}.pole", f"Pole{mark}", f"The conductor that holds it ({where}).", choices=("feed", "return")),
        _more(f"{path}.volts", f"Voltage{mark}", f"Greatest voltage of the {where}, from its data sheet."),
        _more(f"{path}.interrupting", f"Interrupts{mark}", f"Largest fault current the {where} clears: 2 kA."),
    )


RUNS = Sheet(
    "runs",
    "Cable runs",
    "runs",
    "One row is one cable from point to point, feed and return together; its length is one way.",
    (
        _field("label", "Label", "The mark on the cable itself, such as W07."),
        _NAME,
        _FROM,
        _TO,
        _field("length", "Length", "One way, along the cable's path: 4.5 m or 15 ft."),
        _field("size", "Size", "Size with its system: 6 mm2, 10 AWG, 10 SAE; `free` while not chosen."),
        *_protection("protection", "from", "", main=True),
        _field("route", "Route", "The loom or conduit it runs in; routes are a table of their own.", names_of="routes"),
        _ZONE,
        _more("material", "Material", "Metal of the conductor; copper unless stated.", choices=MATERIALS),
        _more("strand", "Strand", "Fine (flexible), coarse (stranded) or one wire (solid).", choices=STRANDS),
        _more("parallel", "Parallel", "How many equal cables lie side by side as one: 1.", "count"),
        _more("carries", "Carries", "Both conductors, or only one of them.", choices=("both", "feed", "return")),
        _more("return", "Return", "`chassis` where the metal body is the return.", choices=("same", "chassis")),
        _more("return.size", "Return size", "Size of the return conductor, if it differs: 10 mm2."),
        _more("return.length", "Return length", "Length of the return conductor, if it differs: 3 m."),
        *_protection("protection_to", "to", " (to end)", main=False),
        _more("insulation", "Insulation", "Temperature rating of the insulation: 105 degC."),
        _more("sheathed", "Sheathed", "Whether a sheath, loom or conduit covers it.", "flag"),
        _more("bundled", "Bundled", "How many current-carrying conductors lie together.", "count"),
        _more("joints", "Joints", "Number of crimps and screws in it.", "count"),
        _more("joint_resistance", "Joint resistance", "Resistance of each joint: 0.2 mohm."),
        _more("resistance", "Measured resistance", "Feed and return together, if you measured it: 12 mohm."),
        _more("resistance_temperature", "Measured at", "Temperature of that measurement: 20 degC."),
        _more("purpose", "Purpose", "Cranking and bond have rules of their own.", choices=_PURPOSES),
        _more("colour", "Colour", "Colour of the insulation, for the cable schedule."),
        _NOTES,
    ),
)  # fmt: skip

LOADS = Sheet(
    "loads",
    "Loads",
    "loads",
    "One row is one consumer. Give it one rating: power, current or resistance.",
    (
        _NAME,
        _AT,
        _field("power", "Power", "Rated power: 60 W. Give one of power, current, resistance."),
        _field("current", "Current", "Rated current: 5 A, if its data sheet gives that instead of power."),
        _more("resistance", "Resistance", "For heaters and filament lamps: 2.4 ohm."),
        _field("min_volts", "Lowest volts", "Lowest voltage at which it works: 10.5 V."),
        _field("max_volts", "Highest volts", "Highest voltage it stands: 15 V."),
        _field("class", "Class", "Sets how much drop the rulebook allows on its way.", names_of="classes"),
        _field("hours_per_day", "Hours a day", "How long it is on in a day: 10.", "number"),
        _more("rated_volts", "Rated at", "Voltage of the rating, if not the plan's: 12 V."),
        _more("behaves", "Behaves as", "What stays constant as volts fall.", choices=_RATINGS),
        _more("duty", "Duty", "Share of its hours in which it draws: 40 %."),
        _more("schedule", "Schedule", "Times of day, with commas between: 18:00-23:30.", "list"),
        _more("efficiency", "Efficiency", "Of an inverter, whose power is then what it delivers: 90 %."),
        _more("standby", "Standby", "What an inverter draws doing nothing: 8 W."),
        _more("inverter_of", "One with charger", "The charger that is one apparatus with this inverter."),
        _more("max_protection", "Largest fuse", "Largest fuse its maker allows: 15 A."),
        _more("cut_out", "Cuts out below", "Voltage at which it switches itself off: 10.4 V."),
        _more("recovery", "Comes back above", "Voltage at which it switches on again: 11.7 V."),
        _more("surge.current", "Starting current", "Short larger current at start: 18 A."),
        _more("surge.resistance", "Starting resistance", "Or its resistance at start: 0.5 ohm."),
        _more("surge.times", "Starting times", "Or how many times the rating it draws at start: 3.", "number"),
        _more("surge.seconds", "Starting seconds", "How long the start lasts: 0.5.", "number"),
        _more("continuous", "Continuous", "On for three hours or more at a time.", "flag"),
        _NOTES,
    ),
)  # fmt: skip

BATTERIES = Sheet(
    "batteries",
    "Batteries",
    "sources",
    "One row is one battery bank: blocks in series make a string, strings side by side make the bank.",
    (
        _NAME,
        _AT,
        _field("chemistry", "Chemistry", "lfp: lithium iron phosphate; nmc: other lithium; the rest are lead.",
               choices=("flooded", "agm", "gel", "lfp", "nmc")),
        _field("nominal", "Nominal", "Nominal voltage of a string: 12.8 V."),
        _field("capacity", "Capacity", "Capacity of one string: 200 Ah."),
        _field("strings", "Strings", "Equal strings in parallel: 1.", "count"),
        _field("charge", "Charge", "State of charge, unless a case says otherwise: 80 %."),
        _field("resistance", "Resistance", "Internal resistance of one string, from the data sheet: 4 mohm."),
        _field("short_circuit", "Short circuit", "Short-circuit current of one string, from its maker: 2500 A."),
        _field("max_discharge", "Most discharge", "Greatest discharge current of one string: 200 A."),
        _field("max_charge", "Most charge", "Greatest charging current of one string: 100 A."),
        _more("aged_times", "Aged times", "How many times its resistance it has when old: 1.6.", "number"),
        _more("emf", "Rest voltage", "Open-circuit voltage, instead of the chemistry's curve: 13.2 V."),
        _more("take_off", "Take-off", "Where the main cables leave parallel strings.", choices=_TAKE_OFFS),
        _more("link.length", "Link length", "Length of the cable between strings: 0.3 m."),
        _more("link.size", "Link size", "Size of the cable between strings: 50 mm2."),
        _more("capacity_hours", "Rated hours", "Hours in which its capacity is rated to be drawn: 20.", "number"),
        _more("peukert", "Peukert exponent", "From the data sheet, if not typical of the chemistry: 1.2.", "number"),
        _more("efficiency", "Efficiency", "Energy out over energy in, there and back: 85 %."),
        _more("self_discharge", "Self-discharge", "What it loses in a month at 20 degC: 3 %."),
        _more("least_charge", "Least charge", "State of charge below which it is not to be taken: 50 %."),
        _more("min_charge_temperature", "Coldest charging", "Below which it must not be charged: 0 degC."),
        _NOTES,
    ),
    "battery",
)  # fmt: skip

CHARGERS = Sheet(
    "chargers",
    "Chargers",
    "sources",
    "One row is one charger (alternator, mains): it holds its voltage up to its current limit.",
    (
        _NAME,
        _AT,
        _field("volts", "Volts", "Charging voltage it is set to: 14.4 V."),
        _field("amps", "Current limit", "Greatest current it delivers: 30 A."),
        _field("self_limiting", "Limits itself", "Its output stays within its rating even in a short circuit.", "flag"),
        _field("hours_per_day", "Hours a day", "How long it runs in a day: driven, or hooked up: 2.", "number"),
        _more("schedule", "Schedule", "Times of day at which it runs, with commas between: 18:00-07:00.", "list"),
        _more("hot_amps", "Hot output", "What an alternator still gives when it is hot: 22 A."),
        _more("float_volts", "Float volts", "What it falls back to when the battery is full: 13.5 V."),
        _COMPENSATED,
        _more("resistance", "Droop", "Output resistance; 0.1 % of the voltage at rated current unless stated."),
        _OWN_NOMINAL,
        _NOTES,
    ),
    "charger",
)

SOLAR = Sheet(
    "solar",
    "Solar",
    "sources",
    "One row is one solar controller with its modules: power up to a voltage ceiling.",
    (
        _NAME,
        _AT,
        _field("power", "Power", "Rated power of the modules together: 200 W."),
        _field("ceiling", "Ceiling", "Charging voltage above which the controller holds back: 14.4 V."),
        _field("amps", "Current limit", "Greatest current of the controller: 20 A."),
        _field("tilt", "Tilt", "Of the modules from level: 30 deg."),
        _field("azimuth", "Azimuth", "Where the modules face, clockwise from north: 180 deg is south."),
        _more("performance_ratio", "Performance ratio", "What dirt, heat and mismatch leave of the power: 75 %."),
        _more("float_volts", "Float volts", "What it falls back to when the battery is full: 13.5 V."),
        _COMPENSATED,
        _more("efficiency", "Efficiency", "Of the controller, on what its array gives: 97 %."),
        _more("max_input", "Highest input", "Highest voltage that the controller's input stands: 75 V."),
        _more("from", "Array arrives at", "Point of the controller's input, at the end of the array's runs."),
        _field(
            "array.at", "Array at", "Point of the modules, to put their own runs in the plan: roof box.", main=False
        ),
        _more("array.modules", "Modules", "How many modules.", "count"),
        _more("array.series", "In series", "How many of them in series.", "count"),
        _more("array.voc", "Voc", "Open-circuit voltage of one module: 24 V."),
        _more("array.isc", "Isc", "Short-circuit current of one module: 5.5 A."),
        _more("array.vmp", "Vmp", "Voltage of one module at full power: 20 V."),
        _more("array.imp", "Imp", "Current of one module at full power: 5 A."),
        _more("array.voc_rise", "Voc rise", "Rise of Voc for each degC below 25 degC: 0.3 %."),
        _more("array.power_fall", "Power fall", "Fall of the power for each degC above 25 degC: 0.4 %."),
        _more("array.max_fuse", "Largest fuse", "Largest series fuse that the modules' maker allows: 15 A."),
        _OWN_NOMINAL,
        _NOTES,
    ),
    "solar",
)

CONVERTERS = Sheet(
    "converters",
    "Converters",
    "sources",
    "One row is one DC converter: it draws at one point and delivers another voltage at another point.",
    (
        _NAME,
        _field("from", "Draws at", "The point that feeds it: main bus."),
        _field("at", "Delivers at", "The point that it feeds: radio bus."),
        _field("nominal", "Nominal", "Nominal voltage of what it feeds: 12 V."),
        _field("volts", "Volts", "Output voltage: 13.8 V."),
        _field("amps", "Current limit", "Greatest output current: 10 A."),
        _field("efficiency", "Efficiency", "Share of the input that comes out: 90 %."),
        _field("standby", "Standby", "What it draws doing nothing: 1 W."),
        _field("isolated", "Isolated", "No connection between the two returns inside it.", "flag"),
        _field(
            "resistance", "Droop", "Output resistance; 0.1 % of the voltage at rated current unless stated.", main=False
        ),
        _field(
            "return_bond", "Return bond", "Resistance joining the returns, if it is not isolated: 1 mohm.", main=False
        ),
        _NOTES,
    ),
    "converter",
)

DEVICES = Sheet(
    "devices",
    "Devices",
    "devices",
    "What sits in line between two points: switches, shunts, relays, diodes, connectors.",
    (
        _NAME,
        _field("kind", "Kind", "What it is.", choices=("switch", "selector", "relay", "shunt", "diode", "connector")),
        _FROM,
        _TO,
        _field("pole", "Pole", "Which conductor it sits in.", choices=("feed", "return", "both")),
        _field("resistance", "Resistance", "Between its terminals: 0.3 mohm."),
        _field("continuous", "Current rating", "Greatest continuous current: 150 A."),
        _field("state", "State", "Unless a case says otherwise.", choices=("closed", "open")),
        _more("volts", "Voltage rating", "Greatest voltage: 48 V."),
        _more("drop", "Forward drop", "Of a diode: 0.5 V."),
        _NOTES,
    ),
)

ZONES = Sheet(
    "zones",
    "Zones",
    "zones",
    "One row is one place with a temperature of its own. A warm place lets a cable carry less.",
    (
        _NAME,
        _field("ambient", "Ambient", "Highest air temperature to plan for: 30 degC or 86 degF."),
        _field("engine_space", "Engine space", "Rulebooks for boats allow less current there.", "flag"),
    ),
)

ROUTES = Sheet(
    "routes",
    "Routes",
    "routes",
    "One row is one loom, conduit or channel that runs share. Cables laid together warm each other.",
    (
        _NAME,
        _ZONE,
        _field("sheathed", "Sheathed", "Cables in it are covered along their way.", "flag"),
        _field("conductors", "Conductors", "Current-carrying conductors laid together, if not to be counted.", "count"),
    ),
)

POINTS = Sheet(
    "points",
    "Points",
    "points",
    "A point exists by being named in another table; list it here only to say more about it.",
    (
        _NAME,
        _field(
            "kind", "Kind", "What it is.", choices=("busbar", "fuse block", "splice", "stud", "terminals", "battery")
        ),
        _ZONE,
        _field("rating", "Rating", "Greatest current: 150 A."),
        _field("stud", "Stud", "Stud or screw size, for the lugs to buy: M8."),
        _more("resistance", "Resistance", "Of the bar itself, from end to end: 0.1 mohm."),
        _more("largest_size", "Largest cable", "Largest conductor that its terminals take: 70 mm2."),
        _NOTES,
    ),
)

SHEETS = (RUNS, LOADS, BATTERIES, CHARGERS, SOLAR, CONVERTERS, DEVICES, ZONES, ROUTES, POINTS)
"""All tables but the cases, in the order of the editor."""

SITE = (
    _field("latitude", "Latitude", "North of the equator; south is negative: 55.2 deg."),
    _field("longitude", "Longitude", "East of Greenwich; west is negative: -3.5 deg."),
    _field("time_zone", "Time zone", "By its name: Europe/Oslo."),
    _field("albedo", "Albedo", "Share of light that the ground throws back; 20 % unless stated."),
)
"""The settings of the table `site`; its monthly clearness is a list, left to the text."""

BANK = (
    _field("autonomy", "Days of autonomy", "Days that the bank carries the loads alone: 2.", "number"),
    _field("depth_of_discharge", "Depth of discharge", "At the end of those days; typical unless stated: 50 %."),
    _field("daily_depth_of_discharge", "Daily depth", "Depth in one day, where its maker states one: 20 %."),
    _field("ageing", "Ageing", "Capacity when new over that at the end of its life; 1.25 unless stated.", "number"),
    _field("margin", "Margin", "For what is not foreseen; 1.1 unless stated.", "number"),
    _field("coldest", "Coldest bank", "Lowest temperature of the battery itself: 5 degC."),
    _field("design_day", "Design day", "Type of day it is sized for; the one that takes most unless stated.",
           names_of="days"),
    _field("block.nominal", "Block", "Nominal voltage of the block to build it of: 6 V."),
    _field("block.capacity", "Block capacity", "Capacity of that block: 225 Ah."),
)  # fmt: skip
"""The settings of the table `bank`; a block's discharge table is left to the text."""
