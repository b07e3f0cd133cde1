"""Files of several years: their mean, and how much the years' spread adds to the uncertainty."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from gridcool.engine.blocks import solve
from gridcool.engine.options import Sky
from gridcool.inputs.load import load_inputs, target_grid
from gridcool.inputs.spec import InputSpec

LATITUDE, LONGITUDE = np.arange(30.0, -31, -20), np.arange(-170.0, 180, 20)
YEARS = 9


def series(
    folder: Path, name: str, spread: float, years: int = YEARS
) -> tuple[InputSpec, np.ndarray]:
    """A file of monthly fields that differ from year to year, and its values."""
    rng = np.random.default_rng(3)
    shape = (years, 12, len(LATITUDE), len(LONGITUDE))
    values = 0.3 + 0.02 * np.arange(12)[:, None, None] + spread * rng.standard_normal(shape)
    values = np.clip(values, 0.01, 0.95).astype(np.float32)
    time = np.arange(12 * years)
    path = folder / f"{name}_{spread}.nc"
    xr.Dataset(
        {name: (("time", "lat", "lon"), values.reshape(-1, *shape[2:]), {"units": "1"})},
        coords={
            "time": ("time", time, {"units": "months since 2001-01-01", "calendar": "standard"}),
            "lat": LATITUDE,
            "lon": LONGITUDE,
        },
    ).to_netcdf(path)
    return InputSpec(name, path), values


def test_mean_and_standard_error_of_the_months(tmp_path: Path) -> None:
    spec, values = series(tmp_path, "albedo", 0.03)
    grid = target_grid([spec], "albedo", None, None)
    dataset = load_inputs([spec], grid, 2).dataset.compute()
    np.testing.assert_allclose(dataset["albedo"], values.mean(axis=0), rtol=1e-5)
    expected = values.std(axis=0, ddof=1) / np.sqrt(YEARS)
    np.testing.assert_allclose(dataset["albedo_standard_error"], expected, rtol=1e-3)


def test_a_single_year_tells_no_spread(tmp_path: Path) -> None:
    spec, _ = series(tmp_path, "albedo", 0.03, years=1)
    grid = target_grid([spec], "albedo", None, None)
    assert set(load_inputs([spec], grid, 2).dataset) == {"albedo"}


@pytest.mark.parametrize("varying", ["albedo", "cloud_fraction"])
def test_the_spread_feeds_the_uncertainty(tmp_path: Path, varying: str) -> None:
    """Twice the spread makes about twice the part, and nothing else changes."""
    sky = Sky(irradiance="cloud")
    parts = []
    for spread in (0.01, 0.02):
        spec, _ = series(tmp_path, varying, spread)
        steady = "cloud_fraction" if varying == "albedo" else "albedo"
        grid = target_grid([spec], varying, None, None)
        dataset = load_inputs([spec], grid, 2).dataset
        dataset[steady] = xr.full_like(dataset[varying], 0.3)
        wanted = ["uncertainty_years", "uncertainty_albedo"]
        parts.append(solve(dataset, sky=sky, extra_layers=wanted).compute())
    few, many = (part["uncertainty_years"].values for part in parts)
    assert (few > 0.01).all()
    np.testing.assert_allclose(many / few, 2, rtol=0.1)
    for part in parts:
        rest = part["flux_uncertainty"] ** 2 - part["uncertainty_years"] ** 2
        assert (rest > 0).all()
    without = solve(dataset.drop_vars(f"{varying}_standard_error"), sky=sky, extra_layers=wanted)
    assert float(without["uncertainty_years"].max()) == 0
    np.testing.assert_array_equal(without["rejected_flux"], parts[1]["rejected_flux"])
