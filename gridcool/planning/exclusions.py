"""Exclusions: structured rules on any input or layer, kept as bits that say why a cell is out."""

from __future__ import annotations

import difflib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import xarray as xr

from gridcool.errors import SettingsError
from gridcool.physics.sun import month_weights
from gridcool.variables import Flag, flag_words

NO_RESULT = Flag(1, "no_result", "no flux, or no value of a criterion, is known here")
MOST_RULES = 15  # with the bit above, what sixteen bits hold


@dataclass(frozen=True)
class ExclusionRule:
    """A reason to leave cells out.

    Attributes
    ----------
    layer : str
        An input or a layer; one with months is judged by its annual mean.
    reason : str
    above, below : float, optional
        Cells beyond either are out.
    equals : tuple of float, optional
        Cells that hold one of these are out.
    missing : {"keep", "out"}
        What becomes of cells in which the layer is missing.
    """

    layer: str
    reason: str
    above: float | None = None
    below: float | None = None
    equals: tuple[float, ...] | None = None
    missing: Literal["keep", "out"] = "keep"


def exclusion_flags(rules: Sequence[ExclusionRule]) -> tuple[Flag, ...]:
    """The bits of the exclusion layer: missing flux, then one bit a rule in their order.

    Raises
    ------
    SettingsError
        If there are more rules than bits.
    """
    if len(rules) > MOST_RULES:
        raise SettingsError(
            f"There are {len(rules)} [[exclude]] rules and at most {MOST_RULES} can be told apart; "
            "join some into one input layer."
        )
    reasons = [rule.reason for rule in rules]
    words = flag_words(reasons, "rule", [NO_RESULT.meaning])
    own = [
        Flag(1 << number, word, reason)
        for number, (word, reason) in enumerate(zip(words, reasons, strict=True), start=1)
    ]
    return (NO_RESULT, *own)


def exclusion_layer(
    layers: xr.Dataset,
    inputs: xr.Dataset,
    rules: Sequence[ExclusionRule],
    needed: Sequence[str] = (),
) -> xr.DataArray:
    """Why each cell is out, lazily; 0 where it is eligible.

    Parameters
    ----------
    layers, inputs : xarray.Dataset
        On the same grid; a name is looked up among the layers first.
    rules : sequence of ExclusionRule
    needed : sequence of str
        Layers, besides the flux, without which a cell cannot be judged.

    Returns
    -------
    xarray.DataArray of uint16
        Bits as `exclusion_flags`.

    Raises
    ------
    SettingsError
        If a rule names a layer that is neither.
    """
    flags = exclusion_flags(rules)
    among = {"layers": layers, "inputs": inputs}
    unknown = layers["rejected_flux"].isnull()
    for name in needed:
        unknown = unknown | annual_field(name, among, "[[criterion]]").isnull()
    out = unknown.astype(np.uint16) * np.uint16(NO_RESULT.value)
    for rule, flag in zip(rules, flags[1:], strict=True):
        values = annual_field(rule.layer, among, "[[exclude]]")
        out = out | (_met(values, rule).astype(np.uint16) * np.uint16(flag.value))
    return out.astype(np.uint16).rename("exclusion")


def annual_field(name: str, among: Mapping[str, xr.Dataset], section: str) -> xr.DataArray:
    """One field of a layer or input: itself, or the mean of its months weighted by their lengths.

    Raises
    ------
    SettingsError
        If there is no such layer or input, with the nearest name; or if it has other dimensions.
    """
    for dataset in among.values():
        if name in dataset:
            values = dataset[name]
            if "hour" in values.dims:
                values = values.mean("hour")
            if "month" in values.dims:
                weights = xr.DataArray(month_weights().astype(np.float32), dims="month")
                values = (values * weights).sum("month", skipna=False).astype(np.float32)
            if set(values.dims) != {"latitude", "longitude"}:
                dimensions = ", ".join(map(str, values.dims))
                raise SettingsError(
                    f"{section} layer = {name!r} has the dimensions {dimensions}; "
                    "name a layer with one value a cell or one a month."
                )
            return values
    known = [str(each) for dataset in among.values() for each in dataset.data_vars]
    near = difflib.get_close_matches(name, known, n=1, cutoff=0.5)
    hint = f"did you mean {near[0]}?" if near else f"known here: {', '.join(sorted(known))}."
    raise SettingsError(f"{section} layer = {name!r} is neither an input nor a layer; {hint}")


def _met(values: xr.DataArray, rule: ExclusionRule) -> xr.DataArray:
    """Where a rule takes cells out."""
    out = values.isnull() if rule.missing == "out" else xr.zeros_like(values, dtype=bool)
    if rule.above is not None:
        out = out | (values > rule.above)
    if rule.below is not None:
        out = out | (values < rule.below)
    for value in rule.equals or ():
        out = out | (values == value)
    return out
