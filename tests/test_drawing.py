"""The single-line diagram: nothing overlaps, nothing is lost, nothing from a plan is more than text."""

import itertools
import random
import re
import xml.etree.ElementTree as ElementTree
from dataclasses import replace
from functools import lru_cache
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from farvolt import examples, planfile
from farvolt.plan import CHASSIS, Converter, Plan
from farvolt.results import (
    CaseResult,
    DeviceResult,
    Finding,
    Kind,
    LoadResult,
    PointResult,
    RunResult,
    Severity,
    SourceResult,
    Study,
)  # fmt: skip
from farvolt.study import study
from farvolt_app import drawing, layout
from farvolt_app.layout import Box, Layout, Sizes
from farvolt_app.lettering import words
from farvolt_app.palette import DARK, LIGHT, legible_on, luminance, ramp
from strategies import Wishes, plan_of, random_draft

SVG = "{http://www.w3.org/2000/svg}"
EXAMPLES = ("bird-observatory-cabin", "instrument-repair-van")

SMALL = """
format = 1
[plan]
name = "Small"
nominal = "12 V"
[[points]]
name = "bus"
kind = "busbar"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "5 mohm"
[[runs]]
name = "main"
label = "W01"
from = "bank"
to = "bus"
length = "2 m"
size = "16 mm2"
protection = { type = "terminal fuse", rating = "60 A" }
[[devices]]
name = "pump switch"
kind = "switch"
from = "bus"
to = "switched"
[[runs]]
name = "pump feed"
from = "pump"
to = "switched"
length = "5 m"
size = "2.5 mm2"
return = "chassis"
protection = { type = "thermal breaker", rating = "10 A", end = "to" }
[[runs]]
name = "bond"
from = "bus"
to = "chassis"
length = "1 m"
size = "16 mm2"
[[loads]]
name = "water pump"
at = "pump"
power = "60 W"
"""


def small_case() -> CaseResult:
    """Invented numbers, so that what is drawn can be told from what is computed."""
    volts = {"bus": 12.5, "bank": 12.6, "switched": 12.4, "pump": 10.2}
    amps = {"main": 5.5, "pump feed": -5.25, "bond": 5.0}
    return CaseResult(
        name="Everything on", solved=True, share_held=1.0, margin=None, imbalance_A=0.0,
        power_in_W=70.0, power_loads_W=60.0, power_lost_W=10.0,
        points=tuple(PointResult(name, value, 0.0, value) for name, value in volts.items()),
        sources=(SourceResult("bank", 12.6, 5.5, 69.3, None),),
        runs=tuple(
            RunResult(name, None if name == "bond" else value, value, 0.01, 0.01, 0.15, 0.6, 40.0, 25.0)
            for name, value in amps.items()
        ),
        devices=(DeviceResult("pump switch", 5.25, 0.01),),
        loads=(LoadResult("water pump", 10.2, 5.25, 53.55, 2.4, 20.0),),
    )  # fmt: skip


def unfed(case: CaseResult) -> CaseResult:
    """The case as the solver gives it where it does not hold."""
    return replace(
        case, solved=False, share_held=0.625,
        points=tuple(PointResult(one.name, None, None, None) for one in case.points),
        sources=tuple(SourceResult(one.name, None, None, None, None) for one in case.sources),
        runs=tuple(replace(one, feed_A=None, return_A=None, drop_V=None, loss_W=None) for one in case.runs),
        devices=tuple(DeviceResult(one.name, None, None) for one in case.devices),
        loads=tuple(LoadResult(one.name, None, None, None, None, None) for one in case.loads),
    )  # fmt: skip


def finding(severity: Severity, kind: Kind, subject: str, case: str | None = None) -> Finding:
    return Finding(
        "rule.name", severity, subject, kind, case, None, None, None, "What is wrong.", "common practice", ()
    )


@lru_cache
def studied(name: str) -> Study:
    file = planfile.read(examples.path(name))
    return study(file.plan, file.folder)


def root_of(svg: str) -> ElementTree.Element:
    return ElementTree.fromstring(svg.encode("utf-8"))


def groups(svg: str) -> dict[tuple[str, str], ElementTree.Element]:
    """The drawn entries by kind and name; fails where one is drawn twice."""
    found: dict[tuple[str, str], ElementTree.Element] = {}
    for group in root_of(svg).iter(f"{SVG}g"):
        if "data-kind" in group.attrib:
            key = group.attrib["data-kind"], group.attrib["data-name"]
            assert key not in found
            found[key] = group
    return found


