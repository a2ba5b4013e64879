"""A table of measured or typical irradiance: read, held to what the sun can give, and brought to steps of time.

CSV with the columns `time` and `ghi` (W/m² on level ground), and where known `dni`, `dhi` (W/m²), `temp_air` (°C) and
`wind` (m/s). A row holds the means of the interval that begins at its time. A time without an offset from UTC is
the clock of the site. Every refusal names the row, what stands there, and what is accepted.
"""

import csv
import datetime as dt
import difflib
from collections.abc import Iterator
from dataclasses import dataclass
from typing import NoReturn
from zoneinfo import ZoneInfo

import numpy as np

from farvolt import sun
from farvolt.errors import FarvoltError
from farvolt.integrity import shorten
from farvolt.network import Floats
from farvolt.sun import Site
from farvolt.units import number

COLUMNS = {"ghi": (-20.0, 1800.0), "dni": (-20.0, 1500.0), "dhi": (-20.0, 1500.0), "temp_air": (-80.0, 60.0),
           "wind": (0.0, 100.0)}  # fmt: skip
"""Columns besides `time`, with the least and the greatest value that nature gives."""

UNITS = {"ghi": "W/m²", "dni": "W/m²", "dhi": "W/m²", "temp_air": "°C", "wind": "m/s"}

LONGEST_GAP_S = 3 * 3600
"""A gap of up to three hours is bridged; a longer one is refused."""

MOST_ROWS = 600_000

_HOUR_S = 3600.0
_SHIFTED_H = 1.5
_DARK = 6.0
"""Degrees under the horizon from which no light is left (the end of civil twilight)."""


@dataclass(frozen=True)
class IrradianceTable:
    """Rows of a table: `start_s` (seconds since 1970, UTC), how long each holds, and its columns."""

    name: str
    start_s: Floats
    every_s: float
    columns: dict[str, Floats]
    bridged: int
    """Rows put in where some were missing."""

    @property
    def end_s(self) -> float:
        """Where the last row ends."""
        return float(self.start_s[-1] + self.every_s)

    def over(self, edges_s: Floats) -> tuple[dict[str, Floats], int]:
        """Means of every column between the edges of steps, and by how many years the table was moved to hold them.

        Raises FarvoltError where it does not hold the time asked for, in its own year nor in another.
        """
        moved, years = self._moved(edges_s)
        copies = 2 if self._a_year else 1
        inside = np.append(np.concatenate([self.start_s + k * self._span_s for k in range(copies)]),
                           self.start_s[0] + copies * self._span_s)  # fmt: skip
        found = {}
        for name, values in self.columns.items():
            sums = np.append(0.0, np.cumsum(np.tile(values, copies) * np.diff(inside)))
            found[name] = np.diff(np.interp(moved, inside, sums)) / np.diff(edges_s)
        return found, years

    @property
    def _span_s(self) -> float:
        return self.end_s - float(self.start_s[0])

    @property
    def _a_year(self) -> bool:
        """Whether it holds a whole year, which then begins anew where it ends."""
        return self._span_s >= 364.9 * 86400

    def _moved(self, edges_s: Floats) -> tuple[Floats, int]:
        """Edges moved by whole years (of the calendar) into the table."""
        first, last = float(self.start_s[0]), self.end_s + (self._span_s if self._a_year else 0.0)
        start = _utc(edges_s[0])
        years = sorted(range(_utc(first).year, _utc(self.end_s).year + 1), key=lambda year: year != start.year)
        for year in years:
            moved = edges_s + (_in_year(start, year).timestamp() - edges_s[0])
            if moved[0] >= first and moved[-1] <= last:
                return moved, start.year - year
        wanted = f"{start:%Y-%m-%d %H:%M} to {_utc(edges_s[-1]):%Y-%m-%d %H:%M} UTC"
        held = f"{_utc(first):%Y-%m-%d %H:%M} to {_utc(self.end_s):%Y-%m-%d %H:%M} UTC"
        raise FarvoltError(f"{self.name}: holds {held}, not {wanted}; accepted: a table over the days asked for, in "
                           "any year")  # fmt: skip


def _utc(seconds: float) -> dt.datetime:
    return dt.datetime.fromtimestamp(float(seconds), dt.UTC)


def _in_year(moment: dt.datetime, year: int) -> dt.datetime:
    try:
        return moment.replace(year=year)
    except ValueError:  # 29 February
        return moment.replace(year=year, day=28)


