"""The door of the inputs: paths in, one checked and lazy dataset on the target grid out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import dask.array as da
import numpy as np
import xarray as xr
from dask.delayed import delayed
from numpy.typing import NDArray

from gridcool.errors import InputDataError
from gridcool.grid import Bounds, Grid, grid_from_bounds, grid_from_centres
from gridcool.inputs.checks import judge, survey
from gridcool.inputs.field import Field, open_field
from gridcool.inputs.gridding import Gridding, gridding_to
from gridcool.inputs.spec import Finding, InputReport, InputSpec, refuse
from gridcool.variables import input_variables

GLOBE = Bounds(-180.0, -90.0, 180.0, 90.0)
PAIR = ("temperature_maximum", "temperature_minimum")


@dataclass(frozen=True)
class Inputs:
    """All inputs on the target grid.

    Attributes
    ----------
    dataset : xarray.Dataset
        Lazy, float32, in whole-width strips; names and units of ``variables.toml``, temperature
        maximum and minimum turned into temperature_range. NaN where missing. Where a file has
        several years, the standard error of its monthly means as ``NAME_standard_error``.
    reports : tuple of InputReport
    """

    dataset: xr.Dataset
    reports: tuple[InputReport, ...]


def describe(spec: InputSpec, grid: Grid | None = None) -> InputReport:
    """What is understood of one input; problems are findings in the report, not exceptions."""
    return _understand(spec, grid)[1]


def target_grid(
    specs: Sequence[InputSpec], like: str | None, resolution: float | None, bounds: Bounds | None
) -> Grid:
    """The grid of an input, or one of square cells.

    Parameters
    ----------
    specs : sequence of InputSpec
    like : str or None
        Name of the input whose grid to take; it must be evenly spaced.
    resolution : float or None
        Degrees, where ``like`` is None.
    bounds : Bounds or None
        With ``resolution``; the globe without.

    Raises
    ------
    InputDataError
        If the input cannot be opened or its grid is uneven.
    """
    if like is None:
        if resolution is None:
            raise ValueError("either like or resolution is needed")
        return grid_from_bounds(bounds or GLOBE, resolution)
    field = open_field(next(spec for spec in specs if spec.name == like))
    longitude = field.longitude.centres
    if field.longitude.closes_circle:
        west = (field.longitude.edges[:-1] + 180 + 1e-6) % 360 - 180
        start = int(np.argmin(west))
        first = longitude[start] - (field.longitude.edges[start] - west[start])
        longitude = first + np.arange(len(longitude)) * field.longitude.step
    try:
        return grid_from_centres(field.latitude.centres, longitude)
    except ValueError as problem:
        raise InputDataError(
            f"{field.label}: {problem}, so it cannot be the target grid; "
            "set [grid] resolution = ... instead of like."
        ) from None


def load_inputs(specs: Sequence[InputSpec], grid: Grid, chunk_rows: int) -> Inputs:
    """Open, check and lay out all inputs.

    Parameters
    ----------
    specs : sequence of InputSpec
    grid : Grid
    chunk_rows : int
        Rows of a strip.

    Raises
    ------
    InputDataError
        One message with everything that is wrong. Files that break off later raise it on computing.
    """
    understood = [_understand(spec, grid) for spec in specs]
    reports = tuple(report for _, report in understood)
    reports = _check_pair(reports)
    refuse(reports)
    fields = {field.spec.name: field for field, _ in understood if field is not None}
    variables = {}
    for name, field in fields.items():
        if name in PAIR:
            continue
        variables[name] = _lazy(grid, chunk_rows, field)
        if field.has_years:
            variables[f"{name}_standard_error"] = _lazy_standard_error(grid, chunk_rows, field)
    if set(PAIR) <= set(fields) and "temperature_range" not in fields:
        variables["temperature_range"] = _lazy(grid, chunk_rows, *(fields[name] for name in PAIR))
    coordinates = {
        "month": np.arange(1, 13),
        "latitude": grid.latitudes,
        "longitude": grid.longitudes,
    }
    hours = next((field.hours for field in fields.values() if field.hours), None)
    if hours is not None:
        coordinates["hour"] = hours.centres
    return Inputs(xr.Dataset(variables, coords=coordinates), reports)


def _understand(spec: InputSpec, grid: Grid | None) -> tuple[Field | None, InputReport]:
    report = InputReport(spec.name, str(spec.path))
    try:
        field = open_field(spec)
        report = _describe_axes(report, field)
        found = survey(field)
    except InputDataError as problem:
        findings = (*report.findings, Finding("error", str(problem)))
        return None, replace(report, findings=findings)
    report = replace(
        report,
        minimum=found.low.value if found.low else None,
        maximum=found.high.value if found.high else None,
        mean=found.mean,
        missing_share=found.missing / found.count,
        findings=(*report.findings, *judge(field, found)),
    )
    if grid is not None:
        report = _describe_gridding(report, field, grid)
    return field, report


def _describe_axes(report: InputReport, field: Field) -> InputReport:
    latitude, longitude = field.latitude, field.longitude
    order = "south first" if latitude.reversed else "north first"
    spacing = f"{latitude.step:.6g} x {longitude.step:.6g} degrees"
    if not latitude.even:
        spacing = f"uneven latitudes, about {spacing}"
    notes = (*latitude.notes, *longitude.notes, *field.opened.warnings, *field.steps.warnings)
    known = field.known
    return replace(
        report,
        kind=field.opened.kind,
        variable=field.layout.name,
        chosen=field.layout.chosen,
        unit=known.units if known else (field.conversion.found or ""),
        conversion=field.conversion.description,
        rows=len(latitude),
        columns=len(longitude),
        grid=f"{len(latitude)} rows x {len(longitude)} columns, {spacing}, {order}",
        bounds=Bounds(
            *map(
                float,
                (longitude.edges[0], latitude.edges[-1], longitude.edges[-1], latitude.edges[0]),
            )
        ),
        time=field.steps.description,
        years=field.steps.years,
        calendar=field.steps.calendar,
        hours=field.hours.count if field.hours else 0,
        findings=tuple(Finding("warning", f"{field.label}: {note}") for note in notes),
    )


def _describe_gridding(report: InputReport, field: Field, grid: Grid) -> InputReport:
    gridding = gridding_to(grid, field.latitude, field.longitude)
    touched = gridding.rows.nnz > 0 and gridding.columns.nnz > 0
    if touched:
        return replace(report, regridding=gridding.description)
    b, t = report.bounds, grid.bounds
    where = (
        ""
        if b is None
        else (
            f" (it covers {b.west:g} to {b.east:g} E, {b.south:g} to {b.north:g} N; the target "
            f"{t.west:g} to {t.east:g} E, {t.south:g} to {t.north:g} N)"
        )
    )
    message = (
        f"{field.label}: it does not overlap the target grid{where}; correct [grid] or the file."
    )
    return replace(report, findings=(*report.findings, Finding("error", message)))


def _check_pair(reports: tuple[InputReport, ...]) -> tuple[InputReport, ...]:
    """Refuse a daily minimum that is on average above the maximum: the two are swapped."""
    means = {report.name: report.mean for report in reports}
    high, low = (means.get(name) for name in PAIR)
    if high is None or low is None or high >= low:
        return reports
    message = (
        f"temperature_maximum (mean {high:.1f}) is below temperature_minimum (mean {low:.1f}) on "
        "average; they are swapped or in different units."
    )
    return tuple(
        replace(r, findings=(*r.findings, Finding("error", message))) if r.name == PAIR[0] else r
        for r in reports
    )


class _Strips:
    """Reads strips of the target grid from one file, or the difference of two."""

    def __init__(self, grid: Grid, fields: Sequence[Field]) -> None:
        self._grid = grid
        self._parts: list[tuple[Field, Gridding]] = [
            (field, gridding_to(grid, field.latitude, field.longitude)) for field in fields
        ]

    def read(self, rows: slice) -> NDArray[np.float32]:
        values = [self._one(field, gridding, rows) for field, gridding in self._parts]
        if len(values) == 1:
            return values[0]
        span = values[0] - values[1]
        lowest = np.nanmin(span, initial=0.0)
        if lowest < -0.01:
            where = np.unravel_index(int(np.nanargmin(span)), span.shape)
            latitude = self._grid.latitudes[rows][where[-2]]
            longitude = self._grid.longitudes[where[-1]]
            labels = " and ".join(field.label for field, _ in self._parts)
            raise InputDataError(
                f"{labels}: the daily maximum is {-lowest:.1f} K below the minimum at "
                f"{latitude:.2f} N, {longitude:.2f} E; correct the files."
            )
        return np.asarray(np.maximum(span, 0), np.float32)

    def _one(self, field: Field, gridding: Gridding, rows: slice) -> NDArray[np.float32]:
        source = gridding.source_rows(rows)
        if source.stop == source.start:
            hours = (field.hours.count,) if field.hours else ()
            shape = (field.months, *hours, rows.stop - rows.start, self._grid.columns)
            return np.full(shape, np.nan, np.float32)
        return gridding.apply(field.read(source), rows, source)


class _SpreadStrips:
    """Reads strips of the standard error of one file's monthly means.

    Neighbouring cells are taken to err together, so that it is regridded like the values.
    """

    def __init__(self, grid: Grid, field: Field) -> None:
        self._field, self._columns = field, grid.columns
        self._gridding = gridding_to(grid, field.latitude, field.longitude)

    def read(self, rows: slice) -> NDArray[np.float32]:
        source = self._gridding.source_rows(rows)
        if source.stop == source.start:
            return np.full((12, rows.stop - rows.start, self._columns), np.nan, np.float32)
        return self._gridding.apply(self._field.read_standard_error(source), rows, source)


def _lazy_standard_error(
    grid: Grid, chunk_rows: int, field: Field
) -> tuple[tuple[str, ...], da.Array]:
    reader = delayed(_SpreadStrips(grid, field), traverse=False, pure=True)
    strips = []
    for start in range(0, grid.rows, chunk_rows):
        rows = slice(start, min(start + chunk_rows, grid.rows))
        shape = (12, rows.stop - rows.start, grid.columns)
        strips.append(da.from_delayed(reader.read(rows), shape, np.float32))
    values: da.Array = da.concatenate(strips, axis=-2)
    return ("month", "latitude", "longitude"), values


def _lazy(grid: Grid, chunk_rows: int, *fields: Field) -> tuple[tuple[str, ...], da.Array]:
    """Dimensions and lazy values of an input on the target grid."""
    reader = delayed(_Strips(grid, fields), traverse=False, pure=True)
    known = input_variables().get(fields[0].spec.name)
    months = max(field.months for field in fields)
    monthly = (known is not None and known.time == "month") or months == 12
    hours = (fields[0].hours.count,) if fields[0].hours else ()
    strips = []
    for start in range(0, grid.rows, chunk_rows):
        rows = slice(start, min(start + chunk_rows, grid.rows))
        shape = (months, *hours, rows.stop - rows.start, grid.columns)
        strips.append(da.from_delayed(reader.read(rows), shape, np.float32))
    values: da.Array = da.concatenate(strips, axis=-2)
    if not monthly:
        return ("latitude", "longitude"), values[0]
    if months == 1:
        whole = (12, *values.shape[1:])
        values = da.broadcast_to(values, whole, chunks=((12,), *values.chunks[1:]))
    dims = ("month", *(("hour",) if hours else ()), "latitude", "longitude")
    return dims, values
