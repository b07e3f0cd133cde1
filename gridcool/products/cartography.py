"""Cartography: projections, coast, outlines, scale bar."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from importlib.resources import as_file, files
from typing import Any

import cartopy.crs as ccrs
import numpy as np
import pyogrio
import shapely
from matplotlib.patheffects import withStroke

from gridcool.grid import Bounds

WIDE = 250.0  # degrees of longitude from which on a map shows the globe
INK = "#222222"
DEGREES = ccrs.PlateCarree()


@dataclass(frozen=True, eq=False)
class Surroundings:
    """What all maps of a product show besides their layer.

    Attributes
    ----------
    outlines : sequence of shapely geometries
        Regions, degrees.
    numbers : sequence of (str, float, float)
        Labels with their longitude and latitude, such as the ranks of the first regions.
    coast : bool
        Whether to draw the Earth's coastlines.
    """

    outlines: Sequence[Any] = ()
    numbers: Sequence[tuple[str, float, float]] = ()
    coast: bool = True


def projection(bounds: Bounds) -> Any:
    """An equal-area projection: of the globe, or around the middle of a region."""
    middle = (bounds.west + bounds.east) / 2
    if bounds.east - bounds.west >= WIDE:
        return ccrs.EqualEarth(central_longitude=round(middle) if abs(middle) > 1 else 0)
    latitude = (bounds.south + bounds.north) / 2
    return ccrs.LambertAzimuthalEqualArea(central_longitude=middle, central_latitude=latitude)


def size(bounds: Bounds) -> tuple[float, float]:
    """Inches: about the shape of the place, with room for title and legend."""
    if bounds.east - bounds.west >= WIDE:
        return 9.5, 5.9
    return 7.5, 6.3 * _aspect(bounds) + 1.5


def panel_size(bounds: Bounds, rows: int, columns: int) -> tuple[float, float]:
    """Inches of a sheet of several small maps, with their names, a title and a legend."""
    width = 11.0 if columns > 2 else 9.5
    return width, rows * (width / columns * _aspect(bounds) + 0.25) + 1.4


def _aspect(bounds: Bounds) -> float:
    """Height over width on the map."""
    if bounds.east - bounds.west >= WIDE:
        return 0.49  # of the equal-area globe
    middle = np.deg2rad((bounds.south + bounds.north) / 2)
    wide = (bounds.east - bounds.west) * np.cos(middle)
    return float(np.clip((bounds.north - bounds.south) / max(wide, 1e-9), 0.4, 1.5))


def surround(axes: Any, bounds: Bounds, around: Surroundings) -> None:
    """Draw what every map of a product shows, and set its extent."""
    _draw_lines(axes, bounds, around)
    box = {"boxstyle": "circle,pad=0.25", "facecolor": "white", "edgecolor": INK, "linewidth": 0.6}
    for text, longitude, latitude in around.numbers:
        axes.text(
            longitude,
            latitude,
            text,
            transform=DEGREES,
            ha="center",
            va="center",
            fontsize=7,
            bbox=box,
            clip_on=True,
        )
    globe = bounds.east - bounds.west >= WIDE
    if globe:
        axes.set_global()
    else:
        axes.set_extent([bounds.west, bounds.east, bounds.south, bounds.north], crs=DEGREES)
        _scale_bar(axes)
    lines = axes.gridlines(draw_labels=True, linewidth=0.3, color="#888888", alpha=0.6)
    lines.top_labels = lines.right_labels = False
    lines.xlabel_style = lines.ylabel_style = {"size": 7, "color": "#555555"}
    if globe:
        lines.xlabel_style = {"size": 0.1, "color": "none"}  # along a curved edge they collide


def surround_panel(axes: Any, bounds: Bounds, around: Surroundings) -> None:
    """Draw what a small map has room for, coast and outlines, and set its extent."""
    _draw_lines(axes, bounds, around)
    if bounds.east - bounds.west >= WIDE:
        axes.set_global()
    else:
        axes.set_extent([bounds.west, bounds.east, bounds.south, bounds.north], crs=DEGREES)


def _draw_lines(axes: Any, bounds: Bounds, around: Surroundings) -> None:
    if around.coast:
        axes.add_geometries(
            _coast_within(bounds), crs=DEGREES, facecolor="none", edgecolor=INK, linewidth=0.5
        )
    shapes = [shape for shape in around.outlines if not shape.is_empty]
    if shapes:
        axes.add_geometries(
            shapes, crs=DEGREES, facecolor="none", edgecolor=INK, linewidth=0.8, alpha=0.8
        )


def _scale_bar(axes: Any) -> None:
    """A bar of a round length in kilometres; the projection's units are metres."""
    west, east = axes.get_xlim()
    south, north = axes.get_ylim()
    room = (east - west) / 4000  # a quarter of the width, km
    power = 10.0 ** np.floor(np.log10(room))
    length = power * max(step for step in (1, 2, 5) if step * power <= room)
    right, base = east - 0.04 * (east - west), south + 0.035 * (north - south)
    left = right - 1000 * length
    halo = [withStroke(linewidth=3, foreground="white")]
    axes.plot(
        [left, right],
        [base, base],
        color=INK,
        linewidth=2.5,
        solid_capstyle="butt",
        path_effects=[withStroke(linewidth=4.5, foreground="white")],
    )
    axes.text(
        (left + right) / 2,
        base + 0.012 * (north - south),
        f"{length:g} km",
        ha="center",
        va="bottom",
        fontsize=8,
        path_effects=halo,
    )


def _coast_within(bounds: Bounds) -> list[Any]:
    """The coast inside the bounds and a little beyond, no finer than can be seen."""
    globe = bounds.east - bounds.west >= WIDE
    # Where the globe is cut open, a line along the cut would run across the whole map.
    margin = -0.01 if globe else 0.1 * (bounds.east - bounds.west)
    found = []
    for turn in (-360, 0, 360):  # bounds may run past 180
        lines = shapely.clip_by_rect(
            coastline(),
            bounds.west - turn - margin,
            max(bounds.south - margin, -90.0),
            bounds.east - turn + margin,
            bounds.north + margin,
        )
        tolerance = (bounds.east - bounds.west) / 1500
        lines = shapely.simplify(lines[~shapely.is_empty(lines)], tolerance)
        found += list(shapely.transform(lines, lambda xy, t=turn: xy + np.array([t, 0.0])))
    return found


@cache
def coastline() -> Any:
    """The Earth's coasts at 1:50 million, an array of lines in degrees."""
    with as_file(files("gridcool") / "products" / "coastline.json") as path:
        land = pyogrio.read_dataframe(path)
    rings = shapely.get_rings(shapely.get_parts(land.geometry.to_numpy()))
    pieces = []
    for ring in rings:
        points = shapely.get_coordinates(ring)
        # Rings jump from 180 to -180 where land lies across: no coast runs along there.
        jumps = np.flatnonzero(np.abs(np.diff(points[:, 0])) > 180) + 1
        pieces += [part for part in np.split(points, jumps) if len(part) > 1]
    return np.array([shapely.LineString(part) for part in pieces])
