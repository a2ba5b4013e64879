"""solar.*: cold open-circuit voltage, short-circuit current and reverse current of an array, from the plan alone."""

import csv
from typing import Any

import pytest

from farvolt.plan import Plan
from farvolt_data import ROOT
from wiring import BANK, Row, cable, fails, findings, fuse, lamp, only, plan_of

VOLTS, AMPS, REVERSE = "solar.open-circuit-volts", "solar.short-circuit-current", "solar.reverse-current"


def roof(
    *, coldest: str | None = "-7 degC", max_input: str | None = "600 V", size: str = "10 mm2", run: Row | None = None,
    devices: tuple[Row, ...] = (), runs: tuple[Row, ...] = (), book: str = "cabin-nec", info: Row | None = None,
    tables: dict[str, Any] | None = None, cases: tuple[Row, ...] = (), **array: Any,
) -> Plan:  # fmt: skip
    """An array on a roof, its cable to a controller, and the controller at the bank."""
    modules: Row = {"at": "roof box", "voc": "38.3 V", "isc": "8 A", "vmp": "31 V", "imp": "7.5 A"} | array
    source: Row = {"name": "roof", "kind": "solar", "from": "input", "at": "bank", "power": "400 W",
                   "ceiling": "14.4 V", "amps": "30 A", "array": modules}  # fmt: skip
    source |= {"max_input": max_input} if max_input else {}
    cables = [cable("array cable", "roof box", "input", size=size, **(run or {})), *runs]
    cables.append(cable("feed", "bank", "lamp", protection=fuse("20 A")))
    head = ({"coldest": coldest} if coldest else {}) | (info or {})
    return plan_of(
        cables, [lamp("lamp", "lamp")], sources=[BANK, source], rulebook=book, info=head, devices=list(devices),
        tables=tables, cases=list(cases),
    )  # fmt: skip


# Open-circuit voltage ------------------------------------------------------------------------------------------


def test_factors_of_the_table_when_no_coefficient_is_stated() -> None:
    """NEC Table 690.7(A), a training example often reprinted (from memory): twelve modules of 38.30 V in series at
    -7 degC: 38.30 x 1.14 x 12 = 524 V."""
    found = only(roof(modules=12, series=12, max_input="500 V"), VOLTS, "roof")
    assert found.severity == "fail"
    assert found.value == pytest.approx(523.9, abs=0.05)
    assert "690.7" in found.basis
    assert "provisional" in found.basis
    assert "12 in series x 38.3 V x 1.14 = 523.9 V" in found.working


def test_the_maker_s_coefficient_goes_before_the_table() -> None:
    """The same example with -0.137 V/degC: (38.30 + 32 x 0.137) x 12 = 512.2 V; 0.137 / 38.30 = 0.3577 %."""
    found = only(roof(modules=12, series=12, max_input="500 V", voc_rise="0.35770 %"), VOLTS, "roof")
    assert found.value == pytest.approx(512.2, abs=0.05)


@pytest.mark.parametrize(("stands", "over"), [("87.33 V", False), ("87.32 V", True)])
def test_boundary_is_what_the_controller_stands(stands: str, over: bool) -> None:
    """Two in series: 2 x 38.3 x 1.14 = 87.324 V."""
    assert (fails(roof(modules=2, series=2, max_input=stands), VOLTS) == ["roof"]) is over


@pytest.mark.parametrize(
    ("coldest", "factor"),
    [("30 degC", 1.0), ("25 degC", 1.0), ("24 degC", 1.02), ("20 degC", 1.02), ("19.5 degC", 1.04), ("0 degC", 1.10),
     ("-1 degC", 1.12), ("-40 degC", 1.25), ("23 degF", 1.12)],
)  # fmt: skip
def test_rows_of_the_table_serve_down_to_the_ambient_they_name(coldest: str, factor: float) -> None:
    """NEC Table 690.7(A), from memory: 24 to 20 degC 1.02, 4 to 0 degC 1.10, -1 to -5 degC 1.12, -36 to -40 1.25."""
    assert only(roof(coldest=coldest, max_input="1 V"), VOLTS, "roof").value == pytest.approx(38.3 * factor)


def test_the_table_follows_the_coefficients_of_data_sheets() -> None:
    """Crystalline silicon rises 0.25 to 0.40 % per kelvin (common practice): each row lies within that at its ends."""
    with (ROOT / "solar" / "open_circuit_by_ambient.csv").open(encoding="utf-8", newline="") as file:
        rows = [(float(row["down_to_degC"]), float(row["factor"])) for row in csv.DictReader(file)]
    assert [low for low, _ in rows] == sorted((low for low, _ in rows), reverse=True)
    for low, factor in rows:
        assert 1 + 0.0025 * (25 - low) <= factor <= 1 + 0.0041 * (25 - low)


