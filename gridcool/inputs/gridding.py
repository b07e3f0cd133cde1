"""From the cells of a file to the cells of the target grid.

Each axis is judged by itself: where target cells are at least as large as the file's, values are
averaged by area (latitude counts by its sine); where they are smaller, values are interpolated
linearly between centres. Longitude goes round where the file does. A target cell is missing where
less than half of its weight lies on valid cells, and nothing is made up beyond the file's outer
edge; so gaps neither spread nor fill up.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import sparse

from gridcool.grid import Grid
from gridcool.inputs.axes import Axis

FloatArray = NDArray[np.floating]

VALID_SHARE = 0.5
ROUNDING = 1e-6


@dataclass(frozen=True)
class Gridding:
    """Weights from a file's cells to a target grid, rows and columns apart.

    Sums are double precision: a constant stays that constant in single precision, and no mean
    leaves the range of its parts by rounding, such as a share beyond 1.

    Attributes
    ----------
    rows : sparse matrix, shape (target rows, source rows)
    columns : sparse matrix, shape (target columns, source columns)
    description : str
    same : bool
        Whether the two grids agree, so that nothing is to be done.
    """

    rows: Any
    columns: Any
    description: str
    same: bool

    def source_rows(self, target: slice) -> slice:
        """Rows of the file that a range of target rows needs; empty if none."""
        used = self.rows[target].indices
        return slice(int(used.min()), int(used.max()) + 1) if len(used) else slice(0, 0)

    def apply(self, values: FloatArray, target: slice, source: slice) -> NDArray[np.float32]:
        """Values of a range of target rows.

        Parameters
        ----------
        values : array, shape (..., source rows, source columns)
            The rows ``source`` of the file, NaN where missing.
        target, source : slice
        """
        if self.same:
            return np.asarray(values, np.float32)
        down, across = self.rows[target, source], self.columns
        shape = (*values.shape[:-2], down.shape[0], across.shape[0])
        planes = values.reshape(-1, *values.shape[-2:])
        result = np.empty((len(planes), *shape[-2:]), np.float32)
        # Summed in the same order with and without gaps, so that strips agree to the last bit.
        covered = _both(down, np.ones(planes.shape[1:]), across)
        for plane, out in zip(planes, result, strict=True):
            missing = np.isnan(plane)
            if missing.any():
                total = _both(down, np.where(missing, 0, plane), across)
                weight = _both(down, ~missing, across)
            else:
                total, weight = _both(down, plane, across), covered
            enough = weight >= VALID_SHARE - ROUNDING
            out[:] = np.where(enough, total / np.where(enough, weight, 1), np.nan)
        return result.reshape(shape)


def gridding_to(grid: Grid, latitude: Axis, longitude: Axis) -> Gridding:
    """Weights that bring a file's cells to the target grid."""
    rows, how_rows = _weights(
        -latitude.edges, -latitude.centres, -grid.latitude_edges, -grid.latitudes, polar=True
    )
    columns, how_columns = _weights(
        longitude.edges,
        longitude.centres,
        grid.longitude_edges,
        grid.longitudes,
        periodic=True,
        closes=longitude.closes_circle,
    )
    same = how_rows == how_columns == "unchanged"
    if same:
        description = "unchanged"
    elif how_rows == how_columns or "unchanged" in (how_rows, how_columns):
        description = how_rows if how_rows != "unchanged" else how_columns
    else:
        description = f"latitude {how_rows}, longitude {how_columns}"
    return Gridding(rows, columns, description, same)


def _weights(
    edges: FloatArray,
    centres: FloatArray,
    target_edges: FloatArray,
    target_centres: FloatArray,
    *,
    polar: bool = False,
    periodic: bool = False,
    closes: bool = False,
) -> tuple[Any, str]:
    step = float(np.median(np.diff(edges)))
    target_step = float(np.median(np.diff(target_edges)))
    if len(edges) == len(target_edges) and np.abs(edges - target_edges).max() < 1e-3 * step:
        return sparse.identity(len(centres), format="csr"), "unchanged"
    turns = (-720.0, -360.0, 0.0, 360.0, 720.0) if periodic else (0.0,)
    if target_step >= step * (1 - 1e-3):
        shape = (len(target_centres), len(centres))
        matrix = sum(
            (_overlaps(edges + turn, target_edges, polar=polar, shape=shape) for turn in turns),
            start=sparse.csr_matrix(shape, dtype=np.float64),
        )
        return matrix.tocsr(), "averaged by area"
    return _linear(edges, centres, target_centres, periodic=periodic, closes=closes), (
        "interpolated bilinearly"
    )


def _overlaps(
    edges: FloatArray, target_edges: FloatArray, *, polar: bool, shape: tuple[int, int]
) -> Any:
    """Share of each target cell that lies in each source cell."""
    cuts = np.unique(np.concatenate([edges, target_edges]))
    middle = (cuts[1:] + cuts[:-1]) / 2
    source = np.searchsorted(edges, middle) - 1
    target = np.searchsorted(target_edges, middle) - 1
    inside = (source >= 0) & (source < shape[1]) & (target >= 0) & (target < shape[0])

    def size(values: FloatArray) -> FloatArray:
        return np.diff(np.sin(np.deg2rad(values)) if polar else values)

    share = size(cuts)[inside] / size(target_edges)[target[inside]]
    return sparse.csr_matrix((share, (target[inside], source[inside])), shape=shape)


def _linear(
    edges: FloatArray,
    centres: FloatArray,
    targets: FloatArray,
    *,
    periodic: bool,
    closes: bool,
) -> Any:
    """Linear interpolation between centres; beyond the last one, to the outer edge, its value."""
    start = edges[0] - ROUNDING
    places = start + np.mod(targets - start, 360.0) if periodic else targets
    inside = (places >= edges[0] - ROUNDING) & (places <= edges[-1] + ROUNDING)
    if closes:
        knots = np.concatenate([[centres[-1] - 360], centres, [centres[0] + 360]])
        index = np.concatenate([[len(centres) - 1], np.arange(len(centres)), [0]])
    else:
        knots, index = centres, np.arange(len(centres))
    if len(knots) == 1:
        below, way = np.zeros(len(places), int), np.zeros(len(places))
        above = below
    else:
        below = np.clip(np.searchsorted(knots, places, side="right") - 1, 0, len(knots) - 2)
        way = np.clip((places - knots[below]) / (knots[below + 1] - knots[below]), 0, 1)
        above = below + 1
    row = np.arange(len(targets))
    entries = np.concatenate([(1 - way)[inside], way[inside]])
    columns = np.concatenate([index[below][inside], index[above][inside]])
    matrix = sparse.csr_matrix(
        (entries, (np.concatenate([row[inside], row[inside]]), columns)),
        shape=(len(targets), len(centres)),
    )
    matrix.eliminate_zeros()
    return matrix


def _both(down: Any, plane: NDArray[Any], across: Any) -> FloatArray:
    return np.asarray((across @ (down @ plane.astype(np.float64)).T).T)
