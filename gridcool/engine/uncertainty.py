"""How sure the flux is: each source of error carried through the account at the chosen panel.

The irradiance estimate's error was measured on hourly station files (six stations from 32 to 63° N,
72 station-months): its standard deviation as a share of the clear-sky irradiance, and how much of
it the months of a station share; scripts/calibrate_uncertainty.py shows both, and how many errors
of stations left out of the fit lie inside.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.account import Cells, Outcome, diffuse_parts, outcome
from gridcool.engine.plan import YEAR
from gridcool.engine.skies import sky_table
from gridcool.engine.state import State
from gridcool.variables import flag_value

FloatArray = NDArray[np.floating]
_Change = Callable[[Cells], FloatArray]

#: Layers of the parts; flux_uncertainty is the root of the sum of their squares.
COMBINED = (
    "uncertainty_irradiance",
    "uncertainty_albedo",
    "uncertainty_cloud_distribution",
    "uncertainty_years",
)


@dataclass(frozen=True)
class IrradianceError:
    """Standard error of a month's irradiance over its clear-sky value, and what months share.

    ``shared`` is the correlation between the errors of two months of a place.
    """

    share: float
    shared: float


#: By source. The measured one is what users of such layers usually state (from memory: about 5 %).
IRRADIANCE_ERRORS = {
    "from_cloud": IrradianceError(0.120, 0.49),
    "from_temperature_range": IrradianceError(0.116, 0.52),
    "from_blend": IrradianceError(0.087, 0.30),
    "from_measured_irradiance": IrradianceError(0.05, 0.50),
}


def uncertainty_parts(
    state: State, integrals: FloatArray, tilt: FloatArray, result: Outcome
) -> dict[str, FloatArray]:
    """Standard uncertainty of the annual flux and its parts, W m-2, shape (cells,).

    Parameters
    ----------
    state : State
    integrals : array, shape (12, hours, 5, cells)
        Path integrals at the panel's orientation.
    tilt : array, shape (cells,)
        Degrees.
    result : Outcome
        The account at that orientation.
    """

    def change(cells: Cells) -> FloatArray:
        """Change of the flux, each month's share of the annual mean, shape (12, cells)."""
        panel = state.plan.panel
        cosine = np.cos(np.deg2rad(tilt))
        other = outcome(cells, panel, integrals, diffuse_parts(cells, panel), cosine)
        return (other.rejected - result.rejected) * YEAR

    parts = (
        _from_irradiance(state, change),
        _from_albedo(state, change),
        _from_cloud_distribution(state, change),
        _from_years(state, change),
    )
    named = dict(zip(COMBINED, parts, strict=True))
    total = np.sqrt(np.sum([part**2 for part in parts], axis=0))
    return {**named, "flux_uncertainty": total}


def _from_irradiance(state: State, change: _Change) -> FloatArray:
    """Errors of the estimate, partly shared by the months."""
    share = np.zeros_like(state.found.transmission)
    shared = np.zeros_like(share)
    for meaning, error in IRRADIANCE_ERRORS.items():
        here = state.found.source & flag_value("input_quality", meaning) > 0
        share[here], shared[here] = error.share, error.shared
    # The slope between one standard error up and down, or as far as there are such skies.
    known = state.found.transmission
    low = np.maximum(known - share, np.float32(sky_table(state.plan.sky).darkest))
    high = np.minimum(known + share, np.float32(1))
    up, down = (change(state.cells_for(state.plan.sky, k, state.albedo)) for k in (high, low))
    width = high - low
    moved = np.where(width > 0, (up - down) / np.where(width > 0, width, 1), 0) * share
    common = (np.sqrt(shared) * moved).sum(axis=0) ** 2
    own = ((1 - shared) * moved**2).sum(axis=0)
    return np.asarray(np.sqrt(common + own))


def _from_albedo(state: State, change: _Change) -> FloatArray:
    """An error of the albedo, the same all year."""
    error = np.float32(state.plan.error.albedo)
    brighter = np.where(state.albedo + error < 1, state.albedo + error, state.albedo - error)
    cells = state.cells_for(state.plan.sky, state.found.transmission, brighter)
    return np.asarray(np.abs(change(cells).sum(axis=0)))


def _from_cloud_distribution(state: State, change: _Change) -> FloatArray:
    """Another concentration of cloud within the month at the same irradiance."""
    sky = state.plan.sky
    factor = state.plan.error.concentration_factor
    other = replace(sky, cloud_concentration=sky.cloud_concentration * factor)
    cells = state.cells_for(other, state.found.transmission, state.albedo)
    return np.asarray(np.abs(change(cells).sum(axis=0)))


def _from_years(state: State, change: _Change) -> FloatArray:
    """Standard errors of the inputs' monthly means where files hold several years.

    Months err independently. Zero where no file tells.
    """
    sky, known = state.plan.sky, state.found.transmission
    squares = np.zeros(state.albedo.shape[1], np.float32)
    if state.albedo_error is not None:
        error = np.nan_to_num(state.albedo_error)
        moved = np.where(state.albedo > error, state.albedo - error, state.albedo + error)
        squares += (change(state.cells_for(sky, known, moved)) ** 2).sum(axis=0)
    for transmission in state.transmissions:
        squares += (change(state.cells_for(sky, transmission, state.albedo)) ** 2).sum(axis=0)
    return np.asarray(np.sqrt(squares))
