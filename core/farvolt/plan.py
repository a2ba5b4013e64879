"""The plan: what the file says, validated field by field, immutable, and ignorant of solving.

Each class is one table of format 1. What concerns several entries at once is in `integrity`; reading a file,
lines and messages are in `planfile`. Quantities keep the text as written (`units.Quantity`).
"""

from functools import cached_property
from typing import Annotated, Any, Literal

from pydantic import Field, field_validator, model_validator

from farvolt import units
from farvolt.plan_energy import Bank as Bank
from farvolt.plan_energy import Block as Block
from farvolt.plan_energy import DayType as DayType
from farvolt.plan_energy import DischargeRate as DischargeRate
from farvolt.plan_energy import Site as Site
from farvolt.plan_protection import OpeningTime as OpeningTime
from farvolt.plan_protection import OwnProtection
from farvolt.plan_protection import Protection as Protection
from farvolt.plan_types import (
    AnyResistance,
    Bearing,
    CableSize,
    Charge,
    ConductorTemperature,
    Count,
    Current,
    DaySpan,
    DischargeHours,
    Efficiency,
    Entry,
    Exponent,
    Factor,
    Flag,
    Hours,
    Length,
    Multiple,
    Name,
    Power,
    Rating,
    Reserve,
    Resistance,
    Seconds,
    Share,
    StatedSize,
    Temperature,
    Text,
    Tilt,
    Voltage,
    WholeNumber,
    near,
    refusal,
    shares,
)
from farvolt.protection_types import ProtectionType

CHASSIS = "chassis"
"""The reserved point of one node: the metal body used as a return."""

FORMAT = 1

NAMED = ("zones", "routes", "protection_types")
"""Tables whose entries are called by their key."""

SINGLE = ("plan", "tolerances", "site", "bank")
"""Tables that are there once and have no entries."""


class PlanInfo(Entry):
    """Table `plan`: what holds for the whole plan."""

    name: Name = "Unnamed plan"
    nominal: Voltage
    rulebook: Name = "small-craft-iso"
    reference: Name | None = None
    conductor_temperature: ConductorTemperature = "rulebook"
    ambient: Temperature = units.parse("30 degC", "temperature")
    coldest: Temperature | None = None
    """Lowest ambient to be expected where solar modules stand: their open-circuit voltage is highest then."""
    chassis_bond: Resistance = units.parse("1 mohm", "resistance")
    notes: Text = ""


class Zone(Entry):
    """Table `zones`: a place with its own ambient temperature."""

    ambient: Temperature
    engine_space: Flag = False


class Route(Entry):
    """Table `routes`: a loom, conduit or channel that runs pass through."""

    zone: Name | None = None
    sheathed: Flag = False
    conductors: Count | None = None
    """Current-carrying conductors laid together, if not to be counted from the runs."""


class Point(Entry):
    """Table `points`: optional; says more about a place that runs name."""

    name: Name
    kind: Literal["busbar", "fuse block", "splice", "stud", "terminals", "battery"] = "terminals"
    zone: Name | None = None
    rating: Rating | None = None
    stud: Name | None = None
    resistance: AnyResistance | None = None
    """Of the bar itself, from end to end, in each pole."""
    largest_size: CableSize = None
    """Largest conductor that its terminals take."""
    notes: Text = ""


class LinkCable(Entry):
    """The cable between parallel strings of a battery."""

    length: Length
    size: StatedSize


