"""The best fixed orientation by search on the direct quadrature, SciPy doing the searching."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from direct_quadrature import Panel, Scene, evaluate, normal
from direct_sky import Array
from scipy.optimize import minimize, minimize_scalar


@dataclass(frozen=True)
class Best:
    """The true optimum by search on the direct quadrature."""

    tilt: float
    azimuth: float
    annual: float


def best_orientation(
    scene: Scene, panel: Panel, *, compass: bool, near: Best | None = None
) -> Best:
    """Best fixed orientation, on the meridian or, with `compass`, over the whole sky.

    With ``near``, a known optimum of a coarser scene, only its neighbourhood is searched.
    """
    return (_best_of_compass if compass else _best_on_meridian)(scene, panel, near)


def on_meridian(signed: float) -> tuple[float, float]:
    """(tilt, azimuth) of a signed tilt: positive faces south, negative faces north."""
    return abs(signed), 180.0 if signed > 0 else 0.0


def _best_on_meridian(scene: Scene, panel: Panel, near: Best | None) -> Best:
    """Coarse, then fine grid, then Brent: finite time steps make the curve a fine staircase."""

    def loss(signed: float) -> float:
        return -evaluate(scene, panel, *on_meridian(signed)).annual

    if near is None:
        coarse = min(np.arange(-84.0, 85.0, 6.0), key=loss)
        fine = min(np.arange(coarse - 6, coarse + 6.1, 0.75), key=loss)
    else:
        coarse = near.tilt if near.azimuth == 180 else -near.tilt
        fine = min(np.arange(coarse - 2, coarse + 2.1, 0.5), key=loss)
    result = minimize_scalar(loss, bounds=(fine - 1, fine + 1), method="bounded")
    value, signed = min((float(result.fun), float(result.x)), (loss(fine), float(fine)))
    return Best(*on_meridian(signed), -value)


def _best_of_compass(scene: Scene, panel: Panel, near: Best | None) -> Best:
    """Search in the two horizontal components of the normal, smooth through the flat panel."""

    def orientation(xy: Array) -> tuple[float, float]:
        tilt = np.degrees(np.arcsin(min(float(np.hypot(*xy)), 1.0)))
        return tilt, float(np.degrees(np.arctan2(xy[0], xy[1])) % 360)

    def loss(xy: Array) -> float:
        return -evaluate(scene, panel, *orientation(xy)).annual

    if near is None:
        starts = [np.zeros(2)] + [
            _level_part(float(tilt), float(azimuth))
            for tilt in range(8, 81, 8)
            for azimuth in range(0, 360, 30)
        ]
        starts = sorted(starts, key=loss)[:3]
    else:
        starts = [_level_part(near.tilt, near.azimuth)]
    corners = 0.03 * np.array([[0.0, 1.0], [0.87, -0.5], [-0.87, -0.5]])
    results = [
        minimize(
            loss,
            start,
            method="Nelder-Mead",
            options={"xatol": 2e-4, "fatol": 1e-5, "initial_simplex": start + corners},
        )
        for start in starts
    ]
    best = min(results, key=lambda r: float(r.fun))
    return Best(*orientation(best.x), -float(best.fun))


def _level_part(tilt: float, azimuth: float) -> Array:
    """East and north components of a panel's normal; angles in degrees."""
    return normal(tilt, azimuth)[:2]
