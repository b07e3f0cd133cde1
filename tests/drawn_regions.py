"""Regions drawn point by point, their files, and their areas by geodesics."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import geopandas as gpd
import shapely
from pyproj import Geod

from gridcool.grid import Bounds, Grid
from gridcool.planning.regions import (
    Cover,
    Regions,
    coverage,
)

GLOBE = Bounds(-180.0, -90.0, 180.0, 90.0)
GEOD = Geod(ellps="WGS84")
Ring = list[tuple[float, float]]


def geodesic_area(ring: Ring, *holes: Ring, once_round: bool = False, pieces: int = 5000) -> float:
    """A ring minus its holes, each followed in short pieces by geodesics, m2.

    A piece is the ring's extent over ``pieces``.

    A ring that goes ``once_round`` the globe has no edge back; it closes one turn further on.
    """
    end = (ring[0][0] + 360.0, ring[0][1]) if once_round else ring[0]
    line = shapely.LineString([*ring, end])
    west, south, east, north = line.bounds
    piece = max(east - west, north - south) / pieces
    longitude, latitude = shapely.get_coordinates(shapely.segmentize(line, piece)).T
    area = abs(float(GEOD.polygon_area_perimeter(longitude[:-1], latitude[:-1])[0]))
    return area - sum(geodesic_area(hole) for hole in holes)


def geojson(path: Path, *polygons: list[Ring]) -> Path:
    """A file that keeps the polygons exactly as drawn."""
    features = [
        {
            "type": "Feature",
            "properties": {},
            "geometry": {
                "type": "Polygon",
                "coordinates": [[*ring, ring[0]] for ring in polygon],
            },
        }
        for polygon in polygons
    ]
    path.write_text(json.dumps({"type": "FeatureCollection", "features": features}))
    return path


def stored(path: Path, names: list[Any], shapes: list[Any], crs: str = "EPSG:4326") -> Path:
    gpd.GeoDataFrame({"name": names}, geometry=shapes, crs=crs).to_file(path)
    return path


def only(regions: Regions, grid: Grid) -> Cover:
    (cover,) = coverage(regions, grid)
    return cover