class Battery(Entry):
    """A source of kind `battery`: EMF behind a resistance, in parallel strings."""

    name: Name
    kind: Literal["battery"]
    at: Name
    chemistry: Literal["flooded", "agm", "gel", "lfp", "nmc"] | None = None
    nominal: Voltage | None = None
    capacity: Charge | None = None
    strings: Count = 1
    take_off: Literal["ends", "same end", "bar"] = "ends"
    link: LinkCable | None = None
    charge: Share = units.parse("100 %", "share")
    emf: Voltage | None = None
    resistance: Resistance | None = None
    aged_times: Multiple | None = None
    """Resistance at the end of its life over that stated; typical of the chemistry unless stated."""
    short_circuit: Rating | None = None
    max_discharge: Rating | None = None
    max_charge: Rating | None = None
    capacity_hours: DischargeHours | None = None
    """Hours in which its capacity is rated to be drawn; 20 for lead-acid, 5 for lithium, unless stated."""
    peukert: Exponent | None = None
    """Exponent of Peukert's law; typical of the chemistry unless stated."""
    efficiency: Efficiency | None = None
    """Energy out over energy in; typical of the chemistry unless stated."""
    self_discharge: Share | None = None
    """In a month at 20 °C; typical of the chemistry unless stated."""
    least_charge: Reserve | None = None
    """State of charge below which it is not to be taken; typical of the chemistry unless stated."""
    min_charge_temperature: Temperature | None = None
    """Below which it must not be charged; as its chemistry asks unless stated."""
    notes: Text = ""

    @model_validator(mode="after")
    def _can_be_modelled(self) -> "Battery":
        if self.emf is None and self.chemistry is None:
            raise refusal('needs "chemistry", or "emf"', "flooded, agm, gel, lfp, nmc")
        if self.resistance is None and self.short_circuit is None and (self.chemistry is None or self.capacity is None):
            problem = 'needs "resistance", or "short_circuit", or "chemistry" with "capacity" to estimate it from'
            raise refusal(problem, 'such as resistance = "4 mohm"')
        return self


class Charger(Entry):
    """A source of kind `charger`: constant voltage, current-limited, one way (alternator, mains)."""

    name: Name
    kind: Literal["charger"]
    at: Name
    nominal: Voltage | None = None
    volts: Voltage
    amps: Rating
    resistance: Resistance | None = None
    """Droop of the output; 0.1 % of the voltage at rated current unless stated."""
    self_limiting: Flag = False
    hot_amps: Rating | None = None
    """What an alternator still gives when hot, at the speed it runs at."""
    float_volts: Voltage | None = None
    """What it falls back to when the battery is full; it stays at `volts` unless stated."""
    temperature_compensated: Flag = False
    """Whether its voltages, set for 25 °C, follow the temperature of the battery."""
    hours_per_day: Hours | None = None
    """Hours it runs: driven, or hooked up to the mains."""
    schedule: tuple[DaySpan, ...] = ()
    notes: Text = ""


class SolarArray(Entry):
    """The modules behind a solar controller."""

    at: Name
    modules: Count = 1
    series: Count = 1
    voc: Voltage
    isc: Rating
    vmp: Voltage
    imp: Rating
    voc_rise: Share | None = None
    """Rise of the open-circuit voltage for each kelvin below 25 °C, from the data sheet."""
    power_fall: Share | None = None
    """Fall of the power for each kelvin above 25 °C, from the data sheet."""
    max_fuse: Rating | None = None
    """Largest series fuse that the maker of the modules allows."""


class Solar(Entry):
    """A source of kind `solar`: what the controller delivers, a power up to a voltage ceiling."""

    name: Name
    kind: Literal["solar"]
    from_point: Name | None = Field(default=None, alias="from")
    """Where the controller takes in what its array gives; at the array itself unless stated."""
    at: Name
    nominal: Voltage | None = None
    power: Power
    ceiling: Voltage
    amps: Rating | None = None
    """Output limit of the controller; power over 40 % of nominal unless stated."""
    efficiency: Efficiency = units.parse("100 %", "share")
    """Of the controller, on what its array gives; `power` without an array is what it delivers."""
    max_input: Voltage | None = None
    """Highest voltage that the controller's input stands."""
    array: SolarArray | None = None
    tilt: Tilt | None = None
    """Of the modules from level."""
    azimuth: Bearing | None = None
    """Where the modules face, clockwise from north: south is 180 deg."""
    performance_ratio: Efficiency = units.parse("75 %", "share")
    """What dirt, heat, cables and mismatch leave of the rated power, for sizing."""
    float_volts: Voltage | None = None
    """What it falls back to when the battery is full; it stays at `ceiling` unless stated."""
    temperature_compensated: Flag = False
    """Whether its voltages, set for 25 °C, follow the temperature of the battery."""
    notes: Text = ""

    @model_validator(mode="after")
    def _array_fits(self) -> "Solar":
        if self.from_point is not None and self.array is None:
            raise refusal('"from" is where an array arrives, and there is none', "an array, or no from")
        if self.array is not None and self.array.modules % self.array.series:
            problem = f"{self.array.modules} modules do not make strings of {self.array.series}"
            raise refusal(problem, "a number of modules that is a multiple of series")
        return self

    @property
    def input_point(self) -> str:
        """Where the controller takes in what its array gives."""
        assert self.array is not None
        return self.from_point or self.array.at


