"""Shipped rulebooks against the published figures, and users' own rulebooks with their faults."""

import csv
import dataclasses
import math
from collections.abc import Iterator
from pathlib import Path

import pytest

from farvolt.conductors import parse_size
from farvolt.errors import QuantityError, RulebookError
from farvolt.protection_types import protection_type, protection_type_names
from farvolt.rulebook import FOLDER, Basis, Cell, Protection, Rulebook, load, shipped

CABIN, VEHICLE = ("cabin-iec", "cabin-nec"), ("leisure-vehicle-eu", "leisure-vehicle-us")
NAMES = (*CABIN, *VEHICLE, "small-craft-iso", "small-craft-us")


def protection(book: str) -> Protection:
    return load(book).protection


def bases(value: object) -> Iterator[Basis | Cell]:
    """Every basis and every cell anywhere in a rulebook."""
    if isinstance(value, Basis | Cell):
        yield value
    elif isinstance(value, dict):
        for item in value.values():
            yield from bases(item)
    elif isinstance(value, tuple):
        for item in value:
            yield from bases(item)
    elif dataclasses.is_dataclass(value):
        for field in dataclasses.fields(value):
            yield from bases(getattr(value, field.name))


def test_six_rulebooks_are_shipped_and_load_once() -> None:
    assert shipped() == NAMES
    assert load("cabin-nec") is load("cabin-nec")


@pytest.mark.parametrize("name", NAMES)
def test_every_limit_names_its_source(name: str) -> None:
    found = list(bases(load(name)))
    assert len(found) > 20
    for basis in found:
        assert (basis.text if isinstance(basis, Basis) else basis.source).strip()


@pytest.mark.parametrize("name", NAMES)
def test_every_rulebook_knows_the_classes_that_a_plan_may_carry_over(name: str) -> None:
    book = load(name)
    assert {"critical", "other"} <= set(book.classes)
    assert book.default_class in book.classes
    assert book.classes["critical"].limit_percent <= book.classes["other"].limit_percent


@pytest.mark.parametrize("name", NAMES)
def test_what_a_rulebook_leaves_out_has_its_reason(name: str) -> None:
    book = load(name)
    entries = {field.name: getattr(book, field.name) for field in dataclasses.fields(book)}
    entries |= {f.name: getattr(book.protection, f.name) for f in dataclasses.fields(book.protection)}
    absent = {key for key, value in entries.items() if value is None}
    assert absent == set(book.missing)


@pytest.mark.parametrize("path", sorted((FOLDER / "tables").glob("*.csv")), ids=lambda path: path.name)
def test_every_table_row_has_source_and_status(path: Path) -> None:
    with path.open(encoding="utf-8", newline="") as file:
        for row in csv.DictReader(file):
            assert row["source"]
            assert row["status"] in ("secondary copy", "computed", "from memory")


@pytest.mark.parametrize("name", NAMES)
def test_ampacity_never_falls_with_area_or_insulation(name: str) -> None:
    for table in load(name).ampacity_tables:
        for column in table.insulations_degC:
            amps = [row[column].value for _, row in table.rows if column in row]
            assert amps == sorted(amps)
        for _, row in table.rows:
            across = [row[column].value for column in sorted(row)]
            assert across == sorted(across)


@pytest.mark.parametrize("name", ["cabin-nec", "cabin-iec"])
def test_listed_ambient_factors_follow_the_heat_balance(name: str) -> None:
    # NEC 310.15(B) equation and IEC 60364-5-52: sqrt((Tc - Ta) / (Tc - 30)), printed to two digits.
    rule = load(name).ambient
    assert rule is not None
    for rating, steps in rule.factors.items():
        for ambient, cell in steps:
            assert cell.value == pytest.approx(math.sqrt((rating - ambient) / (rating - 30)), abs=0.015)


