"""What is read off at the optimum: seasons, low rays, cooling, equivalents and uncertainty."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st

from gridcool.engine.blocks import solve
from gridcool.engine.glare import low_rays
from gridcool.engine.options import Field, InputError, Panel, Sky
from gridcool.engine.orientations import meridian
from gridcool.engine.seasons import best_cut, month_cuts, season_mask
from gridcool.physics import climate, sun

DIMS = ("month", "latitude", "longitude")
CLOUDY = Sky(irradiance="cloud")


def dataset(latitudes: list[float], cloud: np.ndarray, **more: float) -> xr.Dataset:
    """Cells of one ground; ``cloud`` runs along longitude or is one number."""
    columns = np.atleast_1d(cloud)
    shape = (12, len(latitudes), len(columns))
    fields = {"albedo": 0.25, **more}
    data = {name: (DIMS, np.full(shape, value, np.float32)) for name, value in fields.items()}
    data["cloud_fraction"] = (DIMS, np.broadcast_to(columns, shape).astype(np.float32))
    coordinates = {
        "month": np.arange(1, 13),
        "latitude": latitudes,
        "longitude": np.arange(len(columns), dtype=float),
    }
    return xr.Dataset(data, coords=coordinates)


@given(seed=st.integers(0, 2**32 - 1))
@settings(max_examples=20, deadline=None)
def test_best_cut_is_the_best_of_all(seed: int) -> None:
    rng = np.random.default_rng(seed)
    monthly = rng.random((12, 7, 5)).astype(np.float32)  # months, orientations, cells
    start, length = best_cut(monthly)
    mask = season_mask(start, length).astype(bool)
    assert len(month_cuts()) == 66
    for cell in range(5):
        worth = []
        for first in range(12):
            for months in range(1, 12):
                one = [(first + m) % 12 for m in range(months)]
                two = [m for m in range(12) if m not in one]
                parts = [monthly[season, :, cell].sum(axis=0).max() for season in (one, two)]
                worth.append(sum(parts))
        chosen = mask[:, cell]
        ours = sum(monthly[m, :, cell].sum(axis=0).max() for m in (chosen, ~chosen))
        assert ours == pytest.approx(max(worth), rel=1e-5)


def test_two_positions_beat_one_and_mirror_across_the_equator() -> None:
    answer = solve(dataset([50.0, 20.0, -20.0, -50.0], np.array(0.3)), sky=CLOUDY).compute()
    gain = answer["seasonal_gain"].values[:, 0]
    assert (gain > 0.01).all()
    assert (gain < 0.15).all()
    tilt = answer["seasonal_tilt"].values[:, :, 0]
    assert (tilt[0] > tilt[1]).all()  # low sun first
    # The Earth is nearer the sun in January, and the half years differ in length.
    np.testing.assert_allclose(tilt[:, :2], tilt[:, :1:-1], atol=3)
    begins = answer["seasonal_start"].values[:, :, 0]
    shift = (begins[:, :2] - begins[:, :1:-1]) % 12
    assert ((shift >= 5) & (shift <= 7)).all()
    # The fixed panel lies between its two positions at mid-latitudes.
    fixed = answer["tilt"].values[:, 0]
    assert (tilt[1, [0, 3]] < fixed[[0, 3]]).all()
    assert (fixed[[0, 3]] < tilt[0, [0, 3]]).all()


def test_the_best_tilt_of_each_month_beats_the_fixed_one() -> None:
    wanted = ["monthly_tilt", "monthly_tilt_flux"]
    answer = solve(dataset([45.0, -10.0], np.array(0.4)), sky=CLOUDY, extra_layers=wanted).compute()
    month = answer["monthly_tilt_flux"].values - answer["monthly_rejected_flux"].values
    assert month.min() > -0.01
    assert month.max() > 3
    winter, summer = answer["monthly_tilt"].values[[11, 5], 0, 0]
    assert winter > summer + 20


@pytest.mark.parametrize(("latitude", "signed"), [(0.0, 0.0), (35.0, -20.0), (-55.0, 40.0)])
def test_low_rays_by_stepping_through_the_year(latitude: float, signed: float) -> None:
    """Every day, every four minutes; ``signed`` tilts look north where positive."""
    phi, beta = np.deg2rad(latitude), np.deg2rad(signed)
    normal = np.array([0.0, np.sin(beta), np.cos(beta)])
    hours, eastern = 0.0, 0.0
    angle = (np.arange(360) + 0.5) / 360 * 2 * np.pi - np.pi
    for day in range(1, 366):
        ray = np.stack(
            sun.sun_vector(latitude=phi, declination=sun.declination(day), hour_angle=angle)
        )
        cosine = normal @ ray
        mirrored = 2 * cosine * normal[:, None] - ray
        low = (ray[2] > 0) & (cosine > 0) & (mirrored[2] < np.sin(np.deg2rad(10)))
        hours += low.sum() * 24 / 360
        eastern += (low & (mirrored[0] > 0)).sum() * 24 / 360
    orientations = meridian()
    index = int(np.argmin(np.abs(orientations.north - signed)))
    ours = low_rays(latitude, orientations)[:, index]
    assert ours.sum() == pytest.approx(hours, rel=0.03, abs=5)
    assert eastern == pytest.approx(hours / 2, rel=0.03)
    np.testing.assert_allclose(ours, ours[-np.arange(8) % 8], rtol=1e-5)  # mirror images


def test_cooling_of_a_nearly_flat_field() -> None:
    """At the equator the best panel all but lies flat: DTR · g · (ρ−α)/(1−α)."""
    field = Field(ground_cover=0.4)
    cells = dataset([0.0], np.array(0.5), temperature_range=10.0)
    answer = solve(cells, Panel(0.9), CLOUDY, field=field).compute()
    assert float(answer["tilt"][0, 0]) < 3
    expected = 10 * 0.4 * (0.9 - 0.25) / (1 - 0.25)
    assert float(answer["daytime_cooling"][0, 0]) == pytest.approx(expected, rel=0.01)


def test_equivalents_follow_the_flux() -> None:
    field = Field(carbon_dioxide_ppm=400.0)
    answer = solve(dataset([10.0, 40.0], np.array(0.3)), sky=CLOUDY, field=field).compute()
    flux = answer["rejected_flux"].values
    standing = climate.standing_equivalent(flux, 400.0)
    np.testing.assert_allclose(answer["co2e_standing"], standing, rtol=1e-6)
    np.testing.assert_allclose(answer["co2e_100yr"], climate.yearly_equivalent(flux), rtol=1e-6)


def test_uncertainty_is_made_of_its_parts_and_has_no_seams() -> None:
    parts = ["uncertainty_irradiance", "uncertainty_albedo", "uncertainty_cloud_distribution"]
    cells = dataset([35.0], np.linspace(0, 1, 401))
    answer = solve(cells, sky=CLOUDY, extra_layers=parts).compute()
    whole = answer["flux_uncertainty"].values[0]
    squares = sum(answer[name].values[0] ** 2 for name in parts)
    np.testing.assert_allclose(whole, np.sqrt(squares), rtol=1e-5)
    assert np.abs(np.diff(whole)).max() < 0.35
    assert 5 < whole[200] < 30
    usual = solve(cells.isel(longitude=[0]), sky=CLOUDY)
    assert not set(parts) & set(usual)


def test_albedo_part_is_the_change_of_the_flux() -> None:
    """At an orientation that hardly moves, twice the part is the difference of two runs."""
    error = InputError(albedo=0.02)
    part = solve(
        dataset([20.0], np.array(0.4)),
        sky=CLOUDY,
        error=error,
        extra_layers=["uncertainty_albedo"],
    )["uncertainty_albedo"]
    runs = [
        float(solve(dataset([20.0], np.array(0.4), albedo=a), sky=CLOUDY)["rejected_flux"][0, 0])
        for a in (0.25, 0.27)
    ]
    assert float(part[0, 0]) == pytest.approx(runs[0] - runs[1], rel=0.02)


@pytest.mark.parametrize("share", [0.0, 0.5, 1.0])
def test_a_black_panel_of_any_finish_rejects_less_than_nothing(share: float) -> None:
    """Nothing is reflected, and the ground's own light is forgone."""
    black = solve(dataset([20.0], np.array(0.3)), Panel(0.0, share), CLOUDY).compute()
    assert float(black["rejected_flux"][0, 0]) < 0
    assert np.isnan(black["escape_fraction"].values).all()
