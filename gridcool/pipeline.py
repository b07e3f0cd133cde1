"""The job in one page: read → check → compute → write → plan → publish."""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Protocol

import dask
import pandas as pd
import xarray as xr
from threadpoolctl import threadpool_limits

from gridcool import __version__
from gridcool.config import Settings
from gridcool.engine.blocks import explain, solve
from gridcool.engine.options import Field, InputError, Panel, Sky
from gridcool.errors import InputDataError, SettingsError
from gridcool.grid import Bounds, Grid
from gridcool.inputs.load import describe, load_inputs, target_grid
from gridcool.inputs.spec import InputReport, InputSpec
from gridcool.planning.explanation import EXTRA_LAYERS, cell_facts
from gridcool.planning.ranking import LAYERS as RANKED_LAYERS
from gridcool.planning.ranking import region_table
from gridcool.planning.regions import Regions, box_regions, coverage, read_regions
from gridcool.planning.worth import PanelCosts
from gridcool.products.layers import write_layers
from gridcool.products.reading import read_layer
from gridcool.products.tables import write_region_table
from gridcool.release.publish import (
    check_output,
    needed_bytes,
    publish,
    release_stamp,
    require_space,
    staging_folder,
)
from gridcool.variables import layer_variables

REGION_TABLE = "regions.csv"
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
_UNITS = {"kB": 1e3, "MB": 1e6, "GB": 1e9, "TB": 1e12}


class Progress(Protocol):
    """Where the pipeline says what it is doing."""

    def stage(self, text: str) -> None:
        """A new stage begins."""

    def advance(self, done: int, total: int) -> None:
        """So many of so many steps are done."""


@dataclass(frozen=True)
class ScreenResult:
    """What a run published.

    Attributes
    ----------
    release : Path
        The new release's folder.
    current : Path
        The name that always leads to the newest release.
    regions : pandas.DataFrame or None
        The region table, best first.
    """

    release: Path
    current: Path
    regions: pd.DataFrame | None

    def summary(self, top: int) -> Iterator[str]:
        """Lines for people: where the results are, and the first regions."""
        yield f"Results: {self.current} (release {self.release.name})"
        if self.regions is None:
            return
        yield f"First of {len(self.regions)} regions:"
        ranked = self.regions[self.regions["rank"].notna()]
        for _, row in ranked.head(top).iterrows():
            yield (
                f"  {row['rank']:>3}  {row['region']:<24} {row['rejected_flux_mean']:6.1f} W m-2 "
                f"of panel, {_facing(row['tilt'], row['azimuth'])}"
            )


def _facing(tilt: float, azimuth: float) -> str:
    return f"tilted {tilt:.0f}°" + ("" if pd.isna(azimuth) else f" facing {azimuth:.0f}°")


def check(settings: Settings) -> Iterator[str]:
    """What was understood of each input and of the target grid, as lines.

    Raises
    ------
    InputDataError
        After the last line, if any input cannot be used.
    """
    specs = specs_of(settings)
    reports = [describe(spec) for spec in specs]
    for report in reports:
        yield from report.lines()
        yield ""
    if any(report.errors for report in reports):
        load_inputs(specs, grid_of(settings, specs), 1)  # raises with all that is wrong
    grid = grid_of(settings, specs)
    yield f"target grid  {grid.rows} rows × {grid.columns} columns, {_bounds_text(grid)}"


