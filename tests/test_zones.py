"""Candidate zones: drawn by hand, and as properties of any pattern."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from gridcool.grid import Grid
from gridcool.planning.regions import coverage, ellipsoid_area
from gridcool.planning.zones import find_zones

LOCAL = Grid(10.0, 5.0, 1.0, 1.0, 5, 7)
GLOBE = Grid(-180.0, 10.0, 30.0, 10.0, 2, 12)


def drawn(*rows: str) -> np.ndarray:
    """A pattern of # and dots."""
    return np.array([[each == "#" for each in row] for row in rows])


PATTERN = drawn(
    "##..#..",
    "#.#.#..",
    "###....",
    "......#",
    ".....#.",
)


def test_zones_by_hand() -> None:
    regions, covers = find_zones(PATTERN, LOCAL, minimum_area=0)
    # A ring of seven around a hole, two in a column, and two single cells that meet in a corner.
    assert [len(cover.cells) for cover in covers] == [7, 2, 1, 1]
    assert regions.names == ("zone 1", "zone 2", "zone 3", "zone 4")
    ring = regions.geometries[0]
    assert ring.is_valid
    assert ring.bounds == (10, 2, 13, 5)
    assert sum(len(part.interiors) for part in getattr(ring, "geoms", [ring])) == 1
    assert ring.area == pytest.approx(7)
    assert regions.geometries[2].bounds == (15, 0, 16, 1)  # nearer the equator: a little larger


def test_a_hole_stays_a_hole() -> None:
    pattern = drawn("#####..", "#...#..", "#.#.#..", "#...#..", "#####..")
    regions, covers = find_zones(pattern, LOCAL, minimum_area=0)
    outer, inner = regions.geometries
    assert len(outer.interiors) == 1
    assert shapely.Polygon(outer.interiors[0]).contains(inner)
    assert [len(cover.cells) for cover in covers] == [16, 1]


def test_slivers_are_left_out() -> None:
    cell = LOCAL.row_areas()[1]
    regions, covers = find_zones(PATTERN, LOCAL, minimum_area=1.5 * cell)
    assert [len(cover.cells) for cover in covers] == [7, 2]
    nothing, none = find_zones(PATTERN, LOCAL, minimum_area=100 * cell)
    assert (nothing.names, nothing.geometries, none) == ((), (), [])
    empty, none = find_zones(np.zeros(LOCAL.shape, bool), LOCAL, minimum_area=0)
    assert (empty.names, none) == ((), [])
    assert len(regions.names) == 2


def test_zones_join_across_the_antimeridian() -> None:
    pattern = drawn("#..........#", "#.#.........")
    regions, covers = find_zones(pattern, GLOBE, minimum_area=0)
    assert [len(cover.cells) for cover in covers] == [3, 1]
    west, _, east, _ = regions.geometries[0].bounds
    assert (west, east) == (-180, 180)  # cut there, as GeoJSON asks
    assert regions.geometries[0].area == pytest.approx(3 * 30 * 10)
    apart = Grid(-170.0, 10.0, 20.0, 10.0, 2, 12)  # not a whole circle: its ends do not meet
    assert len(find_zones(pattern, apart, minimum_area=0)[1]) == 3


def test_a_grid_that_runs_past_180_is_cut() -> None:
    across = Grid(170.0, 5.0, 5.0, 5.0, 1, 4)
    regions, covers = find_zones(drawn("####"), across, minimum_area=0)
    parts = regions.geometries[0].geoms
    assert sorted(part.bounds[0] for part in parts) == [-180, 170]
    assert regions.geometries[0].area == pytest.approx(4 * 25)
    assert len(covers[0].cells) == 4


@given(arrays(bool, st.tuples(st.just(2), st.just(12))), st.booleans())
def test_every_suitable_cell_is_in_one_zone(pattern: np.ndarray, whole_circle: bool) -> None:
    grid = GLOBE if whole_circle else Grid(0.0, 40.0, 2.0, 3.0, 2, 12)
    regions, covers = find_zones(pattern, grid, minimum_area=0)
    cells = np.concatenate([cover.cells for cover in covers]) if covers else np.zeros(0, int)
    assert sorted(cells) == np.flatnonzero(pattern).tolist()
    pixels = (pattern * grid.row_areas()[:, None]).sum()
    assert sum(cover.area for cover in covers) == pytest.approx(pixels, rel=1e-12)
    for geometry, cover in zip(regions.geometries, covers, strict=True):
        assert geometry.is_valid
        assert ellipsoid_area(geometry) == pytest.approx(cover.area, rel=1e-6)
    areas = [cover.area for cover in covers]
    assert all(first >= second - 1 for first, second in itertools.pairwise(areas))
    # The polygons cover just those cells.
    for found, cover in zip(coverage(regions, grid), covers, strict=True):
        np.testing.assert_array_equal(np.sort(found.cells), np.sort(cover.cells))


def test_noise_gives_valid_polygons() -> None:
    pattern = np.random.default_rng(1).random((60, 90)) < 0.58
    grid = Grid(-20.0, 60.0, 0.5, 0.5, 60, 90)
    regions, covers = find_zones(pattern, grid, minimum_area=0)
    assert all(shape.is_valid for shape in regions.geometries)
    total = sum(shape.area for shape in regions.geometries)
    assert total == pytest.approx(pattern.sum() * 0.25)
    assert len(covers[0].cells) > 100
