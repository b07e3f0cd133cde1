"""One input as it lies in its file: where its numbers are and how they become values."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gridcool.errors import InputDataError
from gridcool.inputs.axes import JITTER, SINGLE, Axis, latitude_axis, longitude_axis
from gridcool.inputs.calendar import Steps, annual, read_steps
from gridcool.inputs.conventions import Layout, find_layout
from gridcool.inputs.hours import Hours, read_hours
from gridcool.inputs.means import MonthlyMeans
from gridcool.inputs.opening import Opened, open_file
from gridcool.inputs.packing import packing_from
from gridcool.inputs.spec import InputSpec, located
from gridcool.inputs.stored import Stored
from gridcool.inputs.units import Conversion, conversion_for, ratio_conversion
from gridcool.variables import InputVariable, input_variables

FloatArray = NDArray[np.float64]

#: How far beyond what is possible a share may lie by rounding, as a share of its range.
ROUNDING_SHARE = 0.01
#: Inputs whose spread from year to year feeds the uncertainty, where the file has years.
SPREAD = ("albedo", "cloud_fraction", "temperature_range")


@dataclass(frozen=True, eq=False)
class Field:
    """An input's variable, its axes and its way to values; nothing is read before `read`.

    Attributes
    ----------
    spec : InputSpec
    known : InputVariable or None
    opened : Opened
    layout : Layout
    latitude, longitude : Axis
    steps : Steps
    hours : Hours or None
    conversion : Conversion
    means : MonthlyMeans
        Values by month, converted unless a ratio is still to be formed.
    divisor : Field or None
        What the values are divided by.
    """

    spec: InputSpec
    known: InputVariable | None
    opened: Opened
    layout: Layout
    latitude: Axis
    longitude: Axis
    steps: Steps
    hours: Hours | None
    conversion: Conversion
    means: MonthlyMeans
    divisor: Field | None = None

    @property
    def label(self) -> str:
        """How messages name the input."""
        return self.spec.label(self.layout.name)

    @property
    def months(self) -> int:
        """Twelve, or one for an annual field."""
        return 1 if self.steps.is_annual else 12

    def read(self, rows: slice) -> NDArray[np.float32]:
        """Values of some rows, north first and west first, in the unit used inside.

        Returns
        -------
        array, shape (12 or 1, rows, columns), or (12 or 1, hours, rows, columns)
            NaN where missing; what exceeds the possible range of a share by rounding is set to
            its end.

        Raises
        ------
        InputDataError
            If the file breaks off.
        """
        return self.round_off(self.combine(self.read_parts(rows)))

    def read_parts(self, rows: slice) -> tuple[NDArray[np.float32], ...]:
        """Monthly means as they lie in the file: of the variable and, of a ratio, the divisor."""
        fields = (self,) if self.divisor is None else (self, self.divisor)
        return tuple(field.means.read(rows) for field in fields)

    def combine(self, parts: tuple[NDArray[np.float32], ...]) -> NDArray[np.float32]:
        """What `read` returns, before rounding off."""
        values = parts[0]
        if self.divisor is not None:
            below = parts[1]
            dark = ~(below >= self.spec.divisor_minimum)
            values = np.where(dark, np.nan, values / np.where(dark, 1, below)).astype(np.float32)
            values *= np.float32(self.conversion.factor)
        if self.hours is not None:
            values = self.hours.to_local(values, self.longitude.centres)
        return values

    def round_off(self, values: NDArray[np.float32]) -> NDArray[np.float32]:
        """Set to the end of the possible range what lies beyond it by rounding."""
        if self.known is None or self.known.units != "1":
            return values
        low, high = self.known.valid
        margin = ROUNDING_SHARE * (high - low)
        near = (values >= low - margin) & (values <= high + margin)
        return np.where(near, np.clip(values, low, high), values).astype(np.float32)

    @property
    def has_years(self) -> bool:
        """Whether the file tells how much years differ, and that is of use."""
        return _has_years(self.spec, self.steps, self.hours)

    def read_standard_error(self, rows: slice) -> NDArray[np.float32]:
        """Standard error of the monthly means of `read`, from the spread of the file's years.

        Returns
        -------
        array, shape (12, rows, columns)
            NaN where fewer than two years are known.
        """
        return self.means.read_standard_error(rows)


def open_field(spec: InputSpec) -> Field:
    """Open an input and understand it, without reading its data.

    Raises
    ------
    InputDataError
        Naming the input, the file and, where it is known, the variable.
    """
    known = input_variables().get(spec.name)
    field = _open(spec, known, spec.variable)
    if not spec.is_ratio:
        return field
    path = spec.divisor_path or spec.path
    below_spec = InputSpec(
        spec.name, path, spec.divisor_variable, hours=spec.hours, divisor_variable=""
    )
    below = _open(below_spec, None, spec.divisor_variable)
    with located(field.label):
        _refuse_other_cells(field, below, path)
        units = [f.opened.dataset[f.layout.name].attrs.get("units") for f in (field, below)]
        factor = ratio_conversion(*units)
    text = f"ratio of {field.layout.name} and {below.layout.name}"
    ratio = Conversion(text, known.units if known else "1", factor)
    steps = replace(field.steps, warnings=(*field.steps.warnings, *_other_years(field, below)))
    return replace(field, steps=steps, conversion=ratio, divisor=below)


def _refuse_other_cells(field: Field, below: Field, path: Path) -> None:
    """A ratio is of one cell and month: the divisor must have the same."""
    pairs = {
        "latitudes": (field.latitude, below.latitude),
        "longitudes": (field.longitude, below.longitude),
    }
    for what, (one, other) in pairs.items():
        same = len(one) == len(other)
        if not same or np.abs(one.centres - other.centres).max() > JITTER * one.step + SINGLE:
            raise InputDataError(
                f"its divisor in {path} has the {what} {_span(other)} instead of {_span(one)}; "
                "name one on the same grid."
            )
    if field.months != below.months:
        has, needed = ("one field", "12 months") if field.months == 12 else ("months", "one field")
        raise InputDataError(
            f"its divisor in {path} has {has} instead of {needed}; name one with the same months."
        )
    if field.hours != below.hours:
        raise InputDataError(
            f"its divisor in {path} has other hours; name one with the same hour axis."
        )


def _span(axis: Axis) -> str:
    return f"{axis.centres[0]:g} to {axis.centres[-1]:g} ({len(axis)})"


def _other_years(field: Field, below: Field) -> tuple[str, ...]:
    """A warning if the dates of a ratio's parts differ."""
    one, other = field.steps, below.steps
    if not (one.calendar and other.calendar and one.step_years and other.step_years):
        return ()
    dates = [set(zip(steps.step_years, steps.months, strict=True)) for steps in (one, other)]
    if dates[0] == dates[1]:
        return ()
    return (
        f"the ratio divides {one.description} by {other.description}; check that they belong "
        "together.",
    )


