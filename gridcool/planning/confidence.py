"""How sure ranks are: errors that regions share in part, carried into ranks.

A cell's estimate is off by its standard uncertainty times √c z₀ + √(1−c) z, with z₀ the same
everywhere and z a smooth field that hangs together over about the correlation length. Neighbours
therefore err together, and large regions average their errors.

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
_CELLS_AT_ONCE = 2_000_000


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
    everywhere, by_node = error_shares(pieces, cell_uncertainty, grid, model)
    ranks = _ranks(values, everywhere, by_node, model)
    low, high = np.quantile(ranks, INTERVAL, axis=1, method="inverted_cdf")
    # The rank that is told always lies inside.
    told = np.empty(len(values))
    told[np.argsort(-values, kind="stable")] = np.arange(1, len(values) + 1)
    low, high = np.minimum(low, told), np.maximum(high, told)
    return Confidence(
        spread=_lengths(everywhere, by_node),
        low=low.astype(np.int64),
        high=high.astype(np.int64),
        top=(ranks <= top).mean(axis=1),
    )


def mean_spread(
    pieces: Pieces, cell_uncertainty: FloatArray, grid: Grid, model: ErrorModel
) -> FloatArray:
    """Standard uncertainty of each region's mean, shape (regions,)."""
    return _lengths(*error_shares(pieces, cell_uncertainty, grid, model))


def _lengths(everywhere: FloatArray, by_node: csr_array) -> FloatArray:
    squares = everywhere**2 + np.asarray((by_node**2).sum(axis=1)).ravel()
    return np.asarray(np.sqrt(squares))


def error_shares(
    pieces: Pieces, cell_uncertainty: FloatArray, grid: Grid, model: ErrorModel
) -> tuple[FloatArray, csr_array]:
    """Each region's response to the common error and to that of each node of the local one.

    Returns
    -------
    everywhere : array, shape (regions,)
    by_node : sparse array, shape (regions, nodes)
        Their squares add up to the variance of the region's mean.
    """
    nodes = Nodes.spaced(model.correlation_km)
    counts = np.diff(np.concatenate([[0], pieces.ends]))
    region = np.repeat(np.arange(len(pieces.ends)), counts)
    share = pieces.areas / np.repeat(pieces.area, counts)
    response = share * np.nan_to_num(cell_uncertainty.ravel()[pieces.cells])
    everywhere = np.bincount(region, response, minlength=len(pieces.ends))
    shape = (len(pieces.ends), nodes.count)
    by_node = csr_array(shape)
    for start in range(0, len(response), _CELLS_AT_ONCE):
        part = slice(start, start + _CELLS_AT_ONCE)
        row, column = np.divmod(pieces.cells[part], grid.columns)
        for node, weight in nodes.around(grid.latitudes[row], grid.longitudes[column]):
            values = response[part] * weight
            by_node = by_node + csr_array((values, (region[part], node)), shape=shape)
    local = np.sqrt(1 - model.common_share)
    return np.sqrt(model.common_share) * everywhere, local * by_node


@dataclass(frozen=True, eq=False)
class Nodes:
    """Places on the globe, about evenly spaced, between which the local error is interpolated.

    Attributes
    ----------
    ring : array of int, shape (bands,)
        How many nodes stand in each band of latitude, the northernmost first.
    """

    ring: NDArray[np.int64]

    @staticmethod
    def spaced(kilometres: float) -> Nodes:
        """Nodes about so far from each other."""
        bands = max(2, round(180 * KILOMETRES_PER_DEGREE / kilometres))
        middle = np.deg2rad(90 - (np.arange(bands) + 0.5) * 180 / bands)
        length = 360 * KILOMETRES_PER_DEGREE * np.cos(middle)
        return Nodes(np.maximum(1, np.round(length / kilometres)).astype(np.int64))

    @property
    def count(self) -> int:
        """Number of nodes."""
        return int(self.ring.sum())

    def around(
        self, latitude: FloatArray, longitude: FloatArray
    ) -> list[tuple[NDArray[np.int64], FloatArray]]:
        """The four nodes around each place and their weights, whose squares add up to one."""
        bands = len(self.ring)
        first = np.concatenate([[0], np.cumsum(self.ring)[:-1]])
        down = np.clip((90 - latitude) / 180 * bands - 0.5, 0, bands - 1)
        upper = np.minimum(down.astype(np.int64), bands - 2)
        found = []
        for band, weight in ((upper, 1 - (down - upper)), (upper + 1, down - upper)):
            along = longitude % 360 / 360 * self.ring[band]
            west = along.astype(np.int64)
            for step, part in ((0, 1 - (along - west)), (1, along - west)):
                found.append((first[band] + (west + step) % self.ring[band], weight * part))
        length = np.sqrt(sum(weight**2 for _, weight in found))
        return [(node, weight / length) for node, weight in found]


def _ranks(
    values: FloatArray, everywhere: FloatArray, by_node: csr_array, model: ErrorModel
) -> NDArray[np.int32]:
    """Ranks of draws of the true values, shape (regions, draws)."""
    count = len(values)
    kept = shrinkage(values, everywhere, by_node)
    centre = values.mean() + kept * (values - values.mean())
    rng = np.random.default_rng(model.seed)
    ranks = np.empty((count, model.draws), np.int32)
    order = np.arange(1, count + 1, dtype=np.int32)[:, None]
    for start in range(0, model.draws, _DRAWS_AT_ONCE):
        size = min(_DRAWS_AT_ONCE, model.draws - start)
        error = everywhere[:, None] * rng.standard_normal(size)
        error += by_node @ rng.standard_normal((by_node.shape[1], size))
        truth = centre[:, None] + np.sqrt(kept) * error
        best_first = np.argsort(-truth, axis=0, kind="stable")
        places = np.broadcast_to(order, (count, size))
        np.put_along_axis(ranks[:, start : start + size], best_first, places, 0)
    return ranks


def shrinkage(values: FloatArray, everywhere: FloatArray, by_node: csr_array) -> float:
    """Share of the estimates' spread that is the truth's, by moments.

    The spread of the estimates is that of the truth plus that of the errors about their mean.
    """
    count = len(values)
    if count < 2:
        return 1.0
    seen = float(values.var(ddof=1))
    if seen == 0:
        return 1.0
    squares = float((everywhere**2).sum() + (by_node**2).sum())
    together = float(everywhere.sum() ** 2 + (by_node.sum(axis=0) ** 2).sum())
    noise = (squares - together / count) / (count - 1)
    # Few regions tell little of the spread: never less than what chance may have hidden.
    return max(1 - noise / seen, 1 / (count + 1))
