"""Suitability: value functions of any layers, weighed together, and the planner's own classes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gridcool.planning.exclusions import annual_field

FloatArray = NDArray[np.floating]
Mean = Literal["arithmetic", "geometric"]

FLUX, SPREAD = "rejected_flux", "flux_uncertainty"


@dataclass(frozen=True)
class Criterion:
    """What makes a cell good.

    Attributes
    ----------
    layer : str
        An input or a layer; one with months is judged by its annual mean.
    points : tuple of (float, float)
        Corners of the value function in rising order of the layer: (value, worth 0 to 1). It is
        linear between them and level beyond.
    weight : float
    """

    layer: str
    points: tuple[tuple[float, float], ...]
    weight: float = 1.0

    def worth(self, values: FloatArray) -> FloatArray:
        """Worth of the layer's values, 0 to 1; NaN stays NaN."""
        at, worth = zip(*self.points, strict=True)
        return np.asarray(np.interp(values, at, worth), np.float32)


@dataclass(frozen=True)
class SuitabilityClass:
    """A named class: cells whose suitability is at least ``above``."""

    name: str
    above: float


def straight(layer: str, worst: float, best: float, weight: float = 1.0) -> Criterion:
    """A criterion that is worth 0 at ``worst`` and 1 at ``best``, whichever is higher."""
    return Criterion(layer, tuple(sorted([(worst, 0.0), (best, 1.0)])), weight)


def peaked(layer: str, low: float, ideal: float, high: float, weight: float = 1.0) -> Criterion:
    """A criterion that is worth 1 at ``ideal`` and 0 from ``low`` down and from ``high`` up."""
    return Criterion(layer, ((low, 0.0), (ideal, 1.0), (high, 0.0)), weight)


def weigh(worths: Sequence[FloatArray], weights: Sequence[float], mean: Mean) -> FloatArray:
    """Weighted mean of worths; missing where any is.

    The geometric mean is 0 where any criterion is: nothing makes up for it.
    """
    total = sum(weights)
    shares = [np.float32(weight / total) for weight in weights]
    if mean == "geometric":
        product = np.ones_like(worths[0])
        for worth, share in zip(worths, shares, strict=True):
            product = product * worth**share
        return product
    parts = [worth * share for worth, share in zip(worths, shares, strict=True)]
    return np.asarray(np.sum(parts, axis=0), np.float32)


def suitability(
    layers: xr.Dataset,
    inputs: xr.Dataset,
    criteria: Sequence[Criterion],
    *,
    exclusion: xr.DataArray,
    mean: Mean = "arithmetic",
) -> xr.Dataset:
    """Suitability of every eligible cell and how sure it is, lazily.

    Parameters
    ----------
    layers, inputs : xarray.Dataset
        On the same grid; a criterion's layer is looked up among the layers first.
    criteria : sequence of Criterion
    exclusion : xarray.DataArray
        From `exclusion_layer`.
    mean : {"arithmetic", "geometric"}

    Returns
    -------
    xarray.Dataset
        ``suitability``, 0 to 1, missing where a cell is excluded or a layer is missing, and
        ``suitability_uncertainty``: half of what it changes when the flux goes from one standard
        uncertainty below to one above.

    Raises
    ------
    SettingsError
        If a criterion names a layer that is neither.
    """
    among = {"layers": layers, "inputs": inputs}
    fields = [annual_field(each.layer, among, "[[criterion]]") for each in criteria]

    def cells(out: FloatArray, spread: FloatArray, *values: FloatArray) -> FloatArray:
        def with_flux(shift: float) -> FloatArray:
            worths = [
                each.worth(value + shift * spread if each.layer == FLUX else value)
                for each, value in zip(criteria, values, strict=True)
            ]
            return weigh(worths, [each.weight for each in criteria], mean)

        here = with_flux(0.0)
        moved = np.abs(with_flux(1.0) - with_flux(-1.0)) / 2
        return np.where(out == 0, np.stack([here, moved]), np.nan).astype(np.float32)

    both = xr.apply_ufunc(
        lambda *arrays: np.moveaxis(cells(*arrays), 0, -1),
        exclusion,
        layers[SPREAD],
        *fields,
        output_core_dims=[["kind"]],
        dask="parallelized",
        dask_gufunc_kwargs={"output_sizes": {"kind": 2}},
        output_dtypes=[np.float32],
    )
    return xr.Dataset(
        {
            "suitability": both.isel(kind=0, drop=True),
            "suitability_uncertainty": both.isel(kind=1, drop=True),
        }
    )


def suitability_class(values: xr.DataArray, classes: Sequence[SuitabilityClass]) -> xr.DataArray:
    """The planner's class of every cell, lazily: 0 for none, then 1 for the lowest class and so on.

    Parameters
    ----------
    values : xarray.DataArray
        Suitability; NaN has no class.
    classes : sequence of SuitabilityClass
        From the lowest limit to the highest.
    """
    limits = np.array([each.above for each in classes], np.float32)

    def cells(block: FloatArray) -> NDArray[np.uint8]:
        found = np.searchsorted(limits, np.nan_to_num(block, nan=-1.0), side="right")
        return np.where(np.isnan(block), 0, found).astype(np.uint8)

    found: xr.DataArray = xr.apply_ufunc(
        cells, values, dask="parallelized", output_dtypes=[np.uint8]
    )
    return found.rename("suitability_class")
