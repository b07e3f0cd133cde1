"""Where the sun stands and how much of it arrives above the atmosphere.

Angles are radians, latitude positive north, declination positive north, hour angle zero at solar
noon and positive in the afternoon. Arrays broadcast; NaN in gives NaN out.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.floating]

#: Total solar irradiance at one astronomical unit, W m-2 (Kopp & Lean 2011, 1360.8 ± 0.5).
TOTAL_SOLAR_IRRADIANCE = 1361.0

#: Days in each month of a 365-day year.
MONTH_LENGTHS = (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31)

DAYS_IN_YEAR = 365


def day_angle(day_of_year: ArrayLike) -> FloatArray:
    """Position in the year, radians; day 1 (1 January) is zero (Spencer 1971).

    Parameters
    ----------
    day_of_year : array
        Day number, 1 to 365; fractions are allowed.
    """
    return np.asarray(2 * np.pi * (np.asarray(day_of_year, float) - 1) / DAYS_IN_YEAR)


def declination(day_of_year: ArrayLike) -> FloatArray:
    """Declination of the sun, radians (Spencer 1971)."""
    g = day_angle(day_of_year)
    return np.asarray(
        0.006918
        - 0.399912 * np.cos(g)
        + 0.070257 * np.sin(g)
        - 0.006758 * np.cos(2 * g)
        + 0.000907 * np.sin(2 * g)
        - 0.002697 * np.cos(3 * g)
        + 0.00148 * np.sin(3 * g)
    )


def distance_factor(day_of_year: ArrayLike) -> FloatArray:
    """Square of mean over actual distance between sun and Earth, dimensionless (Spencer 1971)."""
    g = day_angle(day_of_year)
    return np.asarray(
        1.000110
        + 0.034221 * np.cos(g)
        + 0.001280 * np.sin(g)
        + 0.000719 * np.cos(2 * g)
        + 0.000077 * np.sin(2 * g)
    )


def equation_of_time(day_of_year: ArrayLike) -> FloatArray:
    """Apparent minus mean solar time, minutes (Spencer 1971; leading constant 0.0000075)."""
    g = day_angle(day_of_year)
    return np.asarray(
        229.18
        * (
            0.0000075
            + 0.001868 * np.cos(g)
            - 0.032077 * np.sin(g)
            - 0.014615 * np.cos(2 * g)
            - 0.04089 * np.sin(2 * g)
        )
    )


def sun_vector(
    *, latitude: ArrayLike, declination: ArrayLike, hour_angle: ArrayLike
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Unit vector from the ground to the sun as (east, north, up) components.

    Spherical astronomy, e.g. Iqbal (1983), An Introduction to Solar Radiation, ch. 1.
    """
    sin_lat, cos_lat = np.sin(latitude), np.cos(latitude)
    sin_dec, cos_dec = np.sin(declination), np.cos(declination)
    cos_hour = np.cos(hour_angle)
    east = -cos_dec * np.sin(hour_angle)
    north = cos_lat * sin_dec - sin_lat * cos_dec * cos_hour
    up = sin_lat * sin_dec + cos_lat * cos_dec * cos_hour
    return np.asarray(east), np.asarray(north), np.asarray(up)


def sunset_hour_angle(*, latitude: ArrayLike, declination: ArrayLike) -> FloatArray:
    """Hour angle at which the sun's centre crosses the horizon, radians.

    Zero in polar night, π in polar day; no refraction.
    """
    cosine = -np.tan(latitude) * np.tan(declination)
    return np.asarray(np.arccos(np.clip(cosine, -1.0, 1.0)))


def daily_insolation(
    *,
    latitude: ArrayLike,
    day_of_year: ArrayLike,
    solar_constant: float = TOTAL_SOLAR_IRRADIANCE,
) -> FloatArray:
    """Daily mean irradiance of a horizontal plane above the atmosphere, W m-2.

    Closed form of the integral over the day, e.g. Iqbal (1983), ch. 4.
    """
    delta = declination(day_of_year)
    sunset = sunset_hour_angle(latitude=latitude, declination=delta)
    height = sunset * np.sin(latitude) * np.sin(delta) + np.sin(sunset) * np.cos(latitude) * np.cos(
        delta
    )
    return np.asarray(solar_constant / np.pi * distance_factor(day_of_year) * height)


def air_mass(sine_of_elevation: ArrayLike) -> FloatArray:
    """Relative optical air mass (Kasten & Young 1989); one at the zenith, about 38 at the horizon.

    Parameters
    ----------
    sine_of_elevation : array
        Vertical component of a unit ray; values below the horizon give NaN.
    """
    sine = np.asarray(sine_of_elevation)
    above = np.where(sine >= 0, sine, np.nan)
    elevation = np.rad2deg(np.arcsin(np.minimum(above, 1.0)))
    return np.asarray(1 / (above + 0.50572 * (elevation + 6.07995) ** -1.6364))


def month_of_day(day_of_year: ArrayLike) -> NDArray[np.int64]:
    """Month, 0 to 11, in which a day of a 365-day year lies."""
    ends = np.cumsum(MONTH_LENGTHS)
    return np.searchsorted(ends, np.asarray(day_of_year, float) - 0.5)


def month_weights() -> FloatArray:
    """Share of each month in the 365-day year, shape (12,)."""
    return np.asarray(MONTH_LENGTHS, float) / DAYS_IN_YEAR
