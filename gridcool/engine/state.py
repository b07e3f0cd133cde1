"""A row of cells with everything known about them, ready for the account."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.account import Cells
from gridcool.engine.clear_sky import COLUMN_INPUTS, ClearSky, clear_sky_of
from gridcool.engine.irradiance import (
    LOW_SUN,
    Estimate,
    borrow_low_sun,
    estimate,
    spread_over_hours,
)
from gridcool.engine.options import Sky
from gridcool.engine.plan import Plan
from gridcool.engine.rows import Rows
from gridcool.engine.skies import sky_table

FloatArray = NDArray[np.floating]


@dataclass(frozen=True, eq=False)
class State:
    """Cells of neighbouring rows.

    Attributes
    ----------
    plan : Plan
    rows : Rows
    clear_sky : ClearSky
    found : Estimate
        Irradiance over its clear-sky value.
    albedo : array, shape (12, cells)
    albedo_error : array, shape (12, cells), or None
        Standard error of the monthly albedo from the spread of years.
    transmissions : tuple of array, shape (12, cells)
        Irradiance over its clear-sky value with one input moved by its standard error from the
        spread of years, one array an input.
    """

    plan: Plan
    rows: Rows
    clear_sky: ClearSky
    found: Estimate
    albedo: FloatArray
    albedo_error: FloatArray | None = None
    transmissions: tuple[FloatArray, ...] = ()

    @cached_property
    def clear(self) -> FloatArray:
        """G₀ of each hour bin with ground bounces, shape (12, hours, cells)."""
        return self.clear_over(self.albedo)

    def clear_over(self, albedo: FloatArray) -> FloatArray:
        """The same over another ground."""
        bounced = 1 / (1 - albedo * self.clear_sky.sky_albedo)
        return np.asarray((self.clear_sky.beam + self.clear_sky.scattered) * bounced[:, None])

    @cached_property
    def counts(self) -> FloatArray:
        """One, or zero in months in which snow covers the panel, shape (12, cells)."""
        sky = self.plan.sky
        covered = sky.snow_covers_panel & (self.albedo >= np.float32(sky.snow_albedo))
        return np.where(covered, 0, 1).astype(np.float32)

    @cached_property
    def cells(self) -> Cells:
        """What the account needs of them."""
        return self.cells_for(self.plan.sky, self.found.transmission, self.albedo)

    @cached_property
    def over_black_ground(self) -> Cells:
        """The same cells and irradiance over ground that reflects nothing."""
        black = np.zeros_like(self.albedo)
        cells = self.cells_for(self.plan.sky, self.found.transmission, black)
        return replace(cells, clear=self.clear)

    def cells_for(self, sky: Sky, transmission: FloatArray, albedo: FloatArray) -> Cells:
        """The same for another sky, irradiance or albedo; snow months stay those of the cells."""
        table = sky_table(sky)
        clear = self.clear_over(albedo)
        known = replace(self.found, transmission=transmission)
        by_hour = spread_over_hours(known, table.darkest, clear)
        cloud, by_row = table.equivalent_cloud(by_hour), self.clear_sky.row_returned
        if by_row is None:
            moments = table.moments(cloud, albedo[:, None], self.clear_sky.returned[:, None])
        else:
            moments = table.moments(cloud, albedo[:, None], by_row, self.rows.index)
        return Cells(
            albedo=albedo,
            escape=self.clear_sky.escape,
            moments=moments,
            clear=clear,
            clear_beam=self.clear_sky.beam,
            counts=self.counts,
            overcast_reflectance=sky.overcast_reflectance,
        )


def build_state(
    plan: Plan,
    inputs: Mapping[str, FloatArray],
    albedo: FloatArray,
    rows: Rows,
) -> tuple[State, NDArray[np.bool_]]:
    """Bring together what the inputs say of the cells of some rows.

    Parameters
    ----------
    plan : Plan
    inputs : mapping of array, shape (12, cells), (12, hours, cells) or (cells,)
    albedo : array, shape (12, cells)
        Without gaps.
    rows : Rows

    Returns
    -------
    state : State
    borrowed : array of bool, shape (cells,)
        Where a month of low sun took its neighbours' irradiance.
    """
    count = albedo.shape[1]
    column = {name: inputs[name] for name in COLUMN_INPUTS if name in inputs}
    nothing = np.zeros((12, count), np.float32)
    empty = Estimate(nothing, nothing.astype(np.uint16), None)
    clear_sky = clear_sky_of(plan.basis, column, rows)
    state = State(plan, rows, clear_sky, empty, albedo)
    low_sun = rows.extraterrestrial < LOW_SUN
    found = _estimated(state, inputs)
    filled, borrowed = borrow_low_sun(found.transmission, low_sun)
    moved = tuple(
        borrow_low_sun(_estimated(state, _moved(inputs, name)).transmission, low_sun)[0]
        for name in ("cloud_fraction", "temperature_range")
        if f"{name}_standard_error" in inputs and name in inputs
    )
    whole = replace(
        state,
        found=replace(found, transmission=filled),
        albedo_error=inputs.get("albedo_standard_error"),
        transmissions=moved,
    )
    return whole, np.asarray(borrowed.any(axis=0))


def _estimated(state: State, inputs: Mapping[str, FloatArray]) -> Estimate:
    cloud, plan = inputs.get("cloud_fraction"), state.plan
    return estimate(
        plan.sky,
        sky_table(plan.sky),
        clear=state.clear,
        extraterrestrial=state.rows.extraterrestrial,
        cloud=None if cloud is None else cloud.reshape(12, -1, state.albedo.shape[1]),
        temperature_range=inputs.get("temperature_range"),
        measured=inputs.get("surface_shortwave"),
    )


def _moved(inputs: Mapping[str, FloatArray], name: str) -> dict[str, FloatArray]:
    """The inputs with one of them lowered by its standard error, or raised where that is less."""
    values, error = inputs[name], np.nan_to_num(inputs[f"{name}_standard_error"])
    return {**inputs, name: np.where(values > error, values - error, values + error)}
