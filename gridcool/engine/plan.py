"""What all strips share, and a row's path integrals laid out as matrices."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.columns import ColumnBasis
from gridcool.engine.options import Field, InputError, Panel, Sky
from gridcool.engine.orientations import Orientations
from gridcool.engine.response import Response
from gridcool.physics.sun import month_weights

FloatArray = NDArray[np.floating]

#: Share of each month in the year, shape (12, 1).
YEAR = month_weights().astype(np.float32)[:, None]


@dataclass(frozen=True)
class Plan:
    """What all strips of a run share; ``layers`` names those wanted, in the order of the table."""

    panel: Panel
    sky: Sky
    basis: ColumnBasis
    orientations: Orientations
    hours: int
    field: Field
    error: InputError
    layers: tuple[str, ...]


@dataclass(frozen=True)
class RowTables:
    """Path integrals of one row as matrices over candidates.

    Attributes
    ----------
    response : Response
    monthly : array, shape (12 · hours · rank · 5, orientations)
    weighted : array, shape (12, hours · rank · terms, orientations)
        Weighted by the months, with the term of a partly matte panel where there is one.
    annual : array, shape (rows, orientations)
        The same for all months, without the rows in which the sun is down.
    sunlit : array of bool
        Which rows ``annual`` keeps.
    """

    response: Response
    monthly: FloatArray
    weighted: FloatArray
    annual: FloatArray
    sunlit: NDArray[np.bool_]

    @staticmethod
    def of(response: Response, plan: Plan) -> RowTables:
        """Lay out a row's path integrals for the matrix product."""
        integrals = response.panel
        if plan.panel.matte > 0:
            cosine = np.cos(np.deg2rad(plan.orientations.tilt)).astype(np.float32)
            front = (integrals[..., 2:3, :] + integrals[..., 3:4, :]) * cosine
            integrals = np.concatenate([integrals, front], axis=-2)
        weighted = integrals * YEAR[..., None, None, None]
        candidates = integrals.shape[-1]
        rows = weighted.reshape(-1, candidates)
        sunlit = (rows != 0).any(axis=1)
        return RowTables(
            response=response,
            monthly=response.panel.reshape(-1, candidates),
            weighted=weighted.reshape(12, -1, candidates),
            annual=rows if sunlit.all() else rows[sunlit],
            sunlit=sunlit,
        )
