"""The days, held to closed forms, to hand calculations, to the conservation of energy and to finer steps."""

import datetime as dt
import math
from dataclasses import replace

import numpy as np
import pytest

from farvolt import day_course, day_settle, day_setup, days, examples, planfile, solve
from farvolt.day_bank import MONTH_H
from farvolt.day_course import Course, Period
from farvolt.day_network import Laws, StepNetwork
from farvolt.day_setup import Start
from farvolt.days import Outcome
from farvolt.errors import FarvoltError

PERIOD = Period(dt.date(2027, 3, 1), 2, 60)

HEAD = """\
format = 1
[plan]
name = "Days"
nominal = "12 V"
conductor_temperature = "20 degC"
ambient = "25 degC"
"""

BANK = """\
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
emf = "12 V"
resistance = "10 mohm"
capacity = "100 Ah"
"""

RUN = """\
[[runs]]
name = "feed"
from = "bank"
to = "lamp"
length = "2 m"
resistance = "90 mohm"
"""


def load(more: str = 'current = "2 A"') -> str:
    return f'[[loads]]\nname = "lamp"\nat = "lamp"\n{more}\n'


def run(text: str, period: Period = PERIOD, charge: float | None = None, **changes: object) -> Outcome:
    ready = day_setup.prepare(planfile.parse(HEAD + text))
    course = day_course.course(ready.plan, period)
    return days.simulate(ready, replace(course, **changes), Start(charge))  # type: ignore[arg-type]


def gains(found: Outcome) -> dict[str, float]:
    """The account of energy in Wh: what came in, went out, was lost and is stored more than before."""
    sums = found.sums
    lost = sums.network_Wh + sums.converters_Wh + sums.resistance_Wh + sums.unkept_Wh + sums.gone_Wh
    both = zip(found.banks, found.first_charge, strict=True)
    stored = [one.stored_Wh(one.charge) - one.stored_Wh(first) for one, first in both]
    return {"in": sums.given_Wh.sum(), "loads": sums.loads_Wh.sum(), "lost": lost.sum(), "stored": sum(stored)}


def assert_balanced(found: Outcome) -> None:
    a = gains(found)
    turnover = a["in"] + a["loads"] + a["lost"] + abs(a["stored"])
    assert abs(a["in"] - a["loads"] - a["lost"] - a["stored"]) <= 1e-9 * turnover
    assert found.sums.uncertified == 0
    assert found.unsolved == 0


def test_no_load_leaves_self_discharge_alone() -> None:
    # Share s a month: the charge falls by (1 − s)^(t / month).
    found = run(BANK + 'self_discharge = "5 %"\n' + RUN + load('current = "2 A"\nhours_per_day = 0'))
    assert found.sums.charge[-1, 0] == pytest.approx(0.95 ** (48 / MONTH_H), rel=1e-12)
    assert found.sums.charge[0, 0] == pytest.approx(0.95 ** (1 / MONTH_H), rel=1e-12)
    assert gains(found)["lost"] == pytest.approx(100 * 12 * (1 - 0.95 ** (48 / MONTH_H)), rel=1e-9)
    assert_balanced(found)


def test_constant_current_is_a_straight_line() -> None:
    # 2 A from 100 Ah for 24 h takes 48 Ah; the feed loses I²R = 2² · 90 mΩ, the bank 2² · 10 mΩ.
    found = run(BANK + RUN + load('current = "2 A"\ncontinuous = true'), Period(dt.date(2027, 3, 1), 1, 60))
    np.testing.assert_allclose(found.sums.charge[:, 0], 1 - 0.02 * np.arange(1, 25), rtol=1e-12)
    np.testing.assert_allclose(found.sums.bank_V[:, 0], 12 - 0.02, rtol=1e-12)
    assert gains(found)["loads"] == pytest.approx(24 * 2 * (12 - 0.2), rel=1e-12)
    assert found.sums.network_Wh.sum() == pytest.approx(24 * 4 * 0.09, rel=1e-9)
    assert found.sums.resistance_Wh.sum() == pytest.approx(24 * 4 * 0.01, rel=1e-12)
    assert_balanced(found)


