"""Search the orientation and read off what it brings: the layers of a row of cells."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.account import (
    DiffuseParts,
    Outcome,
    beam_coefficients,
    diffuse_parts,
    local_cut,
    outcome,
)
from gridcool.engine.glare import SECTORS
from gridcool.engine.optimum import Best, annual_response, find_best
from gridcool.engine.plan import YEAR
from gridcool.engine.seasons import best_cut, season_mask, two_seasons
from gridcool.engine.state import State
from gridcool.engine.uncertainty import COMBINED, uncertainty_parts
from gridcool.physics.climate import standing_equivalent, yearly_equivalent
from gridcool.physics.soil import daytime_cooling

FloatArray = NDArray[np.floating]
Layers = dict[str, FloatArray]

SEASONAL = ("seasonal_gain", "seasonal_tilt", "seasonal_azimuth", "seasonal_start")
MONTHLY_BEST = ("monthly_tilt", "monthly_azimuth", "monthly_tilt_flux")
GLARE = ("low_ray_hours", "low_ray_direction")


@dataclass(frozen=True, eq=False)
class Optimum:
    """The search's result.

    Attributes
    ----------
    beam : array, shape (12, hours · rank · terms, cells)
        Coefficients of the path integrals.
    diffuse : DiffuseParts
    flux : array, shape (cells, orientations)
        Annual mean flux of every candidate.
    best : Best
    integrals : array, shape (12, hours, 5, cells)
        Path integrals at the best orientation.
    outcome : Outcome
    """

    beam: FloatArray
    diffuse: DiffuseParts
    flux: FloatArray
    best: Best
    integrals: FloatArray
    outcome: Outcome


def search(state: State) -> Optimum:
    """Find the best fixed orientation of every cell."""
    plan = state.plan
    count = state.albedo.shape[1]
    weights = state.clear_sky.weights.transpose(1, 0, 2)  # (months, rank, cells)
    coefficients = beam_coefficients(state.cells, plan.panel)
    beam = (coefficients[:, :, None] * weights[:, None, :, None]).reshape(12, -1, count)
    diffuse = diffuse_parts(state.cells, plan.panel)
    flux = _annual(state, beam, diffuse)
    best = find_best(flux, plan.orientations)
    integrals = state.rows.path_integrals(best).reshape(12, plan.hours, -1, 5, count)
    integrals = (integrals * weights[:, None, :, None]).sum(axis=2)
    cosine = np.cos(np.deg2rad(best.tilt))
    result = outcome(state.cells, plan.panel, integrals, diffuse, cosine)
    return Optimum(beam, diffuse, flux, best, integrals, result)


def read_out(state: State, temperature_range: FloatArray | None) -> Layers:
    """All wanted layers of a row of cells, apart from flags and cloud.

    Parameters
    ----------
    state : State
    temperature_range : array, shape (12, cells), or None
    """
    found = search(state)
    layers = _account_layers(state, found)
    wanted = set(state.plan.layers)
    if wanted & set(SEASONAL):
        layers |= _season_layers(state, found, layers["rejected_flux"])
    if wanted & set(MONTHLY_BEST):
        layers |= _month_layers(state, found)
    if wanted & set(GLARE):
        layers |= _glare_layers(state, found)
    if wanted & {"flux_uncertainty", *COMBINED}:
        layers |= uncertainty_parts(state, found.integrals, found.best.tilt, found.outcome)
    layers["co2e_standing"] = standing_equivalent(
        layers["rejected_flux"], state.plan.field.carbon_dioxide_ppm
    )
    layers["co2e_100yr"] = yearly_equivalent(layers["rejected_flux"])
    if temperature_range is not None:
        cut = local_cut(state.cells, state.plan.panel, found.integrals, found.best.tilt, YEAR)
        mean = (temperature_range * YEAR).sum(axis=0)
        layers["daytime_cooling"] = daytime_cooling(mean, state.plan.field.ground_cover, cut)
    return layers


def _account_layers(state: State, found: Optimum) -> Layers:
    result, best = found.outcome, found.best
    annual = (result.rejected * YEAR).sum(axis=0)
    flat = found.flux[:, state.plan.orientations.flat]
    reflected = (result.reflected * YEAR).sum(axis=0)
    counts = reflected > 0
    safe = np.where(counts, reflected, 1)
    shortwave = state.cells.irradiance
    return {
        "rejected_flux": annual,
        "monthly_rejected_flux": result.rejected,
        "rejected_flux_flat": flat,
        "orientation_gain": np.where(flat > 0, annual / np.where(flat > 0, flat, 1) - 1, np.nan),
        "tilt": np.where(counts, best.tilt, np.nan),
        "azimuth": np.where(counts, best.azimuth, np.nan),
        "escape_fraction": np.where(counts, (result.escaping * YEAR).sum(axis=0) / safe, np.nan),
        "surface_shortwave": (shortwave * YEAR).sum(axis=0),
        "monthly_surface_shortwave": shortwave,
    }


def _season_layers(state: State, found: Optimum, annual: FloatArray) -> Layers:
    """The best two-position year."""
    orientations = state.plan.orientations
    monthly = _by_month(state, found, orientations.coarse)
    monthly *= YEAR[:, None]
    start, length = best_cut(monthly)
    one = _annual(state, found.beam, found.diffuse, season_mask(start, length))
    year = two_seasons(
        (one, found.flux - one),
        start,
        length,
        orientations,
        northern=state.rows.spread(state.rows.latitudes) >= 0,
    )
    counts = (found.outcome.reflected * YEAR).sum(axis=0) > 0
    positive = annual > 0
    gain = year.flux / np.where(positive, annual, 1) - 1
    return {
        "seasonal_gain": np.where(positive, gain, np.nan),
        "seasonal_tilt": np.where(counts, year.tilt, np.nan),
        "seasonal_azimuth": np.where(counts, year.azimuth, np.nan),
        "seasonal_start": np.where(counts, year.start, np.nan),
    }


def _month_layers(state: State, found: Optimum) -> Layers:
    """The best orientation of each month by itself."""
    orientations = state.plan.orientations
    monthly = _by_month(state, found, np.arange(len(orientations.east)))
    tilt, azimuth, flux = [], [], []
    for response in monthly:
        month = np.ascontiguousarray(response.T)
        best = find_best(month, orientations)
        lit = np.abs(month).max(axis=1) > 0
        tilt.append(np.where(lit, best.tilt, np.nan))
        azimuth.append(np.where(lit, best.azimuth, np.nan))
        flux.append(best.value(month))
    return {
        "monthly_tilt": np.stack(tilt),
        "monthly_azimuth": np.stack(azimuth),
        "monthly_tilt_flux": np.stack(flux),
    }


def _glare_layers(state: State, found: Optimum) -> Layers:
    """Hours of low rays, and where most of them go."""
    by_sector = state.rows.low_rays(found.best)
    hours = np.maximum(by_sector, 0).sum(axis=0)
    # Of two mirror images across the meridian the eastern one is named.
    main = by_sector.argmax(axis=0) * (360.0 / SECTORS)
    counts = (found.outcome.reflected * YEAR).sum(axis=0) > 0
    return {
        "low_ray_hours": np.where(counts, hours, np.nan),
        "low_ray_direction": np.where(counts & (hours > 0), main, np.nan),
    }


def _annual(
    state: State, beam: FloatArray, diffuse: DiffuseParts, months: FloatArray | None = None
) -> FloatArray:
    """Contribution to the annual mean flux of every candidate, shape (cells, orientations).

    ``months`` is one where a month counts, shape (12, cells); without it all do.
    """
    orientations, count = state.plan.orientations, beam.shape[-1]
    terms = (beam if months is None else beam * months[:, None]).reshape(-1, count)
    weight = state.counts * YEAR
    sky = diffuse.annual(weight if months is None else weight * months)
    flux = np.empty((count, len(orientations.east)), np.float32)
    for tables, part in state.rows.parts():
        lit = terms[:, part] if tables.sunlit.all() else terms[tables.sunlit, part]
        flux[part] = annual_response(lit, sky[:, part], tables.annual, orientations)
    return flux


def _by_month(state: State, found: Optimum, candidates: NDArray[np.intp]) -> FloatArray:
    """Monthly mean flux of some candidates, shape (12, candidates, cells)."""
    flux = np.empty((12, len(candidates), found.beam.shape[-1]), np.float32)
    for tables, part in state.rows.parts():
        weighted = tables.weighted[:, :, candidates] / YEAR[:, None]
        flux[:, :, part] = np.matmul(weighted.transpose(0, 2, 1), found.beam[:, :, part])
    cosine = np.cos(np.deg2rad(state.plan.orientations.tilt[candidates])).astype(np.float32)
    for power, escaping in enumerate(found.diffuse.escaping):
        last = power >= len(found.diffuse.forgone)
        sky = escaping if last else escaping - found.diffuse.forgone[power]
        flux += (sky * state.counts)[:, None] * cosine[:, None] ** power
    return np.asarray(flux)
