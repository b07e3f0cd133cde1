"""Open a file, whatever it is, without reading its data."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path

import xarray as xr

from gridcool.errors import InputDataError
from gridcool.inputs.classic import CLASSIC_MARKS, refuse_truncated
from gridcool.inputs.geotiff import open_geotiff

TIFF_MARKS = (b"II*\x00", b"MM\x00*", b"II+\x00", b"MM\x00+")
NETCDF_MARKS = (*CLASSIC_MARKS, b"\x89HDF\r\n\x1a\n")


@dataclass(frozen=True)
class Opened:
    """An open file: its variables, undecoded and unread, and what kind of file it is."""

    dataset: xr.Dataset
    kind: str
    warnings: tuple[str, ...] = ()


def open_file(path: Path, variable: str | None = None) -> Opened:
    """Open a NetCDF file, a GeoTIFF or a Zarr folder; the contents decide, not the ending.

    Parameters
    ----------
    path : Path
    variable : str or None
        For a GeoTIFF, the description of the one band that is wanted.

    Raises
    ------
    InputDataError
        If there is no such file, it cannot be read, or it is something else.
    """
    if path.is_dir():
        return Opened(_open_zarr(path), "Zarr")
    start = _first_bytes(path)
    if start.startswith(TIFF_MARKS):
        dataset, warnings = open_geotiff(path, variable)
        return Opened(dataset, "GeoTIFF", warnings)
    if start.startswith(NETCDF_MARKS):
        if start.startswith(CLASSIC_MARKS):
            refuse_truncated(path)
        return Opened(_open_netcdf(path), "NetCDF")
    raise InputDataError(
        f"the file is {_what_it_is(start)}, not NetCDF, GeoTIFF or Zarr; "
        "convert it to one of these or correct the path."
    )


def _first_bytes(path: Path) -> bytes:
    try:
        with path.open("rb") as file:
            return file.read(512)
    except FileNotFoundError:
        raise InputDataError("the file does not exist; check the path.") from None
    except PermissionError:
        raise InputDataError("the file may not be read; change its permissions.") from None
    except OSError as problem:
        raise InputDataError(f"the file cannot be read ({problem.strerror}).") from None


def _what_it_is(start: bytes) -> str:
    if not start:
        return "empty"
    if start.startswith((b"\x1f\x8b", b"PK\x03\x04", b"BZh")):
        return "compressed as a whole"
    if start.startswith(b"GRIB"):
        return "GRIB"
    try:
        text = start[:-4].decode() if len(start) == 512 else start.decode()
    except UnicodeDecodeError:
        return "of an unknown kind"
    return "plain text" if text.isprintable() or any(c.isspace() for c in text) else "unknown"


def _open_netcdf(path: Path) -> xr.Dataset:
    try:
        dataset = xr.open_dataset(
            path, engine="netcdf4", mask_and_scale=False, decode_times=False, cache=False
        )
    except (OSError, RuntimeError, ValueError) as problem:
        raise InputDataError(
            f"the NetCDF file cannot be opened ({_first_line(problem)}); "
            "it is damaged or incomplete, so fetch or write it again."
        ) from None
    return _not_empty(dataset)


def _open_zarr(path: Path) -> xr.Dataset:
    metadata = path / "zarr.json"
    if not metadata.exists() and not (path / ".zgroup").exists():
        raise InputDataError(
            "the path is a folder that is no Zarr group; name a file or a Zarr folder."
        )
    try:
        if metadata.exists():
            described = json.loads(metadata.read_text(encoding="utf-8"))
            consolidated = described.get("consolidated_metadata") is not None
        else:
            consolidated = (path / ".zmetadata").exists()
        dataset = xr.open_zarr(
            path, chunks=None, mask_and_scale=False, decode_times=False, consolidated=consolidated
        )
    except (OSError, RuntimeError, ValueError, KeyError, TypeError, AttributeError) as problem:
        raise InputDataError(
            f"the Zarr folder cannot be opened ({_first_line(problem)}); "
            "it is damaged or incomplete, so write it again."
        ) from None
    return _not_empty(dataset)


def _not_empty(dataset: xr.Dataset) -> xr.Dataset:
    if not dataset.data_vars:
        raise InputDataError("the file holds no variable at its top level; name another file.")
    return dataset


def _first_line(problem: Exception) -> str:
    return (str(problem).strip() or type(problem).__name__).splitlines()[0].rstrip(".")
