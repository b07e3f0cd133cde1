"""From a file's cells to the target's: against CDO, and by what must always hold."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from gridcool.grid import Bounds, Grid, grid_from_bounds, grid_from_centres
from gridcool.inputs.axes import latitude_axis, longitude_axis
from gridcool.inputs.gridding import Gridding, gridding_to

GOLDEN = Path(__file__).parent / "golden"
GLOBE = Bounds(-180, -90, 180, 90)
#: Seed and axes (south first, as CDO got them) of the drawn sources.
SOURCES = {
    "global": (1, np.arange(-89.0, 90, 2), np.arange(1.0, 360, 2)),
    "gaps": (1, np.arange(-89.0, 90, 2), np.arange(1.0, 360, 2)),
    "regional": (3, np.arange(10.25, 25, 0.5), np.arange(100.25, 115, 0.5)),
}
SEEDS = st.integers(0, 2**32 - 1)


def drawn(name: str) -> np.ndarray:
    """The numbers that CDO was given, south first."""
    seed, latitude, longitude = SOURCES[name]
    shape = (len(latitude), len(longitude))
    values = np.random.default_rng(seed).integers(0, 256, shape).astype(np.float32)
    if name == "gaps":
        values[np.random.default_rng(2).integers(0, 256, shape) < 100] = np.nan
    return values


def write_sources(folder: Path) -> None:
    """The files that the golden values were made from."""
    for name, (_, latitude, longitude) in SOURCES.items():
        axes = {
            "lat": ("lat", latitude, {"units": "degrees_north"}),
            "lon": ("lon", longitude, {"units": "degrees_east"}),
        }
        dataset = xr.Dataset({"drawn": (("lat", "lon"), drawn(name), {"units": "1"})}, axes)
        dataset["drawn"].encoding["_FillValue"] = np.float32(-1)
        dataset.to_netcdf(folder / f"{name}.nc", format="NETCDF3_CLASSIC")


def regrid(
    values: np.ndarray, latitude: np.ndarray, longitude: np.ndarray, grid: Grid
) -> np.ndarray:
    """All rows at once; latitudes of ``values`` north first."""
    gridding = gridding_to(grid, latitude_axis(latitude), longitude_axis(longitude))
    return in_strips(gridding, values, grid, grid.rows)


def in_strips(gridding: Gridding, values: np.ndarray, grid: Grid, rows: int) -> np.ndarray:
    pieces = []
    for start in range(0, grid.rows, rows):
        target = slice(start, min(start + rows, grid.rows))
        source = gridding.source_rows(target)
        pieces.append(gridding.apply(values[..., source, :], target, source))
    return np.concatenate(pieces, axis=-2)


def globe(step: float) -> tuple[np.ndarray, np.ndarray]:
    """Centres of a global grid, north first and from 180 W."""
    return np.arange(90 - step / 2, -90, -step), np.arange(-180 + step / 2, 180, step)


def zones(latitude: np.ndarray, step: float) -> np.ndarray:
    """Area of zones on a sphere, up to a factor."""
    edges = np.deg2rad(np.stack([latitude - step / 2, latitude + step / 2]))
    return np.diff(np.sin(np.clip(edges, -np.pi / 2, np.pi / 2)), axis=0)[0]


@pytest.mark.parametrize("name", SOURCES)
def test_area_weights_are_those_of_cdo(name: str) -> None:
    with xr.open_dataset(GOLDEN / f"remapcon_{name}.nc") as file:
        golden = file["drawn"].sortby("lat", ascending=False).load()
    grid = grid_from_centres(golden["lat"].values, golden["lon"].values)
    _, latitude, longitude = SOURCES[name]
    values = drawn(name)[::-1]
    ours = regrid(values, latitude[::-1], longitude, grid)
    np.testing.assert_allclose(ours, golden.values, rtol=3e-7)
    assert np.isnan(ours).any() == (name == "gaps")


def test_cdo_does_not_weigh_latitude_by_degrees() -> None:
    """So the comparison above can fail: equal weights for equal degrees miss it widely."""
    with xr.open_dataset(GOLDEN / "remapcon_global.nc") as file:
        golden = file["drawn"].values
    degrees = drawn("global").repeat(2, axis=0).reshape(36, 5, 180).mean(axis=1)
    columns = degrees.repeat(2, axis=1).reshape(36, 72, 5).mean(axis=2)
    assert np.abs(np.roll(columns, 36, axis=1) / golden - 1).max() > 1e-3


@given(
    value=st.floats(0, 1, width=32),
    step=st.sampled_from([1.0, 2.0, 4.0, 7.5]),
    target=st.sampled_from([0.7, 1.5, 2.5, 3.0, 7.0, 11.0]),
)
@settings(max_examples=40, deadline=None)
def test_a_constant_stays_that_constant(value: float, step: float, target: float) -> None:
    """To the last bit, at the poles as elsewhere, when coarsening and when refining."""
    latitude, longitude = globe(step)
    grid = grid_from_bounds(GLOBE, target)
    values = np.full((len(latitude), len(longitude)), value, np.float32)
    assert (regrid(values, latitude, longitude, grid) == np.float32(value)).all()


@given(seed=SEEDS, factor=st.sampled_from([2.0, 2.5, 3.0, 5.0, 7.5]))
@settings(max_examples=25, deadline=None)
def test_coarsening_keeps_the_global_mean(seed: int, factor: float) -> None:
    latitude, longitude = globe(2.0)
    values = np.random.default_rng(seed).random((90, 180)).astype(np.float32)
    grid = grid_from_bounds(GLOBE, 2 * factor)
    coarse = regrid(values, latitude, longitude, grid)
    before = np.average(values.mean(axis=1, dtype=float), weights=zones(latitude, 2.0))
    after = np.average(coarse.mean(axis=1, dtype=float), weights=zones(grid.latitudes, 2 * factor))
    assert after == pytest.approx(before, rel=1e-7)


@given(
    seed=SEEDS,
    gaps=st.sampled_from([0.0, 0.1, 0.5]),
    target=st.sampled_from([1.0, 2.3, 5.0, 7.0, 12.0]),
    south=st.integers(-90, 20),
)
@settings(max_examples=40, deadline=None)
def test_values_stay_in_the_range_of_the_input(
    seed: int, gaps: float, target: float, south: int
) -> None:
    rng = np.random.default_rng(seed)
    latitude, longitude = np.arange(south + 68.5, south, -3), np.arange(10.5, 80, 3)
    values = rng.choice(np.float32([0, 0.3, 1]), (len(latitude), len(longitude)))
    values[rng.random(values.shape) < gaps] = np.nan
    found = regrid(values, latitude, longitude, grid_from_bounds(GLOBE, target))
    known = found[~np.isnan(found)]
    assume(known.size)
    assert np.nanmin(values) <= known.min()
    assert known.max() <= np.nanmax(values)


@given(seed=SEEDS, shift=st.integers(0, 71), fine=st.booleans())
@settings(max_examples=25, deadline=None)
def test_longitude_may_start_anywhere(seed: int, shift: int, fine: bool) -> None:
    latitude, longitude = np.arange(87.5, -90, -5), np.arange(2.5, 360, 5)
    values = np.random.default_rng(seed).random((36, 72)).astype(np.float32)
    grid = grid_from_bounds(GLOBE, 2.0 if fine else 15.0)
    turned = np.roll(longitude, -shift)
    turned[72 - shift :] += 360
    one = regrid(values, latitude, longitude, grid)
    other = regrid(np.roll(values, -shift, axis=1), latitude, turned, grid)
    np.testing.assert_allclose(one, other, rtol=2e-7)


@given(
    seed=SEEDS,
    rows=st.integers(1, 40),
    resolution=st.sampled_from([2.5, 3, 10]),
    gaps=st.sampled_from([0.0, 1e-3, 0.2]),
)
@settings(max_examples=30, deadline=None)
def test_strips_give_the_same_bits(seed: int, rows: int, resolution: float, gaps: float) -> None:
    """Also where some strips have gaps and others have none."""
    rng = np.random.default_rng(seed)
    latitude, longitude = np.arange(87.5, -90, -5), np.arange(2.5, 360, 5)
    values = rng.random((2, 36, 72)).astype(np.float32)
    values[rng.random(values.shape) < gaps] = np.nan
    grid = grid_from_bounds(GLOBE, float(resolution))
    gridding = gridding_to(grid, latitude_axis(latitude), longitude_axis(longitude))
    whole = in_strips(gridding, values, grid, grid.rows)
    np.testing.assert_array_equal(whole, in_strips(gridding, values, grid, rows))


def test_refining_goes_round_the_antimeridian() -> None:
    latitude, longitude = np.array([45.0, -45.0]), np.array([-135.0, -45.0, 45.0, 135.0])
    values = np.array([[1, 0, 0, 3], [1, 0, 0, 3]], np.float32)
    fine = regrid(values, latitude, longitude, grid_from_bounds(GLOBE, 10.0))
    # 175 E lies 40 of the 90 degrees from 135 E on the way to 225 E.
    assert fine[0, -1] == pytest.approx(3 + (1 - 3) * 40 / 90, rel=1e-6)
    assert fine[0, 0] == pytest.approx(3 + (1 - 3) * 50 / 90, rel=1e-6)
    assert fine[:, 0] == pytest.approx(fine[0, 0])  # to the poles
    # A centre on the antimeridian itself lies halfway.
    across = regrid(values, latitude, longitude, Grid(175.0, 50.0, 10.0, 10.0, 1, 1))
    assert across[0, 0] == pytest.approx(2.0)
    # A region that ends there does not know its other side.
    half = regrid(values[:, 2:], latitude, longitude[2:], Grid(170.0, 50.0, 10.0, 10.0, 1, 2))
    assert half[0, 0] == 3
    assert np.isnan(half[0, 1])


def test_refining_takes_the_line_between_two_centres() -> None:
    """And the last centre's value from there to the outer edge."""
    latitude, longitude = np.array([30.0, 20.0]), np.array([0.0, 10.0])
    values = np.array([[0, 1], [10, 11]], np.float32)
    fine = regrid(values, latitude, longitude, Grid(-5.0, 35.0, 2.0, 2.0, 10, 10))
    east = np.clip((np.arange(-4.0, 15, 2) - 0) / 10, 0, 1)
    down = np.clip((30 - np.arange(34.0, 15, -2)) / 10, 0, 1)
    np.testing.assert_allclose(fine, 10 * down[:, None] + east[None], atol=1e-6)


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


