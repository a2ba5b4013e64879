"""The cable schedule as rows and CSV: what is bought, what is solved, and text that stays text."""

import csv
import io

import pytest

from farvolt import examples, planfile
from farvolt.results import Study
from farvolt.study import study
from farvolt_app import schedule
from farvolt_app.textsafe import begins_like_formula, csv_text
from wiring import cable, lamp, plan_of

PLAN = """format = 1
[plan]
name = "Bench"
nominal = "12 V"
conductor_temperature = "20 degC"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "10 mohm"
[[runs]]
name = "feed"
label = "W1"
from = "bank"
to = "lamp"
length = "10 m"
size = "6 mm2"
parallel = 2
joints = 2
protection = { type = "blade", rating = "20 A", distance = "0.1 m" }
return = { size = "10 mm2", length = "8 m" }
[[runs]]
name = "tap"
from = "lamp"
to = "=SUM(A1)"
length = "15 ft"
return = "chassis"
[[runs]]
name = "strap"
from = "bank"
to = "chassis"
length = "0.5 m"
size = "16 mm2"
colour = "green"
[[loads]]
name = "lamp"
at = "lamp"
power = "60 W"
[[loads]]
name = "@horn"
at = "=SUM(A1)"
current = "2 A"
"""


@pytest.fixture(scope="module")
def bench() -> Study:
    """A small plan with every kind of return, a free size and names that begin like formulas."""
    return study(planfile.parse(PLAN))


def test_the_parts_of_a_resistance_give_it_back(bench: Study) -> None:
    """Per metre times length over parallel, plus the fixed part, is the resistance that was solved."""
    for found, result in zip(schedule.cables(bench), bench.cases[0].runs, strict=True):
        for one, ohm in ((found.feed, result.feed_ohm), (found.back, result.return_ohm)):
            if ohm is not None:
                assert one.ohm_per_m * one.length_m / found.parallel + one.fixed_ohm == pytest.approx(ohm, rel=1e-12)


def test_lengths_to_buy_count_both_conductors_and_parallel_ones(bench: Study) -> None:
    """By hand: two times (10 m + 8 m); a tap through the chassis has a feed only; a strap a return only."""
    assert [cable.total_m for cable in schedule.cables(bench)] == pytest.approx([36.0, 15 * 0.3048, 0.5])


def test_a_free_size_is_shown_as_still_to_be_chosen(bench: Study) -> None:
    """The interim size is named, and said to be one."""
    size = schedule.rows(bench)[1]["Size"]
    assert size.endswith("to be chosen")
    assert size.split(",")[0] == bench.interim["tap"].name


def test_ways_sum_to_the_drop_of_each_load() -> None:
    """Kirchhoff's voltage law on both example plans, whose worst cases hold."""
    for name in examples.names():
        found = study(planfile.parse(examples.text(name)))
        for line in schedule.loads(found, schedule.cables(found)):
            assert line.drop_V is not None
            assert sum(part.drop_V for part in line.way) == pytest.approx(line.drop_V, abs=1e-9)
            for part in line.way:
                if part.kind != "diode":
                    assert part.amps * part.ohm == pytest.approx(part.drop_V, abs=1e-9)


def test_csv_is_read_back_and_begins_no_cell_like_a_formula(bench: Study) -> None:
    """A name such as =SUM(A1) gets an apostrophe; numbers stay numbers."""
    table = list(csv.reader(io.StringIO(schedule.to_csv(bench))))
    assert len(table) == 1 + len(bench.plan.runs)
    heading = {name: place for place, name in enumerate(table[0])}
    assert table[2][heading["To"]] == "'=SUM(A1)"
    assert float(table[1][heading["Drop (V)"]]) == pytest.approx(bench.cases[0].runs[0].drop_V, rel=1e-12)
    assert not any(cell[:1] in ("=", "+", "-", "@") and not cell[1:2].isdigit() for row in table for cell in row)


def test_a_case_that_gives_way_leaves_no_number_behind() -> None:
    """Unsolved: the drop is empty, and the case column says why."""
    text = PLAN.replace('power = "60 W"', 'power = "60 kW"')
    rows = schedule.rows(study(planfile.parse(text)))
    assert rows[0]["Drop (V)"] is None
    assert rows[0]["Case"] == schedule.NO_NUMBER


