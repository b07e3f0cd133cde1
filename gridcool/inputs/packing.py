"""From numbers as they are stored to single precision values with NaN for missing.

The rules are those of the CF conventions (section 8.1 for packed data, 2.5.1 for missing data).
xarray's decoder is not used for the data themselves: it turns packed 16-bit integers into double
precision, and it overlooks a ``missing_value`` of 1e20 in double precision on single precision
data.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import DTypeLike, NDArray

from gridcool.errors import InputDataError

#: What the netCDF library itself writes where a program wrote nothing, by type.
UNWRITTEN = 9.969209968386869e36


@dataclass(frozen=True)
class Packing:
    """How stored numbers are read: ``value = stored * scale + offset``, fills are missing."""

    fills: tuple[float, ...] = ()
    scale: float = 1.0
    offset: float = 0.0
    reinterpret: str = ""

    @property
    def is_packed(self) -> bool:
        """Whether stored numbers and values differ."""
        return self.scale != 1.0 or self.offset != 0.0

    def unpack(
        self, stored: NDArray[Any], factor: float = 1.0, shift: float = 0.0
    ) -> NDArray[np.float32]:
        """Values, then ``values * factor + shift`` in the same pass, as single precision."""
        if self.reinterpret:
            stored = stored.view(self.reinterpret)
        missing = self._missing(stored)
        scale, offset = self.scale * factor, self.offset * factor + shift
        if scale == 1.0 and offset == 0.0:
            values = stored.astype(np.float32, copy=True)
        else:
            values = (stored.astype(np.float64) * scale + offset).astype(np.float32)
        if missing is not None:
            values[missing] = np.nan
        return values

    def _missing(self, stored: NDArray[Any]) -> NDArray[np.bool_] | None:
        missing: NDArray[np.bool_] | None = None
        for fill in self.fills:
            kind = stored.dtype
            if kind.kind in "iu":
                limits = np.iinfo(kind)
                if not (fill == int(fill) and limits.min <= fill <= limits.max):
                    continue
            found = np.asarray(stored == kind.type(fill))
            missing = found if missing is None else missing | found
        return missing


def packing_from(attributes: Mapping[str, Any], dtype: DTypeLike) -> Packing:
    """The packing that a variable's attributes declare.

    Raises
    ------
    InputDataError
        If an attribute that must be a number is none, or the data are not numbers.
    """
    kind = np.dtype(dtype)
    if kind.kind not in "iufb":
        raise InputDataError(f"it holds {kind} instead of numbers; name another variable.")
    fills = [*_numbers(attributes, "_FillValue"), *_numbers(attributes, "missing_value")]
    if kind.kind == "f":
        fills.append(UNWRITTEN)
    scale = _numbers(attributes, "scale_factor") or [1.0]
    offset = _numbers(attributes, "add_offset") or [0.0]
    reinterpret = _reinterpretation(attributes, kind)
    if reinterpret.startswith("u"):
        fills = [fill % 2 ** (8 * kind.itemsize) if fill < 0 else fill for fill in fills]
    unique = dict.fromkeys(fill for fill in fills if np.isfinite(fill))
    return Packing(tuple(unique), scale[0], offset[0], reinterpret)


def _reinterpretation(attributes: Mapping[str, Any], kind: np.dtype[Any]) -> str:
    """Type to read integers as: files of types without a sign mark it by an attribute."""
    declared = str(attributes.get("_Unsigned", "")).lower()
    if kind.kind == "i" and declared == "true":
        return f"u{kind.itemsize}"
    if kind.kind == "u" and declared == "false":
        return f"i{kind.itemsize}"
    return ""


def _numbers(attributes: Mapping[str, Any], key: str) -> list[float]:
    if key not in attributes:
        return []
    try:
        return [float(value) for value in np.atleast_1d(attributes[key]).ravel()]
    except (TypeError, ValueError):
        raise InputDataError(
            f"its attribute {key} is {attributes[key]!r} instead of a number; correct the file."
        ) from None
