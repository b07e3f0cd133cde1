"""Reads finished layers back, every block of them, and holds the files against each other."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
import rasterio
from numpy.typing import NDArray
from rasterio.windows import Window

from gridcool.errors import OutputError
from gridcool.products.failure import output_errors
from gridcool.products.geotiff import GDAL_ERRORS, LAYER_FOLDER, TILE, gdal_environment
from gridcool.products.netcdf import (
    CHUNK_CACHE,
    LIBRARY_LOCK,
    NETCDF_NAME,
    layer_names,
    open_netcdf,
)
from gridcool.products.progress import Progress, Report

WINDOW_COLUMNS = 2 * TILE  # bounds the memory on very wide grids
ROUNDING = 1e-6  # relative; what averaging in single precision may add to equal cells
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

        def verify(name: str) -> None:
            with output_errors(paths[name], GDAL_ERRORS), gdal_environment():
                _verify_layer(paths[name], file[name])
            report.advance()

        with ThreadPoolExecutor(max_workers=2) as readers:
            for _ in readers.map(verify, names):
                pass


def _verify_layer(path: Path, variable: Any) -> None:
    with LIBRARY_LOCK:
        variable.set_auto_maskandscale(False)
        variable.set_var_chunk_cache(size=CHUNK_CACHE)
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
                raise _damaged(path, f"its cells are not those in {NETCDF_NAME}")
            tally.add(cells)
        for band in range(file.count):
            if not tally.agrees(band, file.tags(band + 1)):
                raise _damaged(path, f"band {band + 1} is not what its statistics tell of")
        overviews = len(file.overviews(1))
    for level in range(overviews):
        with rasterio.open(path, overview_level=level) as file:
            for window in _windows(file.height, file.width):
                if not tally.spans(file.read(window=window)):
                    raise _damaged(path, "an overview goes beyond the layer's values")


def _damaged(path: Path, how: str) -> OutputError:
    return OutputError(f"{path} is damaged: {how}; run again to renew it.")


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

    def spans(self, cells: NDArray[Any]) -> bool:
        """Whether every valid cell lies between the extremes of its band, but for rounding."""
        flat = cells.reshape(len(cells), -1)
        largest = np.maximum(np.abs(self._minimum), np.abs(self._maximum))
        slack = np.where(self._count > 0, ROUNDING * largest, 0.0)
        below = np.fmin.reduce(flat, axis=1) < self._minimum - slack
        above = np.fmax.reduce(flat, axis=1) > self._maximum + slack
        return not (below | above).any()

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
