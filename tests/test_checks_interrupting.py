"""Interrupting ratings against the highest fault current: fails above, silent below, never a pass on an estimate."""

from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from farvolt.plan import Plan
from farvolt.results import Finding
from farvolt.rulebook import load
from wiring import bank, cable, charger, fails, findings, fuse, lamp, only, plan_of

RULE = "protection.interrupting"


def behind(amps: str, guard: dict[str, Any], book: str = "small-craft-iso", **more: Any) -> Plan:
    """A fuse right at a bank whose maker states this short-circuit current."""
    source = {"name": "bank", "kind": "battery", "at": "bank", "emf": "12.8 V", "short_circuit": amps, **more}
    runs = [cable("feed", "bank", "lamp", protection=guard)]
    return plan_of(runs, [lamp("lamp", "lamp")], sources=[source], rulebook=book)


def severities(plan: Plan) -> list[str]:
    return [one.severity for one in findings(plan, RULE)]


@pytest.mark.parametrize(("amps", "expected"), [("999 A", []), ("1000 A", []), ("1001 A", ["fail"])])
def test_a_blade_fuse_clears_1000_A(amps: str, expected: list[str]) -> None:
    """DC interrupting rating of a blade fuse, 1000 A at 32 V: data sheets (data/protection, types.toml)."""
    assert severities(behind(amps, fuse("20 A", "0 m"))) == expected


def test_the_finding_says_what_and_how_and_what_to_buy() -> None:
    found = only(behind("2 kA", fuse("20 A", "0 m")), RULE, "feed")
    assert (found.value, found.limit, found.unit) == (pytest.approx(2000), 1000, "A")
    assert found.message == (
        '"feed": its 20 A blade interrupts 1000 A at 12 V; a bolted short drives 2000 A through it'
    )
    assert found.working[0] == 'Short at the 20 A blade of "feed" near "bank"'
    assert found.working[1].startswith('"bank": 12.8 V (stated in the plan) behind 6.4 mohm')
    assert "12.8 V / 6.4 mohm = 2000 A" in found.working
    assert found.working[-1] == "2000 A > 1000 A at 12 V"
    assert any("an arc or a loose joint draws less" in line for line in found.working)
    assert found.remedy is not None
    assert "interrupts at least 2000 A at 12 V" in found.remedy
    assert "provisional" in found.basis


def test_a_rating_stated_in_the_plan_goes_before_that_of_the_type() -> None:
    stated = fuse("20 A", "0 m", interrupting="3 kA")
    assert severities(behind("2 kA", stated)) == []
    found = only(behind("2 kA", fuse("20 A", "0 m", interrupting="500 A")), RULE, "feed")
    assert found.limit == 500
    assert "stated in the plan" in found.basis


def test_the_rating_is_that_at_the_voltage_of_the_system() -> None:
    """A fuse on the terminal stud clears 10 kA at up to 14 V and 2 kA at up to 58 V (types.toml, typical)."""

    def plan(volts: str, emf: str, amps: str) -> Plan:
        source = {"name": "bank", "kind": "battery", "at": "bank", "emf": emf, "short_circuit": amps}
        runs = [cable("feed", "bank", "lamp", protection=fuse("100 A", "0 m", "terminal fuse"))]
        return plan_of(runs, [lamp("lamp", "lamp")], sources=[source], info={"nominal": volts})

    assert fails(plan("12 V", "12.8 V", "6 kA"), RULE) == []
    assert fails(plan("24 V", "25.6 V", "6 kA"), RULE) == ["feed"]
    assert fails(plan("48 V", "51.2 V", "3 kA"), RULE) == ["feed"]


