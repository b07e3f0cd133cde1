"""How long a classic NetCDF file must be, by its own header.

The netCDF library reads what a broken off file lacks as zeros without a word, so its length is
checked before. The header is laid out as "NetCDF Classic Format Specification" says (NetCDF User's
Guide, appendix B.1; the 64-bit data variant is the one PnetCDF added as CDF-5).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO, TypeVar

from gridcool.errors import InputDataError

T = TypeVar("T")

CLASSIC_MARKS = (b"CDF\x01", b"CDF\x02", b"CDF\x05")
DIMENSIONS, VARIABLES, ATTRIBUTES = 10, 11, 12
#: Bytes of a value by type number: byte, char, short, int, float, double, then those of CDF-5.
VALUE_BYTES = {1: 1, 2: 1, 3: 2, 4: 4, 5: 4, 6: 8, 7: 1, 8: 2, 9: 4, 10: 8, 11: 8}


@dataclass(frozen=True)
class _Variable:
    begin: int
    """Where its data begin."""
    size: int
    """Bytes of its data, or of those of one record."""
    in_records: bool

    @property
    def padded(self) -> int:
        return _padded(self.size)


def refuse_truncated(path: Path) -> None:
    """Compare the length of a classic NetCDF file with what its header announces.

    Raises
    ------
    InputDataError
        If the file is shorter, or the header itself breaks off or makes no sense.
    """
    actual = path.stat().st_size
    try:
        with path.open("rb") as file:
            expected = _announced_size(file)
    except (EOFError, KeyError, IndexError, OverflowError):
        raise InputDataError(
            f"the NetCDF file breaks off or is damaged within its header ({actual} bytes in all); "
            "fetch or write it again."
        ) from None
    if actual < expected:
        raise InputDataError(
            f"the NetCDF file is cut off: by its header it has at least {expected} bytes, but "
            f"there are {actual}; fetch or write it again."
        )


def _announced_size(file: BinaryIO) -> int:
    """Where the last value of the last variable ends.

    Raises
    ------
    EOFError, KeyError, IndexError
        If the header breaks off or makes no sense.
    """
    version = file.read(4)[3]
    header = _Header(file, count=8 if version == 5 else 4, offset=4 if version == 1 else 8)
    records = header.count()
    if records == 2 ** (8 * header.count_bytes) - 1:
        records = 0  # written to a stream: the length of the file tells their number
    lengths = header.list_of(DIMENSIONS, header.dimension)
    header.list_of(ATTRIBUTES, header.attribute)
    variables = header.list_of(VARIABLES, lambda: header.variable(lengths))
    ends = [file.tell(), *(v.begin + v.size for v in variables if not v.in_records)]
    recorded = [v for v in variables if v.in_records]
    # A lone variable with records is not padded between them.
    record = sum(v.padded for v in recorded) if len(recorded) > 1 else sum(v.size for v in recorded)
    if records:
        ends += [v.begin + (records - 1) * record + v.size for v in recorded]
    return max(ends)


class _Header:
    """Reads the header's parts one after the other; all numbers are big-endian."""

    def __init__(self, file: BinaryIO, *, count: int, offset: int) -> None:
        self._file = file
        self.count_bytes = count
        self._offset_bytes = offset

    def _number(self, size: int) -> int:
        found = self._file.read(size)
        if len(found) < size:
            raise EOFError
        return int.from_bytes(found, "big")

    def count(self) -> int:
        return self._number(self.count_bytes)

    def _pass(self, size: int) -> None:
        """Go over bytes that are filled up to a multiple of four."""
        self._file.seek(_padded(size), 1)

    def list_of(self, mark: int, read: Callable[[], T]) -> list[T]:
        found, count = self._number(4), self.count()
        if found not in (0, mark) or (found == 0 and count):
            raise KeyError(found)
        return [read() for _ in range(count)]

    def dimension(self) -> int:
        """Length of a dimension, 0 for that of the records."""
        self._pass(self.count())
        return self.count()

    def attribute(self) -> None:
        self._pass(self.count())
        kind = self._number(4)
        self._pass(self.count() * VALUE_BYTES[kind])

    def variable(self, lengths: list[int]) -> _Variable:
        self._pass(self.count())
        shape = [lengths[self.count()] for _ in range(self.count())]
        self.list_of(ATTRIBUTES, self.attribute)
        kind = self._number(4)
        self.count()  # the size as written, which is no use beyond 4 GiB
        begin = self._number(self._offset_bytes)
        in_records = bool(shape) and shape[0] == 0
        cells = math.prod(shape[1:] if in_records else shape)
        return _Variable(begin, cells * VALUE_BYTES[kind], in_records)


def _padded(size: int) -> int:
    return size + -size % 4
