"""The shopping list: every conductor with its ends, protection and colours, reels, prices, and hints to save."""

import math
from typing import Any

import pytest

from farvolt import examples, planfile, price_file, shopping, upsizing
from farvolt.cable_kinds import bought
from farvolt.fittings import fittings, tube
from farvolt.interim import with_sizes
from farvolt.plan import Plan
from farvolt.prices import PriceList
from farvolt.rulebook import load
from farvolt.shopping import Bill, Line, Wanted, bill
from farvolt.study import study
from farvolt.tables import read
from farvolt_data import ROOT
from wiring import bank, cable, fuse, lamp, plan_of

HEAD = "item,size,material,strand,type,rating_A,stud,per,reel_m,price,currency\n"


def list_of(plan: Plan, prices: PriceList | None = None, spare: float = 0.0, **more: Any) -> Bill:
    """The list of a plan, without spare length."""
    return bill(plan, load(plan.plan.rulebook), Wanted(spare, prices, **more))


def priced(*rows: str) -> PriceList:
    """A price list of some rows."""
    return price_file.parse((HEAD + "\n".join(rows) + "\n").encode())


def lines(found: Bill, item: str) -> list[Line]:
    """The lines of an item."""
    return [one for one in found.lines if one.item == item]


def counted(found: Bill, item: str) -> dict[tuple[str, str], float]:
    """Quantities of an item by size or rating and by kind."""
    return {(one.size, one.kind): one.quantity for one in lines(found, item)}


def test_every_metre_of_every_conductor_is_bought() -> None:
    """By hand: 3 m both ways twice in parallel, red and black apart; the tap through the chassis has a feed only."""
    runs = [
        cable("feed", "bank", "a", "3 m", "10 mm2", parallel=2),
        cable("tap", "a", "b", "2 m", "4 mm2", **{"return": "chassis"}),
        cable("strap", "bank", "chassis", "0.5 m", "16 mm2", colour="green"),
    ]
    found = list_of(plan_of(runs, [lamp("lamp", "b")]))
    assert {(one.size, one.colour): one.quantity for one in lines(found, "cable by the metre")} == pytest.approx({
        ("10 mm2", "red"): 6, ("10 mm2", "black"): 6, ("4 mm2", "red"): 2, ("16 mm2", "green"): 0.5,
    })  # fmt: skip
    labels = {piece.conductor.label for one in found.cables for piece in one.pieces}
    assert labels == {"feed.1", "feed.2", "tap", "strap"}
    assert lines(found, "wire label")[0].quantity == 2 * 6


def test_a_measured_cable_is_bought_too_and_capitals_are_no_other_colour() -> None:
    """Without a size the metres are still listed; "Red" and "red" are one; a free size is bought as the interim one."""
    runs = [
        cable("known", "bank", "a", "3 m", "4 mm2", colour="Red"), cable("like it", "a", "b", "3 m", "4 mm2"),
        cable("measured", "bank", "c", "4 m", None, resistance="12 mohm"), cable("free", "c", "d", "1 m", None),
    ]  # fmt: skip
    found = study(plan_of(runs))
    kinds = [(one.kind.size_name, one.kind.colour, one.needed_m) for one in shopping.of_study(found).cables]
    free = found.interim["free"].name
    assert kinds == [
        ("", "black", 4), ("", "red", 4), (free, "black", 1), (free, "red", 1),
        ("4 mm2", "black", 6), ("4 mm2", "Red", 6),
    ]  # fmt: skip
    assert lines(shopping.of_study(found), "cable by the metre")[0].size == "size not stated"


def test_spare_is_added_to_every_piece() -> None:
    """10 % on 3.33 m is 3.663 m, cut at 3.67 m; needed stays what it is."""
    (red, black) = list_of(plan_of([cable("feed", "bank", "a", "3.33 m")]), spare=0.1).cables
    assert [one.needed_m for one in (red, black)] == pytest.approx([3.33, 3.33])
    assert red.pieces[0].cut_m == 3.67


