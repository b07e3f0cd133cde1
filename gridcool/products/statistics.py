"""Exact band statistics, gathered row by row while a layer streams past."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

PIECE_CELLS = 16_000  # small enough for the processor's cache: twice as fast as whole strips


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
        self._minimum = np.full(shape, np.nan)
        self._maximum = np.full(shape, np.nan)

    def add(self, first_row: int, block: NDArray[np.generic]) -> None:
        """Take in ``block``, shape (bands, some rows, columns), whose first row is ``first_row``.

        Pieces that share no row may be added by several threads at once.
        """
        piece = max(1, PIECE_CELLS // block.shape[2])
        for band, values in enumerate(block):
            for start in range(0, len(values), piece):
                self._add_rows(band, first_row + start, values[start : start + piece])

    def _add_rows(self, band: int, first_row: int, values: NDArray[np.generic]) -> None:
        row = (band, slice(first_row, first_row + len(values)))
        missing = np.isnan(values)
        self._minimum[row] = np.fmin.reduce(values, axis=1)
        self._maximum[row] = np.fmax.reduce(values, axis=1)
        self._count[row] = values.shape[1] - np.count_nonzero(missing, axis=1)
        # Sums along contiguous rows: their rounding depends on the row alone.
        exact = values.astype(np.float64)
        mean = np.where(missing, 0.0, exact).sum(axis=1) / np.maximum(self._count[row], 1)
        departures = np.where(missing, 0.0, exact - mean[:, None])
        self._mean[row] = mean
        self._squares[row] = np.square(departures, out=departures).sum(axis=1)

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
            minimum=float(np.fmin.reduce(self._minimum[band])),
            maximum=float(np.fmax.reduce(self._maximum[band])),
            mean=mean,
            deviation=variance**0.5,
        )
