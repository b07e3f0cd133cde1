"""One layer as a Cloud-Optimized GeoTIFF: a plain staged file first, the finished copy after.

A Cloud-Optimized GeoTIFF can only be written as a whole from a finished raster, and must not be
touched afterwards. A layer therefore streams into an uncompressed GeoTIFF whose blocks are whole
strips of rows (any order of arrival, no recompression, nothing but the block cache in memory);
all names, units and statistics are set there; the copy then tiles, compresses and adds overviews.
Staging is single-threaded on purpose: with compression threads GDAL reports no full disk.
"""

from __future__ import annotations

import math
import threading
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from typing import Any
from xml.etree import ElementTree as ET

import numpy as np
import rasterio
import rasterio.shutil
from numpy.typing import NDArray
from rasterio._err import CPLE_BaseError
from rasterio.enums import Resampling
from rasterio.errors import RasterioError
from rasterio.windows import Window

from gridcool.grid import Grid
from gridcool.products.failure import output_errors
from gridcool.products.ramps import MISSING, class_colours
from gridcool.products.statistics import BandStatistics, RowStatistics
from gridcool.variables import LayerVariable

CACHE_BYTES = 256 * 2**20  # GDAL's block cache; its own default is a share of the machine's memory
TILE = 512
EPSG = 4326
LAYER_FOLDER = "layers"

# Written out, because the calendar module's names change with the user's language.
MONTHS = (
    *("January", "February", "March", "April", "May", "June"),
    *("July", "August", "September", "October", "November", "December"),
)
SEASONS = ("season of low sun", "season of high sun")

# A copy lets GDAL's own errors through, which rasterio keeps in a private module.
GDAL_ERRORS = (OSError, RasterioError, CPLE_BaseError)


def gdal_environment() -> Any:
    """GDAL with a bounded block cache."""
    return rasterio.Env(GDAL_CACHEMAX=CACHE_BYTES)  # GDAL's variable counts megabytes, this bytes


def band_names(layer: LayerVariable) -> tuple[str, ...]:
    """What each band holds: the names of months or seasons, or the layer's own name."""
    return {"month": MONTHS, "season": SEASONS}.get(layer.bands, (layer.name,))


def layer_dtype(layer: LayerVariable) -> str:
    """Single precision for quantities, 16 bits for flags, 8 for classes."""
    if layer.classes:
        return "uint8"
    return "uint16" if layer.is_flags else "float32"


class StagedLayer:
    """A layer on its way to disk: takes strips of rows, keeps their statistics.

    Meant as a target of `dask.array.store`: ``staged[region] = block`` with the region's slices in
    the order (month,) latitude, longitude. Blocks span the whole width. Safe under threads.

    Parameters
    ----------
    folder : Path
        Where the staged file goes.
    layer : LayerVariable
    grid : Grid
    strip_rows : int
        Usual height of the strips that will arrive.
    on_rows : callable
        Called with the number of rows that came in.
    """

    def __init__(
        self,
        folder: Path,
        layer: LayerVariable,
        grid: Grid,
        strip_rows: int,
        on_rows: Callable[[int], None],
    ) -> None:
        self.layer = layer
        self.grid = grid
        self.path = folder / f"{layer.name}.tif"
        self.bands = len(band_names(layer))
        self._on_rows = on_rows
        self.statistics: tuple[BandStatistics, ...] = ()
        self._rows = RowStatistics(self.bands, *grid.shape)
        self._lock = threading.Lock()
        with output_errors(self.path, GDAL_ERRORS):
            self._file = self._create(min(strip_rows, grid.rows))

    def __dask_tokenize__(self) -> str:
        return f"staged-layer-{id(self)}"

    def _create(self, strip_rows: int) -> Any:
        return rasterio.open(
            self.path,
            "w",
            driver="GTiff",
            width=self.grid.columns,
            height=self.grid.rows,
            count=self.bands,
            dtype=layer_dtype(self.layer),
            crs=f"EPSG:{EPSG}",
            transform=rasterio.Affine(*self.grid.affine),
            # Flags need no nodata: 0 is "nothing to report", and bits say what is missing.
            nodata=None if self.layer.is_whole else np.nan,
            interleave="band",
            tiled=False,
            blockysize=strip_rows,
            bigtiff="IF_SAFER",
        )

    def __setitem__(self, region: tuple[slice, ...], block: NDArray[np.generic]) -> None:
        rows, columns = region[-2:]
        if columns.stop - columns.start != self.grid.columns:
            raise ValueError("strips must span the whole width of the grid")
        values = block.reshape(self.bands, -1, self.grid.columns)
        self._rows.add(rows.start, values)
        window = Window(0, rows.start, self.grid.columns, values.shape[1])
        with self._lock, output_errors(self.path, GDAL_ERRORS):
            self._file.write(values, window=window)
        self._on_rows(values.shape[1])

    def finish(self, attributes: Mapping[str, str]) -> None:
        """Set names, units, statistics and tags, and close the file.

        Raises
        ------
        ValueError
            If there is a class or flag that the layer's declaration does not have.
        """
        self.statistics = self._rows.bands()
        self._refuse_undeclared()
        with output_errors(self.path, GDAL_ERRORS):
            self._file.update_tags(**_dataset_tags(self.layer, attributes))
            for index, name in enumerate(band_names(self.layer), start=1):
                self._file.set_band_description(index, name)
                if self.layer.units:
                    self._file.set_band_unit(index, self.layer.units)
                self._file.update_tags(index, **_statistics_tags(self.statistics[index - 1]))
            if self.layer.classes:
                self._file.write_colormap(1, colour_table(self.layer))
            self.close()
            expected = self.bands * self.grid.rows * self.grid.columns
            expected *= np.dtype(layer_dtype(self.layer)).itemsize
            if self.path.stat().st_size < expected:
                raise OSError("the file is shorter than what was written to it")

    def _refuse_undeclared(self) -> None:
        """A value without a meaning would look like a result."""
        named = [each.value for each in self.layer.classes] or [f.value for f in self.layer.flags]
        most = max(named) if self.layer.classes else sum(named)
        if self.layer.is_whole and any(band.maximum > most for band in self.statistics):
            raise ValueError(f"{self.layer.name} holds values beyond {most}, the last declared")

    def close(self) -> None:
        """Close the file, finished or not; strips that still arrive are refused."""
        with self._lock, output_errors(self.path, GDAL_ERRORS):
            self._file.close()

    def blocks(self, height: int) -> Iterator[tuple[int, slice, NDArray[np.generic]]]:
        """Read back the finished file: (band, rows, values) in strips of ``height`` rows."""
        with (
            output_errors(self.path, GDAL_ERRORS),
            gdal_environment(),
            rasterio.open(self.path) as file,
        ):
            for band in range(self.bands):
                for start in range(0, self.grid.rows, height):
                    stop = min(start + height, self.grid.rows)
                    window = Window(0, start, self.grid.columns, stop - start)
                    yield band, slice(start, stop), file.read(band + 1, window=window)