def test_a_gap_does_not_pull_its_neighbours() -> None:
    """The mean is over the valid part; a fill value of nought would halve it."""
    values = np.array([[4, np.nan], [2, 3]], np.float32)
    one = regrid(values, np.array([0.5, -0.5]), np.array([0.5, 1.5]), Grid(0, 1, 2, 2, 1, 1))
    assert one[0, 0] == pytest.approx(3.0)


def test_nothing_beyond_the_outer_edge() -> None:
    latitude, longitude = np.array([10.5, 9.5]), np.array([20.5, 21.5])
    ones = np.ones((2, 2), np.float32)
    fine = regrid(ones, latitude, longitude, Grid(19, 12, 0.5, 0.5, 8, 8))
    assert (fine[2:6, 2:6] == 1).all()
    assert np.isnan(fine).sum() == fine.size - 16
    # Coarser cells need half of their area inside.
    coarse = regrid(ones, latitude, longitude, Grid(20, 11, 1.5, 1.5, 2, 2))
    assert coarse[0, 0] == 1
    assert np.isnan(coarse[1, 1])


@pytest.mark.parametrize("step", [1.0, 10.0])
def test_poles_are_covered_from_rows_that_lie_on_them(step: float) -> None:
    """Rows at 90, 85, ... -90: the first and the last are half cells."""
    latitude, longitude = np.arange(90.0, -91, -5), np.arange(0.0, 360, 5)
    values = np.broadcast_to(latitude[:, None], (37, 72)).astype(np.float32)
    found = regrid(values, latitude, longitude, grid_from_bounds(GLOBE, step))
    assert np.isfinite(found).all()
    assert found[0].min() > 80
    assert found[-1].max() < -80


