"""The cable schedule as rows: a study's cables, loads and protection, for a table, a CSV or a workbook.

Full precision; text as in the plan. What a run is bought as (lengths, sizes, colours) stands beside what it is
solved as (resistances, currents of the case where its drop is largest). In the CSV, text that a spreadsheet would
take for a formula has an apostrophe before it.
"""

import csv
import io
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from farvolt import cable_kinds, conductors, network
from farvolt.conductors import Size, other_system
from farvolt.plan import Protection, Run
from farvolt.protected import ProtectionResult
from farvolt.results import CaseResult, RunResult, Step, Study
from farvolt.units import feet
from farvolt_app.textsafe import csv_text

NO_NUMBER = "no answer: the case gives way, or it is not fed"
OFF = "off in every case"


@dataclass(frozen=True, slots=True)
class Conductor:
    """One pole of a run: `length_m` of one conductor, and its resistance in a part per metre and a fixed part.

    `amps` is positive where it adds to the run's drop: in a mesh, feed and return may flow the same way.
    """

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
    strand: str
    insulation_degC: float
    protection: str
    nominal_V: float
    drop_V: float | None
    """In the case where it is largest, without sign; the currents of both poles are of that case."""
    loss_W: float | None
    largest_A: float | None
    """The largest current in either pole, over all cases."""
    ampacity_A: float | None
    """The least, over all cases."""
    conductor_degC: float
    case: str
    interim: bool
    """The size is taken for the time being; the plan states none."""

    @property
    def total_m(self) -> float:
        """Length of all conductors to be bought for the run."""
        return self.parallel * (self.feed.length_m + self.back.length_m)

    @property
    def sizes(self) -> tuple[Size, ...]:
        """Size of the feed and, where it is another, of the return; none for a cable whose size is not stated."""
        found = [one.size for one in (self.feed, self.back) if one.length_m and one.size is not None]
        return tuple(dict.fromkeys(found))


def cables(study: Study) -> list[Cable]:
    """Every run, with the currents of the case in which its drop is largest."""
    return [_cable(study, index, run) for index, run in enumerate(study.plan.runs)]


def _cable(study: Study, index: int, run: Run) -> Cable:
    case = max(study.cases, key=lambda one: abs(one.runs[index].drop_V or 0.0))
    result = case.runs[index]
    sized = run if run.size is not None else run.model_copy(update={"size": study.interim.get(run.name)})
    feed_m, back_m = network.conductor_lengths_m(run)
    # A run's drop is I·R of the feed less I·R of the return, both currents counted from `from` to `to`.
    sign = -1.0 if (result.drop_V or 0.0) < 0 else 1.0
    feed_A = None if result.feed_A is None else sign * result.feed_A
    back_A = None if result.return_A is None else -sign * result.return_A
    colours = cable_kinds.colours(run, study.rulebook)
    return Cable(
        run=run,
        feed=_conductor(sized, "feed", feed_m, sized.size, colours[0], result.feed_ohm, feed_A),
        back=_conductor(sized, "return", back_m, network.return_size(sized), colours[1], result.return_ohm, back_A),
        parallel=run.parallel,
        strand=network.strand(run, study.rulebook),
        insulation_degC=network.insulation_degC(run, study.rulebook),
        protection="; ".join(_protection_text(run, one) for one in run.protections),
        nominal_V=study.nominal_V.get(run.to_point, study.plan.plan.nominal.si),
        drop_V=None if result.drop_V is None else abs(result.drop_V),
        loss_W=result.loss_W,
        largest_A=_most(_largest(study, index, "feed"), _largest(study, index, "return")),
        ampacity_A=_least_ampacity(study, index),
        conductor_degC=result.conductor_degC,
        case=case.name if result.drop_V is not None else NO_NUMBER,
        interim=run.size is None and run.resistance is None,
    )


def _conductor(
    run: Run, pole: str, length_m: float, size: Size | None, colour: str, ohm: float | None, amps: float | None
) -> Conductor:
    """Split a pole's resistance so that `ohm_per_m · length / parallel + fixed` gives it back."""
    if not length_m:  # through the chassis: the bond, or no such conductor at all
        return Conductor(0.0, size, colour, 0.0, ohm or 0.0, amps)
    # A measured resistance covers joints and protection too.
    fixed = network.joints_ohm(run) + network.protection_ohm(run, pole) if run.resistance is None else 0.0
    per_m = (ohm - fixed) * run.parallel / length_m if ohm is not None else 0.0
    return Conductor(length_m, size, colour, per_m, fixed, amps)


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
    warmth: float
    """Resistance of the cable part over that of the cables' list, whose case may have another temperature."""


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


def loads(study: Study, found: Sequence[Cable]) -> list[LoadLine]:
    """Every load with the way its drop is made of; `found` are the study's cables."""
    return [_load(study, found, index) for index in range(len(study.plan.loads))]


def _load(study: Study, found: Sequence[Cable], index: int) -> LoadLine:
    load = study.plan.loads[index]
    rule = study.rulebook.classes[load.drop_class or study.rulebook.default_class]
    rating = load.power or load.current or load.resistance
    case, note = _worst(study, index)
    result = case.loads[index] if case else None
    return LoadLine(
        load.name, load.at, str(rating), rule.name, rule.limit_percent,
        study.nominal_V.get(load.at, study.plan.plan.nominal.si), note,
        result.volts if result else None, result.amps if result else None, result.drop_V if result else None,
        load.min_volts.si if load.min_volts else None, load.max_volts.si if load.max_volts else None,
        tuple(_way_part(load.name, found, step) for step in case.way(index)) if case else (),
    )  # fmt: skip


