"""Voltages that do not go together, conductors under continuous loads, and what is not checked."""

import pytest

from farvolt import planfile, protection_types
from farvolt.operating import system_nominal_V
from farvolt.results import Finding
from farvolt.study import study

PLAN = """format = 1
[plan]
nominal = "{nominal}"
rulebook = "{rulebook}"
[[sources]]
name = "bank"
kind = "battery"
at = "bank"
nominal = "{battery}"
emf = "{emf}"
resistance = "5 mohm"
[[runs]]
name = "feed"
from = "bank"
to = "heater"
length = "1 m"
size = "8 AWG"
insulation = "90 degC"
protection = {{ type = "{kind}", rating = "60 A", distance = "0.1 m" }}
[[loads]]
name = "heater"
at = "heater"
current = "48 A"
continuous = true
"""
TWELVE = {"nominal": "12 V", "battery": "12.8 V", "emf": "13 V", "kind": "large blade", "rulebook": "cabin-nec"}


def told(rule: str, more: str = "", **changed: str) -> list[Finding]:
    """The findings of a rule on the plan with some values changed."""
    found = study(planfile.parse(PLAN.format(**TWELVE | changed) + more)).findings
    return [one for one in found if one.rule == rule]


@pytest.mark.parametrize(
    ("battery", "system"), [(12.8, 12), (12, 12), (11.1, 12), (25.6, 24), (51.2, 48), (48, 48), (6.4, 6), (100, 100)]
)
def test_a_battery_stands_for_its_system(battery: float, system: float) -> None:
    """4 LFP cells of 3.2 V, 3 of 3.7 V or 6 lead-acid cells of 2 V serve 12 V systems (common practice)."""
    assert system_nominal_V(battery) == system


def test_a_bank_of_another_system_fails() -> None:
    """25.6 V on a 12 V plan is above 1.4 × 12 V = 16.8 V."""
    (one,) = told("plan.volts-mismatch", battery="25.6 V", emf="26 V")
    assert (one.severity, one.subject, one.value, one.limit) == ("fail", "bank", 25.6, 12.0)
    assert told("plan.volts-mismatch") == []


@pytest.mark.parametrize(("volts", "count"), [("14.4 V", 0), ("16.8 V", 0), ("16.9 V", 1), ("9.5 V", 1), ("9.6 V", 0)])
def test_chargers_stand_within_the_band(volts: str, count: int) -> None:
    """The boundaries are 0.8 and 1.4 times 12 V."""
    charger = f'[[sources]]\nname = "charger"\nkind = "charger"\nat = "bank"\nvolts = "{volts}"\namps = "10 A"\n'
    assert len(told("plan.volts-mismatch", charger)) == count


def test_an_island_of_its_own_takes_its_battery_s_system() -> None:
    """By hand: a heater rated 120 W behaves as 24²/120 = 4.8 ohm in a 24 V island: 25.6/4.8 = 5.33 A, not 21 A."""
    island = (
        '[[sources]]\nname = "second"\nkind = "battery"\nat = "b2"\nnominal = "24 V"\nemf = "25.6 V"\n'
        'resistance = "1 mohm"\n[[loads]]\nname = "far"\nat = "b2"\npower = "120 W"\nbehaves = "resistance"\n'
    )
    found = study(planfile.parse(PLAN.format(**TWELVE) + island))
    assert found.nominal_V["b2"] == 24
    assert found.cases[0].loads[1].amps == pytest.approx(25.6 / 4.801, rel=1e-6)


def test_protection_made_for_less_volts_is_named() -> None:
    """A blade type is made for 32 V (ISO 8820-3 data sheets): doubtful at 51 V, failing where the plan states 32 V."""
    assert protection_types.protection_type("large blade").volts < 51
    high = {"nominal": "48 V", "battery": "51.2 V", "emf": "52 V"}
    (one,) = told("protection.voltage-rating", **high)
    assert (one.severity, one.subject, one.value) == ("warn", "feed", 52.0)
    (stated,) = told("protection.voltage-rating", **high, kind='large blade", volts = "32 V')
    assert stated.severity == "fail"
    assert told("protection.voltage-rating", **high, kind='large blade", volts = "58 V') == []
    assert told("protection.voltage-rating") == []


def test_continuous_loads_need_table_ampacity_before_correction() -> None:
    """NEC 210.19, 215.2: 48 A continuous counts as 1.25 × 48 = 60 A; 8 AWG at 90 °C has 55 A (NEC Table 310.16)."""
    (one,) = [one for one in told("conductor.ampacity") if "continuous" in one.message]
    assert (one.severity, one.value, one.limit) == ("fail", pytest.approx(60, rel=1e-9), 55.0)
    assert not [one for one in told("conductor.ampacity", rulebook="small-craft-us") if "continuous" in one.message]


