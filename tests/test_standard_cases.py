"""The cases of a plan that states none, against what an installer would write down for it."""

from typing import Any

import pytest

from farvolt.assumptions import assumptions
from farvolt.plan import Case, Plan
from farvolt.standard_cases import MOST_LOST, standard_cases, standard_set
from wiring import Row, bank, cable, charger, context_of, lamp, plan_of

LEAD: Row = {"name": "house bank", "kind": "battery", "at": "bus", "chemistry": "agm", "capacity": "100 Ah"}
LITHIUM: Row = {**LEAD, "chemistry": "lfp"}
ROOF: Row = {"name": "roof", "kind": "solar", "at": "roof", "power": "216 W", "ceiling": "14.4 V"}
FEED = cable("feed", "bus", "panel")
LAMP, FRIDGE = lamp("lamp", "panel", "2 A"), lamp("fridge", "panel", "5 A", continuous=True)


def plan_with(*sources: Row, loads: tuple[Row, ...] = (LAMP, FRIDGE), runs: tuple[Row, ...] = (), **more: Any) -> Plan:
    """A panel of two loads behind a bus, and what more is given."""
    return plan_of([FEED, *runs], loads, sources=sources, **more)


def states(case: Case) -> dict[str, str]:
    """Each source's state in a word or figure."""
    return {name: str(one.charge or one.irradiance or one.state) for name, one in case.sources.items()}


def by_name(plan: Plan) -> dict[str, Case]:
    """The set by the names of its cases."""
    return {case.name: case for case in standard_cases(plan)}


def test_a_bank_alone_is_checked_once_at_low_charge() -> None:
    """Half charge is the usual floor of lead-acid (common practice); there is no other source to lose or to charge."""
    (only,) = standard_cases(plan_with(LEAD))
    assert (only.name, only.loads, states(only)) == ("Everything on, low charge", "all", {"house bank": "50 %"})


@pytest.mark.parametrize(
    ("changes", "expected"),
    [
        ({"chemistry": "flooded"}, "50 %"), ({"chemistry": "gel"}, "50 %"), ({"chemistry": "nmc"}, "20 %"),
        ({"chemistry": "lfp"}, "20 %"), ({"charge": "30 %"}, "30 %"), ({"charge": "80 %"}, "50 %"),
        ({"emf": "12.6 V"}, "on"),
    ],
)  # fmt: skip
def test_low_charge_follows_the_chemistry_unless_the_plan_goes_lower(changes: Row, expected: str) -> None:
    """A third of charge stated is worse than half; a stated EMF leaves no charge to choose."""
    first = standard_cases(plan_with({**LEAD, **changes}))[0]
    assert states(first)["house bank"] == expected
    assert first.name == ("Everything on" if expected == "on" else "Everything on, low charge")


def test_a_bank_with_a_charger_and_solar() -> None:
    """Worked by hand: 20 A and 15 A (216 W at 14.4 V) carry 2 A + 5 A, so the bank may be lost as well."""
    found = by_name(plan_with(LITHIUM, charger(at="bus"), {**ROOF, "at": "bus"}))
    assert {name: (case.loads, states(case)) for name, case in found.items()} == {
        "Everything on, low charge": ("all", {"house bank": "20 %", "charger": "off", "roof": "off"}),
        "Charging, bank full, little load": (
            {"fridge": 1.0}, {"house bank": "full", "charger": "on", "roof": "100 %"},
        ),
        "Charging, low charge, little load": (
            {"fridge": 1.0}, {"house bank": "20 %", "charger": "on", "roof": "100 %"},
        ),
        'Without "house bank"': ("all", {"house bank": "off", "charger": "on", "roof": "on"}),
        'Without "charger"': ("all", {"house bank": "on", "charger": "off", "roof": "on"}),
        'Without "roof"': ("all", {"house bank": "on", "charger": "on", "roof": "off"}),
    }  # fmt: skip
    assert not any(case.surge for case in found.values())


