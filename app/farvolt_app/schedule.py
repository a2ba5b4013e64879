"""The cable schedule as rows: a study's cables, loads, protection and purchases, for a table, a CSV or a workbook.

Full precision; text as in the plan. What a run is bought as (lengths, sizes, colours) stands beside what it is
solved as (resistances, currents of the case where its drop is largest).
"""

import csv
import io
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from farvolt import conductors, network
from farvolt.conductors import Size, other_system
from farvolt.plan import Protection, Run
from farvolt.results import CaseResult, RunResult, Study
from farvolt.units import feet

COLOURS = {"feed": "red", "return": "black"}
"""Colour by polarity where the plan states none (common practice; local codes may ask for others)."""

NO_NUMBER = "no answer: the case gives way, or it is not fed"


@dataclass(frozen=True, slots=True)
class Conductor:
    """One pole of a run: `length_m` of one conductor, and its resistance in a part per metre and a fixed part."""

    length_m: float
    size: Size | None
    colour: str
    ohm_per_m: float
    fixed_ohm: float
    amps: float | None


@dataclass(frozen=True, slots=True)
class Cable:
    """One run of the schedule."""

    run: Run
    feed: Conductor
    back: Conductor
    parallel: int
    insulation_degC: float
    protection: str
    nominal_V: float
    drop_V: float | None
    loss_W: float | None
    ampacity_A: float | None
    case: str
    interim: bool
    """The size is taken for the time being; the plan states none."""

    @property
    def total_m(self) -> float:
        """Length of all conductors to be bought for the run."""
        return self.parallel * (self.feed.length_m + self.back.length_m)

    @property
    def amps(self) -> float | None:
        """The larger of feed and return current."""
        found = [one.amps for one in (self.feed, self.back) if one.amps is not None]
        return max(found, default=None)


def cables(study: Study) -> list[Cable]:
    """Every run, with the currents of the case in which its drop is largest."""
    return [_cable(study, index, run) for index, run in enumerate(study.plan.runs)]


def _cable(study: Study, index: int, run: Run) -> Cable:
    case = max(study.cases, key=lambda one: abs(one.runs[index].drop_V or 0.0))
    result = case.runs[index]
    sized = run if run.size is not None else run.model_copy(update={"size": study.interim.get(run.name)})
    feed_m, back_m = network.conductor_lengths_m(run)
    colour = run.colour or COLOURS["feed"]
    return Cable(
        run=run,
        feed=_conductor(sized, "feed", feed_m, sized.size, colour, result.feed_ohm, result.feed_A),
        back=_conductor(
            sized, "return", back_m, network.return_size(sized), COLOURS["return"], result.return_ohm, result.return_A
        ),
        parallel=run.parallel,
        insulation_degC=network.insulation_degC(run, study.rulebook),
        protection="; ".join(_protection_text(run, one) for one in run.protections),
        nominal_V=study.nominal_V.get(run.to_point, study.plan.plan.nominal.si),
        drop_V=None if result.drop_V is None else abs(result.drop_V),
        loss_W=result.loss_W,
        ampacity_A=_least_ampacity(study, index),
        case=case.name if result.drop_V is not None else NO_NUMBER,
        interim=run.size is None and run.resistance is None,
    )


def _conductor(
    run: Run, pole: str, length_m: float, size: Size | None, colour: str, ohm: float | None, amps: float | None
) -> Conductor:
    """Split a pole's resistance so that `ohm_per_m · length / parallel + fixed` gives it back."""
    fixed = 0.0
    if run.resistance is None and ohm is not None:
        fixed = network.joints_ohm(run) + network.protection_ohm(run, pole) if length_m else ohm
    per_m = (ohm - fixed) * run.parallel / length_m if ohm is not None and length_m else 0.0
    return Conductor(length_m, size, colour, per_m, fixed, None if amps is None else abs(amps))


def _protection_text(run: Run, one: Protection) -> str:
    pole = "" if one.pole == "feed" else f", {one.pole}"
    return f"{one.rating} {one.type} at {run.from_point if one.end == 'from' else run.to_point}{pole}"


def _least_ampacity(study: Study, index: int) -> float | None:
    found = [case.runs[index].ampacity_A for case in study.cases]
    return min((amps for amps in found if amps is not None), default=None)


@dataclass(frozen=True, slots=True)
class WayPart:
    """One conductor or device on the way of a load, in the load's worst case; `amps` is positive where it drops."""

    load: str
    name: str
    kind: str
    pole: str
    amps: float
    ohm: float
    drop_V: float
    run: int


@dataclass(frozen=True, slots=True)
class LoadLine:
    """One load in the case where its drop is largest, at the plan's conductor temperature."""

    name: str
    at: str
    rating: str
    drop_class: str
    limit_percent: float
    nominal_V: float
    case: str
    volts: float | None
    amps: float | None
    drop_V: float | None
    min_volts: float | None
    max_volts: float | None
    way: tuple[WayPart, ...]


def loads(study: Study) -> list[LoadLine]:
    """Every load with the way its drop is made of."""
    return [_load(study, index) for index in range(len(study.plan.loads))]


