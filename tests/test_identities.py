"""What must hold whatever the numbers: closure of the energy, limits, and mirror images.

Checked on the direct quadrature, on the physics kernels and on the engine.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import reference_tables as tables
from direct_optimum import best_orientation, on_meridian
from direct_quadrature import (
    Cell,
    Panel,
    Scene,
    annual_mean,
    build_scene,
    evaluate,
    monthly_mean,
    normal,
)
from direct_sky import Sky
from engine_cells import dataset_of, default_air, solved, value
from invented_cells import random_cells

from gridcool.engine.columns import column_basis
from gridcool.engine.options import Panel as EnginePanel
from gridcool.engine.options import Sky as EngineSky
from gridcool.engine.orientations import meridian
from gridcool.engine.response import path_integrals
from gridcool.physics import panel, sun

BARE_SKY = Sky(snow_covers_panel=False)
CELLS = random_cells(3, 24)
MONTHLY = [cell for cell in CELLS if np.ndim(cell.cloud) == 1]


# --- a panel that changes nothing; a flat matt panel ---


@pytest.mark.parametrize("index", [0, 4, 9, 20])
def test_panel_like_the_ground_changes_nothing(index: int) -> None:
    cell = replace(CELLS[index], albedo=np.full(12, 0.27))
    scene = build_scene(cell, BARE_SKY)
    same = evaluate(scene, Panel(0.27, 0.0, 0.3), 0, 0)
    np.testing.assert_allclose(same.monthly, 0, atol=1e-10)
    # A mirror of that reflectance, the same panel tilted, or another ground do change something.
    assert abs(evaluate(scene, Panel(0.27, 1.0, 0.3), 0, 0).annual) > 0.05
    assert abs(evaluate(scene, Panel(0.27, 0.0, 0.3), 30, 180).annual) > 0.5
    assert abs(evaluate(scene, Panel(0.30, 0.0, 0.3), 0, 0).annual) > 0.5


def flat_matt(scene: Scene, reflectance: float) -> np.ndarray:
    """(ρ − α) E[E_d G] of each month, the closed form of a flat Lambertian panel."""
    return monthly_mean(scene, (reflectance - scene.albedo) * scene.mean.k_e * scene.total)


@pytest.mark.parametrize("index", range(0, 24, 4))
def test_flat_matt_panel_has_a_closed_form(index: int) -> None:
    scene = build_scene(CELLS[index], BARE_SKY)
    outcome = evaluate(scene, Panel(0.8, 0.0, 0.3), 0, 0)
    np.testing.assert_allclose(outcome.monthly, flat_matt(scene, 0.8), rtol=1e-12, atol=1e-12)
    forgotten = monthly_mean(scene, 0.8 * scene.mean.k_e * scene.total)
    assert abs(annual_mean(forgotten) / outcome.annual - 1) > 0.03  # the albedo left out


def test_engine_on_flat_matt_panels() -> None:
    """Nothing where it reflects like the ground, and the closed form elsewhere."""
    sky = EngineSky(irradiance="cloud", snow_covers_panel=False)
    plain = [default_air(replace(cell, albedo=np.full(12, 0.27))) for cell in MONTHLY[:6]]
    same = solved(dataset_of(plain, own_air=False), EnginePanel(0.27, 0.0, 0.3), sky)
    np.testing.assert_allclose(same["rejected_flux_flat"], 0, atol=1e-3)
    cells = [default_air(cell) for cell in MONTHLY[:6]]
    result = solved(dataset_of(cells, own_air=False), EnginePanel(0.8, 0.0, 0.3), sky)
    for row, cell in enumerate(cells):
        expected = annual_mean(flat_matt(build_scene(cell, BARE_SKY), 0.8))
        assert value(result, "rejected_flux_flat", row) == pytest.approx(expected, rel=0.01)


# --- limits of the orientation ---


@pytest.mark.parametrize("azimuth", [0.0, 90.0, 180.0, 231.0])
def test_vertical_mirror_rejects_nothing_on_black_ground(azimuth: float) -> None:
    cell = replace(MONTHLY[2], albedo=np.zeros(12))
    scene = build_scene(cell, BARE_SKY)
    assert abs(evaluate(scene, Panel(), 90, azimuth).annual) < 1e-9
    assert evaluate(scene, Panel(), 45, azimuth).annual > 1
    # A search that maximised the light on the panel would have liked it.
    assert scene.mean.s @ np.maximum(normal(90, azimuth) @ scene.sun, 0) > 100


@pytest.mark.parametrize("latitude", [-52.5, 0.0, 35.0, 72.5])
def test_engine_sends_no_beam_up_from_a_vertical_panel(latitude: float) -> None:
    candidates = meridian()
    response = path_integrals(latitude, column_basis(()), candidates, 1)
    vertical = np.flatnonzero(np.isclose(candidates.tilt, 90))
    assert len(vertical) == 2
    np.testing.assert_allclose(response.panel[..., :3, vertical], 0, atol=1e-4)
    assert response.panel[..., 3, vertical].max() > 50  # the light is there and goes down
    assert response.panel[..., 0, candidates.flat].max() > 50


def no_air_mean(latitude: float, tilts: np.ndarray, *, only_up: bool = True) -> np.ndarray:
    """Annual mean W m-2 of a perfect mirror without air, by the package's sun and mirror."""
    days = np.arange(1, 366, 2)
    hour_angle = (np.arange(288) + 0.5) * 2 * np.pi / 288 - np.pi
    s = sun.sun_vector(
        latitude=np.radians(latitude),
        declination=sun.declination(days)[:, None],
        hour_angle=hour_angle,
    )
    beam = 1361 * sun.distance_factor(days)[:, None] * (s[2] > 0)
    means = []
    for tilt in tilts:
        n = panel.normal_vector(tilt=np.radians(abs(tilt)), azimuth=np.pi if tilt > 0 else 0.0)
        front = np.maximum(panel.cosine_of_incidence(s, n), 0)
        if only_up:
            front = front * (panel.reflected_vector(s, n)[2] > 0)
        means.append(float((beam * front).mean()))
    return np.array(means)


