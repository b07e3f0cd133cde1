"""The day's heat in the ground: handbook soils, closed forms, and a solver of the heat equation."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.linalg import solve_banded

from gridcool.physics import soil

OMEGA = 2 * np.pi / 86400
COMMON_DECAY = 8.5  # per metre (0.085 per cm); common practice, no source

# Moene & van Dam, Transport in the Atmosphere-Vegetation-Soil Continuum, table 2.2 (De Vries 1963
# etc.), CONFIRMED on a stored page: heat capacity, MJ m-3 K-1; conductivity, W m-1 K-1;
# diffusivity, 1e-6 m2 s-1. The last column, the daily damping depth in cm, is the closed form.
HANDBOOK = {
    "sand, dry": (1.28, 0.24, 0.19, 7.2),
    "sand, moist": (2.12, 2.1, 0.99, 16.5),
    "sand, wet": (2.96, 2.5, 0.85, 15.2),
    "clay, dry": (1.43, 0.15, 0.10, 5.4),
    "clay, moist": (2.27, 0.9, 0.40, 10.4),
    "clay, wet": (3.10, 1.4, 0.45, 11.1),
    "peat, dry": (0.25, 0.04, 0.16, 6.6),
    "peat, moist": (2.13, 0.27, 0.13, 5.9),
    "peat, wet": (4.01, 0.50, 0.12, 5.9),
    "rock": (2.03, 2.9, 1.4, 19.8),
}
BY_NAME = {kind.name: kind for kind in soil.SOILS}


def decay(kind: soil.Soil) -> float:
    """Decay of the daily wave, 1/m."""
    return 1 / float(soil.damping_depth(kind.diffusivity))


def admittance(kind: soil.Soil) -> float:
    """√(kC), J m-2 K-1 s^-1/2."""
    return float(np.sqrt(kind.conductivity * kind.heat_capacity * 1e6))


@pytest.mark.parametrize("name", HANDBOOK)
def test_handbook_soils(name: str) -> None:
    """SH01, CONFIRMED: k/C is the printed diffusivity to 7 % (its rounding); SH02: the depth."""
    capacity, conductivity, diffusivity, depth = HANDBOOK[name]
    kind = BY_NAME[name]
    assert (kind.heat_capacity, kind.conductivity) == (capacity, conductivity)
    assert kind.diffusivity * 1e6 == pytest.approx(diffusivity, rel=0.07)
    found = 100 / decay(kind)
    assert found == pytest.approx(depth, rel=0.01)
    assert found == pytest.approx(100 * np.sqrt(2 * kind.diffusivity / OMEGA))
    # √(κP) and √(κP/2π) are the usual slips.
    for slip in (np.pi, 0.5):
        assert abs(100 * np.sqrt(kind.diffusivity * 86400 / np.pi * slip) / depth - 1) > 0.2


def test_handbook_is_complete() -> None:
    assert set(BY_NAME) == set(HANDBOOK)
    # Capacity over conductivity is a slip that moist sand alone would hide.
    inverted = [kind.heat_capacity / kind.conductivity for kind in soil.SOILS]
    diffusivities = [row[2] for row in HANDBOOK.values()]
    assert np.abs(np.log(inverted) - np.log(diffusivities)).max() > 2


def test_a_year_reaches_deeper_than_a_day() -> None:
    """SH03, EXACT: √365 = 19.105 times; 2.13 m for the printed 0.45 of wet clay."""
    day = float(soil.damping_depth(0.45e-6))
    year = float(soil.damping_depth(0.45e-6, 365 * soil.DAY))
    assert year / day == pytest.approx(19.105, abs=1e-3)
    assert year == pytest.approx(2.13, abs=0.01)
    assert abs(365 * day / year - 1) > 1  # depth proportional to the period


def test_amplitude_with_depth() -> None:
    """SH04, EXACT: 1/e at the damping depth, 1 % at 4.605 of them, all of it at the surface."""
    reach = float(soil.damping_depth(4e-7))
    found = soil.amplitude_at_depth(10.0, np.array([0, 1, 4.605]) * reach, 4e-7)
    np.testing.assert_allclose(found, [10, 10 / np.e, 0.1], rtol=1e-3)
    assert abs(5 / found[1] - 1) > 0.3  # the depth of half amplitude taken for that of 1/e


def heated_column(diffusivity: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Depths, amplitudes and lags (s) of a column whose surface swings by 1 K daily.

    Crank–Nicolson, 2.5 mm and 5 minutes, twelve days, over ten damping depths.
    """
    depths = np.arange(0, 1.2, 0.0025)
    step = 300.0
    number = diffusivity * step / 0.0025**2 / 2
    count = len(depths)
    banded = np.zeros((3, count))
    banded[0, 2:] = banded[2, :-2] = -number
    banded[1] = 1 + 2 * number
    banded[1, [0, -1]] = 1
    temperature = np.zeros(count)
    last_day = []
    for moment in np.arange(1, 12 * 288 + 1) * step:
        known = temperature.copy()
        known[1:-1] += number * np.diff(temperature, 2)
        known[0], known[-1] = np.sin(OMEGA * moment), 0.0
        temperature = solve_banded((1, 1), banded, known)
        if moment > 11 * 86400:
            last_day.append(temperature)
    wave = np.fft.rfft(np.array(last_day), axis=0)[1] * 2 / 288
    lag = -np.unwrap(np.angle(wave / wave[0])) / OMEGA
    return depths, np.abs(wave), lag


