"""Neighbouring rows whose cells are worked on together.

What is done cell by cell is done for all of them at once, which keeps Python's own share of the
time small where rows are short; what needs a row's path integrals is done row by row, in the same
shapes whichever rows stand together, so that the result does not depend on them.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gridcool.engine.optimum import Best
from gridcool.engine.plan import RowTables

FloatArray = NDArray[np.floating]


@dataclass(frozen=True, eq=False)
class Rows:
    """Rows, one after the other, and how many of the cells are in each.

    Attributes
    ----------
    tables : tuple of RowTables
    latitudes : array, shape (rows,)
        Radians.
    counts : array of int, shape (rows,)
        Number of cells of each row; cells are ordered by row.
    """

    tables: tuple[RowTables, ...]
    latitudes: FloatArray
    counts: NDArray[np.intp]

    def only(self, chosen: NDArray[np.bool_]) -> Rows:
        """The same rows with some of their cells, ``chosen`` of shape (cells,)."""
        kept = [int(chosen[part].sum()) for _, part in self.parts()]
        return replace(self, counts=np.array(kept))

    def parts(self) -> Iterator[tuple[RowTables, slice]]:
        """Each row's tables and where its cells are."""
        ends = np.cumsum(self.counts)
        for tables, end, count in zip(self.tables, ends, self.counts, strict=True):
            yield tables, slice(int(end - count), int(end))

    def spread(self, values: FloatArray) -> FloatArray:
        """Values by row, shape (..., rows), for the cells, shape (..., cells)."""
        return np.repeat(values, self.counts, axis=-1)

    @cached_property
    def index(self) -> NDArray[np.intp]:
        """The row of each cell, shape (cells,)."""
        return np.repeat(np.arange(len(self.tables)), self.counts)

    @cached_property
    def extraterrestrial(self) -> FloatArray:
        """R_a over each cell, shape (12, cells), W m-2."""
        each = [tables.response.extraterrestrial for tables in self.tables]
        return self.spread(np.stack(each, axis=-1))

    def path_integrals(self, best: Best) -> FloatArray:
        """Monthly path integrals at each cell's best orientation, shape (rows of tables, cells)."""
        found = [best.part(part).interpolate(tables.monthly) for tables, part in self.parts()]
        return np.concatenate(found, axis=1)

    def low_rays(self, best: Best) -> FloatArray:
        """Hours of low rays by sector at each cell's best orientation, shape (sectors, cells)."""
        found = [
            best.part(part).interpolate(tables.response.low_rays) for tables, part in self.parts()
        ]
        return np.concatenate(found, axis=1)
