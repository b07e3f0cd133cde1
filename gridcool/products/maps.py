"""Maps for people: a layer on a projection that suits the place, with units, coast and outlines.

Everything is drawn offline from the finished layers; large grids from their overviews, so that a
map takes seconds whatever the resolution.
"""

from __future__ import annotations

import textwrap
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import rasterio
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import BoundaryNorm, ListedColormap, Normalize
from matplotlib.figure import Figure
from matplotlib.patches import Patch
from numpy.typing import NDArray

from gridcool.grid import Grid
from gridcool.products.cartography import DEGREES, INK, Surroundings, projection, size, surround
from gridcool.products.failure import output_errors
from gridcool.products.geotiff import LAYER_FOLDER, gdal_environment
from gridcool.products.ramps import MISSING, SPANS, class_colours, ramp
from gridcool.variables import LayerVariable

FloatArray = NDArray[np.floating]

MAP_FOLDER = "maps"
PIXELS = 1100  # most cells along a side that are drawn
DOTS_PER_INCH = 110
RAMP_STEPS = 256
HATCH = "////"


@dataclass(frozen=True)
class MapPicture:
    """A finished map: its layer's name, its file, a title, and a sentence that describes it."""

    name: str
    path: Path
    title: str
    caption: str


def draw_maps(
    product: Path,
    grid: Grid,
    layers: Mapping[str, LayerVariable],
    around: Surroundings,
) -> list[MapPicture]:
    """Draw a map of each layer into ``product/maps``.

    Parameters
    ----------
    product : Path
        A folder that `write_layers` filled.
    grid : Grid
    layers : mapping of LayerVariable
        The layers to draw, as declared for this product, in order.
    around : Surroundings

    Raises
    ------
    OutputError
        If a picture cannot be written.
    """
    folder = product / MAP_FOLDER
    with output_errors(folder):
        folder.mkdir(exist_ok=True)
    excluded = _read(product, "exclusion", grid)
    return [_draw(product, folder, grid, layer, excluded, around) for layer in layers.values()]


def _draw(
    product: Path,
    folder: Path,
    grid: Grid,
    layer: LayerVariable,
    excluded: FloatArray | None,
    around: Surroundings,
) -> MapPicture:
    values = _read(product, layer.name, grid)
    if values is None:
        raise ValueError(f"{layer.name} is not among the product's layers")
    path = folder / f"{layer.name}.png"
    with mpl.rc_context({"font.size": 9, "axes.linewidth": 0.6, "hatch.linewidth": 0.3}):
        figure = Figure(figsize=size(grid.bounds), dpi=DOTS_PER_INCH, layout="constrained")
        FigureCanvasAgg(figure)
        axes = figure.add_subplot(projection=projection(grid.bounds))
        _show(figure, axes, grid, layer, values)
        if layer.name not in ("exclusion", "suitability_class"):
            _hatch(axes, grid, excluded)
        surround(axes, grid.bounds, around)
        axes.set_title("\n".join(textwrap.wrap(_title(layer), 78)), fontsize=11, loc="left")
        with output_errors(path):
            figure.savefig(path, metadata={"Software": None})
    return MapPicture(layer.name, path, _title(layer), _caption(layer, values, excluded))


