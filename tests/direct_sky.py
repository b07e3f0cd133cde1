"""Sun, clear air and clouds of a moment, written again from the published formulas alone.

Shares nothing with the package. Angles are radians unless a name says degrees.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import betainc

Array = NDArray[np.float64]

DIFFUSE_AIR_MASS = 1.66
AEROSOL_FORWARD = 0.84
AEROSOL_SCATTERING_SHARE = 0.9
ASYMMETRY = 0.65  # Henyey & Greenstein


@dataclass(frozen=True)
class Sky:
    """What the account assumes about clouds and snow."""

    concentration: float = 1.0
    overcast_transmittance: float = 0.22
    overcast_reflectance: float = 0.68
    snow_albedo: float = 0.5
    snow_covers_panel: bool = True


# --- sun ---


def declination_and_distance(day: Array) -> tuple[Array, Array]:
    """Spencer (1971): declination in radians and the squared distance ratio."""
    g = 2 * np.pi * (day - 1) / 365
    declination = (
        0.006918
        - 0.399912 * np.cos(g)
        + 0.070257 * np.sin(g)
        - 0.006758 * np.cos(2 * g)
        + 0.000907 * np.sin(2 * g)
        - 0.002697 * np.cos(3 * g)
        + 0.00148 * np.sin(3 * g)
    )
    distance = (
        1.000110
        + 0.034221 * np.cos(g)
        + 0.001280 * np.sin(g)
        + 0.000719 * np.cos(2 * g)
        + 0.000077 * np.sin(2 * g)
    )
    return declination, distance


def air_mass(sine_of_elevation: Array) -> Array:
    """Kasten & Young (1989)."""
    elevation = np.degrees(np.arcsin(np.clip(sine_of_elevation, -1.0, 1.0)))
    return 1 / (sine_of_elevation + 0.50572 * (elevation + 6.07995) ** -1.6364)


# --- clear air (Bird & Hulstrom 1981) ---


@dataclass(frozen=True)
class Air:
    """A column of air; every field may be an array over instants."""

    pressure: Any
    water: Any
    depth: Any
    ozone: Any

    def rayleigh(self, m: Any) -> Any:
        p = np.minimum(m * self.pressure, 10.0)
        return np.exp(-0.0903 * p**0.84 * (1 + p - p**1.01))

    def aerosol(self, m: Any) -> Any:
        t = self.depth
        return np.exp(-(t**0.873) * (1 + t - t**0.7088) * m**0.9108)

    def aerosol_absorption(self, m: Any) -> Any:
        return self.aerosol(m) ** (1 - AEROSOL_SCATTERING_SHARE)

    def aerosol_scattering(self, m: Any) -> Any:
        return self.aerosol(m) / self.aerosol_absorption(m)

    def absorption(self, m: Any) -> Any:
        """Ozone, mixed gases, water vapour and the absorbing part of the aerosol together."""
        x = self.ozone * m
        y = self.water * m
        ozone = (
            1
            - 0.1611 * x * (1 + 139.48 * x) ** -0.3034
            - 0.002715 * x / (1 + 0.044 * x + 0.0003 * x**2)
        )
        gases = np.exp(-0.0127 * (m * self.pressure) ** 0.26)
        water = 1 - 2.4959 * y / ((1 + 79.034 * y) ** 0.6828 + 6.385 * y)
        return ozone * gases * water * self.aerosol_absorption(m)

    def sky_albedo(self) -> Any:
        return 0.0685 + 0.16 * (1 - self.aerosol_scattering(DIFFUSE_AIR_MASS))

    def escape(self, m_down: Any, m_up: Any) -> tuple[Any, Any]:
        """Shares of a ray that leave upwards (T) and are scattered back down (R)."""
        left = self.absorption(m_down + m_up) / self.absorption(m_down)
        back = self.sent_back(m_up)
        return left * (1 - back), left * back

    def sent_back(self, m: Any) -> Any:
        """Meador & Weaver (1980): conservative two streams, hybrid of Eddington and delta."""
        mu = np.minimum(1 / np.asarray(m), 1.0)
        gas, dust = -np.log(self.rayleigh(m)), -np.log(self.aerosol_scattering(m))
        tau = (gas + dust) * mu
        share = dust / (gas + dust)
        g, turned = ASYMMETRY, turned_round(mu)
        hybrid = (3 + g * (-3 + g * (3 * (g - 1) + 4 * turned))) / (4 * (1 - g * g * (1 - mu)))
        gamma_1 = (1 - share) * 0.75 + share * hybrid
        gamma_3 = (1 - share) * 0.5 + share * turned
        first = (gamma_3 - gamma_1 * mu) * (1 - np.exp(-tau / mu))
        return (gamma_1 * tau + first) / (1 + gamma_1 * tau)

    def diffuse_escape(self) -> tuple[Any, Any]:
        """The same for isotropic light: absorbed at one air mass, scattered at all slants."""
        m = DIFFUSE_AIR_MASS
        left = self.absorption(2 * m) / self.absorption(m)
        slants = (np.arange(400) + 0.5) / 400
        back = sum(2 * mu * self.sent_back(1 / mu) for mu in slants) / 400
        return left * (1 - back), left * back


TURNED_AT = np.linspace(0, 1, 201)


def turned_round(mu: Any) -> Any:
    """Share of Henyey & Greenstein's single scattering that turns round."""
    return np.interp(mu, TURNED_AT, turned_table())


