"""Exact band statistics, gathered row by row while a layer streams past."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class BandStatistics:
    """What is true of one band, every valid cell counting once whatever its area.

    ``count`` cells of ``cells`` are valid; the others are NaN where ``count`` is 0. ``deviation``
    is the population's standard deviation. Units are the layer's.
    """

    cells: int
    count: int
    minimum: float
    maximum: float
    mean: float
    deviation: float


class RowStatistics:
    """Statistics of a layer that arrives in pieces of whole rows, in any order.

    Each row is summed by itself and the rows are joined from north to south at the end, so the
    result does not depend on how the rows were cut into pieces, nor on their order of arrival.

    Parameters
    ----------
    bands, rows, columns : int
        Shape of the whole layer.
    """

    def __init__(self, bands: int, rows: int, columns: int) -> None:
        shape = (bands, rows)
        self._cells = rows * columns
        self._count = np.zeros(shape, np.int64)
        self._mean = np.zeros(shape)
        self._squares = np.zeros(shape)
        self._minimum = np.full(shape, np.inf)
        self._maximum = np.full(shape, -np.inf)

    def add(self, first_row: int, block: NDArray[np.generic]) -> None:
        """Take in ``block``, shape (bands, some rows, columns), whose first row is ``first_row``.

        Pieces that share no row may be added by several threads at once.
        """
        part = (slice(None), slice(first_row, first_row + block.shape[1]))
        for band in range(block.shape[0]):
            values = block[band].astype(np.float64)
            known = ~np.isnan(values)
            count = known.sum(axis=1)
            # Sums along contiguous rows: their rounding depends on the row alone.
            mean = np.where(known, values, 0.0).sum(axis=1) / np.maximum(count, 1)
            departures = np.where(known, values - mean[:, None], 0.0)
            row = (band, part[1])
            self._count[row] = count
            self._mean[row] = mean
            self._squares[row] = (departures**2).sum(axis=1)
            self._minimum[row] = np.where(known, values, np.inf).min(axis=1)
            self._maximum[row] = np.where(known, values, -np.inf).max(axis=1)

    def bands(self) -> tuple[BandStatistics, ...]:
        """The statistics of each band, once every row has been added.

        Variances of rows are joined by the identity of Chan, Golub & LeVeque (1983, The American
        Statistician 37, 242-247): squares about the common mean are those about the row means
        plus the rows' own departures from it.
        """
        return tuple(self._band(band) for band in range(len(self._count)))

    def _band(self, band: int) -> BandStatistics:
        counts = self._count[band]
        count = int(counts.sum())
        if count == 0:
            return BandStatistics(self._cells, 0, *[float("nan")] * 4)
        mean = float((self._mean[band] * counts).sum() / count)
        between = (counts * (self._mean[band] - mean) ** 2).sum()
        variance = float(self._squares[band].sum() + between) / count
        return BandStatistics(
            cells=self._cells,
            count=count,
            minimum=float(self._minimum[band].min()),
            maximum=float(self._maximum[band].max()),
            mean=mean,
            deviation=variance**0.5,
        )
