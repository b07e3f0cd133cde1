"""Polygons along the edges of cells, from numbered cells of a grid."""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray
from rasterio import Affine
from rasterio.features import shapes
from shapely.geometry.base import BaseGeometry

from gridcool.grid import Grid
from gridcool.planning.shapes import polygons, within_globe


def traced(numbers: NDArray[np.int32], grid: Grid) -> dict[int, BaseGeometry]:
    """Each number's cells as polygons in degrees, within 180°W to 180°E; 0 is nothing.

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
    for drawn, number in shapes(
        numbers, mask=numbers > 0, connectivity=4, transform=Affine(*grid.affine)
    ):
        polygon = shapely.geometry.shape(drawn)
        if not polygon.is_valid:  # a ring that meets itself in a corner, around a hole
            polygon = shapely.make_valid(polygon)
        found.setdefault(int(number), []).extend(polygons(polygon))
    return {
        number: within_globe(
            parts[0] if len(parts) == 1 else shapely.union_all(shapely.MultiPolygon(parts))
        )
        for number, parts in found.items()
    }
