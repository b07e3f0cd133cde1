"""What escapes upward: observed global budgets, an independent ray model, discrete ordinates."""

from __future__ import annotations

import numpy as np
import pytest
import reference_tables as tables

from gridcool.physics import atmosphere, clouds
from gridcool.physics.atmosphere import Atmosphere
from gridcool.physics.escape import backscatter, diffuse_escape, layer_reflectance, ray_escape
from gridcool.physics.sun import air_mass

RAY_COLUMN = Atmosphere(1.0, 1.5, 0.076, 0.3)


def sine(zenith: float) -> float:
    """Sine of elevation from a zenith angle in degrees."""
    return float(np.cos(np.radians(zenith)))


# --- upward escape: observed budgets ---


def single_layer(incoming: float, up: float, down: float, back: float) -> tuple[float, float]:
    """Reflectance and transmittance of one layer (Donohoe & Battisti 2011)."""
    albedo = back / down
    reflectance = (incoming * up - down * back) / (incoming**2 - back**2)
    return reflectance, down / incoming * (1 - albedo * reflectance)


def first_pass(incoming: float, up: float, down: float, back: float) -> float:
    """Escape if all absorption happens on the way down (APRP; Taylor et al. 2007)."""
    albedo, share = back / down, down / incoming
    mu = up / incoming + share * (1 - albedo)
    gamma = (mu - share) / (mu - albedo * share)
    return (1 - gamma) / (1 - albedo * gamma)


@pytest.mark.parametrize("name", tables.SHORTWAVE_BUDGETS)
def test_ground_light_escape_is_the_single_layer_model(name: str) -> None:
    """Observed budgets: the package's E_d with the layer's R and T gives the printed escape.

    Fluxes FROM MEMORY except the CMIP6 pair, see the table.
    """
    incoming, up, down, back, reflectance, transmittance, escape = tables.SHORTWAVE_BUDGETS[name]
    r, t = single_layer(incoming, up, down, back)
    if reflectance is not None:
        assert r == pytest.approx(reflectance, abs=1.5e-3)
    if transmittance is not None:
        assert t == pytest.approx(transmittance, abs=1.5e-3)
    albedo = back / down
    found = float(clouds.ground_light_escape(0.0, albedo, t, r))
    assert found == pytest.approx(escape, abs=2e-3)
    # The budget closes: what the layer reflects, plus what arrives first and the ground returns.
    assert incoming * r + albedo * incoming * t * found == pytest.approx(up, rel=1e-9)
    assert abs(found - t) > 3e-3  # forgetting the ground's share of the bounces


def test_kernels_of_the_budgets() -> None:
    """W m-2 per 0.01 of albedo by three treatments of the same fluxes; the first must be lowest.

    CACK: Bright & O'Halloran (2019), GMD 12. Printed values computed from fluxes FROM MEMORY.
    """
    expected = {
        "clear, Wild et al. 2019": (1.79, 2.28, 2.10, 0.925, 0.852),
        "all-sky, Wild et al. 2015": (1.01, 1.32, 1.36, None, 0.738),
    }
    for name, (layer_kernel, aprp_kernel, cack, aprp_escape, cack_escape) in expected.items():
        incoming, up, down, back, *_ = tables.SHORTWAVE_BUDGETS[name]
        r, t = single_layer(incoming, up, down, back)
        albedo = back / down
        bounce = 1 - albedo * r
        assert incoming * (t / bounce) ** 2 / 100 == pytest.approx(layer_kernel, abs=0.02)
        escape = first_pass(incoming, up, down, back)
        if aprp_escape is not None:
            assert escape == pytest.approx(aprp_escape, abs=0.003)
        assert down * escape / 100 == pytest.approx(aprp_kernel, abs=0.02)
        assert np.sqrt(down / incoming) == pytest.approx(cack_escape, abs=0.002)
        assert down * np.sqrt(down / incoming) / 100 == pytest.approx(cack, abs=0.02)


def test_diffuse_escape_within_the_observed_bracket() -> None:
    """Clear sky: between the single layer (0.726) and absorption all on the way down (0.925).

    Global-mean column, common practice: 2.5 cm of water, aerosol 0.12 at 550 nm, 300 DU.
    """
    column = Atmosphere(0.98, 2.5, atmosphere.broadband_aerosol_depth(0.12), 0.3)
    t_d, r_d = diffuse_escape(column)
    escape = float(clouds.ground_light_escape(0.0, 33 / 247, t_d, r_d))
    assert 0.726 < escape < 0.925
    # CACK's 0.852 lies between them too, and the package's account is close to it.
    assert escape == pytest.approx(0.852, abs=0.05)
    # A grey way up, as if no band had been emptied on the way down, falls lower.
    grey, _ = ray_escape(column, 1e-9, atmosphere.DIFFUSE_AIR_MASS)
    assert float(grey) < float(t_d) - 0.05


