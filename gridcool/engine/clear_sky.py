"""The cloudless sky over a row of cells, from its path integrals and the cells' own columns."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.columns import ColumnBasis, column_at, default_property
from gridcool.engine.response import Response
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
    beam, scattered : array, shape (12, hours, cells or 1)
        ⟨B₀μ⟩ and ⟨I_as⟩ before bounces, W m-2.
    escape, returned, sky_albedo : array, shape (12 or 1, cells or 1)
        T_d, R_d and r_s.
    quality : array of uint16, shape (cells,) or (1,)
        Flags of the input_quality layer.
    """

    weights: FloatArray
    beam: FloatArray
    scattered: FloatArray
    escape: FloatArray
    returned: FloatArray
    sky_albedo: FloatArray
    quality: NDArray[np.uint16]


def clear_sky_of(
    basis: ColumnBasis, inputs: Mapping[str, FloatArray], latitude: float, response: Response
) -> ClearSky:
    """Clear-sky quantities of a row of cells.

    Parameters
    ----------
    basis : ColumnBasis
    inputs : mapping of array
        Those of `COLUMN_INPUTS` that vary, shape (12, cells) or (cells,), NaN where missing.
    latitude : float
        Radians.
    response : Response
        Path integrals of the row.
    """
    properties, quality = _properties(inputs, latitude)
    shape = np.broadcast_shapes(*(p.shape for p in properties.values())) if properties else (1, 1)
    flat = {name: np.broadcast_to(p, shape).ravel() for name, p in properties.items()}
    weights = basis.weights(flat).reshape(basis.rank, *shape)
    column = column_at(latitude, properties)
    escape, returned = diffuse_escape(column)
    return ClearSky(
        weights=weights,
        beam=_combined(response.beam, weights),
        scattered=_combined(response.scattered, weights),
        escape=_plane(escape),
        returned=_plane(returned),
        sky_albedo=_plane(atmosphere.sky_albedo(column)),
        quality=quality,
    )


def _properties(
    inputs: Mapping[str, FloatArray], latitude: float
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


def _combined(integrals: FloatArray, weights: FloatArray) -> FloatArray:
    """(12, hours, rank) weighted into (12, hours, cells or 1)."""
    parts = [integrals[:, :, k, None] * weights[k][:, None] for k in range(len(weights))]
    return np.maximum(np.sum(parts, axis=0, dtype=np.float32), 0)


def _plane(values: FloatArray) -> FloatArray:
    return np.atleast_2d(np.asarray(values, np.float32))
