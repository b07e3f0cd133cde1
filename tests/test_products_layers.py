"""The layers' files: the same cells, places, names and units whoever opens them."""

from __future__ import annotations

import calendar
import json
import math
import shutil
import subprocess
import sys
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import rasterio
import xarray as xr
from invented_layers import ATTRIBUTES, GRIDS, invented_layers, invented_values
from rio_cogeo.cogeo import cog_validate

from gridcool.grid import Grid
from gridcool.products.layers import write_layers
from gridcool.variables import layer_variables

Written = tuple[Grid, Path]
NAMES = tuple(layer_variables())


@pytest.fixture(scope="module", params=GRIDS)
def written(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> Written:
    grid = GRIDS[request.param]
    folder = tmp_path_factory.mktemp(request.param)
    write_layers(invented_layers(grid), grid, folder, attributes=ATTRIBUTES)
    return grid, folder


@pytest.fixture(scope="module")
def region(tmp_path_factory: pytest.TempPathFactory) -> Written:
    grid = GRIDS["region"]
    folder = tmp_path_factory.mktemp("region-alone")
    write_layers(invented_layers(grid), grid, folder, attributes=ATTRIBUTES)
    return grid, folder


def test_geotiffs_lie_where_the_grid_lies(written: Written) -> None:
    grid, folder = written
    for name in NAMES:
        with rasterio.open(folder / "layers" / f"{name}.tif") as file:
            assert file.crs.to_epsg() == 4326
            assert tuple(file.transform)[:6] == grid.affine
            assert (file.height, file.width) == grid.shape
            assert tuple(file.bounds) == pytest.approx(
                (grid.bounds.west, grid.bounds.south, grid.bounds.east, grid.bounds.north), abs=1e-9
            )
            # Half a cell matters: the centre of the first cell, not its corner.
            centre = file.xy(0, 0)
            assert centre == pytest.approx((grid.longitudes[0], grid.latitudes[0]), abs=1e-9)
            assert file.tags()["AREA_OR_POINT"] == "Area"


def test_geotiffs_say_what_they_hold(written: Written) -> None:
    _, folder = written
    for name, layer in layer_variables().items():
        with rasterio.open(folder / "layers" / f"{name}.tif") as file:
            tags = file.tags()
            names = {
                "month": tuple(calendar.month_name)[1:],
                "season": ("season of low sun", "season of high sun"),
                "year": (name,),
            }
            assert file.descriptions == names[layer.bands]
            assert set(file.units) == {layer.units or None}
            assert set(file.scales) == {1.0}
            assert set(file.offsets) == {0.0}
            assert tags["long_name"] == layer.long_name
            assert tags["title"] == ATTRIBUTES["title"]
            assert tags["history"] == ATTRIBUTES["history"]
            if layer.is_flags:
                assert set(file.dtypes) == {"uint16"}
                assert file.nodata is None
                first = layer.flags[0]
                assert tags[f"flag_{first.value}"].startswith(f"{first.meaning}: ")
            elif layer.classes:
                assert set(file.dtypes) == {"uint8"}
                assert file.nodata is None
                assert tags["class_0"].startswith("none: ")
            else:
                assert set(file.dtypes) == {"float32"}
                assert math.isnan(file.nodata)


def test_statistics_are_those_of_the_cells(written: Written) -> None:
    grid, folder = written
    for name in NAMES:
        values = invented_values(grid, name).astype(np.float64).reshape(-1, *grid.shape)
        with rasterio.open(folder / "layers" / f"{name}.tif") as file:
            for index, band in enumerate(values, start=1):
                tags = file.tags(index)
                known = band[~np.isnan(band)]
                assert float(tags["STATISTICS_MINIMUM"]) == known.min()
                assert float(tags["STATISTICS_MAXIMUM"]) == known.max()
                assert float(tags["STATISTICS_MEAN"]) == pytest.approx(known.mean(), rel=1e-12)
                deviation = float(tags["STATISTICS_STDDEV"])
                assert deviation == pytest.approx(known.std(), rel=1e-12, abs=1e-12)
                if 1 < known.size < 1000 and known.std() > 0:
                    assert deviation != pytest.approx(known.std(ddof=1), rel=1e-6)
                share = float(tags["STATISTICS_VALID_PERCENT"])
                assert share == pytest.approx(100 * known.size / band.size)


def test_geotiff_and_netcdf_hold_the_cells_of_the_dataset(written: Written) -> None:
    grid, folder = written
    with xr.open_dataset(folder / "layers.nc") as dataset:
        assert set(NAMES) <= set(dataset.data_vars)
        for name in NAMES:
            source = invented_values(grid, name)
            np.testing.assert_array_equal(dataset[name].values, source)
            assert dataset[name].dtype == source.dtype
            with rasterio.open(folder / "layers" / f"{name}.tif") as file:
                np.testing.assert_array_equal(file.read().reshape(source.shape), source)


def test_a_named_place_has_one_value(written: Written) -> None:
    grid, folder = written
    row, column = grid.rows // 3, grid.columns // 2
    # Anywhere in the cell, well away from its centre.
    longitude = float(grid.longitudes[column]) + 0.4 * grid.longitude_step
    latitude = float(grid.latitudes[row]) - 0.4 * grid.latitude_step
    for name in ("rejected_flux", "monthly_surface_shortwave", "input_quality"):
        expected = invented_values(grid, name)[..., row, column]
        with rasterio.open(folder / "layers" / f"{name}.tif") as file:
            (sample,) = file.sample([(longitude, latitude)])
        np.testing.assert_array_equal(sample, np.atleast_1d(expected))
        with xr.open_dataset(folder / "layers.nc") as dataset:
            place = dataset[name].sel(latitude=latitude, longitude=longitude, method="nearest")
            np.testing.assert_array_equal(place.values, expected)
        with rasterio.open(f"netcdf:{folder / 'layers.nc'}:{name}") as file:
            (sample,) = file.sample([(longitude, latitude)])
        np.testing.assert_array_equal(sample, np.atleast_1d(expected))


def test_netcdf_coordinates_are_those_of_the_grid(written: Written) -> None:
    grid, folder = written
    with xr.open_dataset(folder / "layers.nc", decode_coords="all") as dataset:
        np.testing.assert_array_equal(dataset["latitude"], grid.latitudes)
        np.testing.assert_array_equal(dataset["longitude"], grid.longitudes)
        np.testing.assert_array_equal(dataset["month"], np.arange(1, 13))
        np.testing.assert_array_equal(dataset["latitude_bounds"][:, 0], grid.latitude_edges[:-1])
        np.testing.assert_array_equal(dataset["longitude_bounds"][:, 1], grid.longitude_edges[1:])
        assert dataset["rejected_flux"].encoding["grid_mapping"] == "crs"
        assert dataset["crs"].attrs["grid_mapping_name"] == "latitude_longitude"
        assert dataset.attrs["Conventions"] == "CF-1.11"
        assert dataset.attrs["history"] == ATTRIBUTES["history"]
        flags = dataset["input_quality"].attrs
        assert len(flags["flag_masks"]) == len(flags["flag_meanings"].split())
        assert dataset["rejected_flux"].attrs["cell_methods"] == "year: mean"
        known = invented_values(grid, "tilt")
        np.testing.assert_array_equal(
            dataset["tilt"].attrs["actual_range"], (np.nanmin(known), np.nanmax(known))
        )


def test_cog_validator_is_content(written: Written) -> None:
    _, folder = written
    for name in NAMES:
        valid, errors, warnings = cog_validate(folder / "layers" / f"{name}.tif", strict=True)
        assert valid, (name, errors, warnings)
        assert not errors
        assert not warnings


def test_cog_validator_would_refuse_a_plain_geotiff(tmp_path: Path) -> None:
    path = tmp_path / "plain.tif"
    shape = {"width": 1100, "height": 600, "count": 1, "dtype": "float32"}
    place = {"crs": "EPSG:4326", "transform": rasterio.Affine(0.1, 0, 0, 0, -0.1, 60)}
    with rasterio.open(path, "w", driver="GTiff", **shape, **place) as file:
        file.write(np.ones((1, 600, 1100), np.float32))
    assert not cog_validate(path, strict=True)[0]


def test_overviews_stay_within_the_data(region: Written) -> None:
    grid, folder = region
    for name, layer in layer_variables().items():
        values = invented_values(grid, name)
        path = folder / "layers" / f"{name}.tif"
        with rasterio.open(path) as file:
            levels = file.overviews(1)
        assert levels == [2]  # 600 columns, 512 to a tile
        with rasterio.open(path, overview_level=0) as file:
            small = file.read()
        assert small.shape[1:] == (75, 300)
        known = small[~np.isnan(small)]
        assert np.nanmin(values) <= known.min()
        assert known.max() <= np.nanmax(values)
        if layer.is_whole or layer.ramp in ("compass", "month"):
            assert set(known.tolist()) <= set(values[~np.isnan(values)].tolist())
        else:
            # Averaged, not picked: a mean scatters less than its cells.
            assert known.std() < 0.7 * np.nanstd(values)


def test_compass_overviews_do_not_turn_round(region: Written) -> None:
    _, folder = region
    with rasterio.open(folder / "layers" / "azimuth.tif", overview_level=0) as file:
        small = file.read(1)
    north = (small < 2) | (small >= 359)
    assert north[~np.isnan(small)].all()


needs_gdalinfo = pytest.mark.skipif(
    shutil.which("gdalinfo") is None, reason="the gdalinfo command is not installed"
)


def gdalinfo(name: str, *options: str) -> dict:
    command = ["gdalinfo", "-json", *options, name]
    return json.loads(subprocess.run(command, check=True, capture_output=True, text=True).stdout)


@needs_gdalinfo
def test_gdalinfo_reads_the_geotiff(written: Written) -> None:
    grid, folder = written
    a, b, c, d, e, f = grid.affine
    told = gdalinfo(str(folder / "layers" / "monthly_rejected_flux.tif"), "-mm")
    assert told["size"] == [grid.columns, grid.rows]
    assert told["geoTransform"] == pytest.approx([c, a, b, f, d, e], abs=1e-12)
    assert 'ID["EPSG",4326]' in told["coordinateSystem"]["wkt"]
    assert told["metadata"]["IMAGE_STRUCTURE"]["LAYOUT"] == "COG"
    july = told["bands"][6]
    assert july["description"] == "July"
    assert july["unit"] == "W m-2"
    assert july["noDataValue"] == "NaN"
    values = invented_values(grid, "monthly_rejected_flux")[6]
    assert july["computedMin"] == pytest.approx(np.nanmin(values), abs=1e-3)
    assert july["computedMax"] == pytest.approx(np.nanmax(values), abs=1e-3)


@needs_gdalinfo
def test_gdalinfo_places_the_netcdf_alike(written: Written) -> None:
    grid, folder = written
    a, b, c, d, e, f = grid.affine
    told = gdalinfo(f"NETCDF:{folder / 'layers.nc'}:monthly_rejected_flux")
    assert told["size"] == [grid.columns, grid.rows]
    assert told["geoTransform"] == pytest.approx([c, a, b, f, d, e], abs=1e-9)
    assert "WGS 84" in told["coordinateSystem"]["wkt"]
    assert told["bands"][6]["metadata"][""]["NETCDF_DIM_month"] == "7"
    assert told["bands"][6]["unit"] == "W m-2"


def compliance(path: Path) -> subprocess.CompletedProcess[str]:
    checker = Path(sys.executable).with_name("compliance-checker")
    command = [str(checker), "--test", "cf:1.11", str(path)]
    return subprocess.run(command, capture_output=True, text=True, check=False)


def test_compliance_checker_passes(written: Written, tmp_path: Path) -> None:
    _, folder = written
    report = compliance(folder / "layers.nc")
    assert report.returncode == 0, report.stdout
    assert "All tests passed!" in report.stdout


def test_compliance_checker_would_complain(region: Written, tmp_path: Path) -> None:
    _, folder = region
    broken = shutil.copy(folder / "layers.nc", tmp_path / "broken.nc")
    with netCDF4.Dataset(broken, "a") as file:
        file["rejected_flux"].units = "watts per hectare-moon"
        file["input_quality"].flag_meanings = "only_one"
    report = compliance(broken)
    assert report.returncode != 0
    assert "flag_meanings" in report.stdout
