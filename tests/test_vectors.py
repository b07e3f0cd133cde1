"""GeoPackages: what a GIS finds in them, and that no name can do harm."""

from __future__ import annotations

import shutil
import sqlite3
import subprocess
from pathlib import Path

import pandas as pd
import pyogrio
import pytest
import shapely

from gridcool.errors import OutputError
from gridcool.products.vectors import in_order, write_polygons

HARMFUL = [
    "<script>alert(1)</script>",
    '=cmd("calc")',
    "quotes ' and \" and ; DROP TABLE regions; --",
    "comma, and\nnewline",
    "مرحبا عالم",
    "🌞 sunny 🪞",
    "",
]
SHAPES = [shapely.box(index, 0, index + 0.5, 1) for index in range(len(HARMFUL))]
FRAME = pd.DataFrame(
    {
        "rank": pd.array([1, 2, 3, 4, 5, 6, pd.NA], "Int64"),
        "region": HARMFUL,
        "rejected_flux_mean": [100.5, 90, 80, 70, 60, 50, float("nan")],
        "main_exclusion": ["too steep"] * 7,
    }
)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    made = tmp_path / "regions.gpkg"
    write_polygons(FRAME, SHAPES, made, "regions", "Invented regions")
    return made


def test_names_come_back_as_they_are(path: Path) -> None:
    found = pyogrio.read_dataframe(path)
    assert found["region"].tolist() == HARMFUL
    assert found["rank"].tolist()[:6] == [1, 2, 3, 4, 5, 6]
    assert found["rank"].isna().tolist()[6]
    assert found["rejected_flux_mean"].tolist()[:6] == FRAME["rejected_flux_mean"].tolist()[:6]
    assert found.crs.to_epsg() == 4326
    assert shapely.area(found.geometry.to_numpy()).tolist() == pytest.approx([0.5] * 7)


def test_ranks_are_whole_numbers_or_null(path: Path) -> None:
    """A GIS shows rank 1, not 1.0, and nothing at all where nothing is eligible."""
    with sqlite3.connect(path) as file:
        kept = file.execute("SELECT rank, typeof(rank), rejected_flux_mean FROM regions").fetchall()
    assert [row[:2] for row in kept] == [(n, "integer") for n in range(1, 7)] + [(None, "null")]
    assert kept[6][2] is None
    assert next(iter(pyogrio.read_info(path)["ogr_types"])) == "OFTInteger64"


def test_the_table_given_is_left_as_it_was(tmp_path: Path) -> None:
    frame = FRAME.copy()
    write_polygons(frame, SHAPES, tmp_path / "a.gpkg", "regions", "Invented regions")
    pd.testing.assert_frame_equal(frame, FRAME)


def test_only_what_the_format_asks_for(path: Path) -> None:
    """No table of anybody's styles; the layer has a description."""
    with sqlite3.connect(path) as file:
        tables = {row[0] for row in file.execute("SELECT name FROM sqlite_master")}
        contents = file.execute("SELECT table_name, description FROM gpkg_contents").fetchall()
    assert "regions" in tables
    assert not {name for name in tables if "style" in name}
    assert contents == [("regions", "Invented regions")]


@pytest.mark.skipif(shutil.which("ogrinfo") is None, reason="no ogrinfo on this machine")
def test_another_build_of_gdal_reads_it(path: Path) -> None:
    told = subprocess.run(
        ["ogrinfo", "-so", str(path), "regions"], capture_output=True, text=True, check=True
    ).stdout
    assert "Feature Count: 7" in told
    assert "Geometry: Multi Polygon" in told


def test_the_same_bytes_every_time(path: Path, tmp_path: Path) -> None:
    again = tmp_path / "again.gpkg"
    write_polygons(FRAME, SHAPES, again, "regions", "Invented regions")
    assert again.read_bytes() == path.read_bytes()
    with sqlite3.connect(again) as file:
        changed = file.execute("SELECT last_change FROM gpkg_contents").fetchall()
    assert changed == [("1970-01-01T00:00:00.000Z",)]
    # Not of the clock alone: another table gives other bytes.
    write_polygons(FRAME.head(6), SHAPES[:6], again.with_name("b.gpkg"), "regions", "Invented")
    assert again.with_name("b.gpkg").read_bytes() != path.read_bytes()


def test_parts_and_nothing(tmp_path: Path) -> None:
    shapes = [
        shapely.MultiPolygon([SHAPES[0], SHAPES[2]]),
        shapely.Polygon(),
        shapely.GeometryCollection([SHAPES[1], shapely.Point(0, 0)]),
    ]
    path = tmp_path / "parts.gpkg"
    write_polygons(FRAME.head(3), shapes, path, "zones", "Invented zones")
    found = pyogrio.read_dataframe(path)
    assert shapely.area(found.geometry.to_numpy()).tolist() == pytest.approx([1.0, 0.0, 0.5])


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    path = tmp_path / "missing" / "regions.gpkg"
    with pytest.raises(OutputError):
        write_polygons(FRAME, SHAPES, path, "regions", "Invented regions")
    assert not path.exists()


def test_shapes_follow_the_ranking() -> None:
    frame = pd.DataFrame({"region": ["b", "a"]})
    assert in_order(["a", "b"], ["shape a", "shape b"], frame) == ["shape b", "shape a"]
