"""Clouds: the sky of a moment, and the many skies within a month's mean.

The formulas of a moment (Kasten & Czeplak 1980) are concave in the cloud fraction, so a monthly
mean must not be put into them. Within a month the fraction n is beta distributed around the mean N,
n ~ Beta(νN, ν(1−N)) (Falls 1974), U-shaped for the usual concentration ν of about one.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.floating]

CLOUD_EXPONENT = 3.4
CLOUD_EFFECT = 0.75
OVERCAST_TRANSMITTANCE = 0.22
OVERCAST_REFLECTANCE = 0.68


def global_transmission(cloud_fraction: ArrayLike) -> FloatArray:
    """k(n) = 1 − 0.75 n^3.4, irradiance over its clear-sky value (Kasten & Czeplak 1980)."""
    return np.asarray(1 - CLOUD_EFFECT * np.asarray(cloud_fraction) ** CLOUD_EXPONENT)


def beam_transmission(cloud_fraction: ArrayLike) -> FloatArray:
    """s(n) = k (1 − n²): the beam shrinks as the diffuse share grows (Kasten & Czeplak 1980).

    Their growth of the diffuse share by n² starts from the clear sky's own share.
    """
    n = np.asarray(cloud_fraction)
    return np.asarray(global_transmission(n) * (1 - n**2))


def overcast_weight(cloud_fraction: ArrayLike) -> FloatArray:
    """a(n) = n^3.4, the weight of an overcast deck in what the ground's light meets."""
    return np.asarray(np.asarray(cloud_fraction) ** CLOUD_EXPONENT)


_log_gamma = np.frompyfunc(math.lgamma, 1, 1)


def beta_moment(mean: ArrayLike, exponent: float, concentration: float) -> FloatArray:
    """E[n^q] of Beta(νN, ν(1−N)): Γ(νN+q) Γ(ν) / (Γ(νN) Γ(ν+q)).

    Parameters
    ----------
    mean : array
        N, monthly mean cloud fraction, 0 to 1.
    exponent : float
        q, positive.
    concentration : float
        ν, positive; small values mean clear or overcast with little between.
    """
    mean = np.asarray(mean, float)
    a = np.maximum(concentration * mean, 1e-300)
    constant = math.lgamma(concentration) - math.lgamma(concentration + exponent)
    logarithm = _log_gamma(a + exponent) - _log_gamma(a) + constant
    moment = np.exp(np.asarray(logarithm, float))
    return np.asarray(np.where(np.isnan(mean), np.nan, np.where(mean <= 0, 0.0, moment)))


def mean_global_transmission(mean: ArrayLike, concentration: float) -> FloatArray:
    """E[k] over the month's skies, irradiance over its clear-sky value."""
    return np.asarray(1 - CLOUD_EFFECT * beta_moment(mean, CLOUD_EXPONENT, concentration))


def beta_nodes(
    mean: ArrayLike, concentration: float, count: int = 32
) -> tuple[FloatArray, FloatArray]:
    """Gauss–Jacobi nodes and weights for an expectation over Beta(νN, ν(1−N)).

    Golub & Welsch (1969): the nodes are the eigenvalues of the Jacobi matrix, the weights the
    squared first components of its eigenvectors. Exact limits at N = 0 and N = 1.

    Parameters
    ----------
    mean : array, shape (...)
        N, 0 to 1.
    concentration : float
        ν.
    count : int
        Number of nodes.

    Returns
    -------
    nodes, weights : array, shape (..., count)
        Cloud fractions in [0, 1] and weights that add up to one.
    """
    mean = np.asarray(mean, float)[..., np.newaxis]
    at_one = concentration * (1 - mean) - 1  # exponent of (1 − n)
    at_zero = concentration * mean - 1  # exponent of n
    total = concentration - 2.0
    k = np.arange(1, count, dtype=float)
    diagonal = np.concatenate(
        [
            (at_zero - at_one) / (total + 2),
            (at_zero**2 - at_one**2) / ((2 * k + total) * (2 * k + total + 2)),
        ],
        axis=-1,
    )
    first = 4 * (1 + at_one) * (1 + at_zero) / ((2 + total) ** 2 * (3 + total))
    k = k[1:]
    rest = (
        4 * k * (k + at_one) * (k + at_zero) * (k + total)
        / ((2 * k + total) ** 2 * (2 * k + total + 1) * (2 * k + total - 1))
    )  # fmt: skip
    off = np.sqrt(np.maximum(np.concatenate([first, rest], axis=-1), 0.0))
    matrix = np.zeros((*diagonal.shape, count))
    index = np.arange(count)
    matrix[..., index, index] = diagonal
    matrix[..., index[1:], index[:-1]] = off
    values, vectors = np.linalg.eigh(matrix)
    return np.clip((values + 1) / 2, 0.0, 1.0), vectors[..., 0, :] ** 2


def ground_light_escape(
    cloud_fraction: ArrayLike,
    ground_albedo: ArrayLike,
    diffuse_transmittance: ArrayLike,
    diffuse_reflectance: ArrayLike,
    *,
    overcast_transmittance: float = OVERCAST_TRANSMITTANCE,
    overcast_reflectance: float = OVERCAST_REFLECTANCE,
) -> FloatArray:
    """E_d = T̄ / (1 − α R̄): share of the ground's diffuse light that leaves the atmosphere.

    Single-layer shortwave model (Winton 2005; Donohoe & Battisti 2011) of a sky with overcast
    weight a: T̄ = (1−a) T_d + a t_c T_d, R̄ = (1−a) R_d + a R_c.
    """
    a = overcast_weight(cloud_fraction)
    transmitted = np.asarray(diffuse_transmittance) * (1 - a + a * overcast_transmittance)
    reflected = (1 - a) * np.asarray(diffuse_reflectance) + a * overcast_reflectance
    return np.asarray(transmitted / (1 - np.asarray(ground_albedo) * reflected))
