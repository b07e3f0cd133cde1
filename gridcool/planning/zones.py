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
Part = tuple[NDArray[np.int64], FloatArray]


def find_zones(
    suitable: NDArray[np.bool_], grid: Grid, *, minimum_area: float
) -> tuple[Regions, list[Cover]]:
    """Connected suitable cells of at least a given area.

    Cells belong together where they share an edge, across 180° too; cells that meet in a corner
    only do not, as there is no ground in a point to build on. The whole grid is looked at at once,
    so that zones do not depend on how it was computed, nor on where a periodic grid begins.

    Parameters
    ----------
    suitable : array of bool, shape (rows, columns)
    grid : Grid
    minimum_area : float
        m2; smaller groups are left out, and a note says how many.

    Returns
    -------
    regions : Regions
        Named "zone 1", "zone 2" and so on by falling area; of the same area to the square metre
        the northernmost, then the westernmost first.
    covers : list of Cover
        Whole cells, in the same order.

    Raises
    ------
    ValueError
        If the cells are not those of the grid.
    """
    if suitable.shape != grid.shape:
        raise ValueError(f"cells of shape {suitable.shape} are not on a grid of {grid.shape}")
    numbers, groups = _connected(suitable, periodic=grid.is_periodic)
    areas = np.bincount(groups, weights=_areas(numbers, len(groups), grid)).astype(float)
    kept = (areas > 0) & (areas >= minimum_area)
    renumbered = np.where(kept, np.cumsum(kept), 0).astype(np.int32)[groups]
    for row in numbers:  # row by row, for the memory of a large grid
        row[:] = renumbered[row]
    parts = _parts(numbers, int(kept.sum()), grid)
    outlines = traced(numbers, grid)
    order = _order(parts, grid)
    names = tuple(f"zone {place}" for place in range(1, len(order) + 1))
    covers = [
        Cover(name, float(parts[i][1].sum()), *parts[i])
        for name, i in zip(names, order, strict=True)
    ]
    note = _left_out(areas[(areas > 0) & ~kept], minimum_area)
    return Regions(names, tuple(outlines[i + 1] for i in order), note), covers


def _connected(
    suitable: NDArray[np.bool_], *, periodic: bool
) -> tuple[NDArray[np.int32], NDArray[np.intp]]:
    """Numbers of cells connected within the array, and to which group each number belongs.

    Groups differ from numbers where cells meet across the seam of a periodic grid.
    """
    numbers = np.empty(suitable.shape, np.int32)
    count = int(ndimage.label(suitable, output=numbers))
    if not periodic:
        return numbers, np.arange(count + 1)
    west, east = numbers[:, 0], numbers[:, -1]
    meet = (west > 0) & (east > 0)
    links = coo_array((np.ones(meet.sum()), (west[meet], east[meet])), shape=(count + 1, count + 1))
    return numbers, np.asarray(connected_components(links, directed=False)[1], np.intp)


def _areas(numbers: NDArray[np.int32], count: int, grid: Grid) -> FloatArray:
    """Area of the cells of each number, m2; nothing for number 0."""
    areas = np.zeros(count)
    for row, area in zip(numbers, grid.row_areas(), strict=True):
        present, cells = np.unique(row, return_counts=True)
        areas[present] += cells * area
    areas[0] = 0.0
    return areas


def _parts(numbers: NDArray[np.int32], count: int, grid: Grid) -> list[Part]:
    """Cells of the numbers 1 to ``count``, from north to south, and their areas."""
    if count == 0:
        return []
    flat = numbers.ravel()
    cells = np.flatnonzero(flat)
    cells = cells[np.argsort(flat[cells], kind="stable")]
    ends = np.cumsum(np.bincount(flat[cells], minlength=count + 1)[1:])[:-1]
    areas = grid.row_areas()[cells // grid.columns]
    return list(zip(np.split(cells, ends), np.split(areas, ends), strict=True))


def _order(parts: list[Part], grid: Grid) -> list[int]:
    """Places of the parts in the order in which zones are named."""
    eastward = np.argsort((grid.longitudes + 180.0) % 360.0, kind="stable")
    place = np.argsort(eastward)  # of each column, counted from 180°W

    def key(i: int) -> tuple[int, int, int]:
        cells, areas = parts[i]
        rows, columns = np.divmod(cells, grid.columns)
        return -round(float(areas.sum())), int(rows[0]), int(place[columns[rows == rows[0]]].min())

    return sorted(range(len(parts)), key=key)


def _left_out(areas: FloatArray, minimum_area: float) -> tuple[str, ...]:
    if not areas.size:
        return ()
    return (
        f"{areas.size} connected areas under {minimum_area / 1e6:g} km2 are not zones; "
        f"together they have {areas.sum() / 1e6:,.0f} km2.",
    )
