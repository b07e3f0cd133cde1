"""Which calendar month each step of a time axis belongs to."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gridcool.errors import InputDataError

FloatArray = NDArray[np.float64]

MONTH_NAMES = (
    "January", "February", "March", "April", "May", "June",
    "July", "August", "September", "October", "November", "December",
)  # fmt: skip

#: A single step that spans at least so many days is a whole year.
WHOLE_YEAR_DAYS = 300.0


@dataclass(frozen=True)
class Steps:
    """The months of a time axis.

    Attributes
    ----------
    months : tuple of int
        Month (0 to 11) of each step; empty for one annual field.
    years : int
        Number of years that the steps come from; 0 if they are a climatology already.
    calendar : str
        CF name of the calendar, where steps are dates.
    description : str
    warnings : tuple of str
    step_years : tuple of int
        Year of each step, or a number that stands for it; empty if there is none.
    """

    months: tuple[int, ...]
    years: int
    calendar: str
    description: str
    warnings: tuple[str, ...] = ()
    step_years: tuple[int, ...] = ()

    @property
    def is_annual(self) -> bool:
        """Whether there is one field for the whole year."""
        return not self.months

    @property
    def is_plain(self) -> bool:
        """Whether each month has exactly one step."""
        return len(self.months) == 12


def annual(description: str = "one field for the whole year", *warnings: str) -> Steps:
    """A single field without months."""
    return Steps((), 0, "", description, warnings)


def read_steps(
    count: int,
    values: FloatArray | None,
    attributes: Mapping[str, Any],
    bounds: FloatArray | None = None,
) -> Steps:
    """Understand a time axis.

    Recognised are dates in any CF calendar, months or years since a date, numbers of months, dates
    written as digits (198001 or 19800116), and a bare index whose length is a multiple of twelve,
    which then starts with January.

    Parameters
    ----------
    count : int
        Number of steps.
    values : array or None
        Coordinate values, undecoded; None if the axis has none.
    attributes : mapping
        Attributes of the coordinate.
    bounds : array, shape (count, 2), or None
        Bounds of each step in the same unit.

    Raises
    ------
    InputDataError
        If months are missing or the axis makes no sense.
    """
    unit = str(attributes.get("units", "")).strip()
    if values is None or not np.isfinite(values).all():
        return _bare(count)
    if re.match(r"\w+\s+since\s", unit, flags=re.IGNORECASE):
        return _dated(values, unit, attributes, bounds)
    if unit.lower().startswith(("day as %y%m%d", "month as %y%m")):
        return _from_digits(values)
    if count == 1:
        return annual()
    whole = np.round(values)
    if np.array_equal(np.sort(whole), np.arange(1, 13)) and np.allclose(whole, values):
        months = tuple(int(value) - 1 for value in whole)
        return Steps(months, 0, "", "12 months, by number")
    if _looks_like_digits(whole):
        return _from_digits(values)
    return _bare(count)


def _bare(count: int) -> Steps:
    if count == 1:
        return annual()
    if count % 12:
        raise InputDataError(
            f"its time axis has {count} steps without dates, which is no whole number of years; "
            "give twelve months, a multiple of twelve, or one annual field."
        )
    years = count // 12
    months = tuple(range(12)) * years
    description = "12 months" if years == 1 else f"{count} months, averaged over {years} years"
    note = "the time axis has no dates; the first step is taken as January."
    of_step = tuple(np.repeat(np.arange(years), 12).tolist())
    return Steps(months, 0 if years == 1 else years, "", description, (note,), of_step)


def _dated(
    values: FloatArray, unit: str, attributes: Mapping[str, Any], bounds: FloatArray | None
) -> Steps:
    calendar = str(attributes.get("calendar", "standard")).lower()
    use_bounds = bounds is not None and "climatology" not in attributes
    moments = bounds.mean(axis=1) if bounds is not None and use_bounds else values
    try:
        dates = _dates(moments, unit, calendar)
        if len(values) == 1:
            return _single_date(dates[0], unit, calendar, bounds)
    except (ValueError, TypeError, OverflowError) as problem:
        raise InputDataError(
            f'its time unit "{unit}" in the {calendar} calendar is not understood ({problem}); '
            "correct the time axis."
        ) from None
    return _monthly(dates, calendar)


def _dates(values: FloatArray, unit: str, calendar: str) -> list[tuple[int, int]]:
    """Year and month (1 to 12) of each moment."""
    import cftime

    counted = re.match(r"(common_|calendar_)?(month|year)s?\s+since\s+(.*)", unit, re.IGNORECASE)
    if counted is None:
        moments = np.atleast_1d(
            cftime.num2date(values, unit, calendar, only_use_cftime_datetimes=True)
        )
        return [(int(moment.year), int(moment.month)) for moment in moments]
    # UDUNITS' month is a twelfth of a tropical year; files mean calendar months.
    start = cftime.num2date(0, f"days since {counted[3]}", calendar, only_use_cftime_datetimes=True)
    per_unit = 12 if counted[2].lower() == "year" else 1
    since = start.year * 12 + start.month - 1 + np.floor(values * per_unit + 1e-6).astype(int)
    return [(int(month) // 12, int(month) % 12 + 1) for month in since]


def _single_date(
    date: tuple[int, int], unit: str, calendar: str, bounds: FloatArray | None
) -> Steps:
    year, month = date
    when = f"{MONTH_NAMES[month - 1]} {year}"
    if bounds is None or bounds.size != 2:
        return annual(
            "one field for the whole year",
            f"its single field is dated {when} and is used for every month; "
            "check that it is an annual mean.",
        )
    first, last = _dates(np.sort(bounds.ravel()), unit, calendar)
    span = (last[0] - first[0]) * 12 + last[1] - first[1]
    if span * 30.5 < WHOLE_YEAR_DAYS:
        raise InputDataError(f"it holds {when} only; give twelve months or one annual field.")
    return annual(f"one field for the whole year ({year})")


def _looks_like_digits(values: FloatArray) -> bool:
    years, months = np.divmod(values, 100)
    if (values > 1e6).all():
        years, months = np.divmod(values // 100, 100)
    return bool(((months >= 1) & (months <= 12) & (years > 1000) & (years < 3000)).all())


def _from_digits(values: FloatArray) -> Steps:
    numbers = np.floor(np.abs(values)).astype(np.int64)
    if not _looks_like_digits(numbers.astype(float)):
        raise InputDataError("its time axis is not made of dates like 19800116; correct it.")
    short = np.where(numbers > 1_000_000, numbers // 100, numbers)
    return _monthly([(int(n) // 100, int(n) % 100) for n in short], "")


def _monthly(dates: list[tuple[int, int]], calendar: str) -> Steps:
    months = tuple(month - 1 for _, month in dates)
    absent = [name for index, name in enumerate(MONTH_NAMES) if index not in set(months)]
    if absent:
        listed = ", ".join(absent) if len(absent) <= 4 else f"{len(absent)} of the twelve months"
        raise InputDataError(
            f"its {len(dates)} time steps leave out {listed}; give all twelve months."
        )
    of_step = tuple(year for year, _ in dates)
    seen = sorted(set(of_step))
    in_calendar = f", {calendar} calendar" if calendar not in ("", "standard", "gregorian") else ""
    if len(dates) == 12:
        description = f"12 months of {_span(seen)}{in_calendar}"
        return Steps(months, 1, calendar, description, step_years=of_step)
    counts = np.bincount(months, minlength=12)
    unequal = ""
    if counts.min() != counts.max():
        unequal = f"; {counts.min()} to {counts.max()} steps a month"
    description = f"{len(dates)} steps of {_span(seen)}, averaged by month{unequal}{in_calendar}"
    years = max(1, round(len(dates) / 12)) if len(dates) < 13 * len(seen) else len(seen)
    return Steps(months, years, calendar, description, step_years=of_step)


def _span(years: list[int]) -> str:
    return str(years[0]) if len(years) == 1 else f"{years[0]}-{years[-1]}"
