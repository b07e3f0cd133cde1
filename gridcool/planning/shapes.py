"""Polygons in degrees: mended, followed across the antimeridian, and cut there.

Edges are straight in longitude and latitude, as RFC 7946 (GeoJSON) draws them.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import affinity
from shapely.geometry.base import BaseGeometry

FloatArray = NDArray[np.floating]


def usable(geometry: BaseGeometry | None) -> BaseGeometry:
    """Valid polygons within the globe, or nothing."""
    if geometry is None or geometry.is_empty:
        return shapely.Polygon()
    drawn = [shapely.make_valid(_unwrapped(each)) for each in polygons(geometry)]
    return within_globe(shapely.union_all([part for each in drawn for part in polygons(each)]))


def polygons(geometry: BaseGeometry) -> list[Any]:
    """All polygons in a geometry of any kind."""
    if geometry.geom_type == "Polygon":
        return [geometry]
    return [polygon for part in getattr(geometry, "geoms", ()) for polygon in polygons(part)]


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


def within_globe(geometry: BaseGeometry) -> BaseGeometry:
    """Cut at the antimeridian what runs past it and bring it back between 180°W and 180°E."""
    west, _, east, _ = geometry.bounds if not geometry.is_empty else (0.0, 0.0, 0.0, 0.0)
    if west >= -180 and east <= 180:
        return geometry
    first, last = int(np.floor((west + 180) / 360)), int(np.ceil((east - 180) / 360))
    pieces = []
    for turn in range(first, last + 1):
        window = shapely.box(-180 + 360 * turn, -90, 180 + 360 * turn, 90)
        piece = shapely.intersection(geometry, window)
        pieces.extend(polygons(affinity.translate(piece, xoff=-360 * turn)))
    return shapely.union_all(pieces)