def test_solver_of_the_heat_equation() -> None:
    """SH04: a solver gives the decay, and the lag z/d that is 3.82 h at the damping depth."""
    diffusivity = BY_NAME["clay, moist"].diffusivity
    reach = float(soil.damping_depth(diffusivity))
    depths, amplitudes, lags = heated_column(diffusivity)
    shallow = depths < 3 * reach
    expected = soil.amplitude_at_depth(1.0, depths[shallow], diffusivity)
    np.testing.assert_allclose(amplitudes[shallow], expected, atol=2e-3)
    assert float(np.interp(reach, depths, lags)) / 3600 == pytest.approx(3.82, abs=0.02)
    wrong = soil.amplitude_at_depth(1.0, depths[shallow], diffusivity, 2 * soil.DAY)
    assert np.abs(amplitudes[shallow] - wrong).max() > 0.08


@pytest.mark.parametrize(
    ("name", "flux"),
    [
        ("clay, moist", 122),
        ("sand, dry", 47),
        ("sand, moist", 180),
        ("clay, dry", 39),
        ("peat, dry", 9),
        ("rock", 207),
    ],
)
def test_heat_into_the_ground(name: str, flux: float) -> None:
    """SH05, closed form: 10 K at the surface drive this flux, and it is k A √2 / d as well."""
    kind = BY_NAME[name]
    by_admittance = 10 * admittance(kind) * np.sqrt(OMEGA)
    assert by_admittance == pytest.approx(flux, abs=0.6)
    by_depth = np.sqrt(2) * kind.conductivity * 10 * decay(kind)
    assert by_depth == pytest.approx(by_admittance, rel=1e-9)
    assert abs(kind.conductivity * 10 * decay(kind) / flux - 1) > 0.2  # forgetting the √2
    if name == "clay, moist":
        assert admittance(kind) == pytest.approx(1429, rel=1e-3)


def test_heat_stored_in_half_a_day() -> None:
    """SH07, EXACT: 2 A √(kC/ω); 1.68 MJ m-2 for 5 K over moist clay.

    The package's own wave gives the same: the integral of C times the temperature over depth, whose
    amplitude is C A d/√2, swings twice that far.
    """
    kind = BY_NAME["clay, moist"]
    closed = 2 * 5 * admittance(kind) / np.sqrt(OMEGA)
    assert closed == pytest.approx(1.68e6, abs=5e3)  # three digits
    depths = np.linspace(0, 3, 60001)
    amplitude = soil.amplitude_at_depth(5.0, depths, kind.diffusivity)
    wave = amplitude * np.exp(-1j * depths * decay(kind))
    stored = kind.heat_capacity * 1e6 * np.trapezoid(wave, depths)
    assert 2 * abs(stored) == pytest.approx(closed, rel=1e-3)
    in_step = kind.heat_capacity * 1e6 * np.trapezoid(amplitude, depths)  # forgetting the lag
    assert abs(2 * in_step / closed - 1) > 0.3


def test_common_decay_fits_moist_soil_only() -> None:
    """Common practice, no source: 0.085 per cm, that is 11.76 cm and 5.03e-7 m2 s-1.

    Wet and moist mineral soils lie about it. Dry soil, which is what the best deserts have, and
    peat decay 1.6 to 2.2 times faster, so that no single constant will do.
    """
    assert pytest.approx(11.76, abs=0.01) == 100 / COMMON_DECAY
    assert pytest.approx(5.03e-7, rel=2e-3) == OMEGA / 2 / COMMON_DECAY**2
    ratio = {name: decay(kind) / COMMON_DECAY for name, kind in BY_NAME.items()}
    fits = {name for name, value in ratio.items() if 0.7 < value < 1.35}
    assert fits == {"sand, moist", "sand, wet", "clay, moist", "clay, wet"}
    assert 0.9 < ratio["clay, wet"] < 1.15
    for name in ("sand, dry", "clay, dry", "peat, dry", "peat, moist", "peat, wet"):
        assert ratio[name] > 1.6
    # Moist mineral soils are damped within 10 to 17 cm, dry ones within 5 to 8.
    reach = {name: 100 / decay(kind) for name, kind in BY_NAME.items()}
    assert all(10 < reach[name] < 17 for name in fits)
    assert all(5 < reach[name] < 8 for name in ("sand, dry", "clay, dry"))
    # At 10 cm under dry sand 25 % of the wave is left; the common constant would say 43 %.
    left = float(soil.amplitude_at_depth(1.0, 0.1, BY_NAME["sand, dry"].diffusivity))
    assert left == pytest.approx(0.25, abs=0.01)
    assert np.exp(-0.1 * COMMON_DECAY) == pytest.approx(0.43, abs=0.01)


def test_daytime_cooling_is_the_range_times_the_cut() -> None:
    cut = (0.9 - 0.2) / (1 - 0.2)
    found = float(soil.daytime_cooling(12.0, 0.3, cut))
    assert found == pytest.approx(12 * 0.3 * 0.875)
    assert abs(12 * 0.3 * 0.7 / found - 1) > 0.1  # the cut taken of all light, not the absorbed
    assert np.isnan(soil.daytime_cooling(np.nan, 0.3, cut))
