"""Run the main job on real open data and print how it compares with independent figures.

    python scripts/real_data_report.py FOLDER [OUTPUT]

FOLDER holds satellite/, laos/ and climate_model/ as described where the data come from; they are
not part of the project. OUTPUT (default: a temporary folder) takes the releases.
"""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from gridcool.config import Settings, settings_from
from gridcool.engine.blocks import solve
from gridcool.engine.options import Sky
from gridcool.grid import Bounds, grid_from_bounds
from gridcool.inputs.load import load_inputs
from gridcool.inputs.spec import InputSpec
from gridcool.pipeline import screen
from gridcool.planning.ranking import mean_orientation
from gridcool.products.reading import read_layer

SOURCES = ("cloud", "temperature-range", "blend")


class Quiet:
    """No progress."""

    def stage(self, text: str) -> None:
        """Say nothing."""

    def advance(self, done: int, total: int) -> None:
        """Say nothing."""


def country(data: Path, output: Path, irradiance: str) -> Settings:
    """The country case: coarse albedo and cloud, fine temperatures and elevation."""
    fine = str(data / "laos/terraclimate_monthly.nc")
    raw: dict[str, Any] = {
        "job": {"name": "Country case", "output": str(output / irradiance)},
        "inputs": {
            "albedo": {"path": str(data / "satellite/albedo.nc"), "variable": "albedo"},
            "cloud_fraction": {
                "path": str(data / "satellite/isccp_total_cloud.nc"),
                "variable": "clt",
            },
            "temperature_maximum": {"path": fine, "variable": "tasmax"},
            "temperature_minimum": {"path": fine, "variable": "tasmin"},
            "elevation": {"path": str(data / "laos/elevation.tif")},
        },
        "grid": {"like": "temperature_maximum"},
        "sky": {"irradiance": irradiance},
    }
    return settings_from(raw)


def report_country(data: Path, output: Path) -> None:
    """National means, and surface irradiance against the file's own."""
    with xr.open_dataset(data / "laos/terraclimate_monthly.nc") as file:
        inside = np.isfinite(file["tasmax"].values).all(axis=0)
        witness = file["rsds"].values
        weight = np.cos(np.deg2rad(file["lat"].values))[:, None] * inside
    for irradiance in SOURCES:
        release = screen(country(data, output, irradiance), Quiet()).release
        layers = {n: read_layer(release, n) for n in ("rejected_flux", "tilt", "azimuth")}
        ground = read_layer(release, "monthly_surface_shortwave")
        use = inside & np.isfinite(layers["rejected_flux"])
        flux = np.average(layers["rejected_flux"][use], weights=weight[use])
        tilt, azimuth = mean_orientation(layers["tilt"][use], layers["azimuth"][use], weight[use])
        error = (ground - witness)[:, use]
        print(
            f"country, {irradiance}: F {flux:.1f} W m-2, tilt {tilt:.1f}, azimuth {azimuth:.0f}; "
            f"irradiance against the file's rsds (mean {witness[:, use].mean():.0f}): "
            f"bias {error.mean():+.1f}, rms {np.sqrt((error**2).mean()):.1f} W m-2 "
            f"({use.sum()} cells)"
        )


def report_clear_sky(data: Path) -> None:
    """Zonal monthly clear-sky irradiance against a climate model's own."""
    folder = data / "climate_model"
    paths = [next(folder.glob(f"{name}_*.nc")) for name in ("rsuscs", "rsdscs")]
    grid = grid_from_bounds(Bounds(-180, -90, 180, 90), 1.875)
    albedo = InputSpec("albedo", paths[0], "rsuscs", None, "utc", paths[1], "rsdscs", 5.0)
    truth = InputSpec("surface_shortwave", paths[1], "rsdscs")
    dataset = load_inputs([albedo, truth], grid, 24).dataset
    ground = dataset["albedo"].fillna(0.7)
    clear = xr.Dataset({"albedo": ground, "cloud_fraction": xr.zeros_like(ground)})
    model = solve(clear, sky=Sky(irradiance="cloud"))["monthly_surface_shortwave"]
    ours = model.mean("longitude").compute()
    theirs = dataset["surface_shortwave"].mean("longitude").compute()
    weight = xr.DataArray(grid.row_areas(), dims="latitude", coords={"latitude": ours.latitude})
    error = ours - theirs
    means = [float(f.weighted(weight).mean()) for f in (ours, theirs)]
    rms = float(np.sqrt((error**2).weighted(weight).mean()))
    print(
        f"clear sky, zonal months: global mean {means[0]:.1f} against {means[1]:.1f} W m-2, "
        f"bias {means[0] - means[1]:+.1f}, area-weighted rms {rms:.1f}, "
        f"unweighted rms {float(np.sqrt((error**2).mean())):.1f}"
    )


def report_globe(data: Path, output: Path) -> None:
    """The globe with albedo as a ratio, cloud between 60°S and 60°N, no temperature range."""
    folder = data / "climate_model"
    up, down = (str(next(folder.glob(f"{name}_*.nc"))) for name in ("rsuscs", "rsdscs"))
    raw: dict[str, Any] = {
        "job": {"name": "Globe", "output": str(output / "globe")},
        "inputs": {
            "albedo": {
                "path": up,
                "variable": "rsuscs",
                "divisor_path": down,
                "divisor_variable": "rsdscs",
            },
            "cloud_fraction": {
                "path": str(data / "satellite/isccp_total_cloud.nc"),
                "variable": "clt",
            },
        },
        "grid": {"resolution": 1.875},
    }
    release = screen(settings_from(raw), Quiet()).release
    flux = read_layer(release, "rejected_flux")
    quality = read_layer(release, "input_quality")
    area = np.broadcast_to(
        grid_from_bounds(Bounds(-180, -90, 180, 90), 1.875).row_areas()[:, None], flux.shape
    )
    known = np.isfinite(flux)
    print(
        f"globe: mean F {np.average(flux[known], weights=area[known]):.1f} W m-2 over "
        f"{100 * area[known].sum() / area.sum():.0f} % of the Earth; from cloud alone "
        f"{100 * (quality[known] & 1).mean():.0f} % of those cells, irradiance missing "
        f"{(quality & 128 > 0).sum()} cells of {flux.size}; in {release}"
    )


def main() -> None:
    """Print everything."""
    data = Path(sys.argv[1])
    with tempfile.TemporaryDirectory() as scratch:
        output = Path(sys.argv[2] if len(sys.argv) > 2 else scratch)
        report_country(data, output)
        report_globe(data, output)
    report_clear_sky(data)


if __name__ == "__main__":
    main()
