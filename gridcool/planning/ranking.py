"""The region table: what each region holds, best first."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gridcool.planning.regions import Cover

FloatArray = NDArray[np.floating]

PERCENTILES = {"rejected_flux_p10": 10, "rejected_flux_p50": 50, "rejected_flux_p90": 90}
COLUMNS = (
    "rank",
    "region",
    "area_km2",
    "eligible_km2",
    "eligible_share",
    "rejected_flux_mean",
    *PERCENTILES,
    "tilt",
    "azimuth",
    "panel_km2",
    "rejected_power_tw",
)
LAYERS = ("rejected_flux", "tilt", "azimuth")


def region_table(
    layers: Mapping[str, FloatArray],
    covers: Sequence[Cover],
    *,
    ground_cover: float,
    eligible: NDArray[np.bool_] | None = None,
) -> pd.DataFrame:
    """One row a region, ranked by mean rejected flux.

    Means and percentiles are weighted by area. Ties keep the order of the names. Regions without an
    eligible cell come last, unranked.

    Parameters
    ----------
    layers : mapping of array, shape (rows, columns)
        At least those of `LAYERS`.
    covers : sequence of Cover
    ground_cover : float
        Panel area over field area.
    eligible : array of bool, shape (rows, columns), optional
        Cells that may be used; without it, all that have a rejected flux.

    Returns
    -------
    pandas.DataFrame
        Columns as `COLUMNS`: areas in km², fluxes in W per m² of panel, angles in degrees (those of
        the mean panel normal), panel area if every eligible km² bears panels at the ground cover,
        and the power in TW that those reject.
    """
    flat = {name: np.asarray(layers[name]).ravel() for name in LAYERS}
    usable = np.isfinite(flat["rejected_flux"])
    if eligible is not None:
        usable &= eligible.ravel()
    rows = [_row(cover, flat, usable, ground_cover) for cover in covers]
    frame = pd.DataFrame(rows, columns=[name for name in COLUMNS if name != "rank"])
    frame = frame.sort_values(
        ["rejected_flux_mean", "region"], ascending=[False, True], na_position="last", kind="stable"
    ).reset_index(drop=True)
    ranked = frame["rejected_flux_mean"].notna()
    rank = pd.Series(np.arange(1, len(frame) + 1), dtype="Int64").where(ranked)
    frame.insert(0, "rank", rank)
    return frame


def weighted_percentile(values: FloatArray, weights: FloatArray, percent: float) -> float:
    """Value below which a share of the weight lies.

    Each value stands at the middle of its own weight, values between are interpolated linearly; for
    equal weights this is Hazen's plotting position.
    """
    order = np.argsort(values, kind="stable")
    middle = np.cumsum(weights[order]) - weights[order] / 2
    return float(np.interp(percent / 100 * weights.sum(), middle, values[order]))


def mean_orientation(
    tilt: FloatArray, azimuth: FloatArray, weights: FloatArray
) -> tuple[float, float]:
    """Tilt and azimuth (degrees) of the mean panel normal; azimuth NaN where that is upright."""
    known = np.isfinite(tilt)
    if not known.any():
        return np.nan, np.nan
    beta, weight = np.deg2rad(tilt[known]), weights[known]
    gamma = np.deg2rad(np.nan_to_num(azimuth[known]))
    east = float((weight * np.sin(beta) * np.sin(gamma)).sum())
    north = float((weight * np.sin(beta) * np.cos(gamma)).sum())
    up = float((weight * np.cos(beta)).sum())
    mean_tilt = float(np.rad2deg(np.arctan2(np.hypot(east, north), up)))
    if mean_tilt < 0.05:  # flat for all purposes
        return mean_tilt, np.nan
    # Rounded, so that due north is 0 and not a hair under 360.
    return mean_tilt, round(float(np.rad2deg(np.arctan2(east, north))), 6) % 360


def _row(
    cover: Cover,
    layers: Mapping[str, FloatArray],
    usable: NDArray[np.bool_],
    ground_cover: float,
) -> dict[str, float | str]:
    inside = usable[cover.cells] & (cover.areas > 0)
    cells, areas = cover.cells[inside], cover.areas[inside]
    total = float(areas.sum())
    row: dict[str, float | str] = {
        "region": cover.name,
        "area_km2": cover.area / 1e6,
        "eligible_km2": total / 1e6,
        "eligible_share": total / cover.area if cover.area > 0 else 0.0,
    }
    if total == 0:
        return row
    flux = layers["rejected_flux"][cells].astype(float)
    mean = float((flux * areas).sum() / total)
    tilt, azimuth = mean_orientation(layers["tilt"][cells], layers["azimuth"][cells], areas)
    panel = total * ground_cover
    percentiles = {
        name: weighted_percentile(flux, areas, percent) for name, percent in PERCENTILES.items()
    }
    return {
        **row,
        **percentiles,
        "rejected_flux_mean": mean,
        "tilt": tilt,
        "azimuth": azimuth,
        "panel_km2": panel / 1e6,
        "rejected_power_tw": mean * panel / 1e12,
    }
