"""The cloudless atmosphere: broadband transmittances and the light they let down.

Transmittances are those of Bird & Hulstrom (1981), A Simplified Clear Sky Model for Direct and
Diffuse Insolation on Horizontal Surfaces, SERI/TR-642-761, with two guards near the horizon, where
the published fits break: Rayleigh transmittance is evaluated at a pressure-corrected air mass of
at most 10 (its fit turns back up beyond), and aerosol absorption is T_A^(1−ω₀), since the published
form turns negative beyond an air mass of about 35.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.floating]

SCALE_HEIGHT = 8434.5  # m; Rigollier, Bauer & Wald (2000), Solar Energy 68
DIFFUSE_AIR_MASS = 1.66  # Bird & Hulstrom (1981): effective air mass of isotropic light
AEROSOL_SCATTERING_ALBEDO = 0.9  # ω₀
AEROSOL_FORWARD_SHARE = 0.84  # B_a of Bird & Hulstrom (1981)
RAYLEIGH_FORWARD_SHARE = 0.5
RAYLEIGH_AIR_MASS_LIMIT = 10.0
BEAM_FACTOR = 0.9662
SCATTERED_FACTOR = 0.79

DEFAULT_AEROSOL_DEPTH_550 = 0.12
DEFAULT_OZONE_CM = 0.30
ANGSTROM_EXPONENT = 1.3


@dataclass(frozen=True)
class Atmosphere:
    """A cloudless column; the fields are arrays that broadcast with each other.

    Attributes
    ----------
    pressure_ratio : array
        Surface pressure over 1013.25 hPa.
    precipitable_water_cm : array
        Water vapour as a layer of liquid, cm (1 cm is 10 kg m-2).
    aerosol_depth : array
        Broadband aerosol depth of Bird & Hulstrom, see `broadband_aerosol_depth`.
    ozone_cm : array
        Ozone as a layer at standard temperature and pressure, atm-cm (0.3 is 300 DU).
    """

    pressure_ratio: ArrayLike = 1.0
    precipitable_water_cm: ArrayLike = 1.5
    aerosol_depth: ArrayLike = 0.1
    ozone_cm: ArrayLike = DEFAULT_OZONE_CM

    def at(self, index: Any) -> Atmosphere:
        """The column with every field indexed alike; the fields must be arrays of one shape."""
        return Atmosphere(*(np.asarray(getattr(self, field.name))[index] for field in fields(self)))


def pressure_ratio(elevation: ArrayLike) -> FloatArray:
    """Surface pressure over sea-level pressure at a height in metres (Rigollier et al. 2000)."""
    return np.asarray(np.exp(-np.asarray(elevation) / SCALE_HEIGHT))


def default_precipitable_water(latitude: ArrayLike) -> FloatArray:
    """Annual mean precipitable water where nothing better is known, cm, from latitude in radians.

    A smooth zonal climatology, 0.4 + 4 cos⁴ φ: about 4.4 cm at the equator, 0.4 cm at the poles.
    """
    return np.asarray(0.4 + 4.0 * np.cos(latitude) ** 4)


def broadband_aerosol_depth(
    depth_550: ArrayLike, exponent: float = ANGSTROM_EXPONENT
) -> FloatArray:
    """Bird & Hulstrom's aerosol depth, 0.2758 τ₃₈₀ + 0.35 τ₅₀₀, from the depth at 550 nm.

    The depth is carried to 380 and 500 nm with an Ångström exponent.
    """
    factor = 0.2758 * (380 / 550) ** -exponent + 0.35 * (500 / 550) ** -exponent
    return np.asarray(np.asarray(depth_550) * factor)


def transmittance_rayleigh(pressure_air_mass: ArrayLike) -> FloatArray:
    """T_R of Bird & Hulstrom (1981) at a pressure-corrected air mass, held from 10 on."""
    m = np.minimum(pressure_air_mass, RAYLEIGH_AIR_MASS_LIMIT)
    return np.asarray(np.exp(-0.0903 * m**0.84 * (1 + m - m**1.01)))


def transmittance_ozone(slant_ozone_cm: ArrayLike) -> FloatArray:
    """T_O of Bird & Hulstrom (1981); argument is ozone (atm-cm) times air mass."""
    x = np.asarray(slant_ozone_cm)
    return np.asarray(
        1
        - 0.1611 * x * (1 + 139.48 * x) ** -0.3034
        - 0.002715 * x / (1 + 0.044 * x + 0.0003 * x**2)
    )


def transmittance_mixed_gases(pressure_air_mass: ArrayLike) -> FloatArray:
    """T_U of Bird & Hulstrom (1981), carbon dioxide and oxygen."""
    return np.asarray(np.exp(-0.0127 * np.asarray(pressure_air_mass) ** 0.26))


def transmittance_water(slant_water_cm: ArrayLike) -> FloatArray:
    """T_W of Bird & Hulstrom (1981); argument is precipitable water (cm) times air mass."""
    y = np.asarray(slant_water_cm)
    return np.asarray(1 - 2.4959 * y / ((1 + 79.034 * y) ** 0.6828 + 6.385 * y))


def transmittance_aerosol(depth: ArrayLike, air_mass: ArrayLike) -> FloatArray:
    """T_A of Bird & Hulstrom (1981), scattering and absorption together."""
    t = np.asarray(depth)
    return np.asarray(np.exp(-(t**0.873) * (1 + t - t**0.7088) * np.asarray(air_mass) ** 0.9108))


def transmittance_aerosol_absorption(depth: ArrayLike, air_mass: ArrayLike) -> FloatArray:
    """T_AA = T_A^(1−ω₀): what aerosol absorption alone lets through."""
    return np.asarray(transmittance_aerosol(depth, air_mass) ** (1 - AEROSOL_SCATTERING_ALBEDO))


def absorption_transmittance(atmosphere: Atmosphere, air_mass: ArrayLike) -> FloatArray:
    """T_abs = T_O T_U T_W T_AA along a path of the given relative air mass."""
    m = np.asarray(air_mass)
    return np.asarray(
        transmittance_ozone(atmosphere.ozone_cm * m)
        * transmittance_mixed_gases(atmosphere.pressure_ratio * m)
        * transmittance_water(atmosphere.precipitable_water_cm * m)
        * transmittance_aerosol_absorption(atmosphere.aerosol_depth, m)
    )


def scattering_transmittance(atmosphere: Atmosphere, air_mass: ArrayLike) -> FloatArray:
    """T_s = T_R T_AS: what scattering leaves in a beam, with T_AS = T_A / T_AA."""
    m = np.asarray(air_mass)
    rayleigh = transmittance_rayleigh(atmosphere.pressure_ratio * m)
    aerosol = transmittance_aerosol(atmosphere.aerosol_depth, m) ** AEROSOL_SCATTERING_ALBEDO
    return np.asarray(rayleigh * aerosol)


def clear_sky(
    atmosphere: Atmosphere,
    air_mass: ArrayLike,
    sine_of_elevation: ArrayLike,
    extraterrestrial: ArrayLike,
) -> tuple[FloatArray, FloatArray]:
    """Beam and scattered irradiance of Bird & Hulstrom (1981) with the guards of this module.

    Parameters
    ----------
    atmosphere : Atmosphere
    air_mass : array
        Relative air mass of the sun.
    sine_of_elevation : array
        Vertical component of the sun vector.
    extraterrestrial : array
        Irradiance above the atmosphere, normal to the beam, W m-2.

    Returns
    -------
    beam : array
        B₀, normal to the beam at the ground, W m-2.
    scattered : array
        I_as, scattered once on the way down, on the horizontal, W m-2, before bounces between
        ground and sky.
    """
    m = np.asarray(air_mass)
    absorbed = absorption_transmittance(atmosphere, m)
    rayleigh = transmittance_rayleigh(atmosphere.pressure_ratio * m)
    aerosol = transmittance_aerosol(atmosphere.aerosol_depth, m) ** AEROSOL_SCATTERING_ALBEDO
    beam = BEAM_FACTOR * np.asarray(extraterrestrial) * absorbed * rayleigh * aerosol
    downward = RAYLEIGH_FORWARD_SHARE * (1 - rayleigh) + AEROSOL_FORWARD_SHARE * (1 - aerosol)
    scattered = (
        SCATTERED_FACTOR
        * np.asarray(extraterrestrial)
        * np.asarray(sine_of_elevation)
        * absorbed
        * downward
        / (1 - m + m**1.02)
    )
    return np.asarray(beam), np.asarray(scattered)


def sky_albedo(atmosphere: Atmosphere) -> FloatArray:
    """r_s = 0.0685 + 0.16 (1 − T_AS) at the diffuse air mass (Bird & Hulstrom 1981)."""
    aerosol = transmittance_aerosol(atmosphere.aerosol_depth, DIFFUSE_AIR_MASS)
    return np.asarray(
        0.0685 + (1 - AEROSOL_FORWARD_SHARE) * (1 - aerosol**AEROSOL_SCATTERING_ALBEDO)
    )
