"""A wanted power in rank order, by hand."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from gridcool.planning.target import TARGET_COLUMNS, reach_target
from gridcool.planning.worth import PanelCosts

COSTS = PanelCosts(lifetime_years=25, mass=10, embodied_energy=150, cost_low=14, cost_high=100)
TABLE = pd.DataFrame(
    {
        "rank": pd.array([1, 2, 3, pd.NA], "Int64"),
        "region": ["a", "b", "c", "d"],
        "panel_km2": [100.0, 200.0, 50.0, np.nan],
        "rejected_power_tw": [0.01, 0.018, 0.004, np.nan],
    }
)


def test_the_last_region_is_used_in_part() -> None:
    found = reach_target(TABLE, rejected_power_tw=0.019, panel_km2_per_year=50, costs=COSTS)
    assert found.reached
    assert found.reached_tw == pytest.approx(0.019)
    assert tuple(found.regions.columns) == TARGET_COLUMNS
    assert found.regions["region"].tolist() == ["a", "b"]
    assert found.regions["share_used"].tolist() == pytest.approx([1.0, 0.5])
    assert found.regions["panel_km2"].tolist() == pytest.approx([100, 100])
    assert found.regions["cumulative_power_tw"].tolist() == pytest.approx([0.01, 0.019])
    assert found.panel_km2 == pytest.approx(200)
    assert found.mass_mt == pytest.approx(200e6 * 10 / 1e9)
    assert found.energy_pj == pytest.approx(200e6 * 150e6 / 1e15)
    assert (found.cost_low, found.cost_high) == pytest.approx((2.8e9, 2e10))
    assert found.years == pytest.approx(4)


def test_too_much_is_said_plainly() -> None:
    found = reach_target(TABLE, rejected_power_tw=1.0, panel_km2_per_year=None, costs=COSTS)
    assert not found.reached
    assert found.reached_tw == pytest.approx(0.032)
    assert found.regions["region"].tolist() == ["a", "b", "c"]
    assert found.years is None


def test_just_enough_is_enough() -> None:
    assert reach_target(
        TABLE, rejected_power_tw=0.032, panel_km2_per_year=None, costs=COSTS
    ).reached


def test_regions_that_warm_are_passed_over() -> None:
    table = TABLE.assign(rejected_power_tw=[0.01, -0.002, 0.004, np.nan])
    found = reach_target(table, rejected_power_tw=0.012, panel_km2_per_year=None, costs=COSTS)
    assert found.regions["region"].tolist() == ["a", "c"]
    assert found.reached
