"""The best fixed orientation by search on the direct quadrature, SciPy doing the searching."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from direct_quadrature import Array, Panel, Scene, evaluate
from scipy.optimize import minimize, minimize_scalar


@dataclass(frozen=True)
class Best:
    """The true optimum by search on the direct quadrature."""

    tilt: float
    azimuth: float
    annual: float


def best_orientation(scene: Scene, panel: Panel, *, compass: bool) -> Best:
    """Best fixed orientation, on the meridian or, with `compass`, over the whole sky."""
    return _best_of_compass(scene, panel) if compass else _best_on_meridian(scene, panel)


def on_meridian(signed: float) -> tuple[float, float]:
    """(tilt, azimuth) of a signed tilt: positive faces south, negative faces north."""
    return abs(signed), 180.0 if signed > 0 else 0.0


def _best_on_meridian(scene: Scene, panel: Panel) -> Best:
    def loss(signed: float) -> float:
        return -evaluate(scene, panel, *on_meridian(signed)).annual

    tilts = np.arange(-84.0, 85.0, 6.0)
    losses = np.array([loss(t) for t in tilts])
    found = []
    for start in tilts[np.argsort(losses)[:2]]:
        bounds = (max(start - 6, -90.0), min(start + 6, 90.0))
        result = minimize_scalar(loss, bounds=bounds, method="bounded", options={"xatol": 0.02})
        found.append((float(result.fun), float(result.x)))
    value, signed = min(found)
    return Best(*on_meridian(signed), -value)


def _best_of_compass(scene: Scene, panel: Panel) -> Best:
    """Search in the two horizontal components of the normal, smooth through the flat panel."""

    def orientation(xy: Array) -> tuple[float, float]:
        tilt = np.degrees(np.arcsin(min(float(np.hypot(*xy)), 1.0)))
        return tilt, float(np.degrees(np.arctan2(xy[0], xy[1])) % 360)

    def loss(xy: Array) -> float:
        return -evaluate(scene, panel, *orientation(xy)).annual

    starts = [np.zeros(2)] + [
        np.sin(np.radians(tilt)) * np.array([np.sin(g), np.cos(g)])
        for tilt in range(10, 81, 10)
        for g in np.radians(np.arange(0, 360, 30))
    ]
    losses = np.array([loss(start) for start in starts])
    options = {"xatol": 2e-4, "fatol": 1e-5}
    results = [
        minimize(loss, starts[i], method="Nelder-Mead", options=options)
        for i in np.argsort(losses)[:2]
    ]
    best = min(results, key=lambda r: float(r.fun))
    return Best(*orientation(best.x), -float(best.fun))
