"""Which variable of a file is meant, and what its dimensions are."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

from gridcool.errors import InputDataError
from gridcool.inputs.conventions import find_layout
from gridcool.variables import input_variables

LENGTHS = {"time": 12, "month": 12, "lat": 4, "lon": 5, "y": 4, "x": 5, "lev": 3, "one": 1}
LENGTHS |= {"hour": 8, "ncells": 20, "rlat": 4, "rlon": 5, "bnds": 2}


def dataset(
    variables: dict[str, tuple[str, dict[str, Any]]],
    coordinates: dict[str, dict[str, Any]] | None = None,
) -> xr.Dataset:
    """Variables as "dimension dimension ..." and attributes; coordinates with attributes."""
    found = {}
    for name, (dims, attributes) in variables.items():
        shape = [LENGTHS[dim] for dim in dims.split()]
        found[name] = (tuple(dims.split()), np.zeros(shape, np.float32), attributes)
    axes = {
        name: (name, np.arange(LENGTHS[name], dtype=float), attributes)
        for name, attributes in (coordinates or {}).items()
    }
    return xr.Dataset(found, coords=axes)


def chosen(file: xr.Dataset, name: str = "cloud_fraction", wanted: str | None = None) -> str:
    return find_layout(file, wanted, input_variables().get(name), name).name


CLOUD = {"standard_name": "cloud_area_fraction"}


@pytest.mark.parametrize(
    ("variables", "wanted", "expected"),
    [
        # The settings go before the standard name, that before usual names, those before the rest.
        ({"a": CLOUD, "clt": {}, "b": {}}, "b", "b"),
        ({"a": CLOUD, "clt": {}, "b": {}}, None, "a"),
        ({"a": {}, "clt": {}, "b": {}}, None, "clt"),
        ({"a": {}, "CLT": {}}, None, "CLT"),
        ({"a": {}}, None, "a"),
        # Two of one standard name: the usual name decides.
        ({"a": CLOUD, "clt": CLOUD}, None, "clt"),
        # Of several usual names the one that comes first in the table.
        ({"tcc": {}, "clt": {}}, None, "clt"),
        ({"clt": {}, "cloud_fraction": {}}, None, "cloud_fraction"),
    ],
)
def test_the_variable_that_is_meant(
    variables: dict[str, dict[str, Any]], wanted: str | None, expected: str
) -> None:
    file = dataset({name: ("time lat lon", attrs) for name, attrs in variables.items()})
    assert chosen(file, wanted=wanted) == expected


def test_bounds_and_lines_are_no_fields() -> None:
    file = dataset(
        {
            "data": ("time lat lon", {}),
            "lat_bnds": ("lat bnds", {}),
            "time_bnds": ("time bnds", {}),
            "weights": ("lat", {}),
        },
        {"lat": {"bounds": "lat_bnds"}, "time": {"climatology": "time_bnds"}},
    )
    assert chosen(file) == "data"


def test_a_free_name_is_looked_for_as_it_is() -> None:
    file = dataset({"slope": ("lat lon", {}), "aspect": ("lat lon", {})})
    assert chosen(file, "slope") == "slope"
    with pytest.raises(InputDataError, match=r"several variables \(slope, aspect\)"):
        chosen(file, "protected")


def test_what_is_not_there_is_listed() -> None:
    file = dataset({"a": ("lat lon", {}), "b": ("lat lon", {})}, {"lat": {}})
    for wanted in ("c", "lat"):
        with pytest.raises(InputDataError, match=f"no variable {wanted}; the file has a, b"):
            chosen(file, wanted=wanted)
    with pytest.raises(InputDataError, match=r'variable = "..." in \[inputs.cloud_fraction\]'):
        chosen(file)


@pytest.mark.parametrize(
    ("dims", "coordinates", "roles"),
    [
        ("time lat lon", {}, ("lat", "lon", "time", None)),
        ("lat lon", {}, ("lat", "lon", None, None)),
        ("month hour lat lon", {}, ("lat", "lon", "month", "hour")),
        # By units, by standard name and by axis, whatever they are called and however they lie.
        (
            "x lev y",
            {
                "x": {"units": "degrees_north"},
                "y": {"units": "degrees_east"},
                "lev": {"units": "days since 2001-01-01"},
            },
            ("x", "y", "lev", None),
        ),
        (
            "lev y x",
            {
                "y": {"standard_name": "latitude"},
                "x": {"standard_name": "longitude"},
                "lev": {"axis": "T"},
            },
            ("y", "x", "lev", None),
        ),
        # An hour that counts from a date is still an hour.
        (
            "time hour lat lon",
            {"hour": {"units": "hours since 2001-01-01", "standard_name": "time"}},
            ("lat", "lon", "time", "hour"),
        ),
    ],
)
def test_dimensions_by_role(
    dims: str, coordinates: dict[str, dict[str, Any]], roles: tuple[str | None, ...]
) -> None:
    found = find_layout(dataset({"clt": (dims, {})}, coordinates), None, None, "clt")
    assert (found.latitude, found.longitude, found.time, found.hour) == roles
    assert found.extra == ()


def test_a_dimension_of_one_is_dropped() -> None:
    found = find_layout(dataset({"clt": ("time one lat lon", {})}), None, None, "clt")
    assert found.extra == ("one",)


@pytest.mark.parametrize(
    ("dims", "coordinates", "piece"),
    [
        ("time lev lat lon", {}, "dimension lev of length 3 that is neither"),
        ("time y x", {"y": {"standard_name": "projection_y_coordinate"}}, "on a projected grid"),
        ("time y x", {"y": {"standard_name": "grid_latitude"}}, "on a rotated grid"),
        ("time rlat rlon", {}, "on a rotated grid"),
        ("time ncells", {}, "on an unstructured grid"),
        ("time lat", {}, "has no longitude"),
        ("time lon", {}, "has no latitude"),
    ],
)
def test_other_grids_are_refused(
    dims: str, coordinates: dict[str, dict[str, Any]], piece: str
) -> None:
    with pytest.raises(InputDataError, match=piece):
        find_layout(dataset({"clt": (dims, {})}, coordinates), None, None, "clt")


def test_a_file_without_a_field_says_so() -> None:
    file = xr.Dataset({"station": ("name", np.array(["a", "b"]))})
    with pytest.raises(InputDataError, match="no variable on a latitude-longitude grid"):
        chosen(file)
