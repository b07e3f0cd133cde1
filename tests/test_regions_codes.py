"""Regions from rasters of codes: traced along their cells, and what is refused."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
from drawn_regions import GLOBE, only
from rasterio import Affine

from gridcool.errors import InputDataError, SettingsError
from gridcool.grid import grid_from_bounds
from gridcool.planning.region_files import read_regions
from gridcool.planning.regions import coverage, ellipsoid_area

ADMIN = Path(__file__).parents[2] / "shared" / "data" / "laos" / "admin.tif"
PLACE = Affine(1, 0, 100, 0, -1, 22)
SURFACE = 510_065_621_724_079.0  # of the WGS 84 ellipsoid, m2


def stored(path: Path, values: Any, transform: Affine = PLACE, **profile: Any) -> Path:
    bands = np.atleast_3d(np.asarray(values).T).T
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        count=bands.shape[0],
        height=bands.shape[1],
        width=bands.shape[2],
        dtype=bands.dtype,
        transform=transform,
        **{"crs": "EPSG:4326", **profile},
    ) as file:
        file.write(bands)
    return path


@pytest.mark.parametrize("kind", [np.uint8, np.int16, np.int64, np.float32])
def test_cells_of_a_code_are_a_region(kind: type, tmp_path: Path) -> None:
    values = np.array([[1, 1, 0], [7, 1, 99]], kind)
    path = stored(tmp_path / "codes.tif", values, nodata=99)
    regions = read_regions(path, None, {"1": "North", "9": "Nowhere"})
    assert regions.names == ("North", "region 7")
    assert [shape.area for shape in regions.geometries] == [3, 1]
    assert regions.geometries[1].bounds == (100, 20, 101, 21)
    assert regions.notes == ("codes.tif has no cell of code 9.",)
    (joined,) = read_regions(path, None, {"1": "All", "7": "All"}).geometries
    assert joined.geom_type == "Polygon"
    assert joined.area == 4


def test_code_0_is_a_region_if_it_has_a_name(tmp_path: Path) -> None:
    path = stored(tmp_path / "codes.tif", np.array([[1, 0]], np.int16), nodata=-1)
    assert read_regions(path, None).names == ("region 1",)
    assert read_regions(path, None, {"0": "Sea"}).names == ("Sea", "region 1")
    path = stored(tmp_path / "missing.tif", np.array([[1, 0]], np.int16), nodata=0)
    assert read_regions(path, None, {"0": "Sea"}).names == ("region 1",)


def test_missing_cells_of_decimals_need_no_declared_value(tmp_path: Path) -> None:
    path = stored(tmp_path / "codes.tif", np.array([[2, np.nan, 3]], np.float32))
    assert read_regions(path, None).names == ("region 2", "region 3")


@pytest.mark.parametrize("shift", [0.0, -0.05])
def test_longitudes_from_0_to_360(shift: float, tmp_path: Path) -> None:
    """What lies across Greenwich is in one piece, what lies across 180° is cut there."""
    values = np.zeros((1800, 3600), np.uint8)
    values[800:900, :40] = values[800:900, -40:] = 1
    values[800:900, 1700:1900] = 2
    path = stored(tmp_path / "codes.tif", values, Affine(0.1, 0, shift, 0, -0.1, 90))
    regions = read_regions(path, None)
    home, across = regions.geometries
    assert home.geom_type == "Polygon"
    assert home.bounds == pytest.approx((-4 + shift, 0, 4 + shift, 10), abs=1e-9)
    assert len(across.geoms) == 2
    assert across.bounds == (-180, 0, 180, 10)
    assert across.area == pytest.approx(20 * 10, rel=1e-12)
    covers = coverage(regions, grid_from_bounds(GLOBE, 1.0))
    for shape, cover in zip(regions.geometries, covers, strict=True):
        assert cover.areas.sum() == pytest.approx(ellipsoid_area(shape), rel=1e-9)


def test_rows_centred_on_the_poles_end_there(tmp_path: Path) -> None:
    values = np.ones((181, 360), np.int16)
    path = stored(tmp_path / "codes.tif", values, Affine(1, 0, -180.5, 0, -1, 90.5))
    regions = read_regions(path, None)
    assert regions.geometries[0].bounds == (-180, -90, 180, 90)
    cover = only(regions, grid_from_bounds(GLOBE, 1.0))
    assert cover.area == pytest.approx(SURFACE, rel=1e-9)


def test_a_step_in_single_precision_still_closes_the_circle(tmp_path: Path) -> None:
    step = float(np.float32(0.3))
    values = np.zeros((4, 1200), np.uint8)
    values[:, :3] = values[:, -3:] = 1
    path = stored(tmp_path / "codes.tif", values, Affine(step, 0, -90.0, 0, -step, 10))
    (shape,) = read_regions(path, None).geometries
    assert shape.geom_type == "Polygon"
    assert shape.bounds[::2] == pytest.approx((-90.9, -89.1))


def test_a_hair_west_of_180_is_180(tmp_path: Path) -> None:
    west = float(np.nextafter(-180.0, -181.0))
    path = stored(tmp_path / "codes.tif", np.ones((1, 360), np.uint8), Affine(1, 0, west, 0, -1, 9))
    assert read_regions(path, None).geometries[0].bounds == (-180, 8, 180, 9)


def test_what_is_taken_for_granted_is_said(tmp_path: Path) -> None:
    bands = np.array([[[1, 2]], [[3, 4]]], np.uint8)
    path = stored(tmp_path / "codes.tif", bands, crs="EPSG:4267")
    regions = read_regions(path, None)
    assert regions.names == ("region 1", "region 2")
    assert regions.notes == (
        "codes.tif has 2 bands; the first is used.",
        "codes.tif is in degrees of another datum; they are taken as WGS 84.",
    )


REFUSED = {
    "decimals": (np.array([[1.5, 2.0]], np.float32), {}, "other than whole numbers"),
    "empty": (np.zeros((2, 2), np.int16), {}, "no code but 0"),
    "many": (np.arange(1, 10_101, dtype=np.int32).reshape(100, 101), {}, "10100 different"),
    "metres": (np.ones((2, 2), np.int16), {"crs": "EPSG:32648"}, "raster in degrees"),
    "no crs": (np.ones((2, 2), np.int16), {"crs": None}, "raster in degrees"),
    "turned": (np.ones((2, 2), np.int16), {"transform": Affine(1, 0.1, 9, 0, -1, 9)}, "north-up"),
    "beyond": (np.ones((9, 2), np.int16), {"transform": Affine(1, 0, 9, 0, -1, 92)}, "a pole"),
    "twice": (np.ones((2, 361), np.int16), {}, "more than once round"),
}


@pytest.mark.parametrize("kind", REFUSED)
def test_rasters_that_are_no_codes_are_refused(kind: str, tmp_path: Path) -> None:
    values, profile, words = REFUSED[kind]
    path = stored(tmp_path / "codes.tif", values, **profile)
    with pytest.raises(InputDataError, match=words) as caught:
        read_regions(path, None)
    assert str(path) in str(caught.value)


def test_a_broken_raster_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "broken.tif"
    path.write_bytes(b"II*\x00nothing")
    with pytest.raises(InputDataError, match="cannot be read"):
        read_regions(path, None)


def test_settings_that_do_not_fit_a_raster(tmp_path: Path) -> None:
    path = stored(tmp_path / "codes.tif", np.ones((2, 2), np.uint8))
    with pytest.raises(SettingsError, match="'north' is not a whole number"):
        read_regions(path, None, {"north": "North"})
    with pytest.raises(SettingsError, match="without attributes"):
        read_regions(path, "district")


def test_a_real_raster() -> None:
    """The country code of Laos (PyAEZ's case, MIT; promised are districts 1 to 5, held is 1)."""
    if not ADMIN.exists():
        pytest.skip("the real data laos/admin.tif are not beside this repository")
    regions = read_regions(ADMIN, None)
    assert regions.names == ("region 1",)
    with rasterio.open(ADMIN) as file:
        inside, affine = file.read(1) == 1, file.transform
    (shape,) = regions.geometries
    assert shape.is_valid
    assert shape.area == pytest.approx(inside.sum() * -affine.a * affine.e, rel=1e-9)
    # Published is a land and water area of 236 800 km2 (a common figure, from memory).
    assert ellipsoid_area(shape) / 1e6 == pytest.approx(236_800, rel=0.05)
