"""The sun, held to published figures: the position of the algorithm's own example, day lengths, standard light."""

import datetime as dt

import numpy as np
import pytest

from farvolt import sun

GOLDEN = sun.Site(39.742476, -105.1786, 1830.14)
LONDON = sun.Site(51.5, 0.0)
SOUTH = sun.Plane(30.0, 180.0)


def moments(year: int, month: int, day: int, minutes: float = 5.0, days: int = 1) -> np.ndarray:
    start = dt.datetime(year, month, day, tzinfo=dt.UTC).timestamp()
    return start + 60 * minutes * (np.arange(days * round(1440 / minutes)) + 0.5)


def test_position_of_the_published_example() -> None:
    # Reda and Andreas, NREL/TP-560-34302 (2004, revised 2008), table A5.1: 2003-10-17 12:30:30, UTC−7, 820 mbar, 11 °C.
    at = dt.datetime(2003, 10, 17, 19, 30, 30, tzinfo=dt.UTC).timestamp()
    found = sun.position(np.array([at]), GOLDEN, air_degC=11.0, pressure_Pa=82000.0)
    assert found.zenith[0] == pytest.approx(50.11162, abs=2e-5)
    assert found.azimuth[0] == pytest.approx(194.34024, abs=1e-4)
    assert found.day_of_year[0] == 290


@pytest.mark.parametrize(
    ("latitude", "month", "day", "hours"),
    [
        # Day lengths as almanacs print them (sunrise and sunset of the upper limb, with refraction).
        (51.5, 6, 21, 16.64), (51.5, 12, 21, 7.83), (0.0, 3, 20, 12.12), (60.0, 6, 21, 18.88), (60.0, 12, 21, 5.88),
    ],
)  # fmt: skip
def test_length_of_the_day(latitude: float, month: int, day: int, hours: float) -> None:
    found = sun.position(moments(2027, month, day, 1.0), sun.Site(latitude, 0.0))
    # The limb is up while the centre stands less than half the sun's width, 0.267°, under the horizon.
    assert np.sum(found.zenith < 90.267) / 60 == pytest.approx(hours, abs=0.08)


def test_midnight_sun_and_polar_night() -> None:
    tromso = sun.Site(69.65, 18.96)
    assert np.all(sun.position(moments(2027, 6, 21), tromso).zenith < 90)
    assert np.all(sun.position(moments(2027, 12, 21), tromso).zenith > 90)


def test_a_day_outside_the_air_is_the_textbook_integral() -> None:
    # H0 = 24/π · G · (cos φ cos δ sin ωs + ωs sin φ sin δ) (Duffie and Beckman, Solar Engineering, eq. 1.10.3).
    found = sun.position(moments(2027, 6, 21, 2.0), LONDON)
    true = np.maximum(np.cos(np.radians(found.true_zenith)), 0)
    by_steps = np.sum(sun.beyond_the_air(found) * true) / 30
    phi, delta = np.radians(51.5), np.radians(23.44)
    sunset = np.arccos(-np.tan(phi) * np.tan(delta))
    level = np.cos(phi) * np.cos(delta) * np.sin(sunset) + sunset * np.sin(phi) * np.sin(delta)
    assert by_steps == pytest.approx(24 / np.pi * sun.beyond_the_air(found)[0] * level, rel=2e-3)


def test_clear_sky_at_a_high_sun_is_standard_light() -> None:
    # At noon on the equator in March the beam of a clear sky is about 1 kW/m² (ASTM G173: 900 direct, 1000 global).
    found = sun.position(moments(2027, 3, 20), sun.Site(0.0, 0.0))
    light = sun.clear_sky(found, sun.Site(0.0, 0.0))
    assert light.ghi.max() == pytest.approx(1050, abs=60)
    assert light.dni.max() == pytest.approx(940, abs=60)
    assert np.all(light.ghi[found.zenith > 90] == 0)