def _open(spec: InputSpec, known: InputVariable | None, variable: str | None) -> Field:
    with located(spec.label(variable)):
        opened = open_file(spec.path, variable)
        layout = find_layout(opened.dataset, variable, known, spec.name)
    with located(spec.label(layout.name)):
        dataset = opened.dataset
        latitude = latitude_axis(*_labels(dataset, layout.latitude))
        longitude = longitude_axis(
            *_labels(dataset, layout.longitude), by_corner=latitude.by_corner
        )
        data = dataset[layout.name].variable
        ratio = spec.is_ratio
        steps, hours = _steps(dataset, layout, known), _hours(dataset, layout, spec)
        packing = packing_from(data.attrs, data.dtype)
        conversion = conversion_for(None if ratio else known, data.attrs.get("units"), spec.units)
        factor, shift = (1.0, 0.0) if ratio else (conversion.factor, conversion.offset)
        means = MonthlyMeans(
            Stored(data, layout, spec.label(layout.name)),
            partial(packing.unpack, factor=factor, shift=shift),
            steps,
            latitude,
            longitude,
            spread=_has_years(spec, steps, hours),
        )
        return Field(
            spec, known, opened, layout, latitude, longitude, steps, hours, conversion, means
        )


def _has_years(spec: InputSpec, steps: Steps, hours: Hours | None) -> bool:
    return spec.name in SPREAD and steps.years > 1 and hours is None and not spec.is_ratio


def _labels(dataset: xr.Dataset, dim: str) -> tuple[FloatArray, FloatArray | None]:
    """Coordinate values of a dimension and their bounds."""
    if dim not in dataset.variables:
        raise InputDataError(f"its dimension {dim} has no coordinate; add one in degrees.")
    coordinate = dataset[dim]
    return np.asarray(coordinate.values, float), _bounds(dataset, coordinate)


def _bounds(dataset: xr.Dataset, coordinate: xr.DataArray) -> FloatArray | None:
    """Bounds of a coordinate's cells, if the file has them."""
    attributes = coordinate.attrs
    bounds = dataset.get(str(attributes.get("bounds", attributes.get("climatology", ""))))
    if bounds is None or bounds.shape != (coordinate.size, 2):
        return None
    return np.asarray(bounds.values, float)


def _steps(dataset: xr.Dataset, layout: Layout, known: InputVariable | None) -> Steps:
    if layout.time is None:
        return annual()
    count = dataset.sizes[layout.time]
    if known is not None and known.time == "none" and count > 1:
        raise InputDataError(
            f"it has {count} steps along {layout.time}, but {known.name} does not change with "
            "time; choose one and save it without that dimension."
        )
    if layout.time not in dataset.variables:
        return read_steps(count, None, {})
    axis = dataset[layout.time]
    numeric = axis.dtype.kind in "iuf"
    values = np.asarray(axis.values, float) if numeric else None
    return read_steps(count, values, axis.attrs, _bounds(dataset, axis))


def _hours(dataset: xr.Dataset, layout: Layout, spec: InputSpec) -> Hours | None:
    if layout.hour is None:
        return None
    if spec.name != "cloud_fraction":
        raise InputDataError("it has an hour axis, which only the cloud fraction may have.")
    count = dataset.sizes[layout.hour]
    if layout.hour not in dataset.variables:
        return read_hours(count, None, None, spec.hours)
    return read_hours(count, *_labels(dataset, layout.hour), spec.hours)
