"""A GeoTIFF as a lazy dataset: one variable, a band dimension if there are several bands."""

from __future__ import annotations

import warnings
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from xarray.backends import BackendArray
from xarray.core import indexing

from gridcool.errors import InputDataError

DEFAULT_NAME = "band_data"


class BandArray(BackendArray):  # type: ignore[misc, unused-ignore]
    """Bands of a file, read in windows; the file is opened for each reading, so threads may."""

    def __init__(
        self, path: Path, bands: tuple[int, ...], shape: tuple[int, int], dtype: str
    ) -> None:
        self.path = path
        self.bands = bands
        self.shape = (len(bands), *shape)
        self.dtype = np.dtype(dtype)

    def __getitem__(self, key: indexing.ExplicitIndexer) -> Any:
        return indexing.explicit_indexing_adapter(
            key, self.shape, indexing.IndexingSupport.BASIC, self._read
        )

    def _read(self, key: tuple[Any, ...]) -> NDArray[Any]:
        import rasterio
        from rasterio.windows import Window

        band, row, column = key
        rows, columns = _positive(row, self.shape[1]), _positive(column, self.shape[2])
        wanted = self.bands[band]
        with rasterio.open(self.path) as file:
            values: NDArray[Any] = file.read(
                list(wanted) if isinstance(wanted, tuple) else wanted,
                window=Window.from_slices(rows, columns),
            )
        return values[
            ...,
            0 if isinstance(row, int | np.integer) else slice(None, None, row.step),
            0 if isinstance(column, int | np.integer) else slice(None, None, column.step),
        ]


def _positive(key: Any, size: int) -> tuple[int, int]:
    if isinstance(key, int | np.integer):
        return int(key), int(key) + 1
    start, stop, _ = key.indices(size)
    return start, max(stop, start + 1)


def open_geotiff(path: Path, variable: str | None) -> tuple[xr.Dataset, tuple[str, ...]]:
    """Open a GeoTIFF in geographic coordinates.

    Parameters
    ----------
    path : Path
    variable : str or None
        Description of the band wanted; every band otherwise.

    Returns
    -------
    dataset, warnings
        Undecoded, with centres and bounds of the cells; and what was odd.

    Raises
    ------
    InputDataError
        If the file is broken, projected, rotated or not georeferenced.
    """
    import rasterio
    from rasterio.errors import NotGeoreferencedWarning, RasterioError

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error", NotGeoreferencedWarning)
            with rasterio.open(path) as file:
                odd = _check_reference(file)
                return _describe(path, file, variable), odd
    except NotGeoreferencedWarning:
        raise InputDataError(
            "the GeoTIFF has no georeference; write it with EPSG:4326 and its bounds."
        ) from None
    except RasterioError as problem:
        raise InputDataError(
            f"the GeoTIFF cannot be opened ({problem}); "
            "it is damaged or incomplete, so fetch or write it again."
        ) from None


def _check_reference(file: Any) -> tuple[str, ...]:
    transform = file.transform
    if transform.b or transform.d:
        raise InputDataError("the GeoTIFF is rotated; warp it to EPSG:4326 first.")
    if file.crs is not None and not file.crs.is_geographic:
        raise InputDataError(
            f"the GeoTIFF is projected ({_crs_name(file.crs)}); warp it to EPSG:4326 first."
        )
    box = file.bounds
    degrees = max(abs(box.bottom), abs(box.top)) <= 90.5 and abs(box.left) <= 361 >= box.right - 180
    if not degrees:
        raise InputDataError(
            f"the GeoTIFF covers {box.left:g} to {box.right:g} by {box.bottom:g} to {box.top:g}, "
            "which are not degrees; warp it to EPSG:4326 first."
        )
    if file.crs is None:
        return ("the GeoTIFF names no coordinate system; its bounds are taken as degrees.",)
    return ()


def _crs_name(crs: Any) -> str:
    code = crs.to_epsg()
    return f"EPSG:{code}" if code else crs.to_dict().get("proj", "a custom projection")


def _describe(path: Path, file: Any, variable: str | None) -> xr.Dataset:
    bands = tuple(file.indexes)
    name = DEFAULT_NAME
    chosen = [i for i, text in zip(bands, file.descriptions, strict=True) if text == variable]
    if variable is not None and len(chosen) == 1:
        bands, name = tuple(chosen), variable
    elif len(bands) == 1 and file.descriptions[0]:
        name = file.descriptions[0]
    array = BandArray(path, bands, (file.height, file.width), file.dtypes[bands[0] - 1])
    block_rows, block_columns = file.block_shapes[bands[0] - 1]
    data = xr.Variable(
        ("band", "latitude", "longitude"),
        indexing.LazilyIndexedArray(array),
        attrs=_attributes(file, bands[0] - 1),
        encoding={"chunksizes": (1, block_rows, block_columns)},
    )
    t = file.transform
    coordinates = {
        "latitude": _edges(t.f, t.e, file.height, "degrees_north"),
        "longitude": _edges(t.c, t.a, file.width, "degrees_east"),
    }
    variables: dict[str, Any] = {name: data}
    for axis, (edges, unit) in coordinates.items():
        centres = (edges[1:] + edges[:-1]) / 2
        attributes = {"units": unit, "bounds": f"{axis}_bounds"}
        variables[axis] = xr.Variable((axis,), centres, attributes)
        pairs = np.stack([edges[:-1], edges[1:]], axis=1)
        variables[f"{axis}_bounds"] = xr.Variable((axis, "bounds"), pairs)
    return xr.Dataset(variables)


def _edges(start: float, step: float, count: int, unit: str) -> tuple[NDArray[np.float64], str]:
    return np.asarray(start + step * np.arange(count + 1), np.float64), unit


def _attributes(file: Any, index: int) -> dict[str, Any]:
    found: dict[str, Any] = {}
    if file.nodatavals[index] is not None:
        found["_FillValue"] = file.nodatavals[index]
    if file.units[index]:
        found["units"] = file.units[index]
    if file.scales[index] != 1.0:
        found["scale_factor"] = file.scales[index]
    if file.offsets[index] != 0.0:
        found["add_offset"] = file.offsets[index]
    return found