def test_little_load_is_none_where_no_load_is_continuous() -> None:
    found = by_name(plan_with(LEAD, charger(at="bus"), loads=(LAMP,)))
    assert found["Charging, bank full, little load"].loads == "none"


def test_the_highest_voltage_is_the_chargers_and_the_lowest_the_low_banks() -> None:
    """A full bank takes nothing, so the bus stands at 14.4 V, less no more than the droop of 0.1 % at 20 A; half
    charged AGM rests at 12.0 to 12.3 V."""
    context = context_of(plan_with(LEAD, charger(at="bus"), loads=(LAMP,)))
    volts = {one.name: float(one.solutions["cold"].load_volts[0]) for one in context.cases}
    assert volts["Charging, bank full, little load"] == max(volts.values()) == pytest.approx(14.4, abs=0.0145)
    assert volts["Everything on, low charge"] == min(volts.values())
    assert 11.8 < volts["Everything on, low charge"] < 12.3


def test_chargers_alone_stay_on() -> None:
    """Nothing else would feed the loads; the lesser of two can be lost, and each carries 7 A of load."""
    plan = plan_with(charger(at="bus"), charger("second", "bus", "10 A"))
    found = by_name(plan)
    assert list(found) == ["Everything on", "Little load", 'Without "charger"', 'Without "second"']
    assert states(found["Everything on"]) == {"charger": "on", "second": "on"}


def test_a_charger_that_alone_feeds_a_load_stays_on() -> None:
    """A diode towards the bank: the bank cannot feed the heater on the charger's side."""
    diode: Row = {"name": "isolator", "kind": "diode", "from": "charger", "to": "bus"}
    plan = plan_with(LEAD, charger(), loads=(LAMP, lamp("heater", "charger")), devices=[diode])
    assert states(standard_cases(plan)[0]) == {"house bank": "50 %", "charger": "on"}
    without = plan_with(LEAD, charger(), loads=(LAMP,), devices=[diode])
    assert states(standard_cases(without)[0]) == {"house bank": "50 %", "charger": "off"}


def test_a_source_behind_an_open_switch_stands_in_for_none() -> None:
    """The second bank feeds nothing while its switch is open, and the first is then the only source."""
    switch: Row = {"name": "parallel switch", "kind": "switch", "from": "spare", "to": "bus"}
    sources = (LEAD, bank("spare"))
    assert len(standard_cases(plan_with(*sources, devices=[{**switch, "state": "open"}]))) == 1
    names = list(by_name(plan_with(*sources, devices=[switch])))
    assert names == ["Everything on, low charge", 'Without "house bank"', 'Without "spare"']


def test_a_converters_island_is_not_left_without_feed() -> None:
    """The only source of the radio's bus is never lost; a charger there beside it is a stand-in."""
    supply: Row = {
        "name": "radio supply", "kind": "converter", "from": "bus", "at": "radio", "nominal": "12 V", "volts": "13.8 V",
        "amps": "10 A", "efficiency": "90 %",
    }  # fmt: skip
    loads = (LAMP, lamp("radio", "radio"))
    assert list(by_name(plan_with(LEAD, supply, loads=loads))) == ["Everything on, low charge"]
    found = by_name(plan_with(LEAD, supply, charger(at="radio"), loads=loads))
    assert 'Without "radio supply"' in found
    assert 'Without "house bank"' not in found


@pytest.mark.parametrize(
    ("surges", "largest"),
    [
        # 12 V / 0.3 ohm = 40 A beats 18 A and 3 x 5 A.
        ({"pump": {"current": "18 A"}, "fridge": {"times": 3}, "winch": {"resistance": "0.3 ohm"}}, "winch"),
        # 12 V / 1 ohm = 12 A and 18 A do not reach 4 x 5 A.
        ({"pump": {"current": "18 A"}, "fridge": {"times": 4}, "winch": {"resistance": "1 ohm"}}, "fridge"),
        ({"pump": {"current": "21 A"}, "fridge": {"times": 4}}, "pump"),
    ],
)
def test_the_largest_start_is_taken(surges: dict[str, Row], largest: str) -> None:
    """At low charge, with all else on and the charger off."""
    loads = [lamp(name, "panel", "5 A", **({"surge": surges[name]} if name in surges else {}))
             for name in ("pump", "fridge", "winch")]  # fmt: skip
    found = by_name(plan_with(LEAD, charger(at="bus"), loads=tuple(loads)))
    starts = [case for case in found.values() if case.surge]
    assert [(one.name, one.surge, one.loads) for one in starts] == [(f'Start of "{largest}"', (largest,), "all")]
    assert states(starts[0]) == {"house bank": "50 %", "charger": "off"}


