"""The single-line diagram of a plan, with the voltages of one case, as a document that stands alone (SVG)."""

from collections.abc import Iterable, Sequence

from farvolt.plan import Converter, Device, Load, Plan, Run, Solar
from farvolt.results import CaseResult, Finding
from farvolt_app import legend, symbols
from farvolt_app.captions import DETAIL_SIZE, MARK_WIDTH, SLOT_GAP, Caption, Captions, Slot
from farvolt_app.layout import Box, Layout, PlacedEnd, PlacedPoint, PlacedWay, Sizes, place
from farvolt_app.lettering import Words, attribute, element, escaped, words
from farvolt_app.palette import DARK, LIGHT, Theme, legible_on
from farvolt_app.volt_scale import Scale
from farvolt_app.wiring_tree import Key

UNITS = ("metric", "american")

_CHIP = (60.0, 16.0)
_DEVICE_WIDTH = 50.0
_ICON = 34.0
_LOAD_RIGHT = 76.0
"""Room for volts and drop at the right of a load's box."""
_LEAST_WIDTH = 900.0


def svg(
    plan: Plan, case: CaseResult | None, findings: Sequence[Finding] = (), *, dark: bool = False, units: str = "metric"
) -> str:
    """A plan drawn from its sources at the left to its loads at the right, as a whole SVG document.

    `case`: the numbers to write in, or None to draw the wiring alone. `findings`: of those without a case and of this
    one, the failing and the doubtful are marked. `units`: "metric" or "american", for lengths.
    """
    if units not in UNITS:
        raise ValueError(f'units "{units}"; accepted: {", ".join(UNITS)}')
    return _Drawing(plan, case, findings, DARK if dark else LIGHT, units).document()


