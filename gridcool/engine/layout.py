"""Labels and shapes: what the engine takes from a dataset, and how its layers are labelled."""

from __future__ import annotations

from collections.abc import Hashable

import dask.array as da
import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gridcool.engine.clear_sky import COLUMN_INPUTS
from gridcool.engine.strips import layer_bands
from gridcool.errors import InputDataError
from gridcool.variables import input_variables, layer_variables

FloatArray = NDArray[np.floating]

VARYING = ("albedo", "cloud_fraction", "temperature_range")
ERRORS = tuple(f"{name}_standard_error" for name in VARYING)
USED = (*VARYING, "surface_shortwave", *COLUMN_INPUTS, *ERRORS)


def check_range(name: str, values: FloatArray, latitudes: FloatArray) -> None:
    """Refuse values that cannot be.

    Raises
    ------
    InputDataError
        With the name, the possible range and the latitudes.
    """
    if name in ERRORS:
        return
    low, high = input_variables()[name].valid
    finite = np.isfinite(values)
    if (finite & ((values < low - 1e-6) | (values > high + 1e-6))).any():
        raise InputDataError(
            f"{name} holds values outside {low:g} to {high:g} {input_variables()[name].units} "
            f"between latitudes {latitudes.min():g} and {latitudes.max():g}; "
            "check its units and fill value."
        )


def check_shape(dataset: xr.Dataset) -> None:
    """Refuse a dataset without the albedo, or with dimensions that do not fit.

    Raises
    ------
    InputDataError
    """
    if "albedo" not in dataset:
        raise InputDataError("The dataset has no variable albedo; add it under that name.")
    for name in USED:
        if name not in dataset:
            continue
        dims: set[Hashable] = set(dataset[name].dims)
        wanted = {"latitude", "longitude"} | (set() if name == "elevation" else {"month"})
        if dims - {"hour"} != wanted or ("hour" in dims and name != "cloud_fraction"):
            raise InputDataError(
                f"{name} has dimensions {sorted(map(str, dims))}; {sorted(wanted)} are needed."
            )
    if dataset.sizes["month"] != 12:
        raise InputDataError(f"The dataset has {dataset.sizes['month']} months; 12 are needed.")


def strips_of(dataset: xr.Dataset, name: str) -> da.Array:
    """The variable as a float32 dask array in whole-width strips, months first."""
    order = [d for d in ("month", "hour", "latitude", "longitude") if d in dataset[name].dims]
    variable = dataset[name].transpose(*order)
    array = variable.data
    if not isinstance(array, da.Array):
        array = da.from_array(np.asarray(array, np.float32), chunks=array.shape)
    albedo = dataset["albedo"]
    rows = albedo.chunksizes.get("latitude", (dataset.sizes["latitude"],))
    whole = dict.fromkeys(range(array.ndim), -1)
    strips: da.Array = array.astype(np.float32).rechunk({**whole, array.ndim - 2: rows})
    return strips


def label_layers(stack: da.Array, dataset: xr.Dataset, wanted: tuple[str, ...]) -> xr.Dataset:
    """The bands of a stack, ordered as `layer_bands`, as the declared layers."""
    coordinates = {
        "month": np.arange(1, 13),
        "season": [1, 2],
        "latitude": dataset["latitude"],
        "longitude": dataset["longitude"],
    }
    layers = {}
    for name in wanted:
        layer, band = layer_variables()[name], layer_bands(wanted)[name]
        values = stack[band] if layer.count > 1 else stack[band.start]
        if layer.is_flags:
            values = values.astype(np.uint16)
        attributes = {
            "standard_name": layer.standard_name,
            "long_name": layer.long_name,
            "units": layer.units,
            "cell_methods": layer.cell_methods,
        }
        layers[name] = (layer.dimensions, values, {k: v for k, v in attributes.items() if v})
    return xr.Dataset(layers, coords=coordinates)
