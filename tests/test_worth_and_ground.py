"""Carbon-dioxide equivalents, soil and a panel's worth against published and worked figures."""

from __future__ import annotations

import numpy as np
import pytest

from gridcool.physics import climate, soil
from gridcool.planning.worth import (
    PanelCosts,
    cost_per_tonne_100yr,
    cost_per_tonne_standing,
    energy_payback_days,
)

GLASS = PanelCosts(lifetime_years=30, mass=10, embodied_energy=150, cost_low=13.8, cost_high=100)


def test_doubling_of_carbon_dioxide() -> None:
    """Myhre et al. (1998): 3.71 W m-2 for twice the concentration, whatever it is."""
    forcing = climate.carbon_dioxide_forcing([556, 840], [278, 420])
    np.testing.assert_allclose(forcing, 3.708, atol=1e-3)
    assert abs(5.35 * np.log10(2) - 3.708) > 1  # the other logarithm would fail


def test_mass_of_a_part_per_million() -> None:
    """7.80 Gt of carbon dioxide from 5.1352e18 kg of air at 28.97 g mol-1."""
    assert pytest.approx(7.80e12, rel=3e-3) == climate.MASS_PER_PPM
    assert abs(2.124e12 / 7.80e12 - 1) > 0.5  # carbon for carbon dioxide would fail


def test_impulse_response() -> None:
    """Joos et al. (2013), IPCC AR5 8.SM.10: shares add to one; 0.4094 after a century."""
    assert float(climate.airborne_fraction(0)) == pytest.approx(1, abs=1e-4)
    assert float(climate.airborne_fraction(100)) == pytest.approx(0.4094, abs=1e-4)
    np.testing.assert_allclose(climate.airborne_years([20, 100]), [14.24, 52.355], atol=2e-3)
    steps = np.linspace(0, 100, 100001)
    integral = np.trapezoid(climate.airborne_fraction(steps), steps)
    assert float(climate.airborne_years(100)) == pytest.approx(integral, rel=1e-6)


def test_absolute_warming_potential() -> None:
    """IPCC AR5: AGWP 2.49e-14 and 9.17e-14 W m-2 yr kg-1 over 20 and 100 years."""
    ours = climate.absolute_warming_potential([20.0, 100.0])
    np.testing.assert_allclose(ours, [2.49e-14, 9.17e-14], rtol=5e-3)
    # An emission in year 50 counts 0.578 of one in year 0 over the same century.
    ratio = float(climate.absolute_warming_potential(50.0) / ours[1])
    assert ratio == pytest.approx(0.578, abs=1e-3)


def test_a_watt_for_a_year_and_for_good() -> None:
    """One watt: 0.0214 kg for one year (AGWP100); standing, by both of its factors."""
    assert float(climate.yearly_equivalent(1.0)) == pytest.approx(0.02138, rel=5e-3)
    assert float(climate.yearly_equivalent(100.0) * 100) == pytest.approx(213.8, rel=5e-3)
    # Sustained for the horizon equals the mean airborne fraction's view (an identity).
    per_kilogram = climate.absolute_warming_potential(100.0) / climate.airborne_years(100.0)
    share = climate.airborne_years(100.0) / 100
    sustained = 1 / climate.EARTH_AREA / per_kilogram / share
    assert float(climate.yearly_equivalent(1.0) * 100) == pytest.approx(float(sustained), rel=1e-9)
    # Adding the standing equivalent to today's air forces as much as the panel removes.
    kilograms = float(climate.standing_equivalent(1.0, 420.0)) * 1e12
    ppm = kilograms / climate.MASS_PER_PPM
    forced = float(climate.carbon_dioxide_forcing(420 + ppm, 420)) * climate.EARTH_AREA
    assert forced == pytest.approx(1e12, rel=1e-3)


SOURCE = {  # Moene & van Dam, table 2.2: diffusivity, 1e-6 m2 s-1; closed-form daily depth, cm
    "sand, dry": (0.19, 7.2),
    "sand, moist": (0.99, 16.5),
    "sand, wet": (0.85, 15.2),
    "clay, dry": (0.10, 5.4),
    "clay, moist": (0.40, 10.4),
    "clay, wet": (0.45, 11.1),
    "peat, dry": (0.16, 6.6),
    "peat, moist": (0.13, 5.9),
    "peat, wet": (0.12, 5.9),
    "rock": (1.4, 19.8),
}


@pytest.mark.parametrize("kind", soil.SOILS, ids=lambda kind: kind.name)
def test_soils(kind: soil.Soil) -> None:
    """Conductivity over heat capacity gives the handbook's diffusivity, within its rounding."""
    diffusivity, depth = SOURCE[kind.name]
    assert kind.diffusivity == pytest.approx(diffusivity * 1e-6, rel=0.07)
    assert float(soil.damping_depth(kind.diffusivity)) * 100 == pytest.approx(depth, abs=0.06)


def test_waves_in_the_ground() -> None:
    """Carslaw & Jaeger (1959): 1/e at the damping depth; a year reaches √365 times deeper."""
    reach = float(soil.damping_depth(5e-7))
    assert float(soil.amplitude_at_depth(10.0, reach, 5e-7)) == pytest.approx(10 / np.e)
    assert float(soil.damping_depth(5e-7, 365 * soil.DAY)) / reach == pytest.approx(np.sqrt(365))
    # Common practice, no source: decay of 0.085 per cm. It fits moist mineral soil, not dry sand.
    decay = {s.name: 0.01 / float(soil.damping_depth(s.diffusivity)) for s in soil.SOILS}
    assert decay["clay, wet"] == pytest.approx(0.085, abs=0.01)
    assert decay["sand, dry"] > 0.13


def test_daytime_cooling_of_a_flat_field() -> None:
    cut = (0.9 - 0.2) / (1 - 0.2)
    assert float(soil.daytime_cooling(12.0, 0.3, cut)) == pytest.approx(12 * 0.3 * 0.875)


def test_a_panel_of_glass() -> None:
    """4 mm of glass at 15 MJ kg-1 (ICE): 150 MJ, 17.4 days of 100 W m-2; two costs by two views."""
    assert energy_payback_days(100.0, GLASS) == pytest.approx(150e6 / 100 / 86400)
    assert energy_payback_days(0.0, GLASS) is None
    standing = float(climate.standing_equivalent(100.0, 420.0))
    yearly = float(climate.yearly_equivalent(100.0))
    once = cost_per_tonne_standing(standing, 13.8)
    century = cost_per_tonne_100yr(yearly, 13.8, GLASS)
    assert once == pytest.approx(13.8 / 0.1201, rel=1e-2)
    # 13.8 per m2 is about 215 per tonne over a life of 30 years on AGWP100.
    assert century == pytest.approx(13.8 / (2.132 * 30 / 1000), rel=1e-2)
    assert cost_per_tonne_standing(0.0, 1.0) is None