class Converter(Entry):
    """A source of kind `converter`: draws at one point and delivers at another."""

    name: Name
    kind: Literal["converter"]
    from_point: Name = Field(alias="from")
    at: Name
    nominal: Voltage
    volts: Voltage
    amps: Rating
    resistance: Resistance | None = None
    efficiency: Efficiency
    standby: Power = units.parse("0 W", "power")
    isolated: Flag = False
    return_bond: Resistance = units.parse("1 mohm", "resistance")
    """Resistance that joins the two returns of a converter that is not isolated."""
    notes: Text = ""


Source = Annotated[Battery | Charger | Solar | Converter, Field(discriminator="kind")]


class ReturnConductor(Entry):
    """A return conductor that differs from the feed of its run."""

    size: CableSize = None
    length: Length | None = None


class Run(Entry):
    """A cable run between two points; `length` is one way."""

    name: Name
    label: Name | None = None
    from_point: Name = Field(alias="from")
    to_point: Name = Field(alias="to")
    length: Length
    size: CableSize = None
    material: Literal["copper", "tinned copper", "aluminium", "copper-clad aluminium"] = "copper"
    strand: Literal["flexible", "stranded", "solid"] | None = None
    parallel: Count = 1
    carries: Literal["both", "feed", "return"] | None = None
    return_path: Literal["same", "chassis"] | ReturnConductor = Field(default="same", alias="return")
    insulation: Temperature | None = None
    zone: Name | None = None
    route: Name | None = None
    sheathed: Flag | None = None
    bundled: Count | None = None
    resistance: Resistance | None = None
    resistance_temperature: Temperature = units.parse("20 degC", "temperature")
    joints: WholeNumber = 0
    joint_resistance: AnyResistance = units.parse("0.2 mohm", "resistance")
    purpose: Literal["power", "cranking", "bond"] = "power"
    protection: tuple[Protection, ...] = ()
    protection_to: Protection | None = None
    colour: Name | None = None
    notes: Text = ""

    @field_validator("return_path", mode="before")
    @classmethod
    def _return_shape(cls, value: Any) -> Any:
        # Validating here, not through the union, keeps an error's place free of the branches that were tried.
        if isinstance(value, dict):
            return ReturnConductor.model_validate(value)
        if value in ("same", "chassis") or isinstance(value, ReturnConductor):
            return value
        accepted = '"same", "chassis", or a table such as { size = "10 mm2", length = "3 m" }'
        raise refusal("is not a known choice", accepted, near(value, "same", "chassis"))

    @field_validator("protection", mode="before")
    @classmethod
    def _protection_shape(cls, value: Any) -> Any:
        if isinstance(value, dict | Protection):
            return (value,)
        if isinstance(value, list | tuple):
            return tuple(value)
        accepted = '{ type = "blade", rating = "20 A", distance = "0.15 m" }, or a list of such tables'
        raise refusal("is not a table", accepted)

    @cached_property
    def conducts(self) -> str:
        """Which conductors the run has: "both", "feed" or "return"; a run to the chassis has a return only."""
        if self.carries is not None:
            return self.carries
        return "return" if CHASSIS in (self.from_point, self.to_point) else "both"

    @model_validator(mode="after")
    def _protection_within(self) -> "Run":
        for one in self.protections:
            if one.distance is not None and one.distance.si > self.length.si:
                problem = f"protection {one.distance} along a run that is {self.length} long"
                raise refusal(problem, f"a distance of at most {self.length}")
        return self

    @cached_property
    def protections(self) -> tuple[Protection, ...]:
        """All protection of the run, whichever way the file writes it."""
        at_to = (self.protection_to.model_copy(update={"end": "to"}),) if self.protection_to else ()
        return self.protection + at_to


class Device(Entry):
    """What sits in line between two points; the pole it is not in passes straight through."""

    name: Name
    kind: Literal["switch", "selector", "relay", "shunt", "diode", "connector"]
    from_point: Name = Field(alias="from")
    to_point: Name = Field(alias="to")
    pole: Literal["feed", "return", "both"] = "feed"
    resistance: AnyResistance | None = None
    drop: Voltage | None = None
    """Forward drop of a diode."""
    continuous: Rating | None = None
    volts: Voltage | None = None
    state: Literal["closed", "open"] = "closed"
    notes: Text = ""