def shown(group: ElementTree.Element) -> list[str]:
    """What can be read in a group, without its titles."""
    return ["".join(one.itertext()) for one in group.iter(f"{SVG}text")]


def drawn(text: str = SMALL, case: CaseResult | None = None, **more: Any) -> dict[tuple[str, str], ElementTree.Element]:
    return groups(drawing.svg(planfile.parse(text), case, **more))


def some_sizes(plan: Plan, chance: random.Random) -> Sizes:
    """Widths of all sorts: a layout has to hold whatever is written."""
    keys = [(kind, one.name) for kind in ("run", "device", "source") for one in getattr(plan, f"{kind}s")]
    ways = {key: (chance.uniform(40, 240), chance.uniform(50, 240)) for key in keys}
    points = {name: chance.choice(((0.0, 0.0), (chance.uniform(5, 180), 60.0))) for name in plan.point_names}
    sources = {key: chance.uniform(60, 220) for key in keys}
    return Sizes(ways, points, sources, {key: chance.uniform(20, 120) for key in keys}, 230.0)


def segments(placed: Layout) -> list[tuple[Box, set[Box]]]:
    """Each stretch of the lines that close loops as a thin box, and the boxes it may touch: those of its own way."""
    found = []
    for way in placed.ways:
        own = {box for box in (way.head, way.box, way.tag) if box is not None}
        for (x0, y0), (x1, y1) in itertools.pairwise(way.around):
            found.append((Box(min(x0, x1), min(y0, y1), abs(x1 - x0) + 0.1, abs(y1 - y0) + 0.1), own))
    return found


def check_layout(plan: Plan, chance: random.Random) -> None:
    placed = layout.place(plan, some_sizes(plan, chance))
    boxes = [box for box in placed.boxes() if box.width > 0]
    for one, other in itertools.combinations(boxes, 2):
        assert not one.overlaps(other)
    for box in boxes:
        assert box.x >= 0
        assert box.x + box.width <= placed.width
        assert box.y >= 0
        assert box.y + box.height <= placed.height
    for stretch, own in segments(placed):
        assert not [box for box in boxes if box not in own and box.overlaps(stretch)]
    for point in placed.points:
        upright = Box(point.x - 0.5, point.top, 1, point.bottom - point.top + 0.1)
        assert not [box for box in boxes if box.overlaps(upright)]


# Placing ---------------------------------------------------------------------------------------------------------


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(st.integers(0, 10**6))
def test_nothing_overlaps_and_no_line_of_a_loop_crosses_a_box(seed: int) -> None:
    chance = random.Random(seed)
    check_layout(plan_of(random_draft(chance, Wishes(points=(3, 25), loops=5))), chance)


@pytest.mark.parametrize("name", EXAMPLES)
def test_nothing_overlaps_in_the_examples(name: str) -> None:
    check_layout(studied(name).plan, random.Random(name))


def test_runs_leave_a_busbar_in_the_order_of_the_file() -> None:
    plan = studied("instrument-repair-van").plan
    placed = layout.place(plan, some_sizes(plan, random.Random(1)))
    feeds = [run.name for run in plan.runs if run.from_point == "living block"]
    assert len(feeds) > 5
    by_height = sorted((way for way in placed.ways if way.key[1] in feeds), key=lambda way: way.y)
    assert [way.key[1] for way in by_height] == feeds


def test_the_reference_source_stands_at_the_far_left_and_loads_at_the_right() -> None:
    plan = studied("bird-observatory-cabin").plan
    placed = layout.place(plan, some_sizes(plan, random.Random(2)))
    lefts = {one.key[1]: one.box.x for one in placed.sources}
    assert lefts["shed bank"] == min(lefts.values())
    assert min(one.box.x for one in placed.loads) >= max(point.x for point in placed.points)


def test_a_charger_and_its_cable_stand_left_of_the_bus_they_deliver_to() -> None:
    plan = studied("instrument-repair-van").plan
    placed = layout.place(plan, some_sizes(plan, random.Random(3)))
    x = {point.name: point.x for point in placed.points}
    assert x["alternator charger"] < x["main bus"]
    assert x["mains charger"] < x["main bus"]
    assert x["bank"] < x["main bus"] < x["living block"]


