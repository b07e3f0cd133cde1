"""What each region loses to which exclusion rule."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from gridcool.planning.regions import Cover
from gridcool.variables import Flag

LOSS_COLUMNS = ("region", "reason", "area_km2", "only_km2")


def exclusion_losses(
    exclusion: NDArray[np.integer], covers: Sequence[Cover], flags: Sequence[Flag]
) -> pd.DataFrame:
    """Area of each region that each rule takes out.

    Parameters
    ----------
    exclusion : array, shape (rows, columns)
    covers : sequence of Cover
    flags : sequence of Flag
        Bits of the exclusion layer.

    Returns
    -------
    pandas.DataFrame
        Columns as `LOSS_COLUMNS`, a row for each region and rule that takes something: the area
        out by the rule, and the part of it that no other rule takes.
    """
    flat, rows = exclusion.ravel(), []
    for cover in covers:
        bits = flat[cover.cells]
        for flag in flags:
            hit = (bits & flag.value) > 0
            area = float(cover.areas[hit].sum())
            if area > 0:
                alone = float(cover.areas[bits == flag.value].sum())
                rows.append((cover.name, flag.description, area / 1e6, alone / 1e6))
    return pd.DataFrame(rows, columns=list(LOSS_COLUMNS))


def main_reason(
    covers: Sequence[Cover],
    exclusion: NDArray[np.integer] | None,
    eligible: NDArray[np.bool_],
    flags: Sequence[Flag],
    no_data: str,
) -> list[str]:
    """The rule that takes most of each region; empty where nothing is out.

    A region outside the grid, or without any result where there are no rules, has ``no_data``.
    """
    if exclusion is None:
        flat = eligible.ravel()
        return ["" if flat[cover.cells].any() else no_data for cover in covers]
    # Of two that take as much, a rule tells more than a lack of data.
    rules = exclusion_losses(exclusion, covers, [*flags[1:], *flags[:1]])
    rules = rules.sort_values("area_km2", ascending=False, kind="stable")
    first = rules.drop_duplicates("region").set_index("region")["reason"]
    return [
        no_data if len(cover.cells) == 0 else str(first.get(cover.name, "")) for cover in covers
    ]