def test_a_rating_that_is_not_made_names_the_nearest_and_other_types() -> None:
    """60 A is made as a large blade (ISO 8820-3), not as a medium one, whose largest is 40 A."""
    (one,) = told("protection.rating-not-made", kind="blade")
    assert one.severity == "warn"
    assert one.remedy is not None
    assert one.remedy.startswith("40 A is the nearest")
    assert "large blade" in one.remedy
    assert told("protection.rating-not-made") == []


def test_what_is_taken_as_given_is_listed() -> None:
    """A source that a case does not name is on, and a load without a class is judged as the rulebook's default."""
    case = '[[cases]]\nname = "c"\n'
    lines = study(planfile.parse(PLAN.format(**TWELVE) + case)).assumptions
    assert any('Case "c" does not name "bank": taken as on' in line for line in lines)
    assert any('1 of 1 loads state no class: taken as "other", with 5 % of drop allowed' in line for line in lines)


def test_what_is_not_checked_is_always_said() -> None:
    """A plan that states none of these fields is told all the same."""
    (one,) = told("plan.not-checked-yet")
    assert one.severity == "note"
    assert one.message.startswith("Not checked by this version: ")


@pytest.mark.parametrize(
    ("more", "said"),
    [
        (
            '[[cases]]\nname = "c"\nsources = { "bank" = { charge = "50 %" } }\n',
            "charge of batteries that state emf (1)",
        ),
        (
            '[[runs]]\nname = "m"\nfrom = "bank"\nto = "x"\nlength = "1 m"\nresistance = "9 mohm"\njoints = 2\n',
            "joints and protection resistance of runs that state a measured resistance (1)",
        ),
        ('[[loads]]\nname = "x"\nat = "bank"\npower = "1 W"\nrecovery = "12 V"\n', "recovery without cut_out (1)"),
    ],
)
def test_a_field_that_means_nothing_here_is_said_to(more: str, said: str) -> None:
    """Read and kept, but never silently."""
    (one,) = told("plan.not-used-yet", more)
    assert said in one.message


LOAD = '[[loads]]\nname = "lamp"\nat = "heater"\npower = "10 W"\nrated_volts = "{rated}"\n{more}'


@pytest.mark.parametrize(
    ("rated", "more", "severity"),
    [
        ("12 V", "", None),
        ("24 V", "", "warn"),
        ("24 V", 'min_volts = "9 V"\n', None),
        ("6 V", "", "fail"),
        ("6 V", 'max_volts = "30 V"\n', None),
        ("6 V", 'max_volts = "11 V"\n', "fail"),
        ("15 V", "", None),
        ("15.1 V", "", "warn"),
        ("8.58 V", "", None),
        ("8.56 V", "", "fail"),
    ],
)
def test_loads_made_for_another_system(rated: str, more: str, severity: str | None) -> None:
    """Of the rated voltage, 0.8 to 1.4 times must hold 12 V: 12/0.8 = 15 V and 12/1.4 = 8.571 V are the boundaries."""
    found = [one for one in told("plan.volts-mismatch", LOAD.format(rated=rated, more=more)) if one.kind == "load"]
    assert [one.severity for one in found] == ([severity] if severity else [])
    if severity == "fail":
        assert "burns or is destroyed" in found[0].message


def test_a_source_of_another_system_says_what_joins_it() -> None:
    """A 24 V bank at the end of the heater's run: the run joins the two systems."""
    second = (
        '[[sources]]\nname = "other"\nkind = "battery"\nat = "far"\nnominal = "24 V"\nemf = "25 V"\n'
        'resistance = "5 mohm"\n[[runs]]\nname = "tie"\nfrom = "heater"\nto = "far"\nlength = "1 m"\nsize = "8 AWG"\n'
    )
    (one,) = told("plan.volts-mismatch", second)
    assert one.message == '"other" stands at 24 V in a system of 12 V, joined to "bank" by "feed", "tie"'


def test_a_charger_made_for_another_system_is_named_though_its_volts_fit() -> None:
    charger = (
        '[[sources]]\nname = "charger"\nkind = "charger"\nat = "bank"\n'
        'volts = "14 V"\namps = "10 A"\nnominal = "24 V"\n'
    )
    (one,) = told("plan.volts-mismatch", charger)
    assert one.message == '"charger" is made for 24 V in a system of 12 V, joined to "bank" at "bank"'


def test_a_converter_between_two_systems_is_no_mismatch() -> None:
    """24 V on one side, 12 V on the other; and one whose output is not that of the part it feeds."""
    row = (
        '[[sources]]\nname = "drop"\nkind = "converter"\nfrom = "bank"\nat = "low"\nnominal = "12 V"\n'
        'volts = "{volts}"\namps = "5 A"\nefficiency = "90 %"\n'
    )
    high = {"nominal": "24 V", "battery": "25.6 V", "emf": "26 V"}
    assert told("plan.volts-mismatch", row.format(volts="13 V"), **high) == []
    (one,) = told("plan.volts-mismatch", row.format(volts="24 V"), **high)
    assert (one.subject, one.severity, one.limit) == ("drop", "fail", 12.0)