def test_a_type_that_is_not_made_for_the_voltage_is_not_verified() -> None:
    source = {"name": "bank", "kind": "battery", "at": "bank", "emf": "51.2 V", "short_circuit": "900 A"}
    runs = [cable("feed", "bank", "lamp", protection=fuse("20 A", "0 m"))]
    plan = plan_of(runs, [lamp("lamp", "lamp")], sources=[source], info={"nominal": "48 V"})
    found = only(plan, RULE, "feed")
    assert found.severity == "warn"
    assert "not verified" in found.message
    assert "32 V" in found.message


def test_distance_from_the_bank_brings_the_current_down() -> None:
    """2000 A at the terminals; 2 m there and back of 10 mm2 add 7.64 mohm: 12.8 V / 14.04 mohm = 912 A."""
    source = {"name": "bank", "kind": "battery", "at": "bank", "emf": "12.8 V", "short_circuit": "2 kA"}
    runs = [cable("feeder", "bank", "block"), cable("branch", "block", "lamp", protection=fuse("20 A", "0 m"))]
    assert fails(plan_of(runs, [lamp("lamp", "lamp")], sources=[source]), RULE) == []
    near = [cable("feeder", "bank", "block", "0.5 m"), runs[1]]
    assert fails(plan_of(near, [lamp("lamp", "lamp")], sources=[source]), RULE) == ["branch"]


ESTIMATED = {"name": "bank", "kind": "battery", "at": "bank", "chemistry": "agm", "capacity": "50 Ah"}


def test_an_estimated_battery_is_never_a_pass() -> None:
    """One warning for the battery that names every device; a device that the estimate overcomes fails all the same."""
    runs = [
        cable("main", "bank", "panel", "1 m", "16 mm2", protection=fuse("80 A", "0 m", "cartridge")),
        cable("branch", "panel", "lamp", "6 m", "2.5 mm2", protection=fuse("15 A", "5 m")),
    ]
    found = findings(plan_of(runs, [lamp("lamp", "lamp")], sources=[ESTIMATED]), RULE)
    (warning,) = found
    assert (warning.severity, warning.subject, warning.kind) == ("warn", "bank", "source")
    assert warning.message.startswith("Not verified: whether 2 fuses and breakers can interrupt a bolted short")
    assert [line.split(":")[0] for line in warning.working if ": its " in line] == ['"main"', '"branch"']
    close = [runs[0], runs[1] | {"protection": fuse("15 A", "0 m")}]
    again = findings(plan_of(close, [lamp("lamp", "lamp")], sources=[ESTIMATED]), RULE)
    assert [(one.severity, one.subject) for one in again] == [("fail", "branch"), ("warn", "bank")]
    assert "estimate" in again[0].message


def test_a_charger_alone_needs_little() -> None:
    runs = [cable("feed", "charger", "lamp", protection=fuse("30 A"))]
    assert severities(plan_of(runs, [lamp("lamp", "lamp")], sources=[charger()])) == []


# By the size of the bank -----------------------------------------------------------------------------------------


def test_the_rulebooks_table_by_size_of_bank() -> None:
    """E-11, 12 and 24 V: 1500/750 A up to 650 CCA, 3000/1500 A up to 1100, 5000/2500 A above; 2200 CCA is 500 Ah."""
    rule = load("small-craft-us").protection.interrupting
    assert rule is not None
    steps = [(one.up_to_V, one.up_to_cca, one.main_A, one.branch_A) for one in rule.steps]
    assert steps[:3] == [(24, 650, 1500, 750), (24, 1100, 3000, 1500), (24, 2200, 5000, 2500)]
    assert rule.cca(500) == pytest.approx(2200)
    assert rule.basis.provisional
    for volts, capacity, main in ((12, 100, 1500), (12, 148, 3000), (24, 250, 3000), (12, 251, 5000), (32, 250, 3000)):
        step = rule.step(volts, capacity)
        assert step is not None
        assert step.main_A == main
    assert rule.step(12, 501) is None
    assert rule.step(48, 100) is None