def read(text: str, name: str, site: Site, zone: dt.tzinfo) -> IrradianceTable:
    """Read a table. `name` is what messages call it. Raises FarvoltError with the first thing that is wrong."""
    lines = list(_lines(text, name))
    head = _head(lines[0][1], name)
    rows = [_row(cells, place, head, name) for place, cells in lines[1:]]
    if len(rows) < 2:
        raise FarvoltError(f"{name}: has {len(rows)} rows of figures; accepted: two or more under the heading")
    starts = _starts([one[0] for one in rows], [place for place, _ in lines[1:]], zone, name)
    columns = {word: np.array([one[1][word] for one in rows]) for word in head if word != "time"}
    places = np.array([place for place, _ in lines[1:]])
    _check_units(columns, starts, places, site, name)
    _check_night(columns["ghi"], starts, places, site, zone, name)
    filled, columns, every, bridged = _bridged(starts, columns, places, name)
    for word in ("ghi", "dni", "dhi"):
        if word in columns:
            columns[word] = np.maximum(columns[word], 0.0)
    return IrradianceTable(name, filled, every, columns, bridged)


def _lines(text: str, name: str) -> Iterator[tuple[int, list[str]]]:
    """Lines that say something, with their numbers in the file; the first is the heading."""
    body = text.lstrip("\ufeff")
    first = next((line for line in body.splitlines() if line.strip() and not line.startswith("#")), None)
    if first is None:
        raise FarvoltError(f'{name}: is empty; accepted: CSV with the heading "time,ghi"')
    mark = max(",;\t", key=first.count)
    reader = csv.reader(body.splitlines(), delimiter=mark)
    count = 0
    try:
        for cells in reader:
            if not any(cell.strip() for cell in cells) or cells[0].startswith("#"):
                continue
            count += 1
            if count > MOST_ROWS:
                raise FarvoltError(f"{name}: has more than {MOST_ROWS} rows; accepted: a year at one minute, or less")
            yield reader.line_num, [cell.strip() for cell in cells]
    except csv.Error as error:
        raise FarvoltError(f"{name}, row {reader.line_num}: is not CSV ({error})") from None


def _head(cells: list[str], name: str) -> list[str]:
    words = [cell.lower() for cell in cells]
    known = ["time", *COLUMNS]
    for word in words:
        if word not in known:
            close = difflib.get_close_matches(word, known, n=1)
            hint = f'; did you mean "{close[0]}"?' if close else ""
            raise FarvoltError(f'{name}: no column is called "{shorten(word)}"; accepted: {", ".join(known)}{hint}')
    for word in ("time", "ghi"):
        if word not in words:
            raise FarvoltError(f'{name}: has no column "{word}"; accepted: a heading such as "time,ghi,temp_air"')
    if len(set(words)) < len(words):
        twice = next(word for word in words if words.count(word) > 1)
        raise FarvoltError(f'{name}: has two columns called "{twice}"; accepted: one of each')
    return words


def _row(cells: list[str], place: int, head: list[str], name: str) -> tuple[str, dict[str, float]]:
    if len(cells) != len(head):
        _refuse(name, place, f"has {len(cells)} cells where the heading has {len(head)}", ", ".join(head))
    given = dict(zip(head, cells, strict=True))
    return given.pop("time"), {word: _value(text, word, place, name) for word, text in given.items()}


def _value(text: str, word: str, place: int, name: str) -> float:
    low, high = COLUMNS[word]
    try:
        value = float(text)
    except ValueError:
        what = "is empty" if not text else f'"{shorten(text)}" is not a number'
        _refuse(name, place, f"{word} {what}", "a number with a point, such as 412.5; leave out rows without a reading")
    if not low <= value <= high:
        hint = ""
        if word in ("ghi", "dni", "dhi") and value > high:
            hint = " (J/m², kJ/m² and W·h sums are not: divide by the seconds of the interval first)"
        accepted = f"{number(max(low, 0.0) if word != 'temp_air' else low)} to {number(high)} {UNITS[word]}{hint}"
        _refuse(name, place, f"{word} is {number(value)}", accepted)
    return value


def _refuse(name: str, place: int, problem: str, accepted: str) -> NoReturn:
    raise FarvoltError(f"{name}, row {place}: {problem}; accepted: {accepted}")


def _starts(texts: list[str], places: list[int], zone: dt.tzinfo, name: str) -> Floats:
    """Times as seconds UTC, rising from row to row; the hour that the clock repeats in autumn is told by its order."""
    found: list[float] = []
    for text, place in zip(texts, places, strict=True):
        moment = _moment(text, place, name)
        if moment.tzinfo is None:
            local = moment.replace(tzinfo=zone)
            if local.astimezone(dt.UTC).astimezone(zone).replace(tzinfo=None) != moment:
                _refuse(name, place, f'"{text}" does not exist: the clock of {zone} leaps over it',
                        'times with their offset from UTC, such as "2027-06-01T12:00+02:00" or "…Z"')  # fmt: skip
            second = local.replace(fold=1).timestamp()
            moment = local.replace(fold=1) if found and local.timestamp() <= found[-1] < second else local
        seconds = moment.timestamp()
        if found and seconds <= found[-1]:
            same = seconds == found[-1]
            problem = f'"{text}" is the time of the row before too' if same else f'"{text}" is before the row above it'
            _refuse(name, place, problem, "each time once, in rising order")
        found.append(seconds)
    return np.array(found)