def test_iec_ampacity_lies_on_the_curves_of_its_annex_d() -> None:
    # IEC 60364-5-52 Annex D: I = A x S^m, with one curve up to 16 mm2 and another from 25 mm2 up.
    # 50 mm2 lies lowest, 3.5 % under the line: its true area is near 47 mm2 (IEC 60228 resistance).
    (table,) = load("cabin-iec").ampacity_tables
    for column in table.insulations_degC:
        points = [(math.log(size.area_mm2), math.log(row[column].value)) for size, row in table.rows]
        for (x0, y0), *between, (x1, y1) in (points[:6], points[6:]):
            slope = (y1 - y0) / (x1 - x0)
            assert 0.60 < slope < 0.67
            for x, y in between:
                assert y == pytest.approx(y0 + slope * (x - x0), abs=0.036)


def test_aluminium_carries_about_the_root_of_its_conductivity() -> None:
    # NEC Table 310.16: equal heat means I goes with sqrt(conductivity): sqrt(0.61) = 0.78.
    copper, aluminium = load("cabin-nec").ampacity_tables
    thick = dict(copper.rows)
    for size, row in aluminium.rows:
        for column, cell in row.items():
            assert 0.72 < cell.value / thick[size][column].value < 0.89


def test_drop_bases_are_those_of_the_published_constants() -> None:
    # E-11: K = 10.75 ohm cmil/ft; resistivity of copper at 29 degC by IEC 60028.
    k_in_ohm_mm2_per_m = 10.75 * math.pi / 4 * 0.0254**2 / 0.3048
    craft = load("small-craft-us").drop_basis
    assert craft.temperature_degC is not None
    at_basis = 0.017241 * (1 + 0.00393 * (craft.temperature_degC - 20))
    assert at_basis == pytest.approx(k_in_ohm_mm2_per_m, rel=0.002)
    assert load("small-craft-iso").drop_basis.temperature_degC == 20
    assert load("cabin-nec").drop_basis.temperature_degC == 75  # NEC chapter 9 Table 8
    assert load("cabin-iec").drop_basis.factor_on_R20 == 1.25  # IEC 60364-5-52 Annex G


@pytest.mark.parametrize(
    ("name", "kind", "percent", "branch", "severity"),
    [
        ("small-craft-us", "critical", 3, None, "fail"),  # E-11, voltage drop
        ("small-craft-us", "other", 10, None, "fail"),
        ("small-craft-iso", "critical", 3, None, "fail"),  # ISO 10133:2012 clause 4
        ("small-craft-iso", "other", 10, None, "fail"),
        ("cabin-nec", "other", 5, 3, "warn"),  # NEC 210.19 and 215.2 informational notes
        ("cabin-nec", "critical", 2.5, 1.5, "warn"),  # NEC 647.4(D)
        ("cabin-iec", "lighting", 6, 3, "warn"),  # IEC 60364-5-52 Table G.52.1
        ("cabin-iec", "other", 8, 5, "warn"),
    ],
)
def test_drop_limits(name: str, kind: str, percent: float, branch: float | None, severity: str) -> None:
    found = load(name).classes[kind]
    assert (found.limit_percent, found.branch_limit_percent, found.severity) == (percent, branch, severity)


@pytest.mark.parametrize(
    ("name", "plain_m", "sheathed_m", "at_battery_m"),
    [
        ("small-craft-us", 7 * 0.0254, 40 * 0.0254, 72 * 0.0254),  # 33 CFR 183.455(b), E-11 11.10
        ("small-craft-iso", 0.2, math.inf, math.inf),  # ISO 10133:2012 clause 8
        ("leisure-vehicle-us", 18 * 0.0254, 18 * 0.0254, 18 * 0.0254),  # NEC 551.10(E)(4)
    ],
)
def test_unprotected_lengths(name: str, plain_m: float, sheathed_m: float, at_battery_m: float) -> None:
    found = protection(name).unprotected_length
    assert found is not None
    lengths = (found.plain_m, found.sheathed_m, found.sheathed_at_battery_m)
    assert lengths == pytest.approx((plain_m, sheathed_m, at_battery_m), abs=0.001)