def _read(product: Path, name: str, grid: Grid) -> FloatArray | None:
    """A layer as it is drawn: no more cells than can be seen."""
    path = product / LAYER_FOLDER / f"{name}.tif"
    if not path.exists():
        return None
    step = max(1, -(-max(grid.shape) // PIXELS))
    shape = tuple(-(-size // step) for size in grid.shape)
    with gdal_environment(), rasterio.open(path) as file:
        values: FloatArray = file.read(1, out_shape=shape)
    return values


def _edges(grid: Grid, shape: tuple[int, ...]) -> tuple[FloatArray, FloatArray]:
    b = grid.bounds
    return np.linspace(b.west, b.east, shape[1] + 1), np.linspace(b.north, b.south, shape[0] + 1)


def _show(figure: Any, axes: Any, grid: Grid, layer: LayerVariable, values: FloatArray) -> None:
    axes.set_facecolor(_hex(MISSING))
    longitude, latitude = _edges(grid, values.shape)
    if layer.is_whole:
        shown, names, colours = _categories(layer, values)
        norm: Any = BoundaryNorm(np.arange(len(names) + 1) - 0.5, max(len(names), 1))
        axes.pcolormesh(
            longitude,
            latitude,
            shown,
            cmap=ListedColormap([_hex(c) for c in colours]),
            norm=norm,
            transform=DEGREES,
            rasterized=True,
        )
        patches = [
            Patch(facecolor=_hex(c), edgecolor=INK, linewidth=0.3, label=n)
            for n, c in zip(names, colours, strict=True)
        ]
        figure.legend(
            handles=patches, loc="outside lower center", ncols=min(3, len(names)), frameon=False
        )
        return
    low, high = _span(layer, values)
    picture = axes.pcolormesh(
        longitude,
        latitude,
        np.ma.masked_invalid(values),
        cmap=ListedColormap([_hex(c) for c in ramp(layer.ramp).colours(RAMP_STEPS)]),
        norm=Normalize(low, high),
        transform=DEGREES,
        rasterized=True,
    )
    bar = figure.colorbar(
        picture,
        ax=axes,
        orientation="horizontal",
        shrink=0.7,
        pad=0.03,
        aspect=35,
        extend="neither" if layer.ramp in SPANS else "both",
    )
    bar.set_label(_legend(layer))


def _categories(
    layer: LayerVariable, values: FloatArray
) -> tuple[FloatArray, list[str], list[tuple[int, int, int]]]:
    """Numbers from 0 for what the legend names, the names, and their colours."""
    if layer.classes:
        names = [_words(each.description) for each in layer.classes]
        colours = [MISSING, *class_colours(len(layer.classes) - 1)]
        return np.asarray(values, float), names, colours
    # Of several reasons, a cell shows the first of the settings file, and "unknown" only if alone.
    shown = np.zeros(values.shape)
    whole = values.astype(int)
    numbered = list(enumerate(layer.flags, start=1))
    for number, flag in (*numbered[:1], *reversed(numbered[1:])):
        shown[(whole & flag.value) > 0] = number
    names = ["eligible", *[_words(flag.description) for flag in layer.flags]]
    colours = [(250, 250, 245), (150, 150, 150), *_apart(len(layer.flags) - 1)]
    return shown, names, colours


def _apart(count: int) -> list[tuple[int, int, int]]:
    """Colours for things without an order: every other one of a long ramp, light and dark."""
    if count < 1:
        return []
    several = ramp("irradiance").colours(count + 2)[1:-1]
    return several[::2] + several[1::2]


def _span(layer: LayerVariable, values: FloatArray) -> tuple[float, float]:
    if layer.ramp in SPANS:
        return SPANS[layer.ramp]
    known = values[np.isfinite(values)]
    if known.size == 0:
        return 0.0, 1.0
    low, high = np.percentile(known, (1, 99))
    return (float(low), float(high)) if high > low else (float(low) - 0.5, float(low) + 0.5)


def _hatch(axes: Any, grid: Grid, excluded: FloatArray | None) -> None:
    """Hatch what a rule takes out, and say so."""
    if excluded is None or not (excluded.astype(int) > 1).any():
        return
    longitude, latitude = _edges(grid, excluded.shape)
    axes.contourf(
        (longitude[:-1] + longitude[1:]) / 2,
        (latitude[:-1] + latitude[1:]) / 2,
        (excluded.astype(int) > 1).astype(float),
        levels=[0.5, 1.5],
        colors="none",
        hatches=[HATCH],
        transform=DEGREES,
    )
    axes.legend(
        handles=[
            Patch(facecolor="none", edgecolor=INK, hatch="//////", label="left out by a rule")
        ],
        loc="lower left",
        fontsize=8,
        framealpha=0.85,
    )


def _title(layer: LayerVariable) -> str:
    return _words(layer.long_name.split(";")[0])


def _words(text: str) -> str:
    return text[:1].upper() + text[1:]


def _legend(layer: LayerVariable) -> str:
    """The layer's name and unit as people write it."""
    name, unit = layer.name.replace("_", " "), _unit(layer)
    return f"{name} ({unit})" if unit else name


def _unit(layer: LayerVariable) -> str:
    return "" if layer.units == "1" else layer.units.replace("-2", "⁻²").replace("-1", "⁻¹")


def _caption(layer: LayerVariable, values: FloatArray, excluded: FloatArray | None) -> str:
    """What the map shows, for those who cannot see it."""
    if layer.is_whole:
        return f"Map: {layer.long_name}."
    known = values[np.isfinite(values)]
    if known.size == 0:
        return f"Map of {layer.name.replace('_', ' ')}: nothing is known."
    low, middle, high = np.percentile(known, (5, 50, 95))
    hatched = excluded is not None and (excluded.astype(int) > 1).any()
    return (
        f"Map of {layer.name.replace('_', ' ')}: nine cells in ten lie between {low:.3g} and "
        f"{high:.3g}, half below {middle:.3g} {_unit(layer)}".rstrip()
        + (". Hatched: left out by a rule." if hatched else ".")
    )


def _hex(colour: tuple[int, int, int]) -> str:
    return "#{:02x}{:02x}{:02x}".format(*colour)
