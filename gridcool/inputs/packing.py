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
    """How stored numbers are read: ``value = stored * scale + offset``.

    Stored numbers that are one of ``fills``, or lie below ``lowest`` or above ``highest``, are
    missing.
    """

    fills: tuple[float, ...] = ()
    scale: float = 1.0
    offset: float = 0.0
    reinterpret: str = ""
    lowest: float = -np.inf
    highest: float = np.inf

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
        # What is too large for single precision becomes infinite, which the check reports.
        with np.errstate(over="ignore"):
            if scale == 1.0 and offset == 0.0:
                values = stored.astype(np.float32, copy=True)
            else:
                values = (stored.astype(np.float64) * scale + offset).astype(np.float32)
        if missing is not None:
            values[missing] = np.nan
        return values

    def _missing(self, stored: NDArray[Any]) -> NDArray[np.bool_] | None:
        kind = stored.dtype
        found = []
        for fill in self.fills:
            if kind.kind in "iu":
                limits = np.iinfo(kind)
                if not (limits.min <= fill <= limits.max and fill == int(fill)):
                    continue
            found.append(np.asarray(stored == kind.type(fill)))
        # In the data's own precision, lest 0.3 in single precision exceed 0.3 in double.
        own = kind.type if kind.kind == "f" else np.float64
        if self.lowest > -np.inf:
            found.append(np.asarray(stored < own(self.lowest)))
        if self.highest < np.inf:
            found.append(np.asarray(stored > own(self.highest)))
        return np.logical_or.reduce(found) if found else None


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
    unique = dict.fromkeys(fill for fill in fills if not np.isnan(fill))
    lowest, highest = _valid_range(attributes, kind, reinterpret, scale[0], offset[0])
    return Packing(tuple(unique), scale[0], offset[0], reinterpret, lowest, highest)


def _valid_range(
    attributes: Mapping[str, Any],
    kind: np.dtype[Any],
    reinterpret: str,
    scale: float,
    offset: float,
) -> tuple[float, float]:
    """The range of stored numbers that ``valid_range``, ``valid_min``, ``valid_max`` declare.

    They are of the type of the stored numbers; where they are of the wider type of the packing
    instead, they are about the values (NetCDF User's Guide, attribute conventions).
    """
    sources = ("valid_range",) if "valid_range" in attributes else ("valid_min", "valid_max")
    if sources == ("valid_range",):
        ends = _numbers(attributes, "valid_range")
        if len(ends) != 2:
            raise InputDataError(
                f"its attribute valid_range has {len(ends)} numbers instead of 2; correct the file."
            )
    else:
        beyond = (-np.inf, np.inf)
        ends = [
            (_numbers(attributes, key) or [end])[0]
            for key, end in zip(sources, beyond, strict=True)
        ]
    ends = [
        end if not np.isnan(end) else far for end, far in zip(ends, (-np.inf, np.inf), strict=True)
    ]
    if kind.kind == "f":
        return min(ends), max(ends)
    wide = any(
        np.asarray(attributes[key]).dtype.kind == "f" for key in sources if key in attributes
    )
    if wide and ("scale_factor" in attributes or "add_offset" in attributes):
        # To the nearest thousandth, since the division may miss a whole number.
        ends = [round((end - offset) / scale, 3) for end in ends]
    elif reinterpret.startswith("u"):
        ends = [end + 2 ** (8 * kind.itemsize) if -np.inf < end < 0 else end for end in ends]
    return min(ends), max(ends)


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