def test_colder_than_the_table_is_not_verified() -> None:
    found = only(roof(coldest="-41 degC"), VOLTS, "roof")
    assert (found.severity, found.value) == ("warn", None)
    assert fails(roof(coldest="-41 degC", voc_rise="0.3 %", max_input="45 V"), VOLTS) == ["roof"]


def test_an_unstated_coldest_day_is_assumed_and_said() -> None:
    """The lowest ambient that the plan speaks of, here that of a case: 10 degC, so x 1.06."""
    cases = ({"name": "winter", "ambient": "10 degC"},)
    found = only(roof(coldest=None, cases=cases), VOLTS, "roof")
    assert found.severity == "warn"
    assert "10 degC" in found.message
    assert found.value == pytest.approx(38.3 * 1.06)
    # What fails there fails all the more on a colder day: the fail stands alone.
    assert only(roof(coldest=None, cases=cases, max_input="40 V"), VOLTS, "roof").severity == "fail"


def test_an_unstated_input_limit_is_not_verified_and_a_stated_one_passes() -> None:
    assert only(roof(max_input=None), VOLTS, "roof").severity == "warn"
    assert findings(roof(), VOLTS) == []


def test_devices_and_protection_on_the_array_s_side_are_held_to_it() -> None:
    """43.7 V on the coldest day: above a 32 V fuse (its type's figure) and a 40 V switch, below a 60 V one."""
    switch: Row = {"name": "isolator", "kind": "switch", "from": "roof box", "to": "roof lead", "continuous": "20 A"}
    more: dict[str, Any] = {"runs": (cable("lead", "roof lead", "input", protection=fuse("15 A")),)}
    plan = roof(devices=({**switch, "volts": "40 V"},), **more)
    assert fails(plan, VOLTS) == ["lead", "isolator"] or fails(plan, VOLTS) == ["isolator", "lead"]
    assert "typical of its type" in only(plan, VOLTS, "lead").message
    held: dict[str, Any] = {"runs": (cable("lead", "roof lead", "input", protection=fuse("15 A", volts="60 V")),)}
    assert findings(roof(devices=({**switch, "volts": "60 V"},), **held), VOLTS) == []
    assert only(roof(devices=(switch,), **held), VOLTS, "roof").severity == "warn"


def test_what_a_remedy_asks_for_is_rounded_up() -> None:
    """38.3 V x 1.14 = 43.662 V: a fuse for 43.7 V, never for 43.6 V; of 1.16 x 38.3 V = 44.428 V 44.5 V."""
    for coldest, volts in (("-7 degC", "43.7 V"), ("-15 degC", "44.5 V")):
        plan = roof(coldest=coldest, run={"protection": fuse("15 A")})
        assert volts in (only(plan, VOLTS, "array cable").remedy or "")


def test_the_controller_s_input_is_no_lonely_point() -> None:
    assert findings(roof(), "plan.lonely-point") == []


def test_cables_past_the_controller_are_a_fault_of_their_own() -> None:
    found = only(roof(runs=(cable("slip", "roof box", "bank"),)), "solar.past-controller", "roof")
    assert found.severity == "fail"
    assert '"bank"' in found.message
    assert findings(roof(), "solar.past-controller") == []


# Short-circuit current -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(("isc", "over"), [("16 A", False), ("16.01 A", True)])
def test_boundary_of_the_cable_before_correction(isc: str, over: bool) -> None:
    """NEC 690.8(A) and (B): 16 A x 1.25 x 1.25 = 25 A, the figure of 12 AWG at 75 degC in NEC Table 310.16."""
    plan = roof(size="12 AWG", isc=isc, info={"ambient": "30 degC"})
    assert (fails(plan, AMPS) == ["array cable"]) is over


def test_corrected_for_its_place_the_cable_carries_the_current_once() -> None:
    """12 AWG, 25 A, at 56 to 60 degC x 0.58 (NEC Table 310.15(B)(1)) = 14.5 A: 11.6 A x 1.25 = 14.5 A is the most."""
    for isc, over in (("11.6 A", False), ("11.61 A", True)):
        plan = roof(size="12 AWG", isc=isc, info={"ambient": "60 degC"})
        assert (fails(plan, AMPS) == ["array cable"]) is over
    found = only(roof(size="12 AWG", isc="12 A", info={"ambient": "60 degC"}), AMPS, "array cable")
    assert (found.value, found.limit) == (pytest.approx(15), pytest.approx(14.5))
    assert "1 string x 12 A x 1.25 (bright sun) = 15 A" in found.working


def test_strings_in_parallel_add_up_and_modules_in_series_do_not() -> None:
    """Four modules of 8 A: two strings of two give 2 x 8 x 1.25 = 20 A; one string of four 10 A."""
    fused = {"run": {"protection": fuse("15 A", volts="600 V")}, "modules": 4}
    found = only(roof(series=2, **fused), AMPS, "array cable")  # type: ignore[arg-type]
    assert found.value == pytest.approx(2 * 8 * 1.5625)
    assert findings(roof(series=4, **fused), AMPS) == []  # type: ignore[arg-type]