@pytest.mark.parametrize("latitude", tables.NO_AIR)
def test_best_tilt_without_air(latitude: int) -> None:
    """Brute force elsewhere, 365 days × 1°: best tilt within 1°, mean within 0.3 %."""
    tilt, mean, collector = tables.NO_AIR[latitude]
    tilts = np.arange(-10, 75, 0.5)
    means = no_air_mean(latitude, tilts)
    assert tilts[means.argmax()] == pytest.approx(tilt, abs=1)
    assert means.max() == pytest.approx(mean, rel=3e-3)
    caught = no_air_mean(latitude, tilts, only_up=False)
    assert tilts[caught.argmax()] == pytest.approx(collector, abs=1)
    if latitude >= 45:
        assert collector - tilt >= 3 - 1e-9


def test_permanent_equinox_without_air() -> None:
    """Exact: at latitude L a tilt of L gives S₀/π, the ray always rises, and it is the best."""
    hour_angle = (np.arange(1440) + 0.5) * 2 * np.pi / 1440 - np.pi
    for latitude in (0.0, 20.0, 47.0, 70.0):
        s = sun.sun_vector(latitude=np.radians(latitude), declination=0.0, hour_angle=hour_angle)
        lit = s[2] > 1e-9

        def rejected(tilt: float, s: panel.Vector = s, lit: np.ndarray = lit) -> float:
            n = panel.normal_vector(tilt=np.radians(tilt), azimuth=np.pi)
            up = panel.reflected_vector(s, n)[2] > 0
            front = np.maximum(panel.cosine_of_incidence(s, n), 0)
            return float(1361 * (front * up * lit).mean())

        n = panel.normal_vector(tilt=np.radians(latitude), azimuth=np.pi)
        assert (panel.reflected_vector(s, n)[2][lit] > 0).all()
        assert rejected(latitude) == pytest.approx(1361 / np.pi, rel=1e-3)
        assert rejected(latitude) >= max(rejected(t) for t in np.arange(0, 86, 1.0)) - 1e-6
        assert rejected(latitude + 15) < 0.98 * rejected(latitude)


# --- mirror images ---


