"""The test sheet: what it expects, by hand, and between what a reading passes."""

import pytest

from farvolt import commissioning, meter, planfile, reading_table
from farvolt.commissioning import TORQUE_NM, Sheet, insulation_test
from farvolt.errors import FarvoltError
from farvolt.lugs import STUDS
from farvolt.network import FEED, RETURN
from farvolt.readings import ReadingsError
from farvolt.study import prepared

PLAN = """\
format = 1
[plan]
name = "Bench"
nominal = "12 V"
rulebook = "small-craft-iso"
ambient = "20 degC"
[tolerances]
coldest = "20 degC"
hottest = "20 degC"
[[points]]
name = "bank"
kind = "battery"
stud = "m8"
[[sources]]
name = "battery"
kind = "battery"
at = "bank"
emf = "12.8 V"
resistance = "10 mohm"
[[runs]]
name = "main"
from = "bank"
to = "lamp"
length = "2 m"
size = "10 mm2"
strand = "flexible"
joints = 1
protection = { type = "blade", rating = "20 A", resistance = "0 ohm" }
[[loads]]
name = "lamp"
at = "lamp"
current = "10 A"
[[cases]]
name = "Off"
loads = "none"
[[cases]]
name = "On"
"""
METER = meter.parse("0.5 % + 2 digits")


def made(text: str = PLAN, **asked: object) -> Sheet:
    return commissioning.sheet_of(prepared(planfile.parse(text)), METER, **asked)  # type: ignore[arg-type]


def test_millivolts_of_a_run_by_hand() -> None:
    # 10 mm2 of class 5: 1.91 mohm/m at 20 degC (IEC 60228 table 3); a joint of 0.2 mohm in each conductor. So
    # 3.82 + 0.2 = 4.02 mohm; the least 0.9 x 3.82 + 0.2 = 3.638, the most 1.1 x 3.82 + 5 x 0.2 = 5.202 mohm.
    feed, back = made().conductors
    assert feed.test is not None
    assert feed.test.amps == pytest.approx(10)
    assert feed.test.volts.expected == pytest.approx(40.2e-3)
    # At 10 A 36.38 and 52.02 mV, wider by 0.5 % and 2 digits of 0.1 mV.
    assert feed.test.volts.low == pytest.approx(36.38e-3 * 0.995 - 0.2e-3)
    assert feed.test.volts.high == pytest.approx(52.02e-3 * 1.005 + 0.2e-3)
    assert (feed.test.red, feed.test.black) == (("bank", FEED), ("lamp", FEED))
    assert back.test is not None
    # The return carries the current back, so its red lead is at the load.
    assert (back.test.red, back.test.black) == (("lamp", RETURN), ("bank", RETURN))
    # Cold is 20 degC here, so what a milliohm meter shows end to end is the same.
    assert (back.ohm.expected, back.ohm.low, back.ohm.high) == pytest.approx((4.02e-3, 3.638e-3, 5.202e-3))


def test_a_joint_passes_up_to_the_tolerance_of_joints() -> None:
    # 0.2 mohm at 10 A: 2 mV; five times that is 10 mV, and the meter adds 0.05 + 0.2 mV.
    joint = made().conductors[0].joint
    assert joint is not None
    assert (joint.expected, joint.low, joint.high) == pytest.approx((2e-3, 0.0, 10.25e-3))


def test_the_voltage_at_the_load_by_hand() -> None:
    # 10 A through 10 + 2 x 4.02 mohm: 12.8 - 0.1804 = 12.6196 V. It may be lower by 1 % of 12.8 V, by 1 A through
    # 18.04 mohm, by 10 A through 0.1 x 7.64 mohm and through 2 x 0.8 mohm of joints; higher by the first three.
    point = {one.point: one.volts for one in made().points}["lamp"]
    assert point is not None
    low, high = 12.6196 - 0.128 - 0.01804 - 0.00764 - 0.016, 12.6196 + 0.128 + 0.01804 + 0.00764
    assert point.expected == pytest.approx(12.6196, abs=1e-6)
    assert point.low == pytest.approx(low * 0.995 - 0.02, abs=1e-5)
    assert point.high == pytest.approx(high * 1.005 + 0.02, abs=1e-5)


