"""The checks of banks: rates, days, charging voltages and the cold; each with a plan that passes and the boundary."""

from typing import Any

import pytest

from farvolt.plan import Bank
from farvolt.results import Finding
from wiring import bank, cable, charger, findings, lamp, plan_of

LEAD = {"chemistry": "agm", "nominal": "12 V", "capacity": "100 Ah", "emf": "12.5 V"}
RUNS = [cable("main", "bank", "bus"), cable("charging", "charger", "bus")]


def told(rule: str, battery: dict[str, Any], *more: dict[str, Any], load: str = "10 A", **rows: Any) -> list[Finding]:
    """What one rule says of a bank with a load, and chargers, at a bus."""
    return findings(plan_of(RUNS, [lamp("load", "bus", load)], sources=[bank(**battery), *more], **rows), rule)


@pytest.mark.parametrize(
    ("limit", "load", "severity"),
    [("10 A", "10 A", None), ("10 A", "10.1 A", "fail"), ("50 A", "60 A", "fail"), ("70 A", "60 A", None)],
)
def test_a_string_gives_no_more_than_its_maker_allows(limit: str, load: str, severity: str | None) -> None:
    found = told("bank.discharge-rate", {"max_discharge": limit}, load=load)
    assert [one.severity for one in found] == ([severity] if severity else [])


def test_strings_share_the_current() -> None:
    assert told("bank.discharge-rate", {"max_discharge": "10 A", "strings": 2}, load="20 A") == []
    (one,) = told("bank.discharge-rate", {"max_discharge": "10 A", "strings": 2}, load="22 A")
    assert (one.value, one.limit) == (pytest.approx(11), 10)


def test_without_a_limit_the_chemistry_s_range_is_told() -> None:
    # agm, 100 Ah: 0.3 to 1 C is 30 to 100 A.
    severities = {load: [one.severity for one in told("bank.discharge-rate", LEAD, load=load)]
                  for load in ("29 A", "31 A", "101 A")}  # fmt: skip
    assert severities == {"29 A": [], "31 A": ["note"], "101 A": ["warn"]}
    (unknown,) = told("bank.discharge-rate", {})
    assert unknown.remedy is not None
    assert "max_discharge" in unknown.remedy


def test_a_start_beyond_the_lasting_limit_is_doubtful() -> None:
    loads = [lamp("winch", "bus", "5 A", surge={"current": "60 A"})]
    cases = [{"name": "start", "surge": ["winch"]}, {"name": "run"}]
    found = findings(plan_of(RUNS, loads, sources=[bank(max_discharge="50 A")], cases=cases), "bank.discharge-rate")
    assert [(one.severity, one.case) for one in found] == [("warn", "start")]


@pytest.mark.parametrize(
    ("amps", "severity"), [(("20 A", "10 A"), None), (("20 A", "20 A"), "warn"), (("35 A", "1 A"), "fail")]
)
def test_all_chargers_together_against_what_the_bank_takes(amps: tuple[str, str], severity: str | None) -> None:
    """Together beyond the limit is doubtful, since they may never run at once; one that is beyond it alone fails."""
    chargers = [charger("charger", amps=amps[0]), charger("other", "bus", amps[1])]
    found = told("bank.charge-rate", {**LEAD, "max_charge": "30 A"}, *chargers)
    assert [one.severity for one in found] == ([severity] if severity else [])
    if found:
        assert found[0].value == sum(float(one.split()[0]) for one in amps)


def test_charging_rate_without_a_limit() -> None:
    # agm, 100 Ah: 0.2 to 0.4 C is 20 to 40 A.
    severities = [
        [one.severity for one in told("bank.charge-rate", LEAD, charger(amps=amps))]
        for amps in ("20 A", "21 A", "41 A")
    ]
    assert severities == [[], ["note"], ["warn"]]