@pytest.mark.parametrize(
    ("name", "size", "material", "max_A"),
    [
        ("cabin-nec", "14 AWG", "copper", 15),  # NEC 240.4(D)
        ("cabin-nec", "12 AWG", "tinned copper", 20),
        ("cabin-nec", "10 AWG", "copper", 30),
        ("cabin-nec", "10 AWG", "aluminium", 25),
        ("cabin-nec", "6 mm2", "copper", 30),
        ("cabin-nec", "8 AWG", "copper", None),
        ("leisure-vehicle-us", "18 AWG", "copper", 6),  # NEC 551.10(E)(1)
        ("leisure-vehicle-us", "16 AWG", "copper", 8),
        ("leisure-vehicle-us", "10 mm2", "copper", None),
    ],
)
def test_small_conductors_limit_their_protection(
    name: str, size: str, material: str, max_A: float | None
) -> None:
    rule = protection(name).small_conductors
    assert rule is not None
    entry = rule.limit(parse_size(size), material)
    assert (entry.max_A if entry else None) == max_A


def test_rules_for_rating_over_ampacity() -> None:
    craft = protection("small-craft-us").over_conductor
    cabin = protection("cabin-nec").over_conductor
    assert craft is not None
    assert cabin is not None
    assert (craft.percent, craft.allowance_percent) == (100, 150)  # E-11; 33 CFR 183.455(c)
    assert (cabin.percent, cabin.next_standard_up_to_A) == (100, 800)  # NEC 240.4(B)


def test_continuous_loads_count_125_percent_under_the_nec_alone() -> None:
    # NEC 210.19, 210.20, 215.2 and 215.3.
    factors = {name: rule.factor for name in NAMES if (rule := protection(name).continuous)}
    assert factors == dict.fromkeys(NAMES, 1.0) | {"cabin-nec": 1.25}


def test_standard_ratings_of_the_nec() -> None:
    # NEC 240.6(A).
    rule = protection("cabin-nec").standard_ratings
    assert rule is not None
    assert [a for a in rule.amps if 15 <= a <= 100] == [15, 20, 25, 30, 35, 40, 45, 50, 60, 70, 80, 90, 100]


def test_least_sizes_by_system() -> None:
    # 33 CFR 183.425(d) to (f): 16 AWG, in a sheath 18 AWG. ISO 10133:2012 7.7: 1 and 0.75 mm2.
    us, iso = load("small-craft-us").minimum_size, load("small-craft-iso").minimum_size
    assert us is not None
    assert iso is not None
    assert [us.least("AWG", sheathed).name for sheathed in (False, True)] == ["16 AWG", "18 AWG"]
    assert [iso.least("metric", sheathed).name for sheathed in (False, True)] == ["1 mm2", "0.75 mm2"]
    for book in (us, iso):
        for sheathed in (False, True):
            own = (book.in_sheath if sheathed else book.separate)[0]
            for system in ("metric", "AWG"):
                assert book.least(system, sheathed).area_mm2 >= own.area_mm2


@pytest.mark.parametrize("name", ["small-craft-us", "small-craft-iso"])
def test_afloat_neither_aluminium_nor_the_hull_serves_as_a_conductor(name: str) -> None:
    book = load(name)
    assert book.refused is not None
    assert book.returns is not None
    assert set(book.refused.materials) == {"aluminium", "copper-clad aluminium"}
    assert book.returns.forbidden == ("chassis",)


def write(folder: Path, text: str, name: str = "own.toml") -> Path:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def own(folder: Path, text: str) -> Rulebook:
    write(folder, text)
    return load("own.toml", folder)


def test_a_rulebook_of_ones_own_starts_from_a_shipped_one(tmp_path: Path) -> None:
    book = own(
        tmp_path,
        """
        starts_from = "small-craft-iso"
        title = "Workshop rules"
        [drop_basis]
        factor_on_R20 = 1.2
        [classes.other]
        limit_percent = 5
        basis = "house rule"
        [classes.pumps]
        applies_to = "pumps"
        limit_percent = 4
        severity = "warn"
        basis = "house rule"
        """,
    )
    start = load("small-craft-iso")
    assert (book.name, book.title, book.edition) == ("own", "Workshop rules", start.edition)
    assert book.classes["other"].limit_percent == 5
    assert book.classes["other"].severity == "fail"
    assert book.classes["pumps"].limit_percent == 4
    assert book.classes["critical"] == start.classes["critical"]
    assert (book.drop_basis.temperature_degC, book.drop_basis.factor_on_R20) == (None, 1.2)
    assert len(book.ampacity_tables[0].rows) == len(start.ampacity_tables[0].rows)


