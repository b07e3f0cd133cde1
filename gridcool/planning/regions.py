"""Regions: named areas, boxes among them, and which share of each cell they cover.

Geometries are kept in degrees between 180°W and 180°E with straight edges in longitude and
latitude, as RFC 7946 (GeoJSON) draws them. What was drawn across the antimeridian is cut there.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass

import numpy as np
import shapely
from exactextract import exact_extract
from exactextract.raster import NumPyRasterSource
from numpy.typing import NDArray
from shapely import affinity
from shapely.geometry.base import BaseGeometry

from gridcool.grid import Bounds, Grid, zone_area
from gridcool.planning.shapes import polygons, within_globe

FloatArray = NDArray[np.floating]

WGS84 = "EPSG:4326"
SEGMENT_DEGREES = 0.05  # edges are bent into the equal-area plane in pieces of this length,
SEGMENT_SHARE = 1 / 64  # or of this share of the geometry's extent if that is less


@dataclass(frozen=True)
class Regions:
    """Named areas.

    Attributes
    ----------
    names : tuple of str
    geometries : tuple of shapely geometries
        Polygons in degrees, within 180°W to 180°E; empty where nothing usable was drawn.
    notes : tuple of str
        What was mended or assumed, as sentences.
    """

    names: tuple[str, ...]
    geometries: tuple[BaseGeometry, ...]
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class Cover:
    """The part of a grid that one region covers.

    Attributes
    ----------
    name : str
    area : float
        Area of the whole region on the WGS 84 ellipsoid, m2, also of what lies outside the grid.
    cells : array of int, shape (covered,)
        Row-major indices of the covered cells.
    areas : array, shape (covered,)
        Covered area of each of them, m2.
    """

    name: str
    area: float
    cells: NDArray[np.int64]
    areas: FloatArray


def box_regions(bounds: Bounds, size: float) -> Regions:
    """Boxes of some degrees over the bounds, named after their south-west corner.

    The corner is written like "05N 120E"; boxes start at multiples of the size.
    """
    pieces: dict[str, list[BaseGeometry]] = {}
    south = np.floor(bounds.south / size + 1e-9) * size
    west = np.floor(bounds.west / size + 1e-9) * size
    for y in np.arange(south, bounds.north - 1e-9, size):
        for x in np.arange(west, bounds.east - 1e-9, size):
            low, high = max(y, bounds.south), min(y + size, bounds.north)
            left, right = max(x, bounds.west), min(x + size, bounds.east)
            name = f"{_degrees(y, 'NS', 2)} {_degrees((x + 180) % 360 - 180, 'EW', 3)}"
            # A grid that starts inside a box meets its other part at the far end.
            box = within_globe(shapely.box(left, low, right, high))
            pieces.setdefault(name, []).append(box)
    return Regions(tuple(pieces), tuple(shapely.union_all(parts) for parts in pieces.values()))


def coverage(regions: Regions, grid: Grid) -> list[Cover]:
    """Exact coverage of the grid's cells by each region.

    Shares of cells are exact in degrees; the areas of a region's cells are then scaled together so
    that they add up to the region's area on the ellipsoid, which matters where coarse cells are
    cut by a border.

    Parameters
    ----------
    regions : Regions
    grid : Grid

    Returns
    -------
    list of Cover
        In the order of the regions.
    """
    drawn = [_on_grid(geometry, grid) for geometry in regions.geometries]
    present = [i for i, geometry in enumerate(drawn) if not geometry.is_empty]
    found: dict[int, tuple[NDArray[np.int64], FloatArray]] = {}
    if present:
        features = [
            {"type": "Feature", "id": i, "properties": {}, "geometry": drawn[i].__geo_interface__}
            for i in present
        ]
        bounds = grid.bounds
        raster = NumPyRasterSource(
            np.zeros(grid.shape, np.int8), bounds.west, bounds.south, bounds.east, bounds.north
        )
        with warnings.catch_warnings():
            warnings.filterwarnings("ignore", "Spatial reference system", RuntimeWarning)
            rows = exact_extract(raster, features, ["cell_id", "coverage"])
        for i, row in zip(present, rows, strict=True):
            cells = np.asarray(row["properties"]["cell_id"], np.int64)
            found[i] = (cells, np.asarray(row["properties"]["coverage"], float))
    covers = []
    row_areas = grid.row_areas()
    for i, (name, geometry) in enumerate(zip(regions.names, regions.geometries, strict=True)):
        cells, share = found.get(i, (np.zeros(0, np.int64), np.zeros(0)))
        areas = share * row_areas[cells // grid.columns]
        if areas.sum() > 0:
            areas *= ellipsoid_area(drawn[i]) / areas.sum()
        covers.append(Cover(name, ellipsoid_area(geometry), cells, areas))
    return covers


def ellipsoid_area(geometry: BaseGeometry) -> float:
    """Area on the WGS 84 ellipsoid of a geometry with straight edges in degrees, m2.

    The edges are followed in short pieces into the cylindrical equal-area plane whose coordinates
    are the share of the circle and the area between the equator and the parallel. It knows no seam
    in longitude, so a geometry may run past 180°.
    """
    if geometry.is_empty:
        return 0.0
    west, south, east, north = geometry.bounds
    piece = min(SEGMENT_DEGREES, SEGMENT_SHARE * max(east - west, north - south))
    fine = shapely.segmentize(geometry, piece)
    return float(shapely.transform(fine, _equal_area).area)


def _equal_area(degrees: NDArray[np.float64]) -> NDArray[np.float64]:
    longitude, latitude = degrees[:, 0], degrees[:, 1]
    return np.column_stack([longitude / 360.0, zone_area(np.zeros_like(latitude), latitude)])


def _on_grid(geometry: BaseGeometry, grid: Grid) -> BaseGeometry:
    """The part of a region on the grid, in the grid's own longitudes."""
    bounds = grid.bounds
    window = shapely.box(bounds.west, bounds.south, bounds.east, bounds.north)
    pieces = [
        polygon
        for turn in (0, 360)
        for polygon in polygons(
            shapely.intersection(affinity.translate(geometry, xoff=turn), window)
        )
    ]
    return shapely.union_all(pieces) if pieces else shapely.Polygon()


def _degrees(value: float, letters: str, digits: int) -> str:
    """Degrees with a letter for the hemisphere, like 05N or 112.5W."""
    size = f"{abs(value):g}"
    whole, point, rest = size.partition(".")
    return f"{whole.zfill(digits)}{point}{rest}{letters[int(value < 0)]}"