def convert(staged: StagedLayer, target: Path, threads: int = 1) -> None:
    """Copy a finished staged layer into a Cloud-Optimized GeoTIFF.

    The names of classes go into a small file beside it, since GDAL 3.10 knows no place for them
    inside a GeoTIFF; a GIS takes its legend from there.

    Raises
    ------
    OutputError
        If the disk is full or refuses; nothing is left at ``target`` then.
    """
    with output_errors(target, GDAL_ERRORS), gdal_environment():
        try:
            _add_overviews(staged)
            rasterio.shutil.copy(
                staged.path,
                target,
                driver="COG",
                blocksize=TILE,
                compress="deflate",
                level=1,
                predictor="yes",
                bigtiff="IF_SAFER",
                num_threads=threads,
            )
            if staged.layer.classes:
                _write_class_names(staged.layer, _beside(target))
        except BaseException:
            target.unlink(missing_ok=True)
            _beside(target).unlink(missing_ok=True)
            raise


def _beside(target: Path) -> Path:
    """Where GDAL looks for what a raster's own format cannot hold."""
    return target.with_name(f"{target.name}.aux.xml")


def _write_class_names(layer: LayerVariable, path: Path) -> None:
    """Names of the classes, one for each value from 0 up."""
    root = ET.Element("PAMDataset")
    band = ET.SubElement(root, "PAMRasterBand", {"band": "1"})
    names = ET.SubElement(band, "CategoryNames")
    known = {each.value: each.description for each in layer.classes}
    for value in range(max(known) + 1):
        ET.SubElement(names, "Category").text = known.get(value, "")
    ET.indent(root)
    path.write_bytes(ET.tostring(root, encoding="utf-8") + b"\n")


def _add_overviews(staged: StagedLayer) -> None:
    """Smaller pictures, each half the one before, down to a single tile.

    The copy takes them over. Left to make them itself, it spends several times as long on a layer
    of twelve bands (6 s against 1 s of processor time for 720 x 1440 cells, GDAL 3.10).
    """
    longest = max(staged.grid.shape)
    levels = math.ceil(math.log2(longest / TILE)) if longest > TILE else 0
    if levels:
        with rasterio.open(staged.path, "r+") as file:
            factors = [2**level for level in range(1, levels + 1)]
            file.build_overviews(factors, overview_resampling(staged.layer))


def colour_table(layer: LayerVariable) -> dict[int, tuple[int, int, int, int]]:
    """Red, green, blue and opacity of each class; what has none is light grey."""
    colours = class_colours(len(layer.classes) - 1)
    table = {0: (*MISSING, 255)}  # TIFF's colour tables know no opacity
    for each, colour in zip(layer.classes[1:], colours, strict=True):
        table[each.value] = (*colour, 255)
    return table


def overview_resampling(layer: LayerVariable) -> Resampling:
    """How a coarser copy is made: means for quantities, one of the values where means mislead.

    Between 359° and 1° lies north and not south, and between March and September no month.
    """
    if layer.is_whole:
        return Resampling.mode
    return Resampling.nearest if layer.ramp in ("compass", "month") else Resampling.average


def _statistics_tags(band: BandStatistics) -> dict[str, str]:
    tags = {"VALID_PERCENT": 100.0 * band.count / band.cells}
    if band.count:
        tags |= {
            "MINIMUM": band.minimum,
            "MAXIMUM": band.maximum,
            "MEAN": band.mean,
            "STDDEV": band.deviation,
        }
    return {f"STATISTICS_{name}": repr(float(value)) for name, value in tags.items()}


def _dataset_tags(layer: LayerVariable, attributes: Mapping[str, str]) -> dict[str, str]:
    own = {
        "name": layer.name,
        "standard_name": layer.standard_name,
        "long_name": layer.long_name,
        "units": layer.units,
        "cell_methods": layer.cell_methods,
        "caution": layer.caution,
    }
    bits = {f"flag_{flag.value}": f"{flag.meaning}: {flag.description}" for flag in layer.flags}
    classes = {
        f"class_{each.value}": f"{each.meaning}: {each.description}" for each in layer.classes
    }
    tags = {**attributes, **own, **bits, **classes}
    return {key: value for key, value in tags.items() if value}
