"""Low rays: when a panel's mirrored beam leaves near the horizon or downward, and where to.

A caution, not a glare study: hours of sun on the panel's face are counted as if no cloud stood in
the way, over level ground without obstacles.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.orientations import Orientations
from gridcool.engine.quadrature import hour_nodes, month_days
from gridcool.physics import panel, sun

FloatArray = NDArray[np.floating]

LOW_ELEVATION = 10.0  # degrees
SECTORS = 8  # of 45 degrees, the first one centred on north, clockwise


def low_rays(latitude: float, orientations: Orientations) -> FloatArray:
    """Hours a year in which the mirrored beam leaves below 10° elevation or downward.

    Parameters
    ----------
    latitude : float
        Degrees.
    orientations : Orientations

    Returns
    -------
    array, shape (8, orientations), float32
        By the compass sector that the ray goes to.
    """
    phi = float(np.deg2rad(latitude))
    normal = panel.normal_vector(
        tilt=np.deg2rad(orientations.tilt), azimuth=np.deg2rad(orientations.azimuth)
    )
    afternoon = sum(_month(phi, month, normal) for month in range(12))
    mirror = -np.arange(SECTORS) % SECTORS
    morning = np.asarray(afternoon)[mirror][:, orientations.mirrored]
    return np.asarray(afternoon + morning, np.float32)


def _month(phi: float, month: int, normal: panel.Vector) -> FloatArray:
    """Afternoon hours of one month by sector, shape (8, orientations)."""
    days, day_weights = month_days(month)
    delta = sun.declination(days)
    angle, weight = hour_nodes(phi, delta, 1, whole_day=False)
    hours = weight / 2 * day_weights[:, None, None] * 24 * sun.MONTH_LENGTHS[month]
    rays = sun.sun_vector(latitude=phi, declination=delta[:, None, None], hour_angle=angle)
    beam = tuple(ray.reshape(-1, 1) for ray in rays)
    ray = panel.reflected_vector((beam[0], beam[1], beam[2]), normal)
    cosine = panel.cosine_of_incidence((beam[0], beam[1], beam[2]), normal)
    low = (cosine > 0) & (beam[2] > 0) & (ray[2] < np.sin(np.deg2rad(LOW_ELEVATION)))
    width = 2 * np.pi / SECTORS
    sector = np.floor(np.arctan2(ray[0], ray[1]) / width + 0.5).astype(int) % SECTORS
    counted = hours.reshape(-1, 1) * low
    return np.stack([(counted * (sector == s)).sum(axis=0) for s in range(SECTORS)])
