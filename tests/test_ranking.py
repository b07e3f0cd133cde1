"""The region table, every column by hand on a grid of three by three cells."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gridcool.grid import Grid
from gridcool.planning.confidence import ErrorModel
from gridcool.planning.exclusions import ExclusionRule, exclusion_flags
from gridcool.planning.losses import exclusion_losses
from gridcool.planning.ranking import COLUMNS, mean_orientation, region_table, weighted_percentile
from gridcool.planning.regions import Cover
from gridcool.planning.worth import PanelCosts

NAN = math.nan
GRID = Grid(0.0, 30.0, 10.0, 10.0, 3, 3)
LAYERS: dict[str, np.ndarray] = {
    "rejected_flux": np.array([[100, 120, NAN], [80, 90, 110], [60, 70, 50]], np.float32),
    "flux_uncertainty": np.array([[4, 8, NAN], [6, 6, 6], [6, 6, 6]], np.float32),
    "tilt": np.array([[30, 30, NAN], [20, 20, 10], [0, 40, 5]], np.float32),
    "azimuth": np.array([[180, 180, NAN], [180, 0, 90], [NAN, 90, 0]], np.float32),
    "low_ray_hours": np.array([[100, 300, NAN], [50, 50, 0], [0, 0, 0]], np.float32),
    "co2e_standing": np.array([[100, 120, NAN], [80, 100, 0], [0, 0, 0]], np.float32),
    "co2e_100yr": np.array([[2, 3, NAN], [1, 2, 0], [0, 0, 0]], np.float32),
}
COSTS = PanelCosts(lifetime_years=25, mass=10, embodied_energy=150, cost_low=14, cost_high=100)
KM2 = 1e6


def cover(name: str, *cells: tuple[int, float], outside: float = 0.0) -> Cover:
    """A region of cells (index, km2) and some km2 outside the grid."""
    areas = np.array([area for _, area in cells]) * KM2
    numbers = np.array([cell for cell, _ in cells], np.int64)
    return Cover(name, float(areas.sum()) + outside * KM2, numbers, areas)


# The top row: 1 km2 with 100, 3 km2 with 120, 2 km2 without a result, 2 km2 outside the grid.
NORTH = cover("north", (0, 1.0), (1, 3.0), (2, 2.0), outside=2.0)
# Equal parts of two cells that face each other.
MIDDLE = cover("middle", (3, 2.0), (4, 2.0))
VOID = cover("void", (2, 2.0))


def table(covers: Sequence[Cover], layers: dict[str, np.ndarray] = LAYERS, **options: Any) -> Any:
    given = {"ground_cover": 0.5, "costs": COSTS, **options}
    return region_table(layers.get, covers, GRID, **given)


def test_every_column_by_hand() -> None:
    frame = table([MIDDLE, NORTH], error=ErrorModel(common_share=1.0))
    assert tuple(frame.columns) == COLUMNS
    assert frame["region"].tolist() == ["north", "middle"]
    north, middle = frame.to_dict("records")
    assert north == {
        "rank": 1,
        "region": "north",
        "area_km2": pytest.approx(8.0),
        "eligible_km2": pytest.approx(4.0),
        "eligible_share": pytest.approx(0.5),
        "rejected_flux_mean": pytest.approx((100 * 1 + 120 * 3) / 4),
        # Values stand at the middle of their weights, 0.5 and 2.5 of 4.
        "rejected_flux_p10": pytest.approx(100.0),  # 0.4 of 4: before the first
        "rejected_flux_p50": pytest.approx(115.0),  # 2.0 of 4: three quarters of the way
        "rejected_flux_p90": pytest.approx(120.0),  # 3.6 of 4: after the last
        "flux_uncertainty": pytest.approx((4 * 1 + 8 * 3) / 4),  # all of it common: it adds up
        "rank_low": 1,
        "rank_high": 1,
        "chance_top": 1.0,
        "tilt": pytest.approx(30.0),
        "azimuth": pytest.approx(180.0),
        "suitability_mean": pytest.approx(NAN, nan_ok=True),
        "panel_km2": pytest.approx(2.0),
        "rejected_power_tw": pytest.approx(115.0 * 2e6 / 1e12),
        "co2e_standing_mt": pytest.approx(115 * 2e6 / 1e9),
        "co2e_100yr_mt_per_year": pytest.approx(2.75 * 2e6 / 1e9),
        "panel_mass_mt": pytest.approx(10 * 2e6 / 1e9),
        "energy_payback_days": pytest.approx(150e6 / 115 / 86400),
        "cost_per_tonne_low": pytest.approx(14 / (2.75 * 25 / 1000)),
        "cost_per_tonne_high": pytest.approx(100 / (2.75 * 25 / 1000)),
        "low_ray_hours": pytest.approx(250.0),
        "main_exclusion": "",
    }
    assert middle["rank"] == 2
    assert middle["rejected_flux_mean"] == pytest.approx(85.0)
    assert [middle[f"rejected_flux_p{p}"] for p in (10, 50, 90)] == pytest.approx([80, 85, 90])
    assert middle["tilt"] == pytest.approx(0.0, abs=1e-6)  # north and south cancel
    assert math.isnan(middle["azimuth"])
    assert middle["eligible_share"] == pytest.approx(1.0)


RULES = [
    ExclusionRule("slope", "too steep", above=1),
    ExclusionRule("cover", "water", equals=(1,)),
]
FLAGS = exclusion_flags(RULES)


def test_exclusions_and_why() -> None:
    exclusion = np.array([[0, 2, 1], [2, 6, 0], [0, 0, 0]], np.uint16)
    layers = {**LAYERS, "exclusion": exclusion}
    frame = table([NORTH, MIDDLE, VOID], layers, flags=FLAGS).set_index("region")
    assert frame.loc["north", "eligible_km2"] == pytest.approx(1.0)
    assert frame.loc["north", "rejected_flux_mean"] == pytest.approx(100.0)
    assert frame.loc["north", "main_exclusion"] == "too steep"  # 3 km2, no result 2
    assert frame.loc["middle", "main_exclusion"] == "too steep"
    assert (
        frame.loc["void", "main_exclusion"] == "no flux, or no value of a criterion, is known here"
    )
    assert frame["rank"].fillna(-1).tolist() == [1, -1, -1]
    losses = exclusion_losses(exclusion, [NORTH, MIDDLE], FLAGS).to_dict("records")
    assert losses == [
        {
            "region": "north",
            "reason": "no flux, or no value of a criterion, is known here",
            "area_km2": 2.0,
            "only_km2": 2.0,
        },
        {"region": "north", "reason": "too steep", "area_km2": 3.0, "only_km2": 3.0},
        {"region": "middle", "reason": "too steep", "area_km2": 4.0, "only_km2": 2.0},
        {"region": "middle", "reason": "water", "area_km2": 2.0, "only_km2": 0.0},
    ]
    # What has no result stays out, whatever the mask says.
    free = {**LAYERS, "exclusion": np.zeros((3, 3), np.uint16)}
    assert table([NORTH], free)["eligible_km2"].tolist() == pytest.approx([4.0])


def test_ranked_by_suitability() -> None:
    layers = {
        **LAYERS,
        "suitability": np.array([[0.2, 0.2, NAN], [0.9, 0.7, 0], [0, 0, 0]], np.float32),
        "suitability_uncertainty": np.full((3, 3), 0.01, np.float32),
    }
    frame = table([NORTH, MIDDLE], layers, by="suitability", top=1)
    assert frame["region"].tolist() == ["middle", "north"]
    assert frame["suitability_mean"].tolist() == pytest.approx([0.8, 0.2])
    assert frame["chance_top"].tolist() == [1.0, 0.0]
    assert (frame["flux_uncertainty"] > 3).all()  # still that of the flux, in W m-2
    # Large errors make the order open.
    layers["suitability_uncertainty"] = np.full((3, 3), 5.0, np.float32)
    open_ = table([NORTH, MIDDLE], layers, by="suitability", top=1)
    assert open_["rank_low"].tolist() == [1, 1]
    assert open_["rank_high"].tolist() == [2, 2]
    assert open_["chance_top"].sum() == pytest.approx(1.0)


def test_layers_are_read_once_or_twice_and_never_together() -> None:
    asked: list[str] = []

    def read(name: str) -> np.ndarray | None:
        asked.append(name)
        return LAYERS.get(name)

    region_table(read, [NORTH, MIDDLE], GRID, ground_cover=0.3, costs=COSTS)
    assert asked.count("rejected_flux") == 1
    assert max(asked.count(name) for name in asked) == 1


def test_nothing_eligible_comes_last_without_a_rank() -> None:
    away = Cover("away", 5 * KM2, np.zeros(0, np.int64), np.zeros(0))
    nowhere = Cover("nowhere", 0.0, np.zeros(0, np.int64), np.zeros(0))
    frame = table([VOID, nowhere, MIDDLE, away, NORTH])
    assert frame["region"].tolist() == ["north", "middle", "away", "nowhere", "void"]
    assert frame["rank"].fillna(-1).tolist() == [1, 2, -1, -1, -1]
    assert frame["main_exclusion"].tolist() == ["", "", "no data", "no data", "no data"]
    last = frame.set_index("region").loc["void"]
    assert last["area_km2"] == pytest.approx(2.0)
    assert last["eligible_km2"] == last["eligible_share"] == 0
    assert last[["rejected_flux_mean", "tilt", "panel_km2", "chance_top"]].isna().all()
    assert frame["eligible_share"].notna().all()


def test_a_table_without_any_eligible_cell_stays_numeric() -> None:
    frame = table([VOID])
    assert frame["rank"].isna().all()
    for column in ("rejected_flux_mean", "tilt", "energy_payback_days", "cost_per_tonne_low"):
        assert frame[column].dtype == float
    assert isinstance(frame["rank"].dtype, pd.Int64Dtype)
    assert table([])["rank"].tolist() == []


def test_ties_are_in_order_of_name_whatever_the_order_given() -> None:
    names = ["delta", "alpha", "charlie", "bravo"]
    covers = [replace(MIDDLE, name=name) for name in names]
    frame = table([*covers, NORTH])
    assert frame["region"].tolist() == ["north", *sorted(names)]
    assert frame["rank"].tolist() == [1, 2, 3, 4, 5]


def test_layers_are_not_touched() -> None:
    before = {name: values.copy() for name, values in LAYERS.items()}
    table([NORTH, MIDDLE])
    for name, values in before.items():
        np.testing.assert_array_equal(LAYERS[name], values)


values_list = st.lists(st.floats(-1e3, 1e3), min_size=1, max_size=30)


@given(values_list, st.floats(0, 100), st.floats(1e-3, 1e6))
def test_percentiles_of_equal_weights_are_hazens(
    values: list[float], percent: float, weight: float
) -> None:
    array = np.array(values)
    found = weighted_percentile(array, np.full(len(array), weight), percent)
    expected = np.percentile(array, percent, method="hazen")
    assert found == pytest.approx(expected, rel=1e-9, abs=1e-6)


def test_percentiles_heed_the_weights() -> None:
    values, weights = np.array([10.0, 20.0, 30.0]), np.array([1.0, 1.0, 8.0])
    # The middles are 0.5, 1.5 and 6 of 10.
    assert weighted_percentile(values, weights, 50) == pytest.approx(20 + 10 * 3.5 / 4.5)
    assert np.percentile(values, 50, method="hazen") == 20  # without them
    order = [2, 0, 1]
    assert weighted_percentile(values[order], weights[order], 50) == pytest.approx(
        20 + 10 * 3.5 / 4.5
    )


@given(
    st.lists(st.tuples(st.floats(-1e3, 1e3), st.floats(1e-3, 1e3)), min_size=1, max_size=20),
    st.floats(0, 100),
    st.floats(0, 100),
)
def test_percentiles_rise_and_stay_within_the_values(
    pairs: list[tuple[float, float]], first: float, second: float
) -> None:
    values, weights = np.array(pairs).T
    low, high = (weighted_percentile(values, weights, p) for p in sorted((first, second)))
    assert values.min() <= low <= high <= values.max()


def orientation(*panels: tuple[float, float, float]) -> tuple[float, float]:
    """Mean of panels (tilt, azimuth, weight)."""
    tilt, azimuth, weight = np.array(panels).T
    return mean_orientation(tilt, azimuth, weight)


# What the east and west parts of two normals 10° either side of north leave of a tilt of 30°.
NORTHERLY = math.degrees(math.atan(math.tan(math.radians(30)) * math.cos(math.radians(10))))


@pytest.mark.parametrize(
    ("panels", "expected"),
    [
        ([(30, 0, 1), (30, 180, 1)], (0.0, NAN)),
        ([(25, 90, 2), (25, 270, 2)], (0.0, NAN)),
        ([(30, 350, 1), (30, 10, 1)], (NORTHERLY, 0.0)),  # a plain mean would face south
        ([(40, 90, 1), (0, NAN, 1)], (20.0, 90.0)),  # a flat panel faces nowhere
        ([(20, 90, 1), (NAN, NAN, 5)], (20.0, 90.0)),
        ([(20, 90, 1), (20, 0, 1e-12)], (20.0, 90.0)),
        ([(0.04, 45, 1)], (0.04, NAN)),
        ([(NAN, NAN, 1)], (NAN, NAN)),
        ([(35, 225, 3)], (35.0, 225.0)),
        ([(35, -1e-15, 1)], (35.0, 0.0)),
    ],
)
def test_mean_orientation_is_that_of_the_mean_normal(
    panels: list[tuple[float, float, float]], expected: tuple[float, float]
) -> None:
    tilt, azimuth = orientation(*panels)
    assert tilt == pytest.approx(expected[0], abs=1e-6, nan_ok=True)
    assert not azimuth >= 360
    turn = (azimuth - expected[1] + 180) % 360 - 180
    assert turn == pytest.approx(0.0 if expected[1] == expected[1] else NAN, abs=1e-6, nan_ok=True)


def test_mean_orientation_weighs_by_area() -> None:
    """Normals of 30° south (weight 3) and 30° north (weight 1): 2 sin 30° over 4 cos 30°."""
    tilt, azimuth = orientation((30, 180, 3), (30, 0, 1))
    assert tilt == pytest.approx(math.degrees(math.atan(math.tan(math.radians(30)) / 2)))
    assert azimuth == pytest.approx(180.0)
