"""Tables of irradiance: what is read, and what is refused with its row, what stands there and what is accepted."""

import datetime as dt
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from farvolt import sun
from farvolt.errors import FarvoltError
from farvolt.irradiance_file import IrradianceTable, read, time_zone

OSLO = sun.Site(59.9, 10.75)
ZONE = ZoneInfo("Europe/Oslo")
START = dt.datetime(2027, 6, 10, tzinfo=ZONE)


def hours(days: int = 3, start: dt.datetime = START) -> list[tuple[str, float]]:
    """Rows of a clear sky, each with the mean of its interval as the middle has it."""
    seconds = start.timestamp() + 3600.0 * np.arange(24 * days)
    light = sun.clear_sky(sun.position(seconds + 1800, OSLO), OSLO)
    times = [dt.datetime.fromtimestamp(one, dt.UTC).astimezone(start.tzinfo) for one in seconds]
    return [(f"{one:%Y-%m-%d %H:%M}", round(float(ghi), 1)) for one, ghi in zip(times, light.ghi, strict=True)]


def text(rows: list[tuple[str, float]]) -> str:
    return "time,ghi\n" + "".join(f"{when},{ghi}\n" for when, ghi in rows)


def table(rows: list[tuple[str, float]] | str) -> IrradianceTable:
    return read(rows if isinstance(rows, str) else text(rows), "sun.csv", OSLO, ZONE)


def refused(rows: list[tuple[str, float]] | str) -> str:
    with pytest.raises(FarvoltError) as caught:
        table(rows)
    message = str(caught.value)
    assert message.startswith("sun.csv")
    assert "accepted: " in message
    assert "\n" not in message
    return message


def test_a_table_is_read_and_brought_to_steps() -> None:
    rows = hours()
    found = table(rows)
    assert found.every_s == 3600
    edges = START.timestamp() + 1800.0 * np.arange(2 * 24 * 3 + 1)
    means, years = found.over(edges)
    assert years == 0
    # Energy stays: the sum over half hours is that over hours.
    assert means["ghi"].sum() / 2 == pytest.approx(sum(ghi for _, ghi in rows), rel=1e-12)
    assert means["ghi"][24] == rows[12][1]


def test_columns_marks_and_small_negatives() -> None:
    rows = hours(1)
    body = "\ufeff# measured on the roof\ntime;ghi;temp_air;wind\n" + "".join(
        f"{when};{ghi if ghi else -1.5};{12.5};{2}\n" for when, ghi in rows
    )
    found = table(body)
    assert found.columns["ghi"].min() == 0
    assert found.columns["temp_air"][0] == 12.5


def test_offsets_from_utc_are_kept() -> None:
    rows = hours(2)
    shifted = [
        (dt.datetime.fromisoformat(when).replace(tzinfo=ZONE).astimezone(dt.UTC).isoformat(), ghi) for when, ghi in rows
    ]
    assert np.array_equal(table(rows).start_s, table(shifted).start_s)


def test_another_year_serves() -> None:
    found = table(hours())
    edges = dt.datetime(2031, 6, 11, tzinfo=ZONE).timestamp() + 3600.0 * np.arange(25)
    means, years = found.over(edges)
    assert years == 4
    assert means["ghi"].max() > 500
    with pytest.raises(FarvoltError, match=r"sun\.csv: holds 2027-06-09 22:00 to 2027-06-12 22:00 UTC, not 2031-07"):
        found.over(edges + 30 * 86400)


def test_a_year_begins_anew() -> None:
    rows = hours(365, dt.datetime(2026, 1, 1, tzinfo=dt.UTC))
    found = read(text(rows), "sun.csv", OSLO, dt.UTC)
    edges = dt.datetime(2030, 12, 20, tzinfo=dt.UTC).timestamp() + 3600.0 * np.arange(40 * 24 + 1)
    means, years = found.over(edges)
    assert years == 4
    assert means["ghi"][12 * 24 :].sum() == pytest.approx(sum(ghi for _, ghi in rows[: 28 * 24]), rel=1e-9)


def test_a_short_gap_is_bridged_and_a_long_one_refused() -> None:
    rows = hours()
    found = table(rows[:12] + rows[14:])
    assert found.bridged == 2
    assert found.columns["ghi"][12] == pytest.approx(rows[11][1] + (rows[14][1] - rows[11][1]) / 3)
    message = refused(rows[:10] + rows[16:])
    assert "row 12: 7 h pass between the row before (2027-06-10 07:00 UTC) and this one" in message


