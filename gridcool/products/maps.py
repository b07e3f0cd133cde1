"""Maps for people: a layer on a projection that suits the place, with units, coast and outlines.

Everything is drawn offline from the finished layers; large grids from their overviews, so that a
map takes seconds whatever the resolution. A layer of several bands gets a panel for each.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import rasterio
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import BoundaryNorm, ListedColormap, Normalize
from matplotlib.figure import Figure
from numpy.typing import NDArray

from gridcool.grid import Grid
from gridcool.products.cartography import (
    DEGREES,
    Surroundings,
    panel_size,
    projection,
    size,
    surround,
    surround_panel,
)
from gridcool.products.failure import output_errors
from gridcool.products.geotiff import LAYER_FOLDER, band_names, gdal_environment
from gridcool.products.legends import (
    Category,
    combinations,
    explain_hatching,
    hexadecimal,
    legend_columns,
    name_colours,
    name_ramp,
    reasons,
    span,
    ticks,
    title,
    unit,
    words,
    write_heading,
)
from gridcool.products.ramps import MISSING, Colour, paler, ramp
from gridcool.variables import LayerVariable

FloatArray = NDArray[np.floating]

MAP_FOLDER = "maps"
PIXELS = 1100  # most cells along a side that are drawn
PANEL_PIXELS = 400
PANEL_COLUMNS = {12: 4, 2: 2}
DOTS_PER_INCH = 110
RAMP_STEPS = 256
HATCH = "////"
PALE = 0.6  # share of white in the colours of what a rule leaves out


@dataclass(frozen=True)
class MapPicture:
    """A finished map: its layer's name, its file, a title, and a sentence that describes it."""

    name: str
    path: Path
    title: str
    caption: str


@dataclass(frozen=True, eq=False)
class _Sheet:
    """What is drawn of a layer: bands × rows × columns, and which cells a rule leaves out."""

    layer: LayerVariable
    grid: Grid
    values: FloatArray
    left_out: NDArray[np.bool_]

    @property
    def edges(self) -> tuple[FloatArray, FloatArray]:
        b, (_, rows, columns) = self.grid.bounds, self.values.shape
        return np.linspace(b.west, b.east, columns + 1), np.linspace(b.north, b.south, rows + 1)

    @property
    def judged(self) -> FloatArray:
        """Known values of the cells that count: of those that no rule leaves out, if any."""
        known = np.isfinite(self.values)
        counting = known & ~self.left_out
        return self.values[counting] if counting.any() else self.values[known]

    @property
    def hatched(self) -> bool:
        return bool(self.left_out.any()) and not self.layer.is_whole


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
    return [_draw(product, folder, grid, layer, around) for layer in layers.values()]


def _draw(
    product: Path, folder: Path, grid: Grid, layer: LayerVariable, around: Surroundings
) -> MapPicture:
    sheet = _sheet(product, grid, layer)
    path = folder / f"{layer.name}.png"
    with mpl.rc_context({"font.size": 9, "axes.linewidth": 0.6, "hatch.linewidth": 0.3}):
        figure = _figure(sheet, around)
        with output_errors(path):
            figure.savefig(path, metadata={"Software": None})
    return MapPicture(layer.name, path, title(layer), _caption(sheet))


def _sheet(product: Path, grid: Grid, layer: LayerVariable) -> _Sheet:
    values = _read(product, layer.name, grid, PIXELS if layer.count == 1 else PANEL_PIXELS)
    if values is None:
        raise ValueError(f"{layer.name} is not among the product's layers")
    excluded = _read(product, "exclusion", grid, PIXELS if layer.count == 1 else PANEL_PIXELS)
    if excluded is None:
        return _Sheet(layer, grid, values, np.zeros(values.shape[1:], bool))
    return _Sheet(layer, grid, values, excluded[0].astype(np.int64) > 1)


