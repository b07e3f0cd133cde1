"""All layers in one CF-1.11 NetCDF file, copied strip by strip from the staged layers.

Choices:

- Months are a plain ordinal coordinate ``month`` = 1 … 12, not a ``time`` axis with climatological
  bounds: those need the first and last year of the averages, which differ between the inputs and
  are often not stated at all. An ordinal also reads as "month=7" in a GIS.
- A layer averaged over the year points to the label ``year`` as its coordinate: cell methods may
  only name what the file holds, and there is no month axis left in such a layer.
- ``GeoTransform`` and ``spatial_ref`` beside CF's own grid-mapping attributes let GDAL-based tools
  place a grid of a single row or column, whose cell size no coordinate tells.
- ``actual_range`` tells the span of the values. There is no ``valid_range``: readers silently blank
  whatever a rounding error puts outside one.
- Chunks do not depend on how the layers were computed; neither do the file's bytes.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Literal

import netCDF4
import numpy as np
from numpy.typing import NDArray
from pyproj import CRS
from xarray.backends.locks import HDF5_LOCK, NETCDFC_LOCK, combine_locks

from gridcool.grid import Grid
from gridcool.products.failure import output_errors
from gridcool.products.geotiff import EPSG, StagedLayer, layer_dtype
from gridcool.variables import BANDS, LayerVariable

FloatArray = NDArray[np.float64]

CHUNK = 512  # cells, at most, along a side of a chunk
CHUNK_CACHE = 2**21  # bytes for each variable: whole chunks pass through once, none comes back
CONVENTIONS = "CF-1.11"
NETCDF_NAME = "layers.nc"

# The NetCDF and HDF5 libraries are not thread-safe; xarray's readers take these same locks, also
# when the garbage collector closes a forgotten input in the middle of our writing.
LIBRARY_LOCK = combine_locks([NETCDFC_LOCK, HDF5_LOCK])


def write_netcdf(
    path: Path,
    grid: Grid,
    layers: Sequence[StagedLayer],
    attributes: Mapping[str, str],
    on_band: Callable[[], None],
) -> None:
    """Write finished staged layers into one file.

    Parameters
    ----------
    path : Path
    grid : Grid
    layers : sequence of StagedLayer
    attributes : mapping of str
        Global attributes: title, history, source, references, comment …
    on_band : callable
        Called after every band.

    Raises
    ------
    OutputError
        If the disk is full or refuses; nothing is left at ``path`` then.
    """
    chunk = _chunk_shape(grid)
    try:
        with output_errors(path, (OSError, RuntimeError)), open_netcdf(path, "w") as file:
            with LIBRARY_LOCK:
                _describe_file(file, grid, attributes)
                variables = [_declare(file, staged, chunk) for staged in layers]
            for staged, variable in zip(layers, variables, strict=True):
                for band, rows, values in staged.blocks(chunk[0]):
                    where = (band, rows) if staged.layer.count > 1 else (rows,)
                    with LIBRARY_LOCK:
                        variable[where] = values
                    if rows.stop == grid.rows:
                        on_band()
    except BaseException:
        path.unlink(missing_ok=True)
        raise


def _chunk_shape(grid: Grid) -> tuple[int, int]:
    return min(CHUNK, grid.rows), min(CHUNK, grid.columns)


def _describe_file(file: Any, grid: Grid, attributes: Mapping[str, str]) -> None:
    file.setncatts({"Conventions": CONVENTIONS, **attributes})
    file.createDimension("month", BANDS["month"])
    file.createDimension("season", BANDS["season"])
    file.createDimension("latitude", grid.rows)
    file.createDimension("longitude", grid.columns)
    file.createDimension("bounds", 2)
    month = file.createVariable("month", "i4", ("month",))
    month.setncatts({"long_name": "month of the year", "units": "1"})
    month[:] = np.arange(1, 13)
    season = file.createVariable("season", "i4", ("season",))
    season.setncatts({"long_name": "1: season of low sun, 2: season of high sun", "units": "1"})
    season[:] = (1, 2)
    year = file.createVariable("year", str, ())
    year.long_name = "part of the year that is averaged over"
    year[...] = np.array("January to December", object)
    _coordinate(file, "latitude", "degrees_north", "Y", grid.latitudes, grid.latitude_edges)
    _coordinate(file, "longitude", "degrees_east", "X", grid.longitudes, grid.longitude_edges)
    crs = file.createVariable("crs", "i4", ())
    crs.setncatts(_grid_mapping(grid))
    crs[...] = 0


def _coordinate(
    file: Any, name: str, units: str, axis: str, centres: FloatArray, edges: FloatArray
) -> None:
    variable = file.createVariable(name, "f8", (name,))
    variable.setncatts(
        {
            "standard_name": name,
            "long_name": f"{name} of the cell's centre",
            "units": units,
            "axis": axis,
            "bounds": f"{name}_bounds",
        }
    )
    variable[:] = centres
    bounds = file.createVariable(f"{name}_bounds", "f8", (name, "bounds"))
    bounds[:] = np.stack([edges[:-1], edges[1:]], axis=1)


def _grid_mapping(grid: Grid) -> dict[str, Any]:
    crs = CRS.from_epsg(EPSG)
    a, b, c, d, e, f = grid.affine
    mapping: dict[str, Any] = crs.to_cf()
    mapping["spatial_ref"] = crs.to_wkt("WKT1_GDAL")
    mapping["GeoTransform"] = " ".join(repr(float(number)) for number in (c, a, b, f, d, e))
    return mapping


def _declare(file: Any, staged: StagedLayer, chunk: tuple[int, int]) -> Any:
    layer, banded = staged.layer, staged.layer.count > 1
    variable = file.createVariable(
        layer.name,
        layer_dtype(layer),
        layer.dimensions,
        zlib=True,
        complevel=1,
        shuffle=True,
        chunksizes=(1, *chunk) if banded else chunk,
        chunk_cache=CHUNK_CACHE,
        fill_value=False if layer.is_whole else np.float32(np.nan),
    )
    variable.set_auto_maskandscale(False)
    variable.setncatts(_attributes(layer, staged))
    return variable


def _attributes(layer: LayerVariable, staged: StagedLayer) -> dict[str, Any]:
    attributes: dict[str, Any] = {
        "standard_name": layer.standard_name,
        "long_name": layer.long_name,
        "units": layer.units,
        "cell_methods": layer.cell_methods,
        "grid_mapping": "crs",
        "comment": layer.caution,
    }
    if layer.bands == "year" and layer.cell_methods.startswith("month:"):
        attributes["coordinates"] = "year"
        attributes["cell_methods"] = layer.cell_methods.replace("month:", "year:", 1)
    attributes = {name: value for name, value in attributes.items() if value}
    if layer.is_flags:
        attributes["flag_masks"] = np.array([flag.value for flag in layer.flags], np.uint16)
        attributes["flag_meanings"] = " ".join(flag.meaning for flag in layer.flags)
        attributes["comment"] = "; ".join(f"{f.meaning}: {f.description}" for f in layer.flags)
    if layer.classes:
        attributes["flag_values"] = np.array([each.value for each in layer.classes], np.uint8)
        attributes["flag_meanings"] = " ".join(each.meaning for each in layer.classes)
        attributes["comment"] = "; ".join(f"{c.meaning}: {c.description}" for c in layer.classes)
    known = [band for band in staged.statistics if band.count]
    if known:
        span = min(band.minimum for band in known), max(band.maximum for band in known)
        attributes["actual_range"] = np.array(span, layer_dtype(layer))
    return attributes


def layer_names(file: Any) -> list[str]:
    """Names of the layers in an open file."""
    return [name for name, v in file.variables.items() if "grid_mapping" in v.ncattrs()]


@contextmanager
def open_netcdf(path: Path, mode: Literal["r", "w"]) -> Iterator[Any]:
    """Open and close a file under the library lock, leaving the lock free in between."""
    with LIBRARY_LOCK:
        file = netCDF4.Dataset(path, mode)
    try:
        yield file
    finally:
        with LIBRARY_LOCK:
            file.close()
