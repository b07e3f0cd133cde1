"""What changed between two releases: settings, inputs, layers, and who moved in the ranking."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import rasterio
from numpy.typing import NDArray
from rasterio.windows import Window

from gridcool.errors import OutputError
from gridcool.release.manifest import Manifest, read_manifest

FloatArray = NDArray[np.floating]

STRIP_ROWS = 256
LAYER_COLUMNS = (
    *("layer", "cells", "changed_share", "mean", "rms", "largest", "latitude", "longitude"),
    *("gained", "lost"),
)
MOVE_COLUMNS = (
    *("region", "rank_a", "rank_b", "moved", "rejected_flux_change", "eligible_km2_change"),
    *("suitability_change", "beyond_doubt", "why"),
)
#: Changes smaller than these are not told as a reason.
NOTABLE = {"rejected_flux": 0.05, "eligible": 0.001, "suitability": 0.0005}


@dataclass(frozen=True, eq=False)
class Comparison:
    """Differences from release a to release b.

    Attributes
    ----------
    a, b : str
        Names of the releases.
    settings : tuple of (str, object, object)
        Key, before and after, of every setting that differs.
    inputs : tuple of str
        Sentences about inputs whose contents differ.
    layers : pandas.DataFrame
        Columns as `LAYER_COLUMNS`; differences are b minus a.
    moves : pandas.DataFrame
        Columns as `MOVE_COLUMNS`, those that moved most first.
    notes : tuple of str
        What could not be compared.
    """

    a: str
    b: str
    settings: tuple[tuple[str, Any, Any], ...]
    inputs: tuple[str, ...]
    layers: pd.DataFrame
    moves: pd.DataFrame
    notes: tuple[str, ...]


def compare_releases(
    a: Path, b: Path, tables: tuple[pd.DataFrame, pd.DataFrame] | None = None
) -> Comparison:
    """Compare two releases.

    Parameters
    ----------
    a, b : Path
        Folders of releases.
    tables : pair of pandas.DataFrame, optional
        Their region tables.

    Raises
    ------
    OutputError
        If either is no release.
    """
    first, second = read_manifest(a), read_manifest(b)
    layers, notes = _layers(a, b)
    moves = pd.DataFrame(columns=list(MOVE_COLUMNS))
    if tables is not None:
        moves = rank_moves(*tables)
    return Comparison(
        a=first.release,
        b=second.release,
        settings=tuple(_settings(first.settings, second.settings)),
        inputs=tuple(_inputs(first, second)),
        layers=layers,
        moves=moves,
        notes=tuple(notes),
    )


def flat_settings(values: Mapping[str, Any], prefix: str = "") -> dict[str, Any]:
    """Nested settings as one level of dotted keys; lists of tables are numbered from 1."""
    found: dict[str, Any] = {}
    for key, value in values.items():
        name = f"{prefix}{key}"
        if isinstance(value, Mapping):
            found |= flat_settings(value, f"{name}.")
        elif isinstance(value, list) and value and isinstance(value[0], Mapping):
            for number, each in enumerate(value, start=1):
                found |= flat_settings(each, f"{name}[{number}].")
        else:
            found[name] = value
    return found


def _settings(a: Mapping[str, Any], b: Mapping[str, Any]) -> list[tuple[str, Any, Any]]:
    before, after = flat_settings(a), flat_settings(b)
    return [
        (key, before.get(key), after.get(key))
        for key in sorted(set(before) | set(after))
        if before.get(key) != after.get(key) and not key.startswith("job.")
    ]


def _inputs(a: Manifest, b: Manifest) -> list[str]:
    before = {entry["name"]: entry for entry in a.inputs}
    after = {entry["name"]: entry for entry in b.inputs}
    found = []
    for name in sorted(set(before) | set(after)):
        if name not in after:
            found.append(f"{name} is no longer used")
        elif name not in before:
            found.append(f"{name} is new")
        elif before[name]["sha256"] != after[name]["sha256"]:
            found.append(f"{name} has other contents")
    return found


def _layers(a: Path, b: Path) -> tuple[pd.DataFrame, list[str]]:
    before = {path.stem: path for path in (a / "layers").glob("*.tif")}
    after = {path.stem: path for path in (b / "layers").glob("*.tif")}
    notes = [f"{name} is in the first release only" for name in sorted(set(before) - set(after))]
    notes += [f"{name} is in the second release only" for name in sorted(set(after) - set(before))]
    rows = []
    for name in sorted(set(before) & set(after)):
        row = _layer(name, before[name], after[name])
        if row is None:
            notes.append(f"{name} lies on another grid and was not compared")
        else:
            rows.append(row)
    return pd.DataFrame(rows, columns=list(LAYER_COLUMNS)), notes


def _layer(name: str, a: Path, b: Path) -> tuple[Any, ...] | None:
    """Differences of one layer, strip by strip; None if the grids differ."""
    try:
        with rasterio.open(a) as first, rasterio.open(b) as second:
            same = (first.shape, first.count) == (second.shape, second.count)
            if not (same and first.transform.almost_equals(second.transform, 1e-9)):
                return None
            tally = _Tally()
            for top in range(0, first.height, STRIP_ROWS):
                window = Window(0, top, first.width, min(STRIP_ROWS, first.height - top))
                tally.add(
                    first.read(window=window).astype(float),
                    second.read(window=window).astype(float),
                    top,
                )
            place = (float("nan"), float("nan"))
            if tally.where is not None:
                longitude, latitude = first.xy(*tally.where)
                place = (float(latitude), float(longitude))
    except rasterio.errors.RasterioIOError as problem:
        raise OutputError(f"{a.name} cannot be read ({problem}); verify the releases.") from None
    return (name, *tally.row(place))


class _Tally:
    """Running sums of the differences of a layer."""

    def __init__(self) -> None:
        self.cells = self.both = self.changed = self.gained = self.lost = 0
        self.total = self.squares = self.largest = 0.0
        self.where: tuple[int, int] | None = None

    def add(self, before: FloatArray, after: FloatArray, top: int) -> None:
        known_before, known_after = np.isfinite(before), np.isfinite(after)
        both = known_before & known_after
        difference = np.where(both, after - before, 0.0)
        self.cells += before.size
        self.both += int(both.sum())
        self.changed += int((difference != 0).sum())
        self.gained += int((known_after & ~known_before).sum())
        self.lost += int((known_before & ~known_after).sum())
        self.total += float(difference.sum())
        self.squares += float((difference**2).sum())
        at = np.unravel_index(np.abs(difference).argmax(), difference.shape)
        if abs(difference[at]) > abs(self.largest):
            self.largest = float(difference[at])
            self.where = int(at[1]) + top, int(at[2])

    def row(self, place: tuple[float, float]) -> tuple[Any, ...]:
        share = self.changed / self.both if self.both else 0.0
        mean = self.total / self.both if self.both else float("nan")
        rms = (self.squares / self.both) ** 0.5 if self.both else float("nan")
        return (
            *(self.cells, share, mean, rms, self.largest),
            *place,
            *(self.gained, self.lost),
        )


def rank_moves(a: pd.DataFrame, b: pd.DataFrame) -> pd.DataFrame:
    """Who moved in the ranking, and what of the region changed.

    A move is beyond doubt if the rank of the second table lies outside the first one's interval.

    Parameters
    ----------
    a, b : pandas.DataFrame
        Region tables.

    Returns
    -------
    pandas.DataFrame
        Columns as `MOVE_COLUMNS`; ``moved`` is positive for a better rank.
    """
    both = a.merge(b, on="region", how="outer", suffixes=("_a", "_b"), indicator=True)
    rows = []
    for row in both.to_dict("records"):
        before, after = row["rank_a"], row["rank_b"]
        ranked = not (pd.isna(before) or pd.isna(after))
        flux = row["rejected_flux_mean_b"] - row["rejected_flux_mean_a"]
        eligible = row["eligible_km2_b"] - row["eligible_km2_a"]
        suitable = row["suitability_mean_b"] - row["suitability_mean_a"]
        inside = ranked and _between(after, row["rank_low_a"], row["rank_high_a"])
        rows.append(
            (
                row["region"],
                before,
                after,
                int(before - after) if ranked else pd.NA,
                flux,
                eligible,
                suitable,
                ranked and not inside,
                _why(row, flux, eligible, suitable),
            )
        )
    frame = pd.DataFrame(rows, columns=list(MOVE_COLUMNS))
    for column in ("rank_a", "rank_b", "moved"):
        frame[column] = frame[column].astype("Int64")
    size = frame["moved"].abs().fillna(-1)
    order = pd.DataFrame({"size": -size, "rank": frame["rank_b"].fillna(10**9)})
    return frame.loc[order.sort_values(["size", "rank"], kind="stable").index].reset_index(
        drop=True
    )


def _between(rank: Any, low: Any, high: Any) -> bool:
    return bool(not (pd.isna(low) or pd.isna(high)) and low <= rank <= high)


def _why(row: Mapping[Any, Any], flux: float, eligible: float, suitable: float) -> str:
    """What changed about a region, in words."""
    if row["_merge"] == "left_only":
        return "not in the second release"
    if row["_merge"] == "right_only":
        return "new in the second release"
    reasons = []
    if abs(suitable) > NOTABLE["suitability"]:
        reasons.append(f"suitability {suitable:+.3f}")
    if abs(flux) > NOTABLE["rejected_flux"]:
        reasons.append(f"flux {flux:+.2f} W m-2")
    size = max(row["area_km2_a"], 1e-9)
    if abs(eligible) / size > NOTABLE["eligible"]:
        reasons.append(f"eligible area {eligible:+.4g} km2")
    if reasons:
        return ", ".join(reasons)
    return "others changed" if row["rank_a"] != row["rank_b"] else "unchanged"