# --- upward escape: rays ---


def grey_total(column: Atmosphere, up: float) -> float:
    """Escape if the way up were absorbed as a fresh beam."""
    m = float(air_mass(sine(up)))
    absorbed = float(atmosphere.absorption_transmittance(column, m))
    return absorbed * (1 - float(backscatter(column, m)))


@pytest.mark.parametrize("angles", tables.RAY_MODEL)
def test_ray_escape_against_independent_ray_model(angles: tuple[int, int]) -> None:
    """An independent ray model that sends 78 % of the aerosol scattering on, not 84."""
    down, up = (float(air_mass(sine(z))) for z in angles)
    unscattered, total = tables.RAY_MODEL[angles]
    upward, returned = ray_escape(RAY_COLUMN, down, up)
    assert float(upward) == pytest.approx(total, abs=0.02)
    absorption = float(upward) + float(returned)
    direct = atmosphere.scattering_transmittance(RAY_COLUMN, up)
    assert absorption * float(direct) == pytest.approx(unscattered, abs=0.02)
    # Grey absorption is another, lower number, and the model's own grey column says which.
    grey = grey_total(RAY_COLUMN, angles[1])
    assert grey == pytest.approx(tables.RAY_MODEL_GREY_TOTAL[angles], abs=0.03)
    assert float(upward) - grey > 0.05


def test_ray_escape_band_and_order() -> None:
    """Up to 60° from the zenith within 0.60 to 0.95, falling with the zenith angle."""
    zenith = np.arange(0.0, 61.0, 5)
    up = air_mass(np.cos(np.radians(zenith)))
    for down in (0.0, 30.0, 60.0, 75.0):
        escape, _ = ray_escape(RAY_COLUMN, float(air_mass(sine(down))), up)
        assert ((escape > 0.60) & (escape < 0.95)).all()
        assert (np.diff(escape) < 0).all()


def test_ray_escape_hardly_knows_water() -> None:
    """From 0.5 to 5 cm of water: less than 0.01 with emptied bands, about 0.05 if grey."""
    dry = Atmosphere(1.0, 0.5, 0.076, 0.3)
    wet = Atmosphere(1.0, 5.0, 0.076, 0.3)
    down, up = float(air_mass(sine(30))), float(air_mass(sine(30)))
    change = ray_escape(dry, down, up)[0] - ray_escape(wet, down, up)[0]
    assert abs(float(change)) < 0.01
    assert grey_total(dry, 30) - grey_total(wet, 30) > 0.03


def test_layer_against_discrete_ordinates() -> None:
    """A conservative Rayleigh layer, optical depth 0.3, sun at μ = 0.6, unit beam.

    Two open discrete-ordinates solvers agree to all digits: over black ground 0.12067 up, 0.11541
    diffuse and 0.36392 direct down; over an albedo of 0.2, 0.20001 up and 0.13606 diffuse down.
    """
    direct = 0.6 * np.exp(-0.3 / 0.6)
    assert direct == pytest.approx(0.36392, abs=1e-5)
    back = 0.6 * float(layer_reflectance(0.6, 0.5, 0.0))
    assert back == pytest.approx(0.12067, rel=8e-3)
    assert 0.6 - direct - back == pytest.approx(0.11541, rel=8e-3)
    # Half of what is scattered, once and for all, is the plausible simpler account.
    assert abs((0.6 - direct) / 2 / 0.12067 - 1) > 0.02
    mu, weight = (
        (np.polynomial.legendre.leggauss(24)[0] + 1) / 2,
        np.polynomial.legendre.leggauss(24)[1],
    )
    returned = float((weight * mu * layer_reflectance(mu, 0.3 / mu, 0 * mu)).sum())
    escape = float(clouds.ground_light_escape(0.0, 0.2, 1 - returned, returned))
    by_solver = (0.20001 - 0.12067) / (0.2 * (0.36392 + 0.11541))
    assert escape == pytest.approx(by_solver, rel=3e-3)
    down = (0.36392 + 0.11541) / (1 - 0.2 * returned)
    assert down == pytest.approx(0.36392 + 0.13606, rel=1e-3)
    # One slant at the diffuse air mass, the design's first account, lets too much out.
    slant = (1 - np.exp(-0.3 * atmosphere.DIFFUSE_AIR_MASS)) / 2
    assert abs((1 - slant) / (1 - 0.2 * slant) / by_solver - 1) > 6e-3
