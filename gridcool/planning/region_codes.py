"""Regions from a raster of codes: the cells of each code, traced along their edges."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
import shapely
from numpy.typing import NDArray
from shapely.geometry.base import BaseGeometry

from gridcool.errors import InputDataError, SettingsError
from gridcool.grid import Grid
from gridcool.planning.regions import WGS84, Regions
from gridcool.planning.tracing import traced

MOST_CODES = 10_000
NEARLY = 0.01  # of a cell: how far a raster may miss the whole circle by rounding of its steps


def read_codes(path: Path, codes: Mapping[str, str]) -> Regions:
    """One region for each whole number in a north-up raster in degrees, along its cells.

    Missing cells are in no region; neither are those of code 0, unless ``codes`` names it.

    Parameters
    ----------
    path : Path
        A file that GDAL reads as a raster; of several bands the first is used.
    codes : mapping of str
        Names of the codes, which are written as text; others are called "region 7" and so on.
        Codes of the same name become one region.

    Raises
    ------
    InputDataError
        If the file cannot be read, is not in degrees, or does not hold codes.
    SettingsError
        If a key of ``codes`` is not a whole number.
    """
    named = {_number(key): name for key, name in codes.items()}
    try:
        with rasterio.open(path) as file:
            values = file.read(1, masked=True)
            grid, notes = _grid(file, path), _notes(file, path)
    except rasterio.errors.RasterioIOError as problem:
        raise InputDataError(f"Region file {path} cannot be read ({problem}).") from None
    found, numbers = _ranks(values, path, zero=0 in named)
    outlines = traced(numbers, grid)
    if not outlines:
        raise InputDataError(f"Region file {path} holds no code but 0 and missing cells.")
    collected: dict[str, list[BaseGeometry]] = {}
    for rank in sorted(outlines):
        code = int(found[rank - 1])
        collected.setdefault(named.get(code, f"region {code}"), []).append(outlines[rank])
    present = {int(code) for code in found}
    notes += [f"{path.name} has no cell of code {code}." for code in named if code not in present]
    merged = tuple(shapely.union_all(parts) for parts in collected.values())
    return Regions(tuple(collected), merged, tuple(notes))


def _number(key: str) -> int:
    try:
        return int(key)
    except ValueError:
        raise SettingsError(
            f"[regions] codes: {key!r} is not a whole number; write codes like 7 = 'Coast'."
        ) from None


def _grid(file: Any, path: Path) -> Grid:
    """The raster's cells; a whole circle, but for the rounding of its step, is a whole circle."""
    affine = file.transform
    upright = affine.a > 0 > affine.e and not (affine.b or affine.d)
    if file.crs is None or not file.crs.is_geographic or not upright:
        raise InputDataError(
            f"Region file {path} is not a north-up raster in degrees; bring it to EPSG:4326."
        )
    step, rows, columns = affine.a, file.height, file.width
    if abs(step * columns - 360) < NEARLY * step:
        step = 360 / columns
    west = (round(affine.c, 9) + 180) % 360 - 180  # rounded: 180°W by a hair is not 180°E
    grid = Grid(west, affine.f, step, -affine.e, rows, columns)
    south = affine.f + affine.e * rows
    # A row may be centred on a pole; the half of it that lies beyond is not there.
    beyond = max(affine.f - 90, -90 - south) > (0.5 + NEARLY) * grid.latitude_step
    if beyond or step * columns > 360 * (1 + 1e-9):
        raise InputDataError(
            f"Region file {path} reaches beyond a pole or more than once round the globe; "
            "check its geotransform."
        )
    return grid


def _notes(file: Any, path: Path) -> list[str]:
    notes = []
    if file.count > 1:
        notes.append(f"{path.name} has {file.count} bands; the first is used.")
    if file.crs != rasterio.CRS.from_string(WGS84):
        notes.append(f"{path.name} is in degrees of another datum; they are taken as WGS 84.")
    return notes


def _ranks(values: Any, path: Path, *, zero: bool) -> tuple[NDArray[Any], NDArray[np.int32]]:
    """The codes in rising order, and for each cell the place of its code, from 1; 0 is nothing."""
    given = np.ma.getdata(values)
    inside = ~np.ma.getmaskarray(values)
    if given.dtype.kind == "f":
        inside &= np.isfinite(given)
    if not zero:
        inside &= given != 0
    if not np.array_equal(given[inside], np.round(given[inside])):
        raise InputDataError(
            f"Region file {path} holds other than whole numbers; give a raster of codes."
        )
    found, places = np.unique(given[inside], return_inverse=True)
    if len(found) > MOST_CODES:
        raise InputDataError(
            f"Region file {path} holds {len(found)} different codes, more than {MOST_CODES}; "
            "give a raster of regions."
        )
    ranks = np.zeros(given.shape, np.int32)
    ranks[inside] = places + 1
    return found, ranks
