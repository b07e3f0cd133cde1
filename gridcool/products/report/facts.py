"""What the report is told; plain values only."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Protocol

import pandas as pd


class Reached(Protocol):
    """How far the regions reach towards a wanted rejected power."""

    @property
    def wanted_tw(self) -> float:
        """Rejected power that is wanted, TW."""

    @property
    def reached_tw(self) -> float:
        """Rejected power of the regions used, TW."""

    @property
    def regions(self) -> pd.DataFrame:
        """The regions used, best first."""

    @property
    def panel_km2(self) -> float:
        """Panel area."""

    @property
    def mass_mt(self) -> float:
        """Mass of the panels, Mt."""

    @property
    def energy_pj(self) -> float:
        """Energy that making them takes, PJ."""

    @property
    def cost_low(self) -> float:
        """Money at the cheap end."""

    @property
    def cost_high(self) -> float:
        """Money at the dear end."""

    @property
    def years(self) -> float | None:
        """Time to build."""

    @property
    def reached(self) -> bool:
        """Whether the regions are enough."""


@dataclass(frozen=True)
class Source:
    """One input: its name, file, variable, SHA-256, and what was understood or filled."""

    name: str
    file: str
    variable: str
    sha256: str
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class Picture:
    """A map: title, PNG file, caption, and a description for those who cannot see it."""

    title: str
    path: Path
    caption: str


@dataclass(frozen=True)
class LayerRange:
    """A layer's name, meaning, unit and range."""

    name: str
    long_name: str
    units: str
    minimum: float
    mean: float
    maximum: float


@dataclass(frozen=True, eq=False)
class Assumptions:
    """What the numbers rest on, as the settings have it."""

    ranked_by: str
    top: int
    common_share: float
    correlation_km: float
    ground_cover: float
    lifetime_years: float
    reflectance: float
    irradiance: str
    criteria: tuple[str, ...] = ()
    rules: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class ReportFacts:
    """Everything that stands in a report.

    Attributes
    ----------
    title, created, version, grid : str
    note : str
        Said at the top, such as that the data are invented; may be empty.
    assumptions : Assumptions
    regions, zones : pandas.DataFrame or None
        Tables with the columns of the region table, best first.
    region_shapes, zone_shapes : sequence of shapely geometries
        In the order of the tables.
    losses, sensitivity : pandas.DataFrame or None
    target : Reached or None
    pictures, layers, sources : sequences
    warnings : sequence of str
        What looked odd in the inputs.
    caution, references, settings : str
    """

    title: str
    created: str
    version: str
    grid: str
    assumptions: Assumptions
    caution: str
    references: str
    settings: str
    note: str = ""
    regions: pd.DataFrame | None = None
    region_shapes: Sequence[Any] = ()
    zones: pd.DataFrame | None = None
    zone_shapes: Sequence[Any] = ()
    losses: pd.DataFrame | None = None
    sensitivity: pd.DataFrame | None = None
    target: Reached | None = None
    pictures: Sequence[Picture] = ()
    layers: Sequence[LayerRange] = ()
    sources: Sequence[Source] = ()
    warnings: Sequence[str] = field(default_factory=tuple)