def test_links_of_a_battery_are_bought_too() -> None:
    """Three strings have two links in each pole of 0.3 m, with a lug at both ends."""
    source = bank(strings=3, link={"length": "0.3 m", "size": "50 mm2"})
    found = list_of(plan_of([], sources=[source], points=[{"name": "bank", "kind": "battery", "stud": "M8"}]))
    assert [(one.size, one.quantity) for one in lines(found, "cable by the metre")] == [("50 mm2", 0.6)] * 2
    assert counted(found, "lug") == {("50 mm2", "stud M8"): 8}
    assert lines(found, "battery string")[0].quantity == 3


def test_lugs_go_on_studs_and_ferrules_elsewhere() -> None:
    """A busbar's stud as stated, a device's and the chassis' not known, a load's terminals none."""
    runs = [
        cable("main", "bank", "bar", "1 m", "25 mm2"), cable("onward", "bar", "stud", "1 m", "10 mm2"),
        cable("lead", "far", "lamp", "2 m", "2.5 mm2"), cable("bond", "bar", "chassis", "1 m", "16 mm2"),
    ]  # fmt: skip
    points = [{"name": "bank", "kind": "battery"}, {"name": "bar", "kind": "busbar", "stud": '3/8"'}]
    devices = [{"name": "switch", "kind": "switch", "from": "stud", "to": "far", "continuous": "100 A"}]
    found = list_of(plan_of(runs, [lamp("lamp", "lamp")], points=points, devices=devices))
    assert counted(found, "lug") == {
        ("2.5 mm2", "stud not stated"): 2, ("10 mm2", "stud 3/8 in"): 2, ("10 mm2", "stud not stated"): 2,
        ("16 mm2", "stud 3/8 in"): 1, ("16 mm2", "stud not stated"): 1,
        ("25 mm2", "stud 3/8 in"): 2, ("25 mm2", "stud not stated"): 2,
    }  # fmt: skip
    assert counted(found, "ferrule or terminal") == {("2.5 mm2", ""): 2}
    assert (lines(found, "switch")[0].size, lines(found, "switch")[0].note) == ("100 A", "switch")


def test_heat_shrink_by_the_number_of_lugs() -> None:
    """Four lugs of 25 mm2 at 45 mm each are 0.18 m; ferrules have none."""
    points = [{"name": "bank", "stud": "M8"}, {"name": "bar", "stud": "M8"}]
    found = list_of(plan_of([cable("main", "bank", "bar", size="25 mm2"), cable("lead", "a", "b", size="4 mm2")],
                            points=points))  # fmt: skip
    (line,) = lines(found, "heat-shrink")
    assert (line.size, line.quantity, line.unit) == ("25 mm2", pytest.approx(0.18), "m")
    assert "common practice" in line.note


def test_a_splice_joins_what_meets_there() -> None:
    """Three conductors of each pole are joined by two connectors, the thicker size each; two by one."""
    runs = [
        cable("in", "bank", "joint", size="6 mm2"), cable("left", "joint", "a", size="2.5 mm2"),
        cable("right", "joint", "b", size="4 mm2"),
    ]  # fmt: skip
    found = list_of(plan_of(runs, points=[{"name": "joint", "kind": "splice"}]))
    assert counted(found, "splice connector") == {("6 mm2", ""): 2, ("4 mm2", ""): 2}


