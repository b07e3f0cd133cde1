"""Real files as they come: each is read right or refused in one clear sentence.

The files and their origins are described in ../shared/data/README.md, beside a checkout; without
them these tests are skipped.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gridcool.errors import InputDataError
from gridcool.grid import Bounds, Grid, grid_from_bounds
from gridcool.inputs.field import open_field
from gridcool.inputs.gridding import gridding_to
from gridcool.inputs.load import describe, load_inputs, target_grid
from gridcool.inputs.spec import InputSpec

DATA = Path(__file__).parents[2] / "shared" / "data"
pytestmark = pytest.mark.skipif(
    not DATA.is_dir(), reason="the real data are not beside this checkout"
)

REFUSED = [
    ("albedo", "albedo_july_plain_text.alb", None, "plain text, not NetCDF, GeoTIFF or Zarr"),
    ("temperature_maximum", "calendar_360_day.nc", None, "do not touch each other"),
    ("temperature_maximum", "calendar_noleap.nc", None, "January 1850 only"),
    ("temperature_maximum", "projected_stereographic.nc", None, "projected grid; bring it to"),
    ("temperature_maximum", "rotated_pole.nc", None, "rotated grid; bring it to"),
    ("surface_shortwave", "unstructured_icon.nc", "rsdt", "bring it to a regular"),
    ("precipitable_water", "two_fill_values.nc", None, "several variables"),
    ("precipitable_water", "two_fill_values.nc", "PREH2O", "479 of 8192 values are outside"),
    ("elevation", "lon_20_to_380.cdf", None, "worst -7473 at 44.50 N, 151.50 E"),
    (
        "temperature_maximum",
        "sunshine_half_degree_corner_labelled.nc",
        "temp",
        'units = "0.1 degC"',
    ),
]


@pytest.mark.parametrize(("name", "file", "variable", "piece"), REFUSED)
def test_refused_in_one_sentence(name: str, file: str, variable: str | None, piece: str) -> None:
    report = describe(InputSpec(name, DATA / "messy" / file, variable))
    assert len(report.errors) == 1
    assert file in report.errors[0]
    assert piece in report.errors[0]
    assert report.errors[0].endswith(".")


def at(spec: InputSpec, latitude: float, longitude: float, size: float = 1e-3) -> np.ndarray:
    """Twelve months, or one field, of the cell at a place."""
    grid = Grid(longitude - size / 2, latitude + size / 2, size, size, 1, 1)
    field = open_field(spec)
    gridding = gridding_to(grid, field.latitude, field.longitude)
    rows = gridding.source_rows(slice(0, 1))
    return gridding.apply(field.read(rows), slice(0, 1), rows)[:, 0, 0]


def test_percent_and_months_since_a_date() -> None:
    path = DATA / "messy" / "clt_percent_bare_time.nc"
    with xr.open_dataset(path, decode_times=False) as file:
        cell = file["clt"].isel(latitude=23, longitude=10)
        latitude, longitude = float(cell["latitude"]), float(cell["longitude"])
        means = cell.values.reshape(10, 12).mean(axis=0) / 100
    # Interpolation at a cell's centre gives that cell.
    ours = at(InputSpec("cloud_fraction", path), latitude, longitude)
    np.testing.assert_allclose(ours, means, rtol=1e-5)
    assert describe(InputSpec("cloud_fraction", path)).years == 10


def test_gaussian_latitudes_and_kelvin() -> None:
    path = DATA / "messy" / "gaussian_grid.nc"
    with xr.open_dataset(path, decode_times=False) as file:
        cell = file["tas"].isel(lat=60, lon=20)
        place = float(cell["lat"]), float(cell["lon"])
        expected = cell.values - 273.15
    ours = at(InputSpec("temperature_maximum", path), *place)
    np.testing.assert_allclose(ours, expected, atol=2e-4)
    with pytest.raises(InputDataError, match=r"cannot be the target grid; set \[grid\] resolution"):
        target_grid([InputSpec("other", path, "tas")], "other", None, None)


def test_packed_integers() -> None:
    path = DATA / "messy" / "packed_uint16.nc"
    with xr.open_dataset(path) as file:
        cell = file["air_temperature"].isel(lat=300, lon=700)
        place, expected = (float(cell["lat"]), float(cell["lon"])), float(cell) - 273.15
    ours = at(InputSpec("temperature_maximum", path), *place)
    np.testing.assert_allclose(ours, expected, atol=2e-4)
    assert len(ours) == 1  # one annual field


def test_corner_labels_and_tenths_of_degrees() -> None:
    path = DATA / "messy" / "sunshine_half_degree_corner_labelled.nc"
    spec = InputSpec("temperature_maximum", path, "temp", "0.1 degC")
    report = describe(spec)
    assert report.bounds == Bounds(-180, -90, 180, 90)
    with xr.open_dataset(path, decode_times=False, mask_and_scale=False) as file:
        cell = file["temp"].sel(lat=45.0, lon=10.0)
        expected = cell.values / 10
    # The label is the south-western corner of the cell.
    np.testing.assert_allclose(at(spec, 45.25, 10.25), expected, atol=1e-5)


def test_shares_summed_beyond_one_are_rounded_off_and_reported() -> None:
    spec = InputSpec("cloud_fraction", DATA / "satellite/isccp_total_cloud.nc", "clt")
    report = describe(spec)
    assert not report.errors
    assert any("beyond 0 to 1 by rounding" in text for text in report.warnings)
    grid = target_grid([spec], "cloud_fraction", None, None)
    values = load_inputs([spec], grid, 8).dataset["cloud_fraction"].values
    assert np.nanmax(values) == 1.0
    assert grid.west == pytest.approx(-182.8125 + 5.625)


def test_albedo_as_a_ratio_knows_desert_from_sea() -> None:
    folder = DATA / "climate_model"
    up, down = (next(folder.glob(f"{name}_*.nc")) for name in ("rsuscs", "rsdscs"))
    spec = InputSpec("albedo", up, "rsuscs", None, "utc", down, "rsdscs", 5.0)
    grid = grid_from_bounds(Bounds(-180, -90, 180, 90), 5.0)
    albedo = load_inputs([spec], grid, 12).dataset["albedo"].mean("month")
    sahara = float(albedo.sel(latitude=22.5, longitude=7.5))
    pacific = float(albedo.sel(latitude=2.5, longitude=-147.5))
    antarctica = float(albedo.sel(latitude=-82.5, longitude=2.5))
    assert pacific < 0.1 < 0.25 < sahara < 0.5 < antarctica < 0.95


def test_geotiff_and_netcdf_of_one_country_lie_on_each_other() -> None:
    temperature = InputSpec("temperature_maximum", DATA / "laos/terraclimate_monthly.nc", "tasmax")
    lower = InputSpec("temperature_minimum", DATA / "laos/terraclimate_monthly.nc", "tasmin")
    elevation = InputSpec("elevation", DATA / "laos/elevation.tif")
    specs = [temperature, lower, elevation]
    grid = target_grid(specs, "temperature_maximum", None, None)
    loaded = load_inputs(specs, grid, 50)
    assert {r.regridding for r in loaded.reports} == {"unchanged"}
    assert "temperature_maximum" not in loaded.dataset
    span = loaded.dataset["temperature_range"].mean("month")
    height = loaded.dataset["elevation"]
    known = np.isfinite(span.values)
    with xr.open_dataset(DATA / "laos/terraclimate_monthly.nc") as file:
        expected = (file["tasmax"] - file["tasmin"]).mean("month").values
        warmth = file["tasmax"].mean("month").values
    np.testing.assert_allclose(span.values[known], expected[known], atol=1e-4)
    # Air cools by 5 to 7 K a kilometre (common practice); flipped maps would not show it.
    slope = np.polyfit(height.values[known], warmth[known], 1)[0]
    assert -0.0075 < slope < -0.0045
    flipped = np.polyfit(height.values[::-1][known], warmth[known], 1)[0]
    assert flipped > -0.004
