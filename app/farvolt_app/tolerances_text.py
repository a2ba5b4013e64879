"""Voltages under tolerances as tables on a terminal, and as one object for machines."""

from dataclasses import asdict
from typing import Any

from rich.console import Console
from rich.text import Text

from farvolt import coverage
from farvolt.context import Context
from farvolt.errors import FarvoltError
from farvolt.output import OUTPUT
from farvolt.plan import Tolerances
from farvolt.swings import Swings, swings
from farvolt.tolerances import SAMPLES, CaseSpread, LoadSpread, case_spread, spread, usual_samples
from farvolt.units import number
from farvolt_app.report_text import open_console, place, table

FACTORS_SHOWN = 10


class Answer:
    """Cases under tolerances, and what matters most to one load. Text and JSON show the same."""

    def __init__(self, context: Context, case: str | None, load: str | None, samples: int | None, seed: int) -> None:
        """Solve. Raises FarvoltError, before anything is solved, for a name that the plan does not have."""
        names = [one.name for one in context.cases]
        chosen = range(len(names)) if case is None else [place(case, names, "case")]
        if load is not None:
            place(load, [one.name for one in context.plan.loads], "load")
        self.context, self.seed = context, seed
        self.samples = samples or usual_samples(len(context.plan.runs))
        self.told = samples is not None
        self.cases = {index: case_spread(context, index, self.samples, seed) for index in chosen}
        self.matters = self._matters(load)

    def _matters(self, load: str | None) -> Swings | None:
        """Swings of the load asked for, or of the one that may come lowest for its nominal, where it is lowest."""
        places = {one.name: at for at, one in enumerate(self.context.plan.loads)}
        nominal = self.context.cases[0].solutions["plan"].load_nominal_V
        found = [
            (one.lowest_V / float(nominal[places[one.name]]), index, places[one.name])
            for index, case in self.cases.items()
            for one in case.loads
            if one.lowest_V is not None and load in (None, one.name)
        ]
        if not found:
            if load is None:
                return None
            raise FarvoltError(f'load "{load}" has no voltage to show: it is off, not fed, or its case gives way')
        _, index, at = min(found)
        one = self.context.cases[index]
        return swings(spread(self.context, one), one.solutions["plan"], at)


def as_object(answer: Answer) -> dict[str, Any]:
    """The object that `farvolt tolerances PLAN --json` prints: volts, shares from 0 to 1, null for no answer."""
    limits = {load.name: load.min_volts.si if load.min_volts else None for load in answer.context.plan.loads}
    return {
        "output": OUTPUT,
        "plan": answer.context.plan.plan.name,
        "seed": answer.seed,
        "cases": [_case_object(case, limits) for case in answer.cases.values()],
        "matters": asdict(answer.matters) if answer.matters else None,
    }


def _case_object(case: CaseSpread, limits: dict[str, float | None]) -> dict[str, Any]:
    whole = asdict(case)
    whole["loads"] = [asdict(one) | {"min_volts": limits[one.name]} for one in case.loads]
    whole["claim"] = _claim(case)
    return whole


def _claim(case: CaseSpread) -> dict[str, float] | None:
    """What the samples of a case can claim: the greatest share for which all its figures together are sure."""
    if case.guaranteed or case.samples == case.gave_way:
        return None
    figures = len(case.loads)

    def at(share: float) -> dict[str, float]:
        one = coverage.confidence(case.samples, share, case.gave_way)
        every = coverage.together(case.samples, share, figures, figures, case.gave_way)
        return {"coverage": share, "confidence_each": one, "confidence_all": every}

    claims = [at(share) for share in coverage.COVERAGES]
    return next((one for one in claims if one["confidence_all"] >= coverage.SURE), claims[-1])


def show(answer: Answer) -> None:
    """Print the lowest and the highest voltage of each load, what may be said of them, and what matters most."""
    out = open_console()
    out.print(Text(answer.context.plan.plan.name, style="bold"))
    out.print(Text(_tolerances(answer.context)))
    _loads(out, answer)
    out.print(Text("\nHow far these figures hold", style="bold"))
    for case in answer.cases.values():
        out.print(Text(f'- "{case.name}": {_basis(case)}'))
    if any(not case.guaranteed for case in answer.cases.values()):
        out.print(Text(_SAMPLED))
    if not answer.told and answer.samples < SAMPLES:
        runs = len(answer.context.plan.runs)
        out.print(Text(f"{answer.samples:,} samples because the plan has {runs:,} runs; --samples N draws more."))
    if answer.matters is not None:
        _matters(out, answer.matters)


_SAMPLED = (
    "Samples are drawn evenly over each range, each quantity on its own: they say how such installations spread, and "
    'are no bound. "All at the low end" puts every quantity at the end that usually lowers voltages; it is one '
    "network, and another may lie lower."
)