def test_currents_that_flow_the_same_way_take_from_each_other() -> None:
    """Feeds and returns of a mesh close different rings. Kirchhoff: drop = I·R of the feed less I·R of the return."""
    runs = [
        cable("ab", "bank", "a", "3 m", "4 mm2"), cable("bb", "bank", "b", "8 m", "4 mm2"),
        cable("ring", "a", "b", "2 m", "4 mm2"), cable("back", "a", "b", "1 m", carries="return"),
        cable("over", "bank", "b", "1 m", "1.5 mm2", carries="feed"),
    ]  # fmt: skip
    found = study(plan_of(runs, [lamp("one", "a", "5 A"), lamp("other", "b", "5 A")]))
    cables, points = schedule.cables(found), {one.name: one.volts for one in found.cases[0].points}
    ring = cables[2]
    parts = [(one.amps or 0.0) * (one.ohm_per_m * one.length_m + one.fixed_ohm) for one in (ring.feed, ring.back)]
    assert min(parts) < 0 < max(parts)
    assert sum(parts) == pytest.approx(abs((points["a"] or 0) - (points["b"] or 0)), abs=1e-9)
    assert ring.drop_V == pytest.approx(sum(parts), abs=1e-9)


def test_the_design_current_is_the_largest_of_all_cases() -> None:
    """10 A in one case, 4 A in the other."""
    cases = [{"name": "little", "loads": {"one": 0.4}}, {"name": "all", "loads": {"one": 1.0}}]
    found = study(plan_of([cable("lead", "bank", "a", "3 m", "4 mm2")], [lamp("one", "a", "10 A")], cases=cases))
    assert schedule.cables(found)[0].largest_A == pytest.approx(10)
    assert schedule.cables(found)[0].case == "all"


def test_a_load_is_shown_where_it_is_on() -> None:
    """One that is off in every case has no numbers, and says so; the other has those of the only case with it on."""
    cases = [{"name": "idle", "loads": "none"}, {"name": "lit", "loads": {"lit": 1.0}}]
    runs = [cable("lead", "bank", "a", "3 m", "4 mm2")]
    found = study(plan_of(runs, [lamp("lit", "a", "5 A"), lamp("dark", "a", "5 A")], cases=cases))
    lit, dark = schedule.loads(found, schedule.cables(found))
    assert lit.case == "lit"
    assert lit.amps == pytest.approx(5)
    assert (dark.case, dark.volts, dark.amps, dark.drop_V, dark.way) == (schedule.OFF, None, None, None, ())


@pytest.mark.parametrize(("size", "gauge"), [("10 AWG", "10 AWG"), ("6 mm2", "~10 AWG"), ("10 SAE", "~10 AWG")])
def test_a_size_is_given_in_american_wire_gauge(size: str, gauge: str) -> None:
    """10 AWG is 5.26 mm2 (ASTM B258), the nearest to 6 mm2 and to the 4.7 mm2 of 10 SAE (SAE J1128)."""
    found = schedule.rows(study(plan_of([cable("lead", "bank", "a", "3 m", size)])))
    assert found[0]["AWG (~ nearest)"] == gauge


def test_feet_are_those_of_the_international_foot() -> None:
    """0.3048 m exactly."""
    row = schedule.rows(study(plan_of([cable("lead", "bank", "a", "3.048 m")])))[0]
    assert (row["Length one way (ft)"], row["Conductors in all (ft)"]) == pytest.approx((10, 20), rel=1e-12)


def test_csv_of_a_plan_without_runs_has_its_headings() -> None:
    """A table of nothing is still that table."""
    assert schedule.to_csv(study(plan_of([]))).rstrip("\n").split(",") == list(schedule.HEADINGS)


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@x", "\t=1", "\rx", "  =1", "＝1"])
def test_text_that_begins_like_a_formula(text: str) -> None:
    """In a CSV an apostrophe stands before it."""
    assert begins_like_formula(text)
    assert csv_text(text) == f"'{text}"


@pytest.mark.parametrize("text", ["", "W1", "a=b", "1-2", "'x", "ä", "50 %"])
def test_text_that_does_not_is_left_alone(text: str) -> None:
    """Everything else is written as it is."""
    assert csv_text(text) == text
