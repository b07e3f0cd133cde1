"""Band statistics: exact, and the same however the rows arrive."""

from __future__ import annotations

import itertools
import math

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import array_shapes, arrays

from gridcool.products.statistics import RowStatistics

cells = arrays(
    np.float32,
    array_shapes(min_dims=3, max_dims=3, max_side=9),
    elements=st.one_of(
        st.just(float("nan")), st.floats(-1e6, 1e6, width=32, allow_subnormal=False)
    ),
)


def gathered(block: np.ndarray, cuts: list[int]) -> RowStatistics:
    statistics = RowStatistics(*block.shape)
    edges = sorted({0, block.shape[1], *(cut % block.shape[1] for cut in cuts)})
    pieces = list(itertools.pairwise(edges))
    for start, stop in reversed(pieces):
        statistics.add(start, block[:, start:stop])
    return statistics


@given(cells, st.lists(st.integers(0, 8), max_size=4))
def test_cuts_change_nothing(block: np.ndarray, cuts: list[int]) -> None:
    whole, parts = gathered(block, []).bands(), gathered(block, cuts).bands()
    assert repr(whole) == repr(parts)  # NaN is not equal to itself, its text is


@given(cells)
def test_agrees_with_numpy(block: np.ndarray) -> None:
    for band, found in zip(block, gathered(block, [3]).bands(), strict=True):
        known = band[~np.isnan(band)].astype(np.float64)
        assert (found.cells, found.count) == (band.size, known.size)
        if known.size == 0:
            assert math.isnan(found.mean)
            assert math.isnan(found.minimum)
            continue
        assert found.minimum == known.min()
        assert found.maximum == known.max()
        scale = np.abs(known).max()
        np.testing.assert_allclose(found.mean, known.mean(), rtol=1e-12, atol=1e-14 * scale)
        np.testing.assert_allclose(found.deviation, known.std(), rtol=1e-6, atol=1e-10 * scale)


def test_large_offset_does_not_eat_the_deviation() -> None:
    """The textbook shortcut, mean of squares minus square of mean, fails here."""
    block = (np.arange(6.0).reshape(1, 2, 3) + 1e9).astype(np.float64)
    (found,) = gathered(block, [1]).bands()
    np.testing.assert_allclose(found.deviation, np.std(np.arange(6.0)), rtol=1e-12)
    shortcut = np.sqrt(max(0.0, np.mean(block**2) - np.mean(block) ** 2))
    assert abs(shortcut - found.deviation) > 0.1


def test_wide_rows_cut_anywhere() -> None:
    rng = np.random.default_rng(5)
    block = rng.normal(50, 7, (2, 60, 1441)).astype(np.float32)
    block[rng.random(block.shape) < 0.3] = np.nan
    assert gathered(block, [1, 17, 40]).bands() == gathered(block, []).bands()
