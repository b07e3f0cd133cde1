"""Exclusion rules on hand-drawn grids."""

from __future__ import annotations

import dask
import numpy as np
import pytest
import xarray as xr
from planning_cells import fields, in_strips

from gridcool.errors import SettingsError
from gridcool.planning.exclusions import ExclusionRule, exclusion_flags, exclusion_layer

NAN = np.nan
LAYERS = fields(rejected_flux=[[100, 50, NAN], [80, 120, 90]])
INPUTS = fields(slope=[[5, 20, 30], [15, 15.1, NAN]], cover=[[1, 2, 3], [2, 5, 1]])


def excluded(*rules: ExclusionRule) -> list[list[int]]:
    return exclusion_layer(LAYERS, INPUTS, rules).values.tolist()


def test_bits_by_hand() -> None:
    steep = ExclusionRule("slope", "too steep", above=15)
    water = ExclusionRule("cover", "open water", equals=(2, 5))
    dim = ExclusionRule("rejected_flux", "too little", below=60)
    assert excluded(steep, water, dim) == [[0, 2 + 4 + 8, 1 + 2], [4, 2 + 4, 0]]
    assert excluded() == [[0, 0, 1], [0, 0, 0]]
    # The limit itself is still good, and a rule of both sides keeps what lies between.
    both = ExclusionRule("slope", "out of range", above=20, below=15)
    assert excluded(both) == [[2, 0, 1 + 2], [0, 0, 0]]


def test_a_cell_without_a_needed_layer_cannot_be_judged() -> None:
    found = exclusion_layer(LAYERS, INPUTS, [], needed=["slope"])
    assert found.values.tolist() == [[0, 0, 1], [0, 0, 1]]


def test_missing_values_are_kept_or_not_as_told() -> None:
    assert excluded(ExclusionRule("slope", "steep", above=15))[1][2] == 0
    assert excluded(ExclusionRule("slope", "steep", above=15, missing="out"))[1][2] == 2


def test_months_are_judged_by_their_annual_mean() -> None:
    monthly = np.zeros((12, 2, 3), np.float32)
    monthly[0] = 31 * [[1.0]][0][0]  # January holds 31 of 365 days
    inputs = fields(snow=monthly)
    limit = 31 * 31 / 365
    just_above = exclusion_layer(
        LAYERS, inputs, [ExclusionRule("snow", "snow", above=limit - 0.01)]
    )
    just_below = exclusion_layer(
        LAYERS, inputs, [ExclusionRule("snow", "snow", above=limit + 0.01)]
    )
    assert (just_above.values & 2 == 2).all()
    assert (just_below.values & 2 == 0).all()
    assert abs(limit - 31 / 12) > 0.02  # months of equal weight would be seen


def test_a_month_missing_makes_the_mean_missing() -> None:
    monthly = np.zeros((12, 2, 3), np.float32)
    monthly[3, 0, 0] = NAN
    rule = ExclusionRule("snow", "snow", above=5, missing="out")
    assert exclusion_layer(LAYERS, fields(snow=monthly), [rule]).values[0].tolist() == [2, 0, 1]


def test_flags_have_words_and_reasons() -> None:
    rules = [
        ExclusionRule("slope", "too steep", above=1),
        ExclusionRule("cover", "Too steep!", above=1),
        ExclusionRule("cover", "水", above=1),
    ]
    flags = exclusion_flags(rules)
    assert [flag.value for flag in flags] == [1, 2, 4, 8]
    assert [flag.meaning for flag in flags] == ["no_result", "too_steep", "too_steep_2", "rule_3"]
    assert flags[3].description == "水"


def test_too_many_rules_are_refused() -> None:
    rules = [ExclusionRule("slope", f"reason {n}", above=n) for n in range(16)]
    with pytest.raises(SettingsError, match="at most 15"):
        exclusion_flags(rules)
    assert len(exclusion_flags(rules[:15])) == 16
    assert exclusion_flags(rules[:15])[-1].value < 2**16


def test_an_unknown_layer_is_named_with_the_nearest() -> None:
    with pytest.raises(SettingsError, match="did you mean slope"):
        excluded(ExclusionRule("slop", "steep", above=1))
    with pytest.raises(SettingsError, match="known here: cover, rejected_flux, slope"):
        excluded(ExclusionRule("xyz", "steep", above=1))


def test_layers_come_before_inputs() -> None:
    inputs = INPUTS.assign(rejected_flux=INPUTS["slope"])
    found = exclusion_layer(LAYERS, inputs, [ExclusionRule("rejected_flux", "dim", below=60)])
    assert found.values[0].tolist() == [0, 2, 1]


@pytest.mark.parametrize("rows", [1, 2])
def test_lazy_and_the_same_in_strips(rows: int) -> None:
    rules = [ExclusionRule("slope", "too steep", above=15)]

    def forbidden(*_: object, **__: object) -> None:
        raise AssertionError("computed before it was asked for")

    with dask.config.set(scheduler=forbidden):
        lazy = exclusion_layer(in_strips(LAYERS, rows), in_strips(INPUTS, rows), rules)
    assert lazy.dtype == np.uint16
    assert lazy.chunksizes["latitude"] == (rows,) * (2 // rows)
    xr.testing.assert_identical(lazy.compute(), exclusion_layer(LAYERS, INPUTS, rules))