@pytest.mark.parametrize(
    ("volts", "ambient", "compensated", "severity"),
    [
        # 14.3 to 14.6 V at 25 degC; at 35 degC 6 x 3 to 5 mV x 10 lower: 14.0 to 14.42 V.
        ("14.4 V", "25 degC", False, None),
        ("14.6 V", "25 degC", False, None),
        ("14.7 V", "25 degC", False, "warn"),
        ("14.5 V", "35 degC", False, "warn"),
        ("14.5 V", "35 degC", True, None),
        ("13.8 V", "25 degC", False, "warn"),
    ],
)
def test_set_voltages_at_the_temperature_of_the_battery(
    volts: str, ambient: str, compensated: bool, severity: str | None
) -> None:
    one = charger(volts=volts, temperature_compensated=compensated)
    found = told("bank.charging-volts", LEAD, one, info={"ambient": ambient})
    assert [each.severity for each in found] == ([severity] if severity else [])


def test_too_low_on_the_coldest_day_alone_is_noted() -> None:
    cases = [{"name": "summer", "ambient": "25 degC"}, {"name": "winter", "ambient": "0 degC"}]
    (one,) = told("bank.charging-volts", LEAD, charger(volts="14.4 V"), cases=cases)
    # 25 K colder: 14.3 V + 6 x 25 x 3 mV = 14.75 V at least.
    assert (one.severity, one.limit) == ("note", pytest.approx(14.75, abs=1e-3))


def test_lithium_is_not_charged_below_freezing() -> None:
    lithium = {"chemistry": "lfp", "nominal": "12.8 V", "capacity": "100 Ah"}
    rule = "bank.low-temperature-charging"

    def at(ambient: str, charging: str = "on", **more: Any) -> list[tuple[str, str | None]]:
        cases = [{"name": "night", "ambient": ambient, "sources": {"charger": charging}, "loads": "none"}]
        return [(one.severity, one.case) for one in told(rule, {**lithium, **more}, charger(), cases=cases)]

    assert at("-1 degC") == [("warn", "night")]
    assert at("0 degC") == []
    assert at("-1 degC", "off") == []
    assert at("-1 degC", min_charge_temperature="-10 degC") == []
    assert at("4 degC", min_charge_temperature="5 degC") == [("fail", "night")]


def test_a_coldest_day_counts_where_anything_charges() -> None:
    lithium = {"chemistry": "lfp", "nominal": "12.8 V", "capacity": "100 Ah"}
    rule, asked = "bank.low-temperature-charging", Bank.model_validate({"coldest": "-5 degC"})
    for sources, values in (([charger()], [-5]), ([], [])):
        plan = plan_of(RUNS, [lamp("load", "bus")], sources=[bank(**lithium), *sources])
        assert [one.value for one in findings(plan.model_copy(update={"bank": asked}), rule)] == values


@pytest.mark.parametrize(("days", "fails"), [(1.0, False), (1.1, True), (0.5, False)])
def test_days_against_the_days_asked_for(days: float, fails: bool) -> None:
    # 2.0833 A x 24 h = 50 Ah a day; half of 100 Ah is one day.
    load = [lamp("load", "bus", "2.083333 A", hours_per_day=24)]
    plan = plan_of(RUNS, load, sources=[bank(**LEAD)], info={"ambient": "25 degC"})
    found = findings(plan.model_copy(update={"bank": Bank(autonomy=days)}), "bank.autonomy")
    assert [one.severity for one in found] == (["fail"] if fails else [])
    if found:
        assert found[0].value == pytest.approx(1.0, rel=1e-5)


def test_days_that_nothing_asks_for_are_not_judged() -> None:
    load = [lamp("load", "bus", "50 A", hours_per_day=24)]
    assert findings(plan_of(RUNS, load, sources=[bank(**LEAD)]), "bank.autonomy") == []
    asked = plan_of(RUNS, load, sources=[bank()]).model_copy(update={"bank": Bank(autonomy=2)})
    assert [one.severity for one in findings(asked, "bank.autonomy")] == ["note"]
