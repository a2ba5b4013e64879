"""conductor.fit: cables against the terminals and studs at their ends."""

from itertools import pairwise
from typing import Any

import pytest

from farvolt.conductors import parse_size
from farvolt.lugs import known_stud
from farvolt.plan import Plan
from farvolt.tables import read
from farvolt_data import ROOT
from wiring import cable, fails, findings, fuse, lamp, only, plan_of

RULE = "conductor.fit"
STUDS = {row["stud"]: float(row["diameter_mm"]) for row in read(ROOT / "devices" / "studs.csv")}
LUGS = read(ROOT / "devices" / "lugs.csv")


def ended(size: str, *, run: dict[str, Any] | None = None, **point: Any) -> Plan:
    """A cable that ends at a bar of which the plan says more."""
    runs = [cable("feed", "bank", "bar", size=size, protection=fuse("20 A"), **(run or {}))]
    return plan_of(runs, [lamp("lamp", "bar")], points=[{"name": "bar", **point}])


@pytest.mark.parametrize(
    ("size", "largest", "fails_it"),
    [
        ("16 mm2", "16 mm2", False),
        ("25 mm2", "16 mm2", True),
        ("6 AWG", "16 mm2", False),  # ASTM B258: 13.30 mm2
        ("4 AWG", "16 mm2", True),  # 21.15 mm2
        ("16 mm2", "6 AWG", True),
        ("16 mm2", "4 AWG", False),
    ],
)
def test_boundary_is_the_area_of_the_largest_conductor(size: str, largest: str, fails_it: bool) -> None:
    assert (fails(ended(size, largest_size=largest), RULE) == ["feed"]) is fails_it


def test_the_return_counts_too() -> None:
    plan = ended("10 mm2", run={"return": {"size": "25 mm2"}}, largest_size="16 mm2")
    found = only(plan, RULE, "feed")
    assert "25 mm2" in found.message
    assert found.working == ("25 mm2 > 16 mm2",)


@pytest.mark.parametrize(
    ("size", "stud", "told"),
    [
        ("70 mm2", "M6", True), ("70 mm2", "M8", False), ("70 mm2", "5/16 in", False), ("2/0 AWG", "1/4 in", True),
        ("1.5 mm2", "M10", False), ("1.5 mm2", "M12", True), ("10 mm2", "#8", True), ("10 mm2", "#10", False),
    ],
)  # fmt: skip
def test_lugs_that_are_not_usual_are_doubtful(size: str, stud: str, told: bool) -> None:
    """Common practice, from memory: what lugs are usually stocked for."""
    found = findings(ended(size, stud=stud), RULE)
    assert [one.severity for one in found] == ["warn"] * told
    assert all("provisional" in one.basis and stud in one.message for one in found)


@pytest.mark.parametrize(
    ("written", "name"),
    [
        ("M8", "M8"), ("m 8", "M8"), ("3/8 in", "3/8 in"), ('3/8"', "3/8 in"), ("3/8", "3/8 in"), ("#10", "#10"),
        ("No. 10", "#10"), ("5/16 inch", "5/16 in"), ("M7", None), ("thick", None), ("8", None), ("", None),
    ],
)  # fmt: skip
def test_a_stud_has_one_name_however_it_is_spelt(written: str, name: str | None) -> None:
    assert known_stud(written) == name


def test_an_unknown_stud_is_said_with_what_is_accepted_and_the_nearest() -> None:
    found = only(ended("10 mm2", stud="M08"), RULE, "bar")
    assert (found.severity, found.kind) == ("warn", "point")
    assert '"M08" is not a known stud size; did you mean "M8"?' in found.message
    assert "3/8 in" in found.working[0]


def test_sizes_that_the_plan_leaves_open_are_not_held_to_a_stud() -> None:
    runs = [cable("feed", "bank", "bar", size=None, protection=fuse("20 A"))]
    plan = plan_of(runs, [lamp("lamp", "bar", "150 A")], points=[{"name": "bar", "largest_size": "1.5 mm2"}])
    assert findings(plan, RULE) == []


def test_thicker_conductors_never_fit_smaller_studs() -> None:
    rows = [(float(row["area_up_to_mm2"]), STUDS[row["smallest_stud"]], STUDS[row["largest_stud"]]) for row in LUGS]
    assert all(low < high for low, high in pairwise(row[0] for row in rows))
    assert all(low <= high for low, high in pairwise(row[1] for row in rows))
    assert all(smallest < largest for _, smallest, largest in rows)


PAIRS = ["1.5 mm2, 16 AWG", "2.5 mm2, 14 AWG", "4 mm2, 12 AWG", "6 mm2, 10 AWG", "10 mm2, 8 AWG", "16 mm2, 6 AWG",
         "25 mm2, 4 AWG", "35 mm2, 2 AWG", "50 mm2, 1/0 AWG", "70 mm2, 2/0 AWG", "95 mm2, 3/0 AWG",
         "120 mm2, 4/0 AWG"]  # fmt: skip


@pytest.mark.parametrize("pair", PAIRS)
def test_sizes_that_take_the_same_lugs_share_a_band_that_names_them(pair: str) -> None:
    """Common practice: makers list these metric and American sizes together."""
    bands = [
        next(row["sizes"] for row in LUGS if parse_size(size).area_mm2 <= float(row["area_up_to_mm2"]))
        for size in pair.split(", ")
    ]
    assert bands[0] == bands[1]
    for size in pair.split(", "):
        assert size.split()[0] in bands[0].replace(",", "").split()
