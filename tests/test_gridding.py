"""From a file's cells to the target's: against CDO, and by what must always hold."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gridcool.grid import Bounds, Grid, grid_from_bounds
from gridcool.inputs.axes import latitude_axis, longitude_axis
from gridcool.inputs.gridding import Gridding, gridding_to

GOLDEN = Path(__file__).parent / "golden" / "remapcon.npz"


def field(latitude: np.ndarray, longitude: np.ndarray) -> np.ndarray:
    """The smooth field that CDO was given."""
    y, x = np.deg2rad(latitude)[:, None], np.deg2rad(longitude)[None]
    wave = 0.3 * np.cos(x) * np.cos(y) + 0.2 * np.sin(5 * x) * np.cos(y) ** 2
    return (1 + 0.5 * np.sin(2 * y) + wave).astype(np.float32)


def regrid(
    values: np.ndarray, latitude: np.ndarray, longitude: np.ndarray, grid: Grid
) -> np.ndarray:
    """All rows at once; latitudes of ``values`` north first."""
    gridding = gridding_to(grid, latitude_axis(latitude), longitude_axis(longitude))
    return apply(gridding, values, grid)


def apply(
    gridding: Gridding, values: np.ndarray, grid: Grid, rows: int | None = None
) -> np.ndarray:
    """Strip by strip."""
    step = rows or grid.rows
    pieces = []
    for start in range(0, grid.rows, step):
        target = slice(start, min(start + step, grid.rows))
        source = gridding.source_rows(target)
        pieces.append(gridding.apply(values[..., source, :], target, source))
    return np.concatenate(pieces, axis=-2)


@pytest.mark.parametrize(
    ("name", "latitude", "longitude"),
    [
        ("global_5", np.arange(89.0, -90, -2), np.arange(1.0, 360, 2)),
        ("regional_15", np.arange(24.75, 10, -0.5), np.arange(100.25, 115, 0.5)),
    ],
)
def test_area_weights_are_those_of_cdo(
    name: str, latitude: np.ndarray, longitude: np.ndarray
) -> None:
    with np.load(GOLDEN) as golden:
        expected = golden[name][::-1]
        south, west = golden[f"{name}_latitude"][0], golden[f"{name}_longitude"][0]
    rows, columns = expected.shape
    step = 180 / rows if name == "global_5" else 1.5
    grid = Grid(west - step / 2, south - step / 2 + rows * step, step, step, rows, columns)
    ours = regrid(field(latitude, longitude), latitude, longitude, grid)
    np.testing.assert_allclose(ours, expected, rtol=3e-7)
    # Degrees of latitude instead of its sine, or cells picked by their centre, would fail.
    plain = np.abs(field(grid.latitudes, grid.longitudes) - expected).max()
    assert plain > 1e-4


@given(seed=st.integers(0, 2**32 - 1), factor=st.sampled_from([2.0, 2.5, 3.0, 5.0, 7.5]))
@settings(max_examples=25, deadline=None)
def test_coarsening_keeps_the_global_mean_and_the_range(seed: int, factor: float) -> None:
    latitude, longitude = np.arange(89.0, -90, -2), np.arange(-179.0, 180, 2)
    values = np.random.default_rng(seed).random((90, 180)).astype(np.float32)
    grid = grid_from_bounds(Bounds(-180, -90, 180, 90), 2 * factor)
    coarse = regrid(values, latitude, longitude, grid)
    before = np.average(values.mean(axis=1), weights=sphere(latitude, 2.0))
    after = np.average(coarse.mean(axis=1), weights=sphere(grid.latitudes, 2 * factor))
    assert after == pytest.approx(before, rel=2e-6)
    assert values.min() <= coarse.min()
    assert coarse.max() <= values.max()


def sphere(latitude: np.ndarray, step: float) -> np.ndarray:
    """Area of zones on a sphere, up to a factor."""
    edges = np.deg2rad(np.stack([latitude - step / 2, latitude + step / 2]))
    return np.diff(np.sin(np.clip(edges, -np.pi / 2, np.pi / 2)), axis=0)[0]


@given(seed=st.integers(0, 2**32 - 1), shift=st.integers(0, 71), fine=st.booleans())
@settings(max_examples=25, deadline=None)
def test_longitude_may_start_anywhere(seed: int, shift: int, fine: bool) -> None:
    latitude, longitude = np.arange(87.5, -90, -5), np.arange(2.5, 360, 5)
    values = np.random.default_rng(seed).random((36, 72)).astype(np.float32)
    grid = grid_from_bounds(Bounds(-180, -90, 180, 90), 2.0 if fine else 15.0)
    turned = np.roll(longitude, -shift)
    turned = np.where(np.arange(72) >= 72 - shift, turned + 360, turned) if shift else turned
    one = regrid(values, latitude, longitude, grid)
    other = regrid(np.roll(values, -shift, axis=1), latitude, turned, grid)
    np.testing.assert_allclose(one, other, rtol=1e-5)


@given(seed=st.integers(0, 2**32 - 1), rows=st.integers(1, 40), resolution=st.sampled_from([3, 10]))
@settings(max_examples=20, deadline=None)
def test_strips_give_the_same_bits(seed: int, rows: int, resolution: int) -> None:
    rng = np.random.default_rng(seed)
    latitude, longitude = np.arange(87.5, -90, -5), np.arange(2.5, 360, 5)
    values = rng.random((2, 36, 72)).astype(np.float32)
    values[rng.random(values.shape) < 0.2] = np.nan
    grid = grid_from_bounds(Bounds(-180, -90, 180, 90), float(resolution))
    gridding = gridding_to(grid, latitude_axis(latitude), longitude_axis(longitude))
    whole, cut = apply(gridding, values, grid), apply(gridding, values, grid, rows)
    np.testing.assert_array_equal(whole, cut)


def test_refining_goes_round_the_antimeridian() -> None:
    latitude, longitude = np.array([45.0, -45.0]), np.array([-135.0, -45.0, 45.0, 135.0])
    values = np.array([[1, 0, 0, 3], [1, 0, 0, 3]], np.float32)
    grid = grid_from_bounds(Bounds(-180, -90, 180, 90), 10.0)
    fine = regrid(values, latitude, longitude, grid)
    # 175 E lies 40 of the 90 degrees from 135 E on the way to 225 E.
    assert fine[0, -1] == pytest.approx(3 + (1 - 3) * 40 / 90, rel=1e-6)
    assert fine[0, 0] == pytest.approx(3 + (1 - 3) * 50 / 90, rel=1e-6)
    assert fine[:, 0] == pytest.approx(fine[0, 0])  # to the poles


def test_gaps_neither_spread_nor_fill() -> None:
    latitude, longitude = np.arange(9.5, 0, -1), np.arange(0.5, 10)
    values = np.ones((10, 10), np.float32)
    values[:, 5:] = np.nan
    coarse = regrid(values, latitude, longitude, Grid(0, 10, 4, 4, 2, 2))
    assert coarse[0, 0] == 1  # all valid
    assert np.isnan(coarse[0, 1])  # a quarter valid
    half = regrid(values, latitude, longitude, Grid(4, 10, 2, 2, 5, 1))
    assert (half == 1).all()  # half of it valid
    fine = regrid(values, latitude, longitude, Grid(0, 10, 0.25, 0.25, 40, 40))
    # The border between valid and missing stays where it is, at 5 E.
    assert np.isfinite(fine[:, :20]).all()
    assert np.isnan(fine[:, 20:]).all()


def test_nothing_beyond_the_outer_edge() -> None:
    latitude, longitude = np.array([10.5, 9.5]), np.array([20.5, 21.5])
    grid = Grid(19, 12, 0.5, 0.5, 8, 8)
    fine = regrid(np.ones((2, 2), np.float32), latitude, longitude, grid)
    inside = (slice(2, 6), slice(2, 6))
    assert (fine[inside] == 1).all()
    assert np.isnan(fine).sum() == fine.size - 16


def test_the_same_grid_is_left_alone() -> None:
    latitude, longitude = np.arange(89.5, -90, -1), np.arange(-179.5, 180)
    grid = grid_from_bounds(Bounds(-180, -90, 180, 90), 1.0)
    gridding = gridding_to(grid, latitude_axis(latitude), longitude_axis(longitude))
    assert gridding.same
    assert gridding.description == "unchanged"
