"""The sun against almanac, published examples and book tables.

A book table is tested with the book's own declination (`book_sun`); the package's sun is tested
against Spencer's printed values, the Solar Position Algorithm and an astronomical library.
"""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import book_sun
import erfa
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gridcool.physics import sun

SHARED = Path(__file__).parents[2] / "shared" / "data"
DAYS = np.arange(1, 366)


def zenith_and_azimuth(
    latitude: float, declination: float, hour_angle: float
) -> tuple[float, float]:
    """Degrees in and out; azimuth clockwise from north."""
    east, north, up = sun.sun_vector(
        latitude=np.radians(latitude),
        declination=np.radians(declination),
        hour_angle=np.radians(hour_angle),
    )
    return float(np.degrees(np.arccos(up))), float(np.degrees(np.arctan2(east, north)) % 360)


def day_number(moment: dt.datetime) -> float:
    """Spencer's day number at a moment in universal time: whole numbers at noon."""
    midnight = moment.replace(hour=0, minute=0, second=0)
    return moment.timetuple().tm_yday + (moment - midnight).total_seconds() / 86400 - 0.5


def hour_angle(moment: dt.datetime, longitude: float) -> float:
    """Degrees, from universal time and longitude through the package's equation of time."""
    midnight = moment.replace(hour=0, minute=0, second=0)
    hours = (moment - midnight).total_seconds() / 3600 + longitude / 15
    hours += float(sun.equation_of_time(day_number(moment))) / 60
    return (15 * (hours - 12) + 180) % 360 - 180