def test_constant_power_by_hand() -> None:
    # u = (12 + √(12² − 4 · 0.1 · 30)) / 2 at the lamp; the bank gives 30 W / u.
    u = (12 + math.sqrt(144 - 4 * 0.1 * 30)) / 2
    found = run(BANK + RUN + load('power = "30 W"\ncontinuous = true'), Period(dt.date(2027, 3, 1), 1, 30))
    assert found.sums.load_V[0] == pytest.approx(u, rel=1e-12)
    assert found.sums.charge[-1, 0] == pytest.approx(1 - 24 * 30 / u / 100, rel=1e-12)
    assert_balanced(found)


def test_an_empty_bank_feeds_nothing() -> None:
    # 2 A from 30 % of 100 Ah last 15 h; the other 33 h of the two days the lamp is off. The bank is empty, not below.
    found = run(BANK + RUN + load('current = "2 A"\ncontinuous = true'), charge=0.3)
    assert (found.off[:, 0] * 1.0).sum() == pytest.approx(33.0, abs=1e-6)
    assert found.sums.charge.min() == pytest.approx(0.0, abs=1e-8)
    assert found.cut_hours[0] == pytest.approx(33.0, abs=1e-6)
    assert gains(found)["loads"] == pytest.approx(15 * 2 * 11.8, rel=1e-6)
    assert_balanced(found)


def test_a_bank_empties_within_a_step() -> None:
    # 2 A from 3 % of 100 Ah last an hour and a half.
    found = run(BANK + RUN + load('current = "2 A"\ncontinuous = true'), charge=0.03)
    np.testing.assert_allclose(found.off[:3, 0], [0.0, 0.5, 1.0], atol=1e-6)


def test_a_load_cuts_out_early_by_the_drop_of_its_cable() -> None:
    # A straight curve from 12.0 V to 11.0 V does not exist in a plan, so take lead-acid: agm rests at 12.225 V half
    # charged, (12.2 + 12.35) / 2 by the table. At the lamp 10 A · (90 + 10) mΩ less: cut out at 11.3 V, it goes at
    # about that charge, while one beside the bank with the same cut-out stays on.
    text = BANK.replace('emf = "12 V"', 'chemistry = "agm"') + 'self_discharge = "0 %"\n'
    text += RUN + load('current = "10 A"\ncontinuous = true\ncut_out = "11.3 V"\nrecovery = "12.5 V"') + (
        '[[loads]]\nname = "near"\nat = "bank"\ncurrent = "0.1 A"\ncontinuous = true\ncut_out = "11.3 V"\n'
    )
    found = run(text, charge=0.9)
    gone = int(np.argmax(found.off[:, 0] > 0))
    before, charge = found.sums.charge[gone - 2 : gone, 0]
    bank = found.banks[0]
    # A step stands at the mean of its charge: 10.1 A take 10.1 Ah of the 100 Ah in an hour.
    at_lamp, next_hour = (
        replace(bank, charge=one).mean_emf(-0.101) - 10.1 * bank.resistance(one, 25) - 10 * 0.09
        for one in (before, charge)
    )
    assert at_lamp == pytest.approx(found.sums.load_V[0], abs=1e-9)
    assert at_lamp >= 11.3 > next_hour
    assert 0.3 < charge < 0.7
    # It does not come back: the bank rests below 12.5 V. The other stays on till the end.
    assert np.all(found.off[gone:, 0] == 1)
    assert found.off[:, 1].sum() == 0
    assert found.times_off.tolist() == [1, 0]
    assert_balanced(found)


CHARGER = """\
[[sources]]
name = "mains"
kind = "charger"
at = "bank"
volts = "14.2 V"
amps = "10 A"
"""