class Surge(Entry):
    """A short larger demand: exactly one of a current, a resistance or a multiple of the rated demand."""

    current: Rating | None = None
    resistance: Resistance | None = None
    times: Multiple | None = None
    seconds: Seconds | None = None

    @model_validator(mode="after")
    def _one_measure(self) -> "Surge":
        if sum(value is not None for value in (self.current, self.resistance, self.times)) != 1:
            raise refusal("needs exactly one of current, resistance, times", '{ current = "18 A" }')
        return self


class Load(Entry):
    """What consumes at a point: rated by exactly one of power, current or resistance."""

    name: Name
    at: Name
    power: Power | None = None
    current: Current | None = None
    resistance: Resistance | None = None
    rated_volts: Voltage | None = None
    behaves: Literal["power", "current", "resistance"] | None = None
    efficiency: Efficiency | None = None
    """Of an inverter: `power` is then what it delivers, and it draws power / efficiency + standby."""
    standby: Power | None = None
    inverter_of: Name | None = None
    """The charger that is one apparatus with this inverter: while that is on, this draws nothing."""
    drop_class: Name | None = Field(default=None, alias="class")
    min_volts: Voltage | None = None
    max_volts: Voltage | None = None
    cut_out: Voltage | None = None
    recovery: Voltage | None = None
    surge: Surge | None = None
    max_protection: Rating | None = None
    continuous: Flag = False
    hours_per_day: Hours | None = None
    schedule: tuple[DaySpan, ...] = ()
    duty: Share | None = None
    notes: Text = ""

    @model_validator(mode="after")
    def _one_rating(self) -> "Load":
        given = [name for name in ("power", "current", "resistance") if getattr(self, name) is not None]
        if len(given) != 1:
            problem = f"has {len(given)} ratings ({', '.join(given)})" if given else "has no rating"
            accepted = 'exactly one of power = "60 W", current = "5 A", resistance = "2.4 ohm"'
            raise refusal(problem, accepted)
        if self.power is None and (self.efficiency or self.standby):
            raise refusal("an inverter is rated by what it delivers", 'power = "1000 W" with efficiency and standby')
        for low, high in (("min_volts", "max_volts"), ("cut_out", "recovery")):
            below, above = getattr(self, low), getattr(self, high)
            if below is not None and above is not None and below.si > above.si:
                raise refusal(f"{low} is above {high}", f"{low} not above {high}")
        return self

    @property
    def rated_as(self) -> str:
        """Which of "power", "current", "resistance" the load is rated by."""
        return "power" if self.power is not None else "current" if self.current is not None else "resistance"


class SourceState(Entry):
    """A case's say on one source; a bare word in the file is its `state`."""

    state: Literal["on", "off", "full"] = "on"
    charge: Share | None = None
    emf: Voltage | None = None
    volts: Voltage | None = None
    amps: Rating | None = None
    irradiance: Share | None = None
    aged: Flag = False
    """A battery at the end of its life: its resistance is `aged_times` as high."""


class Case(Entry):
    """An operating condition to be checked."""

    name: Name
    ambient: Temperature | None = None
    loads: Literal["all", "none"] | dict[str, Factor] = "all"
    sources: dict[str, SourceState] = Field(default_factory=dict)
    devices: dict[str, Literal["closed", "open"]] = Field(default_factory=dict)
    surge: tuple[Name, ...] = ()
    """Loads that draw their surge in this case, instead of what they are rated at."""
    notes: Text = ""

    @field_validator("loads", mode="before")
    @classmethod
    def _loads_shape(cls, value: Any) -> Any:
        if isinstance(value, dict):
            return shares.validate_python(value)
        if value in ("all", "none"):
            return value
        accepted = '"all", "none", or { "name of a load" = 1.0 }'
        raise refusal("is not a known choice", accepted, near(value, "all", "none"))

    @field_validator("sources", mode="before")
    @classmethod
    def _bare_states(cls, value: Any) -> Any:
        if not isinstance(value, dict):
            return value
        return {name: {"state": state} if isinstance(state, str) else state for name, state in value.items()}

    def names(self, load: str) -> bool:
        """Whether the case has anything to say of `load`: one that is named at a share of 0 is switched on, idle."""
        return load in self.loads if isinstance(self.loads, dict) else self.loads == "all"

    def share(self, load: str) -> float:
        """Share of its rating at which `load` is on."""
        if isinstance(self.loads, dict):
            return self.loads.get(load, 0.0)
        return 1.0 if self.loads == "all" else 0.0


