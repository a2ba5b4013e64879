"""volts.low, volts.high, volts.collapse: each at its own conductor temperature, with hand calculations."""

import random
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt.plan import Plan
from strategies import Wishes, random_draft
from strategies import plan_of as drafted
from wiring import (
    CLASS_5_OHM_PER_KM,
    COPPER_PER_K,
    bank,
    cable,
    charger,
    fails,
    findings,
    fuse,
    lamp,
    named_sizes,
    only,
    plan_of,
    resized,
)

BANK_OHM = 1e-3


def fed(min_volts: str | None = None, max_volts: str | None = None, amps: str = "10 A", **more: Any) -> Plan:
    """A bank of 12.8 V behind 1 mohm, 5 m of 4 mm2 (insulation 105 degC, ambient 30 degC), one load."""
    ranges = {key: value for key, value in (("min_volts", min_volts), ("max_volts", max_volts)) if value is not None}
    runs = [cable("feed", "bank", "galley", "5 m", "4 mm2", protection=fuse("15 A"))]
    return plan_of(runs, [lamp("fridge", "galley", amps, **ranges)], **more)


def volts_at(degC: float, amps: float = 10.0) -> float:
    """12.8 V - I x (1 mohm + 2 x 5 m x 4.95 mohm/m x (1 + 0.00393 x (T - 20))): IEC 60228, IEC 60028."""
    loop = 10 * CLASS_5_OHM_PER_KM["4 mm2"] / 1000 * (1 + COPPER_PER_K * (degC - 20))
    return 12.8 - amps * (BANK_OHM + loop)


def test_low_is_judged_with_hot_conductors() -> None:
    """At 105 degC the loop has 66.0 mohm: 12.8 - 10 x 67.0 mohm = 12.13 V; at 20 degC it would be 12.295 V."""
    found = only(fed(min_volts="12.2 V"), "volts.low", "fridge")
    assert volts_at(105) == pytest.approx(12.13, abs=0.005)
    assert volts_at(20) == pytest.approx(12.295)
    assert found.value == pytest.approx(volts_at(105), rel=1e-9)
    assert (found.severity, found.limit, found.unit) == ("fail", 12.2, "V")
    assert found.working[-1] == "12.13 V < 12.2 V"
    # 6 mm2, 3.30 mohm/m: 12.8 - 10 x (1 + 33 x 1.334) mohm = 12.35 V.
    assert found.remedy == '"feed": 6 mm2 brings this to 12.35 V'


@pytest.mark.parametrize(("margin", "low"), [(-1e-6, False), (1e-6, True)])
def test_boundary_of_low(margin: float, low: bool) -> None:
    assert bool(findings(fed(min_volts=f"{volts_at(105) + margin:.9f} V"), "volts.low")) is low


def test_low_says_when_no_cable_cures_it() -> None:
    """12.8 V less 1 mV/A at the terminals: a load that needs 13 V gets it through no cable."""
    found = only(fed(min_volts="13 V"), "volts.low", "fridge")
    assert found.remedy is not None
    assert '"bank" itself is at 12.79 V here: no cable cures that' in found.remedy


def test_a_load_that_is_off_is_not_judged_low() -> None:
    """Its own supply is up to the loads that are on; it asks for nothing itself."""
    plan = fed(min_volts="12.7 V", cases=[{"name": "off", "loads": "none"}])
    assert findings(plan, "volts.low") == []


def test_high_is_judged_with_cold_conductors() -> None:
    """At 30 degC, 1 A: 12.8 - (1 + 49.5 x 1.0393) mV = 12.7476 V."""
    found = only(fed(max_volts="12.7 V", amps="1 A"), "volts.high", "fridge")
    assert found.value == pytest.approx(volts_at(30, 1.0), rel=1e-9)
    assert found.working[-1] == "12.75 V > 12.7 V"
    assert found.remedy is not None
    assert found.remedy.startswith('a lower voltage of "bank"')


@pytest.mark.parametrize(("margin", "high"), [(1e-6, False), (-1e-6, True)])
def test_boundary_of_high(margin: float, high: bool) -> None:
    assert bool(findings(fed(max_volts=f"{volts_at(30) + margin:.9f} V"), "volts.high")) is high


