"""Regions: areas and coverage on the ellipsoid, whatever was drawn."""

from __future__ import annotations

import itertools
import math
from pathlib import Path

import numpy as np
import pytest
import shapely
from drawn_regions import GEOD, GLOBE, Ring, geodesic_area, geojson, only, stored
from shapely import MultiPolygon, Polygon, box

from gridcool.grid import Bounds, Grid, grid_from_bounds
from gridcool.planning.region_files import read_regions
from gridcool.planning.regions import (
    Cover,
    Regions,
    box_regions,
    coverage,
    ellipsoid_area,
)

DISTRICTS = Path(__file__).parents[1] / "data_demo" / "districts.geojson"
BOX = [(10.0, 20.0), (15.0, 20.0), (15.0, 26.0), (10.0, 26.0)]
TRIANGLE = [(0.0, 10.0), (8.0, 17.0), (-3.0, 21.0)]
SPECK = [(12.31, 47.12), (12.34, 47.13), (12.32, 47.16)]
ARCTIC = [(30.0, 75.0), (70.0, 77.0), (50.0, 84.0)]
HOLE = [(11.0, 21.0), (12.5, 21.5), (13.0, 24.0)]
PLAIN = {"box": [BOX], "triangle": [TRIANGLE], "speck": [SPECK], "arctic": [ARCTIC]}


@pytest.mark.parametrize("rings", [*PLAIN.values(), [BOX, HOLE]], ids=[*PLAIN, "hole"])
def test_areas_are_those_of_the_ellipsoid(rings: list[Ring], tmp_path: Path) -> None:
    exact = geodesic_area(*rings)
    regions = read_regions(geojson(tmp_path / "r.geojson", rings), None)
    assert ellipsoid_area(regions.geometries[0]) == pytest.approx(exact, rel=1e-6)
    assert regions.notes == ()
    cover = only(regions, grid_from_bounds(GLOBE, 1.0))
    assert cover.area == pytest.approx(exact, rel=1e-6)
    assert cover.areas.sum() == pytest.approx(exact, rel=1e-6)
    # Plain degrees times the size of a degree at the mean latitude are another figure.
    polygon = Polygon(rings[0], rings[1:])
    naive = polygon.area * math.cos(math.radians(polygon.centroid.y)) * 111_195.0**2
    assert naive != pytest.approx(exact, rel=1e-4)


def test_long_edges_are_straight_in_degrees_not_geodesics() -> None:
    shape = Polygon([(0, 40), (60, 40), (60, 60), (0, 60)])
    exact = geodesic_area(shapely.get_coordinates(shape).tolist()[:-1])
    assert ellipsoid_area(shape) == pytest.approx(exact, rel=1e-6)
    corners = abs(GEOD.geometry_area_perimeter(shape)[0])
    assert corners != pytest.approx(exact, rel=1e-2)


ACROSS = {
    "short way round": [[(178, -5), (-178, -5), (-177, 6), (179, 6)]],
    "past 180": [[(178, -5), (182, -5), (183, 6), (179, 6)]],
    "before -180": [[(-182, -5), (-178, -5), (-177, 6), (-181, 6)]],
    "clockwise": [[(179, 6), (-177, 6), (-178, -5), (178, -5)]],
}
ACROSS_THERE = [(178.0, -5.0), (182.0, -5.0), (183.0, 6.0), (179.0, 6.0)]


@pytest.mark.parametrize("rings", ACROSS.values(), ids=ACROSS)
def test_polygons_across_the_antimeridian(rings: list[Ring], tmp_path: Path) -> None:
    regions = read_regions(geojson(tmp_path / "r.geojson", rings), None)
    (shape,) = regions.geometries
    assert shape.bounds == (-180, -5, 180, 6)
    assert shape.geom_type == "MultiPolygon"
    cover = only(regions, grid_from_bounds(GLOBE, 1.0))
    assert cover.area == pytest.approx(geodesic_area(ACROSS_THERE), rel=1e-6)
    assert cover.areas.sum() == pytest.approx(cover.area, rel=1e-9)
    columns = set((cover.cells % 360).tolist())
    assert columns == {0, 1, 2, 358, 359}


def test_already_split_at_the_antimeridian(tmp_path: Path) -> None:
    parts = [
        Polygon([(178, -5), (180, -5), (180, 6), (179, 6)]),
        Polygon([(-180, -5), (-178, -5), (-177, 6), (-180, 6)]),
    ]
    path = stored(tmp_path / "r.gpkg", ["a"], [MultiPolygon(parts)])
    cover = only(read_regions(path, None), grid_from_bounds(GLOBE, 1.0))
    assert cover.area == pytest.approx(geodesic_area(ACROSS_THERE), rel=1e-6)