def _worst(study: Study, index: int) -> tuple[CaseResult | None, str]:
    """The case in which a load is on and its drop is largest, and its name; or none, and why."""
    name = study.plan.loads[index].name
    pairs = zip(study.plan.checked_cases, study.cases, strict=True)
    on = [result for case, result in pairs if case.share(name) > 0]
    held = [(drop, one) for one in on if (drop := one.loads[index].drop_V) is not None]
    if not held:
        return None, NO_NUMBER if on else OFF
    case = max(held, key=lambda pair: pair[0])[1]
    return case, case.name


def _way_part(load: str, found: Sequence[Cable], step: Step) -> WayPart:
    one = None if step.run < 0 else found[step.run].feed if step.pole == "feed" else found[step.run].back
    listed = one.ohm_per_m * one.length_m / found[step.run].parallel if one else 0.0
    warmth = (step.ohm - one.fixed_ohm) / listed if one and listed else 1.0
    return WayPart(load, step.name, step.kind, step.pole, step.amps, step.ohm, step.drop_V, step.run, warmth)


def not_held(study: Study) -> list[str]:
    """Names of the cases that give way: they have no numbers, so that none of theirs is in the schedule."""
    return [case.name for case in study.cases if not case.solved]


@dataclass(frozen=True, slots=True)
class ProtectionLine:
    """One fuse or breaker."""

    run: Run
    protection: Protection
    amps: float | None
    ampacity_A: float | None
    faults: ProtectionResult
    """Its fault currents and times."""


def protections(study: Study) -> list[ProtectionLine]:
    """Every fuse and breaker, with the largest current through it in any case, and in a fault."""
    placed = [(index, run, one) for index, run in enumerate(study.plan.runs) for one in run.protections]
    return [
        ProtectionLine(run, one, _largest(study, index, one.pole), _least_ampacity(study, index), faults)
        for (index, run, one), faults in zip(placed, study.protections, strict=True)
    ]


def _largest(study: Study, index: int, pole: str) -> float | None:
    def amps(result: RunResult) -> float | None:
        return result.feed_A if pole == "feed" else result.return_A

    found = [abs(value) for case in study.cases if (value := amps(case.runs[index])) is not None]
    return max(found, default=None)


def _most(*values: float | None) -> float | None:
    return max((value for value in values if value is not None), default=None)


def size_text(cable: Cable) -> str:
    """A cable's size as it is bought, the return's too where it is another; what is not settled says so."""
    if not cable.sizes:
        return "measured" if cable.run.resistance is not None else "to be chosen"
    text = cable.sizes[0].name + "".join(f", return {size.name}" for size in cable.sizes[1:])
    return f"{text}, to be chosen" if cable.interim else text


def american_text(cable: Cable) -> str:
    """A cable's size in American wire gauge: its own, or (with ~) the nearest, which may be thinner."""
    return ", return ".join(map(_gauge, cable.sizes))


def _gauge(size: Size) -> str:
    if size.system == "AWG":
        return size.name
    if size.system == "metric":
        return f"~{other_system(size).name}"
    made = conductors.made_sizes("AWG")
    return f"~{min(made, key=lambda one: abs(math.log(one.area_mm2 / size.area_mm2))).name}"


def rows(study: Study) -> list[dict[str, Any]]:
    """The cable list as plain rows, metric and American side by side."""
    return [dict(zip(HEADINGS, _row(cable), strict=True)) for cable in cables(study)]


HEADINGS = (
    "Label", "Run", "From", "To", "Length one way (m)", "Length one way (ft)", "Conductors in all (m)",
    "Conductors in all (ft)", "Size", "Area (mm2)", "AWG (~ nearest)", "Parallel", "Material", "Insulation (degC)",
    "Feed colour", "Return colour", "Protection", "Design current (A)", "Ampacity (A)", "Drop (V)", "Drop (%)",
    "Loss (W)", "Case",
)  # fmt: skip


def _row(cable: Cable) -> tuple[Any, ...]:
    run, feed, back = cable.run, cable.feed, cable.back
    return (
        run.label or "", run.name, run.from_point, run.to_point, run.length.si, feet(run.length.si), cable.total_m,
        feet(cable.total_m), size_text(cable), cable.sizes[0].area_mm2 if cable.sizes else None, american_text(cable),
        cable.parallel, run.material, cable.insulation_degC, feed.colour if feed.length_m else "",
        back.colour if back.length_m else "", cable.protection, cable.largest_A, cable.ampacity_A, cable.drop_V,
        None if cable.drop_V is None else 100 * cable.drop_V / cable.nominal_V, cable.loss_W, cable.case,
    )  # fmt: skip


def to_csv(study: Study) -> str:
    """The cable list as CSV: numbers stay numbers, what has no answer is empty, text stays text."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(HEADINGS)
    for cable in cables(study):
        writer.writerow([csv_text(value) if isinstance(value, str) else value for value in _row(cable)])
    return out.getvalue()