def screen(settings: Settings, progress: Progress) -> ScreenResult:
    """Do the whole job and publish a release; on any failure the last one stays untouched."""
    output = settings.resolve(settings.job.output)
    specs = specs_of(settings)
    progress.stage("Reading and checking the inputs")
    check_output(output)
    grid = grid_of(settings, specs)
    loaded = load_inputs(specs, grid, strip_rows(grid, settings))
    for report in loaded.reports:
        for warning in report.warnings:
            progress.stage(f"warning: {warning}")
    regions = _regions(settings, grid, progress)  # now, so that a bad file costs no computing
    layers = screen_dataset(loaded.dataset, settings)
    require_space(output, needed_bytes(grid, [str(name) for name in layers.data_vars]))
    now = datetime.now(UTC)
    with staging_folder(output) as stage:
        progress.stage("Computing and writing the layers")
        with _threads():
            write_layers(
                layers,
                grid,
                stage,
                attributes=_attributes(settings, loaded.reports, now),
                on_progress=lambda _what, done, total: progress.advance(done, total),
            )
        table = None
        if regions is not None:
            progress.stage("Ranking the regions")
            table = _ranked(settings, grid, regions, stage)
            write_region_table(table, stage / REGION_TABLE)
        progress.stage("Publishing")
        release = publish(stage, output, keep=settings.release.keep, stamp=release_stamp(now))
    return ScreenResult(release, output / "current", table)


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
    with _threads():
        window = window.compute()
        options = _engine_options(settings)
        wanted = (*EXTRA_LAYERS, *settings.layers.extra)
        layers = solve(window, **options, extra_layers=wanted).compute()
        here = {"latitude": [row - rows.start], "longitude": [columns.index(column)]}
        found = explain(window.isel(here), **options)
    if found is None:
        raise InputDataError(
            f"Nothing is known at {latitude:g}, {longitude:g}: the albedo or every irradiance "
            "estimate is missing there; choose another place or fill the inputs."
        )
    facts = cell_facts(layers, here["latitude"][0], here["longitude"][0], found, _costs(settings))
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
            f"({_bounds_text(grid)}); choose one inside."
        )
    row = min(int((bounds.north - latitude) / grid.latitude_step), grid.rows - 1)
    return row, min(int((east - bounds.west) / grid.longitude_step), grid.columns - 1)


def _costs(settings: Settings) -> PanelCosts:
    worth = settings.worth
    return PanelCosts(
        lifetime_years=settings.panel.lifetime_years,
        mass=worth.panel_mass,
        embodied_energy=worth.embodied_energy,
        cost_low=worth.cost_low,
        cost_high=worth.cost_high,
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
    return solve(dataset, **_engine_options(settings), extra_layers=settings.layers.extra)


def _engine_options(settings: Settings) -> dict[str, Any]:
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


@contextmanager
def _threads() -> Iterator[None]:
    """Compute on threads of this process, with one BLAS thread each: both at full width fight."""
    with dask.config.set(scheduler="threads"), threadpool_limits(1, "blas"):
        yield


def _regions(settings: Settings, grid: Grid, progress: Progress) -> Regions | None:
    """The regions that the settings ask for, if any."""
    wanted = settings.regions
    if wanted is None:
        return None
    if wanted.path is None:
        return box_regions(grid.bounds, wanted.boxes or 0.0)
    regions = read_regions(settings.resolve(wanted.path), wanted.name)
    for note in regions.notes:
        progress.stage(f"warning: {note}")
    return regions


def _ranked(settings: Settings, grid: Grid, regions: Regions, product: Path) -> pd.DataFrame:
    """The region table from the layers just written."""
    layers = {name: read_layer(product, name) for name in RANKED_LAYERS}
    return region_table(layers, coverage(regions, grid), ground_cover=settings.panel.ground_cover)


def _attributes(
    settings: Settings, reports: tuple[InputReport, ...], now: datetime
) -> dict[str, str]:
    """Global attributes of every file."""
    sources = "; ".join(f"{r.name} from {Path(r.path).name} ({r.variable})" for r in reports)
    return {
        "title": settings.job.name,
        "source": f"gridcool {__version__}: {sources}",
        "history": f"{now:%Y-%m-%dT%H:%M:%SZ} gridcool {__version__} screen",
        "references": REFERENCES,
        "comment": CAUTION,
    }


def _bounds_text(grid: Grid) -> str:
    b = grid.bounds
    return (
        f"{b.west:g} to {b.east:g} degrees east, {b.south:g} to {b.north:g} degrees north, "
        f"cells of {grid.longitude_step:g} × {grid.latitude_step:g} degrees"
    )
