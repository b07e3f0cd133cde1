"""The month's skies as numbers: expectations over cloud, tabulated once and looked up per cell.

Every cloud-dependent coefficient of the account is an expectation over the month's beta
distribution of cloud fraction. They depend on the mean cloud fraction N, the ground albedo α and,
weakly, on the diffuse reflectance R_d of the clear sky.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.options import Sky
from gridcool.physics import clouds

FloatArray = NDArray[np.floating]

CLOUD_STEPS = 128
ALBEDO_STEPS = 64
INVERSE_STEPS = 1024
REFLECTANCE_NODES = (0.02, 0.10, 0.22)
QUADRATURE_NODES = 40


@dataclass(frozen=True)
class Moments:
    """Expectations over the month's skies; arrays of one shape.

    With k, s and a the global, beam and overcast factors of a moment, E_d = T_d g the escape of the
    ground's light and t_c the overcast transmittance:

    Attributes
    ----------
    whole : E[k]
    beam : E[s]
    beam_out : E[s (s + (1−s) t_c)], a mirrored ray that leaves through clear or overcast sky
    ground_beam : E[s g]
    ground_beam_clear : E[s² g], a mirrored ray sent back by the clear sky, then by the ground
    ground_beam_cloud : E[s (1−s) g], the same sent back by cloud
    ground_whole : E[k g]
    """

    whole: FloatArray
    beam: FloatArray
    beam_out: FloatArray
    ground_beam: FloatArray
    ground_beam_clear: FloatArray
    ground_beam_cloud: FloatArray
    ground_whole: FloatArray


class SkyTable:
    """Tables of `Moments` and of the equivalent cloud fraction for one set of sky parameters."""

    def __init__(
        self, concentration: float, overcast_transmittance: float, overcast_reflectance: float
    ) -> None:
        mean = np.linspace(0, 1, CLOUD_STEPS + 1)
        n, weight = clouds.beta_nodes(mean, concentration, QUADRATURE_NODES)
        k, s = clouds.global_transmission(n), clouds.beam_transmission(n)
        self._by_cloud = [
            np.asarray((weight * f).sum(axis=-1), np.float32)
            for f in (k, s, s * (s + (1 - s) * overcast_transmittance))
        ]
        albedo = np.linspace(0, 1, ALBEDO_STEPS + 1)[:, None, None]
        nodes = np.array(REFLECTANCE_NODES)[:, None, None, None]
        g = clouds.ground_light_escape(
            n,
            albedo,
            1.0,
            nodes,
            overcast_transmittance=overcast_transmittance,
            overcast_reflectance=overcast_reflectance,
        )  # (reflectance, albedo, cloud, node)
        self._by_ground = [
            np.asarray((weight * f * g).sum(axis=-1), np.float32).reshape(len(nodes), -1)
            for f in (s, s**2, s * (1 - s), k)
        ]
        # E[k] falls with N; the inverse is looked up on an even axis of E[k].
        self.darkest = float(clouds.mean_global_transmission(1.0, concentration))
        fine = np.linspace(0, 1, 20001)
        falling = clouds.mean_global_transmission(fine, concentration)
        axis = np.linspace(self.darkest, 1, INVERSE_STEPS + 1)
        self._inverse = np.asarray(np.interp(axis, falling[::-1], fine[::-1]), np.float32)

    def mean_transmission(self, cloud: FloatArray) -> FloatArray:
        """E[k] of a mean cloud fraction; NaN stays NaN."""
        return _line(self._by_cloud[0], *_position(cloud, CLOUD_STEPS))

    def equivalent_cloud(self, transmission: FloatArray) -> FloatArray:
        """N for which E[k] is the given share of the clear-sky irradiance, within 0 and 1."""
        scaled = (transmission - np.float32(self.darkest)) / np.float32(1 - self.darkest)
        return _line(self._inverse, *_position(np.clip(scaled, 0, 1), INVERSE_STEPS))

    def moments(
        self,
        cloud: FloatArray,
        albedo: FloatArray,
        reflectance: FloatArray,
        group: NDArray[np.intp] | None = None,
    ) -> Moments:
        """Look up all expectations.

        Parameters
        ----------
        cloud : array, shape (months, hours, cells)
            N, 0 to 1, without NaN.
        albedo : array, shape (months, 1, cells)
            α.
        reflectance : array, shape (months or 1, 1, cells), or (groups,)
            R_d of each cell, or of groups of cells under the same clear sky.
        group : array of int, shape (cells,), optional
            The group of each cell.
        """
        column, right = _position(cloud, CLOUD_STEPS)
        row, down = _position(albedo, ALBEDO_STEPS)
        corner = row * (CLOUD_STEPS + 1) + column
        if group is not None:
            corner += group * ((ALBEDO_STEPS + 1) * (CLOUD_STEPS + 1))
        bilinear = [
            ((1 - down) * (1 - right), corner),
            ((1 - down) * right, corner + 1),
            (down * (1 - right), corner + CLOUD_STEPS + 1),
            (down * right, corner + CLOUD_STEPS + 2),
        ]
        share = _quadratic(reflectance)
        whole, beam, beam_out = (_line(table, column, right) for table in self._by_cloud)
        ground = []
        for table in self._by_ground:
            if group is not None:  # a table for each clear sky
                flat = sum(f[:, None] * t for f, t in zip(share, table, strict=True))
                values = _gather(np.asarray(flat, np.float32), bilinear)
            else:
                values = np.asarray(
                    sum(f * _gather(t, bilinear) for f, t in zip(share, table, strict=True))
                )
            ground.append(values)
        return Moments(whole, beam, beam_out, *ground)


@cache
def sky_table(sky: Sky) -> SkyTable:
    """The table for these sky parameters, built once."""
    return SkyTable(sky.cloud_concentration, sky.overcast_transmittance, sky.overcast_reflectance)


def _position(values: FloatArray, steps: int) -> tuple[NDArray[np.intp], FloatArray]:
    """Index of the step below and the way into it; NaN gets index 0 and a NaN way."""
    scaled = values * np.float32(steps)
    index = np.fmin(np.fmax(scaled, 0), steps - 1).astype(np.intp)  # fmax turns NaN into 0
    return index, (scaled - index).astype(np.float32)


def _line(table: FloatArray, index: NDArray[np.intp], way: FloatArray) -> FloatArray:
    low = table.take(index)
    return np.asarray(low + way * (table.take(index + 1) - low))


def _gather(table: FloatArray, corners: Sequence[tuple[FloatArray, NDArray[Any]]]) -> FloatArray:
    weight, index = corners[0]
    total = weight * table.take(index)
    for weight, index in corners[1:]:
        total += weight * table.take(index)
    return np.asarray(total)


def _quadratic(value: FloatArray) -> list[FloatArray]:
    """Lagrange weights on the three reflectance nodes."""
    a, b, c = (np.float32(node) for node in REFLECTANCE_NODES)
    return [
        np.asarray((value - b) * (value - c) / ((a - b) * (a - c)), np.float32),
        np.asarray((value - a) * (value - c) / ((b - a) * (b - c)), np.float32),
        np.asarray((value - a) * (value - b) / ((c - a) * (c - b)), np.float32),
    ]