def test_high_counts_loads_that_are_off_but_connected() -> None:
    """A full bank on a charger of 14.4 V: a sleeping radio sees the charging voltage whole."""
    runs = [
        cable("charging", "charger", "bank", "1 m", "10 mm2"),
        cable("feed", "bank", "radio", "5 m", "4 mm2", protection=fuse("15 A")),
    ]
    cases = [{"name": "Charging", "loads": "none", "sources": {"bank": "full"}}]
    plan = plan_of(runs, [lamp("radio", "radio", max_volts="14 V")], sources=[bank(), charger()], cases=cases)
    found = only(plan, "volts.high", "radio")
    assert found.value == pytest.approx(14.4, abs=1e-3)
    assert '"charger"' in (found.remedy or "")


def test_the_worst_case_is_named_in_each_direction() -> None:
    cases = [{"name": f"{share:g}", "loads": {"fridge": share}} for share in (0.2, 1.0, 0.6)]
    plan = fed(min_volts="12.75 V", cases=cases)
    assert only(plan, "volts.low", "fridge").case == "1"
    plan = fed(max_volts="12.3 V", cases=cases)
    assert only(plan, "volts.high", "fridge").case == "0.2"


def test_collapse_beyond_the_most_a_source_can_deliver() -> None:
    """E²/4R: 12 V behind 0.2 ohm delivers at most 180 W; 300 W give way at 60 % of the load or a little less.

    The knee at 40 % of nominal lies below the voltage of greatest power, 6 V, so that is where it ends.
    """
    runs = [cable("feed", "bank", "heater", size=None, resistance="199 mohm", protection=fuse("60 A"))]
    sources = [bank(emf="12 V")]
    load = {"name": "heater", "at": "heater", "power": "300 W"}
    plan = plan_of(runs, [load], sources=sources, info={"conductor_temperature": "20 degC"})
    found = only(plan, "volts.collapse", "Everything on")
    assert found.severity == "fail"
    assert found.value == pytest.approx(0.6, abs=0.002)
    assert '"heater" falls first' in found.message
    assert findings(plan, "volts.low") == []
    assert findings(plan, "drop.load") == []


def test_a_case_that_holds_only_with_cold_conductors_gives_way_all_the_same() -> None:
    """170 W of 180 W hold at 20 degC; at 105 degC the loop has a third more resistance and only 135 W come through."""
    runs = [cable("feed", "bank", "heater", size=None, resistance="199 mohm", protection=fuse("60 A"))]
    load = {"name": "heater", "at": "heater", "power": "170 W"}
    plan = plan_of(runs, [load], sources=[bank(emf="12 V")], info={"conductor_temperature": "20 degC"})
    found = only(plan, "volts.collapse", "Everything on")
    assert "hot, at the insulation's rating" in found.message
    assert found.value == pytest.approx(12**2 / (4 * (0.001 + 0.199 * (1 + COPPER_PER_K * 85))) / 170, abs=0.002)


def test_a_range_that_is_not_stated_is_said_once() -> None:
    (found,) = findings(fed(min_volts="10 V"), "volts.range-unstated")
    assert (found.severity, found.kind) == ("note", "plan")
    assert "the lowest voltage of 0 and the highest of 1 of 1 loads" in found.message
    assert findings(fed(min_volts="10 V", max_volts="15 V"), "volts.range-unstated") == []


TREES = Wishes(limited_sources=False, converters=0.0, load_share=0.25)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 10**6))
def test_remedies_that_name_sizes_hold_when_applied(seed: int) -> None:
    draft = random_draft(random.Random(seed), TREES)
    nominal = float(draft["plan"]["nominal"].split()[0])
    for load in draft["loads"]:
        load["min_volts"] = f"{nominal} V"
    plan = drafted(draft)
    for found in findings(plan, "volts.low")[:3]:
        sizes = named_sizes(found.remedy or "")
        if sizes:
            assert found.subject not in fails(resized(plan, sizes), "volts.low"), (seed, found.remedy)