def test_a_load_comes_back_above_its_recovery() -> None:
    text = BANK.replace('emf = "12 V"', 'chemistry = "agm"') + CHARGER + 'schedule = ["12:00-18:00"]\n' + RUN
    text += load('current = "5 A"\ncontinuous = true\ncut_out = "11.4 V"\nrecovery = "12.2 V"')
    found = run(text, charge=0.35)
    off = found.off[:, 0]
    assert off[0] == 0
    first = int(np.argmax(off))
    assert 0 < first < 12
    # Off, its terminals stand where the bank does: it is back in the step after the first with more than 12.2 V.
    above = first + int(np.argmax(found.sums.bank_V[first:, 0] > 12.2))
    assert 12 <= above < 16
    assert off[first : above + 1].min() == 1
    assert off[above + 1 : 18].max() == 0
    assert_balanced(found)


def test_charging_keeps_its_efficiency_and_ends_full() -> None:
    # 10 A for 4 h bring 40 Ah · 0.85 into an agm bank (its charge efficiency in `figures.csv`).
    bank = BANK.replace('emf = "12 V"', 'chemistry = "agm"') + 'self_discharge = "0 %"\n'
    found = run(bank + CHARGER + 'schedule = ["00:00-04:00"]\n' + RUN + load(), charge=0.2)
    assert found.sums.charge[3, 0] == pytest.approx(0.2 + 0.1 * 4 * 0.85, rel=1e-9)
    long = run(bank + CHARGER + 'schedule = ["00:00-24:00"]\n' + RUN + load(), charge=0.2)
    assert long.sums.charge.max() == pytest.approx(1.0, abs=1e-9)
    assert_balanced(found)
    assert_balanced(long)


def test_float_takes_over_when_the_bank_is_full_and_charging_comes_back() -> None:
    bank = BANK.replace('emf = "12 V"', 'chemistry = "agm"')
    charger = CHARGER + 'float_volts = "13.5 V"\nschedule = ["00:00-24:00"]\n'
    heavy = load('current = "25 A"\nschedule = ["20:00-23:00"]')
    found = run(bank + charger + RUN + heavy, Period(dt.date(2027, 3, 1), 3, 30), charge=0.95)
    volts = found.sums.bank_V[:, 0]
    assert volts[20] == pytest.approx(13.5, abs=0.02)
    # 25 A for three hours, of which the charger gives 10 A, take the bank below nine tenths: it charges anew.
    later = volts[46:60]
    assert later.max() > 13.9
    assert_balanced(found)


def test_lithium_is_not_charged_below_freezing() -> None:
    bank = BANK.replace('emf = "12 V"', 'chemistry = "lfp"')
    text = bank + CHARGER + 'schedule = ["00:00-24:00"]\n' + RUN + load('current = "2 A"\ncontinuous = true')
    cold = run(text, charge=0.5, bank_degC=np.full(48, -3.0))
    warm = run(text, charge=0.5, bank_degC=np.full(48, 3.0))
    # In the cold the charger carries the lamp and the bank stands still, apart from self-discharge.
    assert cold.sums.charge[-1, 0] == pytest.approx(0.5, abs=0.003)
    assert cold.cold_hours[0] == 48
    assert cold.off.sum() == 0
    assert warm.sums.charge[-1, 0] == pytest.approx(1.0, abs=1e-4)
    assert_balanced(cold)
    assert_balanced(warm)


def test_finer_steps_draw_near_to_one_answer() -> None:
    text = BANK.replace('emf = "12 V"', 'chemistry = "agm"') + CHARGER + 'schedule = ["06:00-12:00"]\n' + RUN
    text += load('power = "60 W"\nschedule = ["18:00-23:00"]')
    periods = {step: Period(dt.date(2027, 3, 1), 3, step) for step in (60, 30, 10, 1)}
    last = {step: run(text, period, charge=0.8).sums.charge[-1, 0] for step, period in periods.items()}
    errors = [abs(last[step] - last[1]) for step in (60, 30, 10)]
    assert errors[2] < errors[0] or errors[0] < 1e-6
    assert errors[0] < 2e-3
    assert errors[2] < 2e-4


