"""The region table: what each region holds, how sure that is, and which comes first."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gridcool.grid import Grid
from gridcool.planning.confidence import ErrorModel, mean_spread, rank_confidence
from gridcool.planning.losses import main_reason
from gridcool.planning.pieces import Pieces
from gridcool.planning.regions import Cover
from gridcool.planning.worth import PanelCosts, cost_per_tonne_100yr, energy_payback_days
from gridcool.variables import Flag

FloatArray = NDArray[np.floating]
Reader = Callable[[str], NDArray[Any] | None]
RankedBy = Literal["rejected_flux", "suitability"]

PERCENTILES = {"rejected_flux_p10": 10, "rejected_flux_p50": 50, "rejected_flux_p90": 90}
COLUMNS = (
    *("rank", "region", "area_km2", "eligible_km2", "eligible_share", "rejected_flux_mean"),
    *PERCENTILES,
    *("flux_uncertainty", "rank_low", "rank_high", "chance_top", "tilt", "azimuth"),
    *("suitability_mean", "panel_km2", "rejected_power_tw", "co2e_standing_mt"),
    *("co2e_100yr_mt_per_year", "panel_mass_mt", "energy_payback_days", "cost_per_tonne_low"),
    *("cost_per_tonne_high", "low_ray_hours", "main_exclusion"),
)
#: Column that regions are ranked by, and the layer that holds one standard uncertainty of it.
RANK_KEYS = {
    "rejected_flux": ("rejected_flux_mean", "flux_uncertainty"),
    "suitability": ("suitability_mean", "suitability_uncertainty"),
}
MEGATONNE = 1e9  # kg
NO_DATA = "no data"


def region_table(
    read: Reader,
    covers: Sequence[Cover],
    grid: Grid,
    *,
    ground_cover: float,
    costs: PanelCosts,
    by: RankedBy = "rejected_flux",
    error: ErrorModel | None = None,
    top: int = 3,
    flags: Sequence[Flag] = (),
) -> pd.DataFrame:
    """One row a region, ranked by its mean flux or suitability.

    Means and percentiles are weighted by area. Ties keep the order of the names. Regions without an
    eligible cell come last, unranked, with the reason.

    Parameters
    ----------
    read : callable
        Gives a layer of the grid by its name, or None where there is none. Layers are read one
        after the other, so that no more than a few are in memory.
    covers : sequence of Cover
    grid : Grid
    ground_cover : float
        Panel area over field area.
    costs : PanelCosts
    by : {"rejected_flux", "suitability"}
    error : ErrorModel
    top : int
        ``chance_top`` is the chance of being among the best ``top``.
    flags : sequence of Flag
        Bits of the exclusion layer.

    Returns
    -------
    pandas.DataFrame
        Columns as `COLUMNS`: areas in km², fluxes in W per m² of panel with one standard
        uncertainty of the mean, angles in degrees (those of the mean panel normal), panel area if
        every eligible km² bears panels at the ground cover, and for that area the power in TW,
        carbon-dioxide equivalents by two views in Mt, and mass in Mt. ``cost_per_tonne_*`` is money
        per tonne offset over 100 years by all years of a panel's life.
    """
    flux = _needed(read, "rejected_flux")
    exclusion = read("exclusion")
    eligible = np.isfinite(flux) if exclusion is None else (exclusion == 0) & np.isfinite(flux)
    pieces = Pieces.of(covers, eligible)
    frame = pd.DataFrame(
        {
            "region": [cover.name for cover in covers],
            "area_km2": [cover.area / 1e6 for cover in covers],
            "eligible_km2": pieces.area / 1e6,
        }
    )
    frame["eligible_share"] = _over(frame["eligible_km2"], frame["area_km2"]).fillna(0.0)
    frame["rejected_flux_mean"] = pieces.mean(flux)
    for name, values in _percentiles(flux, pieces).items():
        frame[name] = values
    del flux
    frame["tilt"], frame["azimuth"] = _orientations(read, pieces)
    for column, layer in (("suitability_mean", "suitability"), ("low_ray_hours", "low_ray_hours")):
        frame[column] = _mean_of(read, layer, pieces)
    _add_worth(frame, read, pieces, ground_cover, costs)
    frame["main_exclusion"] = main_reason(covers, exclusion, eligible, flags, NO_DATA)
    frame = _ranked(frame, read, covers, eligible, grid, by, error or ErrorModel(), top)
    return frame[list(COLUMNS)]


def _ranked(
    frame: pd.DataFrame,
    read: Reader,
    covers: Sequence[Cover],
    eligible: NDArray[np.bool_],
    grid: Grid,
    by: RankedBy,
    error: ErrorModel,
    top: int,
) -> pd.DataFrame:
    """The rows in rank order, with ranks, their intervals and the uncertainty of the mean flux."""
    key, spread_layer = RANK_KEYS[by]
    frame = frame.assign(order=np.arange(len(frame)), flux_uncertainty=np.nan)
    frame = frame.sort_values(
        [key, "region"], ascending=[False, True], na_position="last", kind="stable"
    ).reset_index(drop=True)
    count = int(frame[key].notna().sum())
    unranked: list[Any] = [pd.NA] * (len(frame) - count)
    frame["rank"] = pd.array([*range(1, count + 1), *unranked], "Int64")
    low = high = [pd.NA] * count
    chance: FloatArray = np.full(count, np.nan)
    spread = read(spread_layer) if count else None
    if spread is not None:
        pieces = Pieces.of([covers[each] for each in frame["order"][:count]], eligible)
        values = frame[key].to_numpy(float)[:count]
        sure = rank_confidence(values, pieces, spread, grid, error, top)
        low, high, chance = list(sure.low), list(sure.high), sure.top
        flux_spread = spread if by == "rejected_flux" else read("flux_uncertainty")
        if flux_spread is not None:
            frame.loc[: count - 1, "flux_uncertainty"] = mean_spread(
                pieces, flux_spread, grid, error
            )
    frame["rank_low"] = pd.array([*low, *unranked], "Int64")
    frame["rank_high"] = pd.array([*high, *unranked], "Int64")
    frame["chance_top"] = np.concatenate([chance, np.full(len(unranked), np.nan)])
    return frame


def _add_worth(
    frame: pd.DataFrame, read: Reader, pieces: Pieces, ground_cover: float, costs: PanelCosts
) -> None:
    """What all of a region's panels reject and are worth."""
    panel = pieces.area * ground_cover  # m2
    flux = frame["rejected_flux_mean"].to_numpy(float)
    standing = _mean_of(read, "co2e_standing", pieces)
    yearly = _mean_of(read, "co2e_100yr", pieces)
    some = pieces.area > 0
    frame["panel_km2"] = np.where(some, panel / 1e6, np.nan)
    frame["rejected_power_tw"] = flux * panel / 1e12
    frame["co2e_standing_mt"] = standing * panel / MEGATONNE
    frame["co2e_100yr_mt_per_year"] = yearly * panel / MEGATONNE
    frame["panel_mass_mt"] = np.where(some, panel * costs.mass / MEGATONNE, np.nan)
    frame["energy_payback_days"] = [energy_payback_days(each, costs) for each in flux]
    for column, cost in (
        ("cost_per_tonne_low", costs.cost_low),
        ("cost_per_tonne_high", costs.cost_high),
    ):
        frame[column] = [cost_per_tonne_100yr(each, cost, costs) for each in yearly]
    worth = ["energy_payback_days", "cost_per_tonne_low", "cost_per_tonne_high"]
    frame[worth] = frame[worth].astype(float)