def test_a_feed_is_followed_before_a_return_alone() -> None:
    run = '[[runs]]\nname = "{0}"\nfrom = "bus"\nto = "far"\nlength = "1 m"\nsize = "4 mm2"\ncarries = "{0}"\n'
    plan = planfile.parse(SMALL + run.format("return") + run.format("feed"))
    around = {way.key[1]: bool(way.around) for way in layout.place(plan, some_sizes(plan, random.Random(9))).ways}
    assert around["return"]
    assert not around["feed"]


def test_what_delivers_to_a_later_bus_has_room_beside_the_bars_before_it() -> None:
    run = '[[runs]]\nname = "{0}"\nfrom = "{1}"\nto = "{2}"\nlength = "1 m"\nsize = "4 mm2"\n'
    runs = [("b", "bus", "far bus"), ("c", "dock", "far bus"), ("d", "far bus", "lamp"), ("e", "bus", "last")]
    charger = '[[sources]]\nname = "charger"\nkind = "charger"\nat = "dock"\nvolts = "14 V"\namps = "9 A"\n'
    lamps = '[[loads]]\nname = "lamp"\nat = "lamp"\npower = "9 W"\n[[loads]]\nname = "l"\nat = "last"\npower = "9 W"\n'
    plan = planfile.parse(SMALL + "".join(run.format(*one) for one in runs) + charger + lamps)
    check_layout(plan, random.Random(8))
    x = {point.name: point.x for point in layout.place(plan, some_sizes(plan, random.Random(5))).points}
    assert x["bus"] < x["dock"] < x["far bus"] < x["lamp"]


def test_a_chain_of_many_points_is_placed() -> None:
    more = '[[runs]]\nname = "r{0}"\nfrom = "p{0}"\nto = "p{1}"\nlength = "1 m"\nsize = "4 mm2"\n'
    runs = "".join(more.format(n, n + 1) for n in range(1500))
    plan = planfile.parse(SMALL + runs.replace('"p0"', '"pump"'))
    placed = layout.place(plan, some_sizes(plan, random.Random(4)))
    chain = [way for way in placed.ways if way.key[1].startswith("r")]
    assert len(chain) == 1500
    assert len({way.y for way in chain}) == 1


# The document ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("dark", [False, True])
@pytest.mark.parametrize("name", EXAMPLES)
def test_every_entry_is_drawn_once_and_can_be_reached_by_keyboard(name: str, dark: bool) -> None:
    found = studied(name)
    plan = found.plan
    entries = groups(drawing.svg(plan, found.cases[0], found.findings, dark=dark))
    expected = {("point", point) for point in plan.point_names}
    expected |= {(kind, one.name) for kind in ("run", "device", "source", "load") for one in getattr(plan, f"{kind}s")}
    assert set(entries) == expected
    for group in entries.values():
        assert group.attrib["tabindex"] == "0"
        title = group.find(f"{SVG}title")
        assert title is not None
        assert title.text


def test_the_document_stands_alone() -> None:
    found = studied("instrument-repair-van")
    svg = drawing.svg(found.plan, found.cases[0], found.findings)
    root = root_of(svg)
    assert root.tag == f"{SVG}svg"
    assert root.attrib["role"] == "img"
    assert root.attrib["viewBox"] == f"0 0 {root.attrib['width']} {root.attrib['height']}"
    assert [one.tag for one in root][:2] == [f"{SVG}title", f"{SVG}desc"]
    drawn_with = {one.tag.removeprefix(SVG) for one in root.iter()}
    assert drawn_with <= {"svg", "title", "desc", "g", "path", "rect", "circle", "text", "tspan"}
    attributes = {name for one in root.iter() for name in one.attrib}
    assert not [name for name in attributes if name.startswith("on") or "href" in name or name == "style"]
    assert "url(" not in svg


def test_the_same_plan_is_drawn_the_same() -> None:
    found = studied("bird-observatory-cabin")
    again = planfile.parse(examples.text("bird-observatory-cabin"))
    assert drawing.svg(found.plan, found.cases[1]) == drawing.svg(again, found.cases[1])


def test_a_hundred_runs_keep_their_text_legible() -> None:
    runs = "".join(
        f'[[runs]]\nname = "run {n}"\nfrom = "bus"\nto = "end {n}"\nlength = "3 m"\nsize = "4 mm2"\n'
        f'[[loads]]\nname = "load {n}"\nat = "end {n}"\npower = "5 W"\n'
        for n in range(100)
    )
    svg = drawing.svg(planfile.parse(SMALL + runs), None)
    sizes = [float(one.attrib["font-size"]) for one in root_of(svg).iter(f"{SVG}text")]
    assert min(sizes) >= 10
    assert float(root_of(svg).attrib["height"]) > 100 * 40
    assert len(groups(svg)) == len(drawn()) + 300