def almanac(year: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Declination (degrees), equation of time (minutes) and distance (au) at noon of 365 days.

    IAU 2000/2006 models as implemented in the ERFA library; light time left out (below 0.01°).
    """
    rows = []
    for day in range(365):
        date = dt.date(year, 1, 1) + dt.timedelta(days=day)
        utc = erfa.dtf2d("UTC", date.year, date.month, date.day, 12, 0, 0.0)
        tt = erfa.taitt(*erfa.utctai(*utc))
        heliocentric, _ = erfa.epv00(*tt)
        of_date = erfa.pnm06a(*tt) @ -np.asarray(heliocentric["p"])
        right_ascension, declination, distance = (
            np.arctan2(of_date[1], of_date[0]),
            np.arcsin(of_date[2] / np.linalg.norm(of_date)),
            np.linalg.norm(of_date),
        )
        greenwich = erfa.gst06a(*utc, *tt) - right_ascension
        minutes = 4 * np.degrees((greenwich + np.pi) % (2 * np.pi) - np.pi)
        rows.append((np.degrees(declination), minutes, distance))
    declinations, minutes_of_time, distances = np.array(rows).T
    return declinations, minutes_of_time, distances


# --- position, declination, equation of time ---


def test_spencer_declination() -> None:
    """Spencer (1971), values of the spreadsheet published with Bird & Hulstrom (1981)."""
    degrees = np.degrees(sun.declination([1, 2]))
    np.testing.assert_allclose(degrees, [-23.05865, -22.97936], atol=1e-4)
    # Counting days from zero would be off by a day's motion.
    assert np.all(abs(np.degrees(sun.declination([2, 3])) - [-23.05865, -22.97936]) > 0.05)


def test_spencer_equation_of_time() -> None:
    """Same spreadsheet. A much copied misprint of the constant, 0.000075, gives −2.904."""
    minutes = sun.equation_of_time([1, 2])
    np.testing.assert_allclose(minutes, [-2.91964, -3.36651], atol=1e-3)
    misprint = minutes + 229.18 * (0.000075 - 0.0000075)
    assert abs(misprint[0] - -2.91964) > 1e-2


def test_spencer_distance() -> None:
    """Same spreadsheet, extraterrestrial column 1414.91335 on 1 January at 1367 W m-2."""
    assert sun.distance_factor(1) == pytest.approx(1414.91335 / 1367, abs=1e-5)
    assert float(np.mean(sun.distance_factor(DAYS))) == pytest.approx(1.000110, abs=1e-5)
    assert abs(1 / sun.distance_factor(1) - 1414.91335 / 1367) > 0.05


def test_solar_position_algorithm_example() -> None:
    """Reda & Andreas (2004), NREL/TP-560-34302, the worked example; a Spencer sun within 0.5°."""
    moment = dt.datetime(2003, 10, 17, 19, 30, 30)
    angle = hour_angle(moment, -105.1786)
    declination = float(np.degrees(sun.declination(day_number(moment))))
    zenith, azimuth = zenith_and_azimuth(39.742476, declination, angle)
    assert angle == pytest.approx(11.10590, abs=0.2)
    assert declination == pytest.approx(-9.31434, abs=0.4)
    assert 90 - zenith == pytest.approx(39.872046, abs=0.5)
    assert azimuth == pytest.approx(194.34024, abs=0.5)
    assert float(sun.distance_factor(day_number(moment))) ** -0.5 == pytest.approx(
        0.9965422974, abs=5e-4
    )
    # East for west, north for south, or degrees for radians do not give this place's sun.
    assert abs(zenith_and_azimuth(39.742476, declination, -angle)[1] - 194.34) > 20
    assert abs(zenith_and_azimuth(-39.742476, declination, angle)[0] - 50.13) > 10
    assert abs(np.sin(declination) - np.sin(np.radians(-9.31434))) > 0.05


def test_spencer_quality_over_the_leap_cycle() -> None:
    """Against an astronomical library: declination within 0.55°, equation of time within 0.9 min.

    The simple sines of the book tables are worse, which is why those tables need their own.
    """
    spencer, cooper, fao = [], [], []
    for year in (2023, 2024, 2025, 2026):
        declination, minutes, distance = almanac(year)
        spencer.append(abs(np.degrees(sun.declination(DAYS)) - declination).max())
        cooper.append(abs(np.degrees(book_sun.cooper_declination(DAYS)) - declination).max())
        fao.append(abs(np.degrees(book_sun.fao_declination(DAYS)) - declination).max())
        assert abs(sun.equation_of_time(DAYS) - minutes).max() < (0.75 if year == 2023 else 0.9)
        np.testing.assert_allclose(sun.distance_factor(DAYS) ** -0.5, distance, atol=7e-4)
    assert max(spencer) < 0.55
    assert min(cooper) > 0.75
    assert min(fao) > 0.75
    assert spencer[0] == pytest.approx(0.33, abs=0.05)


@pytest.mark.parametrize(
    ("date", "rise", "transit", "fall"),
    [
        (dt.date(1996, 7, 5), "07:08:15", "12:04:36", "17:01:04"),
        (dt.date(2004, 12, 4), "04:38:57", "11:50:22", "19:02:03"),
    ],
)
def test_sunrise_and_transit(date: dt.date, rise: str, transit: str, fall: str) -> None:
    """Solar Position Algorithm calculator at 35°S 0°E, universal time; three minutes of time.

    Published rise and set are those of the upper rim with refraction, at −0.833°.
    """

    def at(clock: str) -> dt.datetime:
        return dt.datetime.combine(date, dt.time.fromisoformat(clock))

    assert hour_angle(at(transit), 0.0) == pytest.approx(0, abs=0.75)
    for clock in (rise, fall):
        declination = float(np.degrees(sun.declination(day_number(at(clock)))))
        zenith, azimuth = zenith_and_azimuth(-35.0, declination, hour_angle(at(clock), 0.0))
        assert zenith == pytest.approx(90.833, abs=0.6)
        assert (azimuth < 180) == (clock == rise)
        assert abs(zenith_and_azimuth(35.0, declination, hour_angle(at(clock), 0.0))[0] - 90) > 5


def test_distance_on_two_days() -> None:
    """Solar Position Algorithm, 2 January and 2 August 2015."""
    distance = sun.distance_factor([2, 214]) ** -0.5
    np.testing.assert_allclose(distance, [0.983289204601, 1.01486146446], atol=5e-4)


def test_yearly_extremes() -> None:
    """Astronomical Almanac 2010: obliquity 23.43668°, distance 0.98329 to 1.01671 au."""
    declination = np.degrees(sun.declination(DAYS))
    distance = sun.distance_factor(DAYS) ** -0.5
    assert declination.max() == pytest.approx(23.43668, abs=0.05)
    assert declination.min() == pytest.approx(-23.43668, abs=0.05)
    assert distance.min() == pytest.approx(0.98329, abs=1e-3)
    assert distance.max() == pytest.approx(1.01671, abs=1e-3)
    assert DAYS[distance.argmin()] < 10  # closest in January, not in July


@pytest.mark.parametrize(
    ("day", "hour", "zenith", "azimuth"),
    [(44, 9.5, 66.5, -40.0), (182, 18.5, 79.6, 112.0), (75, 16.0, 70.3, 66.8)],
)
def test_duffie_beckman_sun_positions(day: int, hour: float, zenith: float, azimuth: float) -> None:
    """Duffie & Beckman (2013), Examples 1.6.2 and 1.6.3, 43°N; azimuth from south, west positive.

    The second lies beyond 90°, which an arcsine would fold back.
    """
    declination = float(np.degrees(book_sun.cooper_declination(day)))
    found = zenith_and_azimuth(43.0, declination, 15 * (hour - 12))
    assert found[0] == pytest.approx(zenith, abs=0.15)
    assert found[1] - 180 == pytest.approx(azimuth, abs=0.15)
    mirrored = zenith_and_azimuth(43.0, declination, -15 * (hour - 12))
    assert abs(mirrored[1] - 180 - azimuth) > 50


def test_duffie_beckman_equation_of_time() -> None:
    """Duffie & Beckman (2013), Example 1.5.1: Madison, 89.4°W in the zone of 90°W, 3 February."""
    minutes = float(sun.equation_of_time(34))
    assert minutes == pytest.approx(-13.5, abs=0.1)
    assert 4 * (90 - 89.4) + minutes == pytest.approx(-11, abs=0.2)
    assert 4 * (89.4 - 90) + minutes < -15


def test_day_length_limits() -> None:
    """Exact: twelve hours at the equator and at the equinox; no NaN where the sun stays up."""
    sunset = sun.sunset_hour_angle
    np.testing.assert_allclose(
        sunset(latitude=0.0, declination=np.radians([-23, 0, 23])), np.pi / 2, rtol=1e-12
    )
    np.testing.assert_allclose(
        sunset(latitude=np.radians([-80, 0, 80]), declination=0.0), np.pi / 2, rtol=1e-12
    )
    polar = sunset(latitude=np.radians([80, 80, -80, -80]), declination=np.radians([20, -20] * 2))
    np.testing.assert_array_equal(polar, [np.pi, 0, 0, np.pi])


# --- properties ---

ANGLES = st.floats(-np.pi, np.pi)
LATITUDES = st.floats(-np.pi / 2, np.pi / 2)
DECLINATIONS = st.floats(-0.41, 0.41)


@given(latitude=LATITUDES, declination=DECLINATIONS, hour=ANGLES)
def test_sun_vector_is_a_unit_vector_with_mirror_images(
    latitude: float, declination: float, hour: float
) -> None:
    east, north, up = sun.sun_vector(latitude=latitude, declination=declination, hour_angle=hour)
    assert east**2 + north**2 + up**2 == pytest.approx(1, abs=1e-12)
    other = sun.sun_vector(latitude=-latitude, declination=-declination, hour_angle=hour)
    np.testing.assert_allclose(other, (east, -north, up), atol=1e-12)
    morning = sun.sun_vector(latitude=latitude, declination=declination, hour_angle=-hour)
    np.testing.assert_allclose(morning, (-east, north, up), atol=1e-12)


@given(latitude=st.floats(-1.5, 1.5), declination=DECLINATIONS)
def test_sun_is_on_the_horizon_at_sunset(latitude: float, declination: float) -> None:
    sunset = float(sun.sunset_hour_angle(latitude=latitude, declination=declination))
    _, _, up = sun.sun_vector(latitude=latitude, declination=declination, hour_angle=sunset)
    if 0 < sunset < np.pi:
        assert up == pytest.approx(0, abs=1e-9)
    else:
        assert (up >= 0) == (sunset == np.pi) or up == pytest.approx(0, abs=1e-9)


def test_missing_stays_missing() -> None:
    nan = np.nan
    assert np.isnan(sun.declination(nan))
    assert np.isnan(sun.sunset_hour_angle(latitude=nan, declination=0.1))
    assert np.isnan(sun.daily_insolation(latitude=nan, day_of_year=10))
    assert np.isnan(sun.air_mass(nan))
    assert np.isnan(sun.air_mass(-0.2))


def test_months() -> None:
    month = sun.month_of_day(DAYS)
    np.testing.assert_array_equal(np.bincount(month), sun.MONTH_LENGTHS)
    assert month[0] == 0
    assert month[30] == 0
    assert month[31] == 1
    assert sum(sun.MONTH_LENGTHS) == 365
    assert float(sun.month_weights().sum()) == pytest.approx(1)
