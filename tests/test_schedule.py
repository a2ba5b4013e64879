"""The cable schedule as rows and CSV: what is bought, what is solved, and text that stays text."""

import csv
import io

import pytest

from farvolt import examples, planfile
from farvolt.results import Study
from farvolt.study import study
from farvolt_app import schedule

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
    for cable, result in zip(schedule.cables(bench), bench.cases[0].runs, strict=True):
        for one, ohm in ((cable.feed, result.feed_ohm), (cable.back, result.return_ohm)):
            if ohm is not None:
                assert one.ohm_per_m * one.length_m / cable.parallel + one.fixed_ohm == pytest.approx(ohm, rel=1e-12)


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
        for line in schedule.loads(study(planfile.parse(examples.text(name)))):
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


def test_purchases_list_every_size_and_colour_once(bench: Study) -> None:
    """Feed and return of different sizes are bought apart."""
    kinds = schedule.purchases(schedule.cables(bench))
    assert ("6 mm2", "copper", "105 degC", "red") in kinds
    assert ("10 mm2", "copper", "105 degC", "black") in kinds
    assert len(kinds) == len(set(kinds))