def _moment(text: str, place: int, name: str) -> dt.datetime:
    try:
        moment = dt.datetime.fromisoformat(text)
    except ValueError:
        accepted = 'such as "2027-06-01 12:00" or "2027-06-01T12:00Z"'
        _refuse(name, place, f'time "{shorten(text)}" cannot be read', accepted)
    if not 1900 <= moment.year <= 2200:
        _refuse(name, place, f"the year is {moment.year}", "1900 to 2200")
    return moment


def _check_units(columns: dict[str, Floats], starts: Floats, places: np.ndarray, site: Site, name: str) -> None:
    """Figures of a few units where the sun gives hundreds are kW/m² or MJ/m²."""
    highest = float(columns["ghi"].max())
    possible = float((sun.position(starts, site).cosine * sun.STANDARD_W_m2).max())
    if highest < 6.0 and possible > 150.0:
        row = int(places[np.argmax(columns["ghi"])])
        problem = f"the greatest ghi is {number(highest)} where a clear sky gives about {number(possible, 2)}"
        _refuse(name, row, f"{problem}: it looks like kW/m² or MJ/m²", "W/m²")


def _check_night(
    ghi: Floats, starts: Floats, places: np.ndarray, site: Site, zone: dt.tzinfo, name: str
) -> None:
    """Sun at night, or a day whose middle is hours from noon, tells of another time zone."""
    half = float(np.median(np.diff(starts))) / 2
    sky = sun.position(starts + half, site)
    night = np.where(sky.true_zenith > 90 + _DARK + half / _HOUR_S * 15, np.maximum(ghi, 0.0), 0.0)
    shift = _shift_h(ghi, starts + half, site)
    if night.sum() <= 0.01 * max(float(ghi.sum()), 1e-9) and abs(shift) < _SHIFTED_H:
        return
    worst = int(np.argmax(night if night.any() else ghi))
    clock = _utc(starts[worst]).astimezone(zone)
    moved = f", and fits best {abs(shift):g} h {'later' if shift > 0 else 'earlier'}" if shift else ""
    _refuse(
        name, int(places[worst]),
        f"ghi is {number(ghi[worst])} W/m² at {clock:%Y-%m-%d %H:%M %Z}, when the sun stands "
        f"{number(90 - sky.true_zenith[worst], 2)}° above the horizon of the site{moved}: the time zone looks wrong",
        'the clock of the site, or times with their offset from UTC, such as "2027-06-01T12:00+02:00"',
    )  # fmt: skip


def _shift_h(ghi: Floats, middle: Floats, site: Site) -> float:
    """By how many hours the times must move to fit the sun best, by correlation with its height."""
    # A part of a long table tells it as well.
    ghi, middle = ghi[:2000], middle[:2000]
    if np.ptp(ghi) < 50 or middle[-1] - middle[0] < 20 * _HOUR_S:
        return 0.0
    hours = np.arange(-12.0, 12.0, 0.5)
    dense = np.arange(middle[0] - 13 * _HOUR_S, middle[-1] + 13 * _HOUR_S, 900.0)
    height = sun.position(dense, site).cosine
    fits = [float(np.corrcoef(ghi, np.interp(middle + hour * _HOUR_S, dense, height))[0, 1]) for hour in hours]
    best = int(np.nanargmax(fits))
    now = fits[int(np.flatnonzero(hours == 0)[0])]
    return float(hours[best]) if fits[best] > now + 0.02 else 0.0


def _bridged(
    starts: Floats, columns: dict[str, Floats], places: np.ndarray, name: str
) -> tuple[Floats, dict[str, Floats], float, int]:
    """Short gaps filled in straight lines; a long one is refused."""
    steps = np.diff(starts)
    every = float(np.median(steps))
    if every > _HOUR_S + 1:
        raise FarvoltError(f"{name}: has a row every {number(every / _HOUR_S)} h; accepted: every hour or more often")
    long = np.flatnonzero(steps > LONGEST_GAP_S + every)
    if len(long):
        place = int(long[0])
        before = f"the row before ({_utc(starts[place]):%Y-%m-%d %H:%M} UTC)"
        problem = f"{number(steps[place] / _HOUR_S)} h pass between {before} and this one"
        _refuse(name, int(places[place + 1]), problem, "gaps of up to 3 h, which are bridged in a straight line")
    missing = np.rint(steps / every).astype(int) - 1
    count = int(np.maximum(missing, 0).sum())
    if count == 0:
        return starts, columns, every, 0
    where = np.flatnonzero(missing > 0)
    added = [starts[k] + steps[k] * np.arange(1, missing[k] + 1) / (missing[k] + 1) for k in where]
    filled = np.sort(np.concatenate([starts, *added]))
    return filled, {word: np.interp(filled, starts, values) for word, values in columns.items()}, every, count


def time_zone(name: str | None, longitude: float) -> dt.tzinfo:
    """The clock of a site: its time zone where stated, else whole hours by its longitude."""
    return ZoneInfo(name) if name is not None else dt.timezone(dt.timedelta(hours=round(longitude / 15)))