def test_a_stated_current_goes_through_every_run_whatever_the_case() -> None:
    feed, back = made(case_name="Off", amps=25.0).conductors
    assert feed.test is not None
    assert back.test is not None
    assert feed.test.volts.expected == pytest.approx(25 * 4.02e-3)
    assert (feed.test.red[0], back.test.red[0]) == ("bank", "lamp")


def test_a_current_too_small_to_judge_by_names_the_least_that_is_enough() -> None:
    # 2 digits of 0.1 mV and 0.5 % are 20 % of 1.0256 mV: 0.2551 A through 4.02 mohm.
    feed = made(amps=0.1).conductors[0].test
    assert feed is not None
    assert feed.amps_to_judge == pytest.approx(0.2e-3 / 0.195 / 4.02e-3)
    enough = made(amps=0.3).conductors[0].test
    assert enough is not None
    assert enough.amps_to_judge is None


def test_the_case_in_which_loads_draw_most_is_taken_unless_one_is_named() -> None:
    assert made().case.name == "On"
    assert made(case_name="Off").conductors[0].test is None
    with pytest.raises(FarvoltError, match='did you mean "Off"'):
        made(case_name="Of")
    with pytest.raises(FarvoltError, match="more than 0 A"):
        made(amps=-1.0)


def test_torque_is_that_of_the_stud_stated_and_every_stud_has_one() -> None:
    assert made().conductors[0].torque_Nm == (TORQUE_NM["M8"], None)
    assert set(TORQUE_NM) == set(STUDS)
    rising = [TORQUE_NM[stud] for stud in sorted(STUDS, key=STUDS.__getitem__)]
    assert rising == sorted(rising)


def test_insulation_is_tested_as_for_extra_low_voltage() -> None:
    # IEC 60364-6 table 6.1: SELV and PELV 250 V and 0.5 Mohm.
    assert (insulation_test(12).test_V, insulation_test(12).least_Mohm) == (250, 0.5)
    assert insulation_test(96).test_V == 500


def test_protection_is_listed_as_planned_with_what_it_may_drop() -> None:
    text = PLAN.replace('resistance = "0 ohm" }', 'resistance = "1 mohm" }')
    (one,) = made(text).protections
    # 1 mohm at 10 A: 10 mV, up to a fifth more: 12 mV, and 0.06 + 0.2 mV for the meter.
    assert one.volts is not None
    assert (one.planned.type, one.point, one.volts.expected, one.volts.high) == pytest.approx(
        ("blade", "bank", 10e-3, 12.26e-3)
    )


@pytest.mark.parametrize(("value", "last"), [(0.04, 1e-4), (0.6, 1e-4), (0.61, 1e-3), (12.8, 1e-2), (52.0, 1e-2)])
def test_the_last_place_is_that_of_a_meter_of_6000_counts(value: float, last: float) -> None:
    assert meter.step(value) == pytest.approx(last)


@pytest.mark.parametrize("text", ["", "good", "30 %", "0 % + 0 digits", "1.2.3 %"])
def test_what_is_no_accuracy_is_refused(text: str) -> None:
    with pytest.raises(FarvoltError, match=r"0\.5 % \+ 2 digits"):
        meter.parse(text)


def test_rows_left_open_on_a_sheet_to_fill_in_are_passed_over() -> None:
    plan = planfile.parse(PLAN)
    (one,) = reading_table.from_text("from,to,volts,run,amps\nbank,,12.7,,\nlamp,,,,\n,,,main,\n", plan)
    assert [reading.row for reading in one.readings] == [2]


def test_a_sheet_with_nothing_filled_in_is_told_once() -> None:
    with pytest.raises(ReadingsError) as told:
        reading_table.from_text("from,volts\nbank,\nlamp,\n", planfile.parse(PLAN))
    assert [fault.place for fault in told.value.faults] == ["row 2"]