@pytest.mark.parametrize("month", [1, 3, 6, 12])
def test_a_clearness_index_gives_its_share_of_the_day(month: int) -> None:
    found = sun.position(moments(2027, month, 15, 30.0, 3), LONDON)
    day = np.repeat([0, 1, 2], 48)
    light = sun.by_clearness(found, LONDON, day, np.full(144, 0.45))
    outside = sun.beyond_the_air(found) * found.cosine
    for one in range(3):
        assert light.ghi[day == one].sum() == pytest.approx(0.45 * outside[day == one].sum(), rel=1e-12)
    assert np.all(light.dhi <= light.ghi)
    np.testing.assert_allclose(light.dni * found.cosine + light.dhi, light.ghi, rtol=1e-12, atol=1e-9)


def test_diffuse_part_of_a_month() -> None:
    # Erbs, Klein and Duffie (1982), as Duffie and Beckman's eq. 2.12.1 has it; about half at a middling index.
    assert sun.diffuse_share(np.array(0.45), np.array(np.radians(75.0))) == pytest.approx(0.442, abs=2e-3)
    assert sun.diffuse_share(np.array(0.45), np.array(np.radians(95.0))) == pytest.approx(0.479, abs=2e-3)
    clear, dull = sun.diffuse_share(np.array([0.75, 0.3]), np.array([1.5, 1.5]))
    assert clear < 0.25 < 0.6 < dull


def test_a_level_plane_takes_what_falls_on_level_ground() -> None:
    found = sun.position(moments(2027, 5, 1, 30.0), LONDON)
    light = sun.by_clearness(found, LONDON, np.zeros(48), np.full(48, 0.5))
    # Apart from the hour in which the sun stands within a degree of the horizon.
    high = found.zenith < 88
    np.testing.assert_allclose(sun.on_plane(light, found, sun.Plane(0, 0))[high], light.ghi[high], rtol=1e-9)


def test_a_tilted_plane_gains_in_winter_and_turns_away_from_the_north() -> None:
    found = sun.position(moments(2027, 12, 15, 30.0), LONDON)
    light = sun.by_clearness(found, LONDON, np.zeros(48), np.full(48, 0.4))
    towards, away = (sun.on_plane(light, found, sun.Plane(45.0, azimuth)).sum() for azimuth in (180.0, 0.0))
    assert towards > 1.5 * light.ghi.sum() > 1.5 * away
    assert np.all(sun.on_plane(light, found, SOUTH)[found.zenith > 90] == 0)


def test_beam_facing_the_plane() -> None:
    # Beam alone at incidence 0: the plane takes all of it; and the part of the sky that moves with it is none.
    found = sun.position(moments(2027, 6, 21, 30.0), LONDON)
    noon = int(np.argmin(found.zenith))
    dni = np.zeros(48)
    dni[noon] = 800.0
    light = sun.Irradiance(dni * found.cosine, dni, np.zeros(48))
    facing = sun.Plane(float(found.zenith[noon]), float(found.azimuth[noon]))
    assert sun.on_plane(light, found, facing, albedo=0.0)[noon] == pytest.approx(800.0, rel=1e-9)


def test_modules_lose_power_when_hot() -> None:
    # Faiman (2008): 25 + 6.84 W/m²K at 1 m/s: 800 W/m² warm a module by 800 / 31.84 = 25.1 K.
    hot = sun.module_degC(np.array([800.0]), np.array([20.0]))
    assert hot[0] == pytest.approx(20 + 800 / 31.84, rel=1e-9)
    at = sun.share_of_rated(np.array([1000.0, 1000.0]), np.array([25.0, 50.0]))
    assert at[0] == pytest.approx(0.9)
    assert at[1] == pytest.approx(0.9 * (1 - 0.004 * 25))


def test_half_a_sine_holds_its_hours_of_full_sun() -> None:
    hours = (np.arange(1440) + 0.5) / 60
    assert sun.half_sine(hours, np.full(1440, 4.2)).sum() / 60 == pytest.approx(4200, rel=1e-5)
    assert sun.half_sine(np.array([3.0, 21.0]), np.array([4.0, 4.0])).tolist() == [0.0, 0.0]
