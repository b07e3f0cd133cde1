"""Named regions from files: polygons of any kind that GDAL reads, or a raster of codes."""

from __future__ import annotations

import difflib
import warnings
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import geopandas
import numpy as np
import pyogrio
import shapely
from pyproj.exceptions import ProjError
from shapely.geometry.base import BaseGeometry

from gridcool.errors import InputDataError, SettingsError
from gridcool.planning.region_codes import read_codes
from gridcool.planning.regions import WGS84, Regions
from gridcool.planning.shapes import usable

COMMON_NAMES = ("name", "NAME", "Name", "region", "district")
RASTER_SUFFIXES = (".tif", ".tiff")
PARQUET_SUFFIXES = (".parquet", ".geoparquet")
MOST_NAMED = 5  # regions listed in a note


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
        If it has no such attribute, or is not of the kind that the settings speak of.
    """
    if not path.exists():
        raise InputDataError(f"Region file {path} does not exist; check [regions] path.")
    if path.suffix.lower() in RASTER_SUFFIXES:
        if name is not None:
            raise SettingsError(
                f"[regions] name: {path} is a raster of codes without attributes; name its codes "
                "in [regions.codes]."
            )
        return read_codes(path, codes or {})
    if codes:
        raise SettingsError(
            f"[regions] codes: {path} is not a raster of codes; say with name which attribute "
            "holds the names."
        )
    frame, notes = _table(path)
    return _named(_in_degrees(frame, path, notes), path, name, notes)


def _table(path: Path) -> tuple[Any, list[str]]:
    """The file's rows with their geometries in a column "geometry", and what was assumed."""
    notes: list[str] = []
    try:
        if path.suffix.lower() in PARQUET_SUFFIXES:
            return _parquet_table(path, notes), notes
        layers = [(layer, kind or "") for layer, kind in pyogrio.list_layers(path)]
        polygonal = [each for each, kind in layers if "Polygon" in kind] or [n for n, _ in layers]
        frame = pyogrio.read_dataframe(path, layer=next(iter(polygonal), None))
    except (
        *(pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError),
        *(OSError, ValueError, ImportError),
    ) as problem:
        raise InputDataError(
            f"Region file {path} cannot be read as polygons ({_one_line(problem)}); "
            "give a GeoPackage, GeoJSON, Shapefile, GeoParquet or TopoJSON."
        ) from None
    if "geometry" not in frame:
        raise InputDataError(f"Region file {path} holds a table without geometries.")
    if len(polygonal) > 1:
        notes.append(f"{path.name} has several layers of polygons; {polygonal[0]} is used.")
    return frame, notes


def _parquet_table(path: Path, notes: list[str]) -> Any:
    with warnings.catch_warnings(record=True) as heard:
        warnings.simplefilter("always")
        frame = geopandas.read_parquet(path)
    for each in heard:
        if "spherical edges" in str(each.message):
            notes.append(
                f"{path.name} says that its edges follow great circles; they are taken as straight "
                "in degrees, which shows where edges are long."
            )
        else:
            warnings.warn_explicit(each.message, each.category, each.filename, each.lineno)
    return frame.rename_geometry("geometry") if frame.geometry.name != "geometry" else frame


def _one_line(problem: Exception) -> str:
    return " ".join(str(problem).split())


def _in_degrees(frame: Any, path: Path, notes: list[str]) -> Any:
    """The table in longitude and latitude of WGS 84."""
    if frame.crs is None:
        if np.nanmax(np.abs(frame.total_bounds), initial=0.0) > 360:
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
    # Rows without a geometry have no bounds.
    if np.nanmax(np.abs(frame.bounds[["miny", "maxy"]].to_numpy()), initial=0.0) > 90 + 1e-6:
        raise InputDataError(
            f"Region file {path} has latitudes beyond the poles; check its coordinate reference "
            "system and the order of its axes."
        )
    return frame


def _named(frame: Any, path: Path, name: str | None, notes: list[str]) -> Regions:
    """The regions of a table in degrees."""
    collected: dict[str, list[BaseGeometry]] = {}
    empty, crossed, mended = [], [], []
    for label, geometry in zip(_names(frame, path, name), frame.geometry, strict=True):
        found = usable(geometry)
        empty += [label] * found.shape.is_empty
        crossed += [label] * found.crossed
        mended += [label] * (found.mended and not found.shape.is_empty)
        collected.setdefault(label, []).append(found.shape)
    if len(empty) == len(frame):
        raise InputDataError(f"Region file {path} holds no polygons.")
    for labels, said in (
        (empty, "No area is drawn in {file} for {names}."),
        (crossed, "Edges of more than 180° in {file} are read as crossing 180° in {names}."),
        (mended, "Outlines that cross themselves in {file} are mended in {names}."),
    ):
        if labels:
            notes.append(said.format(file=path.name, names=_listed(labels)))
    merged = tuple(shapely.union_all(parts) for parts in collected.values())
    return Regions(tuple(collected), merged, tuple(notes))


def _listed(labels: Sequence[str]) -> str:
    """The first few labels, and how many there are besides."""
    first = ", ".join(labels[:MOST_NAMED])
    more = len(labels) - MOST_NAMED
    return f"{first} and {more} more" if more > 0 else first


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
