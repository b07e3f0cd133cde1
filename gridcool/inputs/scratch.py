"""Values kept while a run lasts: small ones in memory, large ones in a nameless temporary file."""

from __future__ import annotations

import os
import tempfile
import weakref

import numpy as np
from numpy.typing import NDArray

from gridcool.errors import OutputError

#: Up to so many bytes are kept in memory.
IN_MEMORY = 64_000_000


class Scratch:
    """Planes of single precision values, written in pieces and read in whole rows.

    A temporary file has no name, so it is gone with the process, however that ends. It is read by
    position, which threads may do at once.

    Parameters
    ----------
    planes, rows, columns : int

    Raises
    ------
    OutputError
        If the folder for temporary files has no room.
    """

    def __init__(self, planes: int, rows: int, columns: int) -> None:
        self.shape = (planes, rows, columns)
        size = planes * rows * columns * 4
        self._values: NDArray[np.float32] | None = None
        if size <= IN_MEMORY:
            self._values = np.empty(self.shape, np.float32)
            return
        file = tempfile.TemporaryFile(prefix="gridcool-")  # noqa: SIM115
        weakref.finalize(self, file.close)
        self._file = file.fileno()
        try:
            os.posix_fallocate(self._file, 0, size)
        except OSError as problem:
            raise OutputError(
                f"there is no room for {size / 1e9:.1f} GB of temporary data in "
                f"{tempfile.gettempdir()} ({problem.strerror}); free it, or name a folder with "
                "room in the environment variable TMPDIR."
            ) from None

    def write(self, plane: int, row: int, column: int, values: NDArray[np.float32]) -> None:
        """Put a piece, shape (rows, columns), where its first value belongs."""
        _, rows, columns = self.shape
        if self._values is not None:
            height, width = values.shape
            self._values[plane, row : row + height, column : column + width] = values
            return
        whole = values.shape[1] == columns
        pieces = [values] if whole else list(values)
        for index, piece in enumerate(pieces):
            place = ((plane * rows + row + index) * columns + column) * 4
            self._put(np.ascontiguousarray(piece), place)

    def read(self, rows: slice) -> NDArray[np.float32]:
        """Some rows of all planes, shape (planes, rows, columns)."""
        if self._values is not None:
            return self._values[:, rows].copy()
        planes, height, columns = self.shape
        result = np.empty((planes, rows.stop - rows.start, columns), np.float32)
        for plane in range(planes):
            self._get(result[plane], (plane * height + rows.start) * columns * 4)
        return result

    def _put(self, values: NDArray[np.float32], place: int) -> None:
        left = values.data.cast("B")
        while left:
            done = os.pwrite(self._file, left, place)
            left, place = left[done:], place + done

    def _get(self, values: NDArray[np.float32], place: int) -> None:
        left = values.data.cast("B")
        while left:
            done = os.preadv(self._file, [left], place)
            left, place = left[done:], place + done
