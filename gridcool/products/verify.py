"""Reads finished layers back, every block of them, and holds the files against each other."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from numpy.typing import NDArray
from rasterio.errors import RasterioError
from rasterio.windows import Window

from gridcool.errors import OutputError
from gridcool.products.failure import output_errors
from gridcool.products.geotiff import LAYER_FOLDER, TILE, gdal_environment
from gridcool.products.netcdf import LIBRARY_LOCK, NETCDF_NAME, layer_names, open_netcdf
from gridcool.products.progress import Progress, Report

WINDOW_COLUMNS = 8 * TILE  # bounds the memory on very wide grids
MEAN_TOLERANCE = 1e-9  # relative; cells are summed in another order here than while writing


def verify_layers(folder: Path, *, on_progress: Progress | None = None) -> None:
    """Reopen every layer in ``folder`` and read every block of it.

    Each GeoTIFF must hold the cells that its statistics tell of, and the NetCDF the same cells.

    Parameters
    ----------
    folder : Path
        Holds ``layers/<name>.tif`` and ``layers.nc``.
    on_progress : callable, optional
        Called with "verifying", the number of layers done and their total.

    Raises
    ------
    OutputError
        If a file is missing, cannot be read, or does not hold what it should.
    """
    paths = {path.stem: path for path in sorted((folder / LAYER_FOLDER).glob("*.tif"))}
    report = Report(on_progress, "verifying", len(paths))
    netcdf = folder / NETCDF_NAME
    with output_errors(netcdf, (OSError, RuntimeError)), open_netcdf(netcdf, "r") as file:
        names = layer_names(file)
        if set(names) != set(paths) or not paths:
            raise OutputError(
                f"{folder} is incomplete: {NETCDF_NAME} has {len(names)} layers and the folder "
                f"{LAYER_FOLDER} has {len(paths)}; run again to renew them."
            )
        for name, path in paths.items():
            with output_errors(path, (OSError, RasterioError)), gdal_environment():
                _verify_layer(path, file[name])
            report.advance()


def _verify_layer(path: Path, variable: Any) -> None:
    variable.set_auto_maskandscale(False)
    with rasterio.open(path) as file:
        tally = _Tally(file.count)
        for window in _windows(file.height, file.width):
            cells = file.read(window=window)
            rows, columns = window.toslices()
            with LIBRARY_LOCK:
                twin = variable[..., rows, columns]
            if not np.array_equal(
                cells, twin.reshape(cells.shape), equal_nan=cells.dtype.kind == "f"
            ):
                raise OSError("its cells are not those of the NetCDF file")
            tally.add(cells)
        for band in range(file.count):
            if not tally.agrees(band, file.tags(band + 1)):
                raise OSError(f"band {band + 1} does not hold what was written to it")


def _windows(height: int, width: int) -> Iterator[Window]:
    for row in range(0, height, TILE):
        for column in range(0, width, WINDOW_COLUMNS):
            yield Window(column, row, min(WINDOW_COLUMNS, width - column), min(TILE, height - row))


class _Tally:
    """Count, extremes and mean of the cells of each band."""

    def __init__(self, bands: int) -> None:
        self._cells = 0
        self._count = np.zeros(bands, np.int64)
        self._sum = np.zeros(bands)
        self._size = np.zeros(bands)
        self._minimum = np.full(bands, np.inf)
        self._maximum = np.full(bands, -np.inf)

    def add(self, cells: NDArray[Any]) -> None:
        self._cells += cells[0].size
        for band, values in enumerate(cells):
            known = values[~np.isnan(values)].astype(np.float64)
            self._count[band] += known.size
            self._sum[band] += known.sum()
            self._size[band] += np.abs(known).sum()
            self._minimum[band] = known.min(initial=self._minimum[band])
            self._maximum[band] = known.max(initial=self._maximum[band])

    def agrees(self, band: int, tags: Mapping[str, str]) -> bool:
        """Whether the band's statistics tags tell of these cells."""
        count = int(self._count[band])
        told = {
            name: float(tags.get(f"STATISTICS_{name}", "nan"))
            for name in ("VALID_PERCENT", "MINIMUM", "MAXIMUM", "MEAN")
        }
        if round(told["VALID_PERCENT"] / 100 * self._cells) != count:
            return False
        if count == 0:
            return True
        spread = MEAN_TOLERANCE * self._size[band] / count
        return bool(
            told["MINIMUM"] == self._minimum[band]
            and told["MAXIMUM"] == self._maximum[band]
            and abs(told["MEAN"] - self._sum[band] / count) <= spread
        )
