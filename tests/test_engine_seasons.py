"""The two-position year and the best tilt of each month, against brute force by separate code.

Every one of the 66 ways to cut the year is tried with the direct quadrature, every degree of tilt
(every eight degrees of the compass, then refined, where the cloud has a daily course).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
import xarray as xr
from direct_quadrature import MONTH_DAYS, Cell, Panel, Scene, build_scene, evaluate
from direct_sky import Sky
from engine_cells import dataset_of, solved
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_cells import random_cells
from scipy.optimize import minimize

from gridcool.engine import options
from gridcool.engine.blocks import solve
from gridcool.engine.seasons import month_cuts

MONTHS = np.arange(12)
WEIGHT = MONTH_DAYS / MONTH_DAYS.sum()
WANTED = ("monthly_tilt", "monthly_azimuth", "monthly_tilt_flux")
LOST = 1e-3  # share of the flux that the chosen year may fall short of the best


def _cell(latitude: float, albedo: float, cloud: float, swing: float, snow: int = 0) -> Cell:
    """A cell whose winter is cloudier than its summer by twice the swing."""
    winter = np.cos(2 * np.pi * (MONTHS - (0 if latitude > 0 else 6)) / 12)
    ground = np.full(12, albedo)
    ground[np.argsort(-winter)[:snow]] = 0.7
    cover = np.clip(cloud + swing * winter, 0, 1)
    return Cell(latitude, ground, cover, elevation=300.0, water_cm=1.5, aerosol_550=0.15)


MERIDIAN = (
    _cell(47.0, 0.2, 0.55, 0.2),
    _cell(31.0, 0.3, 0.2, -0.1),
    _cell(9.0, 0.25, 0.5, -0.35),
    _cell(0.0, 0.15, 0.6, 0.0),
    _cell(-23.0, 0.3, 0.1, 0.05),
    _cell(-41.0, 0.18, 0.65, 0.1),
    _cell(-66.0, 0.2, 0.5, 0.1),
    _cell(58.0, 0.2, 0.6, 0.05, snow=5),
)
DAILY = tuple(random_cells(7, 8)[6:])  # clouds of 24 bins of the solar day, 58 and 75 degrees north


@cache
def _answer(daily: bool) -> xr.Dataset:
    cells = dataset_of(DAILY if daily else MERIDIAN)
    sky = options.Sky(irradiance="cloud")
    return solve(cells, options.Panel(), sky, extra_layers=WANTED).compute(scheduler="synchronous")


@dataclass(frozen=True)
class Brute:
    """Monthly flux of many orientations, shape (orientations, 12), and what the best cut brings."""

    scene: Scene
    tilt: np.ndarray
    azimuth: np.ndarray
    monthly: np.ndarray

    def best_of(self, months: np.ndarray) -> tuple[float, int]:
        """The most that a fixed panel brings in these months, and which orientation that is."""
        worth = (self.monthly * WEIGHT)[:, months].sum(axis=1)
        return float(worth.max()), int(worth.argmax())

    def value_of_cut(self, first: int, length: int) -> float:
        season = (MONTHS - first) % 12 < length
        return self.best_of(season)[0] + self.best_of(~season)[0]

    @property
    def best(self) -> float:
        return max(self.value_of_cut(*cut) for cut in month_cuts())


def _season_flux(scene: Scene, season: np.ndarray, tilt: float, azimuth: float) -> float:
    return float((evaluate(scene, Panel(), tilt, azimuth).monthly * WEIGHT)[season].sum())


@cache
def _brute(cell_index: int) -> Brute:
    scene = build_scene(MERIDIAN[cell_index], Sky())
    south = np.arange(-90.0, 91.0)
    azimuth = np.where(south > 0, 180.0, 0.0)
    monthly = [
        evaluate(scene, Panel(), *each).monthly for each in zip(np.abs(south), azimuth, strict=True)
    ]
    return Brute(scene, np.abs(south), azimuth, np.array(monthly))


def _chosen_year(answer: xr.Dataset, row: int, scene: Scene) -> tuple[float, np.ndarray]:
    """What the engine's own seasons and tilts bring by the direct quadrature; the first season."""
    here = answer.isel(latitude=row, longitude=0)
    start = here["seasonal_start"].values.astype(int) - 1
    first = (MONTHS - start[0]) % 12 < (start[1] - start[0]) % 12
    azimuth = np.nan_to_num(here["seasonal_azimuth"].values)
    total = sum(
        _season_flux(scene, season, float(tilt), float(side))
        for season, tilt, side in zip(
            (first, ~first), here["seasonal_tilt"].values, azimuth, strict=True
        )
    )
    return total, first


