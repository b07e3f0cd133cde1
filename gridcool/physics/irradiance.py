"""Surface irradiance from other observations than cloud."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.floating]

#: Hargreaves & Samani coefficient of the interior, K^-1/2 (0.19 at coasts); FAO-56 eq. 50.
HARGREAVES_INTERIOR = 0.16


def hargreaves_samani(
    temperature_range: ArrayLike,
    extraterrestrial: ArrayLike,
    coefficient: float = HARGREAVES_INTERIOR,
) -> FloatArray:
    """Irradiance of the ground from the diurnal temperature range.

    G = k_RS √DTR R_a (Hargreaves & Samani 1982; FAO Irrigation and Drainage Paper 56, eq. 50). The
    caller caps it at the clear-sky value. The unit is that of ``extraterrestrial``.

    Parameters
    ----------
    temperature_range : array
        Mean daily maximum minus minimum of air temperature, K.
    extraterrestrial : array
        R_a, irradiance of the horizontal above the atmosphere.
    coefficient : float
        k_RS, K^-1/2.
    """
    return np.asarray(
        coefficient * np.sqrt(np.asarray(temperature_range)) * np.asarray(extraterrestrial)
    )