def _read(product: Path, name: str, grid: Grid, pixels: int) -> FloatArray | None:
    """A layer as it is drawn, bands × rows × columns: no more cells than can be seen."""
    path = product / LAYER_FOLDER / f"{name}.tif"
    if not path.exists():
        return None
    step = max(1, -(-max(grid.shape) // pixels))
    shape = tuple(-(-size // step) for size in grid.shape)
    with gdal_environment(), rasterio.open(path) as file:
        values: FloatArray = file.read(out_shape=(file.count, *shape))
    return values


def _figure(sheet: _Sheet, around: Surroundings) -> Figure:
    layer, bounds = sheet.layer, sheet.grid.bounds
    columns = PANEL_COLUMNS.get(layer.count, 1)
    rows = -(-layer.count // columns)
    inches = size(bounds) if layer.count == 1 else panel_size(bounds, rows, columns)
    shown, named = _categories(sheet)
    across = legend_columns(named)
    if named:  # room for a long legend
        inches = (inches[0], inches[1] + 0.2 * max(0, -(-len(named) // across) - 2))
    figure = Figure(figsize=inches, dpi=DOTS_PER_INCH, layout="constrained")
    FigureCanvasAgg(figure)
    where = projection(bounds)
    panels = [
        figure.add_subplot(rows, columns, number + 1, projection=where)
        for number in range(layer.count)
    ]
    for axes, name, values in zip(panels, band_names(layer), shown, strict=True):
        axes.set_facecolor(hexadecimal(MISSING))
        picture = _paint(axes, sheet, values, named)
        if layer.count == 1:
            surround(axes, bounds, around)
        else:
            surround_panel(axes, bounds, around)
            axes.set_title(words(name), fontsize=9)
    write_heading(figure, panels, layer)
    if named:
        name_colours(figure, named, across)
    else:
        name_ramp(figure, panels, picture, layer)
    if sheet.hatched:
        explain_hatching(figure, panels)
    return figure


def _categories(sheet: _Sheet) -> tuple[FloatArray, list[Category]]:
    """What is painted: quantities as they are, whole numbers as numbers of the legend."""
    layer = sheet.layer
    if not layer.is_whole:
        return sheet.values, []
    if layer.flags and layer.made_by == "planning":
        first, named = reasons(layer, sheet.values)
        return first, named
    found, counts = np.unique(sheet.values.astype(np.int64), return_counts=True)
    named = combinations(layer, dict(zip(found.tolist(), counts.tolist(), strict=True)))
    place = np.searchsorted([each.value for each in named], sheet.values)
    return place.astype(float), named


def _paint(axes: Any, sheet: _Sheet, values: FloatArray, named: Sequence[Category]) -> Any:
    if named:
        norm: Any = BoundaryNorm(np.arange(len(named) + 1) - 0.5, len(named))
        return _mesh(axes, sheet, values, [each.colour for each in named], norm)
    colours = ramp(sheet.layer.ramp).colours(RAMP_STEPS)
    norm = Normalize(*span(sheet.layer, sheet.judged))
    picture = _mesh(axes, sheet, values, colours, norm)
    if sheet.hatched:
        # Pale colours instead of a veil: where veiled cells meet, their edges would show.
        _mesh(axes, sheet, np.where(sheet.left_out, values, np.nan), paler(colours, PALE), norm)
        _hatch(axes, sheet)
    return picture


def _mesh(
    axes: Any, sheet: _Sheet, values: FloatArray, colours: Sequence[Colour], norm: Any
) -> Any:
    return axes.pcolormesh(
        *sheet.edges,
        np.ma.masked_invalid(values),
        cmap=ListedColormap([hexadecimal(each) for each in colours]),
        norm=norm,
        transform=DEGREES,
        rasterized=True,
    )


def _hatch(axes: Any, sheet: _Sheet) -> None:
    longitude, latitude = sheet.edges
    if min(sheet.left_out.shape) < 2:
        return  # contours need two rows and columns; there the pale colours alone must do
    axes.contourf(
        (longitude[:-1] + longitude[1:]) / 2,
        (latitude[:-1] + latitude[1:]) / 2,
        sheet.left_out.astype(float),
        levels=[0.5, 1.5],
        colors="none",
        hatches=[HATCH],
        transform=DEGREES,
    )


def _caption(sheet: _Sheet) -> str:
    """What the map shows, for those who cannot see it."""
    layer, known = sheet.layer, sheet.judged
    name = layer.name.replace("_", " ")
    hatched = " Pale and hatched: left out by a rule." if sheet.hatched else ""
    if layer.is_whole or ticks(layer) is not None:
        return f"Map: {layer.long_name}.{hatched}"
    if known.size == 0:
        return f"Map of {name}: nothing is known."
    low, middle, high = np.percentile(known, (5, 50, 95))
    which = "of the cells that no rule leaves out, nine" if sheet.hatched else "nine cells"
    numbers = f"between {low:.3g} and {high:.3g}, half below {middle:.3g} {unit(layer)}".rstrip()
    return f"Map of {name}: {which} in ten lie {numbers}.{hatched}"