@pytest.mark.parametrize("row", range(len(MERIDIAN)))
def test_the_year_is_cut_as_well_as_any_of_the_66_ways(row: int) -> None:
    brute = _brute(row)
    assert len(month_cuts()) == 66
    ours, first = _chosen_year(_answer(False), row, brute.scene)
    assert ours >= (1 - LOST) * brute.best
    assert 1 <= first.sum() <= 11
    # The gain told is the gain found, against the fixed panel of the same separate code.
    fixed = brute.best_of(np.ones(12, bool))[0]
    gain = float(_answer(False)["seasonal_gain"][row, 0])
    assert gain == pytest.approx(brute.best / fixed - 1, abs=2e-3)
    assert gain >= 0


def test_other_cuts_would_lose_more_than_the_bar() -> None:
    """The check can fail: calendar half years, or the best cut a month or two late, fall short."""
    half_years = [_brute(row).value_of_cut(0, 6) / _brute(row).best for row in range(8)]
    assert sum(part < 1 - LOST for part in half_years) >= 6
    late = []
    for row in range(8):
        brute = _brute(row)
        start, length = max(month_cuts(), key=lambda cut, b=brute: b.value_of_cut(*cut))
        late.append(brute.value_of_cut((start + 2) % 12, length) / brute.best)
    assert sum(part < 1 - LOST for part in late) >= 6


@pytest.mark.parametrize("row", range(len(DAILY)))
def test_a_daily_course_of_cloud_turns_the_seasons_from_the_meridian(row: int) -> None:
    scene = build_scene(DAILY[row], Sky())
    east, north = (a.ravel() for a in np.meshgrid(*2 * [np.arange(-72.0, 73.0, 8.0)]))
    near = np.hypot(east, north) <= 76
    tilt, azimuth = _polar(east[near], north[near])
    monthly = [evaluate(scene, Panel(), *o).monthly for o in zip(tilt, azimuth, strict=True)]
    brute = Brute(scene, tilt, azimuth, np.array(monthly))
    start, length = max(month_cuts(), key=lambda cut: brute.value_of_cut(*cut))
    season = (MONTHS - start) % 12 < length
    best = sum(_refined(brute, each) for each in (season, ~season))
    ours, _ = _chosen_year(_answer(True), row, scene)
    assert ours >= (1 - LOST) * best
    side = _answer(True)["seasonal_azimuth"].values[:, row, 0]
    assert (np.abs(np.sin(np.deg2rad(side))) > 0.02).any()


