"""The sun over a site: position, irradiance with a clear sky or by a clearness index, on a tilted plane, and what
solar modules make of it.

Positions are those of the NREL solar position algorithm (Reda and Andreas 2004), through pvlib, as is every published
model below; nothing is fetched. Angles in degrees, azimuths clockwise from north, irradiance in W/m².
"""

from dataclasses import dataclass

import numpy as np

from farvolt.network import Floats

STANDARD_W_m2 = 1000.0
"""Irradiance at which modules are rated (IEC 60904-3)."""

RATED_DEGC = 25.0
"""Module temperature at which they are rated."""

POWER_FALL_PER_K = 0.004
"""Fall of the power of crystalline silicon for each kelvin above 25 °C, where the plan states none. From memory."""

DIRT_AND_MISMATCH = 0.9
"""What dirt, mismatch and tolerance leave of the rated power: common practice, from memory."""

ALBEDO = 0.2
"""Share of the light that ordinary ground throws back, where the plan states none: common practice."""

LEAST_ELEVATION = 0.0
"""Below this many degrees of apparent elevation there is no beam."""


@dataclass(frozen=True)
class Site:
    """Where on the earth: degrees north and east, metres above the sea."""

    latitude: float
    longitude: float
    altitude_m: float = 0.0
    albedo: float = ALBEDO


@dataclass(frozen=True)
class Position:
    """The sun over steps: `zenith` as it appears through the air, `azimuth` from north, and the day of the year."""

    zenith: Floats
    azimuth: Floats
    true_zenith: Floats
    day_of_year: Floats

    @property
    def cosine(self) -> Floats:
        """Cosine of the apparent zenith angle, 0 while the sun is down."""
        return np.asarray(np.maximum(np.cos(np.radians(self.zenith)), 0.0))


@dataclass(frozen=True)
class Irradiance:
    """W/m² on level ground over steps: global, beam (normal to it) and diffuse; air °C and wind m/s where known."""

    ghi: Floats
    dni: Floats
    dhi: Floats
    air_degC: Floats | None = None
    wind_m_s: Floats | None = None


@dataclass(frozen=True)
class Plane:
    """How modules stand: tilt from level, and where they face (180: south)."""

    tilt: float
    azimuth: float


def position(unix_s: Floats, site: Site, *, air_degC: float = 12.0, pressure_Pa: float | None = None) -> Position:
    """The sun at moments (seconds since 1970, UTC)."""
    from pvlib import spa

    pressure = 101325.0 * (1 - 2.25577e-5 * site.altitude_m) ** 5.25588 if pressure_Pa is None else pressure_Pa
    moments = np.asarray(unix_s, dtype=float)
    stamps = moments.astype("datetime64[s]")
    years = stamps.astype("datetime64[Y]")
    middle = float(np.median(years.astype(int)) + 1970) if len(moments) else 2000.0
    late = float(spa.calculate_deltat(middle, 7))
    zenith, true_zenith, _, _, azimuth, _ = spa.solar_position(
        moments, site.latitude, site.longitude, site.altitude_m, pressure / 100, air_degC, late, 0.5667, numthreads=1
    )
    day = (stamps.astype("datetime64[D]") - years.astype("datetime64[D]")).astype(int) + 1
    return Position(zenith, azimuth, true_zenith, day.astype(float))


def beyond_the_air(sun: Position) -> Floats:
    """Irradiance outside the atmosphere, normal to the beam (Spencer 1971; solar constant 1366.1 W/m²)."""
    from pvlib.irradiance import get_extra_radiation

    return np.asarray(get_extra_radiation(sun.day_of_year))


def clear_sky(sun: Position, site: Site) -> Irradiance:
    """A clear sky after the simplified Solis model (Ineichen 2008), with ordinary dust and moisture."""
    from pvlib.clearsky import simplified_solis

    pressure = 101325.0 * (1 - 2.25577e-5 * site.altitude_m) ** 5.25588
    up = sun.zenith < 90 - LEAST_ELEVATION
    found = simplified_solis(np.maximum(90 - sun.zenith, 0.0), pressure=pressure, dni_extra=beyond_the_air(sun))
    return Irradiance(*(np.where(up, np.asarray(found[name]), 0.0) for name in ("ghi", "dni", "dhi")))


def by_clearness(sun: Position, site: Site, local_day: np.ndarray, clearness: Floats) -> Irradiance:
    """The average day of a month's clearness index, which is given over steps.

    The day's sum is the index times what falls outside the atmosphere; it lies over the day as Collares-Pereira and
    Rabl (1979) found it to on average, and its diffuse part as Liu and Jordan (1960) did; how large that part is in
    a month follows Erbs, Klein and Duffie (1982). `local_day` numbers the days: each has a sum of its own.
    """
    outside = beyond_the_air(sun) * sun.cosine
    cosine, sunset = _hour_angles(sun, site)
    a = 0.409 + 0.5016 * np.sin(sunset - np.pi / 3)
    b = 0.6609 - 0.4767 * np.sin(sunset - np.pi / 3)
    shape = outside * np.maximum(a + b * cosine, 0.0)
    _, place = np.unique(local_day, return_inverse=True)
    wanted = np.bincount(place, weights=outside * clearness)
    drawn = np.bincount(place, weights=shape)
    factor = np.divide(wanted, drawn, out=np.zeros_like(wanted), where=drawn > 0)
    ghi = shape * factor[place]
    return split(ghi, sun, dhi=np.minimum(outside * clearness * diffuse_share(clearness, sunset), ghi))


