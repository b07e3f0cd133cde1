"""The whole job on small invented files: what a release holds, and that nothing half-done shows."""

from __future__ import annotations

from pathlib import Path

import dask
import numpy as np
import pandas as pd
import pytest
import rasterio
import xarray as xr

import gridcool
from gridcool.cli import main
from gridcool.config import load_settings
from gridcool.engine.blocks import solve
from gridcool.engine.options import Panel, Sky
from gridcool.planning.ranking import COLUMNS
from gridcool.variables import engine_layers, layer_variables

SETTINGS = """
[job]
name = "Invented"
output = "out"
[inputs.albedo]
path = "albedo.nc"
[inputs.cloud_fraction]
path = "cloud.nc"
[inputs.temperature_range]
path = "range.nc"
[regions]
boxes = 10.0
[release]
keep = 2
"""


@pytest.fixture
def project(tmp_path: Path) -> Path:
    """A settings file with three small inputs: 4° cells, south first, 0 to 360."""
    latitude, longitude = np.arange(-38.0, 39, 4), np.arange(2.0, 360, 4)
    rng = np.random.default_rng(5)
    shape = (12, len(latitude), len(longitude))
    fields = {
        "albedo": ("albedo", rng.uniform(0.1, 0.4, shape), "1"),
        "cloud": ("cloud_fraction", rng.uniform(5, 95, shape), "%"),
        "range": ("temperature_range", rng.uniform(3, 16, shape), "K"),
    }
    fields["range"][1][:, :3] = np.nan  # no temperature range in the south
    fields["albedo"][1][:, :, :2] = np.nan
    for file, (name, values, units) in fields.items():
        dataset = xr.Dataset(
            {name: (("month", "lat", "lon"), values.astype(np.float32), {"units": units})},
            coords={"month": np.arange(1, 13), "lat": latitude, "lon": longitude},
        )
        dataset.to_netcdf(tmp_path / f"{file}.nc")
    path = tmp_path / "project.toml"
    path.write_text(SETTINGS, encoding="utf-8")
    return path


def test_a_release_holds_every_layer_and_the_table(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["screen", str(project)]) == 0
    shown = capsys.readouterr()
    current = project.parent / "out" / "current"
    assert str(current) in shown.out
    usual = [name for name in engine_layers() if not layer_variables()[name].on_request]
    usual.append("exclusion")
    assert sorted(p.stem for p in (current / "layers").iterdir()) == sorted(usual)
    table = pd.read_csv(current / "regions.csv")
    assert tuple(table.columns) == COLUMNS
    flux = table["rejected_flux_mean"].dropna()
    assert (flux.diff().dropna() <= 0).all()
    assert table["rank"].dropna().tolist() == list(range(1, len(flux) + 1))
    with xr.open_dataset(current / "layers.nc") as layers:
        assert float(layers["longitude"][0]) == -178
        assert float(layers["latitude"][0]) == 38
        quality = layers["input_quality"].values
        missing = np.isnan(layers["rejected_flux"].values)
        # Files count longitudes from 2° E: their first two columns are the 46th and 47th here.
        assert missing[:, 45:47].all()
        assert not missing[:, :45].any()
        assert (quality[:, 45:47] == 64).all()  # albedo_missing
        assert (quality[-3:, :45] == 1).all()  # from_cloud
        assert (quality[:-3, :45] == 4).all()  # from_blend


def test_tif_and_netcdf_agree_at_a_place(project: Path) -> None:
    assert main(["screen", str(project), "--quiet"]) == 0
    current = project.parent / "out" / "current"
    with (
        rasterio.open(current / "layers/monthly_rejected_flux.tif") as file,
        xr.open_dataset(current / "layers.nc") as layers,
    ):
        sample = next(file.sample([(-100.0, -14.0)]))
        cell = layers["monthly_rejected_flux"].sel(latitude=-14, longitude=-98, method="nearest")
        other = layers["monthly_rejected_flux"].sel(latitude=14, longitude=-98, method="nearest")
        row, column = file.index(-98.0, -14.0)
        assert (row, column) == (13, 20)
        np.testing.assert_array_equal(file.read()[:, row, column], cell.values)
        assert not np.array_equal(cell.values, other.values)
        assert len(sample) == 12


def test_old_releases_go_and_a_failed_run_changes_nothing(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    for _ in range(3):
        assert main(["screen", str(project), "--quiet"]) == 0
    out = project.parent / "out"
    assert len(list((out / "releases").iterdir())) == 2
    before = (out / "current").readlink()
    (project.parent / "cloud.nc").write_bytes(b"not what it was")
    capsys.readouterr()
    assert main(["screen", str(project)]) == 3
    assert "cloud.nc" in capsys.readouterr().err
    assert (out / "current").readlink() == before
    assert (out / "current/layers.nc").stat().st_size > 0
    assert not list((out / ".work").glob("staging-*"))


def test_check_says_what_was_understood(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", str(project)]) == 0
    shown = capsys.readouterr().out
    for piece in ("cloud_fraction", "%, as declared", "south first", "12 months", "target grid"):
        assert piece in shown


def test_the_python_door_is_lazy_and_agrees(project: Path) -> None:
    settings = load_settings(project)
    rng = np.random.default_rng(1)
    dims = ("month", "latitude", "longitude")
    dataset = xr.Dataset(
        {
            "albedo": (dims, rng.uniform(0.1, 0.4, (12, 4, 6)).astype(np.float32)),
            "cloud_fraction": (dims, rng.uniform(0, 1, (12, 4, 6)).astype(np.float32)),
        },
        coords={
            "month": np.arange(1, 13),
            "latitude": [60.0, 20.0, -20.0, -60.0],
            "longitude": np.arange(6.0),
        },
    ).chunk(latitude=2)

    def forbidden(*_: object, **__: object) -> None:
        raise AssertionError("computed too early")

    with dask.config.set(scheduler=forbidden):
        lazy = gridcool.screen(dataset, settings)
    assert lazy["rejected_flux"].chunks == ((2, 2), (6,))
    direct = solve(dataset.compute(), Panel(0.92 * 0.97), Sky())
    for name in ("rejected_flux", "tilt", "monthly_surface_shortwave"):
        np.testing.assert_array_equal(lazy[name].values, direct[name].values)


@pytest.mark.parametrize("rows", [1, 3, 7])
def test_strips_do_not_change_the_result(rows: int) -> None:
    rng = np.random.default_rng(2)
    dims = ("month", "latitude", "longitude")
    dataset = xr.Dataset(
        {
            "albedo": (dims, rng.uniform(0.1, 0.9, (12, 7, 2100)).astype(np.float32)),
            "cloud_fraction": (dims, rng.uniform(0, 1, (12, 7, 2100)).astype(np.float32)),
            "elevation": (dims[1:], rng.uniform(0, 4000, (7, 2100)).astype(np.float32)),
        },
        coords={
            "month": np.arange(1, 13),
            "latitude": np.linspace(70, -50, 7),
            "longitude": np.linspace(-180, 179, 2100),
        },
    )
    whole = solve(dataset, sky=Sky(irradiance="cloud")).compute()
    cut = solve(dataset.chunk(latitude=rows), sky=Sky(irradiance="cloud")).compute()
    xr.testing.assert_identical(whole, cut)
