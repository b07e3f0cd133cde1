"""Irradiance from the diurnal temperature range against the published example and stations."""

from __future__ import annotations

import numpy as np
import pytest

from gridcool.physics.irradiance import hargreaves_samani


def test_fao_example_15() -> None:
    """FAO-56 Example 15, Lyon in July: 14.8 to 26.6 °C, Ra 40.6: 22.3 MJ m-2 d-1."""
    assert float(hargreaves_samani(26.6 - 14.8, 40.6)) == pytest.approx(22.3, abs=0.1)
    # With the radiation of 16 July, 40.45, the value computed from the formula is 22.23.
    assert float(hargreaves_samani(26.6 - 14.8, 40.45)) == pytest.approx(22.23, abs=0.02)
    assert abs(float(hargreaves_samani(26.6, 40.6)) - 22.3) > 5  # the maximum for the range
    assert abs(0.16 * (26.6 - 14.8) * 40.6 - 22.3) > 5  # without the root


def test_coast_and_interior() -> None:
    """FAO-56: 0.16 in the interior, 0.19 on coasts; the unit is that of the radiation."""
    inland, coast = hargreaves_samani(10.0, 400.0), hargreaves_samani(10.0, 400.0, 0.19)
    assert float(coast / inland) == pytest.approx(0.19 / 0.16, rel=1e-12)
    assert float(inland) == pytest.approx(0.16 * np.sqrt(10) * 400, rel=1e-12)


def test_against_bristow_campbell() -> None:
    """Bristow & Campbell (1984), A = 0.7 (FROM MEMORY), B = 0.036 exp(−0.154 ΔT), C = 2.4.

    Made for single days and, fed with means, known to be bright; 0.599 at a range of 10 K.
    """
    for spread in (8.0, 10.0, 12.0, 15.0):
        b = 0.036 * np.exp(-0.154 * spread)
        other = 0.7 * (1 - np.exp(-b * spread**2.4))
        if spread == 10.0:
            assert other == pytest.approx(0.599, abs=1e-3)
        assert float(hargreaves_samani(spread, 1.0)) == pytest.approx(other, abs=0.11)
        assert abs(float(hargreaves_samani(spread + 273.15, 1.0)) - other) > 1  # kelvin


def test_missing_stays_missing() -> None:
    np.testing.assert_array_equal(np.isnan(hargreaves_samani([np.nan, 9.0], 400.0)), [True, False])
    assert float(hargreaves_samani(0.0, 400.0)) == 0
