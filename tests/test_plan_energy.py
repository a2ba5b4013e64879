"""What a plan says of its site, its bank and its days: read as meant, refused in one clear message where it is not."""

import pytest

from farvolt import integrity, plan_types, planfile
from farvolt.errors import PlanError
from farvolt_app import edits
from plan_text import EVERY_FIELD

TEXT = EVERY_FIELD.read_text()


def refusal(old: str, new: str) -> str:
    """The one message about a plan in which `old` is replaced."""
    assert TEXT.count(old) == 1
    with pytest.raises(PlanError) as caught:
        planfile.parse(TEXT.replace(old, new))
    (fault,) = caught.value.faults
    return str(fault)


def test_the_site_is_read_with_its_units() -> None:
    site = planfile.parse(TEXT).site
    assert site is not None
    assert (site.latitude.si, site.longitude.si, site.albedo.si) == (55.2, -3.5, 0.25)
    assert (site.time_zone, len(site.clearness)) == ("Europe/London", 12)


def test_types_of_day_by_month_and_weekday() -> None:
    winter, other = planfile.parse(TEXT).days
    assert (winter.months, winter.weekdays) == ((11, 12, 1, 2), (5, 6))
    assert winter.loads == {"fridge": 8.0, "roof lamp": ("16:30-23:00", "22:00-0:30")}
    assert [winter.occurs(month, day) for month, day in ((12, 5), (12, 4), (3, 5))] == [True, False, False]
    assert other.occurs(7, 2)


def test_a_plan_that_says_nothing_asks_for_one_day() -> None:
    bare = planfile.parse(TEXT[: TEXT.index("[site]")])
    assert (bare.site, bare.days, bare.bank.autonomy, bare.bank.block) == (None, (), 1.0, None)


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('"55.2 deg"', '"155.2 deg"', ["site, latitude", '"155.2 deg"', "not be more than 90 deg"]),
        ('"55.2 deg"', '"-95 deg"', ["latitude", "not be less than -90 deg"]),
        ('"55.2 deg"', "55.2", ["latitude", "no unit", '"55.2 deg"']),
        ('"-3.5 deg"', '"181 deg"', ["longitude", "180 deg"]),
        ('"Europe/London"', '"Europe/Lodnon"', ["time_zone", "no such time zone", '"Europe/London"']),
        ('"Europe/London"', '"../../etc/passwd"', ["time_zone", "not the name of a time zone"]),
        (", 0.33]", "]", ["clearness", "11 numbers", "12 numbers"]),
        (", 0.33]", ", 33]", ["clearness", "too large", "0 to 1"]),
        ('[11, "December"', '[13, "December"', ["months", "13", "not a month"]),
        ('"Saturday", "Sun"', '"Saturnday", "Sun"', ["weekdays", "not a day of the week", '"Saturday"']),
        ('"roof lamp" = ["16:30-23:00", "22:00-0:30"]', '"roof lamp" = "16:30-23:00"', ["loads.roof lamp", "list"]),
        ('"roof lamp" = ["16:30', '"roof lmap" = ["16:30', ["no such load", '"roof lamp"']),
        ('"fridge" = 8,', '"fridge" = 25,', ["fridge", "25", "hours"]),
        ('"16:30-23:00"', '"16:30-25:00"', ["16:30-25:00", "not a span"]),
        ('"16:30-23:00"', '"16:30-16:30"', ["same time", "00:00-24:00"]),
        ('sources = { "alternator charger" = 0 }', 'sources = { "roof" = 2 }', ["no such charger", "alternator"]),
        ('design_day = "winter weekend"', 'design_day = "winter weekday"', ["type of day", '"winter weekend"']),
        ('azimuth = "180 deg"', 'azimuth = "-10 deg"', ["azimuth", "negative"]),
        ("hours = 5, cur", "hours = 5, note = 1, cur", ["bank, block.rates", "note", "hours, current"]),
        ("daily_depth_of_discharge", "dayly_depth_of_discharge", ["no such field", "daily_depth_of_discharge"]),
        ("peukert = 1.03", "peukert = 0.9", ["peukert", "from 1 to 2"]),
        ('name = "any other day"', 'name = "winter weekend"', ["used twice"]),
    ],
)  # fmt: skip
def test_what_makes_no_sense_is_refused_with_its_place_and_what_is_accepted(
    old: str, new: str, words: list[str]
) -> None:
    message = refusal(old, new)
    assert not [word for word in words if word not in message], message


def test_a_span_past_midnight_ends_before_it_starts() -> None:
    assert plan_types.span_minutes("22:00-0:30") == (1320, 30)
    assert plan_types.span_minutes("00:00-24:00") == (0, 1440)


def test_renaming_reaches_the_days_and_the_bank() -> None:
    raw = edits.read(TEXT)
    assert [one["name"] for _, one in integrity.entries(raw, "days")] == ["winter weekend", "any other day"]
    text = edits.apply(TEXT, edits.renaming(raw, "days", 0, "dark days"))
    text = edits.apply(text, edits.renaming(edits.read(text), "loads", 0, "cold box"))
    text = edits.apply(text, edits.renaming(edits.read(text), "sources", 1, "dynamo"))
    read = planfile.parse(text)
    assert read.bank.design_day == "dark days"
    assert list(read.days[0].loads) == ["cold box", "roof lamp"]
    assert list(read.days[0].sources) == ["dynamo"]