def test_fuses_with_holders_unless_a_fuse_block_holds_them_and_a_spare_of_each() -> None:
    """In the block: no holder and a terminal. In line: a holder, and a strip fuse parts the cable between two lugs."""
    runs = [
        cable("feeder", "bank", "block", size="16 mm2", protection=fuse("60 A", kind="strip")),
        cable("pump", "block", "a", size="2.5 mm2", protection=fuse("10 A")),
        cable("lamps", "block", "b", size="2.5 mm2", protection=fuse("10 A")),
        cable("radio", "bank", "c", size="2.5 mm2", protection=fuse("10 A")),
    ]
    points = [{"name": "bank", "stud": "M8"}, {"name": "block", "kind": "fuse block", "stud": "M6", "rating": "100 A"}]
    found = list_of(plan_of(runs, points=points))
    assert counted(found, "fuse") == {("10 A", "blade"): 3, ("60 A", "strip"): 1}
    assert counted(found, "spare fuse") == {("10 A", "blade"): 1, ("60 A", "strip"): 1}
    assert counted(found, "in-line holder") == {("10 A", "blade"): 1}
    assert counted(found, "holder with studs") == {("60 A", "strip"): 1}
    assert counted(found, "lug")["16 mm2", "stud M5"] == 2
    assert counted(found, "lug")["16 mm2", "stud M6"] == 2
    assert counted(found, "ferrule or terminal") == {("2.5 mm2", ""): 2 * 2 + 2 * 2 + 2}
    assert counted(found, "splice connector") == {("2.5 mm2", ""): 1}
    assert counted(found, "fuse block") == {("100 A", "stud M6"): 1}


def test_every_type_of_protection_has_a_mounting() -> None:
    """A type that joins the table of types joins that of mountings."""
    from farvolt.protection_types import protection_type_names

    rows = read(ROOT / "protection" / "mounting.csv")
    assert tuple(row["type"] for row in rows) == protection_type_names()


def test_colours_by_rulebook_and_by_run() -> None:
    """Red and black; yellow returns under the rulebook of small craft in the US; a run's own colour is its feed's."""
    runs = [cable("one", "bank", "a"), cable("two", "bank", "b", colour="brown")]
    for rulebook, back in (("small-craft-iso", "black"), ("small-craft-us", "yellow"), ("cabin-nec", "black")):
        plan = plan_of(runs, rulebook=rulebook)
        colours = [(one.pole, one.kind.colour) for one in bought(plan, load(rulebook))]
        assert colours == [("feed", "red"), ("return", back), ("feed", "brown"), ("return", back)]


def test_reels_and_prices_by_hand() -> None:
    """Three feeds of 4 m and returns likewise: 12 m from a reel of 15 m (12.00), not two of 10 m (16.00), a colour."""
    prices = priced("cable,10 mm2,copper,,,,,reel,10,8,EUR", "cable,10 mm2,copper,,,,,reel,15,12,EUR",
                    "label,,,,,,,piece,,0.1,EUR")  # fmt: skip
    found = list_of(plan_of([cable(name, "bank", name, "4 m") for name in "abc"]), prices)
    reels = lines(found, "cable, reel of 15 m")
    assert [(one.quantity, one.unit_price, one.unit) for one in reels] == [(1, 12, "reels"), (1, 12, "reels")]
    assert [one.cutting.reels[0].offcut_m for one in found.cables] == [3, 3]
    assert found.total == pytest.approx(24 + 12 * 0.1)
    assert found.without_price == len([one for one in found.lines if one.unit_price is None])
    assert all(one.price is None for one in lines(found, "ferrule or terminal"))


def test_what_no_reel_holds_is_asked_for_in_one_length() -> None:
    """12 m from reels of 10 m: never joined, no price, and said why."""
    prices = priced("cable,10 mm2,copper,,,,,reel,10,8,EUR")
    (line, _) = lines(list_of(plan_of([cable("long", "bank", "a", "12 m")]), prices), "cable in one length")
    assert (line.quantity, line.price) == (12, None)
    assert line.note.startswith("long: longer than any reel")


def test_reels_on_offer_without_a_price_list() -> None:
    """4 + 4 m: one reel of 10 m of each colour rather than two of 5 m, which have the same length in more reels."""
    found = list_of(plan_of([cable(name, "bank", name, "4 m") for name in "ab"]), reels_m=(5.0, 10.0))
    assert [one.quantity for one in lines(found, "cable, reel of 10 m")] == [1, 1]
    assert found.total == 0