HOSTILE = (
    "<script>alert(1)</script>", '"><b>bold</b>&amp;', "]]> <!-- &", "' onload='x", "تغذية الثلاجة", "מתג ראשי",
    "w" * 200, "配線 💡", "=1+1", "**star** $x$",
)  # fmt: skip


@pytest.mark.parametrize("name", HOSTILE)
def test_text_of_a_plan_is_only_text(name: str) -> None:
    plain = planfile.parse(SMALL)
    renamed = plain.model_copy(update={
        "plan": plain.plan.model_copy(update={"name": name}),
        "runs": tuple(one.model_copy(update={"name": f"{one.name}{name}", "label": None}) for one in plain.runs),
        "loads": tuple(one.model_copy(update={"name": name}) for one in plain.loads),
        "devices": tuple(one.model_copy(update={"name": name}) for one in plain.devices),
        "sources": tuple(one.model_copy(update={"name": name}) for one in plain.sources),
    })  # fmt: skip
    told = replace(finding("fail", "load", name), message=f"{name} fails")
    svg = drawing.svg(renamed, None, [told])
    entries = groups(svg)
    assert {("load", name), ("device", name), ("source", name), ("run", f"main{name}")} <= set(entries)
    assert {one.tag for one in root_of(svg).iter()} <= {one.tag for one in root_of(drawing.svg(plain, None)).iter()} | {
        f"{SVG}tspan"
    }
    title = entries["load", name].find(f"{SVG}title")
    assert title is not None
    assert f"{name} fails" in str(title.text)


def test_a_character_that_xml_cannot_hold_is_replaced() -> None:
    svg = drawing.svg(planfile.parse(SMALL.replace('"water pump"', '"pump\\uffff"')), None)
    assert ("load", "pump\N{REPLACEMENT CHARACTER}") in groups(svg)


def test_a_long_name_is_cut_and_kept_whole_in_its_title() -> None:
    name = "a very long name " * 11 + "that ends"
    group = drawn(SMALL.replace("water pump", name))["load", name]
    text = next(one for one in group.iter(f"{SVG}text"))
    assert str(text[0].tail).endswith("…")
    assert text[0].tag == f"{SVG}title"
    assert text[0].text == name


@given(st.text(max_size=60), st.floats(30, 300))
def test_cut_text_is_no_wider_than_its_limit(text: str, limit: float) -> None:
    piece = words(text, 12, limit=limit)
    assert piece.width <= limit
    assert piece.shown == piece.whole or piece.whole.startswith(piece.shown[:-1])


# What it says ----------------------------------------------------------------------------------------------------


def test_the_numbers_of_the_case_are_written_in() -> None:
    entries = drawn(case=small_case())
    assert shown(entries["run", "main"]) == ["60 A", "W01 main", "16 mm² · 2 m", "→ 5.5 A · 0.15 V"]
    assert shown(entries["load", "water pump"]) == ["water pump", "60 W · 5.25 A", "10.20 V", "drop 20.0 %"]
    assert "delivers 5.5 A" in shown(entries["source", "bank"])
    assert shown(entries["point", "bus"]) == ["bus", "12.50 V"]
    title = entries["run", "main"].find(f"{SVG}title")
    assert title is not None
    for told in ("from bank to bus", "terminal fuse 60 A", "loss 0.6 W", "40 °C", "may carry 25 A"):
        assert told in str(title.text)


def test_an_arrow_points_the_way_the_current_flows_on_paper() -> None:
    # The pump feed is written from the pump, so its current is negative; on paper it still flows to the right.
    assert "→ 5.25 A · 0.15 V" in shown(drawn(case=small_case())["run", "pump feed"])
    case = small_case()
    turned = replace(case, runs=tuple(replace(one, feed_A=5.25) for one in case.runs))
    assert "← 5.25 A · 0.15 V" in shown(drawn(case=turned)["run", "pump feed"])