def example(name: str, period: Period, charge: float | None = None) -> Outcome:
    ready = day_setup.prepare(planfile.parse(examples.text(name)))
    return days.simulate(ready, day_course.course(ready.plan, period), Start(charge))


SITE = """
[site]
latitude = "51.5 deg"
longitude = "-2 deg"
time_zone = "Europe/London"
clearness = [0.3, 0.34, 0.4, 0.44, 0.45, 0.46, 0.46, 0.45, 0.43, 0.38, 0.33, 0.28]
"""


@pytest.mark.parametrize(("name", "step"), [("instrument-repair-van", 60), ("instrument-repair-van", 15),
                                            ("bird-observatory-cabin", 60)])  # fmt: skip
def test_every_step_of_an_example_is_what_the_solver_gives(name: str, step: int) -> None:
    """Each kept part of a step is solved again by `solve.solve`, from zero load, with the laws as they stood."""
    seen: list[float] = []

    def again(network: StepNetwork, laws: Laws, *rest: object) -> day_settle.Settled:
        found = day_settle.settle(network, laws, *rest)  # type: ignore[arg-type]
        if len(seen) < 60:
            condition = replace(
                network.condition, volts=laws.volts.copy(), ohm=laws.ohm.copy(), low=laws.low.copy(),
                high=laws.high.copy(), power=laws.power.copy(), load_W=laws.watts.copy(), load_A=laws.amps.copy(),
                load_S=laws.siemens.copy(),
            )  # fmt: skip
            state = solve.solve(network.network, condition, network.factor_of_20, network.supply)
            assert state.solved == found.solved
            u = state.volts[network.ports.a] - state.volts[network.ports.b]
            seen.append(float(np.abs(u - found.u).max()))
        return found

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(days, "settle", again)
        assert_balanced(example(name, Period(dt.date(2027, 4, 1), 2, step), charge=0.6))
    assert len(seen) >= 40
    assert max(seen) < 1e-8


def test_the_van_through_dark_days() -> None:
    found = example("instrument-repair-van", Period(dt.date(2027, 12, 1), 5, 60), charge=0.1)
    assert found.off.sum() > 0
    assert found.cut_hours[0] > 0
    assert_balanced(found)


def test_the_day_of_a_clock_that_leaps_has_23_hours() -> None:
    night = load('current = "2 A"\nschedule = ["22:00-06:00"]')
    ready = day_setup.prepare(planfile.parse(HEAD + SITE + BANK + RUN + night))
    spring = day_course.course(ready.plan, Period(dt.date(2027, 3, 28), 1))
    assert len(spring) == 23
    # Past midnight: on from 0 to 6, which is five hours that night, and from 22 on.
    assert spring.loads[:, 0].sum() == 7
    autumn = day_course.course(ready.plan, Period(dt.date(2027, 10, 31), 1))
    assert len(autumn) == 25
    assert autumn.loads[:, 0].sum() == 9


def course_of(text: str, period: Period = PERIOD, **more: object) -> Course:
    return day_course.course(planfile.parse(HEAD + text), period, **more)  # type: ignore[arg-type]


def test_hours_without_times_are_spread_and_said() -> None:
    lamp = load('power = "60 W"\nhours_per_day = 4\nduty = "50 %"')
    found = course_of(BANK + CHARGER + "hours_per_day = 3\n" + RUN + lamp)
    # 4 h over the 16 waking hours, half of the time at work.
    assert found.loads[:7, 0].tolist() == [0.0] * 7
    assert found.loads[7:23, 0].tolist() == pytest.approx([0.125] * 16)
    assert found.sources[9:12, 1].tolist() == [1.0] * 3
    assert found.sources[:, 1].sum() == 6
    assert any('"lamp"' in one and "Spread" in one for one in found.notes)
    assert any('"mains"' in one and "9 o'clock" in one for one in found.notes)


