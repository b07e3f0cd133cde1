"""The engine beside the direct quadrature, cell by cell."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import xarray as xr
from direct_optimum import best_orientation
from direct_quadrature import Cell, Panel, annual_mean, build_scene, evaluate
from direct_sky import Sky
from engine_cells import dataset_of, solved, value

from gridcool.engine.options import Panel as EnginePanel

#: Every day, four minutes: ten minutes make the flux a staircase of some 0.05 % over the tilt, and
#: every third day is itself some 0.1 % from the month.
FINE = {"steps_per_day": 360, "day_step": 1}
BATCH = 6  # hourly cells at a time: their path integrals are large


@dataclass(frozen=True)
class Comparison:
    """One cell; fluxes in W m-2, errors relative unless a unit is named.

    Attributes
    ----------
    flux_error : the engine's F over the quadrature's at the engine's orientation, minus one
    lost : share of F that the engine's orientation gives away against the true optimum
    flux_error_fine, lost_fine : the same against the quadrature in `FINE` steps
    flat_error : as flux_error, for the flat panel
    escape_error : absolute
    irradiance_error, worst_month : W m-2
    """

    cell: Cell
    bins: int
    tilt: float
    azimuth: float
    best_tilt: float
    best_azimuth: float
    flux: float
    flux_error: float
    flux_error_fine: float
    lost: float
    lost_fine: float
    flat_error: float
    escape_error: float
    irradiance_error: float
    worst_month: float


def compare(cells: Sequence[Cell], panel: Panel, *, own_air: bool = True) -> list[Comparison]:
    """Solve and check cells of any kind; hourly ones in small batches, ordered by latitude."""
    found = []
    ordered = sorted(cells, key=lambda cell: (_bins(cell), cell.latitude))
    for bins in sorted({_bins(cell) for cell in cells}):
        group = [cell for cell in ordered if _bins(cell) == bins]
        size = len(group) if bins == 1 else BATCH
        for start in range(0, len(group), size):
            batch = group[start : start + size]
            options = EnginePanel(panel.reflectance, panel.specular_share, panel.back_reflectance)
            result = solved(dataset_of(batch, own_air=own_air), options)
            found += [_compare(result, row, cell, panel) for row, cell in enumerate(batch)]
    return found


def _bins(cell: Cell) -> int:
    return int(np.asarray(cell.cloud).reshape(12, -1).shape[1])


def _compare(result: xr.Dataset, row: int, cell: Cell, panel: Panel) -> Comparison:
    sky, compass = Sky(), _bins(cell) > 1
    coarse, fine = build_scene(cell, sky), build_scene(cell, sky, **FINE)
    tilt, azimuth = value(result, "tilt", row), value(result, "azimuth", row)
    here, here_fine = (evaluate(s, panel, tilt, azimuth) for s in (coarse, fine))
    best = best_orientation(coarse, panel, compass=compass)
    best_fine = best_orientation(fine, panel, compass=compass, near=best)
    flat = evaluate(coarse, panel, 0, 0).annual
    monthly = result["monthly_rejected_flux"].values[:, row, 0]
    return Comparison(
        cell=cell,
        bins=_bins(cell),
        tilt=tilt,
        azimuth=azimuth,
        best_tilt=best_fine.tilt,
        best_azimuth=best_fine.azimuth,
        flux=here.annual,
        flux_error=value(result, "rejected_flux", row) / here.annual - 1,
        flux_error_fine=value(result, "rejected_flux", row) / here_fine.annual - 1,
        lost=1 - here.annual / best.annual,
        lost_fine=1 - here_fine.annual / best_fine.annual,
        flat_error=value(result, "rejected_flux_flat", row) / flat - 1,
        escape_error=value(result, "escape_fraction", row) - here.escape,
        irradiance_error=value(result, "surface_shortwave", row) - annual_mean(here.irradiance),
        worst_month=float(abs(monthly - here.monthly).max()),
    )


def root_mean_square(values: Sequence[float]) -> float:
    """Root of the mean of squares."""
    return float(np.sqrt(np.mean(np.square(values))))
