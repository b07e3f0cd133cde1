"""Hour axes and fields that do not change with time."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gridcool.inputs.field import open_field
from gridcool.inputs.hours import read_hours
from gridcool.inputs.load import describe
from gridcool.inputs.spec import InputSpec

BEGINNINGS = np.arange(0.0, 24, 3)


def diurnal(path: Path, *, bounded: bool) -> InputSpec:
    """Cloud whose hours are labelled by their beginning, at 0 and 90 E."""
    values = np.broadcast_to((np.arange(8) / 10)[:, None, None], (12, 8, 2, 2))
    dataset = xr.Dataset(
        {"clt": (("month", "hour", "lat", "lon"), values, {"units": "1"})},
        coords={
            "month": np.arange(1, 13),
            "hour": ("hour", BEGINNINGS, {"units": "hours"}),
            "lat": [10.0, -10.0],
            "lon": [0.0, 90.0],
        },
    )
    if bounded:
        dataset["hour"].attrs["bounds"] = "hour_bounds"
        pairs = np.stack([BEGINNINGS, BEGINNINGS + 3], axis=1)
        dataset["hour_bounds"] = (("hour", "two"), pairs)
    dataset.to_netcdf(path)
    return InputSpec("cloud_fraction", path, hours="utc")


def test_hours_with_bounds_are_bins(tmp_path: Path) -> None:
    """The bin from 0 to 3 is centred at 1:30, where local bins lie: nothing is mixed."""
    values = open_field(diurnal(tmp_path / "c.nc", bounded=True)).read(slice(0, 2))
    np.testing.assert_allclose(values[0, :, 0, 0], np.arange(8) / 10, rtol=1e-6)
    # 90 E is six hours, two bins, ahead.
    np.testing.assert_allclose(values[0, :, 0, 1], np.roll(np.arange(8), 2) / 10, rtol=1e-6)


def test_hours_without_bounds_are_middles(tmp_path: Path) -> None:
    values = open_field(diurnal(tmp_path / "c.nc", bounded=False)).read(slice(0, 2))
    np.testing.assert_allclose(values[0, :7, 0, 0], np.arange(0.5, 7) / 10, rtol=1e-5)


def test_a_bin_over_midnight() -> None:
    middles = np.arange(0.0, 24, 3)
    bounds = np.stack([(middles - 1.5) % 24, (middles + 1.5) % 24], axis=1)
    assert bounds[0].tolist() == [22.5, 1.5]
    hours = read_hours(8, middles + 0.7, bounds, "utc")
    assert hours.first % 24 == pytest.approx(0.0)


def test_elevation_with_several_steps_gets_its_own_advice(tmp_path: Path) -> None:
    xr.Dataset(
        {"orog": (("time", "lat", "lon"), np.ones((5, 2, 2)), {"units": "m"})},
        coords={"lat": [10.0, -10.0], "lon": [0.0, 90.0]},
    ).to_netcdf(tmp_path / "orog.nc")
    errors = describe(InputSpec("elevation", tmp_path / "orog.nc")).errors
    assert len(errors) == 1
    assert "has 5 steps along time, but elevation does not change with time" in errors[0]
    assert "twelve" not in errors[0]
