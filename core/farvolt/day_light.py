"""The light over days and what solar sources make of it, from the best that is known: a table of the user's own, the
site's clearness, a clear sky, or hours of full sun."""

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from farvolt import sun
from farvolt.errors import FarvoltError
from farvolt.irradiance_file import IrradianceTable
from farvolt.network import Floats
from farvolt.plan import Plan, Solar

NEEDS_PLACE = "the sun over it needs a place; accepted: a plan with [site] latitude, longitude and time_zone"
"""What is said of a table of irradiance without a site."""


@dataclass(frozen=True)
class Sky:
    """Steps as the sun needs them: their edges (UTC), dates and minutes of the day on the clock of the site."""

    edges_s: Floats
    dates: np.ndarray
    minutes: Floats
    peak_sun_hours: Floats
    table: IrradianceTable | None
    ambient_degC: float | None


def place(plan: Plan) -> sun.Site | None:
    """The plan's site as the sun sees it."""
    site = plan.site
    return None if site is None else sun.Site(site.latitude.si, site.longitude.si, albedo=site.albedo.si)


def sunlight(plan: Plan, sky: Sky, sources: Floats, notes: list[str]) -> Floats | None:
    """Put in what the solar sources have of their rated power; returns the air's temperature where a table has it."""
    panels = [(index, one) for index, one in enumerate(plan.sources) if isinstance(one, Solar)]
    site = place(plan)
    if sky.table is not None and site is None:
        raise FarvoltError(f"{sky.table.name}: {NEEDS_PLACE}")
    if not panels:
        return sky.table.over(sky.edges_s)[0].get("temp_air") if sky.table is not None else None
    half_s = float(sky.edges_s[1] - sky.edges_s[0]) / 2
    if site is None:
        light = sun.half_sine((sky.minutes + half_s / 60) / 60, sky.peak_sun_hours)
        notes.append("The sun comes up at 6 and goes down at 18 o'clock, with the peak_sun_hours of the day: the plan "
                     "states no site." if light.any() else
                     "No sun: the plan states neither a site nor peak_sun_hours for its days.")  # fmt: skip
        _panels(plan, sky, {index: light for index, _ in panels}, {}, sources)
        return None
    up = sun.position(sky.edges_s[:-1] + half_s, site)
    columns: dict[str, Floats] = {}
    if sky.table is not None:
        columns, moved = sky.table.over(sky.edges_s)
        here = sun.split(columns["ghi"], up, columns.get("dni"), columns.get("dhi"))
        notes.append(f"The sun of {sky.table.name}" + (f", moved by {moved} years" if moved else "") +
                     (f"; {sky.table.bridged} missing rows bridged" if sky.table.bridged else "") + ".")  # fmt: skip
    elif plan.site is not None and plan.site.clearness:
        month = np.array([dt.date.fromordinal(int(one)).month for one in sky.dates])
        here = sun.by_clearness(up, site, sky.dates, np.array(plan.site.clearness)[month - 1])
        notes.append("The sun of each month's average day, by the site's clearness: spells of dull days are not in it.")
    else:
        here = sun.clear_sky(up, site)
        notes.append("A clear sky every day, as the site states no clearness: expect less.")
    planes = {index: sun.on_plane(here, up, _plane(one, site), site.albedo) for index, one in panels}
    flat = [one.name for _, one in panels if one.tilt is None]
    if flat:
        notes.append(f"Taken as lying flat, as no tilt is stated: {listed(flat)}.")
    _panels(plan, sky, planes, columns, sources)
    return columns.get("temp_air")


def _plane(one: Solar, site: sun.Site) -> sun.Plane:
    azimuth = one.azimuth.si if one.azimuth is not None else 180.0 if site.latitude >= 0 else 0.0
    return sun.Plane(one.tilt.si if one.tilt is not None else 0.0, azimuth)


def _panels(
    plan: Plan, sky: Sky, planes: dict[int, Floats], columns: dict[str, Floats], sources: Floats
) -> None:
    """What modules make of the light on their plane, at their temperature."""
    still = sky.ambient_degC if sky.ambient_degC is not None else plan.plan.ambient.si
    for index, light in planes.items():
        one = plan.sources[index]
        assert isinstance(one, Solar)
        degC = sun.module_degC(light, columns.get("temp_air", np.full(len(light), still)), columns.get("wind", 1.0))
        fall = one.array.power_fall.si if one.array and one.array.power_fall else sun.POWER_FALL_PER_K
        sources[:, index] = sun.share_of_rated(light, degC, fall)


def bank_degC(plan: Plan, air: Floats | None, ambient_degC: float | None, steps: int) -> Floats:
    """Temperature of the banks: as asked for, of the reference's zone, of the air, or the plan's ambient."""
    reference = next((one for one in plan.sources if one.name == plan.reference), None)
    zone = plan.zone_of_point(reference.at) if reference is not None else None
    if ambient_degC is None and zone is None and air is not None:
        return air
    return np.full(steps, ambient_degC if ambient_degC is not None else plan.ambient_degC(zone))


def listed(names: Sequence[str]) -> str:
    """Names in quotes, for a note."""
    return ", ".join(f'"{name}"' for name in names)
