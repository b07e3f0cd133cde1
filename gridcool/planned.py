"""The settings as planning: rules, criteria, classes, regions, zones, ranks and target."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from gridcool.config import Settings
from gridcool.grid import Grid
from gridcool.parts import costs_of
from gridcool.planning.confidence import ErrorModel
from gridcool.planning.exclusions import (
    ExclusionRule,
    annual_field,
    exclusion_flags,
    exclusion_layer,
)
from gridcool.planning.losses import exclusion_losses
from gridcool.planning.ranking import RankedBy, region_table
from gridcool.planning.region_files import read_regions
from gridcool.planning.regions import Cover, Regions, box_regions, coverage
from gridcool.planning.sensitivity import ranking_sensitivity
from gridcool.planning.suitability import (
    Criterion,
    SuitabilityClass,
    peaked,
    straight,
    suitability,
    suitability_class,
)
from gridcool.planning.target import Target, reach_target
from gridcool.planning.zones import find_zones
from gridcool.variables import Flag, LayerVariable, flag_words, layer_variables

Reader = Callable[[str], NDArray[Any] | None]


@dataclass(frozen=True, eq=False)
class Decisions:
    """What planning found.

    Attributes
    ----------
    table : pandas.DataFrame or None
        The region table, best first.
    regions : Regions or None
    losses : pandas.DataFrame or None
        What each region loses to which rule.
    sensitivity : pandas.DataFrame or None
        How the ranking moves with weights and limits.
    zones : pandas.DataFrame or None
        The same columns for the candidate zones.
    zone_shapes : Regions or None
    target : Target or None
    """

    table: pd.DataFrame | None = None
    regions: Regions | None = None
    losses: pd.DataFrame | None = None
    sensitivity: pd.DataFrame | None = None
    zones: pd.DataFrame | None = None
    zone_shapes: Regions | None = None
    target: Target | None = None


def rules_of(settings: Settings) -> list[ExclusionRule]:
    """The exclusion rules of the settings."""
    return [
        ExclusionRule(
            layer=each.layer,
            reason=each.reason,
            above=each.above,
            below=each.below,
            equals=None if each.equals is None else tuple(each.equals),
            missing=each.missing,
        )
        for each in settings.exclude
    ]


def criteria_of(settings: Settings) -> list[Criterion]:
    """The criteria of the settings as value functions."""
    found = []
    for each in settings.criterion:
        if each.ideal is not None:
            low, high = each.worst
            found.append(peaked(each.layer, low, each.ideal, high, each.weight))
        else:
            best = float("nan") if each.best is None else each.best
            found.append(straight(each.layer, each.worst[0], best, each.weight))
    return found


def classes_of(settings: Settings) -> list[SuitabilityClass]:
    """The planner's classes, from the lowest up."""
    return [SuitabilityClass(each.name, each.above) for each in settings.suitability_class]


def ranked_by(settings: Settings) -> RankedBy:
    """What regions are ranked by: suitability where there are criteria, else the flux."""
    return settings.ranking.by or ("suitability" if settings.criterion else "rejected_flux")


def error_model(settings: Settings) -> ErrorModel:
    """How errors go together, as the settings have it."""
    given = settings.ranking
    return ErrorModel(given.common_share, given.correlation_km, given.draws, given.seed)


def declarations(settings: Settings) -> dict[str, LayerVariable]:
    """The planning layers that this job has, with the flags and classes that it names."""
    table = layer_variables()
    found = {"exclusion": replace(table["exclusion"], flags=exclusion_flags(rules_of(settings)))}
    if settings.criterion:
        found |= {name: table[name] for name in ("suitability", "suitability_uncertainty")}
    classes = classes_of(settings)
    if classes:
        declared = table["suitability_class"]
        none = declared.classes[0]
        words = flag_words([each.name for each in classes], "class", [none.meaning])
        own = [
            Flag(number, word, f"{each.name}: suitability of at least {each.above:g}")
            for number, (word, each) in enumerate(zip(words, classes, strict=True), start=1)
        ]
        found["suitability_class"] = replace(declared, classes=(none, *own))
    return found


