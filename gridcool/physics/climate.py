"""Carbon-dioxide equivalents of a reflected watt: two published views that must not be mixed.

*Standing*: the carbon dioxide in today's air whose forcing equals the panel's for as long as the
panel stands. *Over 100 years*: the emission pulse whose forcing, integrated over a century of
decay, equals that of one year of the panel. Bright & Lund (2021), Atmos. Chem. Phys. 21, 9887,
review both.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.floating]

EARTH_AREA = 5.10065621724e14  # m2, WGS 84 ellipsoid
CARBON_DIOXIDE_MOLAR_MASS = 44.01  # g mol-1
AIR_MOLAR_MASS = 28.97  # g mol-1
ATMOSPHERE_MASS = 5.1352e18  # kg, dry air (Trenberth & Smith 2005)
#: Mass of carbon dioxide in the air per ppm of its mole fraction, kg.
MASS_PER_PPM = ATMOSPHERE_MASS * CARBON_DIOXIDE_MOLAR_MASS / AIR_MOLAR_MASS * 1e-6
#: Forcing of a small extra amount of carbon dioxide, W m-2 per ppb (IPCC AR5, 8.SM).
RADIATIVE_EFFICIENCY_PER_PPB = 1.37e-5
MYHRE_COEFFICIENT = 5.35  # W m-2

# Impulse response of Joos et al. (2013), Atmos. Chem. Phys. 13, 2793: shares and times in years.
IMPULSE_CONSTANT = 0.2173
IMPULSE_SHARES = (0.2240, 0.2824, 0.2763)
IMPULSE_TIMES = (394.4, 36.54, 4.304)


def carbon_dioxide_forcing(concentration: ArrayLike, reference: ArrayLike) -> FloatArray:
    """Forcing of a change in concentration, 5.35 ln(C/C₀), W m-2 (Myhre et al. 1998)."""
    ratio = np.asarray(concentration, float) / np.asarray(reference, float)
    return np.asarray(MYHRE_COEFFICIENT * np.log(ratio))


def airborne_fraction(years: ArrayLike) -> FloatArray:
    """Share of an emission pulse still in the air after some years (Joos et al. 2013)."""
    years = np.asarray(years, float)
    decaying = (
        share * np.exp(-years / time)
        for share, time in zip(IMPULSE_SHARES, IMPULSE_TIMES, strict=True)
    )
    return np.asarray(IMPULSE_CONSTANT + sum(decaying))


def airborne_years(horizon: ArrayLike) -> FloatArray:
    """Integral of `airborne_fraction` from zero to the horizon, years."""
    horizon = np.asarray(horizon, float)
    decaying = (
        share * time * (1 - np.exp(-horizon / time))
        for share, time in zip(IMPULSE_SHARES, IMPULSE_TIMES, strict=True)
    )
    return np.asarray(IMPULSE_CONSTANT * horizon + sum(decaying))


def absolute_warming_potential(horizon: ArrayLike = 100.0) -> FloatArray:
    """AGWP of carbon dioxide over a horizon in years, W m-2 yr kg-1.

    Radiative efficiency times the integrated impulse response (IPCC AR5, 8.SM.11).
    """
    per_kilogram = RADIATIVE_EFFICIENCY_PER_PPB * 1e3 / MASS_PER_PPM
    return np.asarray(per_kilogram * airborne_years(horizon))


def standing_equivalent(flux: ArrayLike, concentration: float) -> FloatArray:
    """Carbon dioxide in the air whose forcing equals the standing panel's, kg per m2 of panel.

    The panel's forcing is its flux spread over the Earth; the slope of 5.35 ln(C/C₀) at today's
    concentration turns it into ppm and the mass of a ppm into kilograms.

    Parameters
    ----------
    flux : array
        Rejected flux, W per m2 of panel.
    concentration : float
        Carbon dioxide in the air, ppm.
    """
    ppm = np.asarray(flux) / EARTH_AREA * concentration / MYHRE_COEFFICIENT
    return np.asarray(ppm * MASS_PER_PPM)


def yearly_equivalent(flux: ArrayLike, horizon: float = 100.0) -> FloatArray:
    """Emission of carbon dioxide that one year of the panel offsets, kg per m2 of panel and year.

    The panel's forcing of one year over AGWP of the horizon.
    """
    return np.asarray(np.asarray(flux) / EARTH_AREA / absolute_warming_potential(horizon))
