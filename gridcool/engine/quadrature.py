"""Where along the year and the day the sun's path is sampled, and with which weights."""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.polynomial.legendre import leggauss
from numpy.typing import NDArray

from gridcool.physics import sun

FloatArray = NDArray[np.floating]

DAYS_PER_MONTH = 5
NODES_PER_HALF_DAY = 72
NODES_PER_DAY_IN_BINS = 144

_legendre = cache(leggauss)


def month_days(month: int) -> tuple[FloatArray, FloatArray]:
    """Gauss–Legendre days of a month and their weights, which add up to one."""
    start = sum(sun.MONTH_LENGTHS[:month]) + 0.5
    x, w = _legendre(DAYS_PER_MONTH)
    return start + sun.MONTH_LENGTHS[month] * (x + 1) / 2, w / 2


def hour_nodes(
    phi: float, delta: FloatArray, hours: int, *, whole_day: bool
) -> tuple[FloatArray, FloatArray]:
    """Hour angles within daylight and weights of a 24-hour mean, shape (days, hours, nodes)."""
    sunset = sun.sunset_hour_angle(latitude=phi, declination=delta)[:, None]
    if whole_day:
        edges = np.linspace(-np.pi, np.pi, hours + 1)
        nodes = max(4, NODES_PER_DAY_IN_BINS // hours)
        low = np.asarray(np.clip(edges[:-1], -sunset, sunset))
        high = np.asarray(np.clip(edges[1:], -sunset, sunset))
        mirrored = 1.0
    else:
        nodes = NODES_PER_HALF_DAY
        low, high = np.zeros_like(sunset), np.asarray(sunset)
        mirrored = 2.0
    x, w = _legendre(nodes)
    half = (high - low)[..., None] / 2
    angle = (high + low)[..., None] / 2 + half * x
    return angle, mirrored * half * w / (2 * np.pi)
