"""Invented layers on several grids for the tests of the products."""

from __future__ import annotations

import dask.array as da
import numpy as np
import xarray as xr

from gridcool.grid import Grid
from gridcool.variables import layer_variables

GRIDS = {
    "world": Grid(-180.0, 90.0, 1.0, 1.0, 180, 360),
    "region": Grid(100.05, 22.55, 0.0449, 0.0449, 150, 600),  # more than a tile: has overviews
    "antimeridian": Grid(170.0, 20.0, 2.5, 2.0, 16, 20),
    "row": Grid(-10.5, 5.25, 0.5, 0.25, 1, 7),
    "column": Grid(-10.5, 5.25, 0.5, 0.25, 9, 1),
    "cell": Grid(179.5, -60.0, 0.5, 0.25, 1, 1),
}

ATTRIBUTES = {
    "title": "Invented layers",
    "history": "2001-02-03T04:05:06Z made up for a test",
    "source": "invented",
    "references": "none",
    "comment": "These values mean nothing.",
}


def invented_layers(grid: Grid, rows: int | tuple[int, ...] = 64) -> xr.Dataset:
    """Every declared layer on ``grid``, lazily, in strips of ``rows`` rows."""
    values = {name: invented_values(grid, name) for name in layer_variables()}
    dataset = xr.Dataset(
        {
            name: (layer_variables()[name].dimensions, da.from_array(array))
            for name, array in values.items()
        },
        coords={
            "month": np.arange(1, 13),
            "season": [1, 2],
            "latitude": grid.latitudes,
            "longitude": grid.longitudes,
        },
    )
    return dataset.chunk(month=-1, season=-1, latitude=rows, longitude=-1)


def invented_values(grid: Grid, name: str) -> np.ndarray:
    """One layer: each cell has its own value, some are missing."""
    layer = layer_variables()[name]
    rng = np.random.default_rng(list(name.encode()))
    months = (layer.count,) if layer.count > 1 else ()
    if layer.is_flags:
        every = sum(flag.value for flag in layer.flags)
        chosen = rng.integers(0, every + 1, size=grid.shape).astype(np.uint16)
        chosen[: grid.rows // 2] = min(4, every)
        return chosen
    if layer.classes:
        return rng.integers(0, len(layer.classes), size=grid.shape).astype(np.uint8)
    if name == "azimuth":
        # North, from either side: a mean of such angles would look south.
        values = np.where(rng.random(grid.shape) < 0.5, 1.0, 359.0) + rng.random(grid.shape)
    else:
        values = 100 + 20 * rng.standard_normal((*months, *grid.shape))
    missing = rng.random(grid.shape) < 0.2
    missing[:1, :1] = False
    return np.where(missing, np.nan, values).astype(np.float32)
