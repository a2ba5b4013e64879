"""The shipped plans: they parse, solve with a certificate, and show exactly the faults they were given."""

from collections.abc import Callable
from functools import lru_cache
from pathlib import Path

import pytest

from farvolt import examples, planfile
from farvolt.errors import FarvoltError
from farvolt.results import Study
from farvolt.rulebook import shipped
from farvolt.study import study

VAN, CABIN = "instrument-repair-van", "bird-observatory-cabin"

FAILS = {
    VAN: {("protection.missing", "bank gauge lead")},
    CABIN: {
        ("protection.over-conductor", "rotator feed"),
        ("protection.far-end", "rotator feed"),
        ("volts.low", "east camera"),
    },
}
WARNS = {
    VAN: {("drop.load", "fridge"), ("protection.far-end", "bank main")},
    CABIN: {
        *((rule, load) for rule in ("drop.load", "drop.branch") for load in ("east camera", "east housing heater")),
        ("protection.far-end", "east mast feed"),
        ("protection.far-end", "microphone feed"),
    },
}
RUNS = {VAN: 27, CABIN: 40}


@lru_cache
def studied(name: str) -> Study:
    file = planfile.read(examples.path(name))
    return study(file.plan, file.folder)


@lru_cache
def studied_starter() -> Study:
    return study(planfile.parse(examples.starter_text()), Path())


def told(result: Study, severity: str) -> set[tuple[str, str]]:
    return {(one.rule, one.subject) for one in result.findings if one.severity == severity}


def test_the_examples_are_these() -> None:
    assert examples.names() == (CABIN, VAN)
    assert [examples.title(name) for name in examples.names()] == [
        "Bird observatory cabin",
        "Instrument-repair van",
    ]


@pytest.mark.parametrize("name", [VAN, CABIN])
def test_text_is_the_file_and_says_that_it_is_invented(name: str) -> None:
    text = examples.text(name)
    assert text.encode() == examples.path(name).read_bytes()
    assert text.endswith("\n")
    assert "\t" not in text
    assert "Everything here is invented" in text
    plan = planfile.parse(text)
    assert plan == planfile.read(examples.path(name)).plan
    assert "invented" in plan.plan.notes.lower()


@pytest.mark.parametrize("name", [VAN, CABIN])
def test_runs_are_labelled_in_order(name: str) -> None:
    labels = [run.label for run in planfile.parse(examples.text(name)).runs]
    assert labels == [f"W{number:02}" for number in range(1, RUNS[name] + 1)]


@pytest.mark.parametrize("name", [VAN, CABIN, "starter"])
def test_every_case_solves_with_its_certificate(name: str) -> None:
    result = studied_starter() if name == "starter" else studied(name)
    assert len(result.cases) == (2 if name == "starter" else 4)
    for case in result.cases:
        assert case.solved
        assert case.share_held == 1
        assert case.imbalance_A <= 1e-9
        balance = case.power_in_W - case.power_loads_W - case.power_lost_W
        assert abs(balance) <= 1e-9 * max(abs(case.power_in_W), case.power_loads_W)


@pytest.mark.parametrize("name", [VAN, CABIN])
def test_exactly_the_faults_that_were_put_in_are_found(name: str) -> None:
    assert told(studied(name), "fail") == FAILS[name]
    assert told(studied(name), "warn") == WARNS[name]


@pytest.mark.parametrize("name", [VAN, CABIN])
def test_every_load_runs_in_some_case_and_states_its_range(name: str) -> None:
    plan = studied(name).plan
    for load in plan.loads:
        assert any(case.share(load.name) > 0 for case in plan.cases)
        assert load.min_volts is not None
        assert load.max_volts is not None


def test_the_starter_passes_every_check() -> None:
    assert not studied_starter().failing
    assert told(studied_starter(), "warn") == set()


def test_the_starter_is_short_and_names_every_rulebook_and_kind_of_source() -> None:
    text = examples.starter_text()
    comments = " ".join(line.partition("#")[2] for line in text.splitlines())
    assert len(text.splitlines()) < 80
    assert "invented" in comments
    for word in (*shipped(), "charger", "solar", "converter", "flooded", "agm", "gel", "nmc"):
        assert word in comments or f'"{word}"' in text


def test_east_mast_cable_has_the_published_resistance() -> None:
    """NEC chapter 9 Table 8: 12 AWG stranded, uncoated copper, 1.98 ohm per 1000 ft at 75 degC."""
    case = studied(CABIN).cases[0]
    run = next(one for one in case.runs if one.name == "east mast feed")
    breaker_ohm = 0.130 / 15
    assert run.return_ohm == pytest.approx(150 * 1.98e-3, rel=0.01)
    assert run.feed_ohm == pytest.approx(150 * 1.98e-3 + breaker_ohm, rel=0.01)
    # Ohm's law round the loop: what the far end lacks.
    assert run.feed_A is not None
    assert run.drop_V == pytest.approx(run.feed_A * (2 * 150 * 1.98e-3 + breaker_ohm), rel=0.01)


def test_fridge_cable_has_the_published_resistance() -> None:
    """IEC 60228 class 5, 4 mm2: 4.95 ohm/km at 20 degC; IEC 60364-5-52 Annex G takes 1.25 times that."""
    run = next(one for one in studied(VAN).cases[0].runs if one.name == "fridge feed")
    assert run.return_ohm == pytest.approx(6.5 * 4.95e-3 * 1.25, rel=1e-9)


def test_rotator_protection_is_held_against_the_small_conductor_rule() -> None:
    """NEC 240.4(D): 20 A at most for 12 AWG copper, whatever its ampacity."""
    subject, rule = "rotator feed", "protection.over-conductor"
    found = next(one for one in studied(CABIN).findings if (one.subject, one.rule) == (subject, rule))
    assert (found.value, found.limit, found.unit) == (30, 20, "A")


def test_chassis_return_carries_what_its_feed_carries() -> None:
    """Kirchhoff: only the work lamp returns through the chassis, so the bond carries that lamp's current."""
    case = next(one for one in studied(VAN).cases if one.name.startswith("Everything on"))
    runs = {run.name: run for run in case.runs}
    lamp = next(load for load in case.loads if load.name == "rear work lamp")
    assert lamp.amps is not None
    assert lamp.amps > 1
    assert abs(runs["chassis bond"].return_A or 0) == pytest.approx(lamp.amps, rel=1e-9)
    assert runs["rear work lamp feed"].feed_A == pytest.approx(lamp.amps, rel=1e-9)


@pytest.mark.parametrize("call", [examples.path, examples.text, examples.title])
def test_an_unknown_name_offers_the_nearest(call: Callable[[str], object]) -> None:
    with pytest.raises(FarvoltError, match=r'accepted: .*did you mean "instrument-repair-van"'):
        call("instrument-repair-ven")


@pytest.mark.parametrize("name", ["", "../starter", "x" * 500])
def test_a_name_is_never_a_path(name: str) -> None:
    with pytest.raises(FarvoltError, match="no example is called") as caught:
        examples.path(name)
    assert len(str(caught.value)) < 200