def test_types_of_day_follow_the_calendar() -> None:
    weekend = '[[days]]\nname = "weekend"\nweekdays = ["Saturday", "Sunday"]\nloads = { "lamp" = ["08:00-10:00"] }\n'
    text = BANK + RUN + load('power = "60 W"\nhours_per_day = 0') + weekend
    found = course_of(text, Period(dt.date(2027, 3, 5), 3))
    assert found.day_types == ("every day", "weekend", "weekend")
    assert np.flatnonzero(found.loads[:, 0]).tolist() == [32, 33, 56, 57]
    with pytest.raises(FarvoltError, match='no type of day is called "Sunday"; accepted: "weekend"'):
        course_of(text, day="Sunday")


@pytest.mark.parametrize(("days_", "step"), [(0, 60), (4000, 60), (3, 7), (2000, 1), (3, 0)])
def test_periods_that_cannot_be(days_: int, step: int) -> None:
    with pytest.raises(FarvoltError, match="accepted: "):
        Period(dt.date(2027, 1, 1), days_, step)


def test_days_need_a_bank_with_a_capacity() -> None:
    with pytest.raises(FarvoltError, match="days need a bank"):
        day_setup.prepare(planfile.parse(HEAD + CHARGER + RUN + load()))
    with pytest.raises(FarvoltError, match='sources "bank", capacity: days need it'):
        day_setup.prepare(planfile.parse(HEAD + BANK.replace('capacity = "100 Ah"\n', "") + RUN + load()))


SUN = """\
[[sources]]
name = "roof"
kind = "solar"
at = "bank"
power = "100 W"
ceiling = "14.4 V"
"""


@pytest.mark.parametrize("watts", [20.0, 26.0, 39.0, 41.0, 60.0])
def test_a_full_bank_helps_a_sun_that_falls_short(watts: float) -> None:
    # 40 W at a full bank: what the sun lacks comes from the bank, near its rest voltage; what is too much it leaves.
    text = BANK.replace('emf = "12 V"', 'chemistry = "agm"') + 'self_discharge = "0 %"\n' + SUN + RUN
    text += load('power = "40 W"\ncontinuous = true')
    ready = day_setup.prepare(planfile.parse(HEAD + text))
    course = day_course.course(ready.plan, Period(dt.date(2027, 3, 1), 1))
    sources = np.zeros((24, 2))
    sources[6:18, 1] = watts / 100
    found = days.simulate(ready, replace(course, sources=sources), Start(1.0))
    assert found.off.sum() == 0
    first = found.sums.source_Wh[6, 1]
    assert first == pytest.approx(min(watts, first), rel=1e-9)
    if watts < 40:
        assert first == pytest.approx(watts, rel=1e-9)
        assert found.sums.bank_V[17, 0] < 12.9
    assert_balanced(found)


def test_a_charger_that_starts_within_a_step_runs_at_its_full_current_from_there() -> None:
    # 10 A from 7:30 to 8:45: 1.25 h · 10 A · 0.85 of 100 Ah, whether in hours or in quarters of them.
    text = BANK.replace('emf = "12 V"', 'chemistry = "agm"') + 'self_discharge = "0 %"\n' + CHARGER
    text += 'schedule = ["07:30-08:45"]\n' + RUN + load('current = "2 A"\nhours_per_day = 0')
    for step in (60, 15):
        found = run(text, Period(dt.date(2027, 3, 1), 1, step), charge=0.5)
        assert found.sums.charge[-1, 0] == pytest.approx(0.5 + 0.1 * 1.25 * 0.85, rel=1e-9)
        assert found.sums.peak_A[0, 1] == pytest.approx(10.0)
        assert_balanced(found)