def _tolerances(context: Context) -> str:
    """The tolerances in one line."""
    stated = context.plan.tolerances
    whose = "as the plan states them" if "tolerances" in context.plan.model_fields_set else "the usual ones"
    return f"Tolerances ({whose}): {listed(stated)}"


def listed(stated: Tolerances) -> str:
    """Tolerances as words."""
    coldest = str(stated.coldest) if stated.coldest else "ambient"
    hottest = str(stated.hottest) if stated.hottest else "the insulation's rating"
    return (
        f"length ±{stated.length}, joints 1 to {number(stated.joints)} times as planned, conductors from {coldest} to "
        f"{hottest}, source voltage ±{stated.source_volts}, loads ±{stated.loads}"
    )


def _loads(out: Console, answer: Answer) -> None:
    rows = []
    for load in answer.context.plan.loads:
        found = [(case, one) for case in answer.cases.values() for one in case.loads if one.name == load.name]
        held = [(case, one) for case, one in found if one.lowest_V is not None and one.highest_V is not None]
        if not held:
            continue
        worst, low = min(held, key=lambda pair: pair[1].lowest_V or 0.0)
        _, high = max(held, key=lambda pair: pair[1].highest_V or 0.0)
        # The lowest of several cases is a bound only where each of them has one.
        kind = "guaranteed" if all(case.guaranteed for case, _ in found) else "sampled"
        least = number(load.min_volts.si, 4) if load.min_volts else ""
        ends = [one.ends_low_V for _, one in found if one.ends_low_V is not None]
        rows.append((
            load.name, least, _volts(low.planned_V), _volts(low.lowest_V), _volts(high.highest_V), kind,
            _volts(min(ends)) if ends and kind == "sampled" else "", _below(load.min_volts, low, ends), worst.name,
        ))  # fmt: skip
    columns = (
        ("load", False), ("needs V", True), ("as planned V", True), ("lowest V", True), ("highest V", True),
        ("lowest and highest are", False), ("all at the low end V", True), ("too low", False),
        ("lowest in case", False),
    )  # fmt: skip
    table(out, "Voltage at each load within the tolerances", columns, rows)


def _below(limit: object, low: LoadSpread, ends: list[float]) -> str:
    """A mark at a load that may see less than it needs."""
    least = getattr(limit, "si", None)
    if least is None:
        return ""
    if low.lowest_V is not None and low.lowest_V < least:
        return "yes"
    return "at the end" if ends and min(ends) < least else ""


def _volts(value: float | None) -> str:
    return "-" if value is None else number(value, 4)


def _basis(case: CaseSpread) -> str:
    """What may be said of the figures of a case, and why."""
    if case.guaranteed:
        return "guaranteed: one source, feed and return are trees, no load of constant resistance"
    said = [f"{case.samples:,} samples, because {_because(case)}"]
    if case.proof.reach != "none":
        said.append("guaranteed in loads and source voltage: only resistances were sampled")
    if case.gave_way:
        said.append(f"{case.gave_way:,} of them give way and have no voltage")
    if case.one_by_one:
        said.append(f"{case.one_by_one:,} were solved one by one")
    claim = _claim(case)
    if claim is not None:
        said.append(
            f"at least {number(100 * claim['coverage'], 4)} % of such installations lie above a lowest figure with "
            f"{_percent(claim['confidence_each'])} confidence, below a highest likewise; all {2 * len(case.loads)} "
            f"figures at once with {_percent(claim['confidence_all'])}"
        )
    return "; ".join(said)


def _because(case: CaseSpread) -> str:
    if case.proof.because:
        return case.proof.because
    return f"with all at the low end the case gives way at {number(100 * case.ends_share_held)} % of its loads"


def _percent(share: float) -> str:
    """A confidence, rounded down: never more than was claimed."""
    for digits in (0, 1, 2, 3):
        scale = 10**digits
        if share < 1 - 1.5 / (100 * scale):
            return f"{int(share * 100 * scale) / scale:.{digits}f} %"
    return "over 99.998 %"


def _matters(out: Console, found: Swings) -> None:
    title = f'What matters most to "{found.load}" in case "{found.case}"; {number(found.middle_V, 4)} V in the middle'
    rows = [(one.group, str(one.factors), _swing(one.swing_V), number(100 * one.share)) for one in found.groups]
    columns = (("tolerance", False), ("quantities", True), ("all together V", True), ("% of the sum", True))
    table(out, title, columns, rows)
    singles = [(one.name, one.group, _swing(one.swing_V)) for one in found.factors[:FACTORS_SHOWN]]
    near = "" if found.whole else " (of those on its way)"
    table(
        out,
        f"Single quantities that matter most{near}",
        (("of", False), ("tolerance", False), ("alone V", True)),
        singles,
    )


def _swing(volts: float) -> str:
    return number(volts, 3)