def _polar(east: np.ndarray, north: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    return np.hypot(east, north), np.rad2deg(np.arctan2(east, north)) % 360


def _refined(brute: Brute, season: np.ndarray) -> float:
    """Simplex search from the best coarse orientation of one season."""
    _, index = brute.best_of(season)
    angle = np.deg2rad(brute.azimuth[index])
    start = brute.tilt[index] * np.array([np.sin(angle), np.cos(angle)])

    def loss(vector: np.ndarray) -> float:
        return -_season_flux(brute.scene, season, *map(float, _polar(*vector)))

    corners = start + 4 * np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    found = minimize(
        loss,
        start,
        method="Nelder-Mead",
        options={"initial_simplex": corners, "xatol": 0.05, "fatol": 1e-4},
    )
    return -float(found.fun)


def test_season_starts_are_consistent() -> None:
    for daily in (False, True):
        start = _answer(daily)["seasonal_start"].values[:, :, 0]
        assert np.isin(start, np.arange(1, 13)).all()
        assert (start[0] != start[1]).all()
    # Low sun comes first: north of the tropics the first season holds December, south of it June.
    start = _answer(False)["seasonal_start"].values[:, :, 0].astype(int) - 1
    for row, middle in ((0, 11), (1, 11), (5, 5), (6, 5)):
        length = (start[1, row] - start[0, row]) % 12
        assert (middle - start[0, row]) % 12 < length
    tilt = _answer(False)["seasonal_tilt"].values[:, :, 0]
    poleward = [0, 1, 5]
    assert (tilt[0, poleward] > tilt[1, poleward] + 5).all()


def test_covered_months_belong_to_either_season() -> None:
    """Months of snow bring nothing, and a place of snow all year has no seasons."""
    snow = _cell(70.0, 0.2, 0.4, 0.0, snow=12)
    answer = solved(dataset_of([snow]))
    for name in ("seasonal_gain", "seasonal_tilt", "seasonal_azimuth", "seasonal_start"):
        assert np.isnan(answer[name].values).all()
    assert float(answer["rejected_flux"][0, 0]) == 0


@given(latitude=st.floats(5, 60), cloud=st.floats(0.05, 0.9))
@settings(max_examples=8, deadline=None)
def test_mirror_hemispheres_swap_by_half_a_year(latitude: float, cloud: float) -> None:
    """Up to the Earth's nearness to the sun in January and the months' unequal lengths."""
    pair = solved(dataset_of([_cell(side * latitude, 0.2, cloud, 0.0) for side in (1, -1)]))
    start = pair["seasonal_start"].values[:, :, 0]
    tilt = pair["seasonal_tilt"].values[:, :, 0]
    gain = pair["seasonal_gain"].values[:, 0]
    shift = (start[:, 1] - start[:, 0]) % 12
    if latitude > 25:  # near the equator the year has two summers and the cuts are nearly alike
        assert np.isin(shift, (5, 6, 7)).all()
        np.testing.assert_allclose(tilt[:, 0], tilt[:, 1], atol=3.5)
    assert gain[0] == pytest.approx(gain[1], abs=0.012)
    assert (gain >= 0).all()


@pytest.mark.parametrize("row", range(len(MERIDIAN)))
def test_the_best_tilt_of_each_month(row: int) -> None:
    """Within a degree of every degree tried, or as much flux as the best of them."""
    brute = _brute(row)
    here = _answer(False).isel(latitude=row, longitude=0)
    flux, tilt = here["monthly_tilt_flux"].values, here["monthly_tilt"].values
    fixed = here["monthly_rejected_flux"].values
    assert (flux >= fixed - 2e-3 * np.maximum(fixed.max(), 1)).all()
    azimuth = np.nan_to_num(here["monthly_azimuth"].values)
    for month in range(12):
        best = brute.monthly[:, month].max()
        if best <= 0:  # the sun is down, or snow lies on the panel
            assert abs(flux[month]) < 0.02
            continue
        # Next to the polar circle a month of hardly any sun is read between two latitudes.
        assert flux[month] == pytest.approx(best, rel=0.01, abs=4e-3 * brute.monthly.max())
        direct = evaluate(brute.scene, Panel(), float(tilt[month]), float(azimuth[month])).monthly
        most = brute.tilt[brute.monthly[:, month].argmax()]
        # A month of hardly any sun is judged by what it could add to the year.
        lost = (best - direct[month]) / max(best, 0.1 * brute.monthly.max())
        assert lost < 2e-3 or abs(tilt[month] - most) <= 1
    # Not a small matter: a panel that lies flat falls short of it in winter.
    flat = brute.monthly[brute.tilt.argmin()]
    assert row == 3 or (brute.monthly.max(axis=0) - flat).max() > 2


def test_monthly_layers_only_on_request() -> None:
    assert not set(WANTED) & set(solved(dataset_of(MERIDIAN[:1])))
