"""Which stored numbers count as values: valid ranges, infinite ones, and shares called percent."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import pytest
import xarray as xr

from gridcool.errors import InputDataError
from gridcool.inputs.field import open_field
from gridcool.inputs.load import describe
from gridcool.inputs.packing import packing_from
from gridcool.inputs.spec import InputSpec

LATITUDE, LONGITUDE = np.arange(40.0, -41, -20), np.arange(10.0, 100, 20)
I2, F4, F8 = np.int16, np.float32, np.float64


@pytest.mark.parametrize(
    ("attributes", "dtype", "stored", "kept"),
    [
        ({"valid_range": np.array([0, 100], I2)}, "i2", [-1, 0, 100, 101], [0, 1, 1, 0]),
        ({"valid_min": I2(0)}, "i2", [-1, 0, 32767], [0, 1, 1]),
        ({"valid_max": I2(100)}, "i2", [-5, 100, 101], [1, 1, 0]),
        ({"valid_min": I2(0), "valid_max": I2(9)}, "i2", [-1, 3, 10], [0, 1, 0]),
        # Of the stored numbers' type: about stored numbers.
        (
            {"valid_range": np.array([0, 100], I2), "scale_factor": 0.01},
            "i2",
            [1, 100, 101],
            [1, 1, 0],
        ),
        # Of the wider type of the packing: about values.
        ({"valid_range": np.array([0.0, 0.29]), "scale_factor": 0.01}, "i2", [29, 30], [1, 0]),
        ({"valid_max": 0.29, "scale_factor": -0.01}, "i2", [-29, -30, 5], [1, 0, 1]),
        ({"valid_max": 300.0, "add_offset": 270.0}, "i2", [30, 31], [1, 0]),
        # Single precision data: 0.3 is not beyond 0.3.
        ({"valid_max": F8(0.3)}, "f4", [0.3, 0.31, 1e20], [1, 0, 0]),
        ({"valid_range": np.array([0, 1], F4)}, "f4", [0, 1, 1.1, np.inf], [1, 1, 0, 0]),
        (
            {"valid_range": np.array([0, -6], np.int8), "_Unsigned": "true"},
            "i1",
            [5, -6, -5],
            [1, 1, 0],
        ),
        ({"valid_range": np.array([np.nan, 1])}, "f8", [-9, 1, 2], [1, 1, 0]),
    ],
)
def test_values_outside_the_valid_range_are_missing(
    attributes: dict[str, Any], dtype: str, stored: list[float], kept: list[int]
) -> None:
    values = packing_from(attributes, dtype).unpack(np.array(stored, dtype))
    np.testing.assert_array_equal(np.isfinite(values), np.array(kept, bool))


def test_a_valid_range_of_one_number_is_refused() -> None:
    with pytest.raises(InputDataError, match="valid_range has 1 numbers instead of 2"):
        packing_from({"valid_range": I2(3)}, "i2")


def test_an_infinite_fill_value_is_a_fill_value() -> None:
    values = packing_from({"_FillValue": F4(np.inf)}, "f4").unpack(np.array([1, np.inf], F4))
    np.testing.assert_array_equal(values, [1, np.nan])


def write(
    path: Path, values: np.ndarray, units: str = "1", dtype: str = "f4", chunked: bool = False
) -> Path:
    with netCDF4.Dataset(path, "w") as file:
        axes = {"time": np.arange(len(values)), "lat": LATITUDE, "lon": LONGITUDE}
        for name, labels in axes.items():
            file.createDimension(name, len(labels))
            file.createVariable(name, "f8", (name,))[:] = labels
        file["time"].units = "months since 2001-01-01"
        clt = file.createVariable("clt", dtype, tuple(axes), zlib=chunked, contiguous=not chunked)
        clt.units = units
        clt[:] = values
    return path


def cloud(months: int = 12) -> np.ndarray:
    return np.random.default_rng(1).uniform(0.2, 0.9, (months, 5, 5))


@pytest.mark.parametrize("chunked", [False, True])
@pytest.mark.parametrize("months", [12, 36])
def test_infinite_values_are_counted_and_placed(tmp_path: Path, months: int, chunked: bool) -> None:
    """Also where two of different sign fall on one month of two years."""
    values = cloud(months)
    values[6, 3, 2] = np.inf
    values[-1, 4, 4] = -np.inf
    if months == 36:
        values[18, 3, 2] = -np.inf
    path = write(tmp_path / "c.nc", values, chunked=chunked)
    errors = describe(InputSpec("cloud_fraction", path)).errors
    assert len(errors) == 1
    assert "2 values are infinite, the first at -20.00 N, 50.00 E in July" in errors[0]
    assert "missing; check" not in errors[0]


def test_all_infinite_is_not_all_missing(tmp_path: Path) -> None:
    path = write(tmp_path / "c.nc", np.full((12, 5, 5), np.inf))
    assert "300 values are infinite" in describe(InputSpec("cloud_fraction", path)).errors[0]


def test_too_large_for_single_precision_is_infinite(tmp_path: Path) -> None:
    values = cloud()
    values[0, 0, 0] = 1e300
    path = write(tmp_path / "c.nc", values, dtype="f8")
    assert "1 value is infinite" in describe(InputSpec("cloud_fraction", path)).errors[0]


def test_an_infinite_divisor_makes_no_nought(tmp_path: Path) -> None:
    up = write(tmp_path / "up.nc", cloud(), "W m-2")
    values = cloud() * 100 + 10
    values[3, 1, 1] = np.inf
    down = write(tmp_path / "down.nc", values, "W m-2")
    spec = InputSpec("albedo", up, divisor_path=down, divisor_variable="clt")
    assert "1 value is infinite, the first at 20.00 N, 30.00 E in April" in describe(spec).errors[0]


def test_fractions_called_percent_are_refused(tmp_path: Path) -> None:
    path = write(tmp_path / "c.nc", cloud(), "%")
    errors = describe(InputSpec("cloud_fraction", path)).errors
    assert len(errors) == 1
    assert 'its unit is "%", but its largest value is 0.8' in errors[0]
    # Each way out that the message names works.
    assert not describe(InputSpec("cloud_fraction", path, units="1")).findings
    sure = describe(InputSpec("cloud_fraction", path, units="percent"))
    assert not sure.errors
    assert len(sure.warnings) == 1


def test_percent_is_percent(tmp_path: Path) -> None:
    path = write(tmp_path / "c.nc", 100 * cloud(), "%")
    assert not describe(InputSpec("cloud_fraction", path)).findings


def test_corner_labels_are_said_once_per_axis(tmp_path: Path) -> None:
    path = tmp_path / "c.nc"
    latitude, longitude = np.arange(-90.0, 90, 10), np.arange(-180.0, 180, 10)
    values = np.random.default_rng(0).uniform(0.2, 0.9, (18, 36))
    xr.Dataset(
        {"clt": (("lat", "lon"), values, {"units": "1"})},
        coords={"lat": latitude, "lon": longitude},
    ).to_netcdf(path)
    warnings = describe(InputSpec("cloud_fraction", path)).warnings
    assert len(warnings) == 2
    assert "latitudes label an edge of each cell; moved by half a cell" in warnings[0]
    assert "longitudes label the western edge of each cell; moved by half a cell" in warnings[1]
    field = open_field(InputSpec("cloud_fraction", path))
    assert field.longitude.centres[0] == -175
    assert field.latitude.centres[0] == 85
