"""The orientation search: one matrix product, then a quadratic around the best candidate."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.orientations import FLAT_BELOW, Orientations

FloatArray = NDArray[np.floating]


@dataclass(frozen=True)
class Best:
    """The best orientation of each cell.

    Attributes
    ----------
    east, north : array, shape (cells,)
        Tilt vector, degrees.
    stencil : array of int, shape (points, cells)
        Candidates around it.
    weights : array, shape (points, cells)
        Interpolation weights of those candidates at the best orientation.
    """

    east: FloatArray
    north: FloatArray
    stencil: NDArray[np.intp]
    weights: FloatArray

    @property
    def tilt(self) -> FloatArray:
        """β in degrees; zero where the panel is flat for all purposes."""
        tilt = np.hypot(self.east, self.north)
        return np.where(tilt < FLAT_BELOW, 0, tilt).astype(np.float32)

    @property
    def azimuth(self) -> FloatArray:
        """γ in degrees clockwise from north, NaN where the panel is flat."""
        gamma = (np.rad2deg(np.arctan2(self.east, self.north)) % 360.0).astype(np.float32)
        gamma = np.where(gamma >= 360, 0, gamma)  # what single precision rounds up to a full turn
        return np.where(self.tilt > 0, gamma, np.float32(np.nan))

    def part(self, cells: slice) -> Best:
        """The same of some of the cells."""
        return Best(
            self.east[cells], self.north[cells], self.stencil[:, cells], self.weights[:, cells]
        )

    def value(self, flux: FloatArray) -> FloatArray:
        """What a response of the same cells, shape (cells, orientations), is worth here."""
        around = np.take_along_axis(flux, self.stencil.T, axis=1)
        return np.asarray((around * self.weights.T).sum(axis=1))

    def interpolate(self, table: FloatArray) -> FloatArray:
        """Values at the best orientation from a table over candidates.

        Parameters
        ----------
        table : array, shape (rows, orientations)

        Returns
        -------
        array, shape (rows, cells)
        """
        total: FloatArray = table.take(self.stencil[0], axis=1)
        total *= self.weights[0]
        for index, weight in zip(self.stencil[1:], self.weights[1:], strict=True):
            part = table.take(index, axis=1)
            part *= weight
            total += part
        return total


def annual_response(
    beam: FloatArray, diffuse: FloatArray, response: FloatArray, orientations: Orientations
) -> FloatArray:
    """F of every cell at every candidate, as one matrix product.

    Parameters
    ----------
    beam : array, shape (rows, cells)
        Coefficients of the path integrals.
    diffuse : array, shape (2 or 3, cells)
        Coefficients of 1, cos β and, for a partly matte panel, cos² β.
    response : array, shape (rows, orientations)
        Path integrals, already weighted by the months.
    orientations : Orientations

    Returns
    -------
    array, shape (cells, orientations), W m-2
    """
    cosine = np.cos(np.deg2rad(orientations.tilt)).astype(np.float32)
    powers = np.stack([cosine**power for power in range(len(diffuse))])
    coefficients = np.concatenate([beam, diffuse.astype(np.float32)])
    return np.asarray(coefficients.T @ np.concatenate([response, powers]))


def find_best(flux: FloatArray, orientations: Orientations) -> Best:
    """The best candidate of each cell, refined by a quadratic through its neighbours.

    Parameters
    ----------
    flux : array, shape (cells, orientations)
    orientations : Orientations
    """
    candidates = np.flatnonzero(orientations.interior)
    peak = candidates[flux[:, candidates].argmax(axis=1)]
    stencil = orientations.stencil[peak].T  # (points, cells)
    values = np.take_along_axis(flux, stencil.T, axis=1).T
    if orientations.on_meridian:
        north = _vertex(values)
        east = np.zeros_like(north)
        weights = _lagrange(north)
    else:
        east, north = _vertex_in_plane(values)
        weights = (_lagrange(east)[:, None] * _lagrange(north)[None, :]).reshape(9, -1)
    step = np.float32(orientations.step)
    return Best(
        east=(orientations.east[peak] + east * step).astype(np.float32),
        north=(orientations.north[peak] + north * step).astype(np.float32),
        stencil=stencil,
        weights=weights.astype(np.float32),
    )


def _vertex(values: FloatArray) -> FloatArray:
    """Offset in steps, within one, of the maximum of the parabola through three values."""
    before, here, after = values
    curvature = before - 2 * here + after
    bent = curvature < 0
    offset = (before - after) / (2 * np.where(bent, curvature, 1))
    return np.where(bent, np.clip(offset, -1, 1), 0)


def _vertex_in_plane(values: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Offsets in steps, within one, of the maximum of the quadratic fitted to nine values."""
    grid = values.reshape(3, 3, -1)  # (east, north, cells)
    slope_east = (grid[2] - grid[0]).mean(axis=0) / 2
    slope_north = (grid[:, 2] - grid[:, 0]).mean(axis=0) / 2
    bend_east = (grid[0] - 2 * grid[1] + grid[2]).mean(axis=0)
    bend_north = (grid[:, 0] - 2 * grid[:, 1] + grid[:, 2]).mean(axis=0)
    twist = (grid[2, 2] - grid[2, 0] - grid[0, 2] + grid[0, 0]) / 4
    determinant = bend_east * bend_north - twist**2
    peaked = (determinant > 0) & (bend_east < 0)
    safe = np.where(peaked, determinant, 1)
    east = (twist * slope_north - bend_north * slope_east) / safe
    north = (twist * slope_east - bend_east * slope_north) / safe
    return (
        np.where(peaked, np.clip(east, -1, 1), 0),
        np.where(peaked, np.clip(north, -1, 1), 0),
    )


def _lagrange(offset: FloatArray) -> FloatArray:
    """Weights of three evenly spaced points at an offset in steps from the middle one."""
    return np.stack([offset * (offset - 1) / 2, 1 - offset**2, offset * (offset + 1) / 2])
