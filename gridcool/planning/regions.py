"""Regions: named areas from a polygon file or boxes, and which share of each cell they cover.

Geometries are kept in degrees between 180°W and 180°E with straight edges in longitude and
latitude, as RFC 7946 (GeoJSON) draws them. What was drawn across the antimeridian is cut there.
"""

from __future__ import annotations

import difflib
import warnings
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pyogrio
import shapely
from exactextract import exact_extract
from exactextract.raster import NumPyRasterSource
from numpy.typing import NDArray
from pyproj.exceptions import ProjError
from shapely import affinity
from shapely.geometry.base import BaseGeometry

from gridcool.errors import InputDataError, SettingsError
from gridcool.grid import Bounds, Grid, zone_area

FloatArray = NDArray[np.floating]

WGS84 = "EPSG:4326"
SEGMENT_DEGREES = 0.05  # edges are bent into the equal-area plane in pieces of this length,
SEGMENT_SHARE = 1 / 64  # or of this share of the geometry's extent if that is less
COMMON_NAMES = ("name", "NAME", "Name", "region", "district")


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


def read_regions(path: Path, name: str | None) -> Regions:
    """Read named polygons from any file that GDAL reads.

    Rows of the same name become one region.

    Parameters
    ----------
    path : Path
    name : str or None
        Attribute with the names; None takes a usual one, or else numbers the rows.

    Raises
    ------
    InputDataError
        If the file is missing, is not a polygon file, or holds no polygons.
    SettingsError
        If it has no such attribute.
    """
    if not path.exists():
        raise InputDataError(f"Region file {path} does not exist; check [regions] path.")
    try:
        layers = [(name, kind or "") for name, kind in pyogrio.list_layers(path)]
        polygonal = [name for name, kind in layers if "Polygon" in kind] or [n for n, _ in layers]
        frame = pyogrio.read_dataframe(path, layer=next(iter(polygonal), None))
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError) as problem:
        raise InputDataError(
            f"Region file {path} cannot be read as polygons ({problem}); "
            "give a GeoPackage, GeoJSON or Shapefile."
        ) from None
    if "geometry" not in frame:
        raise InputDataError(f"Region file {path} holds a table without geometries.")
    notes = []
    if len(polygonal) > 1:
        notes.append(f"{path.name} has several layers of polygons; {polygonal[0]} is used.")
    if frame.crs is None:
        if np.abs(frame.total_bounds).max() > 360:
            raise InputDataError(
                f"Region file {path} states no coordinate reference system and is not in degrees; "
                "save it with one."
            )
        notes.append(f"{path.name} states no coordinate reference system; degrees are assumed.")
        frame = frame.set_crs(WGS84)
    try:
        frame = frame.to_crs(WGS84)
    except ProjError as problem:
        raise InputDataError(
            f"Region file {path} cannot be brought to WGS 84: {problem}."
        ) from None
    if np.abs(frame.bounds[["miny", "maxy"]].to_numpy()).max(initial=0.0) > 90 + 1e-6:
        raise InputDataError(
            f"Region file {path} has latitudes beyond the poles; check its coordinate reference "
            "system and the order of its axes."
        )
    names = _names(frame, path, name)
    collected: dict[str, list[BaseGeometry]] = {}
    for label, geometry in zip(names, frame.geometry, strict=True):
        usable = _usable(geometry)
        if usable.is_empty:
            notes.append(f"{label} in {path.name} has no area.")
        collected.setdefault(label, []).append(usable)
    if all(part.is_empty for parts in collected.values() for part in parts):
        raise InputDataError(f"Region file {path} holds no polygons.")
    merged = tuple(shapely.union_all(parts) for parts in collected.values())
    return Regions(tuple(collected), merged, tuple(notes))


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
            box = _within_globe(shapely.box(left, low, right, high))
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


def _names(frame: Any, path: Path, name: str | None) -> list[str]:
    attributes = [column for column in frame.columns if column != "geometry"]
    if name is not None and name not in attributes:
        near = difflib.get_close_matches(name, attributes, n=1, cutoff=0.5)
        hint = f"did you mean {near[0]}?" if near else f"it has {', '.join(attributes) or 'none'}."
        raise SettingsError(f"[regions] name: {path} has no attribute {name}; {hint}")
    chosen = name or next((each for each in COMMON_NAMES if each in attributes), None)
    if chosen is None:
        return [f"Region {number}" for number in range(1, len(frame) + 1)]
    return [
        f"Unnamed {number}" if value is None or value != value else str(value)
        for number, value in enumerate(frame[chosen], start=1)
    ]


