"""The irradiance estimate and its uncertainty against six hourly station files (NREL TMY3).

The files and their origin are described in ../shared/data/README.md; without them this is skipped.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest

from gridcool.engine.options import Sky
from gridcool.engine.uncertainty import IRRADIANCE_ERRORS

ROOT = Path(__file__).parents[1]
DATA = ROOT.parent / "shared" / "data"
pytestmark = pytest.mark.skipif(
    not DATA.is_dir(), reason="the real data are not beside this checkout"
)
sys.path.insert(0, str(ROOT / "scripts"))
import calibrate_uncertainty as calibration  # noqa: E402 - a script, found by its folder


@pytest.fixture(scope="module")
def stations() -> list[calibration.Station]:
    paths = sorted(DATA.glob("stations/*.epw.gz"))
    return [calibration.read_station(path) for path in paths]


@pytest.fixture(scope="module")
def ceiling(stations: list[calibration.Station]) -> np.ndarray:
    sky = Sky(irradiance="cloud")
    return np.array([calibration.estimate(s, sky, own_air=False, clear=True) for s in stations])


@pytest.mark.parametrize(
    ("source", "meaning", "bias", "rms"),
    [
        ("cloud", "from_cloud", 6, 24),
        ("temperature-range", "from_temperature_range", 6, 28),
        ("blend", "from_blend", 4, 18),
    ],
)
def test_errors_are_as_large_as_stated(
    stations: list[calibration.Station],
    ceiling: np.ndarray,
    source: str,
    meaning: str,
    bias: float,
    rms: float,
) -> None:
    sky = Sky(irradiance=source)
    truth = np.array([s.irradiance for s in stations])
    error = np.array([calibration.estimate(s, sky, own_air=False) for s in stations]) - truth
    assert abs(error.mean()) < bias
    assert np.sqrt((error**2).mean()) < rms
    stated = IRRADIANCE_ERRORS[meaning]
    share = np.sqrt(((error / ceiling) ** 2).mean())
    assert share == pytest.approx(stated.share, abs=0.003)
    assert calibration.months_share(error, ceiling) == pytest.approx(stated.shared, abs=0.02)


def test_uncertainty_of_stations_left_out_of_the_fit(
    stations: list[calibration.Station], ceiling: np.ndarray
) -> None:
    """Of the blend's errors 68 ± 6 % lie within one, 95 ± 3 % within two standard uncertainties."""
    truth = np.array([s.irradiance for s in stations])
    found = np.array([calibration.estimate(s, Sky(), own_air=False) for s in stations])
    one, two = calibration.coverage(found - truth, ceiling)
    assert 0.62 <= one <= 0.74
    assert 0.92 <= two <= 0.98
    # Half as large an uncertainty would be caught.
    low, _ = calibration.coverage(2 * (found - truth), ceiling)
    assert low == pytest.approx(one)  # the fit follows the errors,
    tight = np.abs(found - truth) / (0.5 * IRRADIANCE_ERRORS["from_blend"].share * ceiling)
    assert (tight <= 1).mean() < 0.55  # fixed constants do not


def test_a_monthly_mean_put_into_the_formula_of_a_moment_is_far_too_bright(
    stations: list[calibration.Station],
) -> None:
    """A large concentration makes the month one sky, as if its mean were one (Jensen)."""
    truth = np.array([s.irradiance for s in stations])
    one_sky = Sky(irradiance="cloud", cloud_concentration=20.0)
    found = np.array([calibration.estimate(s, one_sky, own_air=False) for s in stations])
    assert (found - truth).mean() > 20