def test_mirror_image_hemispheres() -> None:
    """Half a year on, the other hemisphere is the mirror image, up to the orbit's 3.3 %."""
    north = [default_air(cell) for cell in MONTHLY[:8]]
    south = [
        replace(
            cell,
            latitude=-cell.latitude,
            albedo=np.roll(cell.albedo, 6),
            cloud=np.roll(cell.cloud, 6),
        )
        for cell in north
    ]
    here, there = (solved(dataset_of(cells, own_air=False)) for cells in (north, south))
    for row, cell in enumerate(north):
        if abs(cell.latitude) < 5:
            continue
        assert value(there, "rejected_flux", row) == pytest.approx(
            value(here, "rejected_flux", row), rel=0.05
        )
        assert value(there, "tilt", row) == pytest.approx(value(here, "tilt", row), abs=1.5)
        assert value(here, "azimuth", row) in (0.0, 180.0)
        assert value(here, "azimuth", row) == 180 - value(there, "azimuth", row)


def test_even_cloud_needs_no_compass() -> None:
    """With the same cloud at all hours the search over the compass finds the meridian's optimum."""
    cells = [
        default_air(Cell(latitude, np.full(12, 0.2), np.linspace(0.2, 0.6, 12)))
        for latitude in (-32.0, 31.0)
    ]
    hourly = [replace(cell, cloud=np.tile(cell.cloud[:, None], 4)) for cell in cells]
    meridian_only = solved(dataset_of(cells, own_air=False))
    compass = solved(dataset_of(hourly, own_air=False))
    for row, toward in enumerate((0.0, 180.0)):
        assert value(meridian_only, "azimuth", row) == toward
        off = (value(compass, "azimuth", row) - toward + 180) % 360 - 180
        assert off == pytest.approx(0, abs=0.5)
        for layer, tolerance in (("tilt", 0.5), ("rejected_flux", 0.3), ("surface_shortwave", 0.5)):
            assert value(compass, layer, row) == pytest.approx(
                value(meridian_only, layer, row), abs=tolerance
            )


def test_direct_quadrature_has_mirror_images_too() -> None:
    cell = MONTHLY[1]
    names = ("albedo", "cloud", "water_cm", "aerosol_550", "ozone_cm")
    later = {name: np.roll(np.broadcast_to(getattr(cell, name), 12), 6) for name in names}
    other = Cell(latitude=-cell.latitude, elevation=cell.elevation, **later)
    here = best_orientation(build_scene(cell, BARE_SKY), Panel(), compass=False)
    there = best_orientation(build_scene(other, BARE_SKY), Panel(), compass=False)
    assert there.annual == pytest.approx(here.annual, rel=0.05)
    assert there.tilt == pytest.approx(here.tilt, abs=1.5)
    assert there.azimuth == 180 - here.azimuth


def test_morning_and_evening_are_mirror_images() -> None:
    """Exact: a diurnal cloud cycle read backwards turns the panel from east to west."""
    hour = np.arange(4) * 6 + 3.0
    morning = np.clip(0.45 + 0.35 * np.cos(2 * np.pi * (hour - 9) / 24), 0, 1)
    cell = Cell(-20.0, np.full(12, 0.25), np.tile(morning, (12, 1)))
    back = replace(cell, cloud=cell.cloud[:, ::-1].copy())
    result = solved(dataset_of([default_air(cell), default_air(back)], own_air=False))
    east, west = (value(result, "azimuth", row) for row in (0, 1))
    assert (east + west) % 360 == pytest.approx(0, abs=0.05) or (east + west) == pytest.approx(
        360, abs=0.05
    )
    assert 180 < east < 350  # cloudy mornings: the afternoon's sun, from the west, counts more
    assert value(result, "rejected_flux", 0) == pytest.approx(
        value(result, "rejected_flux", 1), rel=1e-4
    )
    direct = best_orientation(build_scene(default_air(cell), Sky()), Panel(), compass=True)
    assert direct.azimuth == pytest.approx(east, abs=3)


def test_signed_meridian() -> None:
    assert on_meridian(20.0) == (20.0, 180.0)
    assert on_meridian(-20.0) == (20.0, 0.0)
