"""The simpler suns of textbooks, up to 1.2° from the real one: book tables need their own.

Angles are radians unless a name says degrees.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gridcool.physics import panel, sun

Array = NDArray[np.floating]

FAO_SOLAR_CONSTANT = 0.0820e6 / 60  # W m-2; FAO-56 gives 0.0820 MJ m-2 min-1
BOOK_SOLAR_CONSTANT = 1367.0  # Duffie & Beckman


def cooper_declination(day: ArrayLike) -> Array:
    """Cooper (1969), used by Duffie & Beckman (2013) eq. 1.6.1a."""
    return np.asarray(np.radians(23.45 * np.sin(np.radians(360 * (284 + np.asarray(day)) / 365))))


def fao_declination(day: ArrayLike) -> Array:
    """FAO-56 eq. 24."""
    return np.asarray(0.409 * np.sin(2 * np.pi * np.asarray(day) / 365 - 1.39))


def simple_distance(day: ArrayLike) -> Array:
    """FAO-56 eq. 23 and Duffie & Beckman (2013) eq. 1.4.1a."""
    return np.asarray(1 + 0.033 * np.cos(2 * np.pi * np.asarray(day) / 365))


def daily_radiation(
    latitude_degrees: float,
    day: ArrayLike,
    solar_constant: float,
    declination: Callable[[ArrayLike], Array],
) -> Array:
    """Extraterrestrial radiation of a day, MJ m-2, by integrating the package's sun vector.

    Only declination and distance are the book's; sunset and height of the sun are the package's.
    """
    delta, phi = np.atleast_1d(declination(day)), np.radians(latitude_degrees)
    sunset = sun.sunset_hour_angle(latitude=phi, declination=delta)
    nodes, weights = np.polynomial.legendre.leggauss(40)
    _, _, up = sun.sun_vector(
        latitude=phi, declination=delta[:, None], hour_angle=sunset[:, None] * nodes
    )
    seconds = 86400 / (2 * np.pi) * sunset
    radiation = solar_constant * np.atleast_1d(simple_distance(day)) * seconds * (up @ weights)
    return np.asarray(radiation) / 1e6


def daylight_hours(latitude_degrees: float, declination: ArrayLike) -> Array:
    """Daylight from the package's sunset hour angle."""
    sunset = sun.sunset_hour_angle(latitude=np.radians(latitude_degrees), declination=declination)
    return np.asarray(sunset * 24 / np.pi)


def beam_ratio(
    latitude_degrees: float, declination: float, tilt_degrees: float, *, south: bool = True
) -> float:
    """Daily beam on a tilted plane over that on the horizontal, without atmosphere (Klein 1977)."""
    hour_angle = np.linspace(-np.pi, np.pi, 20001)
    ray = sun.sun_vector(
        latitude=np.radians(latitude_degrees), declination=declination, hour_angle=hour_angle
    )
    normal = panel.normal_vector(tilt=np.radians(tilt_degrees), azimuth=np.pi if south else 0.0)
    lit = ray[2] > 0
    tilted = np.maximum(panel.cosine_of_incidence(ray, normal), 0)[lit].sum()
    return float(tilted / ray[2][lit].sum())
