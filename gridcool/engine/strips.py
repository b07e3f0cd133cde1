"""One strip of rows: plain arrays in, all layers out. No labels, no files, no scheduling."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.irradiance import LOW_SUN, NO_SUN, borrow_low_sun
from gridcool.engine.plan import YEAR, Plan, RowTables
from gridcool.engine.readout import read_out
from gridcool.engine.response import Response
from gridcool.engine.rows import Rows
from gridcool.engine.skies import sky_table
from gridcool.engine.state import build_state
from gridcool.variables import flag_value, layer_variables

FloatArray = NDArray[np.floating]
Arrays = Mapping[str, FloatArray]

#: Cells that are worked on together, of one row or several: enough to make Python's own share of
#: the time small, few enough for the memory of a thread (fewer with an hour axis). Where a row is
#: cut depends on the run's plan alone, so that the result does not depend on the grid's blocks.
SEGMENT = 8192
SMALLEST_SEGMENT = 256


@cache
def layer_bands(layers: tuple[str, ...]) -> dict[str, slice]:
    """Where each of the wanted layers stands in the stack that `solve_strip` returns."""
    bands, start = {}, 0
    for name in layers:
        count = layer_variables()[name].count
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
    stack = np.empty((list(layer_bands(plan.layers).values())[-1].stop, rows, columns), np.float32)
    segment = max(SMALLEST_SEGMENT, SEGMENT // plan.hours)
    together = max(1, segment // columns)
    for top in range(0, rows, together):
        band = slice(top, min(top + together, rows))
        tables = tuple(RowTables.of(each, plan) for each in responses[band])
        radians = np.deg2rad(latitudes[band])
        for start in range(0, columns, segment):
            part = slice(start, min(start + segment, columns))
            cells = {name: _flat(values[..., band, part]) for name, values in inputs.items()}
            counts = np.full(len(tables), part.stop - part.start)
            found = _solve_segment(plan, cells, Rows(tables, radians, counts))
            stack[:, band, part] = found.reshape(len(stack), len(tables), -1)
    return stack


def _flat(values: FloatArray) -> FloatArray:
    """Rows and columns as one axis of cells."""
    return values.reshape(*values.shape[:-2], -1)


def _solve_segment(plan: Plan, inputs: Arrays, rows: Rows) -> FloatArray:
    """All bands of the cells of some rows, shape (bands, cells)."""
    albedo, albedo_borrowed = borrow_low_sun(inputs["albedo"], rows.extraterrestrial < LOW_SUN)
    bands = layer_bands(plan.layers)
    out = np.full((list(bands.values())[-1].stop, albedo.shape[-1]), np.nan, np.float32)
    known = np.asarray(~np.isnan(albedo).any(axis=0))
    quality = np.where(known, 0, flag_value("input_quality", "albedo_missing")).astype(np.uint16)
    if known.any():
        chosen = {name: values[..., known] for name, values in inputs.items()}
        layers, flags = _solve_cells(plan, chosen, albedo[:, known], rows.only(known))
        for name, values in layers.items():
            if name in bands:
                out[bands[name], known] = values
        borrowed = flag_value("input_quality", "low_sun_month_filled")
        quality[known] |= flags | _bit(albedo_borrowed[:, known].any(axis=0), borrowed)
    out[bands["input_quality"]] = quality
    return out


def _solve_cells(
    plan: Plan, inputs: Arrays, albedo: FloatArray, rows: Rows
) -> tuple[dict[str, FloatArray], NDArray[np.uint16]]:
    """Layers and quality flags of cells whose albedo is known all year."""
    state, borrowed = build_state(plan, inputs, albedo, rows)
    transmission = state.found.transmission
    layers = read_out(state, inputs.get("temperature_range"))
    layers["equivalent_cloud_fraction"] = _mean_cloud(plan, transmission, state.clear)
    if "monthly_equivalent_cloud_fraction" in plan.layers:
        table = sky_table(plan.sky)
        layers["monthly_equivalent_cloud_fraction"] = table.equivalent_cloud(transmission)
    known = ~np.isnan(transmission).any(axis=0)
    covered = (state.counts == 0) & (state.clear.sum(axis=1) > NO_SUN)
    flags = (
        np.bitwise_or.reduce(state.found.source, axis=0)
        | state.clear_sky.quality
        | _bit(borrowed, flag_value("input_quality", "low_sun_month_filled"))
        | _bit(covered.any(axis=0), flag_value("input_quality", "snow_month_left_out"))
        | _bit(~known, flag_value("input_quality", "irradiance_missing"))
    )
    return {name: np.where(known, values, np.nan) for name, values in layers.items()}, flags


def _mean_cloud(plan: Plan, transmission: FloatArray, clear: FloatArray) -> FloatArray:
    """Annual mean of the equivalent cloud fraction over the months that have any sun."""
    cloud = sky_table(plan.sky).equivalent_cloud(transmission)
    weight = np.where(clear.sum(axis=1) > NO_SUN, YEAR, 0)
    return np.asarray((np.nan_to_num(cloud) * weight).sum(axis=0) / weight.sum(axis=0))


def _bit(mask: NDArray[np.bool_] | np.bool_, bit: int) -> NDArray[np.uint16]:
    return np.where(mask, np.uint16(bit), np.uint16(0))
