"""A row of cells with everything known about them, ready for the account."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.account import Cells
from gridcool.engine.clear_sky import ClearSky
from gridcool.engine.irradiance import Estimate, spread_over_hours
from gridcool.engine.options import Sky
from gridcool.engine.plan import Plan, RowTables
from gridcool.engine.skies import sky_table

FloatArray = NDArray[np.floating]


@dataclass(frozen=True, eq=False)
class State:
    """Cells of one row.

    Attributes
    ----------
    plan : Plan
    tables : RowTables
    clear_sky : ClearSky
    found : Estimate
        Irradiance over its clear-sky value.
    albedo : array, shape (12, cells)
    latitude : float
        Radians.
    """

    plan: Plan
    tables: RowTables
    clear_sky: ClearSky
    found: Estimate
    albedo: FloatArray
    latitude: float

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

    def cells_for(self, sky: Sky, transmission: FloatArray, albedo: FloatArray) -> Cells:
        """The same for another sky, irradiance or albedo; snow months stay those of the cells."""
        table = sky_table(sky)
        bounced = 1 / (1 - albedo * self.clear_sky.sky_albedo)
        clear = (self.clear_sky.beam + self.clear_sky.scattered) * bounced[:, None]
        known = replace(self.found, transmission=transmission)
        by_hour = spread_over_hours(known, table.darkest, clear)
        moments = table.moments(
            table.equivalent_cloud(by_hour), albedo[:, None], self.clear_sky.returned[:, None]
        )
        return Cells(
            albedo=albedo,
            escape=self.clear_sky.escape,
            moments=moments,
            clear=clear,
            clear_beam=self.clear_sky.beam,
            counts=self.counts,
            overcast_reflectance=sky.overcast_reflectance,
        )
