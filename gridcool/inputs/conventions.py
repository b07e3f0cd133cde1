"""Which variable of a file is meant, and what its dimensions are."""

from __future__ import annotations

from collections.abc import Hashable
from dataclasses import dataclass
from typing import Literal

import xarray as xr

from gridcool.errors import InputDataError
from gridcool.variables import InputVariable

Role = Literal["latitude", "longitude", "time", "hour"]

LATITUDE_UNITS = {"degrees_north", "degree_north", "degrees_n", "degree_n", "degreen", "degreesn"}
LONGITUDE_UNITS = {"degrees_east", "degree_east", "degrees_e", "degree_e", "degreee", "degreese"}
USUAL_NAMES: dict[str, Role] = {
    **dict.fromkeys(("lat", "latitude", "nav_lat", "y_lat"), "latitude"),
    **dict.fromkeys(("lon", "longitude", "long", "nav_lon"), "longitude"),
    **dict.fromkeys(("time", "month", "months", "t", "band", "date"), "time"),
    **dict.fromkeys(("hour", "hours", "hour_of_day", "local_hour", "time_of_day"), "hour"),
}  # type: ignore[assignment, unused-ignore]
PROJECTED = ("projection_x_coordinate", "projection_y_coordinate")
ROTATED = ("grid_latitude", "grid_longitude")
REGRID_FIRST = "bring it to a regular latitude-longitude grid (EPSG:4326) first."


@dataclass(frozen=True)
class Layout:
    """A variable and its dimensions by role; what is not there is None.

    ``extra`` are dimensions of length one that are dropped.
    """

    name: str
    chosen: str
    latitude: str
    longitude: str
    time: str | None
    hour: str | None
    extra: tuple[str, ...]


def find_layout(
    dataset: xr.Dataset, wanted: str | None, known: InputVariable | None, name: str
) -> Layout:
    """Choose the variable and recognise its dimensions.

    The variable is the one named in the settings, else the only one with the input's CF standard
    name, else with one of its usual names, else the only one on latitude and longitude.

    Raises
    ------
    InputDataError
        If none or several fit, or the grid is not one of latitude and longitude.
    """
    variable, chosen = _choose(dataset, wanted, known, name)
    roles: dict[Role, str] = {}
    extra = []
    for dim in dataset[variable].dims:
        role = _role(dataset, dim)
        if role is not None and role not in roles:
            roles[role] = str(dim)
        elif dataset.sizes[dim] == 1:
            extra.append(str(dim))
        else:
            _refuse_dimension(dataset, variable, str(dim))
    for role in ("latitude", "longitude"):
        if role not in roles:
            raise InputDataError(
                f"variable {variable} has no {role} (dimensions "
                f"{', '.join(map(str, dataset[variable].dims)) or 'none'}); {REGRID_FIRST}"
            )
    return Layout(
        name=variable,
        chosen=chosen,
        latitude=roles["latitude"],
        longitude=roles["longitude"],
        time=roles.get("time"),
        hour=roles.get("hour"),
        extra=tuple(extra),
    )


def _choose(
    dataset: xr.Dataset, wanted: str | None, known: InputVariable | None, name: str
) -> tuple[str, str]:
    fields = _fields(dataset)
    if wanted is not None:
        if wanted in dataset.variables and wanted not in dataset.coords:
            return wanted, "as the settings say"
        if len(fields) == 1 and len(dataset.data_vars) == 3:  # a GeoTIFF's one variable and bounds
            raise InputDataError(
                f"no band is described as {wanted}; leave out variable or name a band."
            )
        listed = ", ".join(fields) or "none on a grid"
        raise InputDataError(f"there is no variable {wanted}; the file has {listed}.")
    if known is not None and known.standard_name:
        named = [f for f in fields if _standard_name(dataset, f) == known.standard_name]
        if len(named) == 1:
            return named[0], f"by its standard name {known.standard_name}"
    usual = [] if known is None else [n.lower() for n in known.names]
    by_name = [f for f in fields if f.lower() in usual or f == name]
    if by_name:
        best = min(by_name, key=lambda f: usual.index(f.lower()) if f.lower() in usual else -1)
        return best, "by its name"
    if len(fields) == 1:
        return fields[0], "the only variable on a grid"
    if not fields:
        raise InputDataError(f"it holds no variable on a latitude-longitude grid; {REGRID_FIRST}")
    raise InputDataError(
        f"it holds several variables ({', '.join(fields[:8])}); "
        f'say which one by variable = "..." in [inputs.{name}].'
    )


def _fields(dataset: xr.Dataset) -> list[str]:
    """Variables with at least two dimensions that are no bounds."""
    bounds = {str(v.attrs.get("bounds", "")) for v in dataset.variables.values()}
    bounds |= {str(v.attrs.get("climatology", "")) for v in dataset.variables.values()}
    return [
        str(name)
        for name, variable in dataset.data_vars.items()
        if variable.ndim >= 2 and str(name) not in bounds and variable.dtype.kind in "iufb"
    ] or [str(name) for name, v in dataset.data_vars.items() if v.ndim >= 1 and v.dtype.kind == "f"]


def _standard_name(dataset: xr.Dataset, name: str) -> str:
    return str(dataset[name].attrs.get("standard_name", ""))


def _role(dataset: xr.Dataset, dim: Hashable) -> Role | None:
    """What a dimension is, by the CF attributes of its coordinate, then by its name."""
    attributes = dataset[dim].attrs if dim in dataset.variables else {}
    units = str(attributes.get("units", "")).lower().strip()
    standard = str(attributes.get("standard_name", ""))
    if standard in (*PROJECTED, *ROTATED):
        return None
    if standard == "latitude" or units in LATITUDE_UNITS:
        return "latitude"
    if standard == "longitude" or units in LONGITUDE_UNITS:
        return "longitude"
    usual = USUAL_NAMES.get(str(dim).lower())
    if usual == "hour":
        return "hour"
    if standard == "time" or " since " in units or str(attributes.get("axis", "")).upper() == "T":
        return "time"
    return usual


def _refuse_dimension(dataset: xr.Dataset, variable: str, dim: str) -> None:
    standard = str(dataset[dim].attrs.get("standard_name", "")) if dim in dataset else ""
    if standard in PROJECTED:
        raise InputDataError(f"variable {variable} is on a projected grid; {REGRID_FIRST}")
    if standard in ROTATED or dim in ("rlat", "rlon"):
        raise InputDataError(f"variable {variable} is on a rotated grid; {REGRID_FIRST}")
    if dim.lower() in ("ncells", "cell", "cells", "ncell", "node", "nodes"):
        raise InputDataError(f"variable {variable} is on an unstructured grid; {REGRID_FIRST}")
    raise InputDataError(
        f"variable {variable} has a dimension {dim} of length {dataset.sizes[dim]} that is neither "
        "latitude, longitude, month nor hour; choose one level and save it without that dimension."
    )
