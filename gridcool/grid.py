"""The target grid: evenly spaced cells in latitude and longitude, north up."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

# WGS 84 (EPSG:4326): equatorial radius in metres and flattening.
SEMI_MAJOR_AXIS = 6378137.0
FLATTENING = 1 / 298.257223563


@dataclass(frozen=True)
class Bounds:
    """Outer edges in degrees; ``east`` may pass 180 where the grid crosses the antimeridian."""

    west: float
    south: float
    east: float
    north: float


@dataclass(frozen=True)
class Grid:
    """Evenly spaced cells; the first row is the northernmost, the first column the westernmost.

    Attributes
    ----------
    west, north : float
        Outer edges of the first cell, degrees. ``west`` lies in [-180, 180).
    longitude_step, latitude_step : float
        Size of a cell in degrees, both positive.
    rows, columns : int
        Number of cells southwards and eastwards.
    """

    west: float
    north: float
    longitude_step: float
    latitude_step: float
    rows: int
    columns: int

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.rows, self.columns

    @property
    def bounds(self) -> Bounds:
        """Outer edges of the whole grid."""
        edges_lat, edges_lon = self.latitude_edges, self.longitude_edges
        return Bounds(float(edges_lon[0]), float(edges_lat[-1]), float(edges_lon[-1]), self.north)

    @property
    def is_periodic(self) -> bool:
        """Whether the columns close the circle."""
        return abs(self.columns * self.longitude_step - 360.0) < 1e-6

    @property
    def latitude_edges(self) -> NDArray[np.float64]:
        """Edges from north to south, ``rows + 1`` of them, degrees."""
        edges = _even_edges(self.north, -self.latitude_step, self.rows)
        return np.clip(edges, -90.0, 90.0)

    @property
    def longitude_edges(self) -> NDArray[np.float64]:
        """Edges from west to east, ``columns + 1`` of them, degrees, increasing."""
        return _even_edges(self.west, self.longitude_step, self.columns)

    @property
    def latitudes(self) -> NDArray[np.float64]:
        """Cell centres from north to south, degrees."""
        edges = self.latitude_edges
        return (edges[1:] + edges[:-1]) / 2

    @property
    def longitudes(self) -> NDArray[np.float64]:
        """Cell centres from west to east, degrees, increasing."""
        edges = self.longitude_edges
        return (edges[1:] + edges[:-1]) / 2

    @property
    def affine(self) -> tuple[float, float, float, float, float, float]:
        """Coefficients (a, b, c, d, e, f) of the map from (column, row) to (x, y) of corners."""
        return (self.longitude_step, 0.0, self.west, 0.0, -self.latitude_step, self.north)

    def row_areas(self) -> NDArray[np.float64]:
        """Area of one cell of each row on the WGS 84 ellipsoid, square metres, shape (rows,)."""
        return zone_area(self.latitude_edges[1:], self.latitude_edges[:-1]) * (
            self.longitude_step / 360.0
        )


def zone_area(south: NDArray[np.float64], north: NDArray[np.float64]) -> NDArray[np.float64]:
    """Area between two parallels of the WGS 84 ellipsoid, all the way round, square metres.

    Closed form from the authalic latitude (Snyder 1987, USGS Professional Paper 1395, eq. 3-12):
    A = π b² [ sin φ / (1 − e² sin² φ) + artanh(e sin φ) / e ] between the two latitudes.

    Parameters
    ----------
    south, north : array
        Latitudes in degrees.
    """
    eccentricity = np.sqrt(FLATTENING * (2 - FLATTENING))
    minor = SEMI_MAJOR_AXIS * (1 - FLATTENING)

    def primitive(latitude: NDArray[np.float64]) -> NDArray[np.float64]:
        s = np.sin(np.deg2rad(latitude))
        return np.asarray(
            s / (1 - (eccentricity * s) ** 2) + np.arctanh(eccentricity * s) / eccentricity
        )

    return np.asarray(np.pi * minor**2 * (primitive(north) - primitive(south)))


def grid_from_bounds(bounds: Bounds, resolution: float) -> Grid:
    """The grid of square cells of ``resolution`` degrees that covers ``bounds``.

    Cells are counted from the north-west corner; the last row and column may reach past the south
    and east edges by less than a cell. An east that is not east of west lies past 180.
    """
    width = bounds.east - bounds.west
    columns = max(1, _cells(width if width > 0 else width + 360.0, resolution))
    rows = max(1, _cells(bounds.north - bounds.south, resolution))
    return Grid(_wrap(bounds.west), bounds.north, resolution, resolution, rows, columns)


def grid_from_centres(latitudes: NDArray[np.float64], longitudes: NDArray[np.float64]) -> Grid:
    """The grid whose cell centres are given, in either order of latitude.

    Centres that went through single precision are snapped back to the even spacing they came from.

    Parameters
    ----------
    latitudes, longitudes : array, shape (rows,), (columns,)
        Centres in degrees; longitudes increase eastwards.

    Raises
    ------
    ValueError
        If the centres are not evenly spaced, there is only one of them, or a row is centred on a
        pole, where half of it would lie outside the globe.
    """
    lat_step, first_lat = _even_spacing(np.sort(np.asarray(latitudes, float)), "latitudes", 180.0)
    lon_step, first_lon = _even_spacing(np.asarray(longitudes, float), "longitudes", 360.0)
    south = _snap_edge(first_lat - lat_step / 2, lat_step)
    north = _snap_edge(south + lat_step * len(latitudes), lat_step)
    if north > 90.0 + 2e-5 or south < -90.0 - 2e-5:
        raise ValueError("the outermost row reaches past the pole")
    north = min(90.0, north)
    west = _snap_edge(first_lon - lon_step / 2, lon_step)
    return Grid(_wrap(west), north, lon_step, lat_step, len(latitudes), len(longitudes))


def _even_spacing(centres: NDArray[np.float64], what: str, full: float) -> tuple[float, float]:
    if len(centres) < 2:
        raise ValueError(f"a single {what[:-1]} does not tell the size of its cell")
    step = (centres[-1] - centres[0]) / (len(centres) - 1)
    if step <= 0 or np.abs(np.diff(centres) - step).max() > 1e-3 * step + 2e-5:
        raise ValueError(f"the {what} are not evenly spaced")
    if abs(step * len(centres) - full) < 1e-3:
        step = full / len(centres)
    else:
        per_degree = Fraction(1 / step).limit_denominator(12)
        if per_degree and abs(float(1 / per_degree) - step) * len(centres) < 2e-5:
            step = float(1 / per_degree)
    return float(step), float(centres[0])


def _snap_edge(edge: float, step: float) -> float:
    """The nearest multiple of half a step or of a thousandth degree, if it is really near."""
    for unit in (step / 2, 1e-3):
        snapped = round(edge / unit) * unit
        if abs(snapped - edge) < max(2e-5, 1e-4 * step):
            return round(snapped, 12)
    return edge


def _even_edges(start: float, step: float, cells: int) -> NDArray[np.float64]:
    return np.round(start + step * np.arange(cells + 1), 12)


def _cells(extent: float, resolution: float) -> int:
    return int(np.ceil(extent / resolution - 1e-6))


def _wrap(longitude: float) -> float:
    if -180.0 <= longitude < 180.0:
        return longitude
    return round((longitude + 180.0) % 360.0 - 180.0, 12)
