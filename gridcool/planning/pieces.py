"""The eligible cells of all regions in two flat arrays, and sums over them."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gridcool.planning.regions import Cover

FloatArray = NDArray[np.floating]


@dataclass(frozen=True, eq=False)
class Pieces:
    """Covered cells of regions, one region after the other.

    Attributes
    ----------
    cells : array of int, shape (covered,)
        Row-major indices into the grid; a cell on a border stands under each of its regions.
    areas : array, shape (covered,)
        Covered area of each, m2.
    ends : array of int, shape (regions,)
        Where each region ends.
    """

    cells: NDArray[np.integer]
    areas: FloatArray
    ends: NDArray[np.intp]

    @staticmethod
    def of(covers: Sequence[Cover], usable: NDArray[np.bool_]) -> Pieces:
        """The usable cells of ``covers``; ``usable`` has the grid's shape."""
        flat = usable.ravel()
        small = np.int32 if flat.size < 2**31 else np.int64
        cells, areas = [], []
        for cover in covers:
            inside = flat[cover.cells] & (cover.areas > 0)
            cells.append(cover.cells[inside].astype(small))
            areas.append(cover.areas[inside])
        ends = np.cumsum([len(each) for each in cells]) if cells else np.zeros(0, np.intp)
        empty = np.zeros(0)
        return Pieces(
            np.concatenate(cells) if cells else empty.astype(small),
            np.concatenate(areas) if areas else empty,
            np.asarray(ends, np.intp),
        )

    def __iter__(self) -> Iterator[slice]:
        """Where each region's cells stand."""
        starts = np.concatenate([[0], self.ends[:-1]]) if len(self.ends) else self.ends
        for start, end in zip(starts, self.ends, strict=True):
            yield slice(int(start), int(end))

    @cached_property
    def area(self) -> FloatArray:
        """Area of each region's cells, shape (regions,), m2."""
        return self.sums(self.areas)

    def sums(self, values: FloatArray) -> FloatArray:
        """Sum over each region's cells, shape (regions,)."""
        return np.array([values[part].sum(dtype=float) for part in self])

    def mean(self, layer: FloatArray) -> FloatArray:
        """Area-weighted mean of a layer over each region; NaN where nothing of it is known.

        Cells in which the layer is missing do not count.
        """
        values = layer.ravel()[self.cells]
        known = np.isfinite(values)
        weight = self.sums(np.where(known, self.areas, 0.0))
        total = self.sums(np.where(known, values, 0.0) * self.areas)
        return np.asarray(
            np.divide(total, weight, out=np.full(len(weight), np.nan), where=weight > 0)
        )
