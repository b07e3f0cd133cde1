"""`gridcool compare`: two releases, or what two settings would make of the same data."""

from __future__ import annotations

import tempfile
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd
import xarray as xr

from gridcool.config import Settings, load_settings, settings_from
from gridcool.errors import SettingsError
from gridcool.grid import Grid
from gridcool.inputs.load import load_inputs
from gridcool.parts import computing_threads, grid_of, screen_dataset, specs_of, strip_rows
from gridcool.pipeline import Progress, screen
from gridcool.planned import decide, planning_layers, regions_of
from gridcool.presenting import REGION_TABLE, settings_record
from gridcool.products.comparison import draw_comparison
from gridcool.products.reading import grid_of_layer
from gridcool.products.tables import read_region_table
from gridcool.release.compare import Comparison, compare_releases, rank_moves
from gridcool.variables import layer_variables

#: Layers that the region table reads.
RANKED = (
    *("rejected_flux", "flux_uncertainty", "tilt", "azimuth", "low_ray_hours"),
    *("co2e_standing", "co2e_100yr", "exclusion", "suitability", "suitability_uncertainty"),
)
#: Sections whose parts only mean something together, and change as one.
WHOLE_SECTIONS = ("exclude", "criterion", "suitability_class", "regions", "zones", "target")
#: Keys that change no number.
IDLE = ("job", "release", "compute", "maps", "layers")


@dataclass(frozen=True, eq=False)
class Compared:
    """A comparison, and what each change does by itself where that is known."""

    found: Comparison
    causes: dict[str, pd.DataFrame]


def compare(a: Path, b: Path, progress: Progress, picture: Path | None = None) -> Compared:
    """Compare two releases, or two settings files.

    Parameters
    ----------
    a, b : Path
        Two release folders (``OUT/current`` will do), or two settings files; each of these is then
        computed anew, and every change of a setting is also tried by itself on the first.
    progress : Progress
    picture : Path, optional
        Where to draw the change of the flux.

    Raises
    ------
    SettingsError
        If one is a folder and the other a file.
    """
    if a.is_dir() != b.is_dir():
        raise SettingsError(f"{a} and {b}: give two release folders or two settings files.")
    if a.is_dir():
        return Compared(_releases(a.resolve(), b.resolve(), picture, coast=True), {})
    first, second = load_settings(a), load_settings(b)
    with tempfile.TemporaryDirectory(prefix="gridcool-") as scratch:
        folders = []
        for name, settings in (("a", first), ("b", second)):
            progress.stage(f"Computing {a if name == 'a' else b}")
            job = settings.job.model_copy(update={"output": str(Path(scratch) / name)})
            made = screen(settings.model_copy(update={"job": job}), progress)
            folders.append(made.release)
        found = _releases(folders[0], folders[1], picture, coast=first.maps.coastlines)
        before = _table(folders[0])
        causes = {} if before is None else dict(_causes(first, second, before, progress))
    return Compared(found, causes)


def _releases(a: Path, b: Path, picture: Path | None, *, coast: bool) -> Comparison:
    tables = _table(a), _table(b)
    both = (tables[0], tables[1]) if tables[0] is not None and tables[1] is not None else None
    found = compare_releases(a, b, both)
    if picture is not None:
        grids: list[Grid] = [grid_of_layer(each, "rejected_flux") for each in (a, b)]
        if grids[0] != grids[1]:
            raise SettingsError("The releases lie on different grids; there is no map to draw.")
        unit = layer_variables()["rejected_flux"].units
        draw_comparison(a, b, grids[0], picture, layer="rejected_flux", unit=unit, coast=coast)
    return found


def _table(release: Path) -> pd.DataFrame | None:
    path = release / REGION_TABLE
    return read_region_table(path) if path.exists() else None


def _causes(
    a: Settings, b: Settings, before: pd.DataFrame, progress: Progress
) -> Iterator[tuple[str, pd.DataFrame]]:
    """The moves that each change makes by itself; nothing if there is only one change."""
    changes = list(changed_parts(settings_record(a), settings_record(b)))
    if len(changes) < 2:
        return
    for key, record in changes:
        progress.stage(f"Trying {key} by itself")
        table = rank_table(settings_from(record, source=key, base=a.base))
        if table is not None:
            yield key, rank_moves(before, table)


def changed_parts(a: dict[str, Any], b: dict[str, Any]) -> Iterator[tuple[str, dict[str, Any]]]:
    """The first settings with one change of the second at a time, named after the key."""
    for section in sorted(set(a) | set(b)):
        before, after = a.get(section), b.get(section)
        if before == after or section in IDLE:
            continue
        nested = isinstance(before, dict) and isinstance(after, dict)
        if not nested or section in WHOLE_SECTIONS:
            yield section, _without_nothing({**a, section: after})
            continue
        assert isinstance(before, dict)
        assert isinstance(after, dict)
        for key in sorted(set(before) | set(after)):
            if before.get(key) != after.get(key):
                yield (
                    f"{section}.{key}",
                    _without_nothing({**a, section: {**before, key: after.get(key)}}),
                )


def _without_nothing(record: dict[str, Any]) -> dict[str, Any]:
    """Sections and keys that are not given left out, as they would be in a file."""
    return {
        key: _without_nothing(value) if isinstance(value, dict) else value
        for key, value in record.items()
        if value is not None
    }


def rank_table(settings: Settings) -> pd.DataFrame | None:
    """The region table that settings lead to, without a release."""
    specs = specs_of(settings)
    grid = grid_of(settings, specs)
    inputs = load_inputs(specs, grid, strip_rows(grid, settings)).dataset
    layers = screen_dataset(inputs, settings)
    layers = layers.merge(planning_layers(layers, inputs, settings))
    named = {each.layer for each in settings.exclude}
    named |= {each.layer for each in settings.criterion}
    wanted = [name for name in layers.data_vars if name in (*RANKED, *named)]
    with computing_threads():
        computed: xr.Dataset = layers[wanted].compute()

    def read(name: str) -> Any:
        return computed[name].values if name in computed else None

    return decide(settings, grid, regions_of(settings, grid), read, inputs).table
