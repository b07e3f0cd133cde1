"""How the flux depends on what is assumed, and how its flat limit compares with an albedo kernel.

    python scripts/physics_report.py [FOLDER]

First a table of flux and tilt at six invented climates when one assumption is changed. With FOLDER
(holding satellite/ with real albedo and cloud), the flux of a flat matte panel per unit of albedo
change against the kernel of Bright & O'Halloran (2019), SW√(SW/SW_toa), over the globe.
"""

from __future__ import annotations

import sys
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from gridcool.engine.blocks import solve
from gridcool.engine.options import Panel, Sky
from gridcool.inputs.load import load_inputs, target_grid
from gridcool.inputs.spec import InputSpec
from gridcool.physics import sun

DIMS = ("month", "latitude", "longitude")
MONTHS = np.arange(12)
# Latitude, elevation, water (kg m-2), aerosol, then albedo and cloud as mean and winter excess.
CLIMATES: Mapping[str, tuple[float, ...]] = {
    "desert 23 N": (23, 400, 15, 0.25, 0.35, 0.0, 0.20, 0.10),
    "humid tropics 3 S": (-3, 100, 50, 0.15, 0.14, 0.0, 0.68, 0.03),
    "monsoon 18 N": (18, 200, 38, 0.35, 0.17, 0.0, 0.48, -0.28),
    "maritime 51 N": (51, 50, 16, 0.12, 0.17, 0.0, 0.68, 0.06),
    "snowy plain 50 N": (50, 200, 14, 0.12, 0.30, 0.30, 0.56, 0.12),
    "high plateau 33 N": (33, 4500, 5, 0.05, 0.24, 0.05, 0.42, -0.12),
}
SKIES: Mapping[str, dict[str, float]] = {
    "ν 0.5": {"cloud_concentration": 0.5},
    "ν 2": {"cloud_concentration": 2.0},
    "t_c 0.17": {"overcast_transmittance": 0.17},
    "t_c 0.27": {"overcast_transmittance": 0.27},
    "R_c 0.58": {"overcast_reflectance": 0.58},
    "R_c 0.73": {"overcast_reflectance": 0.73},
}
PANELS: Mapping[str, dict[str, float]] = {
    "back face 0": {"back_reflectance": 0.0},
    "back face 0.9": {"back_reflectance": 0.9},
    "half matte": {"specular_share": 0.5},
    "matte": {"specular_share": 0.0},
}
AIRS: Mapping[str, dict[str, float]] = {
    "aerosol 0.05": {"aerosol_optical_depth": 0.05},
    "aerosol 0.4": {"aerosol_optical_depth": 0.4},
    "half the water": {"precipitable_water": 0.5},
    "twice the water": {"precipitable_water": 2.0},
}


def climate(row: tuple[float, ...], air: Mapping[str, float]) -> xr.Dataset:
    """A dataset of one cell."""
    latitude, height, water, aerosol, albedo, snow, cloud, cloudier = row
    winter = np.cos(2 * np.pi * (MONTHS + 0.5) / 12) * np.sign(latitude)

    def field(values: Any) -> tuple[tuple[str, ...], np.ndarray]:
        return DIMS, np.broadcast_to(np.asarray(values, np.float32), (12,))[:, None, None]

    return xr.Dataset(
        {
            "albedo": field(np.clip(albedo + snow * winter, 0.06, 0.8)),
            "cloud_fraction": field(np.clip(cloud + cloudier * winter, 0, 1)),
            "elevation": (DIMS[1:], np.array([[height]], np.float32)),
            "precipitable_water": field(water * air.get("precipitable_water", 1)),
            "aerosol_optical_depth": field(air.get("aerosol_optical_depth", aerosol)),
        },
        coords={"month": MONTHS + 1, "latitude": [latitude], "longitude": [0.0]},
    )


def sensitivity() -> None:
    """Flux and tilt, and their changes."""
    sky, panel = Sky(irradiance="cloud"), Panel()
    variants: list[tuple[str, Sky, Panel, Mapping[str, float]]] = [("as it is", sky, panel, {})]
    variants += [(name, replace(sky, **change), panel, {}) for name, change in SKIES.items()]
    variants += [(name, sky, panel, change) for name, change in AIRS.items()]
    variants += [(name, sky, replace(panel, **change), {}) for name, change in PANELS.items()]
    print("flux (W m-2) and tilt (degrees); below, changes of both")
    print(f"{'':<16}" + "".join(f"{name:>20}" for name in CLIMATES))
    first: list[tuple[float, float]] = []
    for name, this_sky, this_panel, air in variants:
        cells = []
        for row in CLIMATES.values():
            answer = solve(climate(row, air), this_panel, this_sky)[["rejected_flux", "tilt"]]
            here = answer.compute().squeeze()
            cells.append((float(here["rejected_flux"]), float(here["tilt"])))
        if not first:
            first = cells
            shown = [f"{flux:12.1f} {tilt:7.1f}" for flux, tilt in cells]
        else:
            pairs = zip(cells, first, strict=True)
            shown = [f"{f - f0:+12.1f} {t - t0:+7.1f}" for (f, t), (f0, t0) in pairs]
        print(f"{name:<16}" + "".join(shown))


def kernel(data: Path) -> None:
    """The flat matte limit against the published kernel, month by month over the globe."""
    specs = [
        InputSpec("albedo", data / "satellite/albedo.nc", "albedo"),
        InputSpec("cloud_fraction", data / "satellite/isccp_total_cloud.nc", "clt"),
    ]
    grid = target_grid(specs, "albedo", None, None)
    dataset = load_inputs(specs, grid, grid.rows).dataset.compute()
    sky = Sky(irradiance="cloud", snow_covers_panel=False)
    answer = solve(dataset, Panel(0.9, 0.0), sky).compute()
    latitude = np.deg2rad(dataset["latitude"].values)
    days = np.arange(1, 366)
    top = sun.daily_insolation(latitude=latitude, day_of_year=days[:, None])
    top = np.stack([top[sun.month_of_day(days) == m].mean(axis=0) for m in range(12)])
    down = answer["monthly_surface_shortwave"]
    kernel_months = down * np.sqrt(down / np.maximum(top, 1e-6)[:, :, None])
    lengths = xr.DataArray(np.array(sun.MONTH_LENGTHS, float), dims="month")
    theirs = (
        (kernel_months * (0.9 - dataset["albedo"])).weighted(lengths).mean("month", skipna=False)
    )
    ratio = answer["rejected_flux_flat"] / theirs
    weight = np.cos(np.deg2rad(dataset["latitude"])).broadcast_like(ratio)
    known = np.isfinite(ratio.values)
    mean = np.average(ratio.values[known], weights=weight.values[known])
    print(f"flat matte panel over kernel: {mean:.3f}")
    for south, north in ((-60, -40), (-40, -20), (-20, 0), (0, 20), (20, 40), (40, 60)):
        band = ratio.sel(latitude=slice(north, south))
        print(f"  {south:+3d} to {north:+3d}: {float(band.mean()):.3f}")
    cloud = answer["equivalent_cloud_fraction"].values
    for low, high in ((0, 0.3), (0.3, 0.5), (0.5, 0.7), (0.7, 1)):
        here = known & (cloud >= low) & (cloud < high)
        print(f"  cloud {low:g} to {high:g}: {ratio.values[here].mean():.3f} ({here.sum()} cells)")


def main() -> None:
    """Print both."""
    sensitivity()
    if len(sys.argv) > 1:
        kernel(Path(sys.argv[1]))


if __name__ == "__main__":
    main()