@pytest.mark.parametrize("divisor", [1000.0, 277.78])
def test_other_units_are_told(divisor: float) -> None:
    message = refused([(when, round(ghi / divisor, 4)) for when, ghi in hours()])
    assert "it looks like kW/m² or MJ/m²; accepted: W/m²" in message


def test_sums_of_energy_are_told() -> None:
    rows = hours()
    assert "row 6: ghi is " in refused([(when, ghi * 3600) for when, ghi in rows])
    assert "accepted: 0 to 1800 W/m² (J/m²" in refused([(when, ghi * 3600) for when, ghi in rows])


@pytest.mark.parametrize("shift", [-9, -3, 3, 7])
def test_another_time_zone_is_told(shift: int) -> None:
    rows = hours(4)
    moved = [
        ((dt.datetime.fromisoformat(when) + dt.timedelta(hours=shift)).strftime("%Y-%m-%d %H:%M"), ghi)
        for when, ghi in rows
    ]
    message = refused(moved)
    assert "the time zone looks wrong" in message
    assert f"fits best {abs(shift)} h {'earlier' if shift > 0 else 'later'}" in message


def test_an_hour_s_summer_time_is_let_pass() -> None:
    moved = [
        ((dt.datetime.fromisoformat(when) - dt.timedelta(hours=1)).strftime("%Y-%m-%d %H:%M"), ghi)
        for when, ghi in hours()
    ]
    assert table(moved).bridged == 0


def test_order_and_doubles() -> None:
    rows = hours(1)
    assert 'row 8: "2027-06-10 05:00" is the time of the row before too' in refused(rows[:6] + rows[5:])
    assert 'row 5: "2027-06-10 02:00" is before the row above it' in refused([*rows[:2], rows[3], rows[2], *rows[4:]])


def test_the_clock_that_leaps_in_spring_and_repeats_in_autumn() -> None:
    spring = [(f"2027-03-28 {hour:02d}:00", 0.0) for hour in range(5)]
    assert 'row 4: "2027-03-28 02:00" does not exist: the clock of Europe/Oslo leaps over it' in refused(spring)
    autumn = hours(1, dt.datetime(2027, 10, 31, tzinfo=ZONE))
    assert [when for when, _ in autumn].count("2027-10-31 02:00") == 2
    assert np.all(np.diff(table(autumn).start_s) == 3600)


@pytest.mark.parametrize(
    ("body", "said"),
    [
        ("", "is empty"),
        ("time,ghi\n", "has 0 rows of figures"),
        ("time,gih\n2027-06-10 00:00,0\n", 'no column is called "gih"; accepted: time, ghi, dni, dhi, temp_air, wind; '
         'did you mean "ghi"?'),
        ("ghi,wind\n1,2\n", 'has no column "time"'),
        ("time,ghi,ghi\n2027-06-10 00:00,0,0\n", 'has two columns called "ghi"'),
        ("time,ghi\n2027-06-10 00:00,0,0\n", "row 2: has 3 cells where the heading has 2"),
        ("time,ghi\n2027-06-10 00:00,\n", "row 2: ghi is empty"),
        ("time;ghi\n2027-06-10 00:00;1,5\n", 'row 2: ghi "1,5" is not a number'),
        ("time,ghi\n2027-06-10 00:00,nan\n", "row 2: ghi is nan"),
        ("time,ghi\n2027-06-10 00:00,-300\n", "row 2: ghi is -300; accepted: 0 to 1800 W/m²"),
        ("time,ghi\n10/06/2027 00:00,0\n10/06/2027 01:00,0\n", 'row 2: time "10/06/2027 00:00" cannot be read'),
        ("time,ghi\n0004-06-10 00:00,0\n0004-06-10 01:00,0\n", "row 2: the year is 4"),
        ("time,ghi,temp_air\n2027-06-10 00:00,0,451\n", "row 2: temp_air is 451; accepted: -80 to 60 °C"),
        ("time,ghi\n2027-06-10,0\n2027-06-11,0\n2027-06-12,0\n", "has a row every 24 h; accepted: every hour or more"),
    ],
)  # fmt: skip
def test_what_cannot_be_read(body: str, said: str) -> None:
    assert said in refused(body)


def test_the_clock_of_a_site_without_a_time_zone() -> None:
    assert time_zone(None, -105.2) == dt.timezone(dt.timedelta(hours=-7))
    assert str(time_zone("Europe/Oslo", 0)) == "Europe/Oslo"