def test_a_rulebook_of_ones_own_may_bring_its_own_table(tmp_path: Path) -> None:
    table = "size,insulation_degC,ampacity_A,source,status\n6 mm2,105,50,house table,secondary copy\n"
    (tmp_path / "mine.csv").write_text(table, encoding="utf-8")
    book = own(
        tmp_path,
        """
        starts_from = "small-craft-iso"
        [[ampacity]]
        file = "mine.csv"
        materials = ["copper"]
        basis = "house table"
        """,
    )
    ((size, row),) = book.ampacity_tables[0].rows
    assert (size.name, row[105].value, row[105].source) == ("6 mm2", 50, "house table")


def test_an_unknown_name_offers_the_nearest() -> None:
    with pytest.raises(RulebookError, match=r'called "small-craft-iso2".*did you mean "small-craft-iso"'):
        load("small-craft-iso2")


START = 'starts_from = "small-craft-us"\n'


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("title = 3", "own.toml: title: must be a text in quotes (given: 3)"),
        ('titel = "x"', "own.toml: titel: unknown field; did you mean title? (given: 'x')"),
        ("[classes.other]\nlimit_percent = 0", "own.toml: classes.other, limit_percent: must lie from"),
        ("[classes.other]\nlimit_percent = true", "classes.other, limit_percent: must be a number"),
        ("[classes.other]\nlimit_percent = nan", "classes.other, limit_percent: must lie from 0.1 to 50"),
        ('[classes.other]\nseverity = "fial"', 'accepted: fail, warn; did you mean "fail"?'),
        ("[classes.other]\nlimit = 3", "classes.other, limit: unknown field; did you mean limit_percent?"),
        ("[classes.new]\nlimit_percent = 3", "own.toml: classes.new, applies_to: is missing"),
        ('classes = "none"', "own.toml: classes: must be a table"),
        ('[defaults]\nclass = "navigation"', 'defaults, class: "navigation" is not known'),
        ("[drop_basis]\ntemperature_degC = 20\nfactor_on_R20 = 1.2", "give either temperature_degC or"),
        ('[minimum_size]\nseparate = ["16"]', 'minimum_size, separate: "16": "16" alone means'),
        ("[minimum_size]\nseparate = []", "minimum_size, separate: must hold at least one size"),
        ('[minimum_size]\nexempt = [{ text = "x", basis = "y" }]', "exempt 1, up_to_m: give up_to_m, up_to_A or"),
        ("[bundling]\nsteps = [{ up_to = 3, factor = 2 }]", "bundling.steps 1, factor: must lie from"),
        ("[bundling]\nsteps = []", "bundling, steps: must be a list of"),
        ("[protection.unprotected_length]\nplain_m = -1", "protection.unprotected_length, plain_m"),
        ('[protection.exempt]\npurposes = ["starting"]', '"starting" is not known; accepted: cranking'),
        ('[refused]\nmaterials = ["steel"]', 'refused, materials: "steel" is not known'),
        ('[terminals]\nunmarked_degC = 60', "own.toml: terminals, unmarked_up_to: is missing"),
        ('[missing]\nambience = "?"', "missing, ambience: unknown field; did you mean ambient?"),
        ("title = ", "own.toml: not a TOML file in UTF-8"),
        ("[drop_basis]\ntemperature_degC = 1" + "0" * 400, "drop_basis, temperature_degC: must lie from -50"),
        ('"a\\nb" = 1', "a?b: unknown field"),
        ("title = [" + "1, " * 99 + "]", "1, 1, 1, 1,...)"),
    ],
)
def test_a_faulty_rulebook_says_where_and_what_is_accepted(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(RulebookError) as caught:
        own(tmp_path, START + text)
    assert message in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_rulebook_that_starts_from_nothing_must_hold_all(tmp_path: Path) -> None:
    with pytest.raises(RulebookError, match=r"own\.toml: defaults: the table is missing"):
        own(tmp_path, 'title = "Own"')
    with pytest.raises(RulebookError, match="starts_from: no shipped rulebook is called 'small-boat'"):
        own(tmp_path, 'starts_from = "small-boat"')


TABLE = START + '[[ampacity]]\nfile = "mine.csv"\nmaterials = ["copper"]\nbasis = "house table"'
HEAD = "size,insulation_degC,ampacity_A,source,status\n"


@pytest.mark.parametrize(
    ("table", "message"),
    [
        (HEAD + "6 mm2,105,many,x,computed\n", 'column ampacity_A: "many" is not a number from 0 to 10000'),
        (HEAD + "6 mm2,105,nan,x,computed\n", 'column ampacity_A: "nan" is not a number'),
        (HEAD + "7 mm2,105,50,x,computed\n", '"7 mm2": no table knows 7 mm2'),
        (HEAD + "6 mm2,105,50,,computed\n", "every row of the table needs its source"),
        (HEAD + "6 mm2,105,50,x,guessed\n", 'mine.csv, line 2: status "guessed" is none of'),
        (
            HEAD + "6 mm2,105,50,x,computed\n6mm²,105,60,x,computed\n",
            "6 mm2 at 105 degC insulation is listed twice",
        ),
        (HEAD + "6 mm2,105\n", "line 2: the row does not have one value per column"),
        ("size,amps\n6 mm2,50\n", "the table has no column insulation_degC"),
        (None, "ampacity 1, file: no such file beside the rulebook or among the shipped tables"),
    ],
)
def test_a_faulty_table_says_which_column(tmp_path: Path, table: str | None, message: str) -> None:
    if table is not None:
        (tmp_path / "mine.csv").write_text(table, encoding="utf-8")
    with pytest.raises(RulebookError) as caught:
        own(tmp_path, TABLE)
    assert message in str(caught.value)


def test_a_table_is_never_fetched_from_another_folder(tmp_path: Path) -> None:
    with pytest.raises(RulebookError, match="without a folder"):
        own(tmp_path, TABLE.replace("mine.csv", "../mine.csv"))


def test_a_file_that_cannot_be_read_is_named(tmp_path: Path) -> None:
    with pytest.raises(RulebookError, match=r"gone\.toml: the rulebook cannot be read"):
        load("gone.toml", tmp_path)
    with pytest.raises(RulebookError):
        load("\0.toml", tmp_path)
    (tmp_path / "binary.toml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(RulebookError, match=r"binary\.toml: not a TOML file in UTF-8"):
        load("binary.toml", tmp_path)


def test_blade_alone_means_the_medium_blade() -> None:
    # ISO 8820-3: small 11 mm 2 to 30 A, medium 19 mm 1 to 40 A, large 29 mm 20 to 80 A.
    ends = [
        protection_type(name).ratings_A[:: len(protection_type(name).ratings_A) - 1]
        for name in ("small blade", "blade", "large blade")
    ]
    assert ends == [(2, 30), (1, 40), (20, 80)]
    assert "medium" in protection_type("Blade ").title


@pytest.mark.parametrize("name", protection_type_names())
def test_every_protection_type_is_complete(name: str) -> None:
    kind = protection_type(name)
    assert kind.name == name
    assert kind.basis
    assert kind.interrupting_at(12) is not None
    assert kind.interrupting_at(kind.volts) == kind.interrupting_A
    assert kind.interrupting_at(kind.volts + 1) is None
    # Common practice: a fuse or breaker drops some tens to hundreds of millivolts at its rating.
    assert 0.03 < kind.resistance_ohm(20) * 20 < 0.3


def test_interrupting_falls_as_the_system_voltage_rises() -> None:
    kind = protection_type("terminal fuse")
    assert [kind.interrupting_at(volts) for volts in (12, 24, 48)] == [10000, 5000, 2000]


def test_an_unknown_protection_type_offers_the_nearest() -> None:
    with pytest.raises(QuantityError) as caught:
        protection_type("blades")
    assert caught.value.nearest == '"blade"'
    assert '"cartridge"' in caught.value.accepted