@pytest.mark.parametrize(("rating", "over"), [("12.5 A", False), ("12.49 A", True)])
def test_boundary_of_protection(rating: str, over: bool) -> None:
    """NEC 690.8(B): 8 A x 1.25 x 1.25 = 12.5 A is the least rating."""
    plan = roof(run={"protection": fuse(rating, volts="600 V")})
    assert (fails(plan, AMPS) == ["array cable"]) is over


@pytest.mark.parametrize(("rated", "over"), [("10 A", False), ("9.99 A", True)])
def test_boundary_of_devices(rated: str, over: bool) -> None:
    """NEC 690.8(A): 8 A x 1.25 = 10 A is the greatest current."""
    switch = {"name": "isolator", "kind": "switch", "from": "roof box", "to": "input", "continuous": rated,
              "volts": "600 V"}  # fmt: skip
    assert (fails(roof(devices=(switch,)), AMPS) == ["isolator"]) is over


def test_a_device_without_a_rating_is_not_verified() -> None:
    switch = {"name": "isolator", "kind": "switch", "from": "roof box", "to": "input", "volts": "600 V"}
    assert only(roof(devices=(switch,)), AMPS, "isolator").severity == "warn"


def test_the_remedy_is_a_size_that_passes() -> None:
    found = only(roof(size="12 AWG", isc="30 A"), AMPS, "array cable")
    assert found.remedy is not None
    size = found.remedy.split(": ")[1].split(" carries")[0]
    assert findings(roof(size=size, isc="30 A"), AMPS) == []


def test_cables_of_the_battery_s_side_are_left_alone() -> None:
    assert fails(roof(isc="100 A"), AMPS) == ["array cable"]


# Reverse current -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("allowed", "told"), [("20 A", False), ("19.99 A", True)])
def test_boundary_of_the_reverse_current(allowed: str, told: bool) -> None:
    """Three strings: two of them feed the third 2 x 8 A x 1.25 = 20 A (NEC 690.9(A), IEC 62548)."""
    found = findings(roof(modules=3, max_fuse=allowed), REVERSE)
    assert bool(found) is told
    if told:
        assert found[0].value == pytest.approx(20)
        # 1.56 x 8 A = 12.5 A is the least rating of a string's fuse.
        assert "from 12.5 A to 20 A" in (found[0].remedy or "")


def test_no_fuse_fits_where_the_least_rating_is_above_what_the_modules_stand() -> None:
    found = only(roof(modules=4, max_fuse="12 A"), REVERSE, "roof")
    assert found.remedy is not None
    assert "no fuse fits" in found.remedy


@pytest.mark.parametrize(("modules", "told"), [(1, False), (2, False), (3, True)])
def test_without_a_stated_fuse_three_strings_are_not_verified(modules: int, told: bool) -> None:
    """Two strings: a module stands the current of one other string (common practice); from three on it is unsure."""
    assert bool(findings(roof(modules=modules), REVERSE)) is told


def test_in_other_rulebooks_the_rules_hold_as_common_practice() -> None:
    plan = roof(modules=3, max_fuse="15 A", max_input="40 V", size="1.5 mm2", isc="20 A", book="small-craft-iso")
    for rule in (VOLTS, AMPS, REVERSE):
        (found,) = findings(plan, rule)
        assert "common practice where another rulebook holds (provisional)" in found.basis


# The controller itself -----------------------------------------------------------------------------------------

CONTROLLER = "solar.controller"


def told(**more: Any) -> list[str]:
    """The severities of what is said of the controller, whose output is 30 A at 14.4 V and at most 400 W."""
    return [one.severity for one in findings(roof(**more), CONTROLLER, "roof")]


def test_a_controller_smaller_than_its_array_is_noted() -> None:
    """Two modules give 2 x 31 V x 7.5 A = 465 W, over 400 W."""
    found = only(roof(modules=2, series=2), CONTROLLER, "roof")
    assert (found.severity, found.value, found.limit) == ("note", pytest.approx(465), 400)
    assert told(modules=1) == []


def test_an_array_below_the_charging_voltage_does_not_charge() -> None:
    """31 V is well above 14.4 V; a module of 14.4 V at its greatest power leaves nothing to step down."""
    assert told(vmp="14.4 V", imp="7.5 A") == ["warn"]
    assert told(vmp="14.5 V", imp="7.5 A") == []


def test_ratings_that_no_module_has_are_doubtful() -> None:
    assert told(vmp="39 V", imp="7 A") == ["warn"]
    assert told(imp="8.01 A", isc="8 A") == ["warn"]
    assert told(imp="8 A", isc="8 A") == []
