"""The grid: areas on the ellipsoid, and centres of files brought back to exact edges."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pyproj import Geod

from gridcool.grid import (
    FLATTENING,
    SEMI_MAJOR_AXIS,
    Bounds,
    Grid,
    grid_from_bounds,
    grid_from_centres,
    zone_area,
)

GLOBE = Bounds(-180.0, -90.0, 180.0, 90.0)
# Surface of the WGS 84 ellipsoid (m2) and the radius (m) of the sphere of the same surface, as
# geodetic libraries publish them.
SURFACE = 510_065_621_724_079.0
AUTHALIC_RADIUS = 6_371_007.1809
# Cells of one degree, from latitude L to L + 1, km2: computed with pyproj.Geod along parallels of
# 2000 points, which the closed form reproduces to the last digit.
ONE_DEGREE = {0: 12308.4639, 30: 10642.3934, 45: 8686.4950, 60: 6123.1409, 89: 108.8667}
SPHERE_PERCENT = {0: 0.449, 30: 0.103, 45: -0.234, 60: -0.567, 89: -0.891}


def area(south: float, north: float) -> float:
    return float(zone_area(np.array([south]), np.array([north]))[0])


def cell_along_parallels(south: float, north: float, points: int) -> float:
    """Area of a one degree wide cell as a polygon whose parallels have so many points, m2."""
    east = np.linspace(0, 1, points)
    longitude = np.concatenate([east, east[::-1]])
    latitude = np.concatenate([np.full(points, south), np.full(points, north)])
    return float(Geod(ellps="WGS84").polygon_area_perimeter(longitude, latitude)[0])


def test_whole_ellipsoid_and_its_authalic_radius() -> None:
    assert area(-90, 90) == pytest.approx(SURFACE, rel=1e-12)
    assert np.sqrt(area(-90, 90) / (4 * np.pi)) == pytest.approx(AUTHALIC_RADIUS, abs=1e-4)
    # A sphere of the equatorial radius would be 0.22 % too large.
    assert 4 * np.pi * SEMI_MAJOR_AXIS**2 > 1.002 * SURFACE


@pytest.mark.parametrize("south", ONE_DEGREE)
def test_one_degree_cells_against_polygons_along_parallels(south: int) -> None:
    exact = area(south, south + 1) / 360
    assert exact / 1e6 == pytest.approx(ONE_DEGREE[south], abs=1e-4)
    assert exact == pytest.approx(cell_along_parallels(south, south + 1, 2000), rel=1e-8)
    # Four corners joined by geodesics are another figure.
    assert cell_along_parallels(south, south + 1, 2) != pytest.approx(exact, rel=1e-6)


@pytest.mark.parametrize("south", SPHERE_PERCENT)
def test_sphere_of_equal_surface_is_wrong_by_known_amounts(south: int) -> None:
    sines = np.sin(np.deg2rad([south, south + 1]))
    sphere = AUTHALIC_RADIUS**2 * np.deg2rad(1) * (sines[1] - sines[0])
    percent = 100 * (sphere / (area(south, south + 1) / 360) - 1)
    assert percent == pytest.approx(SPHERE_PERCENT[south], abs=6e-4)


@pytest.mark.parametrize("resolution", [0.05, 0.25, 1.0, 2.5])
def test_rows_add_up_to_the_ellipsoid(resolution: float) -> None:
    grid = grid_from_bounds(GLOBE, resolution)
    assert (grid.row_areas() > 0).all()
    assert grid.row_areas().sum() * grid.columns == pytest.approx(SURFACE, rel=1e-12)


@given(st.lists(st.floats(-90, 90), min_size=3, max_size=6))
def test_zones_are_additive_and_symmetric(latitudes: list[float]) -> None:
    edges = np.sort(np.array(latitudes))
    parts = zone_area(edges[:-1], edges[1:])
    assert (parts >= 0).all()
    assert parts.sum() == pytest.approx(area(edges[0], edges[-1]), rel=1e-9, abs=1e-2)
    assert zone_area(-edges[1:], -edges[:-1]) == pytest.approx(parts, rel=1e-12)


def centres(step: float) -> tuple[np.ndarray, np.ndarray]:
    rows, columns = round(180 / step), round(360 / step)
    return -90 + step * (np.arange(rows) + 0.5), -180 + step * (np.arange(columns) + 0.5)


@pytest.mark.parametrize("step", [0.05, 0.1, 0.25, 1 / 3, 1 / 12, 1.875, 2.5])
def test_single_precision_centres_give_exact_edges(step: float) -> None:
    latitudes, longitudes = (axis.astype(np.float32) for axis in centres(step))
    grid = grid_from_centres(latitudes, longitudes)
    assert grid.bounds == GLOBE
    assert grid.is_periodic
    assert grid.latitude_edges[0] == 90
    assert grid.latitude_edges[-1] == -90
    assert grid == grid_from_bounds(GLOBE, step)


def test_either_order_of_latitude_is_the_same_grid() -> None:
    latitudes, longitudes = centres(1.0)
    grid = grid_from_centres(latitudes, longitudes)
    assert grid == grid_from_centres(latitudes[::-1], longitudes)
    assert grid.latitudes[0] == 89.5
    assert (np.diff(grid.latitudes) < 0).all()


@pytest.mark.parametrize("dtype", [np.float64, np.float32])
def test_step_of_five_kilometres_on_the_equator(dtype: type) -> None:
    """0.0449157642° is 5 km there; no fraction of a degree, so the step must be kept."""
    step = 0.0449157642
    latitudes = (20 - step * (np.arange(400) + 0.5)).astype(dtype)
    longitudes = (100 + step * (np.arange(300) + 0.5)).astype(dtype)
    grid = grid_from_centres(latitudes, longitudes)
    assert (grid.west, grid.north, grid.shape) == (100.0, 20.0, (400, 300))
    near = 1e-5 if dtype is np.float32 else 1e-11
    assert grid.latitudes == pytest.approx(latitudes, abs=near)
    assert grid.longitudes == pytest.approx(longitudes, abs=near)
    assert not grid.is_periodic


def test_grid_across_the_antimeridian_counts_on() -> None:
    grid = grid_from_centres(np.array([0.5, -0.5]), np.arange(170.5, 190))
    assert grid == Grid(170.0, 1.0, 1.0, 1.0, 2, 20)
    assert grid.bounds == Bounds(170.0, -1.0, 190.0, 1.0)
    assert grid.longitudes[-1] == 189.5
    # Either way of writing the eastern edge is the same grid.
    for east in (190.0, -170.0):
        assert grid_from_bounds(Bounds(170.0, -1.0, east, 1.0), 1.0) == grid


def test_longitudes_from_0_to_360_start_at_0() -> None:
    grid = grid_from_centres(centres(1.0)[0], np.arange(0.5, 360))
    assert (grid.west, grid.bounds.east, grid.is_periodic) == (0.0, 360.0, True)
    assert grid_from_centres(centres(1.0)[0], np.arange(200.1, 210)).west == -160.4


@pytest.mark.parametrize(
    ("latitudes", "longitudes", "message"),
    [
        ([0.0, 1.0, 2.2], [0.0, 1.0], "latitudes are not evenly spaced"),
        ([0.0, 1.0], [0.0, 1.0, 2.02], "longitudes are not evenly spaced"),
        ([0.0, 1.0], [2.0, 1.0], "longitudes are not evenly spaced"),
        ([0.0, 0.0], [0.0, 1.0], "latitudes are not evenly spaced"),
        ([0.0], [0.0, 1.0], "a single latitude"),
        ([0.0, 1.0], [0.0], "a single longitude"),
        (np.linspace(-90, 90, 721), [0.0, 1.0], "past the pole"),
    ],
)
def test_centres_that_make_no_grid_are_refused(
    latitudes: list[float], longitudes: list[float], message: str
) -> None:
    with pytest.raises(ValueError, match=message):
        grid_from_centres(np.array(latitudes), np.array(longitudes))


@st.composite
def grids(draw: st.DrawFn) -> Grid:
    """Grids whose step is a simple fraction of a degree and whose edges lie on its multiples."""
    steps = [
        draw(st.integers(1, 12)) / draw(st.integers(4, 120)) for _axis in ("longitude", "latitude")
    ]
    most_columns, most_rows = (
        int(full / step + 1e-9) for full, step in zip((360, 180), steps, strict=True)
    )
    columns = draw(st.integers(2, min(most_columns, 500)))
    rows = draw(st.integers(2, min(most_rows, 500)))
    half = most_rows / 2
    north = draw(st.integers(int(np.ceil(rows - half)), int(half)))
    west = draw(st.integers(-int(180 / steps[0] + 1e-9), int(180 / steps[0] - 1e-9) - 1))
    return Grid(
        round(west * steps[0], 12), round(north * steps[1], 12), steps[0], steps[1], rows, columns
    )


@given(grids(), st.booleans())
def test_a_grid_comes_back_from_its_own_centres(grid: Grid, single: bool) -> None:
    latitudes, longitudes = grid.latitudes, grid.longitudes
    assert grid_from_centres(latitudes, longitudes) == grid
    if single:
        found = grid_from_centres(latitudes.astype(np.float32), longitudes.astype(np.float32))
        assert found.shape == grid.shape
        assert found.latitude_edges == pytest.approx(grid.latitude_edges, abs=6e-5)
        assert found.longitude_edges == pytest.approx(grid.longitude_edges, abs=6e-5)


def test_flattening_is_that_of_wgs84() -> None:
    geod = Geod(ellps="WGS84")
    assert (geod.a, geod.f) == (SEMI_MAJOR_AXIS, FLATTENING)


@pytest.mark.parametrize("step", [24.5, 30.0, 45.0, 50.0, 80.0])
def test_steps_of_many_degrees(step: float) -> None:
    """Coarser than any fraction of a degree that a step is snapped to."""
    grid = grid_from_centres(np.array([step / 2, -step / 2]), np.array([10.0, 10.0 + step]))
    assert (grid.longitude_step, grid.latitude_step) == (step, step)
    assert grid.bounds == Bounds(10 - step / 2, -step, 10 + 1.5 * step, step)