def test_an_inverters_start_counts_what_it_draws() -> None:
    """2 x (240 W / 80 % + 12 W) / 12 V = 52 A, above the 45 A of the pump."""
    inverter: Row = {
        "name": "inverter", "at": "panel", "power": "240 W", "efficiency": "80 %", "standby": "12 W",
        "surge": {"times": 2},
    }  # fmt: skip
    plan = plan_with(LEAD, loads=(inverter, lamp("pump", "panel", surge={"current": "45 A"})))
    assert standard_cases(plan)[-1].surge == ("inverter",)


@pytest.mark.parametrize(
    ("amps", "loads"),
    [("7.1 A", "all"), ("6.9 A", {"fridge": 1.0}), ("4.9 A", None)],
)
def test_a_bank_is_lost_only_where_the_charger_carries_the_loads(amps: str, loads: object) -> None:
    """2 A of lamp and 5 A of fridge, which must run on; a charger too small for it is no stand-in for a bank."""
    found = standard_set(plan_with(LEAD, charger(at="bus", amps=amps)))
    lost = [case.loads for case in found.cases if case.name == 'Without "house bank"']
    assert lost == ([] if loads is None else [loads])
    assert len(found.left_out) == (loads is None)
    assert all('"house bank"' in line for line in found.left_out)


def test_an_inverter_at_rest_is_not_carried() -> None:
    """It is one apparatus with the charger, and draws nothing while that is on: 5 A of fridge are left."""
    inverter: Row = {"name": "inverter", "at": "panel", "power": "1000 W", "inverter_of": "charger"}
    found = by_name(plan_with(LEAD, charger(at="bus", amps="6 A"), loads=(FRIDGE, inverter)))
    assert found['Without "house bank"'].loads == "all"


def test_cases_that_come_to_the_same_are_left_out() -> None:
    """A bank stated at half charge: without the charger is everything on at low charge."""
    assert 'Without "charger"' not in by_name(plan_with({**LEAD, "charge": "50 %"}, charger(at="bus")))
    assert 'Without "charger"' in by_name(plan_with({**LEAD, "charge": "60 %"}, charger(at="bus")))


def test_many_sources_are_not_all_lost_and_the_set_says_so() -> None:
    found = standard_set(plan_with(LEAD, *(charger(f"charger {i}", "bus") for i in range(20))))
    lost = [case.name for case in found.cases if case.name.startswith("Without")]
    assert lost[0] == 'Without "house bank"'
    assert len(lost) == MOST_LOST
    assert any(str(MOST_LOST) in line for line in found.left_out)


def test_a_study_says_which_cases_were_taken_and_which_left_out() -> None:
    plan = plan_with(LEAD, charger(at="bus", amps="1 A"))
    told = " ".join(assumptions(context_of(plan)))
    for case in standard_cases(plan):
        assert case.name in told
    assert 'Low charge of "house bank": 50 %' in told
    assert 'The loss of "house bank" is not checked' in told
    stated = plan_with(LEAD, cases=[{"name": "Evening"}])
    assert "The plan states no cases" not in " ".join(assumptions(context_of(stated)))


def test_long_names_make_cases_with_names_that_can_be_read() -> None:
    """A name may have 200 characters; the case's own must have no more."""
    (found,) = [case for case in standard_cases(plan_with(LEAD, loads=(lamp("x" * 200, "panel", surge={"times": 2}),)))
                if case.surge]  # fmt: skip
    assert len(found.name) == 200
    assert found.surge == ("x" * 200,)