class Tolerances(Entry):
    """Table `tolerances`: how far what is built may differ from the plan, each way unless said otherwise."""

    length: Share = units.parse("10 %", "share")
    joints: Multiple = 5.0
    """Up to how many times its resistance a joint may come to have; the least is as planned."""
    source_volts: Share = units.parse("1 %", "share")
    loads: Share = units.parse("10 %", "share")
    coldest: Temperature | None = None
    """Least conductor temperature; the case's ambient unless stated."""
    hottest: Temperature | None = None
    """Greatest conductor temperature; each cable's insulation rating unless stated."""


class Plan(Entry):
    """The document: everything in one file."""

    format: Annotated[int, Field(strict=True)]
    plan: PlanInfo
    zones: dict[Name, Zone] = Field(default_factory=dict)
    routes: dict[Name, Route] = Field(default_factory=dict)
    protection_types: dict[Name, OwnProtection] = Field(default_factory=dict)
    points: tuple[Point, ...] = ()
    sources: tuple[Source, ...] = ()
    runs: tuple[Run, ...] = ()
    devices: tuple[Device, ...] = ()
    loads: tuple[Load, ...] = ()
    cases: tuple[Case, ...] = ()
    tolerances: Tolerances = Field(default_factory=Tolerances)
    site: Site | None = None
    bank: Bank = Field(default_factory=Bank)
    days: tuple[DayType, ...] = ()

    @cached_property
    def checked_cases(self) -> tuple[Case, ...]:
        """The cases to solve: the plan's own, or the standard set where it states none."""
        from farvolt.standard_cases import standard_cases  # it is made of a plan's classes

        return self.cases or standard_cases(self)

    @cached_property
    def joins(self) -> tuple[tuple[str, str], ...]:
        """The two points of every run and of every device."""
        runs = tuple((run.from_point, run.to_point) for run in self.runs)
        return runs + tuple((device.from_point, device.to_point) for device in self.devices)

    @cached_property
    def point_names(self) -> tuple[str, ...]:
        """All points, in order of first mention; the chassis is not among them."""
        seen: dict[str, None] = {point.name: None for point in self.points}
        for source in self.sources:
            if isinstance(source, Converter):
                seen[source.from_point] = None
            seen[source.at] = None
            if isinstance(source, Solar) and source.array is not None:
                seen[source.array.at] = seen[source.input_point] = None
        for start, end in self.joins:
            seen[start] = seen[end] = None
        for load in self.loads:
            seen[load.at] = None
        seen.pop(CHASSIS, None)
        return tuple(seen)

    @cached_property
    def reference(self) -> str | None:
        """Name of the reference source of the main island: as stated, else the first battery, else the first source."""
        batteries = [source.name for source in self.sources if source.kind == "battery"]
        first = [source.name for source in self.sources if source.kind != "converter"]
        return self.plan.reference or next(iter(batteries or first), None)

    @model_validator(mode="after")
    def _types_of_protection(self) -> "Plan":
        if self.protection_types:
            for run in self.runs:
                for one in (*run.protection, *run.protections):
                    one.is_of(self.own_types)
        return self

    @cached_property
    def own_types(self) -> dict[str, ProtectionType]:
        """The plan's own types of protection, by name."""
        return {name: one.as_type(name) for name, one in self.protection_types.items()}

    def ambient_degC(self, zone: str | None, case: Case | None = None) -> float:
        """Ambient of a zone (None: the plan's own), or the case's where that replaces it."""
        if case is not None and case.ambient is not None:
            return case.ambient.si
        return self.zones[zone].ambient.si if zone is not None else self.plan.ambient.si

    def zone_of_point(self, point: str) -> str | None:
        """The zone of a point, where the plan states one."""
        return next((one.zone for one in self.points if one.name == point), None)

    def zone_of(self, run: Run) -> str | None:
        """The zone of a run: its own, else that of its route."""
        return run.zone or (self.routes[run.route].zone if run.route is not None else None)
