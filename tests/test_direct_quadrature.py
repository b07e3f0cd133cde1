"""The yardstick itself: its cloud expectations, its factorised account, and its convergence."""

from __future__ import annotations

import numpy as np
import pytest
from direct_optimum import best_orientation
from direct_quadrature import CLOUD_CLASSES, Panel, air_of, build_scene, evaluate, expectations
from direct_sky import Sky, cloud_classes, moment_of_sky
from invented_cells import random_cells
from scipy.integrate import quad
from scipy.special import beta

CELLS = random_cells(11, 12)


@pytest.mark.parametrize("concentration", [0.5, 1.0, 3.0])
@pytest.mark.parametrize("mean", [0.001, 0.02, 0.3, 0.5, 0.9, 0.999])
def test_cloud_classes_against_adaptive_integration(mean: float, concentration: float) -> None:
    """SciPy's integrator takes the singular ends of the beta distribution as exact weights."""
    probability, n = cloud_classes(mean, concentration, CLOUD_CLASSES)
    assert probability.sum() == pytest.approx(1, abs=1e-12)
    assert (probability * n).sum() == pytest.approx(mean, rel=1e-9)
    a, b = concentration * mean, concentration * (1 - mean)

    def product(x: float) -> float:
        _, s, e = moment_of_sky(np.array(x), 0.3, 0.8, 0.1, Sky())
        return float(s * s * e)

    exact, _ = quad(product, 0, 1, weight="alg", wvar=(a - 1, b - 1), epsabs=1e-12)
    _, s, e = moment_of_sky(n, 0.3, 0.8, 0.1, Sky())
    assert (probability * s * s * e).sum() == pytest.approx(exact / beta(a, b), abs=3e-6)


def test_cloud_classes_at_the_ends() -> None:
    for mean in (0.0, 1.0):
        probability, n = cloud_classes(mean, 1.0, CLOUD_CLASSES)
        assert (probability * n**3.4).sum() == mean


def test_expectations_are_by_month_and_hour() -> None:
    cell = CELLS[-1]
    bins = cell.cloud.shape[1]
    t_d, r_d = air_of(cell).diffuse_escape()
    mean = expectations(cell, Sky(), t_d, r_d)
    assert mean.k.shape == (12, bins)
    order = np.argsort(cell.cloud[3])
    assert (np.diff(mean.k[3][order]) <= 1e-12).all()
    assert (mean.ss <= mean.s + 1e-12).all()
    assert (mean.s_e <= mean.s).all()


def test_hour_bins_start_at_midnight() -> None:
    """A cloud over the morning alone takes its light from the east."""
    cell = CELLS[0]
    dull = np.tile(np.where(np.arange(24) < 12, 0.9, 0.1), (12, 1))
    scene = build_scene(
        type(cell)(cell.latitude, np.full(12, 0.2), dull), Sky(snow_covers_panel=False)
    )
    morning = scene.sun[0] > 0
    assert scene.mean.s[morning].max() < scene.mean.s[~morning].min()
    assert best_orientation(scene, Panel(), compass=True).azimuth > 180


@pytest.mark.parametrize("index", [1, 6, 11])
def test_finer_steps_change_little(index: int) -> None:
    """What the prescribed sampling is worth: every third day and ten minutes, to some 0.3 %."""
    cell, face = CELLS[index], (25.0, 180.0 if CELLS[index].latitude > 0 else 0.0)
    coarse = evaluate(build_scene(cell, Sky()), Panel(), *face)
    fine = evaluate(build_scene(cell, Sky(), steps_per_day=720, day_step=1), Panel(), *face)
    assert coarse.annual == pytest.approx(fine.annual, rel=4e-3)
    assert coarse.escape == pytest.approx(fine.escape, abs=2e-3)
    np.testing.assert_allclose(coarse.irradiance, fine.irradiance, rtol=0.03, atol=1.0)


def test_optimum_is_no_worse_than_any_neighbour() -> None:
    for index in (2, 10):
        compass = index == 10
        scene = build_scene(CELLS[index], Sky())
        best = best_orientation(scene, Panel(), compass=compass)
        for tilt in (best.tilt - 3, best.tilt + 3):
            other = evaluate(scene, Panel(), abs(tilt), best.azimuth).annual
            assert other <= best.annual * (1 + 1e-4)
        assert evaluate(scene, Panel(), 60, best.azimuth).annual < best.annual
        assert evaluate(scene, Panel(), best.tilt, best.azimuth).annual == pytest.approx(
            best.annual, rel=1e-6
        )


def test_invented_cells_cover_the_range() -> None:
    cells = random_cells(7, 200)
    assert random_cells(7, 3)[1].latitude == random_cells(7, 3)[1].latitude
    latitudes = np.array([cell.latitude for cell in cells])
    assert latitudes.min() < -70
    assert latitudes.max() > 70
    assert sum(np.ndim(cell.cloud) == 2 for cell in cells) == 50
    assert {cell.cloud.shape[1] for cell in cells if np.ndim(cell.cloud) == 2} == {8, 24}
    assert sum(cell.albedo.max() >= 0.5 for cell in cells) > 30
    for name, low, high in (
        ("water_cm", 0.15, 6.0),
        ("aerosol_550", 0.015, 1.0),
        ("ozone_cm", 0.22, 0.48),
    ):
        means = np.array([np.mean(getattr(cell, name)) for cell in cells])
        assert means.min() < low
        assert means.max() > high
    assert max(cell.elevation for cell in cells) > 4500