def test_grid_that_runs_past_180(tmp_path: Path) -> None:
    regions = read_regions(geojson(tmp_path / "r.geojson", ACROSS["short way round"]), None)
    past = Grid(170.0, 10.0, 1.0, 1.0, 20, 20)
    cover, everywhere = only(regions, past), only(regions, grid_from_bounds(GLOBE, 1.0))
    assert cover.areas.sum() == pytest.approx(cover.area, rel=1e-9)
    assert set((cover.cells % 20).tolist()) == {8, 9, 10, 11, 12}
    by_place = {
        (10 - cell // 20, 170 + cell % 20): part
        for cell, part in zip(cover.cells, cover.areas, strict=True)
    }
    for cell, part in zip(everywhere.cells, everywhere.areas, strict=True):
        place = 90 - cell // 360, (-180 + cell % 360) % 360
        assert by_place[place] == pytest.approx(part, rel=1e-6)
    assert len(by_place) == len(everywhere.cells)
    across = box(178, -5, 183, 6)
    assert ellipsoid_area(across) == pytest.approx(ellipsoid_area(box(8, -5, 13, 6)), rel=1e-12)


def test_grid_from_0_to_360(tmp_path: Path) -> None:
    regions = read_regions(
        geojson(tmp_path / "r.geojson", [[(-2, 1), (2, 1), (2, 3), (-2, 3)]]), None
    )
    cover = only(regions, grid_from_bounds(Bounds(0.0, -90.0, 360.0, 90.0), 1.0))
    assert set((cover.cells % 360).tolist()) == {358, 359, 0, 1}
    assert cover.areas.sum() == pytest.approx(cover.area, rel=1e-9)


@pytest.mark.parametrize("pole", [1, -1])
def test_ring_round_a_pole(pole: int, tmp_path: Path) -> None:
    longitudes = np.arange(-175.0, 180.0, 5.0)
    ring = [(x, pole * (72 + 4 * math.sin(math.radians(3 * x)))) for x in longitudes]
    exact = geodesic_area(ring, once_round=True)
    cover = only(
        read_regions(geojson(tmp_path / "r.geojson", [ring]), None), grid_from_bounds(GLOBE, 1.0)
    )
    assert cover.area == pytest.approx(exact, rel=1e-6)
    assert cover.areas.sum() == pytest.approx(cover.area, rel=1e-9)
    rows = set((cover.cells // 360).tolist())
    assert (0 if pole > 0 else 179) in rows
    assert not rows & set(range(60, 120))


#: Two regions across 180° and one round a pole, with coasts that are neither meridians nor
#: parallels, each as one continuous ring; the last goes once round.
FAR = [(171.3, 62.1), (189.7, 60.4), (196.2, 66.9), (183.4, 71.2), (174.9, 68.8)]
NEAR = [(176.2, -20.3), (179.1, -15.4), (184.6, -12.9), (186.3, -17.7), (181.2, -21.8)]
ROUND = [(x, -68.0 + 4 * math.sin(math.radians(2 * x)) + (x % 7)) for x in range(-175, 180, 5)]
BAR = 1e-3
SPHERE = 4 * math.pi * 6_378_137.0**2  # of the equatorial radius, which is common, m2


def test_areas_and_coverage_agree_with_geodesics(tmp_path: Path) -> None:
    """Whole regions, and what is given to a wrong cell, against geodesics in short pieces."""
    rings = {"far": FAR, "near": NEAR, "round": ROUND}
    drawn = [[[((x + 180) % 360 - 180, y) for x, y in ring]] for ring in rings.values()]
    regions = read_regions(geojson(tmp_path / "r.geojson", *drawn), None)
    grid = grid_from_bounds(GLOBE, 1.0)
    worst = {"region": 0.0, "covered": 0.0, "misplaced": 0.0}
    for ring, cover in zip(rings.values(), coverage(regions, grid), strict=True):
        exact = geodesic_area(ring, once_round=ring is ROUND)
        misplaced = np.abs(in_cells(ring, grid) - spread(cover, grid)).sum() / 2
        worst["region"] = max(worst["region"], abs(cover.area / exact - 1))
        worst["covered"] = max(worst["covered"], abs(cover.areas.sum() / exact - 1))
        worst["misplaced"] = max(worst["misplaced"], misplaced / exact)
    print({what: f"{error:.1e}" for what, error in worst.items()})
    assert worst["region"] < 2e-6
    assert worst["covered"] < 2e-6
    assert worst["misplaced"] < BAR
    assert SPHERE / (grid.row_areas().sum() * grid.columns) - 1 > BAR


def spread(cover: Cover, grid: Grid) -> np.ndarray:
    found = np.zeros(grid.rows * grid.columns)
    found[cover.cells] = cover.areas
    return found


def in_cells(ring: Ring, grid: Grid) -> np.ndarray:
    """Area of a region in each cell, by cutting the region with every cell."""
    if ring is ROUND:
        shape = Polygon([*ring, (185, ring[0][1]), (185, -90), (-175, -90)])
    else:
        shape = Polygon(ring)
    west, south, east, north = shape.bounds
    x, y = np.meshgrid(
        np.arange(math.floor(west), math.ceil(east)), np.arange(math.floor(south), math.ceil(north))
    )
    parts = shapely.intersection(shape, shapely.box(x, y, x + 1, y + 1))
    found = np.zeros(grid.shape)
    for left, low, part in zip(x.ravel(), y.ravel(), parts.ravel(), strict=True):
        row, column = 89 - low, (left + 180) % 360
        if part.area == 1:
            found[row, column] += grid.row_areas()[row]
        elif part.area > 0:
            pieces = getattr(part, "geoms", [part])
            found[row, column] += sum(
                geodesic_area(shapely.get_coordinates(each.exterior).tolist()[:-1], pieces=100)
                for each in pieces
            )
    return found.ravel()


def test_pole_drawn_along_the_edge_of_the_map(tmp_path: Path) -> None:
    ring = [(-180.0, -90.0), (180.0, -90.0), (180.0, -75.0), (0.0, -70.0), (-180.0, -75.0)]
    cover = only(
        read_regions(geojson(tmp_path / "r.geojson", [ring]), None), grid_from_bounds(GLOBE, 1.0)
    )
    coast = [(-180.0, -75.0), (0.0, -70.0)]
    assert cover.area == pytest.approx(geodesic_area(coast, once_round=True), rel=1e-6)


def test_bow_tie_becomes_its_two_triangles(tmp_path: Path) -> None:
    regions = read_regions(
        geojson(tmp_path / "r.geojson", [[(0, 0), (4, 4), (4, 0), (0, 4)]]), None
    )
    exact = geodesic_area([(0, 0), (2, 2), (0, 4)]) + geodesic_area([(4, 0), (4, 4), (2, 2)])
    assert ellipsoid_area(regions.geometries[0]) == pytest.approx(exact, rel=1e-6)


def test_overlapping_parts_and_repeated_names_count_once(tmp_path: Path) -> None:
    overlapping = MultiPolygon([box(0, 0, 2, 2), box(1, 1, 3, 3)])
    path = stored(
        tmp_path / "r.gpkg", ["a", "b", "a"], [overlapping, box(9, 9, 10, 10), box(0, 0, 2, 2)]
    )
    regions = read_regions(path, "name")
    assert regions.names == ("a", "b")
    assert regions.geometries[0].area == pytest.approx(7.0)


def test_smaller_than_a_cell() -> None:
    grid = grid_from_bounds(GLOBE, 1.0)
    cover = only(Regions(("speck",), (Polygon(SPECK),)), grid)
    assert cover.cells.tolist() == [(90 - 48) * 360 + 180 + 12]
    assert cover.areas.sum() == pytest.approx(geodesic_area(SPECK), rel=1e-6)


def test_outside_and_half_outside_the_grid() -> None:
    grid = Grid(0.0, 10.0, 1.0, 1.0, 10, 10)
    regions = Regions(("out", "half"), (box(40, 40, 42, 42), box(8, 2, 12, 4)))
    out, half = coverage(regions, grid)
    assert out.cells.size == out.areas.size == 0
    assert out.area == pytest.approx(
        geodesic_area([(40, 40), (42, 40), (42, 42), (40, 42)]), rel=1e-6
    )
    assert half.areas.sum() == pytest.approx(half.area / 2, rel=1e-6)
    assert half.cells.tolist() == [68, 69, 78, 79]  # rows 6 and 7 from the north


@pytest.mark.parametrize(("size", "resolution"), [(10.0, 2.0), (7.0, 1.0)])
def test_boxes_share_out_the_globe(size: float, resolution: float) -> None:
    grid = grid_from_bounds(GLOBE, resolution)
    found = shared_out(box_regions(GLOBE, size), grid)
    full = np.repeat(grid.row_areas(), grid.columns)
    assert found == pytest.approx(full, rel=1e-6)
    assert found.sum() == pytest.approx(full.sum(), rel=1e-9)


def test_meridians_share_out_cells_exactly() -> None:
    west = np.linspace(-180, 180, 15)
    lunes = tuple(box(x, -90, y, 90) for x, y in itertools.pairwise(west))
    grid = grid_from_bounds(GLOBE, 5.0)
    found = shared_out(Regions(tuple("abcdefghijklmn"), lunes), grid)
    assert found == pytest.approx(np.repeat(grid.row_areas(), grid.columns), rel=1e-6)


def shared_out(regions: Regions, grid: Grid) -> np.ndarray:
    """What all regions together cover of each cell, m2."""
    found = np.zeros(grid.rows * grid.columns)
    for cover in coverage(regions, grid):
        np.add.at(found, cover.cells, cover.areas)
    return found


def test_oblique_borders_share_out_the_globe() -> None:
    rng = np.random.default_rng(1)
    seeds = np.column_stack([rng.uniform(-180, 180, 12), rng.uniform(-90, 90, 12)])
    globe = box(-180, -90, 180, 90)
    parts = shapely.voronoi_polygons(shapely.MultiPoint(seeds), extend_to=globe).geoms
    shapes = tuple(shapely.intersection(part, globe) for part in parts)
    regions = Regions(tuple(f"{number}" for number in range(len(shapes))), shapes)
    grid = grid_from_bounds(GLOBE, 1.0)
    found, full = shared_out(regions, grid), np.repeat(grid.row_areas(), grid.columns)
    # Within a cell a share of degrees is not quite a share of the area.
    assert found == pytest.approx(full, rel=5e-4)
    assert found.sum() == pytest.approx(full.sum(), rel=1e-9)


def test_boxes_are_named_after_their_south_western_corner() -> None:
    regions = box_regions(Bounds(170.0, -5.0, 190.0, 5.0), 5.0)
    assert regions.names == tuple(
        f"{y} {x}" for y in ("05S", "00N") for x in ("170E", "175E", "180W", "175W")
    )
    assert regions.geometries[2].bounds == (-180, -5, -175, 0)
    assert box_regions(Bounds(-112.5, 2.5, -110.0, 5.0), 2.5).names == ("02.5N 112.5W",)


def test_boxes_on_a_grid_that_starts_inside_one() -> None:
    """Longitudes labelled 0, 0.25, … start an eighth of a degree west of Greenwich."""
    bounds = Bounds(-0.125, -90.0, 359.875, 90.0)
    regions = box_regions(bounds, 5.0)
    assert len(regions.names) == len(set(regions.names)) == 72 * 36
    areas = [ellipsoid_area(shape) for shape in regions.geometries]
    assert sum(areas) == pytest.approx(510_065_621_724_079.0, rel=1e-9)
    assert regions.geometries[regions.names.index("00N 005W")].area == pytest.approx(25.0)


def test_boxes_end_with_the_grid() -> None:
    regions = box_regions(Bounds(1.0, -3.0, 9.0, 2.0), 5.0)
    assert shapely.union_all(regions.geometries).bounds == (1, -3, 9, 2)


def test_districts_of_the_demonstration() -> None:
    """Their borders follow whole degrees, so cells by their centres are an independent count."""
    regions = read_regions(DISTRICTS, "district")
    assert regions.notes == ()
    assert len(regions.names) == len(set(regions.names)) == 11
    grid = grid_from_bounds(GLOBE, 1.0)
    longitude, latitude = np.meshgrid(grid.longitudes, grid.latitudes)
    row_area = np.repeat(grid.row_areas(), grid.columns)
    across = []
    for shape, cover in zip(regions.geometries, coverage(regions, grid), strict=True):
        inside = np.flatnonzero(shapely.contains_xy(shape, longitude, latitude))
        assert np.sort(cover.cells).tolist() == inside.tolist()
        assert cover.areas == pytest.approx(row_area[cover.cells], rel=1e-6)
        assert cover.area == pytest.approx(row_area[inside].sum(), rel=1e-9)
        if {0, 359} <= set((inside % 360).tolist()):
            across.append(cover.name)
    assert len(across) == 2