def test_the_same_grid_is_left_alone() -> None:
    latitude, longitude = globe(1.0)
    grid = grid_from_bounds(GLOBE, 1.0)
    gridding = gridding_to(grid, latitude_axis(latitude), longitude_axis(longitude))
    assert gridding.same
    assert gridding.description == "unchanged"
    rng = np.random.default_rng(0)
    values = rng.random((180, 360)).astype(np.float32)
    values[rng.random(values.shape) < 0.3] = np.nan
    np.testing.assert_array_equal(in_strips(gridding, values, grid, 7), values)
    # Counted from 0 to 360 instead, it is the same to the last bit.
    turned = regrid(np.roll(values, 180, axis=1), latitude, np.arange(0.5, 360), grid)
    np.testing.assert_array_equal(turned, values)


@pytest.mark.parametrize("turn", [0.0, 360.0])
def test_a_centre_on_the_western_edge_has_the_first_value(turn: float) -> None:
    """However the file counts; rounding must not throw it a turn away."""
    latitude, longitude = np.array([1.5, 0.5]), np.arange(-9.5, 0) + turn
    values = np.broadcast_to(np.arange(1, 11, dtype=np.float32), (2, 10))
    grid = Grid(-10.25, 2.0, 0.5, 0.5, 4, 3)
    assert grid.longitudes[0] == -10
    fine = regrid(values, latitude, longitude, grid)
    np.testing.assert_allclose(fine[0], [1, 1, 1.5])
    beyond = regrid(values, latitude, longitude, Grid(-10.75, 2.0, 0.5, 0.5, 4, 1))
    assert np.isnan(beyond).all()


@pytest.mark.parametrize("first", [-179.0, 1.0])
def test_a_centre_on_the_seam_of_a_global_file(first: float) -> None:
    """Halfway between the last cell and the first."""
    latitude, longitude = np.array([45.0, -45.0]), np.arange(first, first + 360, 2)
    values = np.broadcast_to(np.arange(180, dtype=np.float32), (2, 180))
    seam = first - 1
    fine = regrid(values, latitude, longitude, Grid(seam - 0.5, 50.0, 1.0, 1.0, 1, 2))
    np.testing.assert_allclose(fine[0], [179 / 2, 0])
