"""A panel's worth: energy payback and cost per tonne by two views, against worked figures."""

from __future__ import annotations

import pytest

from gridcool.physics import climate
from gridcool.planning.worth import (
    PanelCosts,
    cost_per_tonne_100yr,
    cost_per_tonne_standing,
    energy_payback_days,
)

GLASS = PanelCosts(lifetime_years=30, mass=10, embodied_energy=150, cost_low=13.8, cost_high=100)


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
