"""Candidate zones: cells that belong together and are large enough, as polygons."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from gridcool.grid import Grid
from gridcool.planning.regions import Cover, Regions
from gridcool.planning.tracing import traced

FloatArray = NDArray[np.floating]


def find_zones(
    suitable: NDArray[np.bool_], grid: Grid, *, minimum_area: float
) -> tuple[Regions, list[Cover]]:
    """Connected suitable cells of at least a given area.

    Cells belong together where they share an edge, across 180° too. The whole grid is looked at
    at once, so that zones do not depend on how it was computed.

    Parameters
    ----------
    suitable : array of bool, shape (rows, columns)
    grid : Grid
    minimum_area : float
        m2; smaller groups are left out.

    Returns
    -------
    regions : Regions
        Named "zone 1", "zone 2" and so on by falling area, the northernmost first among equals.
    covers : list of Cover
        Whole cells, in the same order.
    """
    numbers, count = _joined(*ndimage.label(suitable), periodic=grid.is_periodic)
    areas = np.zeros(count + 1)
    rows = grid.row_areas()
    for row in range(grid.rows):  # row by row, for the memory of a large grid
        areas += rows[row] * np.bincount(numbers[row], minlength=count + 1)
    areas[0] = 0.0
    kept = np.flatnonzero(areas >= max(minimum_area, 1e-9))
    # Numbers rise from the first row on; equal areas that differ by rounding count as equal.
    order = kept[np.lexsort((kept, -np.round(areas[kept])))]
    renumbered = np.zeros(count + 1, np.int32)
    renumbered[order] = np.arange(1, len(order) + 1)
    numbers = renumbered[numbers]
    outlines = traced(numbers, grid)
    names = tuple(f"zone {number}" for number in range(1, len(order) + 1))
    covers = _covers(numbers, names, grid)
    return Regions(names, tuple(outlines[number] for number in range(1, len(names) + 1))), covers


def _joined(
    numbers: NDArray[np.int32], count: int, *, periodic: bool
) -> tuple[NDArray[np.int32], int]:
    """Give groups that meet across the seam of a periodic grid one number."""
    if not periodic or count == 0:
        return numbers, count
    west, east = numbers[:, 0], numbers[:, -1]
    meet = (west > 0) & (east > 0)
    links = coo_array((np.ones(meet.sum()), (west[meet], east[meet])), shape=(count + 1, count + 1))
    groups, group = connected_components(links, directed=False)
    # Components are numbered in the order of their first member, so that 0 stays 0.
    return group.astype(np.int32)[numbers], groups - 1


def _covers(numbers: NDArray[np.int32], names: tuple[str, ...], grid: Grid) -> list[Cover]:
    flat = numbers.ravel()
    cells = np.flatnonzero(flat)
    cells = cells[np.argsort(flat[cells], kind="stable")]
    ends = np.cumsum(np.bincount(flat[cells], minlength=len(names) + 1)[1:])
    areas = grid.row_areas()[cells // grid.columns]
    covers = []
    for name, part in zip(names, np.split(np.arange(len(cells)), ends[:-1]), strict=False):
        covers.append(Cover(name, float(areas[part].sum()), cells[part], areas[part]))
    return covers
