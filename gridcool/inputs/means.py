"""Monthly means of one variable, and how much its years differ.

What a file holds in pieces (compressed, mostly), or in more steps than months, is read and averaged
once, when it is first asked for, and kept until the run ends; the rest is read from the file itself
as often as it is needed.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator
from threading import Lock
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gridcool.inputs.axes import Axis
from gridcool.inputs.calendar import Steps
from gridcool.inputs.scratch import Scratch
from gridcool.inputs.stored import Stored

Unpack = Callable[[NDArray[Any]], NDArray[np.float32]]

#: Bytes to work on at once, as far as the file's pieces allow.
WORKING_BYTES = 256_000_000
#: Bytes of the sums that one month of one cell needs, and of those where years have many steps.
SUM_BYTES, GROUPED_BYTES = 20, 44
#: Cells whose values are turned from stored numbers to sums at once.
PASSING_CELLS = 2_000_000


class MonthlyMeans:
    """Means of the steps of each month, north first and west first.

    Parameters
    ----------
    stored : Stored
    unpack : callable
        From stored numbers to values, NaN where missing.
    steps : Steps
    latitude, longitude : Axis
    spread : bool
        Whether the standard error will be asked for.
    """

    def __init__(
        self,
        stored: Stored,
        unpack: Unpack,
        steps: Steps,
        latitude: Axis,
        longitude: Axis,
        *,
        spread: bool,
    ) -> None:
        self._stored, self._unpack = stored, unpack
        self._months = (0,) if steps.is_annual else steps.months
        self._years = steps.step_years or (0,) * len(self._months)
        self._latitude, self._longitude = latitude, longitude
        self._spread = spread
        dates = set(zip(self._months, self._years, strict=True))
        self._grouped = spread and len(dates) < len(self._months)
        self._planes = len(set(self._months)) * stored.hours
        self._lock = Lock()
        self._kept: Scratch | None = None
        self._errors: Scratch | None = None

    def __getstate__(self) -> dict[str, Any]:
        """Another process reads the file itself."""
        state = vars(self).copy()
        return {**state, "_lock": None, "_kept": None, "_errors": None}

    def __setstate__(self, state: dict[str, Any]) -> None:
        vars(self).update(state, _lock=Lock())

    def read(self, rows: slice) -> NDArray[np.float32]:
        """Means of some rows, shape (months, rows, columns) or (months, hours, rows, columns).

        Raises
        ------
        InputDataError
            If the file breaks off.
        OutputError
            If there is no room for temporary data.
        """
        if self._stored.in_pieces or self._planes < len(self._months) * self._stored.hours:
            self._prepare()
        if self._kept is not None:
            return self._shaped(self._kept.read(rows))
        columns = slice(0, len(self._longitude))
        shape = (self._planes, rows.stop - rows.start, len(self._longitude))
        values = np.empty(shape, np.float32).reshape(-1, self._stored.hours, *shape[1:])
        for step, month in enumerate(self._months):
            raw = self._stored.load(slice(step, step + 1), self._latitude.in_file(rows), columns)
            values[month] = self._turned(self._unpack(raw[0]))
        return self._shaped(values.reshape(shape))

    def read_standard_error(self, rows: slice) -> NDArray[np.float32]:
        """Standard error of the means, from the spread of the years; NaN with fewer than two."""
        self._prepare()
        if self._errors is None:
            raise ValueError("the means were set up without their spread")
        return self._errors.read(rows)

    def _shaped(self, planes: NDArray[np.float32]) -> NDArray[np.float32]:
        if self._stored.has_hours:
            return planes.reshape(-1, self._stored.hours, *planes.shape[1:])
        return planes

    def _turned(self, values: NDArray[np.float32]) -> NDArray[np.float32]:
        """From the order of the file to north first and west first."""
        values = values[..., :: -1 if self._latitude.reversed else 1, :]
        return values[..., :: -1 if self._longitude.reversed else 1]

    def _prepare(self) -> None:
        with self._lock:
            if self._kept is not None:
                return
            rows, columns = len(self._latitude), len(self._longitude)
            kept = Scratch(self._planes, rows, columns)
            if self._spread:
                self._errors = Scratch(self._planes, rows, columns)
            for tile in self._stored.tiles(rows, columns, self._cells()):
                self._fill(kept, *tile)
            self._kept = kept

    def _cells(self) -> int:
        """How many cells to work on at once."""
        together = self._stored.steps_together
        repeated = len(self._months) > len(set(self._months))
        each = GROUPED_BYTES if self._grouped else SUM_BYTES
        sums = each * min(12, together) if repeated else 0
        return max(1, WORKING_BYTES // (self._stored.hours * (8 * together + sums)))

    def _order(self) -> Iterator[tuple[slice, list[int]]]:
        """What to read one after the other, and which steps it holds.

        Single steps are taken month by month, so that one month's sums are held at a time. Pieces
        of several steps are taken as they lie, unless the years of a month are in disorder.
        """
        keys = list(zip(self._months, self._years, strict=True))
        orderly = all(
            [year for m, year in keys if m == month]
            == sorted(year for m, year in keys if m == month)
            for month in set(self._months)
        )
        if self._stored.steps_together > 1 and orderly:
            for block in self._stored.blocks():
                yield block, list(range(block.start, block.stop))
            return
        for step in sorted(range(len(keys)), key=keys.__getitem__):
            yield slice(step, step + 1), [step]

    def _fill(self, kept: Scratch, rows: slice, columns: slice) -> None:
        """Average a tile; sums are held for a few rows each, so that passing values stay small."""
        left = Counter(self._months)
        several = {month for month, count in left.items() if count > 1}
        sums: dict[tuple[int, int], _Sums] = {}
        width = self._stored.hours * (columns.stop - columns.start)
        parts = _cut(rows, max(1, PASSING_CELLS // width))
        for block, steps in self._order():
            raw = self._stored.load(block, rows, columns)
            for index, step in enumerate(steps):
                month = self._months[step]
                left[month] -= 1
                for part in parts:
                    within = slice(part.start - rows.start, part.stop - rows.start)
                    values = self._unpack(raw[index][..., within, :])
                    if month not in several:
                        self._write(kept, month, part, columns, values)
                        if self._errors is not None:  # one year tells no spread
                            unknown = np.full_like(values, np.nan)
                            self._write(self._errors, month, part, columns, unknown)
                        continue
                    key = month, part.start
                    if key not in sums:
                        sums[key] = _Sums(values.shape, spread=self._spread, grouped=self._grouped)
                    sums[key].add(values, self._years[step])
                    if left[month]:
                        continue
                    done = sums.pop(key)
                    self._write(kept, month, part, columns, done.mean())
                    if self._errors is not None:
                        self._write(self._errors, month, part, columns, done.standard_error())

    def _write(
        self,
        scratch: Scratch,
        month: int,
        rows: slice,
        columns: slice,
        values: NDArray[np.float32],
    ) -> None:
        top = self._latitude.in_file(rows).start
        left = self._longitude.in_file(columns).start
        planes = self._turned(values).reshape(-1, *values.shape[-2:])
        for hour, plane in enumerate(planes):
            scratch.write(month * self._stored.hours + hour, top, left, plane)


def _cut(rows: slice, height: int) -> list[slice]:
    """A range of rows in parts of so many."""
    starts = range(rows.start, rows.stop, height)
    return [slice(start, min(start + height, rows.stop)) for start in starts]


class _Sums:
    """Running sums of one month.

    For a spread, years come one after the other, each as one step, or (``grouped``) as several.
    Two infinite values of different sign sum to no number; that is made infinite again at the end,
    so that the check reports it.
    """

    def __init__(self, shape: tuple[int, ...], *, spread: bool, grouped: bool) -> None:
        self._spread, self._grouped = spread, grouped
        self._total, self._count = np.zeros(shape), np.zeros(shape, np.int32)
        # Of yearly means: their sum, their number and their sum of squares.
        self._means, self._years = self._total, self._count
        if spread:
            self._squares = np.zeros(shape)
        if grouped:
            self._year: int | None = None
            self._year_total, self._year_count = np.zeros(shape), np.zeros(shape, np.int32)
            self._means, self._years = np.zeros(shape), np.zeros(shape, np.int32)

    def add(self, values: NDArray[np.float32], year: int) -> None:
        found = ~np.isnan(values)
        with np.errstate(invalid="ignore"):
            np.add(self._total, values, out=self._total, where=found)
            self._count += found
            if self._grouped:
                if year != self._year:
                    self._close_year()
                    self._year = year
                np.add(self._year_total, values, out=self._year_total, where=found)
                self._year_count += found
            elif self._spread:
                squares = np.square(values, dtype=np.float64)
                np.add(self._squares, squares, out=self._squares, where=found)

    def _close_year(self) -> None:
        """Count a year as one, however many days of it there are."""
        mean = self._year_total / np.maximum(self._year_count, 1)
        self._means += mean
        self._squares += mean**2
        self._years += self._year_count > 0
        self._year_total[:], self._year_count[:] = 0, 0

    def mean(self) -> NDArray[np.float32]:
        known = self._count > 0
        total = np.where(np.isnan(self._total), np.inf, self._total)
        return np.where(known, total / np.maximum(self._count, 1), np.nan).astype(np.float32)

    def standard_error(self) -> NDArray[np.float32]:
        with np.errstate(invalid="ignore"):
            if self._grouped:
                self._close_year()
            several = self._years > 1
            n = np.where(several, self._years, 2)
            variance = np.maximum(self._squares - self._means**2 / n, 0) / (n - 1)
            return np.where(several, np.sqrt(variance / n), np.nan).astype(np.float32)
