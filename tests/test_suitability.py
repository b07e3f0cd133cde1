"""Value functions, weights, means and classes: worked by hand, and as properties."""

from __future__ import annotations

import dask
import numpy as np
import pytest
import xarray as xr
from hypothesis import given
from hypothesis import strategies as st
from planning_cells import fields, in_strips

from gridcool.planning.exclusions import exclusion_layer
from gridcool.planning.suitability import (
    Criterion,
    Mean,
    SuitabilityClass,
    peaked,
    straight,
    suitability,
    suitability_class,
    weigh,
)

NAN = np.nan
LAYERS = fields(
    rejected_flux=[[40, 100, 160], [100, NAN, 130]], flux_uncertainty=[[12, 12, 12], [6, 6, 6]]
)
INPUTS = fields(slope=[[0, 10, 20], [5, 5, NAN]])
FLUX = straight("rejected_flux", 40, 160, 0.6)
SLOPE = straight("slope", 20, 0, 0.2)


def found(*criteria: Criterion, mean: Mean = "arithmetic") -> xr.Dataset:
    exclusion = exclusion_layer(LAYERS, INPUTS, [])
    return suitability(LAYERS, INPUTS, criteria, exclusion=exclusion, mean=mean)


def test_value_functions() -> None:
    values = np.array([-1, 0, 5, 10, 15, 20, 30, NAN])
    rising, falling = straight("x", 0, 10), straight("x", 10, 0)
    np.testing.assert_allclose(rising.worth(values), [0, 0, 0.5, 1, 1, 1, 1, NAN])
    np.testing.assert_allclose(falling.worth(values), [1, 1, 0.5, 0, 0, 0, 0, NAN])
    ideal = peaked("x", 0, 5, 20)
    np.testing.assert_allclose(ideal.worth(values), [0, 0, 1, 2 / 3, 1 / 3, 0, 0, NAN], rtol=1e-6)


def test_means_by_hand() -> None:
    arithmetic = found(FLUX, SLOPE)["suitability"].values
    # Weights 0.6 and 0.2 are shares of three quarters and one quarter.
    expected = [
        [0.75 * 0 + 0.25 * 1, 0.75 * 0.5 + 0.25 * 0.5, 0.75 * 1 + 0.25 * 0],
        [0.75 * 0.5 + 0.25 * 0.75, NAN, NAN],
    ]
    np.testing.assert_allclose(arithmetic, expected, rtol=1e-6)
    geometric = found(FLUX, SLOPE, mean="geometric")["suitability"].values
    np.testing.assert_allclose(
        geometric, [[0, 0.5, 0], [0.5**0.75 * 0.75**0.25, NAN, NAN]], rtol=1e-6
    )


def test_uncertainty_follows_the_flux() -> None:
    spread = found(FLUX, SLOPE)["suitability_uncertainty"].values
    # 12 W m-2 of the 120 between worst and best are a tenth; at the ends one side is level.
    np.testing.assert_allclose(spread[0], [0.75 * 0.05, 0.75 * 0.1, 0.75 * 0.05], rtol=1e-5)
    assert spread[1, 0] == pytest.approx(0.75 * 0.05, rel=1e-5)
    assert np.isnan(spread[1, 1:]).all()
    assert (found(SLOPE)["suitability_uncertainty"].values[0] == 0).all()


def test_excluded_cells_have_none() -> None:
    out = xr.full_like(LAYERS["rejected_flux"], 0).fillna(0).astype(np.uint16)
    out[0, 1] = 4
    values = suitability(LAYERS, INPUTS, [SLOPE], exclusion=out)["suitability"].values
    assert np.isnan(values[0, 1])
    assert values[0, 0] == 1


def test_classes() -> None:
    values = fields(s=[[0.0, 0.39, 0.4, 0.69, 0.7, 1.0, NAN]])["s"]
    classes = [SuitabilityClass("fair", 0.4), SuitabilityClass("good", 0.7)]
    assert suitability_class(values, classes).values.tolist() == [[0, 0, 1, 1, 2, 2, 0]]
    lowest = [SuitabilityClass("poor", 0.0), *classes]
    assert suitability_class(values, lowest).values.tolist() == [[1, 1, 2, 2, 3, 3, 0]]


@given(
    worths=st.lists(
        st.tuples(st.floats(0, 1, width=32), st.floats(0.1, 10)), min_size=1, max_size=5
    )
)
def test_means_lie_between_their_parts(worths: list[tuple[float, float]]) -> None:
    values = [np.array([worth], np.float32) for worth, _ in worths]
    weights = [weight for _, weight in worths]
    low, high = min(values)[0], max(values)[0]
    arithmetic = weigh(values, weights, "arithmetic")[0]
    geometric = weigh(values, weights, "geometric")[0]
    assert low - 1e-5 <= geometric <= arithmetic + 1e-5
    assert arithmetic <= high + 1e-5
    doubled = weigh(values, [2 * weight for weight in weights], "arithmetic")[0]
    assert doubled == pytest.approx(arithmetic, abs=1e-6)  # only the ratio of weights counts


@pytest.mark.parametrize("rows", [1, 2])
def test_lazy_and_the_same_in_strips(rows: int) -> None:
    layers, inputs = in_strips(LAYERS, rows), in_strips(INPUTS, rows)

    def forbidden(*_: object, **__: object) -> None:
        raise AssertionError("computed before it was asked for")

    with dask.config.set(scheduler=forbidden):
        exclusion = exclusion_layer(layers, inputs, [])
        lazy = suitability(layers, inputs, [FLUX, SLOPE], exclusion=exclusion)
        classes = suitability_class(lazy["suitability"], [SuitabilityClass("fair", 0.4)])
    assert lazy["suitability"].dtype == np.float32
    assert lazy["suitability"].dims == ("latitude", "longitude")
    xr.testing.assert_identical(lazy.compute(), found(FLUX, SLOPE))
    assert classes.dtype == np.uint8
    assert classes.compute().values.tolist() == [[0, 1, 1], [1, 0, 0]]
