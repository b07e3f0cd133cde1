"""All layers as files: one pass of dask fills the staged layers, then each becomes its product."""

from __future__ import annotations

import shutil
import tempfile
from collections.abc import Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import ExitStack
from pathlib import Path
from typing import Any

import dask
import dask.array as da
import numpy as np
import xarray as xr
from dask.system import CPU_COUNT

from gridcool.grid import Grid
from gridcool.products.failure import output_errors
from gridcool.products.geotiff import (
    LAYER_FOLDER,
    StagedLayer,
    convert,
    gdal_environment,
    layer_dtype,
)
from gridcool.products.netcdf import NETCDF_NAME, write_netcdf
from gridcool.products.progress import Progress, Report
from gridcool.products.verify import verify_layers
from gridcool.variables import LayerVariable, layer_variables

STRIP_ROWS = 256  # for layers that are already in memory


def write_layers(
    dataset: xr.Dataset,
    grid: Grid,
    folder: Path,
    *,
    attributes: Mapping[str, str],
    declared: Mapping[str, LayerVariable] | None = None,
    on_progress: Progress | None = None,
) -> list[Path]:
    """Compute all layers in one pass, write their files, reopen and compare them.

    The layers stream strip by strip into uncompressed staged files, which stay in ``folder`` until
    the end; memory holds a few strips and the block cache. The files' bytes depend on the values
    and ``attributes`` alone, not on the strips nor on the number of threads.

    Parameters
    ----------
    dataset : xarray.Dataset
        Layers declared in ``variables.toml``, lazy or not, with dimensions (month,) latitude,
        longitude; north up, on ``grid``.
    grid : Grid
    folder : Path
        An existing folder, to be filled with ``layers/<name>.tif`` and ``layers.nc``.
    attributes : mapping of str
        For every file: title, history, source, references, comment …
    declared : mapping of LayerVariable, optional
        Declarations that stand for those of ``variables.toml``, such as flags that the settings
        name.
    on_progress : callable, optional
        Called with what is being done ("computing", "writing", then "verifying"), how many steps
        are done, and how many there are. Other threads may call it, never two at once.

    Returns
    -------
    list of Path
        The GeoTIFFs in the order of the dataset, then the NetCDF.

    Raises
    ------
    OutputError
        If a file cannot be written, or does not hold what was written to it.
    ValueError
        If the dataset is not on ``grid`` or has a layer that is not declared.

    Notes
    -----
    Whatever the failure, nothing of what was begun is left in ``folder``.
    """
    known = {**layer_variables(), **(declared or {})}
    arrays = _arrays(dataset, grid, known)
    products, netcdf = folder / LAYER_FOLDER, folder / NETCDF_NAME
    with ExitStack() as undo:
        with output_errors(products):
            products.mkdir()
            undo.callback(shutil.rmtree, products, ignore_errors=True)
            stage = Path(tempfile.mkdtemp(prefix=".stage-", dir=folder))
        undo.callback(netcdf.unlink, missing_ok=True)
        try:
            staged = _compute(arrays, grid, known, stage, attributes, on_progress)
            written = _write(staged, grid, folder, attributes, on_progress)
        finally:
            shutil.rmtree(stage, ignore_errors=True)
        verify_layers(folder, on_progress=on_progress)
        undo.pop_all()
    return [*written, netcdf]


def _arrays(
    dataset: xr.Dataset, grid: Grid, known: Mapping[str, LayerVariable]
) -> dict[str, da.Array]:
    """The layers as dask arrays in strips that span the whole width, checked against the grid."""
    for axis, centres in (("latitude", grid.latitudes), ("longitude", grid.longitudes)):
        step = grid.latitude_step if axis == "latitude" else grid.longitude_step
        found = dataset[axis].values
        if found.shape != centres.shape or np.abs(found - centres).max() > 1e-3 * step:
            raise ValueError(f"the dataset's {axis}s are not those of the grid")
    arrays = {}
    for name, array in dataset.data_vars.items():
        layer = known.get(str(name))
        if layer is None:
            raise ValueError(f"{name} is not a declared layer")
        dims = layer.dimensions
        if set(array.dims) != set(dims):
            raise ValueError(f"{name} has dimensions {array.dims}, not {dims}")
        rows = array.chunksizes.get("latitude", STRIP_ROWS)
        chunks = {dim: rows if dim == "latitude" else -1 for dim in dims}
        arrays[layer.name] = array.transpose(*dims).chunk(chunks).data.astype(layer_dtype(layer))
    return arrays


def _compute(
    arrays: Mapping[str, da.Array],
    grid: Grid,
    known: Mapping[str, LayerVariable],
    stage: Path,
    attributes: Mapping[str, str],
    on_progress: Progress | None,
) -> list[StagedLayer]:
    """Run the one pass that fills every layer's staged file."""
    report = Report(on_progress, "computing", len(arrays) * grid.rows)
    with ExitStack() as files, gdal_environment():
        staged = []
        for name, array in arrays.items():
            target = StagedLayer(stage, known[name], grid, array.chunks[-2][0], report.advance)
            files.callback(target.close)
            staged.append(target)
        targets: list[Any] = list(staged)
        da.store(list(arrays.values()), targets, lock=False)
        for target in staged:
            target.finish(attributes)
    return staged


def _write(
    staged: Sequence[StagedLayer],
    grid: Grid,
    folder: Path,
    attributes: Mapping[str, str],
    on_progress: Progress | None,
) -> list[Path]:
    """Turn staged layers into GeoTIFFs, and side by side into the NetCDF."""
    report = Report(on_progress, "writing", 2 * sum(layer.bands for layer in staged))
    targets = [folder / LAYER_FOLDER / layer.path.name for layer in staged]

    threads = max(1, (dask.config.get("num_workers", None) or CPU_COUNT) - 1)

    def convert_all() -> None:
        for layer, target in zip(staged, targets, strict=True):
            convert(layer, target, threads)
            report.advance(layer.bands)

    with ThreadPoolExecutor(max_workers=1) as beside:
        conversion = beside.submit(convert_all)
        write_netcdf(folder / NETCDF_NAME, grid, staged, attributes, report.advance)
        conversion.result()
    return targets
