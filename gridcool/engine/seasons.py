"""A panel that is turned twice a year: which months belong together, and how to tilt it in each.

The year is cut into two runs of neighbouring months. All 66 cuts are compared on every second
candidate orientation; the best cut is then searched and refined on all of them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.optimum import find_best
from gridcool.engine.orientations import Orientations

FloatArray = NDArray[np.floating]


@dataclass(frozen=True)
class TwoSeasons:
    """The best two-position year of each cell; the season of low sun comes first.

    Attributes
    ----------
    flux : array, shape (cells,)
        Annual mean flux, W m-2.
    tilt, azimuth : array, shape (2, cells)
        Degrees.
    start : array, shape (2, cells)
        Month (1 to 12) in which each season begins.
    """

    flux: FloatArray
    tilt: FloatArray
    azimuth: FloatArray
    start: FloatArray


def month_cuts() -> list[tuple[int, int]]:
    """First month (0 to 11) and length of the shorter season of every way to cut the year."""
    return [(start, length) for length in range(1, 7) for start in range(12 if length < 6 else 6)]


def best_cut(monthly: FloatArray) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """The cut of the year that brings most.

    Parameters
    ----------
    monthly : array, shape (12, orientations, cells)
        Each month's share of the annual mean flux; cells last, so that maxima over orientations
        run along whole rows of memory.

    Returns
    -------
    start, length : array of int, shape (cells,)
        First month (0 to 11) and number of months of one of the two seasons.
    """
    _, orientations, cells = monthly.shape
    # Sums from January on, half a year past December, so that no season has to be pieced together.
    running = np.zeros((19, orientations, cells), np.float32)
    for month in range(18):
        np.add(running[month], monthly[month % 12], out=running[month + 1])
    whole = running[12]
    cuts = np.array(month_cuts())
    season, rest = np.empty_like(whole), np.empty_like(whole)
    values = np.empty((len(cuts), cells), np.float32)
    for value, (first, months) in zip(values, cuts, strict=True):
        np.subtract(running[first + months], running[first], out=season)
        np.subtract(whole, season, out=rest)
        season.max(axis=0, out=value)
        value += rest.max(axis=0)
    best = values.argmax(axis=0)
    return cuts[best, 0], cuts[best, 1]


def season_mask(start: NDArray[np.intp], length: NDArray[np.intp]) -> NDArray[np.float32]:
    """One in the months of the season, zero elsewhere, shape (12, cells)."""
    months = np.arange(12)[:, None]
    return ((months - start) % 12 < length).astype(np.float32)


def two_seasons(
    fluxes: tuple[FloatArray, FloatArray],
    start: NDArray[np.intp],
    length: NDArray[np.intp],
    orientations: Orientations,
    *,
    northern: NDArray[np.bool_],
) -> TwoSeasons:
    """Read off the best orientations of both seasons.

    Parameters
    ----------
    fluxes : two arrays, shape (cells, orientations)
        What each season brings to the annual mean flux, the cut's own season first.
    start, length : array of int, shape (cells,)
        From `best_cut`.
    orientations : Orientations
    northern : array of bool, shape (cells,)
        Whether a cell lies north of the equator, so that low sun stands in the south.
    """
    found = [find_best(flux, orientations) for flux in fluxes]
    total = sum(best.value(flux) for best, flux in zip(found, fluxes, strict=True))
    begins = (start + 1, (start + length) % 12 + 1)
    towards_sun = [best.north * np.where(northern, -1, 1) for best in found]
    swap = towards_sun[1] > towards_sun[0]

    def ordered(first: FloatArray, second: FloatArray) -> FloatArray:
        return np.stack([np.where(swap, second, first), np.where(swap, first, second)])

    return TwoSeasons(
        flux=np.asarray(total),
        tilt=ordered(found[0].tilt, found[1].tilt),
        azimuth=ordered(found[0].azimuth, found[1].azimuth),
        start=ordered(*(np.asarray(month, np.float32) for month in begins)),
    )