def _load(study: Study, index: int) -> LoadLine:
    load = study.plan.loads[index]
    case = max(study.cases, key=lambda one: _drop_if_on(one, index))
    result = case.loads[index]
    rule = study.rulebook.classes[load.drop_class or study.rulebook.default_class]
    rating = load.power or load.current or load.resistance
    way = tuple(
        WayPart(load.name, step.name, step.kind, step.pole, step.amps, step.ohm, step.drop_V, step.run)
        for step in (case.way(index) if result.drop_V is not None else ())
    )
    return LoadLine(
        load.name, load.at, str(rating), rule.name, rule.limit_percent,
        study.nominal_V.get(load.at, study.plan.plan.nominal.si),
        case.name if result.volts is not None else NO_NUMBER,
        result.volts, result.amps, result.drop_V,
        load.min_volts.si if load.min_volts else None, load.max_volts.si if load.max_volts else None, way,
    )  # fmt: skip


def _drop_if_on(case: CaseResult, index: int) -> float:
    result = case.loads[index]
    return result.drop_V if result.drop_V is not None and result.amps else -1e9


@dataclass(frozen=True, slots=True)
class ProtectionLine:
    """One fuse or breaker."""

    run: Run
    protection: Protection
    amps: float | None
    ampacity_A: float | None


def protections(study: Study) -> list[ProtectionLine]:
    """Every fuse and breaker, with the largest current through it in any case."""
    return [
        ProtectionLine(run, one, _largest(study, index, one.pole), _least_ampacity(study, index))
        for index, run in enumerate(study.plan.runs)
        for one in run.protections
    ]


def _largest(study: Study, index: int, pole: str) -> float | None:
    def amps(result: RunResult) -> float | None:
        return result.feed_A if pole == "feed" else result.return_A

    found = [abs(value) for case in study.cases if (value := amps(case.runs[index])) is not None]
    return max(found, default=None)


def purchases(found: Sequence[Cable]) -> list[tuple[str, str, str, str]]:
    """What the cables are bought as: each (size, material, insulation, colour) that occurs, thinnest first."""
    kinds: dict[tuple[str, str, str, str], float] = {}
    for cable in found:
        for one in (cable.feed, cable.back):
            if one.length_m and one.size is not None:
                key = (one.size.name, cable.run.material, f"{cable.insulation_degC:g} degC", one.colour)
                kinds[key] = one.size.area_mm2
    return sorted(kinds, key=lambda key: (kinds[key], key))


def size_text(cable: Cable, size: Size | None) -> str:
    """A size as it is bought; one that is taken for the time being says so."""
    if size is None:
        return "measured" if cable.run.resistance is not None else "to be chosen"
    return f"{size.name}, to be chosen" if cable.interim else size.name


def american_text(size: Size | None) -> str:
    """The size in American wire gauge: its own, or the nearest."""
    if size is None or size.system == "AWG":
        return "" if size is None else size.name
    return f"~{other_system(size).name}"


def rows(study: Study) -> list[dict[str, Any]]:
    """The cable list as plain rows, metric and American side by side."""
    return [
        {
            "Label": cable.run.label or "",
            "Run": cable.run.name,
            "From": cable.run.from_point,
            "To": cable.run.to_point,
            "Length one way (m)": cable.run.length.si,
            "Length one way (ft)": feet(cable.run.length.si),
            "Conductors in all (m)": cable.total_m,
            "Size": size_text(cable, cable.feed.size or cable.back.size),
            "Area (mm2)": _area(cable.feed.size or cable.back.size),
            "AWG (~ nearest)": american_text(cable.feed.size or cable.back.size),
            "Parallel": cable.parallel,
            "Material": cable.run.material,
            "Insulation (degC)": cable.insulation_degC,
            "Feed colour": cable.feed.colour if cable.feed.length_m else "",
            "Return colour": cable.back.colour if cable.back.length_m else "",
            "Protection": cable.protection,
            "Design current (A)": cable.amps,
            "Ampacity (A)": cable.ampacity_A,
            "Drop (V)": cable.drop_V,
            "Drop (%)": None if cable.drop_V is None else 100 * cable.drop_V / cable.nominal_V,
            "Loss (W)": cable.loss_W,
            "Case": cable.case,
        }
        for cable in cables(study)
    ]


def _area(size: Size | None) -> float | None:
    return None if size is None else size.area_mm2


def to_csv(study: Study) -> str:
    """The cable list as CSV. Text that a spreadsheet would take for a formula gets an apostrophe before it."""
    found = rows(study)
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(found[0] if found else ["Label", "Run"])
    for row in found:
        writer.writerow([_inert(value) for value in row.values()])
    return out.getvalue()


def _inert(value: Any) -> Any:
    if isinstance(value, str) and value.lstrip()[:1] in ("=", "+", "-", "@"):
        return f"'{value}"
    return "" if value is None else value


def mass_kg_per_m(name: str, material: str) -> float:
    """Mass of a conductor's metal per metre, for a size's name."""
    return conductors.mass_kg_per_m(conductors.parse_size(name), material)