def planning_layers(layers: xr.Dataset, inputs: xr.Dataset, settings: Settings) -> xr.Dataset:
    """Exclusion, and suitability and its classes where the settings have criteria, lazily.

    Raises
    ------
    SettingsError
        If a rule or criterion names neither an input nor a layer.
    """
    criteria = criteria_of(settings)
    exclusion = exclusion_layer(
        layers, inputs, rules_of(settings), needed=[each.layer for each in criteria]
    )
    found = {"exclusion": exclusion}
    if settings.criterion:
        both = suitability(
            layers,
            inputs,
            criteria,
            exclusion=exclusion,
            mean=settings.suitability.mean,
        )
        found |= {str(name): values for name, values in both.items()}
    if settings.suitability_class:
        found["suitability_class"] = suitability_class(found["suitability"], classes_of(settings))
    return xr.Dataset(found)


def regions_of(settings: Settings, grid: Grid) -> Regions | None:
    """The regions that the settings ask for, if any."""
    wanted = settings.regions
    if wanted is None:
        return None
    if wanted.path is None:
        return box_regions(grid.bounds, wanted.boxes or 0.0)
    return read_regions(settings.resolve(wanted.path), wanted.name, wanted.codes)


def decide(
    settings: Settings, grid: Grid, regions: Regions | None, read: Reader, inputs: xr.Dataset
) -> Decisions:
    """Rank the regions, find the zones and fill the target.

    Parameters
    ----------
    settings : Settings
    grid : Grid
    regions : Regions or None
    read : callable
        Gives a finished layer by its name, or None.
    inputs : xarray.Dataset
        On the same grid; only what rules and criteria name is read.
    """
    flags = exclusion_flags(rules_of(settings))
    found = Decisions()
    if regions is not None:
        covers = coverage(regions, grid)
        table = _table(settings, grid, covers, read, flags)
        exclusion = read("exclusion")
        found = replace(
            found,
            table=table,
            regions=regions,
            losses=None if exclusion is None else exclusion_losses(exclusion, covers, flags),
            sensitivity=_sensitivity(settings, covers, read, inputs),
            target=_target(settings, table),
        )
    if settings.zones is not None:
        shapes, zones = zones_of(settings, grid, read)
        found = replace(found, zones=_table(settings, grid, zones, read, flags), zone_shapes=shapes)
    return found


def zones_of(settings: Settings, grid: Grid, read: Reader) -> tuple[Regions, list[Cover]]:
    """Candidate zones of the finished layers."""
    wanted, values = settings.zones, read("suitability")
    if wanted is None or values is None:
        return Regions((), ()), []
    suitable = np.nan_to_num(values, nan=-1.0) >= np.float32(wanted.suitability)
    return find_zones(suitable, grid, minimum_area=wanted.minimum_area_km2 * 1e6)


def _table(
    settings: Settings, grid: Grid, covers: list[Cover], read: Reader, flags: tuple[Flag, ...]
) -> pd.DataFrame:
    return region_table(
        read,
        covers,
        grid,
        ground_cover=settings.panel.ground_cover,
        costs=costs_of(settings),
        by=ranked_by(settings),
        error=error_model(settings),
        top=settings.ranking.top,
        flags=flags,
    )


def _sensitivity(
    settings: Settings, covers: list[Cover], read: Reader, inputs: xr.Dataset
) -> pd.DataFrame | None:
    if not settings.criterion:
        return None

    def field(name: str) -> NDArray[Any]:
        layer = read(name) if name in layer_variables() else None
        if layer is None:
            return np.asarray(annual_field(name, {"inputs": inputs}, "[[criterion]]").values)
        return layer if layer.ndim == 2 else _annual(layer)

    return ranking_sensitivity(
        field,
        covers,
        criteria_of(settings),
        rules_of(settings),
        mean=settings.suitability.mean,
        top=settings.ranking.top,
    )


def _annual(months: NDArray[Any]) -> NDArray[Any]:
    dims = ("month", "latitude", "longitude")
    values = annual_field("layer", {"layers": xr.Dataset({"layer": (dims, months)})}, "")
    return np.asarray(values.values)


def _target(settings: Settings, table: pd.DataFrame) -> Target | None:
    wanted = settings.target
    if wanted is None:
        return None
    return reach_target(
        table,
        rejected_power_tw=wanted.rejected_power_tw,
        panel_km2_per_year=wanted.panel_km2_per_year,
        costs=costs_of(settings),
    )
