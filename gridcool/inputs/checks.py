"""Is what an input holds possible, is it usual, and where is it at its worst?"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from dask.base import compute
from dask.delayed import delayed
from numpy.typing import NDArray

from gridcool.inputs.calendar import MONTH_NAMES
from gridcool.inputs.field import ROUNDING_SHARE, Field
from gridcool.inputs.spec import Finding
from gridcool.inputs.units import suggestion
from gridcool.variables import InputVariable

FloatArray = NDArray[np.floating]

#: Numbers read at once by one thread of the check, so that memory stays small.
CHECK_VALUES = 8_000_000
PERCENT = 0.01


@dataclass(frozen=True)
class Extreme:
    """A value and where it stands: month (None if annual), latitude and longitude."""

    value: float
    month: int | None
    latitude: float
    longitude: float

    def place(self) -> str:
        """The place in words."""
        when = "" if self.month is None else f" in {MONTH_NAMES[self.month]}"
        return f"at {self.latitude:.2f} N, {self.longitude:.2f} E{when}"


@dataclass(frozen=True)
class Survey:
    """What a pass over all of an input's values found.

    ``weight`` and ``total`` are sums over the valid cells by area; counts are of values. Where some
    are infinite, the others are not looked at.
    """

    count: int
    missing: int = 0
    weight: float = 0.0
    total: float = 0.0
    low: Extreme | None = None
    high: Extreme | None = None
    impossible: int = 0
    rounded: int = 0
    unusual: int = 0
    infinite: int = 0
    first_infinite: Extreme | None = None

    @property
    def mean(self) -> float | None:
        """Mean over area and months."""
        return self.total / self.weight if self.weight > 0 else None


def survey(field: Field) -> Survey:
    """Read all of an input once, strip by strip, and take its measure.

    Raises
    ------
    InputDataError
        If the file breaks off.
    """
    per_row = field.months * (field.hours.count if field.hours else 1) * len(field.longitude)
    rows = max(1, CHECK_VALUES // max(1, per_row))
    strips = [
        slice(start, min(start + rows, len(field.latitude)))
        for start in range(0, len(field.latitude), rows)
    ]
    task = delayed(_survey_strip)
    parts = compute(*[task(_Once(field), strip) for strip in strips], scheduler="threads")
    return _joined(list(parts))


class _Once:
    """Hides a field from dask, which would look into it for tasks."""

    def __init__(self, field: Field) -> None:
        self.field = field


def _survey_strip(once: _Once, rows: slice) -> Survey:
    field = once.field
    parts = field.read_parts(rows)
    for part in parts:
        infinite = np.isinf(part)
        if infinite.any():
            first = _extreme(field, rows, part, part.ravel()[np.argmax(infinite)])
            return Survey(part.size, infinite=int(infinite.sum()), first_infinite=first)
    values = field.combine(parts)
    valid = ~np.isnan(values)
    others = tuple(axis for axis in range(values.ndim) if axis != values.ndim - 2)
    weight = np.cos(np.deg2rad(field.latitude.centres[rows]))
    found = np.where(valid, values, 0)
    low, high = (pick.reduce(values, axis=None) for pick in (np.fmin, np.fmax))
    impossible, rounded, unusual = _outside(field.known, values, float(low), float(high))
    return Survey(
        count=values.size,
        missing=int(values.size - valid.sum()),
        weight=float(valid.sum(axis=others) @ weight),
        total=float(found.sum(axis=others, dtype=np.float64) @ weight),
        low=_extreme(field, rows, values, low),
        high=_extreme(field, rows, values, high),
        impossible=impossible,
        rounded=rounded,
        unusual=unusual,
    )


def _outside(
    known: InputVariable | None, values: NDArray[np.float32], lowest: float, highest: float
) -> tuple[int, int, int]:
    """How many values are impossible, impossible by rounding only, and unusual."""
    if known is None:
        return 0, 0, 0

    def beyond(low: float, high: float) -> int:
        if not (lowest < low or highest > high):
            return 0
        return int(((values < low) | (values > high)).sum())

    low, high = known.valid
    margin = ROUNDING_SHARE * (high - low) if known.units == "1" else 0.0
    impossible = beyond(low - margin, high + margin)
    return impossible, beyond(low, high) - impossible, beyond(*known.usual)


def _extreme(
    field: Field, rows: slice, values: NDArray[np.float32], value: np.float32
) -> Extreme | None:
    """A value and the first place where it stands."""
    if np.isnan(value):
        return None
    where = np.unravel_index(int(np.argmax(values == value)), values.shape)
    longitude = float(field.longitude.centres[where[-1]])
    return Extreme(
        float(value),
        None if field.steps.is_annual else int(where[0]),
        float(field.latitude.centres[rows][where[-2]]),
        (longitude + 180) % 360 - 180,
    )


def _joined(parts: list[Survey]) -> Survey:
    lows = [part.low for part in parts if part.low is not None]
    highs = [part.high for part in parts if part.high is not None]
    return Survey(
        count=sum(part.count for part in parts),
        missing=sum(part.missing for part in parts),
        weight=sum(part.weight for part in parts),
        total=sum(part.total for part in parts),
        low=min(lows, key=lambda extreme: extreme.value, default=None),
        high=max(highs, key=lambda extreme: extreme.value, default=None),
        impossible=sum(part.impossible for part in parts),
        rounded=sum(part.rounded for part in parts),
        unusual=sum(part.unusual for part in parts),
        infinite=sum(part.infinite for part in parts),
        first_infinite=next((p.first_infinite for p in parts if p.first_infinite), None),
    )


def judge(field: Field, found: Survey) -> Iterator[Finding]:
    """Errors for what is impossible, warnings for what is odd."""
    low, high = found.low, found.high
    if found.first_infinite is not None:
        number = "value is" if found.infinite == 1 else "values are"
        yield Finding(
            "error",
            f"{field.label}: {found.infinite} {number} infinite, the first "
            f"{found.first_infinite.place()}; declare what stands for missing as _FillValue, or "
            "correct the file.",
        )
        return
    if low is None or high is None:
        yield Finding(
            "error",
            f"{field.label}: every value is missing; check its fill value, its valid range and its "
            "variable.",
        )
        return
    known = field.known
    if known is None:
        return
    unit = "" if known.units == "1" else f" {known.units}"
    span = f"{known.valid[0]:g} to {known.valid[1]:g}{unit}"
    if found.impossible:
        yield Finding("error", _impossible(field, found, known, low, high, span))
        return
    yield from _percent(field, high)
    if found.rounded:
        yield Finding(
            "warning",
            f"{field.label}: {found.rounded} values lie beyond {span} by rounding and are taken as "
            f"its ends (worst {_worst(known, low, high).value:.5g}).",
        )
    if low.value == high.value and found.count > 1:
        yield Finding(
            "warning", f"{field.label}: every value is {low.value:g}; is it the right one?"
        )
    elif found.unusual > found.rounded:
        usual = f"{known.usual[0]:g} to {known.usual[1]:g}{unit}"
        worst = _worst(known, low, high)
        yield Finding(
            "warning",
            f"{field.label}: {found.unusual} of {found.count - found.missing} values lie outside "
            f"the usual {usual} (worst {worst.value:.4g} {worst.place()}).",
        )


def _percent(field: Field, high: Extreme) -> Iterator[Finding]:
    """A share that is called percent but never exceeds one percent is hardly in percent."""
    conversion, known = field.conversion, field.known
    percent = field.divisor is None and conversion.factor == PERCENT and conversion.offset == 0.0
    if known is None or known.units != "1" or not percent:
        return
    if 0.0 < high.value <= PERCENT * (1 + ROUNDING_SHARE):
        unit = f'units = "1" in [inputs.{known.name}]'
        sure = "" if conversion.overridden else ', and if it is in percent, units = "percent"'
        yield Finding(
            "warning" if conversion.overridden else "error",
            f'{field.label}: its unit is "{conversion.found}", but its largest value is '
            f"{high.value / PERCENT:.3g} percent; if it holds fractions, say {unit}{sure}.",
        )


def _impossible(
    field: Field, found: Survey, known: InputVariable, low: Extreme, high: Extreme, span: str
) -> str:
    worst = _worst(known, low, high)
    message = (
        f"{field.label}: {found.impossible} of {found.count - found.missing} values are outside "
        f"the possible {span}, the worst {worst.value:.4g} {worst.place()}"
    )
    if known.difference and low.value > 150:
        return (
            f"{message}; these are absolute temperatures, so give the daily range, or "
            "temperature_maximum and temperature_minimum."
        )
    unit = suggestion(known, low.value, high.value, field.conversion)
    if unit is not None:
        return f'{message}; if they are in {unit}, say units = "{unit}" in [inputs.{known.name}].'
    return f"{message}; check its unit, fill value and variable."


def _worst(known: InputVariable, low: Extreme, high: Extreme) -> Extreme:
    """The extreme that lies farthest outside the usual range."""
    usual_low, usual_high = known.usual
    return high if high.value - usual_high >= usual_low - low.value else low
