"""Invented cells as a dataset for the engine: one row of one column per cell."""

from __future__ import annotations

from collections.abc import Sequence

import dask
import numpy as np
import xarray as xr
from direct_quadrature import Cell

from gridcool.engine.blocks import solve
from gridcool.engine.options import Panel, Sky

CLOUD_ONLY = Sky(irradiance="cloud")


def dataset_of(cells: Sequence[Cell], *, own_air: bool = True) -> xr.Dataset:
    """Canonical inputs; cells must agree in their number of hour bins.

    Without ``own_air`` the engine is left to its default columns, see `default_air`.
    """
    monthly = ("month", "latitude", "longitude")
    cloud = np.stack([np.asarray(cell.cloud) for cell in cells], axis=-1)[..., None]
    hourly = ("month", "hour", *monthly[1:])

    def by_month(values: Sequence[object], factor: float = 1.0) -> tuple[tuple[str, ...], object]:
        rows = [np.broadcast_to(np.asarray(value, float), 12) for value in values]
        return monthly, np.stack(rows, axis=1)[..., None].astype(np.float32) * np.float32(factor)

    fields: dict[str, object] = {
        "albedo": by_month([cell.albedo for cell in cells]),
        "cloud_fraction": (hourly if cloud.ndim == 4 else monthly, cloud.astype(np.float32)),
    }
    if own_air:
        elevation = np.array([[cell.elevation] for cell in cells], np.float32)
        fields["elevation"] = (monthly[1:], elevation)
        fields["precipitable_water"] = by_month([cell.water_cm for cell in cells], 10.0)
        fields["aerosol_optical_depth"] = by_month([cell.aerosol_550 for cell in cells])
        fields["ozone"] = by_month([cell.ozone_cm for cell in cells], 1000.0)
    latitudes = [cell.latitude for cell in cells]
    return xr.Dataset(fields, coords={"latitude": latitudes, "longitude": [0.0]})


def default_air(cell: Cell) -> Cell:
    """The cell under the documented default column: sea level, 0.4 + 4 cos⁴ φ cm, 0.12, 0.30."""
    water = 0.4 + 4 * np.cos(np.radians(cell.latitude)) ** 4
    return Cell(cell.latitude, cell.albedo, cell.cloud, 0.0, water, 0.12, 0.30)


def solved(dataset: xr.Dataset, panel: Panel | None = None, sky: Sky = CLOUD_ONLY) -> xr.Dataset:
    """The engine's layers, computed in this thread."""
    with dask.config.set(scheduler="synchronous"):
        return solve(dataset, panel or Panel(), sky).compute()


def value(result: xr.Dataset, name: str, row: int) -> float:
    """A yearly layer of one cell; a flat panel's missing azimuth counts as north."""
    found = float(result[name].values[row, 0])
    return 0.0 if name == "azimuth" and np.isnan(found) else found