def test_the_whole_list_of_an_example_has_prices_in_the_list_shipped() -> None:
    """All but the apparatus, which is the user's to look up; the list is the interim sizes' where none is stated."""
    for name in examples.names():
        found = shopping.of_study(study(planfile.parse(examples.text(name))), Wanted(prices=price_file.example()))
        missing = {one.item for one in found.lines if one.price is None}
        assert missing <= {"battery string", "charger", "converter", "solar controller", "solar module"}
        assert found.total == pytest.approx(math.fsum(one.price or 0 for one in found.lines))


def test_lugs_and_terminals_are_two_for_each_conductor_and_those_at_protection() -> None:
    """Counted another way, on both examples: 2 ends, and the joints of each protection that no block holds."""
    joints = {row["type"]: int(row["joints"]) for row in read(ROOT / "protection" / "mounting.csv")}
    for name in examples.names():
        plan = planfile.parse(examples.text(name))
        found = study(plan)
        plan = with_sizes(plan, found.interim)
        conductors = [one for one in bought(plan, found.rulebook) if one.kind.size is not None]
        blocks = {one.name for one in plan.points if one.kind == "fuse block"}
        extra = sum(
            joints[one.type] * run.parallel
            for run in plan.runs
            for one in run.protections
            if (run.from_point if one.end == "from" else run.to_point) not in blocks
        )
        spliced = {one.name for one in plan.points if one.kind == "splice"}
        assert not spliced
        assert len(list(fittings(plan, conductors))) == 2 * len(conductors) + extra


def test_a_thicker_cable_needs_no_narrower_tube() -> None:
    """The table of tubes rises."""
    from farvolt.conductors import made_sizes

    widths = [tube(size).width_mm for size in made_sizes("metric")]
    assert widths == sorted(widths)


HINT = (
    "cable,10 mm2,,,,,,reel,10,20,EUR", "cable,6 mm2,,,,,,reel,10,12,EUR",
    "terminal,10 mm2,,,,,,piece,,1,EUR", "terminal,6 mm2,,,,,,piece,,0.5,EUR", "label,,,,,,,piece,,0.1,EUR",
    "device,,,,battery string,,,piece,,1,EUR",
)  # fmt: skip


def test_a_short_run_in_a_thicker_size_that_is_bought_anyway_saves_its_reels() -> None:
    """By hand: two reels of 6 mm2 (24.00) are saved, two metres go on the 10 mm2; four terminals cost 2.00 more."""
    plan = plan_of([cable("main", "bank", "a", "7 m", "10 mm2"), cable("tail", "a", "b", "2 m", "6 mm2")])
    present = list_of(plan, priced(*HINT))
    (hint,) = upsizing.hints(plan, load(plan.plan.rulebook), present)
    assert (hint.runs, hint.present.name, hint.size.name) == (("tail",), "6 mm2", "10 mm2")
    assert hint.saves == pytest.approx(24 - 2)
    changed = with_sizes(plan, {"tail": hint.size})
    assert list_of(changed, priced(*HINT)).total == pytest.approx(present.total - hint.saves)


def test_no_hint_where_thicker_costs_more_or_nothing_has_a_price() -> None:
    """4 m more do not fit the reels of 10 mm2; and without a list there is nothing to save."""
    plan = plan_of([cable("main", "bank", "a", "7 m", "10 mm2"), cable("tail", "a", "b", "4 m", "6 mm2")])
    rulebook = load(plan.plan.rulebook)
    assert upsizing.hints(plan, rulebook, list_of(plan, priced(*HINT))) == []
    assert upsizing.hints(plan, rulebook, list_of(plan)) == []


def test_every_hint_on_an_example_saves_what_it_says_at_least() -> None:
    """The list of the changed plan, worked out anew."""
    plan = planfile.parse(examples.text("instrument-repair-van"))
    rulebook = load(plan.plan.rulebook)
    present = bill(plan, rulebook, Wanted(prices=price_file.example()))
    found = upsizing.hints(plan, rulebook, present)
    assert found
    for hint in found[:5]:
        again = bill(with_sizes(plan, {name: hint.size for name in hint.runs}), rulebook, present.wanted)
        assert again.total <= present.total - hint.saves + 1e-6
