"""Candidate orientations on the plane of tilt vectors.

An orientation is a vector (x, y) in degrees: its length is the tilt β and its direction the way the
face looks, x = β sin γ to the east, y = β cos γ to the north. The plane has no seam at β = 0, so a
quadratic can be fitted around any candidate. The meridian is the line x = 0.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.floating]

MERIDIAN_STEP = 2.5
COMPASS_STEP = 5.0
COMPASS_RADIUS = 80.0
FLAT_BELOW = 0.05  # degrees of tilt under which a panel is called flat


@dataclass(frozen=True)
class Orientations:
    """Evenly spaced candidates and their neighbourhoods.

    Attributes
    ----------
    east, north : array, shape (orientations,)
        Tilt vector components, degrees.
    step : float
        Spacing, degrees.
    stencil : array of int, shape (orientations, 3 or 9)
        Candidates around each one, ordered by offset north within offset east; -1 where the
        neighbourhood is not complete, in which case the candidate cannot be a maximum.
    """

    east: FloatArray
    north: FloatArray
    step: float
    stencil: NDArray[np.intp]

    @property
    def tilt(self) -> FloatArray:
        """β in degrees."""
        return np.hypot(self.east, self.north)

    @property
    def azimuth(self) -> FloatArray:
        """γ in degrees, clockwise from north; zero for the flat panel."""
        return np.asarray(np.rad2deg(np.arctan2(self.east, self.north)) % 360.0)

    @property
    def flat(self) -> int:
        """Index of the flat panel."""
        return int(np.argmin(self.tilt))

    @property
    def on_meridian(self) -> bool:
        """Whether all candidates look north or south."""
        return bool(self.stencil.shape[1] == 3)

    @property
    def mirrored(self) -> NDArray[np.intp]:
        """Index of each candidate's mirror image across the meridian."""
        steps = np.stack([self.east, self.north]) / self.step
        where = {(round(x), round(y)): index for index, (x, y) in enumerate(steps.T)}
        return np.array([where[(-round(x), round(y))] for x, y in steps.T], dtype=np.intp)

    @property
    def coarse(self) -> NDArray[np.intp]:
        """Indices of every second candidate with a complete neighbourhood."""
        even = [np.round(each / self.step) % 2 == 0 for each in (self.east, self.north)]
        return np.flatnonzero(even[0] & even[1] & self.interior)

    @property
    def interior(self) -> NDArray[np.bool_]:
        """Which candidates have a complete neighbourhood."""
        return np.asarray((self.stencil >= 0).all(axis=1))


def meridian(step: float = MERIDIAN_STEP) -> Orientations:
    """Panels that look due north or south, tilts 0 to 90 degrees."""
    count = round(90 / step)
    north = step * np.arange(-count, count + 1)
    index = np.arange(len(north))
    stencil = np.stack([index - 1, index, index + 1], axis=1)
    stencil[stencil == len(north)] = -1
    stencil[(stencil < 0).any(axis=1)] = -1
    return Orientations(np.zeros_like(north), north, step, stencil)


def compass(step: float = COMPASS_STEP, radius: float = COMPASS_RADIUS) -> Orientations:
    """Panels that look anywhere, tilts 0 to ``radius`` degrees."""
    count = int(radius / step)
    offsets = np.arange(-count, count + 1)
    i, j = (a.ravel() for a in np.meshgrid(offsets, offsets, indexing="ij"))
    inside = np.hypot(i, j) * step <= radius
    i, j = i[inside], j[inside]
    lookup = np.full((2 * count + 3, 2 * count + 3), -1)
    lookup[i + count + 1, j + count + 1] = np.arange(len(i))
    around = [(di, dj) for di in (-1, 0, 1) for dj in (-1, 0, 1)]
    centre_i, centre_j = i + count + 1, j + count + 1
    stencil = np.stack([lookup[centre_i + di, centre_j + dj] for di, dj in around], axis=1)
    stencil[(stencil < 0).any(axis=1)] = -1
    return Orientations(i * step, j * step, step, stencil)
