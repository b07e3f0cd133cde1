"""Polygons along the edges of cells, from numbered cells of a grid."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray
from rasterio.features import shapes
from shapely.geometry.base import BaseGeometry

from gridcool.grid import Grid
from gridcool.planning.shapes import polygons

FloatArray = NDArray[np.floating]

ON_THE_MERIDIAN = 1e-9  # degrees between an edge of the grid and 180° that are rounding


@dataclass(frozen=True, eq=False)
class _Strip:
    """Neighbouring columns between 180°W and 180°E, and the longitudes of their edges."""

    columns: NDArray[np.intp]
    edges: FloatArray


def traced(numbers: NDArray[np.int32], grid: Grid) -> dict[int, BaseGeometry]:
    """Each number's cells as polygons in degrees, within 180°W to 180°E; 0 is nothing.

    Corners are traced by their row and column and only then put in their places, so that
    neighbours meet in the very same coordinates, and so that a polygon does not depend on where
    the grid begins.

    Parameters
    ----------
    numbers : array of int32, shape (rows, columns)
    grid : Grid

    Notes
    -----
    Cells belong together where they share an edge. Cells that meet in a corner only would make
    polygons that touch themselves, which the OGC's simple features do not allow.
    """
    found: dict[int, list[BaseGeometry]] = {}
    for strip in _strips(grid):
        for number, polygon in _outlines(numbers, strip, grid.latitude_edges):
            found.setdefault(number, []).append(polygon)
    return {
        number: parts[0] if len(parts) == 1 else shapely.MultiPolygon(parts)
        for number, parts in found.items()
    }


def _outlines(
    numbers: NDArray[np.int32], strip: _Strip, latitudes: FloatArray
) -> Iterator[tuple[int, BaseGeometry]]:
    """The polygons of a strip, each with its number."""
    whole = len(strip.columns) == numbers.shape[1] and strip.columns[0] == 0
    cells = numbers if whole else np.ascontiguousarray(numbers[:, strip.columns])

    def placed(corners: NDArray[np.float64]) -> NDArray[np.float64]:
        column, row = np.rint(corners).astype(np.intp).T
        return np.column_stack([strip.edges[column], latitudes[row]])

    for drawn, number in shapes(cells, mask=cells != 0, connectivity=4):
        outline = shapely.transform(shapely.geometry.shape(drawn), placed)
        # A ring that meets itself in a corner, around a hole, is not valid.
        valid = outline if outline.is_valid else shapely.make_valid(outline)
        yield from ((int(number), part) for part in polygons(valid))


def _strips(grid: Grid) -> Iterator[_Strip]:
    """The grid's columns from 180°W to 180°E; a column across 180° stands on both sides."""
    edges, columns = grid.longitude_edges, np.arange(grid.columns)
    if edges[-1] <= 180.0 + ON_THE_MERIDIAN:
        yield _Strip(columns, np.minimum(edges, 180.0))
        return
    end = int(np.searchsorted(edges, 180.0 - ON_THE_MERIDIAN))  # first edge at 180° or past it
    start = end if abs(edges[end] - 180.0) <= ON_THE_MERIDIAN else end - 1
    near = _Strip(columns[:end], np.append(edges[:end], 180.0))
    past = np.round(edges[start + 1 :] - 360.0, 12)
    far = _Strip(columns[start:], np.append(-180.0, past))
    if grid.is_periodic:
        joined = np.concatenate([far.edges[:-1], near.edges])
        yield _Strip(np.concatenate([far.columns, near.columns]), joined)
    else:
        yield from (near, far)
