"""The settings as the parts that do the work: inputs, grid, engine options, costs, threads."""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

import dask
import xarray as xr
from threadpoolctl import threadpool_limits

from gridcool.config import Settings
from gridcool.engine.blocks import plan_for, solve
from gridcool.engine.options import Field, InputError, Panel, Sky
from gridcool.engine.plan import Plan
from gridcool.errors import SettingsError
from gridcool.grid import Bounds, Grid
from gridcool.inputs.load import target_grid
from gridcool.inputs.spec import InputSpec
from gridcool.planning.worth import PanelCosts
from gridcool.variables import layer_variables

REFERENCES = (
    "Bird & Hulstrom 1981 SERI/TR-642-761; Kasten & Czeplak 1980 Solar Energy 24; "
    "Falls 1974 J. Geophys. Res. 79; Hargreaves & Samani 1982 and FAO-56; Spencer 1971; "
    "Kasten & Young 1989 Appl. Opt. 28; Meador & Weaver 1980 J. Atmos. Sci. 37; "
    "Donohoe & Battisti 2011 J. Climate 24"
)
CAUTION = (
    "For screening only. Glare and aviation, fire from concave or damaged reflectors, wind "
    "loading, broken glass, plants and wildlife under shade, rain and neighbours, and land rights "
    "are not judged here: local codes and licensed engineers decide."
)


def specs_of(settings: Settings) -> list[InputSpec]:
    """The inputs that the settings name, with absolute paths."""
    specs = []
    for name, given in settings.inputs.items():
        fields = given.model_dump()
        for key in ("path", "divisor_path"):
            fields[key] = None if fields[key] is None else settings.resolve(fields[key])
        specs.append(InputSpec(name=name, **fields))
    return specs


def grid_of(settings: Settings, specs: list[InputSpec]) -> Grid:
    """The target grid that the settings ask for; that of the albedo where they say nothing."""
    wanted = settings.grid
    bounds = None if wanted.bounds is None else Bounds(*wanted.bounds)
    like = "albedo" if wanted.like is None and wanted.resolution is None else wanted.like
    return target_grid(specs, like=like, resolution=wanted.resolution, bounds=bounds)


def strip_rows(grid: Grid, settings: Settings) -> int:
    """Rows of a strip: few enough for the memory, many enough to keep the threads busy."""
    bands = sum(layer.count for layer in layer_variables().values())
    monthly = 12 * len(settings.inputs)
    row_bytes = grid.columns * 4 * (2 * bands + 4 * monthly)
    threads = dask.system.CPU_COUNT
    affordable = _memory(settings) / 4 / threads / row_bytes
    return max(1, min(int(affordable), 256, -(-grid.rows // (4 * threads))))


def _memory(settings: Settings) -> float:
    found = re.fullmatch(r"\s*(\d+(?:\.\d+)?)\s*([kMGT])(i?)B\s*", settings.compute.memory)
    if found is None:
        raise SettingsError(f"compute.memory: {settings.compute.memory!r} is not a size.")
    number, prefix, binary = found.groups()
    step = 1024 if binary else 1000
    return float(float(number) * step ** ("kMGT".index(prefix) + 1))


def bounds_text(grid: Grid) -> str:
    """Where a grid lies and how fine it is, as people say it."""
    b = grid.bounds
    return (
        f"{b.west:g} to {b.east:g} degrees east, {b.south:g} to {b.north:g} degrees north, "
        f"cells of {grid.longitude_step:g} × {grid.latitude_step:g} degrees"
    )


def screen_dataset(dataset: xr.Dataset, settings: Settings) -> xr.Dataset:
    """All layers of a dataset of canonical inputs, lazily.

    Parameters
    ----------
    dataset : xarray.Dataset
        As `gridcool.engine.blocks.solve` takes it.
    settings : Settings
        The sections sky, panel, worth, uncertainty and layers are used.
    """
    return solve(dataset, **engine_options(settings), extra_layers=settings.layers.extra)


def plan_of(dataset: xr.Dataset, settings: Settings) -> Plan:
    """What all strips of the job share."""
    return plan_for(dataset, **engine_options(settings), extra_layers=settings.layers.extra)


def engine_options(settings: Settings) -> dict[str, Any]:
    """The settings as the engine's own numbers."""
    return {
        "panel": Panel(
            reflectance=settings.panel.reflectance * (1 - settings.panel.soiling),
            specular_share=settings.panel.specular_share,
            back_reflectance=settings.panel.back_reflectance,
        ),
        "sky": Sky(**settings.sky.model_dump()),
        "field": Field(settings.panel.ground_cover, settings.worth.carbon_dioxide_ppm),
        "error": InputError(**settings.uncertainty.model_dump()),
    }


def costs_of(settings: Settings) -> PanelCosts:
    """One square metre of panel as the settings have it."""
    worth = settings.worth
    return PanelCosts(
        lifetime_years=settings.panel.lifetime_years,
        mass=worth.panel_mass,
        embodied_energy=worth.embodied_energy,
        cost_low=worth.cost_low,
        cost_high=worth.cost_high,
    )


@contextmanager
def computing_threads() -> Iterator[None]:
    """Compute on threads of this process, with one BLAS thread each: both at full width fight."""
    with dask.config.set(scheduler="threads"), threadpool_limits(1, "blas"):
        yield
