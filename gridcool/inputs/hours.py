"""The hour axis of a diurnal cycle, brought to bins of local mean solar time."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from gridcool.errors import InputDataError


@dataclass(frozen=True)
class Hours:
    """Evenly spaced bins of the day as they lie in a file.

    A label is taken as the middle of its bin, whether the file counts 0, 3, ... 21 or 1.5, 4.5, ...
    22.5; bins whose labels are their beginnings need their bounds in the file.

    Attributes
    ----------
    count : int
    first : float
        Label of the first bin, hours.
    clock : {"utc", "local-solar"}
    """

    count: int
    first: float
    clock: Literal["utc", "local-solar"]

    @property
    def centres(self) -> NDArray[np.float64]:
        """Middles of the bins that come out, hours of local mean solar time."""
        return (np.arange(self.count) + 0.5) * 24.0 / self.count

    def to_local(
        self, values: NDArray[np.float32], longitudes: NDArray[np.float64]
    ) -> NDArray[np.float32]:
        """Values at the middles of the local bins, by periodic linear interpolation in time.

        Every bin of a column moves by the same time, so the mean over the day is kept. A value is
        missing if one of the two it lies between is.

        Parameters
        ----------
        values : array, shape (months, hours, rows, columns)
            In the order of the file.
        longitudes : array, shape (columns,)
            Degrees east; local mean solar time is ahead of UTC by longitude / 15 hours.
        """
        width = 24.0 / self.count
        ahead = longitudes / 15.0 if self.clock == "utc" else np.zeros(len(longitudes))
        position = (self.centres[0] - ahead - self.first) / width
        # A label that was meant to fall on a bin does so in spite of rounding.
        position = np.where(
            np.abs(position - np.round(position)) < 1e-6, np.round(position), position
        )
        before = np.floor(position).astype(int)
        weight = (position - before).astype(np.float32)
        result = np.empty_like(values)
        columns = np.arange(len(longitudes))
        for bin_ in range(self.count):
            # Mixed indexing puts the column axis first.
            early = values[:, (before + bin_) % self.count, :, columns]
            late = values[:, (before + bin_ + 1) % self.count, :, columns]
            mixed = early * (1 - weight)[:, None, None] + late * weight[:, None, None]
            exact = (weight == 0)[:, None, None]
            result[:, bin_] = np.moveaxis(np.where(exact, early, mixed), 0, -1)
        return result


def read_hours(
    count: int,
    values: NDArray[np.float64] | None,
    bounds: NDArray[np.float64] | None,
    clock: Literal["utc", "local-solar"],
) -> Hours:
    """Understand an hour axis.

    Parameters
    ----------
    count : int
        Number of bins; they must fill the day evenly.
    values : array or None
        Labels in hours; None if the axis has none, which then counts bins from midnight.
    bounds : array, shape (count, 2), or None
        If given, the middles of the bins are taken from here.
    clock : {"utc", "local-solar"}

    Raises
    ------
    InputDataError
        If the labels do not fill a day evenly.
    """
    width = 24.0 / count
    if values is None:
        return Hours(count, width / 2, clock)
    labels = values if bounds is None else _middles(bounds)
    if not np.allclose(np.diff(labels), width, atol=1e-3):
        raise InputDataError(
            f"its hour axis counts {labels[0]:g} to {labels[-1]:g} in {count} steps, which do not "
            f"fill a day evenly; label the bins in hours, {width:g} apart."
        )
    return Hours(count, float(labels[0]), clock)


def _middles(bounds: NDArray[np.float64]) -> NDArray[np.float64]:
    """Middles of bins, of which those over midnight may end before they begin."""
    begin, end = bounds.T
    return np.unwrap((begin + np.where(end < begin, end + 24.0, end)) / 2, period=24.0)
