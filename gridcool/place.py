"""One place explained from the settings, without a run of the whole job."""

from __future__ import annotations

from typing import Any

from gridcool.config import Settings
from gridcool.engine.blocks import explain, solve
from gridcool.errors import InputDataError
from gridcool.grid import Grid
from gridcool.inputs.load import load_inputs
from gridcool.parts import (
    CAUTION,
    bounds_text,
    computing_threads,
    costs_of,
    engine_options,
    grid_of,
    specs_of,
)
from gridcool.planning.explanation import EXTRA_LAYERS, cell_facts


def cell(settings: Settings, latitude: float, longitude: float) -> dict[str, Any]:
    """One place explained, as plain facts.

    Raises
    ------
    InputDataError
        If the place lies outside the target grid or nothing is known of it.
    """
    specs = specs_of(settings)
    grid = grid_of(settings, specs)
    row, column = _cell_at(grid, latitude, longitude)
    inputs = load_inputs(specs, grid, 1).dataset
    rows = slice(max(row - 1, 0), min(row + 2, grid.rows))
    columns = [column + step for step in (-1, 0, 1)]
    if grid.is_periodic:
        columns = [each % grid.columns for each in columns]
    columns = [each for each in columns if 0 <= each < grid.columns]
    window = inputs.isel(latitude=rows, longitude=columns)
    with computing_threads():
        window = window.compute()
        options = engine_options(settings)
        wanted = (*EXTRA_LAYERS, *settings.layers.extra)
        layers = solve(window, **options, extra_layers=wanted).compute()
        here = {"latitude": [row - rows.start], "longitude": [columns.index(column)]}
        found = explain(window.isel(here), **options)
    if found is None:
        raise InputDataError(
            f"Nothing is known at {latitude:g}, {longitude:g}: the albedo or every irradiance "
            "estimate is missing there; choose another place or fill the inputs."
        )
    facts = cell_facts(layers, here["latitude"][0], here["longitude"][0], found, costs_of(settings))
    elevation = window.get("elevation")
    height = None if elevation is None else float(elevation.isel(here).values[0, 0])
    facts["place"]["elevation"] = "taken as sea level" if height is None else f"{height:.0f} m"
    return {"title": settings.job.name, **facts, "caution": CAUTION}


def _cell_at(grid: Grid, latitude: float, longitude: float) -> tuple[int, int]:
    """Row and column of the cell that holds a place."""
    bounds = grid.bounds
    east = bounds.west + (longitude - bounds.west) % 360
    if not bounds.south <= latitude <= bounds.north or east >= bounds.east:
        raise InputDataError(
            f"The place {latitude:g}, {longitude:g} lies outside the target grid "
            f"({bounds_text(grid)}); choose one inside."
        )
    row = min(int((bounds.north - latitude) / grid.latitude_step), grid.rows - 1)
    return row, min(int((east - bounds.west) / grid.longitude_step), grid.columns - 1)
