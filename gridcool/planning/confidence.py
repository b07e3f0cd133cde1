"""How sure ranks are: errors that regions share in part, carried into ranks.

A cell's estimate is off by its standard uncertainty times √c z₀ + √(1−c) z_p, with z₀ the same
everywhere and z_p the same within a patch of about the correlation length. Regions of one patch
therefore err together, and large regions average their patches' errors.

Ranks of noisy values are too sure, because noise adds to the spread of the values. The true values
are therefore taken as drawn from a normal distribution whose spread is that of the values less that
of the errors (empirical Bayes: Efron & Morris 1973, J. Am. Stat. Assoc. 68; for ranks: Lin, Louis,
Paddock & Ridgeway 2006, Bayesian Analysis 1), and ranks are counted over draws from what is then
known of them. The truth is taken to vary over the map as the errors do, near places alike, so that
all values are drawn towards their mean by the same share and keep their order.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from gridcool.grid import Grid
from gridcool.planning.pieces import Pieces

FloatArray = NDArray[np.floating]

KILOMETRES_PER_DEGREE = 111.19  # of a great circle on the sphere of the Earth's area
INTERVAL = (0.05, 0.95)
_DRAWS_AT_ONCE = 250


@dataclass(frozen=True)
class ErrorModel:
    """How the errors of cells go together.

    Attributes
    ----------
    common_share : float
        c, the share of the error variance that is the same everywhere.
    correlation_km : float
        Within about this distance the rest is the same too.
    draws : int
    seed : int
    """

    common_share: float = 0.5
    correlation_km: float = 500.0
    draws: int = 2000
    seed: int = 1


@dataclass(frozen=True)
class Confidence:
    """What is known of each region's rank, shape (regions,).

    Attributes
    ----------
    spread : standard uncertainty of the region's value
    low, high : rank at the ends of the 90 % interval, 1 is best
    top : chance of being among the best ``top``
    """

    spread: FloatArray
    low: NDArray[np.int64]
    high: NDArray[np.int64]
    top: FloatArray


def rank_confidence(
    values: FloatArray,
    pieces: Pieces,
    cell_uncertainty: FloatArray,
    grid: Grid,
    model: ErrorModel,
    top: int,
) -> Confidence:
    """Rank intervals of regions.

    Parameters
    ----------
    values : array, shape (regions,)
        What regions are ranked by, the highest first; all known.
    pieces : Pieces
        Their eligible cells.
    cell_uncertainty : array, shape (rows, columns)
        Standard uncertainty of a cell's value; NaN counts as none.
    grid : Grid
    model : ErrorModel
    top : int
    """
    everywhere, by_patch = error_shares(pieces, cell_uncertainty, grid, model)
    ranks = _ranks(values, everywhere, by_patch, model)
    low, high = np.quantile(ranks, INTERVAL, axis=1, method="inverted_cdf")
    return Confidence(
        spread=_lengths(everywhere, by_patch),
        low=low.astype(np.int64),
        high=high.astype(np.int64),
        top=(ranks <= top).mean(axis=1),
    )


def mean_spread(
    pieces: Pieces, cell_uncertainty: FloatArray, grid: Grid, model: ErrorModel
) -> FloatArray:
    """Standard uncertainty of each region's mean, shape (regions,)."""
    return _lengths(*error_shares(pieces, cell_uncertainty, grid, model))


def _lengths(everywhere: FloatArray, by_patch: csr_array) -> FloatArray:
    squares = everywhere**2 + np.asarray((by_patch**2).sum(axis=1)).ravel()
    return np.asarray(np.sqrt(squares))


def error_shares(
    pieces: Pieces, cell_uncertainty: FloatArray, grid: Grid, model: ErrorModel
) -> tuple[FloatArray, csr_array]:
    """Each region's response to the common error and to that of each patch.

    Returns
    -------
    everywhere : array, shape (regions,)
    by_patch : sparse array, shape (regions, patches)
        Their squares add up to the variance of the region's mean.
    """
    patch_of = patches(grid, model.correlation_km)
    spread = np.nan_to_num(cell_uncertainty.ravel()[pieces.cells])
    patch = patch_of[pieces.cells]
    counts = np.diff(np.concatenate([[0], pieces.ends]))
    region = np.repeat(np.arange(len(pieces.ends)), counts)
    weight = pieces.areas / np.repeat(pieces.area, counts)
    shape = (len(pieces.ends), int(patch_of.max()) + 1)
    whole = csr_array((weight * spread, (region, patch)), shape=shape)
    whole.sum_duplicates()
    everywhere = np.asarray(whole.sum(axis=1)).ravel()
    return np.sqrt(model.common_share) * everywhere, np.sqrt(1 - model.common_share) * whole


def patches(grid: Grid, size_km: float) -> NDArray[np.int32]:
    """Number of the patch that each cell lies in, shape (rows · columns,).

    Patches are bands of latitude cut into pieces about as wide as they are high.
    """
    bands = max(1, round(180 * KILOMETRES_PER_DEGREE / size_km))
    band = np.minimum(((90 - grid.latitudes) / 180 * bands).astype(int), bands - 1)
    middle = np.deg2rad(90 - (np.arange(bands) + 0.5) * 180 / bands)
    around = np.maximum(1, np.round(360 * KILOMETRES_PER_DEGREE * np.cos(middle) / size_km))
    first = np.concatenate([[0], np.cumsum(around)[:-1]])
    share = (grid.longitudes % 360) / 360
    column = np.minimum(share * around[band][:, None], around[band][:, None] - 1).astype(int)
    number: NDArray[np.int32] = (first[band][:, None] + column).astype(np.int32).ravel()
    return number


def _ranks(
    values: FloatArray, everywhere: FloatArray, by_patch: csr_array, model: ErrorModel
) -> NDArray[np.int32]:
    """Ranks of draws of the true values, shape (regions, draws)."""
    count = len(values)
    kept = shrinkage(values, everywhere, by_patch)
    centre = values.mean() + kept * (values - values.mean())
    rng = np.random.default_rng(model.seed)
    ranks = np.empty((count, model.draws), np.int32)
    order = np.arange(1, count + 1, dtype=np.int32)[:, None]
    for start in range(0, model.draws, _DRAWS_AT_ONCE):
        size = min(_DRAWS_AT_ONCE, model.draws - start)
        error = everywhere[:, None] * rng.standard_normal(size)
        error += by_patch @ rng.standard_normal((by_patch.shape[1], size))
        truth = centre[:, None] + np.sqrt(kept) * error
        best_first = np.argsort(-truth, axis=0, kind="stable")
        places = np.broadcast_to(order, (count, size))
        np.put_along_axis(ranks[:, start : start + size], best_first, places, 0)
    return ranks


def shrinkage(values: FloatArray, everywhere: FloatArray, by_patch: csr_array) -> float:
    """Share of the estimates' spread that is the truth's, by moments.

    The spread of the estimates is that of the truth plus that of the errors about their mean.
    """
    count = len(values)
    if count < 2:
        return 1.0
    seen = float(values.var(ddof=1))
    if seen == 0:
        return 1.0
    squares = float((everywhere**2).sum() + (by_patch**2).sum())
    together = float(everywhere.sum() ** 2 + (by_patch.sum(axis=0) ** 2).sum())
    noise = (squares - together / count) / (count - 1)
    # Few regions tell little of the spread: never less than what chance may have hidden.
    return max(1 - noise / seen, 1 / (count + 1))
