"""What of the light that rises from the ground leaves the cloudless atmosphere.

Scattering is a conservative layer in two streams: the hybrid of modified Eddington and delta
function of Meador & Weaver (1980), J. Atmos. Sci. 37, 630, with the exact share of single
scattering that turns back (Wiscombe & Grams 1976, J. Atmos. Sci. 33, 2440). Against discrete
ordinates it is within 0.035 of a ray for optical depths to 0.8 and elevations from 5°, where one
share for all elevations, such as the 0.84 of Bird & Hulstrom, is up to 0.43 off.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gridcool.physics.atmosphere import (
    AEROSOL_SCATTERING_ALBEDO,
    DIFFUSE_AIR_MASS,
    Atmosphere,
    absorption_transmittance,
    transmittance_aerosol,
    transmittance_rayleigh,
)

FloatArray = NDArray[np.floating]

AEROSOL_ASYMMETRY = 0.65  # Henyey & Greenstein; sends Bird & Hulstrom's 0.84 on at 41° elevation
_TERMS = 33  # 0.65³³ is below 1e-6
_RAYS, _RAY_WEIGHTS = np.polynomial.legendre.leggauss(8)


def turned_share(cosine: ArrayLike, asymmetry: float) -> FloatArray:
    """β₀: share of a ray's single scattering that goes into the hemisphere it came from.

    Parameters
    ----------
    cosine : array
        Between the ray and the vertical, 0 to 1.
    asymmetry : float
        g of the Henyey & Greenstein phase function; 0 gives one half at every angle.

    Notes
    -----
    Wiscombe & Grams (1976): ½ − ½ Σ (2l+1) gˡ P_l(μ) ∫₀¹ P_l over odd l.
    """
    series = np.zeros(_TERMS + 1)
    half_integral = 0.5  # ∫₀¹ P_1
    for order in range(1, _TERMS + 1, 2):
        series[order] = (2 * order + 1) * asymmetry**order * half_integral
        half_integral *= -order / (order + 3)
    return np.asarray(0.5 - 0.5 * np.polynomial.legendre.legval(np.asarray(cosine), series))


def coupling(cosine: ArrayLike, asymmetry: float) -> FloatArray:
    """γ₁ of the hybrid for conservative scattering (Meador & Weaver 1980, their Table 1)."""
    g = asymmetry
    turned = turned_share(cosine, g)
    above = 3 - 3 * g - 3 * g**2 + 3 * g**3 + 4 * turned * g**2
    return np.asarray(above / (4 * (1 - g**2 * (1 - np.asarray(cosine)))))


def layer_reflectance(
    cosine: ArrayLike, rayleigh_path: ArrayLike, aerosol_path: ArrayLike
) -> FloatArray:
    """Share of a ray that a mixed layer of Rayleigh and aerosol scattering sends back.

    Parameters
    ----------
    cosine : array
        Between the ray and the vertical, above 0 to 1.
    rayleigh_path, aerosol_path : array
        Scattering optical depth along the ray.

    Notes
    -----
    The conservative two-stream solution of Meador & Weaver (1980),
    [γ₁τ + (γ₃ − γ₁μ)(1 − e^(−τ/μ))] / (1 + γ₁τ), with γ₁ and γ₃ = β₀ weighted by each
    scatterer's depth.
    """
    rayleigh, aerosol, mu = np.asarray(rayleigh_path), np.asarray(aerosol_path), np.asarray(cosine)
    path = rayleigh + aerosol
    once = 0.5 * rayleigh + turned_share(mu, AEROSOL_ASYMMETRY) * aerosol
    often = mu * (0.75 * rayleigh + coupling(mu, AEROSOL_ASYMMETRY) * aerosol)
    met = np.divide(-np.expm1(-path), path, out=np.ones_like(path), where=path != 0)
    return np.asarray((often + (once - often) * met) / (1 + often))


def backscatter(atmosphere: Atmosphere, air_mass: ArrayLike) -> FloatArray:
    """Share of a rising ray that scattering alone sends back, for the column's own scatterers.

    Their depths along the ray are −ln T_R and −ln T_AS of Bird & Hulstrom (1981); the ray's cosine
    is that of an even layer with the same relative air mass.
    """
    m = np.asarray(air_mass)
    rayleigh = -np.log(transmittance_rayleigh(atmosphere.pressure_ratio * m))
    extinction = -np.log(transmittance_aerosol(atmosphere.aerosol_depth, m))
    cosine = np.minimum(1 / m, 1.0)
    return layer_reflectance(cosine, rayleigh, AEROSOL_SCATTERING_ALBEDO * extinction)


def ray_escape(
    atmosphere: Atmosphere, air_mass_down: ArrayLike, air_mass_up: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """First pass of a ray that came down through one air mass and rises through another.

    The way down has already emptied the strongly absorbed bands, so the way up absorbs only
    A = T_abs(m_d + m_r) / T_abs(m_d).

    Returns
    -------
    upward : array
        T = A (1 − b), the share that leaves the atmosphere, with b the `backscatter`.
    downward : array
        R = A b, the share sent back to the ground. T + R + absorbed = 1.
    """
    down, up = np.asarray(air_mass_down), np.asarray(air_mass_up)
    absorption = absorption_transmittance(atmosphere, down + up) / absorption_transmittance(
        atmosphere, down
    )
    returned = absorption * backscatter(atmosphere, up)
    return np.asarray(absorption - returned), np.asarray(returned)


def diffuse_escape(atmosphere: Atmosphere) -> tuple[FloatArray, FloatArray]:
    """T_d and R_d of isotropic light from the ground.

    Absorption is that of the diffuse air mass both ways; the backscatter is the mean over the
    directions of isotropic light, ∫ 2μ b(μ) dμ, because no single slant has it.
    """
    absorption = absorption_transmittance(
        atmosphere, 2 * DIFFUSE_AIR_MASS
    ) / absorption_transmittance(atmosphere, DIFFUSE_AIR_MASS)
    mean = sum(
        weight * cosine * backscatter(atmosphere, 1 / cosine)
        for cosine, weight in zip((_RAYS + 1) / 2, _RAY_WEIGHTS, strict=True)
    )
    returned = absorption * mean
    return np.asarray(absorption - returned), np.asarray(returned)
