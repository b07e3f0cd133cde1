"""Region files: formats, reference systems, names, and what is refused."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import geopandas as gpd
import pandas as pd
import pytest
import shapely
from drawn_regions import GLOBE, geojson, only, stored
from pyarrow import parquet
from shapely import Point, Polygon, box

from gridcool.errors import InputDataError, SettingsError
from gridcool.grid import grid_from_bounds
from gridcool.planning.region_files import read_regions
from gridcool.planning.regions import (
    Regions,
    coverage,
)

BOX = [(10.0, 20.0), (15.0, 20.0), (15.0, 26.0), (10.0, 26.0)]
HOLE = [(11.0, 21.0), (12.5, 21.5), (13.0, 24.0)]


@pytest.mark.parametrize("suffix", ["gpkg", "shp", "geojson", "fgb"])
def test_another_reference_system_is_the_same_region(suffix: str, tmp_path: Path) -> None:
    shapes = [box(10, 40, 12, 43), Polygon(BOX, [HOLE])]
    degrees = gpd.GeoDataFrame({"name": ["a", "b"]}, geometry=shapes, crs="EPSG:4326")
    path = tmp_path / f"r.{suffix}"
    crs = "EPSG:4326" if suffix == "geojson" else "EPSG:3857"
    degrees.to_crs(crs).to_file(path)
    regions = read_regions(path, "name")
    covers = coverage(regions, grid_from_bounds(GLOBE, 1.0))
    expected = coverage(Regions(("a", "b"), tuple(shapes)), grid_from_bounds(GLOBE, 1.0))
    by_name = {cover.name: cover for cover in covers}
    for other in expected:
        found = by_name[other.name]
        assert found.area == pytest.approx(other.area, rel=1e-6)
        # There and back moves edges by rounding; a sliver of a neighbouring cell may be touched.
        parts = dict(zip(found.cells.tolist(), found.areas.tolist(), strict=True))
        for cell, part in zip(other.cells.tolist(), other.areas.tolist(), strict=True):
            assert parts.pop(cell, 0.0) == pytest.approx(part, rel=1e-6)
        assert sum(parts.values()) < 1e-6 * other.area


def test_circle_round_the_pole_in_a_polar_projection(tmp_path: Path) -> None:
    """In the polar stereographic plane a parallel is a circle; its zone is known exactly."""
    plane = "+proj=stere +lat_0=90 +lat_ts=70 +ellps=WGS84 +type=crs"
    parallel = gpd.GeoSeries([Point(0, 80)], crs="EPSG:4326").to_crs(plane).iloc[0]
    circle = Point(0, 0).buffer(math.hypot(parallel.x, parallel.y), quad_segs=4000)
    path = stored(tmp_path / "r.gpkg", ["cap"], [circle], crs=plane)
    cover = only(read_regions(path, None), grid_from_bounds(GLOBE, 1.0))
    assert cover.area == pytest.approx(
        grid_from_bounds(GLOBE, 1.0).row_areas()[:10].sum() * 360, rel=1e-6
    )


def shapefile_without_reference(path: Path, shape: Any) -> Path:
    stored(path, ["a"], [shape])
    path.with_suffix(".prj").unlink()
    return path


def test_degrees_are_assumed_without_a_reference_system(tmp_path: Path) -> None:
    path = shapefile_without_reference(tmp_path / "bare.shp", box(10, 20, 15, 26))
    regions = read_regions(path, "name")
    assert regions.geometries[0].area == pytest.approx(30.0)
    assert regions.notes == (
        "bare.shp states no coordinate reference system; degrees are assumed.",
    )


def test_metres_without_a_reference_system_are_refused(tmp_path: Path) -> None:
    path = shapefile_without_reference(tmp_path / "bare.shp", box(500000, 0, 600000, 100000))
    with pytest.raises(InputDataError, match="states no coordinate reference system"):
        read_regions(path, "name")


def test_swapped_axes_are_refused(tmp_path: Path) -> None:
    path = geojson(tmp_path / "r.geojson", [[(20, 110), (26, 110), (26, 115)]])
    with pytest.raises(InputDataError, match="latitudes beyond the poles"):
        read_regions(path, None)


def unreadable(kind: str, folder: Path) -> Path:
    path = folder / f"r.{kind}"
    if kind == "txt":
        path.write_text("north of the river\n")
    elif kind == "csv":
        path.write_text("name,people\na,1\n")
    elif kind == "geojson":
        path.write_text('{"type": "FeatureCollection", "features": [')
    elif kind == "gpkg":
        stored(path, ["a"], [box(0, 0, 1, 1)])
        path.write_bytes(path.read_bytes()[:20000])
    elif kind == "points.gpkg":
        stored(path, ["a", "b"], [Point(0, 0), None])
    elif kind == "empty.geojson":
        path.write_text('{"type": "FeatureCollection", "features": []}')
    elif kind == "folder":
        path.mkdir()
    return path


@pytest.mark.parametrize(
    ("kind", "words"),
    [
        ("missing", "does not exist; check .regions. path"),
        ("txt", "cannot be read as polygons"),
        ("csv", "table without geometries"),
        ("geojson", "cannot be read as polygons"),
        ("gpkg", "cannot be read as polygons"),
        ("folder", "cannot be read as polygons"),
        ("points.gpkg", "holds no polygons"),
        ("empty.geojson", "holds no polygons"),
    ],
)
def test_files_without_polygons_are_refused(kind: str, words: str, tmp_path: Path) -> None:
    path = unreadable(kind, tmp_path)
    with pytest.raises(InputDataError, match=words) as caught:
        read_regions(path, None)
    assert str(path) in str(caught.value)
    assert caught.value.exit_code == 3


def test_missing_attribute_names_the_nearest(tmp_path: Path) -> None:
    path = stored(tmp_path / "r.gpkg", ["a"], [box(0, 0, 1, 1)])
    with pytest.raises(SettingsError, match="has no attribute nane; did you mean name"):
        read_regions(path, "nane")
    with pytest.raises(SettingsError, match="has no attribute province; it has name"):
        read_regions(path, "province")


def test_names_that_are_missing_or_numbers(tmp_path: Path) -> None:
    shapes = [box(x, 0, x + 1, 1) for x in range(3)]
    path = stored(tmp_path / "r.gpkg", ["a", None, "c"], shapes)
    assert read_regions(path, None).names == ("a", "Unnamed 2", "c")
    path = stored(tmp_path / "n.gpkg", [7, 8, 9], shapes)
    assert read_regions(path, "name").names == ("7", "8", "9")
    rings = [[[(x, 0), (x + 1, 0), (x + 1, 1)]] for x in range(2)]
    assert read_regions(geojson(tmp_path / "r.geojson", *rings), None).names == (
        *("Region 1", "Region 2"),
    )


def test_rows_without_area_are_kept_and_noted(tmp_path: Path) -> None:
    path = stored(tmp_path / "r.gpkg", ["a", "b"], [box(0, 0, 1, 1), None])
    regions = read_regions(path, None)
    assert regions.notes == ("No area is drawn in r.gpkg for b.",)
    _, empty = coverage(regions, grid_from_bounds(GLOBE, 10.0))
    assert (empty.name, empty.area, empty.cells.size) == ("b", 0.0, 0)


def test_the_first_layer_with_polygons_is_used_and_named(tmp_path: Path) -> None:
    path = tmp_path / "r.gpkg"
    for layer, shape in (
        ("wells", Point(0, 0)),
        ("old", box(0, 0, 1, 1)),
        ("new", box(0, 0, 2, 2)),
    ):
        gpd.GeoDataFrame({"name": [layer]}, geometry=[shape], crs="EPSG:4326").to_file(
            path, layer=layer
        )
    regions = read_regions(path, None)
    assert regions.names == ("old",)
    assert regions.notes == ("r.gpkg has several layers of polygons; old is used.",)


# --- other kinds of file ---


def boxes() -> Any:
    """Two named boxes."""
    return gpd.GeoDataFrame(
        {"name": ["west", "east"]},
        geometry=[shapely.box(0, 0, 10, 10), shapely.box(10, 0, 20, 5)],
        crs="EPSG:4326",
    )


@pytest.mark.parametrize("kind", ["gpkg", "shp", "geojson", "fgb", "parquet"])
def test_kinds_of_polygon_files(tmp_path: Path, kind: str) -> None:
    path = tmp_path / f"boxes.{kind}"
    if kind == "parquet":
        boxes().to_parquet(path)
    else:
        boxes().to_file(path)
    regions = read_regions(path, "name")
    assert dict(zip(regions.names, [g.area for g in regions.geometries], strict=True)) == {
        "west": pytest.approx(100),
        "east": pytest.approx(50),
    }


def test_topojson(tmp_path: Path) -> None:
    """Two squares that share an edge: arcs are kept once."""
    path = tmp_path / "boxes.topojson"
    topology = {
        "type": "Topology",
        "arcs": [
            [[10, 0], [10, 10]],
            [[10, 10], [0, 10], [0, 0], [10, 0]],
            [[10, 10], [20, 10], [20, 0], [10, 0]],
        ],
        "objects": {
            "boxes": {
                "type": "GeometryCollection",
                "geometries": [
                    {"type": "Polygon", "arcs": [[0, 1]], "properties": {"name": "west"}},
                    {"type": "Polygon", "arcs": [[0, 2]], "properties": {"name": "east"}},
                ],
            }
        },
    }
    path.write_text(json.dumps(topology), encoding="utf-8")
    regions = read_regions(path, None)
    assert regions.names == ("west", "east")
    assert [shape.area for shape in regions.geometries] == pytest.approx([100, 100])


def test_topojson_in_whole_steps(tmp_path: Path) -> None:
    """Whole steps from point to point, with a scale; an arc run backwards has its complement."""
    topology = {
        "type": "Topology",
        "transform": {"scale": [0.5, 0.25], "translate": [-30.0, 10.0]},
        "arcs": [[[20, 0], [0, 40]], [[20, 40], [-20, 0], [0, -40], [20, 0]]],
        "objects": {
            "land": {
                "type": "GeometryCollection",
                "geometries": [
                    {"type": "Polygon", "arcs": [[-1, -2]], "properties": {"name": "west"}}
                ],
            }
        },
    }
    path = tmp_path / "r.json"
    path.write_text(json.dumps(topology), encoding="utf-8")
    regions = read_regions(path, "name")
    assert regions.geometries[0].bounds == (-30, 10, -20, 20)
    assert regions.geometries[0].area == pytest.approx(100)


def test_parquet_with_another_column_and_reference_system(tmp_path: Path) -> None:
    path = tmp_path / "r.parquet"
    boxes().to_crs("EPSG:3857").rename_geometry("outline").to_parquet(path)
    regions = read_regions(path, None)
    assert regions.notes == ()
    assert [shape.area for shape in regions.geometries] == pytest.approx([100, 50], rel=1e-9)
    with pytest.raises(SettingsError, match="it has name"):
        read_regions(path, "province")


def test_parquet_with_edges_along_great_circles(tmp_path: Path) -> None:
    path = tmp_path / "r.parquet"
    boxes().to_parquet(path)
    table = parquet.read_table(path)
    said = json.loads(table.schema.metadata[b"geo"])
    said["columns"]["geometry"]["edges"] = "spherical"
    parquet.write_table(table.replace_schema_metadata({b"geo": json.dumps(said)}), path)
    regions = read_regions(path, None)
    assert regions.names == ("west", "east")
    assert "edges follow great circles" in regions.notes[0]


def test_parquet_without_geometries_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "r.parquet"
    pd.DataFrame({"name": ["a"]}).to_parquet(path)
    with pytest.raises(InputDataError, match="cannot be read as polygons") as caught:
        read_regions(path, None)
    assert "\n" not in str(caught.value)


def test_what_was_mended_or_assumed_is_said_once(tmp_path: Path) -> None:
    bow_tie = [(0, 0), (4, 4), (4, 0), (0, 4)]
    across = [(178, -5), (-178, -5), (-177, 6), (179, 6)]
    sound = [(20, 0), (30, 0), (30, 10)]
    path = geojson(tmp_path / "r.geojson", [sound], [across], *[[bow_tie]] * 7)
    assert read_regions(path, None).notes == (
        "Edges of more than 180° in r.geojson are read as crossing 180° in Region 2.",
        "Outlines that cross themselves in r.geojson are mended in Region 3, Region 4, Region 5, "
        "Region 6, Region 7 and 2 more.",
    )


def test_a_row_without_geometry_does_not_hide_swapped_axes(tmp_path: Path) -> None:
    swapped = Polygon([(20, 110), (26, 110), (26, 115)])
    path = stored(tmp_path / "r.gpkg", ["a", "b"], [swapped, None])
    with pytest.raises(InputDataError, match="latitudes beyond the poles"):
        read_regions(path, None)


def test_settings_for_the_other_kind_of_file(tmp_path: Path) -> None:
    path = stored(tmp_path / "r.gpkg", ["a"], [box(0, 0, 1, 1)])
    with pytest.raises(SettingsError, match="is not a raster of codes"):
        read_regions(path, None, {"1": "a"})
