"""The job in one page: read → check → compute → plan → write → publish."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Protocol

import pandas as pd
import xarray as xr

from gridcool import __version__
from gridcool.computing import code_digest, program_digest, run_blocks
from gridcool.config import Settings
from gridcool.engine.plan import Plan
from gridcool.engine.remembered import Done, remembered_blocks, remembered_layers
from gridcool.grid import Grid
from gridcool.inputs.load import Inputs, describe, load_inputs
from gridcool.inputs.spec import InputReport
from gridcool.parts import (
    CAUTION,
    REFERENCES,
    bounds_text,
    computing_threads,
    grid_of,
    plan_of,
    screen_dataset,
    specs_of,
    strip_rows,
)
from gridcool.planned import decide, declarations, planning_layers, regions_of
from gridcool.planning.regions import Regions
from gridcool.presenting import Run, present
from gridcool.products.layers import write_layers
from gridcool.products.reading import layer_reader
from gridcool.release.blockstore import BlockStore
from gridcool.release.fingerprints import Fingerprint, fingerprint, require_unchanged
from gridcool.release.lock import output_lock
from gridcool.release.publish import (
    CURRENT,
    WORK,
    check_output,
    needed_bytes,
    publish,
    release_stamp,
    require_space,
    staging_folder,
)
from gridcool.release.verify import release_problems
from gridcool.renewal import reasons_to_run, source_files

BLOCKS = "blocks"


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
    blocks, computed : int
        How many blocks there are, and how many of them had to be computed.
    """

    release: Path
    current: Path
    regions: pd.DataFrame | None
    blocks: int
    computed: int

    def summary(self, top: int) -> Iterator[str]:
        """Lines for people: where the results are, and the first regions."""
        yield (
            f"Results: {self.current} (release {self.release.name}; {self.computed} of "
            f"{self.blocks} blocks computed)"
        )
        if self.regions is None:
            return
        yield f"First of {len(self.regions)} regions:"
        ranked = self.regions[self.regions["rank"].notna()]
        for _, row in ranked.head(top).iterrows():
            yield (
                f"  {row['rank']:>3}  {row['region']:<24} {row['rejected_flux_mean']:6.1f} W m-2 "
                f"of panel, {_facing(row['tilt'], row['azimuth'])}"
            )


@dataclass(frozen=True)
class RefreshResult:
    """What a refresh found and did.

    Attributes
    ----------
    reasons : tuple of str
        Why the current release is out of date; empty if it is not.
    screened : ScreenResult or None
        The new release, if one was made.
    to_compute, blocks : int
        What a dry run would compute.
    """

    reasons: tuple[str, ...]
    screened: ScreenResult | None = None
    to_compute: int = 0
    blocks: int = 0


@dataclass(frozen=True, eq=False)
class _Prepared:
    """Everything known before the first block is computed."""

    grid: Grid
    loaded: Inputs
    plan: Plan
    regions: Regions | None
    store: BlockStore
    prints: tuple[tuple[str, str, Fingerprint], ...]


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
    check_output(output)
    with output_lock(output):
        return _screen(settings, output, progress)


def refresh(settings: Settings, progress: Progress, *, dry_run: bool = False) -> RefreshResult:
    """Make a new release only if something changed, and compute only what did."""
    output = settings.resolve(settings.job.output)
    check_output(output)
    with output_lock(output):
        reasons = tuple(reasons_to_run(settings, output / CURRENT, program_digest()))
        if not reasons:
            return RefreshResult(())
        for reason in reasons:
            progress.stage(reason)
        if not dry_run:
            return RefreshResult(reasons, _screen(settings, output, progress))
        ready = _prepare(settings, output, progress)
        done = _blocks(settings, ready, progress, only_look=True)
        return RefreshResult(reasons, None, sum(each.computed for each in done), len(done))


def verify(release: Path) -> list[str]:
    """What is wrong with a release, as sentences; empty if every file is as it was made."""
    return list(release_problems(release))


def _screen(settings: Settings, output: Path, progress: Progress) -> ScreenResult:
    ready = _prepare(settings, output, progress)
    declared = declarations(settings)
    require_space(output, needed_bytes(ready.grid, [*ready.plan.layers, *declared]))
    now = datetime.now(UTC)
    stamp, dataset = release_stamp(now), ready.loaded.dataset
    with staging_folder(output) as stage:
        progress.stage("Computing")
        done = _blocks(settings, ready, progress)
        keys = [each.key for each in done]
        layers = remembered_layers(keys, dataset, ready.plan, ready.store)
        layers = layers.merge(planning_layers(layers, dataset, settings))
        progress.stage("Writing the layers")
        with computing_threads():
            write_layers(
                layers,
                ready.grid,
                stage,
                attributes=_attributes(settings, ready.loaded.reports, now),
                declared=declared,
                on_progress=lambda _what, count, total: progress.advance(count, total),
            )
        progress.stage("Ranking the regions")
        found = decide(settings, ready.grid, ready.regions, layer_reader(stage), dataset)
        progress.stage("Drawing maps and report")
        run = Run(
            *(settings, ready.grid, ready.loaded.reports, ready.prints, found, stamp, now),
            program_digest(),
        )
        present(run, stage)
        progress.stage("Publishing")
        require_unchanged(each for _, _, each in ready.prints)
        release = publish(stage, output, keep=settings.release.keep, stamp=stamp)
    ready.store.keep_only(keys)
    fresh = sum(each.computed for each in done)
    return ScreenResult(release, output / CURRENT, found.table, len(done), fresh)


def _prepare(settings: Settings, output: Path, progress: Progress) -> _Prepared:
    """Read and check everything that can be wrong before computing begins."""
    progress.stage("Reading and checking the inputs")
    specs = specs_of(settings)
    grid = grid_of(settings, specs)
    loaded = load_inputs(specs, grid, strip_rows(grid, settings))
    for report in loaded.reports:
        for warning in report.warnings:
            progress.stage(f"warning: {warning}")
    regions = regions_of(settings, grid)
    for note in () if regions is None else regions.notes:
        progress.stage(f"warning: {note}")
    # Names in rules and criteria are looked up now, so that a slip costs no computing.
    planning_layers(screen_dataset(loaded.dataset, settings), loaded.dataset, settings)
    variables = {report.name: report.variable for report in loaded.reports}
    prints = tuple(
        (name, variables.get(name, ""), fingerprint(path)) for name, path in source_files(settings)
    )
    plan = plan_of(loaded.dataset, settings)
    return _Prepared(grid, loaded, plan, regions, BlockStore(output / WORK / BLOCKS), prints)


def _blocks(
    settings: Settings, ready: _Prepared, progress: Progress, *, only_look: bool = False
) -> list[Done]:
    """Have every strip of the engine's layers in the store, or tell which are missing."""
    dataset: xr.Dataset = ready.loaded.dataset
    tasks = remembered_blocks(dataset, ready.plan, ready.store, code_digest(), only_look=only_look)
    done: list[Done] = run_blocks(tasks, settings.compute.scheduler, progress.advance)
    return done


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
        "comment": f"{settings.job.note} {CAUTION}".strip(),
    }