def _usable(geometry: BaseGeometry | None) -> BaseGeometry:
    """Valid polygons within the globe, or nothing."""
    if geometry is None or geometry.is_empty:
        return shapely.Polygon()
    drawn = [shapely.make_valid(_unwrapped(polygon)) for polygon in _polygons(geometry)]
    return _within_globe(shapely.union_all([part for each in drawn for part in _polygons(each)]))


def _polygons(geometry: BaseGeometry) -> list[Any]:
    """All polygons in a geometry of any kind."""
    if geometry.geom_type == "Polygon":
        return [geometry]
    return [polygon for part in getattr(geometry, "geoms", ()) for polygon in _polygons(part)]


def _unwrapped(polygon: Any) -> Any:
    """The polygon with its rings continuous in longitude, past 180° if they go there."""
    shell = _unwrapped_ring(shapely.get_coordinates(polygon.exterior))
    holes = []
    for ring in polygon.interiors:
        hole = _unwrapped_ring(shapely.get_coordinates(ring))
        turns = np.round((shell[:, 0].mean() - hole[:, 0].mean()) / 360)
        holes.append(hole + np.array([360.0 * turns, 0.0]))
    return shapely.Polygon(shell, holes)


def _unwrapped_ring(ring: FloatArray) -> FloatArray:
    """Follow a ring by its short steps; a step of more than half a turn went across 180°.

    Steps from edge to edge of the map (exactly a whole turn, or along a pole) stay as drawn. A ring
    that does not close has gone round a pole, and is closed along it.
    """
    longitude, latitude = ring[:, 0], ring[:, 1]
    steps = np.diff(longitude)
    along_pole = (np.abs(latitude[1:]) > 89.99) & (np.abs(latitude[:-1]) > 89.99)
    crossing = (np.abs(steps) > 180) & (np.abs(np.abs(steps) - 360) > 1e-6) & ~along_pole
    if not crossing.any():
        return ring
    turns = np.concatenate([[0.0], -np.cumsum(np.where(crossing, np.sign(steps), 0.0))])
    opened = np.column_stack([longitude + 360 * turns, latitude])
    if turns[-1] == 0:
        return opened
    pole = np.copysign(90.0, latitude.mean())
    ends = [[opened[-1, 0], pole], [opened[0, 0], pole], opened[0].tolist()]
    return np.concatenate([opened, ends])


def _within_globe(geometry: BaseGeometry) -> BaseGeometry:
    """Cut at the antimeridian what runs past it and bring it back between 180°W and 180°E."""
    west, _, east, _ = geometry.bounds if not geometry.is_empty else (0.0, 0.0, 0.0, 0.0)
    if west >= -180 and east <= 180:
        return geometry
    first, last = int(np.floor((west + 180) / 360)), int(np.ceil((east - 180) / 360))
    pieces = []
    for turn in range(first, last + 1):
        window = shapely.box(-180 + 360 * turn, -90, 180 + 360 * turn, 90)
        piece = shapely.intersection(geometry, window)
        pieces.extend(_polygons(affinity.translate(piece, xoff=-360 * turn)))
    return shapely.union_all(pieces)


def _on_grid(geometry: BaseGeometry, grid: Grid) -> BaseGeometry:
    """The part of a region on the grid, in the grid's own longitudes."""
    bounds = grid.bounds
    window = shapely.box(bounds.west, bounds.south, bounds.east, bounds.north)
    pieces = [
        polygon
        for turn in (0, 360)
        for polygon in _polygons(
            shapely.intersection(affinity.translate(geometry, xoff=turn), window)
        )
    ]
    return shapely.union_all(pieces) if pieces else shapely.Polygon()


def _degrees(value: float, letters: str, digits: int) -> str:
    """Degrees with a letter for the hemisphere, like 05N or 112.5W."""
    size = f"{abs(value):g}"
    whole, point, rest = size.partition(".")
    return f"{whole.zfill(digits)}{point}{rest}{letters[int(value < 0)]}"
