"""How much flux and best tilt depend on what is assumed, at six invented climates.

    python scripts/sensitivity.py

Every line changes one assumption and shows the flux (W m-2) and the tilt (degrees) it ends in, with
the flux's change in percent. The climates are invented, and meant to be as different as plausible.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import dask
import numpy as np
import xarray as xr

from gridcool.engine.blocks import solve
from gridcool.engine.options import Panel, Sky

MONTHLY = ("month", "latitude", "longitude")
#: Cosine of the year, one in mid-January and minus one in mid-July.
WINTER = np.cos(2 * np.pi * np.arange(12) / 12)


@dataclass(frozen=True)
class Climate:
    """An invented place; ``cloud_winter`` and ``albedo_winter`` add to the mean in January."""

    name: str
    latitude: float
    elevation: float  # m
    water: float  # kg m-2
    aerosol: float  # depth at 550 nm
    albedo: float
    cloud: float
    cloud_winter: float = 0.0
    snow_months: tuple[int, ...] = ()  # 0 to 11


CLIMATES = (
    Climate("continent 50N, snow", 50, 250, 12, 0.12, 0.19, 0.55, 0.08, (0, 1, 2, 11)),
    Climate("maritime 52N", 52, 50, 16, 0.12, 0.18, 0.70, 0.06),
    Climate("high plateau 33N", 33, 4200, 5, 0.06, 0.24, 0.45, -0.15),
    Climate("desert 23N", 23, 400, 16, 0.25, 0.36, 0.18, 0.08),
    Climate("monsoon 18N", 18, 200, 40, 0.35, 0.18, 0.48, -0.28),
    Climate("humid tropics 2S", -2, 80, 50, 0.15, 0.13, 0.70, 0.02),
)
SNOW_ALBEDO = 0.65


#: Aerosol depth, or None for the climate's own, and a factor on water; one column of cells each.
AIRS: Mapping[str, tuple[float | None, float]] = {
    "as it is": (None, 1.0),
    "aerosol 0.05": (0.05, 1.0),
    "aerosol 0.4": (0.4, 1.0),
    "half the water": (None, 0.5),
    "twice the water": (None, 2.0),
}
SKIES: Mapping[str, Mapping[str, Any]] = {
    "ν 0.5": {"cloud_concentration": 0.5},
    "ν 2": {"cloud_concentration": 2.0},
    "t_c 0.17": {"overcast_transmittance": 0.17},
    "t_c 0.27": {"overcast_transmittance": 0.27},
    "R_c 0.58": {"overcast_reflectance": 0.58},
    "R_c 0.73": {"overcast_reflectance": 0.73},
}
PANELS: Mapping[str, Mapping[str, Any]] = {
    "back face 0": {"back_reflectance": 0.0},
    "back face 0.9": {"back_reflectance": 0.9},
    "specular 0.5": {"specular_share": 0.5},
    "specular 0": {"specular_share": 0.0},
}


def dataset_of(airs: Sequence[tuple[float | None, float]]) -> xr.Dataset:
    """A row for every climate, a column for every air."""
    months, columns = np.arange(12), len(airs)

    def monthly(cells: Sequence[Sequence[Any]]) -> tuple[tuple[str, ...], np.ndarray]:
        rows = [[np.broadcast_to(cell, 12) for cell in row] for row in cells]
        return MONTHLY, np.moveaxis(np.array(rows, np.float32), 2, 0)

    def alike(values: Sequence[Any]) -> tuple[tuple[str, ...], np.ndarray]:
        return monthly([[value] * columns for value in values])

    snow = [np.isin(months, c.snow_months) for c in CLIMATES]
    heights = np.array([[c.elevation] * columns for c in CLIMATES], np.float32)
    return xr.Dataset(
        {
            "albedo": alike(
                [np.where(s, SNOW_ALBEDO, c.albedo) for s, c in zip(snow, CLIMATES, strict=True)]
            ),
            "cloud_fraction": alike([c.cloud + c.cloud_winter * WINTER for c in CLIMATES]),
            "elevation": (MONTHLY[1:], heights),
            "precipitable_water": monthly([[c.water * f for _, f in airs] for c in CLIMATES]),
            "aerosol_optical_depth": monthly(
                [[c.aerosol if a is None else a for a, _ in airs] for c in CLIMATES]
            ),
        },
        coords={
            "latitude": [c.latitude for c in CLIMATES],
            "longitude": np.arange(columns, dtype=float),
        },
    )


def flux_and_tilt(panel: Panel, sky: Sky, dataset: xr.Dataset) -> tuple[np.ndarray, np.ndarray]:
    """Annual flux and best tilt, shape (climates, airs)."""
    layers = solve(dataset, panel, sky)[["rejected_flux", "tilt"]]
    with dask.config.set(scheduler="synchronous"):
        found = layers.compute()
    return found["rejected_flux"].values.astype(float), found["tilt"].values.astype(float)


def line(name: str, flux: np.ndarray, tilt: np.ndarray, usual: np.ndarray) -> str:
    """One line of the table."""
    rows = zip(flux, tilt, 100 * (flux / usual - 1), strict=True)
    return f"{name:<16}" + "".join(f"{f:8.1f} {change:+5.1f}%{t:6.1f}" for f, t, change in rows)


def main() -> None:
    """Print the table."""
    panel, sky = Panel(), Sky(irradiance="cloud")
    print(f"{'':<16}" + "".join(f"{climate.name:>21}" for climate in CLIMATES))
    fluxes, tilts = flux_and_tilt(panel, sky, dataset_of(list(AIRS.values())))
    usual = fluxes[:, 0]
    for column, name in enumerate(AIRS):
        print(line(name, fluxes[:, column], tilts[:, column], usual))
    dataset = dataset_of([AIRS["as it is"]])
    changed = {name: (panel, replace(sky, **change)) for name, change in SKIES.items()}
    changed |= {name: (replace(panel, **change), sky) for name, change in PANELS.items()}
    for name, (this_panel, this_sky) in changed.items():
        flux, tilt = flux_and_tilt(this_panel, this_sky, dataset)
        print(line(name, flux[:, 0], tilt[:, 0], usual))


if __name__ == "__main__":
    main()
