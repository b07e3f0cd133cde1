"""From whatever is known of a cell to the equivalent cloud fraction of each month and hour bin."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.options import Sky
from gridcool.engine.skies import SkyTable
from gridcool.physics.irradiance import hargreaves_samani
from gridcool.variables import flag_value

FloatArray = NDArray[np.floating]

#: Months with less sun than this above the atmosphere, W m-2, may borrow from their neighbours.
LOW_SUN = 30.0
NO_SUN = 0.01  # W m-2


@dataclass(frozen=True)
class Estimate:
    """What the account is told of the sky.

    Attributes
    ----------
    transmission : array, shape (12, cells)
        Irradiance over its clear-sky value, E[k]; NaN where nothing is known.
    source : array of uint16, shape (12, cells)
        Which estimate it is, as bits of the input_quality layer.
    by_hour : array, shape (12, hours, cells), or None
        The same in each hour bin as the cloud alone tells; None without a diurnal cloud cycle.
    """

    transmission: FloatArray
    source: NDArray[np.uint16]
    by_hour: FloatArray | None


def estimate(
    sky: Sky,
    table: SkyTable,
    *,
    clear: FloatArray,
    extraterrestrial: FloatArray,
    cloud: FloatArray | None,
    temperature_range: FloatArray | None,
    measured: FloatArray | None,
) -> Estimate:
    """Irradiance over its clear-sky value from the source that the settings name.

    Parameters
    ----------
    sky : Sky
    table : SkyTable
    clear : array, shape (12, hours, cells)
        Clear-sky irradiance G₀ of each hour bin, W m-2 as a mean over all hours.
    extraterrestrial : array, shape (12, cells)
        R_a, W m-2.
    cloud : array, shape (12, hours, cells), or None
    temperature_range : array, shape (12, cells), or None
        K.
    measured : array, shape (12, cells), or None
        W m-2.
    """
    whole = clear.sum(axis=1)
    safe = np.maximum(whole, np.float32(NO_SUN))
    missing = np.full_like(whole, np.nan)
    by_hour = None
    from_cloud = from_range = missing
    if cloud is not None:
        by_hour = table.mean_transmission(cloud)
        share = np.where(whole[:, None] > NO_SUN, clear / safe[:, None], 1 / clear.shape[1])
        from_cloud = (share * by_hour).sum(axis=1, dtype=np.float32)
    if temperature_range is not None:
        coefficient = sky.hargreaves_coefficient
        warm = hargreaves_samani(temperature_range, extraterrestrial, coefficient)
        from_range = np.minimum(warm / safe, 1).astype(np.float32)
    if sky.irradiance == "measured":
        known = missing if measured is None else np.minimum(measured / safe, 1)
        known = np.where((whole <= NO_SUN) & ~np.isnan(known), np.float32(1), known)
        chosen, source = known, _bits(known, "from_measured_irradiance")
    elif sky.irradiance == "cloud":
        chosen, source = from_cloud, _bits(from_cloud, "from_cloud")
    elif sky.irradiance == "temperature-range":
        chosen, source = from_range, _bits(from_range, "from_temperature_range")
    else:
        weight = np.float32(sky.cloud_weight)
        both = weight * from_cloud + (1 - weight) * from_range
        only_cloud, only_range = np.isnan(from_range), np.isnan(from_cloud)
        chosen = np.where(only_cloud, from_cloud, np.where(only_range, from_range, both))
        source = np.where(
            only_cloud,
            _bits(from_cloud, "from_cloud"),
            np.where(
                only_range, _bits(from_range, "from_temperature_range"), _bits(both, "from_blend")
            ),
        )
    several = by_hour is not None and by_hour.shape[1] > 1
    return Estimate(
        chosen.astype(np.float32), source.astype(np.uint16), by_hour if several else None
    )


def spread_over_hours(known: Estimate, darkest: float, clear: FloatArray) -> FloatArray:
    """E[k] of each hour bin so that the month's irradiance is the chosen one.

    Without a diurnal cloud cycle all hours are alike. With one, the hours keep their shape: all
    move by the same share of their way towards clear (1) or towards overcast (``darkest``).

    Parameters
    ----------
    known : Estimate
        Without NaN in ``transmission``.
    darkest : float
        E[k] of a month that is always overcast.
    clear : array, shape (12, hours, cells)
        Clear-sky irradiance of each bin.

    Returns
    -------
    array, shape (12, hours, cells)
    """
    target = known.transmission[:, None]
    if known.by_hour is None:
        return np.broadcast_to(target, clear.shape)
    by_hour = np.where(np.isnan(known.by_hour).any(axis=1, keepdims=True), target, known.by_hour)
    whole = clear.sum(axis=1, keepdims=True)
    dark = whole <= NO_SUN
    share = np.where(dark, 1 / clear.shape[1], clear / np.where(dark, 1, whole))
    mean = (share * by_hour).sum(axis=1, keepdims=True)
    up = np.clip((target - mean) / np.maximum(1 - mean, 1e-6), 0, 1)
    down = np.clip((mean - target) / np.maximum(mean - darkest, 1e-6), 0, 1)
    moved = by_hour + up * (1 - by_hour) - down * (by_hour - darkest)
    return np.asarray(moved, np.float32)


def borrow_low_sun(
    values: FloatArray, low_sun: NDArray[np.bool_]
) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Fill months of little sun from the nearest month that is known, around the year.

    Parameters
    ----------
    values : array, shape (12, cells)
        NaN where missing.
    low_sun : array of bool, shape (12, cells)
        Months that may be filled; they hardly count in the year.

    Returns
    -------
    filled : array, shape (12, cells)
    borrowed : array of bool, shape (12, cells)
    """
    gap = np.isnan(values) & low_sun
    if not gap.any():
        return values, gap
    filled = values.copy()
    for distance in range(1, 7):
        for shift in (distance, -distance):
            take = np.isnan(filled) & gap
            filled = np.where(take, np.roll(values, shift, axis=0), filled)
    return filled, gap & ~np.isnan(filled)


def _bits(values: FloatArray, meaning: str) -> NDArray[np.uint16]:
    bit = np.uint16(flag_value("input_quality", meaning))
    return np.where(np.isnan(values), np.uint16(0), bit)
