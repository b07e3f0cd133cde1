"""Inputs that are the ratio of two variables: both must be of the same cells, months and hours."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gridcool.inputs.field import open_field
from gridcool.inputs.load import describe
from gridcool.inputs.spec import InputSpec

LATITUDE, LONGITUDE = np.arange(40.0, -41, -20), np.arange(10.0, 100, 20)
HOURS = np.arange(1.5, 24, 3)
MONTHS = np.arange(12)


def write(
    path: Path,
    name: str,
    level: float,
    *,
    latitude: np.ndarray = LATITUDE,
    longitude: np.ndarray = LONGITUDE,
    time: np.ndarray | None = MONTHS,
    since: str = "2001-01-01",
    hour: np.ndarray | None = None,
) -> Path:
    """An invented flux that grows eastwards."""
    axes = {"lat": latitude, "lon": longitude}
    if hour is not None:
        axes = {"hour": hour, **axes}
    if time is not None:
        axes = {"time": ("time", time, {"units": f"months since {since}"}), **axes}
    shape = [len(time)] if time is not None else []
    shape += [8] if hour is not None else []
    values = np.broadcast_to(level + longitude, (*shape, len(latitude), len(longitude)))
    xr.Dataset({name: (tuple(axes), values, {"units": "W m-2"})}, coords=axes).to_netcdf(path)
    return path


def ratio(folder: Path, name: str = "albedo", **divisor: object) -> InputSpec:
    hour = HOURS if "hour" in divisor else None
    up = write(folder / "up.nc", "up", 0.0, hour=hour)
    down = write(folder / "down.nc", "down", 100.0, **divisor)  # type: ignore[arg-type]
    return InputSpec(name, up, "up", divisor_path=down, divisor_variable="down")


def test_the_same_cells_are_divided(tmp_path: Path) -> None:
    spec = ratio(tmp_path)
    assert not describe(spec).findings
    values = open_field(spec).read(slice(0, 5))
    np.testing.assert_allclose(values[7, 2], LONGITUDE / (LONGITUDE + 100), rtol=1e-6)


def test_another_order_is_no_other_grid(tmp_path: Path) -> None:
    spec = ratio(tmp_path, latitude=LATITUDE[::-1], longitude=(LONGITUDE + 1e-5)[::-1])
    assert not describe(spec).errors
    values = open_field(spec).read(slice(0, 5))
    np.testing.assert_allclose(values[7, 2], LONGITUDE / (LONGITUDE + 100), rtol=1e-5)


@pytest.mark.parametrize(
    ("divisor", "piece"),
    [
        ({"latitude": LATITUDE + 1}, "latitudes 41 to -39 (5) instead of 40 to -40 (5)"),
        ({"longitude": LONGITUDE + 180}, "longitudes 190 to 270 (5) instead of 10 to 90 (5)"),
        ({"longitude": LONGITUDE[:4]}, "longitudes 10 to 70 (4) instead of 10 to 90 (5)"),
        ({"latitude": LATITUDE / 2}, "latitudes 20 to -20 (5) instead of 40 to -40 (5)"),
        ({"time": None}, "has one field instead of 12 months"),
    ],
)
def test_other_cells_or_months_are_refused(
    tmp_path: Path, divisor: dict[str, object], piece: str
) -> None:
    report = describe(ratio(tmp_path, **divisor))
    assert len(report.errors) == 1
    assert piece in report.errors[0]
    assert "up.nc" in report.errors[0]
    assert "down.nc" in report.errors[0]


@pytest.mark.parametrize(("shift", "refused"), [(0.0, False), (1.5, True)])
def test_hours_must_agree(tmp_path: Path, shift: float, refused: bool) -> None:
    report = describe(ratio(tmp_path, "cloud_fraction", hour=HOURS + shift))
    assert bool(report.errors) == refused
    assert not refused or "has other hours" in report.errors[0]


def test_local_hours_of_both_parts(tmp_path: Path) -> None:
    spec = ratio(tmp_path, "cloud_fraction", hour=HOURS)
    local = InputSpec(spec.name, spec.path, "up", None, "local-solar", spec.divisor_path, "down")
    assert not describe(local).errors


def test_other_years_are_said(tmp_path: Path) -> None:
    warnings = describe(ratio(tmp_path, since="2010-01-01")).warnings
    assert len(warnings) == 1
    assert "divides 12 months of 2001 by 12 months of 2010" in warnings[0]
