"""One input as it lies in its file: where its numbers are and how they become values."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import partial

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gridcool.errors import InputDataError
from gridcool.inputs.axes import Axis, latitude_axis, longitude_axis
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
        return self.round_off(self.read_raw(rows))

    def read_raw(self, rows: slice) -> NDArray[np.float32]:
        """The same without rounding off."""
        values = self.means.read(rows)
        if self.divisor is not None:
            below = self.divisor.means.read(rows)
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
    below_spec = InputSpec(spec.name, path, spec.divisor_variable, divisor_variable="")
    below = _open(below_spec, None, spec.divisor_variable)
    with located(field.label):
        if len(field.latitude) != len(below.latitude) or len(field.longitude) != len(
            below.longitude
        ):
            raise InputDataError(f"its divisor in {path} is on another grid; name one on the same.")
        units = [f.opened.dataset[f.layout.name].attrs.get("units") for f in (field, below)]
        factor = ratio_conversion(*units)
    text = f"ratio of {field.layout.name} and {below.layout.name}"
    ratio = Conversion(text, known.units if known else "1", factor)
    return replace(field, conversion=ratio, divisor=below)


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
    bounds = dataset.get(str(coordinate.attrs.get("bounds", "")))
    usable = bounds is not None and bounds.shape == (coordinate.size, 2)
    values = np.asarray(coordinate.values, float)
    return values, np.asarray(bounds.values, float) if usable and bounds is not None else None


def _steps(dataset: xr.Dataset, layout: Layout, known: InputVariable | None) -> Steps:
    if layout.time is None:
        return annual()
    count = dataset.sizes[layout.time]
    if layout.time not in dataset.variables:
        steps = read_steps(count, None, {})
    else:
        axis = dataset[layout.time]
        bounds = dataset.get(str(axis.attrs.get("bounds", axis.attrs.get("climatology", ""))))
        usable = bounds is not None and bounds.shape == (count, 2)
        numeric = axis.dtype.kind in "iuf"
        steps = read_steps(
            count,
            np.asarray(axis.values, float) if numeric else None,
            axis.attrs,
            np.asarray(bounds.values, float) if usable and bounds is not None else None,
        )
    if known is not None and known.time == "none" and not steps.is_annual:
        raise InputDataError(f"it has {count} time steps; one field is needed.")
    return steps


def _hours(dataset: xr.Dataset, layout: Layout, spec: InputSpec) -> Hours | None:
    if layout.hour is None:
        return None
    if spec.name != "cloud_fraction":
        raise InputDataError("it has an hour axis, which only the cloud fraction may have.")
    values = dataset[layout.hour] if layout.hour in dataset.variables else None
    labels = None if values is None else np.asarray(values.values, float)
    return read_hours(dataset.sizes[layout.hour], labels, None, spec.hours)
