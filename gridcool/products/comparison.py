"""A comparison of two releases as text, plain values and a map."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any, Protocol

import matplotlib as mpl
import numpy as np
import pandas as pd
import rasterio
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import ListedColormap, Normalize
from matplotlib.figure import Figure

from gridcool.grid import Grid
from gridcool.products.cartography import DEGREES, Surroundings, projection, size, surround
from gridcool.products.failure import output_errors
from gridcool.products.geotiff import LAYER_FOLDER, gdal_environment
from gridcool.products.maps import DOTS_PER_INCH, PIXELS
from gridcool.products.ramps import MISSING, ramp

SHOWN_MOVES = 15


class Compared(Protocol):
    """Differences from one release to another."""

    @property
    def a(self) -> str:
        """The first release."""

    @property
    def b(self) -> str:
        """The second release."""

    @property
    def settings(self) -> Sequence[tuple[str, Any, Any]]:
        """Key, before and after, of settings that differ."""

    @property
    def inputs(self) -> Sequence[str]:
        """Sentences about inputs that differ."""

    @property
    def layers(self) -> pd.DataFrame:
        """Differences of each layer."""

    @property
    def moves(self) -> pd.DataFrame:
        """Who moved in the ranking."""

    @property
    def notes(self) -> Sequence[str]:
        """What could not be compared."""


def comparison_lines(
    found: Compared, causes: Mapping[str, pd.DataFrame] | None = None
) -> Iterator[str]:
    """The comparison for a terminal.

    Parameters
    ----------
    found : Compared
    causes : mapping of pandas.DataFrame, optional
        Moves that each change makes by itself, by a phrase that names the change.
    """
    yield f"From {found.a} to {found.b}"
    yield ""
    yield "Settings that differ" if found.settings else "No setting differs."
    for key, before, after in found.settings:
        yield f"  {key}: {before!r} -> {after!r}"
    for sentence in found.inputs or ("No input differs.",):
        yield sentence[:1].upper() + sentence[1:]
    yield ""
    changed = found.layers[found.layers["changed_share"] > 0]
    yield f"Layers: {len(changed)} of {len(found.layers)} differ (second minus first)"
    for row in changed.to_dict("records"):
        yield (
            f"  {row['layer']:<28} mean {row['mean']:+.4g}, rms {row['rms']:.4g}, largest "
            f"{row['largest']:+.4g} at {row['latitude']:.2f} N, {row['longitude']:.2f} E; "
            f"{100 * row['changed_share']:.1f} % of cells"
        )
    for note in found.notes:
        yield f"  {note}"
    yield ""
    yield from _move_lines(found.moves)
    for change, moves in (causes or {}).items():
        moved = moves[moves["moved"].fillna(0) != 0]
        yield ""
        yield f"By itself, {change} moves {len(moved)} regions" + (":" if len(moved) else ".")
        yield from _rows(moved)


def _move_lines(moves: pd.DataFrame) -> Iterator[str]:
    if moves.empty:
        yield "There are no regions to compare."
        return
    moved = moves[moves["moved"].fillna(0) != 0]
    yield f"Ranking: {len(moved)} of {len(moves)} regions moved"
    yield from _rows(moved)
    for row in moves[moves["moved"].isna()].to_dict("records"):
        yield f"  {row['region']}: {row['why']}"


def _rows(moved: pd.DataFrame) -> Iterator[str]:
    for row in moved.head(SHOWN_MOVES).to_dict("records"):
        sure = "" if row["beyond_doubt"] else "; within the errors"
        yield (f"  {row['region']:<24} {row['rank_a']} -> {row['rank_b']}: {row['why']}{sure}")
    if len(moved) > SHOWN_MOVES:
        yield f"  and {len(moved) - SHOWN_MOVES} more"


def comparison_facts(
    found: Compared, causes: Mapping[str, pd.DataFrame] | None = None
) -> dict[str, Any]:
    """The comparison as plain values for JSON; what is unknown is None."""
    return {
        "a": found.a,
        "b": found.b,
        "settings": [
            {"key": key, "before": before, "after": after} for key, before, after in found.settings
        ],
        "inputs": list(found.inputs),
        "layers": _records(found.layers),
        "moves": _records(found.moves),
        "causes": {change: _records(moves) for change, moves in (causes or {}).items()},
        "notes": list(found.notes),
    }


def _records(frame: pd.DataFrame) -> list[dict[str, Any]]:
    return [
        {str(key): _plain(value) for key, value in row.items()} for row in frame.to_dict("records")
    ]


def _plain(value: Any) -> Any:
    if value is None or value is pd.NA or (isinstance(value, float) and not math.isfinite(value)):
        return None
    return value.item() if isinstance(value, np.generic) else value


def draw_comparison(
    a: Path, b: Path, grid: Grid, path: Path, *, layer: str, unit: str, coast: bool
) -> None:
    """Map of a layer's difference, second minus first; white where nothing changed.

    Parameters
    ----------
    a, b : Path
        Folders of releases on ``grid``.
    path : Path
        The picture, ``.png``.
    layer, unit : str
    coast : bool

    Raises
    ------
    OutputError
        If a layer cannot be read or the picture cannot be written.
    """
    step = max(1, -(-max(grid.shape) // PIXELS))
    shape = tuple(-(-length // step) for length in grid.shape)
    both = []
    for folder in (a, b):
        source = folder / LAYER_FOLDER / f"{layer}.tif"
        errors = (OSError, rasterio.errors.RasterioIOError)
        with output_errors(source, errors), gdal_environment(), rasterio.open(source) as file:
            both.append(file.read(1, out_shape=shape).astype(float))
    difference = both[1] - both[0]
    most = float(np.nanmax(np.abs(difference), initial=0.0)) or 1.0
    bounds = grid.bounds
    with mpl.rc_context({"font.size": 9, "axes.linewidth": 0.6}):
        figure = Figure(figsize=size(bounds), dpi=DOTS_PER_INCH, layout="constrained")
        FigureCanvasAgg(figure)
        axes = figure.add_subplot(projection=projection(bounds))
        axes.set_facecolor(_hex(MISSING))
        picture = axes.pcolormesh(
            np.linspace(bounds.west, bounds.east, shape[1] + 1),
            np.linspace(bounds.north, bounds.south, shape[0] + 1),
            np.ma.masked_invalid(difference),
            cmap=ListedColormap([_hex(c) for c in ramp("difference").colours(255)]),
            norm=Normalize(-most, most),
            transform=DEGREES,
            rasterized=True,
        )
        name = layer.replace("_", " ")
        bar = figure.colorbar(
            picture, ax=axes, orientation="horizontal", shrink=0.7, pad=0.03, aspect=35
        )
        bar.set_label(f"change of {name} ({unit})" if unit else f"change of {name}")
        surround(axes, bounds, Surroundings(coast=coast))
        axes.set_title(f"{a.name} to {b.name}", fontsize=10, loc="left")
        with output_errors(path):
            figure.savefig(path, metadata={"Software": None})


def _hex(colour: tuple[int, int, int]) -> str:
    return "#{:02x}{:02x}{:02x}".format(*colour)