@cache
def turned_table() -> Array:
    """By brute integration, at the cosines of `TURNED_AT`.

    A direction at polar cosine u' on the far side of the horizon plane, at every azimuth.
    """
    u = -(np.arange(200) + 0.5) / 200
    angle = np.pi * (np.arange(200) + 0.5) / 200
    sines = np.sqrt(1 - u**2)[:, None] * np.cos(angle)
    values = []
    for each in TURNED_AT:
        cosine = each * u[:, None] + np.sqrt(1 - each**2) * sines
        g = ASYMMETRY
        values.append(0.5 * ((1 - g * g) / (1 + g * g - 2 * g * cosine) ** 1.5).mean())
    return np.array(values)


def clear_sky(air: Air, m: Array, up: Array, extraterrestrial: Array) -> tuple[Array, Array]:
    """Normal beam and the scattered irradiance of the horizontal before any ground bounce."""
    absorbed = air.absorption(m)
    beam = 0.9662 * extraterrestrial * absorbed * air.rayleigh(m) * air.aerosol_scattering(m)
    scattered = (
        0.79
        * extraterrestrial
        * up
        * absorbed
        * (0.5 * (1 - air.rayleigh(m)) + AEROSOL_FORWARD * (1 - air.aerosol_scattering(m)))
        / (1 - m + m**1.02)
    )
    return beam, scattered


# --- clouds ---


def cloud_classes(mean: float, concentration: float, count: int) -> tuple[Array, Array]:
    """Probability and mean cloud fraction of narrow classes of Beta(νN, ν(1−N))."""
    if mean <= 0 or mean >= 1:
        return np.array([1.0]), np.array([float(mean)])
    p, q = concentration * mean, concentration * (1 - mean)
    edges = np.linspace(0, 1, count + 1)
    probability = np.diff(betainc(p, q, edges))
    first_moment = mean * np.diff(betainc(p + 1, q, edges))
    middle = 0.5 * (edges[1:] + edges[:-1])
    empty = probability < 1e-13
    inside = np.where(empty, middle, first_moment / np.where(empty, 1.0, probability))
    return probability, inside


def moment_of_sky(
    n: Array, albedo: float, t_d: float, r_d: float, sky: Sky
) -> tuple[Array, Array, Array]:
    """Transmissions k and s and the ground's escape E_d under an instantaneous cloud fraction."""
    k = 1 - 0.75 * n**3.4
    s = k * (1 - n**2)
    overcast = n**3.4
    through = (1 - overcast) * t_d + overcast * sky.overcast_transmittance * t_d
    back = (1 - overcast) * r_d + overcast * sky.overcast_reflectance
    return k, s, through / (1 - albedo * back)
