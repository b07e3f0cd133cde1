"""One strip of rows: plain arrays in, all layers out. No labels, no files, no scheduling."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.account import Cells, beam_coefficients, diffuse_parts, outcome
from gridcool.engine.clear_sky import COLUMN_INPUTS, ClearSky, clear_sky_of
from gridcool.engine.columns import ColumnBasis
from gridcool.engine.irradiance import (
    LOW_SUN,
    NO_SUN,
    Estimate,
    borrow_low_sun,
    estimate,
    spread_over_hours,
)
from gridcool.engine.optimum import annual_response, find_best
from gridcool.engine.options import Panel, Sky
from gridcool.engine.orientations import Orientations
from gridcool.engine.response import Response
from gridcool.engine.skies import sky_table
from gridcool.physics.sun import month_weights
from gridcool.variables import flag_value, layer_variables

FloatArray = NDArray[np.floating]
Arrays = Mapping[str, FloatArray]

#: Cells of a row that are worked on together: small enough for the processor's cache, and fixed,
#: so that the result does not depend on how the grid is cut into blocks.
SEGMENT = 512

_YEAR = month_weights().astype(np.float32)[:, None]


@dataclass(frozen=True)
class Plan:
    """What all strips of a run share."""

    panel: Panel
    sky: Sky
    basis: ColumnBasis
    orientations: Orientations
    hours: int


@dataclass(frozen=True)
class RowTables:
    """Path integrals of one row as matrices over candidates.

    Attributes
    ----------
    response : Response
    monthly : array, shape (12 · hours · rank · 5, orientations)
    annual : array, shape (rows, orientations)
        Weighted by the months, with the term of a partly matte panel where there is one, and
        without the rows in which the sun is down.
    sunlit : array of bool
        Which rows of the full matrix ``annual`` keeps.
    """

    response: Response
    monthly: FloatArray
    annual: FloatArray
    sunlit: NDArray[np.bool_]

    @staticmethod
    def of(response: Response, plan: Plan) -> RowTables:
        """Lay out a row's path integrals for the matrix product."""
        integrals = response.panel
        if plan.panel.specular_share < 1:
            cosine = np.cos(np.deg2rad(plan.orientations.tilt)).astype(np.float32)
            front = (integrals[..., 2:3, :] + integrals[..., 3:4, :]) * cosine
            integrals = np.concatenate([integrals, front], axis=-2)
        weighted = integrals * _YEAR[..., None, None, None]
        candidates = integrals.shape[-1]
        weighted = weighted.reshape(-1, candidates)
        sunlit = (weighted != 0).any(axis=1)
        return RowTables(response, response.panel.reshape(-1, candidates), weighted[sunlit], sunlit)


@cache
def layer_bands() -> dict[str, slice]:
    """Where each layer stands in the stack that `solve_strip` returns."""
    bands, start = {}, 0
    for name, layer in layer_variables().items():
        count = 12 if layer.bands == "month" else 1
        bands[name] = slice(start, start + count)
        start += count
    return bands


def solve_strip(
    plan: Plan, inputs: Arrays, latitudes: FloatArray, responses: list[Response]
) -> FloatArray:
    """All layers of a strip.

    Parameters
    ----------
    plan : Plan
    inputs : mapping of array
        Canonical inputs: (12, rows, columns), with an hour axis after the months for the cloud
        fraction, or (rows, columns) for the elevation.
    latitudes : array, shape (rows,)
        Degrees.
    responses : list of Response
        Path integrals at each row's latitude.

    Returns
    -------
    array, shape (bands, rows, columns), float32
        Ordered as `layer_bands`.
    """
    rows, columns = inputs["albedo"].shape[-2:]
    stack = np.empty((list(layer_bands().values())[-1].stop, rows, columns), np.float32)
    for row in range(rows):
        tables = RowTables.of(responses[row], plan)
        latitude = float(np.deg2rad(latitudes[row]))
        for start in range(0, columns, SEGMENT):
            part = slice(start, min(start + SEGMENT, columns))
            cells = {name: values[..., row, part] for name, values in inputs.items()}
            _solve_segment(plan, cells, latitude, tables, stack[:, row, part])
    return stack


def _solve_segment(
    plan: Plan, inputs: Arrays, latitude: float, tables: RowTables, out: FloatArray
) -> None:
    """Fill ``out``, shape (bands, cells), for a piece of a row."""
    response = tables.response
    albedo, albedo_borrowed = borrow_low_sun(inputs["albedo"], response.extraterrestrial < LOW_SUN)
    out[:] = np.nan
    known = ~np.isnan(albedo).any(axis=0)
    quality = np.where(known, 0, flag_value("input_quality", "albedo_missing")).astype(np.uint16)
    bands = layer_bands()
    if known.any():
        chosen = {name: values[..., known] for name, values in inputs.items()}
        layers, flags = _solve_cells(plan, chosen, albedo[:, known], latitude, tables)
        for name, values in layers.items():
            out[bands[name], known] = values
        borrowed = flag_value("input_quality", "low_sun_month_filled")
        quality[known] |= flags | _bit(albedo_borrowed[:, known].any(axis=0), borrowed)
    out[bands["input_quality"]] = quality