def diffuse_share(clearness: Floats, sunset: Floats) -> Floats:
    """Diffuse part of a month's light by its clearness index and the hour angle of sunset in radians: Erbs, Klein and
    Duffie (1982), for indices of 0.3 to 0.8; held at their ends beyond."""
    k = np.clip(clearness, 0.3, 0.8)
    short = 1.391 - 3.560 * k + 4.189 * k**2 - 2.137 * k**3
    long = 1.311 - 3.022 * k + 3.427 * k**2 - 1.821 * k**3
    return np.asarray(np.where(sunset <= np.radians(81.4), short, long))


def _hour_angles(sun: Position, site: Site) -> tuple[Floats, Floats]:
    """Cosine of the hour angle, and the hour angle of sunset in radians, from where the sun stands."""
    latitude, true = np.radians(site.latitude), np.radians(sun.true_zenith)
    sine = np.sin(latitude) * np.cos(true) + np.cos(latitude) * np.sin(true) * np.cos(np.radians(sun.azimuth))
    declination = np.arcsin(np.clip(sine, -1, 1))
    level = np.maximum(np.cos(latitude) * np.cos(declination), 1e-9)
    cosine = np.clip((np.cos(true) - np.sin(latitude) * sine) / level, -1, 1)
    return cosine, np.arccos(np.clip(-np.sin(latitude) * sine / level, -1, 1))


def split(ghi: Floats, sun: Position, dni: Floats | None = None, dhi: Floats | None = None) -> Irradiance:
    """Beam and diffuse light of what is known on level ground; unknown ones after Erbs, Klein and Duffie (1982)."""
    from pvlib.irradiance import erbs

    cosine = sun.cosine
    ghi = np.where(cosine > 0, ghi, 0.0)
    if dhi is None and dni is not None:
        dhi = np.clip(ghi - dni * cosine, 0.0, ghi)
    if dhi is None:
        dhi = np.asarray(erbs(ghi, sun.zenith, sun.day_of_year)["dhi"])
    dhi = np.clip(np.nan_to_num(dhi), 0.0, ghi)
    if dni is None:
        # Beam and diffuse make up the whole; near the horizon the beam is no more than outside the air.
        dni = np.divide(ghi - dhi, cosine, out=np.zeros_like(ghi), where=cosine > 1e-6)
        dni = np.minimum(dni, beyond_the_air(sun))
        dhi = ghi - dni * cosine
    return Irradiance(ghi, np.where(cosine > 0, dni, 0.0), dhi)


def on_plane(light: Irradiance, sun: Position, plane: Plane, albedo: float = ALBEDO) -> Floats:
    """Irradiance on a tilted plane: beam, sky after Hay and Davies (1980), and what the ground throws back."""
    from pvlib.irradiance import aoi_projection, get_ground_diffuse, haydavies

    facing = np.maximum(aoi_projection(plane.tilt, plane.azimuth, sun.zenith, sun.azimuth), 0.0)
    # Within a degree of the horizon the ratio of tilted to level beam says nothing.
    ratio = facing / np.maximum(sun.cosine, np.cos(np.radians(89.0)))
    sky = haydavies(
        plane.tilt, plane.azimuth, light.dhi, light.dni, beyond_the_air(sun), projection_ratio=ratio,
    )  # fmt: skip
    ground = get_ground_diffuse(plane.tilt, light.ghi, albedo)
    return np.asarray(np.where(sun.cosine > 0, light.dni * facing + sky + ground, 0.0))


def module_degC(plane_W_m2: Floats, air_degC: Floats, wind_m_s: Floats | float = 1.0) -> Floats:
    """Temperature of open-rack modules (Faiman 2008, with his coefficients)."""
    from pvlib.temperature import faiman

    return np.asarray(faiman(plane_W_m2, air_degC, wind_m_s))


def share_of_rated(plane_W_m2: Floats, degC: Floats, fall_per_K: float = POWER_FALL_PER_K) -> Floats:
    """Power of modules over what they are rated at: linear in light and in temperature, less dirt and mismatch."""
    warm = np.maximum(1 - fall_per_K * (degC - RATED_DEGC), 0.0)
    return np.asarray(np.maximum(plane_W_m2, 0.0) / STANDARD_W_m2 * warm * DIRT_AND_MISMATCH)


def half_sine(hours_of_day: Floats, peak_sun_hours: Floats) -> Floats:
    """Irradiance on the plane where only its hours of 1 kW/m² are known: half a sine from 6 to 18 o'clock."""
    angle = np.pi * (hours_of_day - 6.0) / 12.0
    return np.asarray(np.maximum(np.sin(angle), 0.0) * peak_sun_hours * STANDARD_W_m2 * np.pi / 24)
