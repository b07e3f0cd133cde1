"""A GeoTIFF as a lazy dataset: one variable, a band dimension if there are several bands."""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from xarray.backends import BackendArray
from xarray.core import indexing

from gridcool.errors import InputDataError

DEFAULT_NAME = "band_data"


@dataclass(frozen=True)
class Band:
    """How one band's stored numbers are read.

    ``masked`` says that a mask lies beside them, ``alpha`` which band of the file tells where they
    are transparent.
    """

    index: int
    dtype: str
    unit: str
    fill: float | None
    scale: float
    offset: float
    masked: bool
    alpha: int | None

    @property
    def attributes(self) -> dict[str, Any]:
        """The same as attributes of a variable."""
        found: dict[str, Any] = {"units": self.unit} if self.unit else {}
        if self.fill is not None:
            found["_FillValue"] = self.fill
        if self.scale != 1.0:
            found["scale_factor"] = self.scale
        if self.offset != 0.0:
            found["add_offset"] = self.offset
        return found

    def values(self, stored: NDArray[Any], file: Any, window: Any) -> NDArray[Any]:
        """Values, NaN where missing."""
        missing = np.zeros(stored.shape, bool)
        if self.masked:
            missing |= file.read_masks(self.index, window=window) == 0
        if self.alpha is not None:
            missing |= file.read(self.alpha, window=window) == 0
        if self.fill is not None:
            missing |= stored == self.fill
        return np.where(missing, np.nan, stored * self.scale + self.offset)


class BandArray(BackendArray):  # type: ignore[misc, unused-ignore]
    """Bands of a file, read in windows; the file is opened for each reading, so threads may.

    Stored numbers come out as they are where all bands are alike, else as values.
    """

    def __init__(self, path: Path, bands: tuple[Band, ...], shape: tuple[int, int]) -> None:
        self.path = path
        self.bands = bands
        self.shape = (len(bands), *shape)
        partly = any(band.masked or band.alpha is not None for band in bands)
        self.alike = not partly and len({str(band.attributes) for band in bands}) == 1
        stored = np.dtype(bands[0].dtype)
        self.dtype = stored if self.alike else np.result_type(stored, np.float32)

    @property
    def attributes(self) -> dict[str, Any]:
        """Attributes by which what comes out is read."""
        first = self.bands[0]
        return first.attributes if self.alike else {"units": first.unit} if first.unit else {}

    def __getitem__(self, key: indexing.ExplicitIndexer) -> Any:
        return indexing.explicit_indexing_adapter(
            key, self.shape, indexing.IndexingSupport.BASIC, self._read
        )

    def _read(self, key: tuple[Any, ...]) -> NDArray[Any]:
        import rasterio
        from rasterio.windows import Window

        band, row, column = key
        rows, columns = _positive(row, self.shape[1]), _positive(column, self.shape[2])
        single = isinstance(band, int | np.integer)
        wanted = (self.bands[band],) if single else self.bands[band]
        indexes = [each.index for each in wanted]
        window = Window.from_slices(rows, columns)
        with rasterio.open(self.path) as file:
            values: NDArray[Any] = file.read(indexes, window=window)
            if not self.alike:
                pieces = [
                    each.values(part, file, window)
                    for each, part in zip(wanted, values, strict=True)
                ]
                values = np.stack(pieces).astype(self.dtype)
        return values[
            0 if single else slice(None),
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
    bands = _bands(file)
    name = DEFAULT_NAME
    chosen = [band for band in bands if file.descriptions[band.index - 1] == variable]
    if variable is not None and len(chosen) == 1:
        bands, name = tuple(chosen), variable
    elif len(bands) == 1 and file.descriptions[bands[0].index - 1]:
        name = file.descriptions[bands[0].index - 1]
    units = sorted({band.unit for band in bands})
    if len(units) > 1:
        raise InputDataError(
            f"the bands of the GeoTIFF have several units ({', '.join(u or 'none' for u in units)})"
            "; name one band as variable, or write bands of one unit."
        )
    array = BandArray(path, bands, (file.height, file.width))
    block_rows, block_columns = file.block_shapes[bands[0].index - 1]
    together = len(bands) if file.profile.get("interleave") == "pixel" else 1
    data = xr.Variable(
        ("band", "latitude", "longitude"),
        indexing.LazilyIndexedArray(array),
        attrs=array.attributes,
        encoding={
            "preferred_chunks": {
                "band": together,
                "latitude": block_rows,
                "longitude": block_columns,
            }
        },
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


def _bands(file: Any) -> tuple[Band, ...]:
    """Bands that hold data; a band of transparency is a mask to the others."""
    from rasterio.enums import ColorInterp, MaskFlags

    alpha = None
    if file.count > 1 and ColorInterp.alpha in file.colorinterp:
        alpha = file.colorinterp.index(ColorInterp.alpha) + 1
    found = []
    for place, index in enumerate(file.indexes):
        if index == alpha:
            continue
        flags = set(file.mask_flag_enums[place])
        found.append(
            Band(
                index=index,
                dtype=file.dtypes[place],
                unit=file.units[place] or "",
                fill=file.nodatavals[place],
                scale=file.scales[place],
                offset=file.offsets[place],
                masked=not flags & {MaskFlags.all_valid, MaskFlags.nodata, MaskFlags.alpha},
                alpha=alpha,
            )
        )
    return tuple(found)
