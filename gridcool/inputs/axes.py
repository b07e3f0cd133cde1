"""Latitude and longitude as they lie in a file, brought to one order and to exact edges."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.errors import InputDataError
from gridcool.grid import grid_from_centres

FloatArray = NDArray[np.float64]

#: Centres nearer to each other than this share of a cell differ by rounding only.
JITTER = 1e-3
#: The same in degrees: what single precision does to a longitude near 360.
SINGLE = 2e-5
#: Bounds of neighbours that miss each other by less than this share of a cell still touch.
TOUCHING = 0.02


@dataclass(frozen=True, eq=False)
class Axis:
    """Cells along one axis.

    Attributes
    ----------
    centres : array, shape (n,)
        Latitudes from north to south, or longitudes from west to east without a jump.
    edges : array, shape (n + 1,)
        Edges of the cells, in the same order.
    reversed : bool
        Whether the file runs the other way.
    even : bool
        Whether the labels in the file are evenly spaced.
    notes : tuple of str
        What was done to the labels.
    """

    centres: FloatArray
    edges: FloatArray
    reversed: bool
    even: bool
    notes: tuple[str, ...] = ()

    def __len__(self) -> int:
        return len(self.centres)

    @property
    def step(self) -> float:
        """Usual size of a cell, degrees."""
        return float(np.median(np.abs(np.diff(self.edges))))

    @property
    def closes_circle(self) -> bool:
        """Whether the cells go all the way round (for longitudes)."""
        return bool(abs(self.edges[-1] - self.edges[0] - 360.0) < 1e-6)

    @property
    def by_corner(self) -> bool:
        """Whether the labels turned out to be edges instead of centres."""
        return any("edge" in note for note in self.notes)

    def in_file(self, cells: slice) -> slice:
        """Where a range of cells lies in the file, counted forwards."""
        if not self.reversed:
            return cells
        return slice(len(self) - cells.stop, len(self) - cells.start)


def latitude_axis(values: FloatArray, bounds: FloatArray | None = None) -> Axis:
    """Latitudes of a file, north first.

    Edges come from the file's bounds if there are any, else halfway between centres; they end at
    the poles. A global axis from -90 to one step below 90 (or its mirror image) can only be
    labelled by the edges of its cells; it is moved by half a cell.

    Parameters
    ----------
    values : array, shape (n,)
        Degrees north, in either order.
    bounds : array, shape (n, 2), or None

    Raises
    ------
    InputDataError
        If the values are no latitudes, are not in order, or a single one has no bounds.
    """
    if not np.isfinite(values).all():
        raise InputDataError("its latitudes have gaps; correct its coordinates.")
    if np.abs(values).max() > 90.0 + SINGLE:
        worst = values[np.argmax(np.abs(values))]
        raise InputDataError(f"it has a latitude of {worst:g} degrees; correct its coordinates.")
    # Counted southwards from here on, so that both axes increase.
    south, backwards = _increasing(-values, "latitude")
    even = _is_even(south)
    edges = _edges_from_bounds(south, bounds if bounds is None else -bounds, backwards)
    shift = _corner_shift(south) if even and edges is None else 0.0
    notes = ("latitudes label an edge of each cell; moved by half a cell",) if shift else ()
    south = south + shift
    if edges is None:
        edges = -_even_latitude_edges(-south) if even else _midpoints(south, "latitude")
    edges = np.clip(edges, -90.0, 90.0)
    centres, more = _centres(south, edges, "latitude")
    return Axis(-centres, -edges, backwards, even, notes + more)


def longitude_axis(
    values: FloatArray, bounds: FloatArray | None = None, *, by_corner: bool = False
) -> Axis:
    """Longitudes of a file, west first, counted on past 180 or 360 without a jump.

    Parameters
    ----------
    values : array, shape (n,)
        Degrees east, counted from anywhere, in either direction. A last meridian that repeats the
        first is left out.
    bounds : array, shape (n, 2), or None
    by_corner : bool
        Whether the latitudes of the file label edges; a global axis that starts at 0 or 180 then
        does so too.

    Raises
    ------
    InputDataError
        If the values are no longitudes, are not in order, or a single one has no bounds.
    """
    if not np.isfinite(values).all():
        raise InputDataError("its longitudes have gaps; correct its coordinates.")
    if np.abs(values).max() > 720.0:
        worst = values[np.argmax(np.abs(values))]
        raise InputDataError(f"it has a longitude of {worst:g} degrees; correct its coordinates.")
    east, backwards = _increasing(np.unwrap(values, period=360.0), "longitude")
    notes: tuple[str, ...] = ()
    even = _is_even(east)
    if len(east) > 2 and abs(east[-1] - east[0] - 360.0) < SINGLE:
        east, bounds = (east[1:], None) if backwards else (east[:-1], None)
        notes = ("the last meridian repeats the first and was left out",)
    edges = _edges_from_bounds(east, bounds, backwards)
    if edges is None:
        edges = _even_longitude_edges(east) if even else _midpoints(east, "longitude")
        start = east[0] / 180.0
        whole = abs(edges[-1] - edges[0] - 360.0) < 1e-6
        if by_corner and whole and abs(start - round(start)) < 1e-6:
            shift = (edges[1] - edges[0]) / 2
            east, edges = east + shift, edges + shift
            notes += ("longitudes label the western edge of each cell; moved by half a cell",)
    if edges[-1] - edges[0] > 360.0 + SINGLE:
        raise InputDataError("its longitudes go round more than once; correct its coordinates.")
    centres, more = _centres(east, edges, "longitude")
    return Axis(centres, edges, backwards, even, notes + more)


def _increasing(values: FloatArray, what: str) -> tuple[FloatArray, bool]:
    """The values in increasing order, and whether they had to be turned round."""
    backwards = len(values) > 1 and bool(values[1] < values[0])
    ordered = values[::-1] if backwards else values
    if (np.diff(ordered) <= 0).any():
        raise InputDataError(f"its {what}s are not in order; sort the file first.")
    return ordered, backwards


def _is_even(centres: FloatArray) -> bool:
    if len(centres) < 2:
        return True
    step = (centres[-1] - centres[0]) / (len(centres) - 1)
    return bool(np.abs(np.diff(centres) - step).max() <= JITTER * step + SINGLE)


def _corner_shift(centres: FloatArray) -> float:
    """Half a cell, if evenly spaced labels are edges from one pole to one step off the other."""
    if len(centres) < 3:
        return 0.0
    step = (centres[-1] - centres[0]) / (len(centres) - 1)
    if abs(step * len(centres) - 180.0) > JITTER * step + SINGLE:
        return 0.0
    if abs(centres[0] + 90.0) < SINGLE:
        return float(step / 2)
    return float(-step / 2) if abs(centres[-1] - 90.0) < SINGLE else 0.0


def _edges_from_bounds(
    centres: FloatArray, bounds: FloatArray | None, backwards: bool
) -> FloatArray | None:
    """Edges in increasing order; None if the bounds are absent or fit no cell of the axis."""
    if bounds is None or bounds.shape != (len(centres), 2) or not np.isfinite(bounds).all():
        return None
    pairs = np.sort(bounds[::-1] if backwards else bounds, axis=1)
    pairs = pairs + 360.0 * np.round((centres - pairs.mean(axis=1)) / 360.0)[:, None]
    width = pairs[:, 1] - pairs[:, 0]
    slack = JITTER * width + SINGLE
    fits = (pairs[:, 0] - slack <= centres) & (centres <= pairs[:, 1] + slack)
    if (width <= 0).any() or not fits.all():
        return None
    gaps = np.abs(pairs[1:, 0] - pairs[:-1, 1])
    if (gaps > TOUCHING * np.maximum(width[1:], width[:-1]) + SINGLE).any():
        raise InputDataError(
            "its cells do not touch each other (the bounds leave gaps or overlap); "
            "cut a connected part out of the full grid."
        )
    inner = (pairs[1:, 0] + pairs[:-1, 1]) / 2
    return np.concatenate([pairs[:1, 0], inner, pairs[-1:, 1]])


def _even_latitude_edges(latitudes: FloatArray) -> FloatArray:
    """Exact edges of evenly spaced latitudes, north first; a row on a pole is half a cell."""
    if len(latitudes) > 1:
        step = (latitudes[0] - latitudes[-1]) / (len(latitudes) - 1)
        if max(latitudes[0], -latitudes[-1]) + step / 2 <= 90.0 + SINGLE:
            return grid_from_centres(latitudes, np.array([0.5, 1.5])).latitude_edges
    return -_midpoints(-latitudes, "latitude")


def _even_longitude_edges(longitudes: FloatArray) -> FloatArray:
    """Exact edges of evenly spaced longitudes, in the turn they are counted in."""
    if len(longitudes) < 2:
        return _midpoints(longitudes, "longitude")
    edges = grid_from_centres(np.array([0.5, -0.5]), longitudes).longitude_edges
    return np.asarray(edges + 360.0 * np.round((longitudes[0] - edges[0]) / 360.0))


def _midpoints(centres: FloatArray, what: str) -> FloatArray:
    if len(centres) < 2:
        raise InputDataError(
            f"it has a single {what} and no bounds, so the size of its cell is unknown; "
            "add bounds or give a wider cut."
        )
    inner = (centres[1:] + centres[:-1]) / 2
    first = centres[0] - (inner[0] - centres[0])
    last = centres[-1] + (centres[-1] - inner[-1])
    return np.concatenate([[first], inner, [last]])


def _centres(
    labels: FloatArray, edges: FloatArray, what: str
) -> tuple[FloatArray, tuple[str, ...]]:
    """Centres free of rounding, and a note if the labels are edges.

    Where a label is the middle of its cell to rounding, the middle is exact; elsewhere (Gaussian
    rows, the half cells at the poles) the label stands.
    """
    middle, width = (edges[1:] + edges[:-1]) / 2, np.diff(edges)
    slack = JITTER * width + SINGLE
    at_edge = np.minimum(labels - edges[:-1], edges[1:] - labels) < slack
    if len(labels) > 2 and at_edge.all():
        return middle, (f"{what}s label an edge of each cell; their bounds are used",)
    return np.where(np.abs(labels - middle) < slack, middle, labels), ()