def test_protection_stands_at_its_end_of_the_run() -> None:
    plan = planfile.parse(SMALL)
    placed = {way.key[1]: way for way in layout.place(plan, some_sizes(plan, random.Random(5))).ways}
    assert not placed["main"].flipped
    assert placed["pump feed"].flipped
    entries = drawn()
    rating = {name: next(iter(entries["run", name].iter(f"{SVG}text"))) for name in ("main", "pump feed")}
    head = {name: list(entries["run", name].iter(f"{SVG}text"))[1] for name in rating}
    # Both are at the end nearest to the battery, which is drawn at the left: `from` of one run, `to` of the other.
    for name, text in rating.items():
        assert float(text.attrib["x"]) - float(head[name].attrib["x"]) < 40
    assert rating["pump feed"].text == "10 A"


def test_lengths_are_written_in_feet_for_american_readers() -> None:
    # 5 m / 0.3048 m: the international foot of 1959.
    assert "2.5 mm² · 16.4 ft" in shown(drawn(units="american")["run", "pump feed"])
    with pytest.raises(ValueError, match="metric, american"):
        drawn(units="furlongs")


def test_failing_and_doubtful_are_marked_by_a_word_and_a_shape_of_their_own() -> None:
    marks = [finding("fail", "run", "main"), finding("warn", "load", "water pump"), finding("note", "point", "bus")]
    entries = drawn(case=small_case(), findings=[*marks, finding("warn", "run", "main")])
    assert "fails" in shown(entries["run", "main"])
    assert "doubtful" not in shown(entries["run", "main"])
    assert "doubtful" in shown(entries["load", "water pump"])
    assert not {"fails", "doubtful"} & set(shown(entries["point", "bus"]))
    triangle, diamond = new_shapes(entries, ("run", "main")), new_shapes(entries, ("load", "water pump"))
    assert triangle
    assert diamond
    assert triangle.isdisjoint(diamond)


def new_shapes(entries: dict[tuple[str, str], ElementTree.Element], key: tuple[str, str]) -> set[str]:
    """The closed outlines in a group that are not there without findings, wherever they stand."""

    def outlines(group: ElementTree.Element) -> set[str]:
        paths = (one.attrib["d"] for one in group.iter(f"{SVG}path"))
        return {re.sub(r"^M\S+ [\d.]+", "", path) for path in paths if path.endswith("Z")}

    return outlines(entries[key]) - outlines(drawn(case=small_case())[key])


@pytest.mark.parametrize(("case", "marked"), [("Everything on", True), (None, True), ("Another case", False)])
def test_only_findings_of_the_case_drawn_are_marked(case: str | None, marked: bool) -> None:
    entries = drawn(case=small_case(), findings=[finding("fail", "device", "pump switch", case)])
    assert ("fails" in shown(entries["device", "pump switch"])) is marked


def test_findings_without_a_case_are_marked_on_the_wiring_alone() -> None:
    told = [finding("fail", "source", "bank"), finding("fail", "run", "main", "Everything on")]
    entries = drawn(findings=told)
    assert "fails" in shown(entries["source", "bank"])
    assert "fails" not in shown(entries["run", "main"])


def test_an_open_switch_looks_and_reads_open() -> None:
    def switch(text: str) -> tuple[list[str], list[str]]:
        group = drawn(text)["device", "pump switch"]
        return shown(group), [one.attrib["d"] for one in group.iter(f"{SVG}path")]

    closed_text, closed = switch(SMALL)
    open_text, opened = switch(SMALL.replace('kind = "switch"', 'kind = "switch"\nstate = "open"'))
    assert "switch, closed" in closed_text
    assert "switch, open" in open_text
    assert closed != opened


def test_the_state_of_a_device_is_that_of_the_case_drawn() -> None:
    text = SMALL + '[[cases]]\nname = "Everything on"\ndevices = { "pump switch" = "open" }\n'
    assert "switch, open" in shown(drawn(text, case=small_case())["device", "pump switch"])
    assert "switch, closed" in shown(drawn(text)["device", "pump switch"])


def test_returns_through_the_chassis_end_in_its_symbol() -> None:
    stem = re.compile(r"M\S+ \S+v11M")
    entries = drawn()
    ends = {name for (kind, name), group in entries.items() if kind == "run" and any(
        stem.match(one.attrib["d"]) for one in group.iter(f"{SVG}path")
    )}  # fmt: skip
    assert ends == {"pump feed", "bond"}


def test_a_converter_joins_the_point_it_draws_from_to_the_point_it_feeds() -> None:
    plan = studied("bird-observatory-cabin").plan
    converter = next(one for one in plan.sources if isinstance(one, Converter))
    placed = layout.place(plan, some_sizes(plan, random.Random(6)))
    way = next(one for one in placed.ways if one.key == ("source", converter.name))
    x = {point.name: (point.x, point.y) for point in placed.points}
    assert (way.x0, way.x1) == (x[converter.from_point][0], x[converter.at][0])
    assert way.y == x[converter.at][1]