def _solve_cells(
    plan: Plan, inputs: Arrays, albedo: FloatArray, latitude: float, tables: RowTables
) -> tuple[dict[str, FloatArray], NDArray[np.uint16]]:
    """Layers and quality flags of cells whose albedo is known all year."""
    response, sky, count = tables.response, plan.sky, albedo.shape[1]
    column = {name: inputs[name] for name in COLUMN_INPUTS if name in inputs}
    clear_sky = clear_sky_of(plan.basis, column, latitude, response)
    bounced = 1 / (1 - albedo * clear_sky.sky_albedo)
    clear = (clear_sky.beam + clear_sky.scattered) * bounced[:, None]
    cloud = inputs.get("cloud_fraction")
    found = estimate(
        sky,
        sky_table(sky),
        clear=clear,
        extraterrestrial=response.extraterrestrial[:, None],
        cloud=None if cloud is None else cloud.reshape(12, -1, count),
        temperature_range=inputs.get("temperature_range"),
        measured=inputs.get("surface_shortwave"),
    )
    low_sun = response.extraterrestrial < LOW_SUN
    transmission, borrowed = borrow_low_sun(found.transmission, low_sun)
    found = Estimate(transmission, found.source, found.by_hour)
    cells = _account_cells(plan, found, albedo, clear, clear_sky)
    layers = _layers(plan, cells, clear_sky, tables)
    layers["equivalent_cloud_fraction"] = _mean_cloud(plan, transmission, clear)
    known = ~np.isnan(transmission).any(axis=0)
    covered = (cells.counts == 0) & (clear.sum(axis=1) > NO_SUN)
    flags = (
        np.bitwise_or.reduce(found.source, axis=0)
        | clear_sky.quality
        | _bit(borrowed.any(axis=0), flag_value("input_quality", "low_sun_month_filled"))
        | _bit(covered.any(axis=0), flag_value("input_quality", "snow_month_left_out"))
        | _bit(~known, flag_value("input_quality", "irradiance_missing"))
    )
    return {name: np.where(known, values, np.nan) for name, values in layers.items()}, flags


def _account_cells(
    plan: Plan, found: Estimate, albedo: FloatArray, clear: FloatArray, clear_sky: ClearSky
) -> Cells:
    table = sky_table(plan.sky)
    by_hour = spread_over_hours(found, table.darkest, clear)
    moments = table.moments(
        table.equivalent_cloud(by_hour), albedo[:, None], clear_sky.returned[:, None]
    )
    covered = plan.sky.snow_covers_panel & (albedo >= np.float32(plan.sky.snow_albedo))
    return Cells(
        albedo=albedo,
        escape=clear_sky.escape,
        moments=moments,
        clear=clear,
        clear_beam=clear_sky.beam,
        counts=np.where(covered, 0, 1).astype(np.float32),
        overcast_reflectance=plan.sky.overcast_reflectance,
    )


def _layers(
    plan: Plan, cells: Cells, clear_sky: ClearSky, tables: RowTables
) -> dict[str, FloatArray]:
    """Search the orientation and read off what it brings."""
    count = cells.albedo.shape[1]
    weights = clear_sky.weights.transpose(1, 0, 2)  # (months, rank, cells)
    beam = beam_coefficients(cells, plan.panel)[:, :, None] * weights[:, None, :, None]
    diffuse = diffuse_parts(cells, plan.panel)
    flux = annual_response(
        _rows(beam.reshape(-1, count), tables.sunlit),
        diffuse.annual(cells.counts * _YEAR),
        tables.annual,
        plan.orientations,
    )
    best = find_best(flux, plan.orientations)
    integrals = best.interpolate(tables.monthly).reshape(12, plan.hours, -1, 5, count)
    integrals = (integrals * weights[:, None, :, None]).sum(axis=2)
    result = outcome(cells, plan.panel, integrals, diffuse, np.cos(np.deg2rad(best.tilt)))
    annual, flat = (result.rejected * _YEAR).sum(axis=0), flux[:, plan.orientations.flat]
    reflected = (result.reflected * _YEAR).sum(axis=0)
    counts = reflected > 0
    safe = np.where(counts, reflected, 1)
    shortwave = cells.irradiance
    return {
        "rejected_flux": annual,
        "monthly_rejected_flux": result.rejected,
        "rejected_flux_flat": flat,
        "orientation_gain": np.where(flat > 0, annual / np.where(flat > 0, flat, 1) - 1, np.nan),
        "tilt": np.where(counts, best.tilt, np.nan),
        "azimuth": np.where(counts, best.azimuth, np.nan),
        "escape_fraction": np.where(counts, (result.escaping * _YEAR).sum(axis=0) / safe, np.nan),
        "surface_shortwave": (shortwave * _YEAR).sum(axis=0),
        "monthly_surface_shortwave": shortwave,
    }


def _mean_cloud(plan: Plan, transmission: FloatArray, clear: FloatArray) -> FloatArray:
    """Annual mean of the equivalent cloud fraction over the months that have any sun."""
    cloud = sky_table(plan.sky).equivalent_cloud(transmission)
    weight = np.where(clear.sum(axis=1) > NO_SUN, _YEAR, 0)
    return np.asarray((np.nan_to_num(cloud) * weight).sum(axis=0) / weight.sum(axis=0))


def _bit(mask: NDArray[np.bool_] | np.bool_, bit: int) -> NDArray[np.uint16]:
    return np.where(mask, np.uint16(bit), np.uint16(0))


def _rows(matrix: FloatArray, keep: NDArray[np.bool_]) -> FloatArray:
    return matrix if keep.all() else matrix[keep]
