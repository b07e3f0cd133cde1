"""The stored numbers of one variable, read in the pieces in which the file holds them.

Compressed files hold pieces that may be whole maps, or hundreds of rows of all months, while the
work goes by strips of rows. Whoever reads by `tiles` and `blocks` unpacks each piece only once.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gridcool.errors import InputDataError
from gridcool.inputs.conventions import Layout


class Stored:
    """Reads steps, rows and columns of a variable, all in the order of the file.

    Parameters
    ----------
    variable : xarray.Variable
        Lazy and undecoded.
    layout : Layout
        Its dimensions by role.
    label : str
        How messages name the input.
    """

    def __init__(self, variable: xr.Variable, layout: Layout, label: str) -> None:
        self._variable, self._layout, self._label = variable, layout, label
        sizes = variable.sizes
        pieces = variable.encoding.get("preferred_chunks") or {}
        self.steps = sizes[layout.time] if layout.time is not None else 1
        self.has_hours = layout.hour is not None
        self.hours = sizes[layout.hour] if layout.hour is not None else 1
        self._piece = (
            min(int(pieces.get(layout.time, 1)), self.steps),
            int(pieces.get(layout.latitude, 1)),
            int(pieces.get(layout.longitude, sizes[layout.longitude])),
        )

    @property
    def in_pieces(self) -> bool:
        """Whether a row cannot be read without unpacking other rows or steps."""
        steps, rows, _ = self._piece
        return steps > 1 or rows > 1

    @property
    def steps_together(self) -> int:
        """How many steps lie in one piece."""
        return self._piece[0]

    def blocks(self) -> list[slice]:
        """The steps, cut as the pieces are."""
        width = self.steps_together
        return [slice(n, min(n + width, self.steps)) for n in range(0, self.steps, width)]

    def tiles(self, rows: int, columns: int, cells: int) -> Iterator[tuple[slice, slice]]:
        """The rows and columns, cut into groups of whole pieces.

        Parameters
        ----------
        rows, columns : int
            How many there are.
        cells : int
            How many a tile should hold at most; one piece is the least.
        """
        _, height, width = self._piece
        if height * columns <= cells:
            height, width = height * (cells // (height * columns)), columns
        else:
            width *= max(1, cells // (height * width))
        for top in range(0, rows, height):
            for left in range(0, columns, width):
                yield (
                    slice(top, min(top + height, rows)),
                    slice(left, min(left + width, columns)),
                )

    def load(self, steps: slice, rows: slice, columns: slice) -> NDArray[Any]:
        """Stored numbers, shape (steps, rows, columns) or (steps, hours, rows, columns).

        Raises
        ------
        InputDataError
            If the file breaks off.
        """
        layout = self._layout
        index: dict[Any, Any] = dict.fromkeys(layout.extra, 0)
        index[layout.latitude], index[layout.longitude] = rows, columns
        if layout.time is not None:
            index[layout.time] = steps
        part = self._variable.isel(index)
        roles = (layout.time, layout.hour, layout.latitude, layout.longitude)
        try:
            values = part.transpose(*(role for role in roles if role is not None)).values
        except (OSError, RuntimeError, ValueError, IndexError) as problem:
            reason = (str(problem).strip() or type(problem).__name__).splitlines()[0]
            raise InputDataError(
                f"{self._label}: the data cannot be read ({reason}); "
                "the file is damaged or incomplete, so fetch or write it again."
            ) from None
        return np.asarray(values if layout.time is not None else values[np.newaxis])
