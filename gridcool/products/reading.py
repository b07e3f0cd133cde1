"""Reading back what was written."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from numpy.typing import NDArray

from gridcool.grid import Grid
from gridcool.products.geotiff import LAYER_FOLDER


def read_layer(product: Path, name: str) -> NDArray[Any]:
    """A layer of a product's folder, shape (rows, columns), or (12, rows, columns) by month.

    Parameters
    ----------
    product : Path
        A release, or a folder that `write_layers` filled.
    name : str
        A layer of ``variables.toml``.
    """
    with rasterio.open(product / LAYER_FOLDER / f"{name}.tif") as file:
        values: NDArray[Any] = file.read()
    return np.squeeze(values, axis=0) if len(values) == 1 else values


def layer_reader(product: Path) -> Callable[[str], NDArray[Any] | None]:
    """A function that reads a product's layer by its name; None where there is no such layer."""

    def read(name: str) -> NDArray[Any] | None:
        path = product / LAYER_FOLDER / f"{name}.tif"
        return read_layer(product, name) if path.exists() else None

    return read


def grid_of_layer(product: Path, name: str) -> Grid:
    """The grid that a product's layer lies on."""
    with rasterio.open(product / LAYER_FOLDER / f"{name}.tif") as file:
        affine, rows, columns = file.transform, file.height, file.width
    return Grid(affine.c, affine.f, affine.a, -affine.e, rows, columns)
