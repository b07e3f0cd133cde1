"""The job in one page: read → check → compute → write → plan → publish."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Protocol

import pandas as pd
import xarray as xr

from gridcool import __version__
from gridcool.computing import code_digest, run_blocks
from gridcool.config import Settings
from gridcool.engine.plan import Plan
from gridcool.engine.remembered import Done, remembered_blocks, remembered_layers
from gridcool.inputs.load import describe, load_inputs
from gridcool.inputs.spec import InputReport
from gridcool.parts import (
    CAUTION,
    bounds_text,
    computing_threads,
    grid_of,
    plan_of,
    screen_dataset,
    specs_of,
    strip_rows,
)
from gridcool.planned import decide, declarations, planning_layers, regions_of
from gridcool.products.layers import write_layers
from gridcool.products.reading import layer_reader
from gridcool.products.tables import write_region_table
from gridcool.release.blockstore import BlockStore
from gridcool.release.publish import (
    WORK,
    check_output,
    needed_bytes,
    publish,
    release_stamp,
    require_space,
    staging_folder,
)

REGION_TABLE = "regions.csv"
BLOCKS = "blocks"
REFERENCES = (
    "Bird & Hulstrom 1981 SERI/TR-642-761; Kasten & Czeplak 1980 Solar Energy 24; "
    "Falls 1974 J. Geophys. Res. 79; Hargreaves & Samani 1982 and FAO-56; Spencer 1971; "
    "Kasten & Young 1989 Appl. Opt. 28; Meador & Weaver 1980 J. Atmos. Sci. 37; "
    "Donohoe & Battisti 2011 J. Climate 24"
)


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
    yield f"target grid  {grid.rows} rows × {grid.columns} columns, {bounds_text(grid)}"


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
    regions = regions_of(settings, grid)  # now, so that a bad file costs no computing
    for note in () if regions is None else regions.notes:
        progress.stage(f"warning: {note}")
    plan = plan_of(loaded.dataset, settings)
    declared = declarations(settings)
    planning_layers(  # names of layers are checked before anything is computed
        screen_dataset(loaded.dataset, settings), loaded.dataset, settings
    )
    require_space(output, needed_bytes(grid, [*plan.layers, *declared]))
    now = datetime.now(UTC)
    store = BlockStore(output / WORK / BLOCKS)
    with staging_folder(output) as stage:
        progress.stage("Computing")
        keys = _blocks(settings, loaded.dataset, plan, store, progress)
        layers = remembered_layers(keys, loaded.dataset, plan, store)
        layers = layers.merge(planning_layers(layers, loaded.dataset, settings))
        progress.stage("Writing the layers")
        with computing_threads():
            write_layers(
                layers,
                grid,
                stage,
                attributes=_attributes(settings, loaded.reports, now),
                declared=declared,
                on_progress=lambda _what, done, total: progress.advance(done, total),
            )
        progress.stage("Ranking the regions")
        found = decide(settings, grid, regions, layer_reader(stage), loaded.dataset)
        if found.table is not None:
            write_region_table(found.table, stage / REGION_TABLE)
        progress.stage("Publishing")
        release = publish(stage, output, keep=settings.release.keep, stamp=release_stamp(now))
        store.keep_only(keys)
    return ScreenResult(release, output / "current", found.table)


def _blocks(
    settings: Settings,
    dataset: xr.Dataset,
    plan: Plan,
    store: BlockStore,
    progress: Progress,
) -> list[str]:
    """Have every strip of the engine's layers in the store; keys in order."""
    tasks = remembered_blocks(dataset, plan, store, code_digest())
    done: list[Done] = run_blocks(tasks, settings.compute.scheduler, progress.advance)
    fresh = sum(each.computed for each in done)
    if fresh < len(done):
        progress.stage(f"{len(done) - fresh} of {len(done)} blocks were known already")
    return [each.key for each in done]


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