@pytest.mark.parametrize(("capacity", "main", "branch"), [("100 Ah", 1500, 750), ("240 Ah", 3000, 1500)])
def test_protection_is_held_to_the_table_whatever_the_current(capacity: str, main: int, branch: int) -> None:
    """The first from the bank against the first figure, the next against the second."""
    source = {"name": "bank", "kind": "battery", "at": "bank", "emf": "12.8 V", "short_circuit": "300 A"}
    runs = [
        cable("main", "bank", "panel", protection=fuse("80 A", "0 m", "strip", interrupting="1 A")),
        cable("branch", "panel", "lamp", protection=fuse("15 A", "0 m", interrupting="1 A")),
    ]
    plan = plan_of(
        runs, [lamp("lamp", "lamp")], sources=[source | {"capacity": capacity}], rulebook="small-craft-us"
    )  # fmt: skip
    assert {one.subject: one.value for one in findings(plan, RULE)} == {"main": main, "branch": branch}
    found = only(plan, RULE, "main")
    assert "E-11" in found.basis
    assert "CCA" in " ".join(found.working)
    other = plan_of(runs, [lamp("lamp", "lamp")], sources=[source | {"capacity": capacity}])
    assert only(other, RULE, "main").value == pytest.approx(300)


def test_protection_at_the_far_end_of_a_run_is_held_to_the_table_as_well() -> None:
    """The second on the way from the bank, at the other end of the run, against the second figure of up to 650 CCA;
    the first, wherever along the way it sits, against the first."""
    source = {"name": "bank", "kind": "battery", "at": "bank", "emf": "12.8 V", "short_circuit": "300 A"}
    weak = fuse("15 A", "0 m", interrupting="1 A")
    for ends, asked in (({"protection": weak, "protection_to": weak}, [750, 1500]), ({"protection_to": weak}, [1500])):
        runs = [cable("feed", "bank", "lamp", **ends)]
        plan = plan_of(
            runs, [lamp("lamp", "lamp")], sources=[source | {"capacity": "100 Ah"}], rulebook="small-craft-us"
        )
        assert sorted(one.value or 0 for one in findings(plan, RULE)) == asked


def test_a_bank_beyond_the_table_or_of_unknown_size_is_named() -> None:
    for more, words in (({"capacity": "600 Ah"}, "600 Ah at 12 V is beyond the table"), ({}, "states no capacity")):
        found = only(behind("900 A", fuse("20 A", "0 m"), "small-craft-us", **more), RULE, "bank")
        assert found.severity == "note"
        assert words in found.message


# Properties --------------------------------------------------------------------------------------------------------


def severity_of(found: list[Finding], run: str) -> int:
    """2 where it fails, 1 where it is not verified, 0 where it passes."""
    return max(({"fail": 2, "warn": 1, "note": 0}[one.severity] for one in found if one.subject == run), default=0)


@settings(max_examples=30, deadline=None)
@given(
    amps=st.integers(100, 20_000), more=st.integers(0, 20_000), metres=st.floats(0.1, 20), along=st.floats(0, 1),
    kind=st.sampled_from(["blade", "strip", "cartridge", "thermal breaker"]), book=st.sampled_from(["us", "iso"]),
)  # fmt: skip
def test_a_higher_fault_level_never_turns_a_fail_into_a_pass(
    amps: int, more: int, metres: float, along: float, kind: str, book: str
) -> None:
    def plan(short_A: int) -> Plan:
        source = bank(short_circuit=f"{short_A} A", capacity="200 Ah")
        del source["resistance"]
        guard = fuse("20 A", f"{along * metres:.4f} m", kind)
        runs = [cable("feed", "bank", "lamp", f"{metres + 1e-4:.4f} m", protection=guard)]
        return plan_of(runs, [lamp("lamp", "lamp")], sources=[source], rulebook=f"small-craft-{book}")

    low, high = findings(plan(amps), RULE), findings(plan(amps + more), RULE)
    assert severity_of(high, "feed") >= severity_of(low, "feed")