def test_an_unfed_part_stands_below_and_says_so() -> None:
    text = SMALL + '[[runs]]\nname = "lost"\nfrom = "a"\nto = "b"\nlength = "1 m"\nsize = "4 mm2"\n'
    plan = planfile.parse(text)
    svg = drawing.svg(plan, None)
    assert "Not fed by any source" in shown(root_of(svg))
    assert "Not fed by any source" not in shown(root_of(drawing.svg(planfile.parse(SMALL), None)))
    placed = layout.place(plan, some_sizes(plan, random.Random(7)))
    lost = {point.name: point.y for point in placed.points}
    assert min(lost["a"], lost["b"]) > placed.unfed_y[0] > max(y for name, y in lost.items() if name not in "ab")


def test_a_case_that_gives_way_is_drawn_without_voltages() -> None:
    svg = drawing.svg(planfile.parse(SMALL), unfed(small_case()))
    read = shown(root_of(svg))
    assert any("Gives way at 62.5 % of its loads" in line for line in read)
    assert "not solved" in shown(groups(svg)["load", "water pump"])
    assert not [line for line in read if re.fullmatch(r"\d+\.\d\d V", line)]


def test_a_source_alone_is_drawn() -> None:
    alone = 'format = 1\n[plan]\nnominal = "12 V"\n[[sources]]\nname = "bank"\nkind = "battery"\nat = "bank"\n'
    entries = drawn(alone + 'emf = "12.8 V"\nresistance = "5 mohm"\n')
    assert set(entries) == {("source", "bank"), ("point", "bank")}


@pytest.mark.parametrize("seed", range(8))
def test_solved_random_plans_are_drawn_whole(seed: int) -> None:
    plan = plan_of(random_draft(random.Random(seed), Wishes(chassis=1, converters=1, loops=4)))
    found = study(plan)
    entries = groups(drawing.svg(plan, found.cases[0], found.findings))
    assert {name for kind, name in entries if kind == "run"} == {run.name for run in plan.runs}
    assert {name for kind, name in entries if kind == "point"} == set(plan.point_names) - {CHASSIS}


# Colour ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("theme", [LIGHT, DARK])
def test_the_ramp_reads_by_lightness_alone(theme: object) -> None:
    """In steps that grey print and every form of colour blindness keep in order."""
    lights = [luminance(ramp(theme, at / 20)) for at in range(21)]  # type: ignore[arg-type]
    steps = [after - before for before, after in itertools.pairwise(lights)]
    assert all(step > 0 for step in steps) or all(step < 0 for step in steps)
    assert max(lights) > 6 * min(lights)


@pytest.mark.parametrize("theme", [LIGHT, DARK])
def test_text_stands_out_from_what_is_behind_it(theme: object) -> None:
    """Contrast of at least 4.5 to 1: WCAG 2.2, success criterion 1.4.3 (AA)."""

    def contrast(one: str, other: str) -> float:
        low, high = sorted((luminance(one), luminance(other)))
        return (high + 0.05) / (low + 0.05)

    inks = [getattr(theme, name) for name in ("ink", "quiet", "alarm", "doubt")]
    grounds = [getattr(theme, name) for name in ("paper", "surface")]
    assert min(contrast(ink, ground) for ink in inks for ground in grounds) >= 4.5
    colours = [ramp(theme, at / 50) for at in range(51)]  # type: ignore[arg-type]
    assert min(contrast(legible_on(colour), colour) for colour in colours) >= 4.5


def test_relative_luminance_is_that_of_the_standard() -> None:
    """WCAG 2.2, definition of relative luminance: black 0, white 1, and the weights of the three primaries."""
    assert luminance("#000000") == 0
    assert luminance("#ffffff") == pytest.approx(1)
    primaries = [luminance(one) for one in ("#ff0000", "#00ff00", "#0000ff")]
    assert primaries == pytest.approx([0.2126, 0.7152, 0.0722])


def test_less_voltage_is_drawn_darker_on_white() -> None:
    def light(point: str) -> float:
        group = drawn(case=small_case())["point", point]
        return luminance(next(one.attrib["fill"] for one in group.iter(f"{SVG}circle")))

    assert light("pump") < light("switched") < light("bank")
