"""The cloudless sky over the cells of some rows: path integrals and the cells' own columns."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.columns import ColumnBasis, column_at, default_property
from gridcool.engine.rows import Rows
from gridcool.physics import atmosphere
from gridcool.physics.escape import diffuse_escape
from gridcool.variables import flag_value

FloatArray = NDArray[np.floating]

#: Property of the column that each input describes, and the factor from the input's unit.
COLUMN_INPUTS: Mapping[str, tuple[str, float]] = {
    "elevation": ("pressure_ratio", 1.0),
    "precipitable_water": ("precipitable_water_cm", 0.1),  # kg m-2 to cm
    "aerosol_optical_depth": ("aerosol_depth_550", 1.0),
    "ozone": ("ozone_cm", 1e-3),  # DU to atm-cm
}


@dataclass(frozen=True)
class ClearSky:
    """Clear-sky quantities, float32; months or cells that do not vary have length one.

    Attributes
    ----------
    weights : array, shape (rank, 12 or 1, cells or 1)
        Weights of the basis columns.
    beam, scattered : array, shape (12, hours, cells)
        ⟨B₀μ⟩ and ⟨I_as⟩ before bounces, W m-2.
    escape, returned, sky_albedo : array, shape (12 or 1, cells)
        T_d, R_d and r_s.
    row_returned : array, shape (rows,), or None
        R_d of each row, if it is the same along rows.
    quality : array of uint16, shape (cells,) or (1,)
        Flags of the input_quality layer.
    """

    weights: FloatArray
    beam: FloatArray
    scattered: FloatArray
    escape: FloatArray
    returned: FloatArray
    sky_albedo: FloatArray
    row_returned: FloatArray | None
    quality: NDArray[np.uint16]


def clear_sky_of(basis: ColumnBasis, inputs: Mapping[str, FloatArray], rows: Rows) -> ClearSky:
    """Clear-sky quantities of the cells of some rows.

    Parameters
    ----------
    basis : ColumnBasis
    inputs : mapping of array
        Those of `COLUMN_INPUTS` that vary, shape (12, cells) or (cells,), NaN where missing.
    rows : Rows
    """
    properties, quality = _properties(inputs, rows.spread(rows.latitudes))
    shape = np.broadcast_shapes(*(p.shape for p in properties.values())) if properties else (1, 1)
    flat = {name: np.broadcast_to(p, shape).ravel() for name, p in properties.items()}
    weights = basis.weights(flat).reshape(basis.rank, *shape)
    # What no input says of single cells is the same along a row.
    latitude = rows.spread(rows.latitudes) if properties else rows.latitudes
    column = column_at(latitude, properties)
    planes = [*diffuse_escape(column), atmosphere.sky_albedo(column)]
    row_returned = None
    if not properties:
        row_returned = np.asarray(planes[1], np.float32)
        planes = [rows.spread(plane) for plane in planes]
    escape, returned, sky_albedo = (np.atleast_2d(p).astype(np.float32) for p in planes)
    return ClearSky(
        weights=weights,
        beam=_combined([tables.response.beam for tables in rows.tables], rows, weights),
        scattered=_combined([tables.response.scattered for tables in rows.tables], rows, weights),
        escape=escape,
        returned=returned,
        sky_albedo=sky_albedo,
        row_returned=row_returned,
        quality=quality,
    )


def _properties(
    inputs: Mapping[str, FloatArray], latitude: FloatArray
) -> tuple[dict[str, FloatArray], NDArray[np.uint16]]:
    """Properties of the columns, shape (12 or 1, cells), with defaults where an input has gaps."""
    properties = {}
    quality = np.zeros(1, np.uint16)
    for name, (prop, factor) in COLUMN_INPUTS.items():
        if name not in inputs:
            continue
        values = np.atleast_2d(inputs[name]) * factor
        if prop == "pressure_ratio":
            values = atmosphere.pressure_ratio(values)
        gaps = np.isnan(values)
        if gaps.any():
            meaning = "elevation_missing" if name == "elevation" else "atmosphere_filled"
            bit = np.uint16(flag_value("input_quality", meaning))
            quality = quality | np.where(gaps.any(axis=0), bit, np.uint16(0))
            values = np.where(gaps, default_property(prop, latitude), values)
        properties[prop] = values
    return properties, quality


def _combined(integrals: list[FloatArray], rows: Rows, weights: FloatArray) -> FloatArray:
    """(12, hours, rank) of each row weighted into (12, hours, cells)."""
    by_row = np.stack(integrals, axis=-1)
    parts = [rows.spread(by_row[:, :, k]) * weights[k][:, None] for k in range(len(weights))]
    return np.maximum(np.sum(parts, axis=0, dtype=np.float32), 0)