class _Drawing:
    def __init__(
        self, plan: Plan, case: CaseResult | None, findings: Sequence[Finding], theme: Theme, units: str
    ) -> None:
        self.plan, self.case, self.theme = plan, case, theme
        self.captions = Captions(plan, case, findings, units)
        self.runs = {one.name: one for one in plan.runs}
        self.devices = {one.name: one for one in plan.devices}
        self.sources = {one.name: one for one in plan.sources}
        self.loads = {one.name: one for one in plan.loads}
        self.plain_ends = _plain_ends(plan)
        self.scale = Scale(plan, case, theme)
        self.used: set[str] = set()
        """Symbols that the legend must explain."""

    def document(self) -> str:
        placed = place(self.plan, self._sizes())
        body = "\n".join(self._body(placed))
        width = max(_LEAST_WIDTH, placed.width)
        head, top = legend.head(self.plan, self.case, self.scale, self.used, width)
        height = top + placed.height
        name, told = self.plan.plan.name, legend.description(self.plan, self.case)
        return (
            '<?xml version="1.0" encoding="UTF-8"?>\n'
            f'<svg xmlns="http://www.w3.org/2000/svg" width="{width:.0f}" height="{height:.0f}" '
            f'viewBox="0 0 {width:.0f} {height:.0f}" role="img" font-family="sans-serif">\n'
            f"<title>{escaped(name)}</title>\n<desc>{escaped(told)}</desc>\n"
            f'<rect width="{width:.0f}" height="{height:.0f}" fill="{self.theme.paper}"/>\n'
            f'{head}\n<g transform="translate(0 {top:.0f})">\n{body}\n</g>\n</svg>\n'
        )

    # Sizes -------------------------------------------------------------------------------------------------------

    def _sizes(self) -> Sizes:
        ways: dict[Key, tuple[float, float]] = {}
        for run in self.plan.runs:
            caption = self.captions.run(run, flipped=False)
            ways[caption.key] = (caption.head_width, caption.body_width)
        for device in self.plan.devices:
            caption = self.captions.device(device, flipped=False)
            ways[caption.key] = (caption.head_width, max(_DEVICE_WIDTH, caption.body_width + _beside(device)))
        sources: dict[Key, float] = {}
        for source in self.plan.sources:
            captions = [self.captions.source(source)]
            if isinstance(source, Solar) and source.array is not None:
                captions.append(self.captions.array(source))
            width = max(max(one.head_width, one.detail_width) for one in captions) + _ICON
            sources["source", source.name] = width + 3 * SLOT_GAP
            ways["source", source.name] = (width, width)
        loads = [self.captions.load(load) for load in self.plan.loads]
        load = max((max(one.head_width, one.detail_width) for one in loads), default=0.0) + 14
        points = {name: self._point_width(name) for name in self.plan.point_names}
        tags = {key: self._tag_width(key) for key in ways}
        return Sizes(ways, points, sources, tags, load + (_LOAD_RIGHT if self.case else 0.0))

    def _point_width(self, name: str) -> tuple[float, float]:
        if name in self.plain_ends:
            return (0.0, 0.0)
        return (self.captions.point(name).head_width, _CHIP[0] if self.case else 0.0)

    def _tag(self, key: Key) -> tuple[Words, tuple[Slot, ...]]:
        """What is written where a way that closes a loop ends: its name and the symbols of that end."""
        run = self.runs.get(key[1]) if key[0] == "run" else None
        text = run.label or run.name if run else key[1]
        slots = self.captions.run(run, flipped=False).at_to if run else ()
        return words(text, DETAIL_SIZE, limit=90), slots

    def _tag_width(self, key: Key) -> float:
        text, slots = self._tag(key)
        return max(text.width, sum(slot.width for slot in slots)) + 8

    # Body --------------------------------------------------------------------------------------------------------

    def _body(self, placed: Layout) -> Iterable[str]:
        for y in placed.unfed_y:
            heading = words("Not fed by any source", 13, bold=True)
            yield element(heading, 26, y + 9, self.theme.ink)
            line = f"M26 {y + 15:.1f}H{placed.width - 16:.1f}"
            yield symbols.path(line, self.theme.faint, width=1, more=' stroke-dasharray="6 4"')
        # Lines that close loops lie below all else, so that what they cross stays whole.
        for way in sorted(placed.ways, key=lambda one: not one.around):
            yield self._way(way)
        for load in placed.loads:
            yield self._load(load)
        for source in placed.sources:
            yield self._source(source)
        for point in placed.points:
            yield self._point(point)

    def _group(self, caption: Caption, parts: Iterable[str]) -> str:
        kind, name = caption.key
        title = f"<title>{escaped(caption.whole)}</title>"
        return f'<g data-kind="{kind}" data-name={attribute(name)} tabindex="0">{title}{"".join(parts)}</g>'

    def _way(self, way: PlacedWay) -> str:
        kind, name = way.key
        if kind == "run":
            caption = self.captions.run(self.runs[name], flipped=way.flipped)
            return self._group(caption, [*self._line(way, self.runs[name]), *self._run(way, caption)])
        if kind == "device":
            caption = self.captions.device(self.devices[name], flipped=way.flipped)
            return self._group(caption, [*self._line(way, None), *self._device(way, caption)])
        caption = self.captions.source(self.sources[name])
        return self._group(caption, [*self._line(way, None), *self._converter(way, caption)])

    def _line(self, way: PlacedWay, run: Run | None) -> Iterable[str]:
        corners = "".join(f"L{x:.1f} {y:.1f}" for x, y in way.around)
        line = f"M{way.x0:.1f} {way.y:.1f}H{way.x1:.1f}{corners}"
        dashes = symbols.RETURN_DASHES if run is not None and run.conducts == "return" else ""
        width = 1.4 + 0.3 * (run.size.area_mm2 * run.parallel) ** 0.5 if run is not None and run.size else 1.8
        if dashes:
            self.used.add("return")
        more = dashes + ' stroke-linejoin="round"'
        yield symbols.path(line, self.theme.ink, width=min(width, 5.0), more=more)
        yield _reach(way.head) + _reach(way.box)

    def _run(self, way: PlacedWay, caption: Caption) -> Iterable[str]:
        left, right = (caption.at_to, caption.at_from) if way.flipped else (caption.at_from, caption.at_to)
        if way.around:
            right = ()
        box = way.box
        x = box.x
        for slot in left:
            yield from self._slot(slot, x + slot.width / 2, way.y)
            x += slot.width
        end = box.x + box.width
        for slot in reversed(right):
            end -= slot.width
            yield from self._slot(slot, end + slot.width / 2, way.y)
        yield from self._heading(caption, way.head.x, way.y - 13)
        yield from self._details(caption, x + (SLOT_GAP if left else 0.0), way.y + 17)
        if way.tag is not None:
            yield from self._tag_of(way, way.tag)
        if way.chassis is not None:
            self.used.add("chassis")
            yield symbols.chassis(way.chassis.x + way.chassis.width / 2, way.y, self.theme)

    def _tag_of(self, way: PlacedWay, tag: Box) -> Iterable[str]:
        text, slots = self._tag(way.key)
        y = way.around[-1][1]
        x = tag.x
        for slot in slots:
            yield from self._slot(slot, x + slot.width / 2, y)
            x += slot.width
        yield element(text, tag.x, y - 9, self.theme.quiet)

    def _slot(self, slot: Slot, x: float, y: float) -> Iterable[str]:
        self.used.add(slot.symbol)
        draw = {"fuse": symbols.fuse, "breaker": symbols.breaker, "chassis": symbols.chassis}[slot.symbol]
        yield draw(x, y, self.theme)
        yield element(slot.text, x, y + 17, self.theme.ink, "middle") if slot.text.shown else ""

    def _device(self, way: PlacedWay, caption: Caption) -> Iterable[str]:
        device = self.devices[caption.key[1]]
        is_open = self.captions.device_state(device) == "open"
        draw = symbols.diode_left if device.kind == "diode" and way.flipped else symbols.DEVICES[device.kind]
        if is_open:
            self.used.add("open")
        beside = _beside(device)
        yield draw(way.box.x + (18 if beside else way.box.width / 2), way.y, self.theme, is_open)
        yield from self._heading(caption, way.head.x, way.y - 13)
        yield from self._details(caption, way.box.x + beside, way.y + 17)
        if way.tag is not None:
            yield from self._tag_of(way, way.tag)

    def _converter(self, way: PlacedWay, caption: Caption) -> Iterable[str]:
        yield symbols.converter(way.box.x + 15, way.y, self.theme)
        yield from self._heading(caption, way.head.x + _ICON, way.y - 13)
        yield from self._details(caption, way.box.x + _ICON, way.y + 17)
        if way.tag is not None:
            yield from self._tag_of(way, way.tag)

    def _source(self, placed: PlacedEnd) -> str:
        source = self.sources[placed.key[1]]
        if placed.is_array and isinstance(source, Solar):
            caption = self.captions.array(source)
        else:
            caption = self.captions.source(source)
        box, theme = placed.box, self.theme
        parts = [
            symbols.path(f"M{placed.x0:.1f} {placed.y:.1f}H{placed.x1:.1f}", theme.ink, width=2),
            symbols.rectangle(box.x, box.y + 3, box.width, box.height - 6, theme.ink, theme.surface, ' rx="4"'),
            symbols.SOURCES[source.kind](box.x + 22, placed.y, theme),
            *self._heading(caption, box.x + _ICON + 8, placed.y - 10),
            *self._details(caption, box.x + _ICON + 8, placed.y + 5),
        ]
        return self._group(caption, parts)

    def _load(self, placed: PlacedEnd) -> str:
        load = self.loads[placed.key[1]]
        caption = self.captions.load(load)
        box, theme = placed.box, self.theme
        parts = [
            symbols.path(f"M{placed.x0:.1f} {placed.y:.1f}H{placed.x1:.1f}", theme.ink, width=1.4),
            symbols.rectangle(box.x, box.y + 2, box.width, box.height - 4, theme.ink, theme.surface),
            *self._heading(caption, box.x + 8, placed.y - 4),
            *self._details(caption, box.x + 8, placed.y + 12),
            *self._load_volts(load, box, placed.y),
        ]
        return self._group(caption, parts)

    def _load_volts(self, load: Load, box: Box, y: float) -> Iterable[str]:
        result = self.captions.loads.get(load.name)
        if result is None:
            return
        right = box.x + box.width - 8
        yield self._chip(right - _CHIP[0], y - 18, result.volts, load.at)
        if result.drop_percent is not None:
            shown = f"{result.drop_percent:.1f}".replace("-", "−")
            drop = words(f"drop {shown} %", DETAIL_SIZE - 0.5)
            yield element(drop, right, y + 13, self.theme.quiet, "end")

    def _point(self, placed: PlacedPoint) -> str:
        caption = self.captions.point(placed.name)
        kind = next((one.kind for one in self.plan.points if one.name == placed.name), "terminals")
        parts = list(self._post(placed, kind))
        if placed.name not in self.plain_ends:
            end = placed.label.x + placed.label.width if placed.label_left else None
            parts += self._heading(caption, placed.label.x, placed.y - 30, end)
            if self.case is not None:
                volts = self.captions.points[placed.name].volts
                parts.append(self._chip(placed.volts.x, placed.y + 7, volts, placed.name))
            parts.append(_reach(placed.label))
        return self._group(caption, parts)

    def _post(self, placed: PlacedPoint, kind: str) -> Iterable[str]:
        """The vertical that ways meet at: a bar for a busbar or fuse block, else a line with a dot at each joint."""
        ink = self.theme.ink
        known = self.captions.points.get(placed.name)
        fill = self.scale.colour(placed.name, known.volts if known else None)
        if kind in ("busbar", "fuse block"):
            width = 10.0 if kind == "busbar" else 14.0
            top, height = placed.top - 14, placed.bottom - placed.top + 28
            rounded = ' rx="3"' if kind == "fuse block" else ""
            yield symbols.rectangle(placed.x - width / 2, top, width, height, ink, fill, rounded)
            return
        if placed.bottom > placed.top:
            yield symbols.path(f"M{placed.x:.1f} {placed.top:.1f}V{placed.bottom:.1f}", ink, width=2)
        for y in placed.joints:
            yield symbols.dot(placed.x, y, 4 if y == placed.y else 2.2, ink, fill if y == placed.y else ink)

    # Pieces ------------------------------------------------------------------------------------------------------

    def _heading(self, caption: Caption, x: float, y: float, end: float | None = None) -> Iterable[str]:
        """The mark of the worst finding with its word, and the name; set flush right where an `end` is given."""
        colour = self.theme.ink
        if caption.mark is not None and caption.mark_word is not None:
            colour = self.theme.alarm if caption.mark == "fail" else self.theme.doubt
            draw = symbols.fails if caption.mark == "fail" else symbols.doubtful
            self.used.add(caption.mark)
            yield draw(x + 8, y - 4.5, self.theme)
            yield element(caption.mark_word, x + MARK_WIDTH, y, colour)
            x += MARK_WIDTH + caption.mark_word.width + 5
        if end is None:
            yield element(caption.name, x, y, self.theme.ink)
        else:
            yield element(caption.name, end, y, self.theme.ink, "end")

    def _details(self, caption: Caption, x: float, y: float) -> Iterable[str]:
        return (element(one, x, y + 14 * at, self.theme.quiet) for at, one in enumerate(caption.details) if one.shown)

    def _chip(self, x: float, y: float, volts: float | None, point: str) -> str:
        """A voltage on its colour of the ramp."""
        width, height = _CHIP
        if volts is None:
            text = words(self.captions.no_volts, DETAIL_SIZE - 0.5)
            frame = ' rx="3" stroke-dasharray="3 2"'
            return symbols.rectangle(x, y, width, height, self.theme.quiet, self.theme.paper, frame) + element(
                text, x + width / 2, y + 12, self.theme.ink, "middle"
            )
        colour = self.scale.colour(point, volts)
        text = words(f"{volts:.2f} V", DETAIL_SIZE, bold=True)
        return symbols.rectangle(x, y, width, height, self.theme.ink, colour, ' rx="3"') + element(
            text, x + width / 2, y + 12, legible_on(colour), "middle"
        )


def _beside(device: Device) -> float:
    """How far the details stand to the right of a symbol that reaches below the line."""
    return 42.0 if device.kind in ("relay", "selector") else 0.0


def _reach(box: Box) -> str:
    """An unseen rectangle, so that a pointer finds the whole of a caption."""
    return (
        f'<rect x="{box.x:.1f}" y="{box.y:.1f}" width="{box.width:.1f}" height="{box.height:.1f}" '
        'fill="none" pointer-events="all"/>'
    )


def _plain_ends(plan: Plan) -> set[str]:
    """Points whose one load has their name and stands beside them: the load's box says it all."""
    with_sources = {source.at for source in plan.sources}
    with_sources.update(source.from_point for source in plan.sources if isinstance(source, Converter))
    loads: dict[str, list[str]] = {}
    for load in plan.loads:
        loads.setdefault(load.at, []).append(load.name)
    return {point for point, names in loads.items() if names == [point] and point not in with_sources}
