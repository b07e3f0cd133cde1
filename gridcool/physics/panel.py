"""Geometry of a flat reflector. Vectors are (east, north, up); angles are radians."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.floating]
Vector = tuple[FloatArray, FloatArray, FloatArray]


def normal_vector(*, tilt: ArrayLike, azimuth: ArrayLike) -> Vector:
    """Unit normal of the reflecting face.

    Parameters
    ----------
    tilt : array
        β, angle between panel and horizontal.
    azimuth : array
        γ, direction the face looks to, clockwise from true north.
    """
    sine = np.sin(tilt)
    return (
        np.asarray(sine * np.sin(azimuth)),
        np.asarray(sine * np.cos(azimuth)),
        np.asarray(np.cos(tilt) * np.ones_like(sine)),
    )


def cosine_of_incidence(sun: Vector, normal: Vector) -> FloatArray:
    """n·s, negative where the sun is behind the face."""
    return np.asarray(sun[0] * normal[0] + sun[1] * normal[1] + sun[2] * normal[2])


def reflected_vector(sun: Vector, normal: Vector) -> Vector:
    """Direction of the mirrored ray, r = 2 (n·s) n − s."""
    twice = 2 * cosine_of_incidence(sun, normal)
    return (
        np.asarray(twice * normal[0] - sun[0]),
        np.asarray(twice * normal[1] - sun[1]),
        np.asarray(twice * normal[2] - sun[2]),
    )


def isotropic_up(tilt: ArrayLike) -> FloatArray:
    """(1 + cos β)/2: share of an isotropic sky that the face sees."""
    return np.asarray((1 + np.cos(tilt)) / 2)


def isotropic_down(tilt: ArrayLike) -> FloatArray:
    """(1 − cos β)/2: share of the surrounding ground that the face sees."""
    return np.asarray((1 - np.cos(tilt)) / 2)
