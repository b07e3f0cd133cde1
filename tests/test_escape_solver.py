"""The escape of a rising ray against a discrete-ordinates solver of radiative transfer.

PythonicDISORT solves the plane-parallel equation; a beam that rises from the ground through a
horizontally even layer fares as one that falls through it onto black ground. The account's form is
T = T_s + φ (1 − T_s), R = (1 − φ)(1 − T_s) with a path of τ / sin(elevation); here τ, φ and the
layer are grey and conservative, so that scattering alone is judged.
"""

from __future__ import annotations

import numpy as np
import pytest
from PythonicDISORT.pydisort import pydisort

STREAMS = 16
ALMOST_CONSERVATIVE = 1 - 1e-6  # the solver refuses exactly one
RAYLEIGH = np.zeros(STREAMS + 1)
RAYLEIGH[[0, 2]] = 1.0, 0.1
ELEVATIONS = np.array([5.0, 10, 20, 30, 45, 60, 75, 90])
DEPTHS = np.array([0.05, 0.1, 0.2, 0.4, 0.8])


def henyey_greenstein(asymmetry: float) -> np.ndarray:
    return asymmetry ** np.arange(STREAMS + 1)


def solve(depth: float, sine: float, phase: np.ndarray, albedo: float = 0.0) -> tuple[float, ...]:
    """Reflected upward, diffuse and direct downward fluxes for a beam of unit normal flux."""
    ground = [albedo] if albedo else []
    # The solver cannot stand exactly on one of its own quadrature angles, nor at the zenith.
    _, up, down, _ = pydisort(
        np.array([depth]),
        np.array([ALMOST_CONSERVATIVE]),
        STREAMS,
        phase[None, :],
        min(sine, 0.99999),
        1.0,
        0.0,
        only_flux=True,
        BDRF_Fourier_modes=ground,
    )
    diffuse, direct = down(depth)
    return float(up(0.0)), float(diffuse), float(direct)


def account(depth: float, sine: float, forward: float) -> tuple[float, float]:
    """T and R as shares of the ray."""
    left = np.exp(-depth / sine)
    return left + forward * (1 - left), (1 - forward) * (1 - left)


def test_the_solver_gives_the_published_layer() -> None:
    """Rayleigh, τ = 0.3, μ₀ = 0.6: two solvers agree on these digits; over albedo 0.2 too."""
    np.testing.assert_allclose(solve(0.3, 0.6, RAYLEIGH), [0.12067, 0.11541, 0.36392], atol=2e-5)
    np.testing.assert_allclose(
        solve(0.3, 0.6, RAYLEIGH, 0.2), [0.20001, 0.13606, 0.36392], atol=2e-5
    )


def differences(phase: np.ndarray, forward: float, depths: np.ndarray) -> np.ndarray:
    """Account minus solver in R (and so, conservatively, solver minus account in T)."""
    table = np.empty((len(depths), len(ELEVATIONS)))
    for i, depth in enumerate(depths):
        for j, elevation in enumerate(ELEVATIONS):
            sine = float(np.sin(np.deg2rad(elevation)))
            back, diffuse, direct = solve(float(depth), sine, phase)
            sine = min(sine, 0.99999)
            assert (back + diffuse + direct) / sine == pytest.approx(1, abs=1e-4)
            table[i, j] = account(float(depth), sine, forward)[1] - back / sine
    return table


def test_rayleigh_layer() -> None:
    """Half of Rayleigh's single scattering goes on: good to 0.03 at the atmosphere's own depth.

    The broadband Rayleigh depth of the whole atmosphere is about 0.1. Where the path is long the
    account sends too little back: what goes on is scattered again. It errs by up to 0.18 of the ray
    at a depth of 0.8, eight times the real one.
    """
    thin = differences(RAYLEIGH, 0.5, DEPTHS[:2])
    high = thin[:, ELEVATIONS >= 20]
    assert np.abs(high).max() < 0.03
    assert np.sqrt((high**2).mean()) < 0.015
    whole = differences(RAYLEIGH, 0.5, DEPTHS)
    print(
        f"Rayleigh: thin and above 20 degrees: largest {np.abs(high).max():.4f}, rms "
        f"{np.sqrt((high**2).mean()):.4f}; all: largest {np.abs(whole).max():.4f}, rms "
        f"{np.sqrt((whole**2).mean()):.4f}\n{np.round(whole, 3)}"
    )
    assert np.abs(whole).max() < 0.19
    # Everything scattered lost, the plausible simpler account, is several times worse.
    assert np.abs(differences(RAYLEIGH, 0.0, DEPTHS[:2])[:, ELEVATIONS >= 20]).max() > 0.08


def test_aerosol_layer() -> None:
    """A forward share of 0.84 stands for an asymmetry near 0.65 (Henyey & Greenstein).

    One share for all elevations is right for steep rays. A ray near the horizon has half of its
    forward lobe below it, so that the account sends too little back: by 0.12 of the ray at a depth
    of 0.05 and 5 degrees, by 0.43 at 0.8. Such rays carry little of a panel's light.
    """
    whole = differences(henyey_greenstein(0.65), 0.84, DEPTHS)
    high = whole[:3][:, ELEVATIONS >= 20]
    print(
        f"aerosol: τ up to 0.2 above 20 degrees: largest {np.abs(high).max():.4f}, rms "
        f"{np.sqrt((high**2).mean()):.4f}; all: largest {np.abs(whole).max():.4f}, rms "
        f"{np.sqrt((whole**2).mean()):.4f}\n{np.round(whole, 3)}"
    )
    assert np.abs(high).max() < 0.07
    assert np.abs(whole).max() < 0.45
