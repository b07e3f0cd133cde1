"""Named regions from files: polygons of any kind that GDAL reads, or a raster of codes."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import geopandas
import numpy as np
import pyogrio
import rasterio
import shapely
from pyproj.exceptions import ProjError
from shapely.geometry.base import BaseGeometry

from gridcool.errors import InputDataError, SettingsError
from gridcool.grid import Grid
from gridcool.planning.regions import WGS84, Regions
from gridcool.planning.shapes import usable
from gridcool.planning.tracing import traced

COMMON_NAMES = ("name", "NAME", "Name", "region", "district")
RASTER_SUFFIXES = (".tif", ".tiff")
PARQUET_SUFFIXES = (".parquet", ".geoparquet")
MOST_CODES = 10_000


def read_regions(path: Path, name: str | None, codes: Mapping[str, str] | None = None) -> Regions:
    """Read named polygons from any file that GDAL reads, or cells of a raster of codes.

    Rows of the same name become one region.

    Parameters
    ----------
    path : Path
        GeoPackage, GeoJSON, Shapefile, GeoParquet, TopoJSON and others; or a GeoTIFF of whole
        numbers.
    name : str or None
        Attribute with the names; None takes a usual one, or else numbers the rows.
    codes : mapping of str, optional
        Names of a raster's codes; without one, a code is called "region 1" and so on.

    Raises
    ------
    InputDataError
        If the file is missing, is not a polygon file, or holds no polygons.
    SettingsError
        If it has no such attribute.
    """
    if not path.exists():
        raise InputDataError(f"Region file {path} does not exist; check [regions] path.")
    if path.suffix.lower() in RASTER_SUFFIXES:
        return _of_codes(path, codes or {})
    try:
        if path.suffix.lower() in PARQUET_SUFFIXES:
            return _named(geopandas.read_parquet(path), path, name, [])
        layers = [(name, kind or "") for name, kind in pyogrio.list_layers(path)]
        polygonal = [name for name, kind in layers if "Polygon" in kind] or [n for n, _ in layers]
        frame = pyogrio.read_dataframe(path, layer=next(iter(polygonal), None))
    except (
        *(pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError),
        *(OSError, ValueError, ImportError),
    ) as problem:
        raise InputDataError(
            f"Region file {path} cannot be read as polygons ({problem}); "
            "give a GeoPackage, GeoJSON, Shapefile, GeoParquet or TopoJSON."
        ) from None
    if "geometry" not in frame:
        raise InputDataError(f"Region file {path} holds a table without geometries.")
    notes = []
    if len(polygonal) > 1:
        notes.append(f"{path.name} has several layers of polygons; {polygonal[0]} is used.")
    return _named(frame, path, name, notes)


def _named(frame: Any, path: Path, name: str | None, notes: list[str]) -> Regions:
    """The regions of a table of geometries in any reference system."""
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
        shape = usable(geometry)
        if shape.is_empty:
            notes.append(f"{label} in {path.name} has no area.")
        collected.setdefault(label, []).append(shape)
    if all(part.is_empty for parts in collected.values() for part in parts):
        raise InputDataError(f"Region file {path} holds no polygons.")
    merged = tuple(shapely.union_all(parts) for parts in collected.values())
    return Regions(tuple(collected), merged, tuple(notes))


def _of_codes(path: Path, codes: Mapping[str, str]) -> Regions:
    """Regions along the edges of a raster's cells, one for each whole number but 0 and nodata."""
    try:
        with rasterio.open(path) as file:
            values, crs, affine = file.read(1, masked=True), file.crs, file.transform
    except rasterio.errors.RasterioIOError as problem:
        raise InputDataError(f"Region file {path} cannot be read ({problem}).") from None
    if crs is None or not crs.is_geographic or affine.b or affine.d or affine.e >= 0:
        raise InputDataError(
            f"Region file {path} is not a north-up raster in degrees; bring it to EPSG:4326."
        )
    whole = np.ma.filled(values, 0)
    if not np.array_equal(whole, np.round(np.nan_to_num(whole))):
        raise InputDataError(
            f"Region file {path} holds other than whole numbers; give a raster of codes."
        )
    found, numbers = np.unique(whole, return_inverse=True)
    if len(found) > MOST_CODES:
        raise InputDataError(
            f"Region file {path} holds {len(found)} different codes; give a raster of regions."
        )
    grid = Grid(affine.c, affine.f, affine.a, -affine.e, *values.shape)
    ranks = numbers.reshape(values.shape).astype(np.int32) + 1
    outlines = traced(np.where(whole == 0, 0, ranks).astype(np.int32), grid)
    known = {str(int(found[rank - 1])): shape for rank, shape in sorted(outlines.items())}
    unused = [f"{path.name} has no cell of code {code}." for code in codes if code not in known]
    if not known:
        raise InputDataError(f"Region file {path} holds no code but 0 and nodata.")
    collected: dict[str, list[BaseGeometry]] = {}
    for code, outline in known.items():
        collected.setdefault(codes.get(code, f"region {code}"), []).append(outline)
    merged = tuple(shapely.union_all(parts) for parts in collected.values())
    return Regions(tuple(collected), merged, tuple(unused))


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