def _needed(read: Reader, name: str) -> FloatArray:
    layer = read(name)
    if layer is None:
        raise KeyError(name)
    return layer


def _mean_of(read: Reader, name: str, pieces: Pieces) -> FloatArray:
    """Mean of a layer over each region's eligible cells; NaN where there is no such layer."""
    layer = read(name)
    return np.full(len(pieces.ends), np.nan) if layer is None else pieces.mean(layer)


def _over(part: pd.Series, whole: pd.Series) -> pd.Series:
    return part / whole.where(whole > 0)


def _percentiles(flux: FloatArray, pieces: Pieces) -> dict[str, FloatArray]:
    found = {name: np.full(len(pieces.ends), np.nan) for name in PERCENTILES}
    values = flux.ravel()
    for index, part in enumerate(pieces):
        if part.start == part.stop:
            continue
        here, weights = values[pieces.cells[part]], pieces.areas[part]
        for name, percent in PERCENTILES.items():
            found[name][index] = weighted_percentile(here, weights, percent)
    return found


def weighted_percentile(values: FloatArray, weights: FloatArray, percent: float) -> float:
    """Value below which a share of the weight lies.

    Each value stands at the middle of its own weight, values between are interpolated linearly; for
    equal weights this is Hazen's plotting position.
    """
    order = np.argsort(values, kind="stable")
    middle = np.cumsum(weights[order]) - weights[order] / 2
    return float(np.interp(percent / 100 * weights.sum(), middle, values[order]))


def _orientations(read: Reader, pieces: Pieces) -> tuple[FloatArray, FloatArray]:
    """Tilt and azimuth of each region's mean panel normal."""
    tilt, azimuth = (_needed(read, name).ravel() for name in ("tilt", "azimuth"))
    found = [
        mean_orientation(tilt[pieces.cells[part]], azimuth[pieces.cells[part]], pieces.areas[part])
        for part in pieces
    ]
    return np.array([each[0] for each in found]), np.array([each[1] for each in found])


def mean_orientation(
    tilt: FloatArray, azimuth: FloatArray, weights: FloatArray
) -> tuple[float, float]:
    """Tilt and azimuth (degrees) of the mean panel normal; azimuth NaN where that is upright."""
    known = np.isfinite(tilt)
    if not known.any():
        return np.nan, np.nan
    beta, weight = np.deg2rad(tilt[known].astype(float)), weights[known]
    gamma = np.deg2rad(np.nan_to_num(azimuth[known].astype(float)))
    east = float((weight * np.sin(beta) * np.sin(gamma)).sum())
    north = float((weight * np.sin(beta) * np.cos(gamma)).sum())
    up = float((weight * np.cos(beta)).sum())
    mean_tilt = float(np.rad2deg(np.arctan2(np.hypot(east, north), up)))
    if mean_tilt < 0.05:  # flat for all purposes
        return mean_tilt, np.nan
    # Rounded, so that due north is 0 and not a hair under 360.
    return mean_tilt, round(float(np.rad2deg(np.arctan2(east, north))), 6) % 360
