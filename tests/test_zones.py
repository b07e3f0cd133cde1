"""Candidate zones: drawn by hand, and as properties of any pattern."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import ndimage

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
        assert ellipsoid_area(geometry) == pytest.approx(cover.area, rel=1e-9)
    areas = [cover.area for cover in covers]
    assert all(first >= second - 1 for first, second in itertools.pairwise(areas))
    # The polygons cover just those cells.
    for found, cover in zip(coverage(regions, grid), covers, strict=True):
        np.testing.assert_array_equal(np.sort(found.cells), np.sort(cover.cells))


PATTERNS = arrays(bool, st.tuples(st.integers(1, 7), st.integers(2, 9)))
#: Western edges in cells of 40°: on the antimeridian, on a whole cell, and inside one.
WEST = st.sampled_from([-180.0, 0.0, -20.0, 100.0, 165.0])


@given(PATTERNS, WEST)
def test_cells_of_a_zone_are_linked_by_edges(pattern: np.ndarray, west: float) -> None:
    """By walking from cell to cell, which knows nothing of the labels or of the tracing."""
    rows, columns = pattern.shape
    grid = Grid(west, 35.0, 40.0, 10.0, rows, columns)
    left = {divmod(int(cell), columns) for cell in np.flatnonzero(pattern)}
    walked = []
    while left:
        zone, ahead = set(), [left.pop()]
        while ahead:
            row, column = ahead.pop()
            zone.add(row * columns + column)
            for place in (
                (row - 1, column),
                (row + 1, column),
                (row, column - 1),
                (row, column + 1),
            ):
                place = (place[0], place[1] % columns) if columns == 9 else place
                if place in left:
                    left.remove(place)
                    ahead.append(place)
        walked.append(sorted(zone))
    _, covers = find_zones(pattern, grid, minimum_area=0)
    assert sorted(sorted(cover.cells.tolist()) for cover in covers) == sorted(walked)


@given(PATTERNS, WEST)
def test_outlines_are_whole_cells_on_both_sides_of_180(pattern: np.ndarray, west: float) -> None:
    """Against a union of squares, which knows nothing of the tracing."""
    rows, columns = pattern.shape
    grid = Grid(west, 35.0, 40.0, 10.0, rows, columns)
    regions, covers = find_zones(pattern, grid, minimum_area=0)
    for shape, cover in zip(regions.geometries, covers, strict=True):
        assert shape.is_valid
        squares = []
        for row, column in zip(*np.divmod(cover.cells, columns), strict=True):
            x, y = west + 40.0 * column, 35.0 - 10.0 * row
            for turn in (0, -360):
                left, right = max(x + turn, -180.0), min(x + 40 + turn, 180.0)
                if left < right:
                    squares.append(shapely.box(left, y - 10, right, y))
        assert shape.symmetric_difference(shapely.union_all(squares)).area == 0
        assert ellipsoid_area(shape) == pytest.approx(cover.area, rel=1e-9)


@given(arrays(bool, (3, 9)), st.integers(1, 8), st.sampled_from([0.0, 20.0, 7.3]))
def test_zones_do_not_depend_on_where_the_grid_begins(
    pattern: np.ndarray, shift: int, offset: float
) -> None:
    """So an edge of the array, like a border between blocks, leaves no seam."""
    first, turned = (
        Grid(west, 25.0, 40.0, 10.0, 3, 9)
        for west in (-180.0 + offset, round(-180.0 + offset + 40 * shift, 12))
    )
    here, covers = find_zones(pattern, first, minimum_area=0)
    there, others = find_zones(np.roll(pattern, -shift, axis=1), turned, minimum_area=0)
    assert here.names == there.names
    for one, other in zip(here.geometries, there.geometries, strict=True):
        assert one.equals_exact(other, 1e-9, normalize=True)
    assert [cover.area for cover in covers] == pytest.approx([cover.area for cover in others])


def test_a_half_step_leaves_no_gap_where_the_array_ends() -> None:
    """Differences of 360° in decimals are not exact; outlines must meet all the same."""
    grid = Grid(-0.05, 10.0, 0.1, 0.1, 100, 3600)
    pattern = np.zeros(grid.shape, bool)
    pattern[20:50, :30] = pattern[20:50, -30:] = True
    regions, covers = find_zones(pattern, grid, minimum_area=0)
    (shape,) = regions.geometries
    assert shape.geom_type == "Polygon"
    assert shape.bounds == (-3.05, 5.0, 2.95, 8.0)
    assert ellipsoid_area(shape) == pytest.approx(covers[0].area, rel=1e-12)


def test_order_names_and_the_note() -> None:
    """Largest first; of two alike the northern, then the western by true longitude."""
    grid = Grid(0.0, 30.0, 30.0, 30.0, 2, 12)
    pattern = drawn("#..#..#..#..", "##..........")
    regions, covers = find_zones(pattern, grid, minimum_area=0)
    assert len(covers[0].cells) == 3
    assert [shape.bounds[0] for shape in regions.geometries] == [0, -180, -90, 90]
    assert regions.notes == ()
    cell = grid.row_areas()[0]
    few, _ = find_zones(pattern, grid, minimum_area=2 * cell)
    assert few.names == ("zone 1",)
    assert few.notes == (
        f"3 connected areas under {2 * cell / 1e6:g} km2 are not zones; "
        f"together they have {3 * cell / 1e6:,.0f} km2.",
    )


def test_cells_of_another_grid_are_refused() -> None:
    with pytest.raises(ValueError, match="not on a grid"):
        find_zones(PATTERN[:, 1:], LOCAL, minimum_area=0)


def test_noise_gives_valid_polygons() -> None:
    pattern = np.random.default_rng(1).random((60, 90)) < 0.58
    grid = Grid(-20.0, 60.0, 0.5, 0.5, 60, 90)
    regions, covers = find_zones(pattern, grid, minimum_area=0)
    assert all(shape.is_valid for shape in regions.geometries)
    total = sum(shape.area for shape in regions.geometries)
    assert total == pytest.approx(pattern.sum() * 0.25)
    assert len(covers[0].cells) > 100


def test_zones_cut_into_blocks_and_put_together_are_the_same() -> None:
    """A field thresholded block by block gives the zones of the field in one piece."""
    rng = np.random.default_rng(2)
    field = ndimage.gaussian_filter(rng.standard_normal((90, 180)), 2, mode="wrap")
    grid = Grid(-180.0, 90.0, 2.0, 2.0, 90, 180)
    whole = find_zones(field > 0.1, grid, minimum_area=1e11)
    assert len(whole[1]) > 5
    for rows in (1, 7, 45):
        strips = [field[start : start + rows] > 0.1 for start in range(0, 90, rows)]
        regions, covers = find_zones(np.concatenate(strips), grid, minimum_area=1e11)
        assert regions == whole[0]
        for one, other in zip(covers, whole[1], strict=True):
            np.testing.assert_array_equal(one.cells, other.cells)
    pixels = sum(cover.area for cover in whole[1])
    traced = sum(ellipsoid_area(shape) for shape in whole[0].geometries)
    assert traced == pytest.approx(pixels, rel=1e-9)
