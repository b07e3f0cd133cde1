"""Polygons as paths of an SVG picture, small enough to stand inside the page."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely

WIDTH = 800.0
MOST_POINTS = 15_000
SMALLEST = 0.4  # of a picture's unit: what is smaller is not drawn


@dataclass(frozen=True)
class Drawing:
    """Paths in the order of the polygons, and the picture's size."""

    paths: tuple[str, ...]
    width: int
    height: int


def drawing(shapes: Sequence[Any]) -> Drawing | None:
    """Polygons in degrees as paths; None if there is nothing to draw.

    Longitudes shrink with the cosine of the middle latitude. Outlines get coarser until the whole
    is small enough for a page.
    """
    present = [shape for shape in shapes if not shape.is_empty]
    if not present:
        return None
    west, south, east, north = shapely.total_bounds(present)
    squeeze = max(math.cos(math.radians((south + north) / 2)), 0.2)
    wide, high = max((east - west) * squeeze, 1e-6), max(north - south, 1e-6)
    scale = min(WIDTH / wide, 600.0 / high)

    def placed(degrees: Any) -> Any:
        return np.column_stack(
            [(degrees[:, 0] - west) * squeeze * scale, (north - degrees[:, 1]) * scale]
        )

    drawn = [shapely.transform(shape, placed) for shape in shapes]
    tolerance = 0.3
    simple = drawn
    while True:
        simple = [shapely.simplify(shape, tolerance) for shape in drawn]
        if sum(shapely.get_num_coordinates(shape) for shape in simple) <= MOST_POINTS:
            break
        tolerance *= 1.6
        if tolerance > 50:
            break
    paths = tuple(_path(shape) for shape in simple)
    return Drawing(paths, math.ceil(wide * scale), math.ceil(high * scale))


def _path(shape: Any) -> str:
    rings = []
    for polygon in getattr(shape, "geoms", [shape]):
        if polygon.geom_type != "Polygon" or polygon.is_empty:
            continue
        for ring in (polygon.exterior, *polygon.interiors):
            points = shapely.get_coordinates(ring)[:-1]
            if np.ptp(points, axis=0).max(initial=0.0) < SMALLEST:
                continue
            rings.append("M" + "L".join(f"{x:.1f} {y:.1f}" for x, y in points) + "Z")
    return "".join(rings)
