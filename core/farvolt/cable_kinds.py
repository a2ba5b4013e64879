"""The conductors of a plan as they are bought: kind of cable, colour, length, and what stands at their ends."""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

from farvolt import network
from farvolt.conductors import Size, mass_kg_per_m
from farvolt.plan import Battery, Plan, Run
from farvolt.rulebook import Rulebook
from farvolt.tables import read
from farvolt_data import ROOT


@dataclass(frozen=True, slots=True)
class CableKind:
    """What cable is asked for by; `size` None where the plan states a measured resistance alone."""

    size: Size | None
    material: str
    strand: str
    insulation_degC: float
    colour: str

    @property
    def size_name(self) -> str:
        """Its size; empty where none is stated."""
        return self.size.name if self.size else ""

    @property
    def key(self) -> tuple[float, str, str, str, float, str]:
        """What kinds are told apart and sorted by, thinnest first; capitals make no other colour."""
        area = self.size.area_mm2 if self.size else 0.0
        return (area, self.size_name, self.material, self.strand, self.insulation_degC, self.colour.casefold())

    @property
    def kg_per_m(self) -> float | None:
        """Mass of its metal."""
        return mass_kg_per_m(self.size, self.material) if self.size else None


@dataclass(frozen=True, slots=True)
class BoughtConductor:
    """One conductor between two ends: a pole of a run, one of several in parallel, or a link of a battery."""

    name: str
    """Of the run or the battery."""
    label: str
    """What stands on the wire."""
    pole: str
    start: str
    end: str
    length_m: float
    kind: CableKind
    run: Run | None
    """None for a link of a battery."""


def colours(run: Run | None, rulebook: Rulebook) -> tuple[str, str]:
    """Colour of feed and of return: as the run states, else by the rulebook (see colours.csv, provisional).

    A colour that a run states is that of the feed, unless the run is a return alone.
    """
    feed, back = default_colours(rulebook.name)[:2]
    if run is None or run.colour is None:
        return feed, back
    return (feed, run.colour) if run.conducts == "return" else (run.colour, back)


@lru_cache(maxsize=16)
def default_colours(rulebook: str) -> tuple[str, str, str]:
    """Feed, return, and the basis of both."""
    rows = {row["rulebook"]: row for row in read(ROOT / "conductors" / "colours.csv")}
    row = rows.get(rulebook, rows["any"])
    return row["feed"], row["return"], row["source"]


def bought(plan: Plan, rulebook: Rulebook) -> list[BoughtConductor]:
    """Every conductor of a plan, run by run, then the links between a battery's strings."""
    found = [one for run in plan.runs for one in of_run(run, rulebook)]
    batteries = [source for source in plan.sources if isinstance(source, Battery) and network.linked(source)]
    return found + [one for battery in batteries for one in _links(battery, rulebook)]


def of_run(run: Run, rulebook: Rulebook) -> Iterator[BoughtConductor]:
    """The conductors of one run: each pole it has, as often as it lies in parallel."""
    lengths = network.conductor_lengths_m(run)
    sizes = (run.size, network.return_size(run))
    strand, degrees = network.strand(run, rulebook), network.insulation_degC(run, rulebook)
    poles = zip(("feed", "return"), lengths, sizes, colours(run, rulebook), strict=True)
    for pole, length_m, size, colour in poles:
        kind = CableKind(size, run.material, strand, degrees, colour)
        for number in range(1, run.parallel + 1 if length_m else 1):
            label = (run.label or run.name) + (f".{number}" if run.parallel > 1 else "")
            yield BoughtConductor(run.name, label, pole, run.from_point, run.to_point, length_m, kind, run)


def _links(battery: Battery, rulebook: Rulebook) -> Iterator[BoughtConductor]:
    """One link in each pole between neighbouring strings, or from each string to the bar."""
    assert battery.link is not None
    links = battery.strings if battery.take_off == "bar" else battery.strings - 1
    for pole, colour in zip(("feed", "return"), colours(None, rulebook), strict=True):
        kind = CableKind(
            battery.link.size, "copper", rulebook.default_strand, rulebook.default_insulation_degC, colour
        )  # fmt: skip
        for number in range(1, links + 1):
            label = f"{battery.name} link {number}"
            yield BoughtConductor(
                battery.name, label, pole, battery.at, battery.at, battery.link.length.si, kind, None
            )  # fmt: skip
