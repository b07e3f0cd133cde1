"""Small invented layers and inputs on a common grid, drawn by hand."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import xarray as xr

PLANE = ("latitude", "longitude")


def fields(**values: object) -> xr.Dataset:
    """Fields of rows and columns, or of twelve months of them, at made-up places."""
    arrays = {name: np.asarray(each, np.float32) for name, each in values.items()}
    rows, columns = next(iter(arrays.values())).shape[-2:]
    return xr.Dataset(
        {
            name: (PLANE if array.ndim == 2 else ("month", *PLANE), array)
            for name, array in arrays.items()
        },
        coords={
            "latitude": 10.0 - np.arange(rows),
            "longitude": 20.0 + np.arange(columns),
        },
    )


def in_strips(dataset: xr.Dataset, rows: int) -> xr.Dataset:
    """The same, lazily, in strips of rows."""
    return dataset.chunk({"latitude": rows})


def as_reader(values: Mapping[str, object]) -> object:
    """A function that gives a layer by its name and fails for others."""
    return lambda name: np.asarray(values[name], np.float32)
