"""One cell explained: where the sunlight of a panel goes, month by month."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.account import diffuse_parts, outcome
from gridcool.engine.irradiance import LOW_SUN, borrow_low_sun
from gridcool.engine.plan import YEAR, Plan, RowTables
from gridcool.engine.readout import search
from gridcool.engine.response import Response
from gridcool.engine.rows import Rows
from gridcool.engine.state import State, build_state

FloatArray = NDArray[np.floating]


@dataclass(frozen=True)
class Ledger:
    """Monthly means of one panel, shape (12,), W m-2; they add up.

    caught = absorbed + reflected; reflected = direct + returned + lost;
    rejected = direct + returned − forgone.

    Attributes
    ----------
    caught : sunlight from the sun and the sky that meets the face
    absorbed : what the panel keeps of it
    reflected : what it sends on
    direct : leaves the atmosphere on the way up, through air and cloud
    returned : comes back to the ground, is reflected there and leaves then
    lost : absorbed by air, cloud and ground on those ways
    forgone : what the bare ground would have sent out and now does not
    rejected : F
    """

    caught: FloatArray
    absorbed: FloatArray
    reflected: FloatArray
    direct: FloatArray
    returned: FloatArray
    lost: FloatArray
    forgone: FloatArray
    rejected: FloatArray


@dataclass(frozen=True)
class Explanation:
    """What the account says of one cell.

    Attributes
    ----------
    extraterrestrial, irradiance, beam : array, shape (12,)
        Above the atmosphere, on the ground, and the ground's direct part; horizontal, W m-2.
    albedo, cloud : array, shape (12,)
        Of the ground; mean cloud transmission of irradiance.
    snow : array of bool, shape (12,)
        Months in which the panel counts as covered.
    best, flat : Ledger
    east, north, response : array, shape (orientations,)
        Tilt vectors in degrees and the annual mean flux of each.
    """

    extraterrestrial: FloatArray
    irradiance: FloatArray
    beam: FloatArray
    albedo: FloatArray
    cloud: FloatArray
    snow: NDArray[np.bool_]
    best: Ledger
    flat: Ledger
    east: FloatArray
    north: FloatArray
    response: FloatArray


def explain_cell(
    plan: Plan, inputs: Mapping[str, FloatArray], latitude: float, response: Response
) -> Explanation | None:
    """Follow the light of one cell.

    Parameters
    ----------
    plan : Plan
    inputs : mapping of array, shape (12, 1), (12, hours, 1) or (1,)
    latitude : float
        Degrees.
    response : Response
        Path integrals at that latitude.

    Returns
    -------
    Explanation, or None where albedo or irradiance is missing
    """
    tables = RowTables.of(response, plan)
    row = Rows((tables,), np.deg2rad(np.array([latitude])), np.array([1]))
    albedo, _ = borrow_low_sun(inputs["albedo"], row.extraterrestrial < LOW_SUN)
    state, _ = build_state(plan, inputs, albedo, row)
    if np.isnan(albedo).any() or np.isnan(state.found.transmission).any():
        return None
    found = search(state)
    weights = state.clear_sky.weights.transpose(1, 0, 2)[:, None, :, None]
    level = tables.monthly[:, plan.orientations.flat].reshape(12, plan.hours, -1, 5, 1)
    flat = _ledger(state, (level * weights).sum(axis=2), np.zeros(1, np.float32))
    cells = state.cells
    beam = (cells.moments.beam * cells.clear_beam).sum(axis=1)
    return Explanation(
        extraterrestrial=response.extraterrestrial,
        irradiance=cells.irradiance[:, 0],
        beam=beam[:, 0],
        albedo=albedo[:, 0],
        cloud=state.found.transmission[:, 0],
        snow=state.counts[:, 0] == 0,
        best=_ledger(state, found.integrals, found.best.tilt),
        flat=flat,
        east=plan.orientations.east,
        north=plan.orientations.north,
        response=found.flux[0],
    )


def year_mean(months: FloatArray) -> float:
    """Annual mean of twelve monthly means."""
    return float((months * YEAR[:, 0]).sum())


def _ledger(state: State, integrals: FloatArray, tilt: FloatArray) -> Ledger:
    """Split the light of a panel; over black ground nothing comes back a second time."""
    panel, cells = state.plan.panel, state.cells
    cosine = np.cos(np.deg2rad(tilt))
    whole = outcome(cells, panel, integrals, diffuse_parts(cells, panel), cosine)
    # Black ground under the same sky: E_d without bounces, and no light from the ground at all.
    black = state.over_black_ground
    once = outcome(black, panel, integrals, diffuse_parts(black, panel), cosine)
    reflected, escaping = whole.reflected[:, 0], whole.escaping[:, 0]
    caught = reflected / np.float32(panel.reflectance) if panel.reflectance else 0 * reflected
    direct = once.escaping[:, 0]
    return Ledger(
        caught=caught,
        absorbed=caught - reflected,
        reflected=reflected,
        direct=direct,
        returned=escaping - direct,
        lost=reflected - escaping,
        forgone=whole.forgone[:, 0],
        rejected=whole.rejected[:, 0],
    )
