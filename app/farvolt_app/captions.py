"""What a drawing says of each entry of a plan: the lines beside it, its mark, and its numbers in one sentence."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from farvolt.conductors import Size, other_system
from farvolt.plan import Battery, Case, Charger, Converter, Device, Load, Plan, Protection, Run, Solar, Source
from farvolt.results import CaseResult, Finding, LoadResult, PointResult, RunResult, Severity, SourceResult
from farvolt.units import feet, number
from farvolt_app.lettering import Words, isolated, words
from farvolt_app.shown import SEVERITIES
from farvolt_app.wiring_tree import Key

NAME_SIZE = 12.0
DETAIL_SIZE = 11.0
MARK_WIDTH = 18.0
SLOT_GAP = 6.0

_WAY_LIMIT = 200.0
_POINT_LIMIT = 180.0
_SOURCE_LIMIT = 150.0
_LOAD_LIMIT = 165.0
_NOTHING = 5e-5
"""Below this many ampere, volt or watt an amount is drawn as none."""


@dataclass(frozen=True, slots=True)
class Slot:
    """A symbol at one end of a way with its rating below: protection, or the frame of a chassis return."""

    symbol: Literal["fuse", "breaker", "chassis"]
    text: Words
    width: float


@dataclass(frozen=True, slots=True)
class Caption:
    """All that is written of one entry: `mark` is the worst finding, `whole` the sentence for those who cannot see."""

    key: Key
    name: Words
    details: tuple[Words, ...]
    whole: str
    mark: Severity | None
    mark_word: Words | None
    at_from: tuple[Slot, ...] = ()
    at_to: tuple[Slot, ...] = ()

    @property
    def head_width(self) -> float:
        """Width of the mark, its word and the name, in line."""
        mark = MARK_WIDTH + self.mark_word.width + 5 if self.mark_word else 0.0
        return mark + self.name.width

    @property
    def detail_width(self) -> float:
        """Width of the widest line below the name."""
        return max((line.width for line in self.details), default=0.0)

    @property
    def body_width(self) -> float:
        """Width of the details between the symbols at both ends."""
        slots = sum(slot.width for slot in (*self.at_from, *self.at_to))
        return self.detail_width + slots + (SLOT_GAP if slots else 0.0)


class Captions:
    """The captions of a plan in a case (None: not studied yet), marked with the findings of that case."""

    def __init__(self, plan: Plan, case: CaseResult | None, findings: Sequence[Finding], units: str) -> None:
        self.plan = plan
        self.units = units
        self.case = case
        name = case.name if case is not None else None
        self._wanted: Case | None = next((one for one in plan.checked_cases if one.name == name), None)
        self._found: dict[Key, list[Finding]] = {}
        for one in findings:
            if one.case in (None, name):
                self._found.setdefault((one.kind, one.subject), []).append(one)
        self.points: dict[str, PointResult] = {one.name: one for one in case.points} if case else {}
        self._runs: dict[str, RunResult] = {one.name: one for one in case.runs} if case else {}
        self.loads: dict[str, LoadResult] = {one.name: one for one in case.loads} if case else {}
        self._sources: dict[str, SourceResult] = {one.name: one for one in case.sources} if case else {}
        self._devices = {one.name: one for one in case.devices} if case else {}

    # Entries -----------------------------------------------------------------------------------------------------

    def run(self, run: Run, *, flipped: bool) -> Caption:
        """A run; `flipped` when its `to` end is drawn at the left."""
        result = self._runs.get(run.name)
        details = [f"{_conductor(run)} · {self._length(run.length.si)}"]
        if result is not None:
            details.append(_flow(_main_amps(result), flipped, result.drop_V) if self._solved else "")
        text = f"{run.label} {run.name}" if run.label else run.name
        at_from = [_slot(one) for one in run.protections if one.end == "from"]
        at_to = [_slot(one) for one in run.protections if one.end == "to"]
        if run.return_path == "chassis":
            at_to.append(Slot("chassis", words("", DETAIL_SIZE), 26.0))
        whole = self._run_sentence(run, result)
        return self._caption(("run", run.name), text, details, whole, _WAY_LIMIT, (tuple(at_from), tuple(at_to)))

    def device(self, device: Device, *, flipped: bool) -> Caption:
        """A device in line."""
        state = self.device_state(device)
        words_of_it = [device.kind if device.kind not in ("switch", "selector", "relay") else f"{device.kind}, {state}"]
        if device.pole != "feed":
            words_of_it[0] += f", in {device.pole}" if device.pole == "return" else ", both poles"
        result = self._devices.get(device.name)
        whole = f"{device.kind} {isolated(device.name)}, {_ends(device.from_point, device.to_point)}: {state}"
        if result is not None and self._solved:
            words_of_it.append(_flow(result.amps, flipped, result.drop_V))
            whole += f", {_amount(result.amps, 'A')}, drop {_amount(result.drop_V, 'V')}"
        return self._caption(("device", device.name), device.name, words_of_it, whole, _WAY_LIMIT)

    def device_state(self, device: Device) -> str:
        """Closed or open, in the case drawn."""
        return self._wanted.devices.get(device.name, device.state) if self._wanted else device.state

    def source(self, source: Source) -> Caption:
        """A source, its rating and what it delivers."""
        result = self._sources.get(source.name)
        details = [_rating(source)]
        whole = f"{source.kind} {isolated(source.name)} at {isolated(source.at)}: {details[0]}"
        if result is not None:
            state = self._source_state(source, result)
            details.append(state)
            whole += f". {_amount(result.volts, 'V')}, {state}"
        return self._caption(("source", source.name), source.name, details, whole, _SOURCE_LIMIT)

    def array(self, source: Solar) -> Caption:
        """The modules of a solar source, at the point where they are wired."""
        array = source.array
        assert array is not None
        rating = f"{array.modules} modules, Voc {array.voc.text}, Isc {array.isc.text}"
        whole = f"array of solar source {isolated(source.name)} at {isolated(array.at)}: {rating}"
        return self._caption(("source", source.name), f"array of {source.name}", [rating], whole, _SOURCE_LIMIT)

    def load(self, load: Load) -> Caption:
        """A load, its rating and its current; volts are drawn apart."""
        result = self.loads.get(load.name)
        rated = getattr(load, load.rated_as)
        rating = rated.text.replace("ohm", "Ω")
        whole = f"load {isolated(load.name)} at {isolated(load.at)}: {rating}"
        if result is not None:
            state = self._load_state(load, result)
            rating += f" · {state}" if result.volts is not None else ""
            whole += f". {_amount(result.volts, 'V')}, {state}, drop {_amount(result.drop_V, 'V')}"
            whole += f" ({result.drop_percent:.2f} %)" if result.drop_percent is not None else ""
        return self._caption(("load", load.name), load.name, [rating], whole, _LOAD_LIMIT)

    def point(self, name: str) -> Caption:
        """A point; the name of one that only carries a load of the same name is not written twice."""
        known = next((one for one in self.plan.points if one.name == name), None)
        kind = known.kind if known else "point"
        result = self.points.get(name)
        whole = f"{kind if kind != 'terminals' else 'point'} {isolated(name)}"
        if result is not None:
            whole += f": {_amount(result.volts, 'V')}" if result.volts is not None else f": {self.no_volts}"
            if result.feed_V is not None and result.return_V is not None:
                whole += f" (feed {result.feed_V:.3f} V, return {result.return_V:.3f} V)"
        return self._caption(("point", name), name, [], whole, _POINT_LIMIT)

    @property
    def no_volts(self) -> str:
        """Why a voltage is missing."""
        return "not fed" if self._solved else "not solved"

    # Parts of a caption ------------------------------------------------------------------------------------------

    @property
    def _solved(self) -> bool:
        return self.case is not None and self.case.solved

    def _caption(
        self, key: Key, name: str, details: Sequence[str], whole: str, limit: float,
        slots: tuple[tuple[Slot, ...], tuple[Slot, ...]] = ((), ()),
    ) -> Caption:  # fmt: skip
        found = self._found.get(key, [])
        order: tuple[Severity, ...] = ("fail", "warn")
        mark = next((severity for severity in order if any(one.severity == severity for one in found)), None)
        word = words(MARK_WORDS[mark], DETAIL_SIZE, bold=True) if mark else None
        told = [f"{SEVERITIES[one.severity]}: {one.message}" for one in found]
        return Caption(
            key, words(name, NAME_SIZE, limit=limit, bold=key[0] != "point"),
            tuple(words(line, DETAIL_SIZE, limit=limit) for line in details),
            "\n".join([whole, *told]), mark, word, *slots,
        )  # fmt: skip

    def _length(self, length_m: float) -> str:
        return f"{number(feet(length_m))} ft" if self.units == "american" else f"{number(length_m)} m"

    def _run_sentence(self, run: Run, result: RunResult | None) -> str:
        label = f"{isolated(run.label)} " if run.label else ""
        parts = [f"run {label}{isolated(run.name)}, {_ends(run.from_point, run.to_point)}: {_conductor(run)}"]
        parts[0] += f" ({_near(run.size)})" if run.size else ""
        parts += [self._length(run.length.si), _back(run)]
        parts += [f"{one.type} {one.rating.text} in {one.pole} at {one.end}" for one in run.protections]
        if result is None:
            return ", ".join(parts)
        told = [f"feed {_amount(result.feed_A, 'A')}", f"return {_amount(result.return_A, 'A')}"]
        told += [f"drop {_amount(result.drop_V, 'V')}", f"loss {_amount(result.loss_W, 'W')}"]
        told += [f"conductor {result.conductor_degC:.0f} °C", f"may carry {_amount(result.ampacity_A, 'A')}"]
        return f"{', '.join(parts)}. {', '.join(told)}"

    def _source_state(self, source: Source, result: SourceResult) -> str:
        state = self._wanted.sources.get(source.name) if self._wanted else None
        if state is not None and state.state == "off":
            return "off"
        if result.amps is None or result.watts is None:
            return self.no_volts
        if isinstance(source, Converter) and result.input_W is not None:
            return f"{_amount(result.input_W, 'W')} in, {_amount(result.watts, 'W')} out"
        if abs(result.amps) < _NOTHING:
            return "full, 0 A" if state is not None and state.state == "full" else "delivers 0 A"
        return f"{'delivers' if result.amps > 0 else 'takes'} {_amount(abs(result.amps), 'A')}"

    def _load_state(self, load: Load, result: LoadResult) -> str:
        if self._wanted is not None and self._wanted.share(load.name) == 0:
            return "off"
        return self.no_volts if result.amps is None else _amount(result.amps, "A")


MARK_WORDS: dict[Severity, str] = {"fail": "fails", "warn": "doubtful"}
"""The word beside each mark, so that neither shape nor colour says it alone."""


def _amount(value: float | None, unit: str) -> str:
    if value is None:
        return f"no {unit}"
    if abs(value) < _NOTHING:
        return f"0 {unit}"
    if abs(value) < 0.0995:
        return f"{number(1000 * value, 2)} m{unit}".replace("-", "−")
    return (f"{value:.2f} {unit}" if unit == "V" else f"{number(value)} {unit}").replace("-", "−")


def _flow(amps: float | None, flipped: bool, drop_V: float | None) -> str:
    """Current with an arrow the way it flows on paper, and the drop."""
    if amps is None:
        return "not fed"
    if abs(amps) < _NOTHING:
        return "0 A"
    arrow = "→" if (amps > 0) != flipped else "←"
    drop = f" · {_amount(abs(drop_V), 'V')}" if drop_V is not None else ""
    return f"{arrow} {_amount(abs(amps), 'A')}{drop}"


def _main_amps(result: RunResult) -> float | None:
    """The feed current, or for a run of a return alone the return current."""
    return result.return_A if result.feed_A is None else result.feed_A


def _conductor(run: Run) -> str:
    size = run.size.name.replace("mm2", "mm²") if run.size else "size free"
    several = f"{run.parallel} × " if run.parallel > 1 else ""
    alone = {"feed": " (+)", "return": " (−)"}.get(run.conducts, "")
    return f"{several}{size}{alone}"


def _near(size: Size) -> str:
    return f"about {other_system(size).name.replace('mm2', 'mm²')}"


def _back(run: Run) -> str:
    if run.conducts != "both":
        return f"{run.conducts} conductor alone"
    if run.return_path == "chassis":
        return "return through the chassis"
    if run.return_path == "same":
        return "feed and return"
    size = run.return_path.size.name.replace("mm2", "mm²") if run.return_path.size else "as the feed"
    return f"return of its own: {size}"


def _ends(start: str, end: str) -> str:
    return f"from {isolated(start)} to {isolated(end)}"


def _slot(one: Protection) -> Slot:
    text = words(one.rating.text + (" (−)" if one.pole == "return" else ""), DETAIL_SIZE, limit=90)
    return Slot("breaker" if "breaker" in one.type.lower() else "fuse", text, max(34.0, text.width + 8))


def _rating(source: Source) -> str:
    if isinstance(source, Battery):
        volts = source.nominal or source.emf
        parts = [
            f"{source.strings} ×" if source.strings > 1 else "",
            source.capacity.text if source.capacity else "",
            source.chemistry or "",
            volts.text if volts else "",
        ]
        return " ".join(filter(None, parts)) or "battery"
    if isinstance(source, Charger):
        return f"{source.volts.text}, {source.amps.text}"
    if isinstance(source, Solar):
        return f"{source.power.text}, up to {source.ceiling.text}"
    return f"{source.volts.text}, {source.amps.text}"
