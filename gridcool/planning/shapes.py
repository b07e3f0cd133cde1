"""Polygons in degrees: mended, followed across the antimeridian, and cut there.

Edges are straight in longitude and latitude, as RFC 7946 (GeoJSON) draws them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import affinity
from shapely.geometry.base import BaseGeometry

FloatArray = NDArray[np.floating]


@dataclass(frozen=True)
class Usable:
    """What could be made of a drawn geometry.

    Attributes
    ----------
    shape : shapely geometry
        Valid polygons within the globe; empty where no area was drawn.
    crossed : bool
        Whether an edge of more than half a turn was read as one across the antimeridian.
    mended : bool
        Whether an outline crossed or touched itself wrongly and was mended.
    """

    shape: BaseGeometry
    crossed: bool
    mended: bool


def usable(geometry: BaseGeometry | None) -> Usable:
    """Valid polygons within the globe, or nothing."""
    if geometry is None or geometry.is_empty:
        return Usable(shapely.Polygon(), crossed=False, mended=False)
    drawn = polygons(geometry)
    opened = [_unwrapped(each) for each in drawn]
    valid = [shapely.make_valid(each) for each in opened]
    whole = shapely.union_all([part for each in valid for part in polygons(each)])
    return Usable(
        within_globe(whole),
        crossed=any(crosses.any() for each in drawn for crosses in map(_crossings, _rings(each))),
        mended=not all(each.is_valid for each in opened),
    )


def polygons(geometry: BaseGeometry) -> list[Any]:
    """All polygons in a geometry of any kind."""
    if geometry.geom_type == "Polygon":
        return [geometry]
    return [polygon for part in getattr(geometry, "geoms", ()) for polygon in polygons(part)]


def _unwrapped(polygon: Any) -> Any:
    """The polygon with its rings continuous in longitude, past 180° if they go there."""
    shell, *inner = map(_unwrapped_ring, _rings(polygon))
    holes = []
    for hole in inner:
        turns = np.round((shell[:, 0].mean() - hole[:, 0].mean()) / 360)
        holes.append(hole + np.array([360.0 * turns, 0.0]))
    return shapely.Polygon(shell, holes)


def _rings(polygon: Any) -> list[FloatArray]:
    """Coordinates of the outer ring and of the holes."""
    return [shapely.get_coordinates(ring) for ring in (polygon.exterior, *polygon.interiors)]


def _crossings(ring: FloatArray) -> NDArray[np.bool_]:
    """Which steps of a ring go across 180°: those of more than half a turn.

    Steps from edge to edge of the map (exactly a whole turn, or along a pole) do not.
    """
    steps = np.abs(np.diff(ring[:, 0]))
    at_pole = np.abs(ring[:, 1]) > 89.99
    along_pole = at_pole[1:] & at_pole[:-1]
    return np.asarray((steps > 180) & (np.abs(steps - 360) > 1e-6) & ~along_pole)


def _unwrapped_ring(ring: FloatArray) -> FloatArray:
    """Follow a ring by its short steps, past 180° where it goes there.

    A ring that does not close has gone round a pole, and is closed along it.
    """
    longitude, latitude = ring[:, 0], ring[:, 1]
    crossing = _crossings(ring)
    if not crossing.any():
        return ring
    turning = np.where(crossing, np.sign(np.diff(longitude)), 0.0)
    turns = np.concatenate([[0.0], -np.cumsum(turning)])
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
