"""The sections of the settings file, each with its defaults and what it allows."""

from __future__ import annotations

import difflib
import math
from typing import Annotated, Any, Literal, Self

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, model_validator

from gridcool.variables import layer_variables


def _number(value: Any) -> Any:
    """Let a whole number stand where a fraction is wanted, and nothing else."""
    return float(value) if isinstance(value, int) and not isinstance(value, bool) else value


Number = Annotated[float, BeforeValidator(_number), Field(allow_inf_nan=False)]
Share = Annotated[Number, Field(ge=0, le=1)]


class Section(BaseModel):
    """A part of the settings: no unknown keys, no silent conversions, never changed."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class Job(Section):
    """Free name of the job, a note for its readers, and the folder of its products."""

    name: str = "gridcool"
    note: str = ""
    output: str = "out"


class Input(Section):
    """One input file: where it lies and, if it does not say so itself, what it holds.

    ``divisor_*`` make the input a ratio of two variables, such as upwelling over downwelling
    shortwave for the albedo; where the divisor is below ``divisor_minimum`` the ratio is missing.
    """

    path: str
    variable: str | None = None
    units: str | None = None
    hours: Literal["utc", "local-solar"] = "utc"
    divisor_path: str | None = None
    divisor_variable: str | None = None
    divisor_minimum: Annotated[Number, Field(ge=0)] = 5.0


class GridSection(Section):
    """The target grid: that of an input, or square cells within bounds (default: the globe)."""

    like: str | None = None
    resolution: Annotated[Number, Field(gt=0, le=30)] | None = None
    bounds: Annotated[list[Number], Field(min_length=4, max_length=4)] | None = None

    @model_validator(mode="after")
    def _one_way(self) -> Self:
        if self.like is not None and self.resolution is not None:
            raise ValueError("give either like or resolution, not both")
        if self.bounds is not None and self.resolution is None:
            raise ValueError("bounds need a resolution")
        if self.bounds is not None:
            west, south, east, north = self.bounds
            if not -90 <= south < north <= 90:
                raise ValueError("bounds are [west, south, east, north] with south below north")
            if not (-180 <= west < 360 and 0 < _width(west, east) <= 360):
                raise ValueError("bounds are [west, south, east, north] in degrees east")
        if self.resolution is not None:
            _refuse_overlap(self.resolution, self.bounds or [-180.0, -90.0, 180.0, 90.0])
        return self


def _width(west: float, east: float) -> float:
    """Degrees from west to east; an east that is not east of west lies past 180."""
    return east - west if east > west else east - west + 360.0


def _refuse_overlap(step: float, bounds: list[float]) -> None:
    """Refuse cells that would go round more than once or reach past the south pole."""
    west, south, east, north = bounds
    for extent, room in ((north - south, north + 90.0), (_width(west, east), 360.0)):
        if math.ceil(extent / step - 1e-6) * step > room + 1e-6:
            fits = extent / max(1, round(extent / step))
            raise ValueError(
                f"cells of {step!r} degrees do not fill {extent:g} degrees evenly and would reach "
                f"past the globe; {fits!r} fits"
            )


class Sky(Section):
    """How irradiance is estimated and what clouds and snow do."""

    irradiance: Literal["cloud", "temperature-range", "blend", "measured"] = "blend"
    cloud_concentration: Annotated[Number, Field(gt=0.05, le=20)] = 1.0
    cloud_weight: Share = 0.7
    hargreaves_coefficient: Annotated[Number, Field(gt=0.05, lt=0.5)] = 0.16
    overcast_transmittance: Annotated[Number, Field(gt=0, lt=1)] = 0.22
    overcast_reflectance: Annotated[Number, Field(gt=0, lt=1)] = 0.68
    snow_albedo: Share = 0.5
    snow_covers_panel: bool = True

    @model_validator(mode="after")
    def _no_gain(self) -> Self:
        if self.overcast_transmittance + self.overcast_reflectance > 1:
            raise ValueError("overcast_transmittance and overcast_reflectance exceed 1 together")
        return self


class Panel(Section):
    """The reflector and how densely a field of it covers the ground."""

    reflectance: Share = 0.92
    soiling: Share = 0.03
    specular_share: Share = 1.0
    back_reflectance: Share = 0.3
    ground_cover: Annotated[Number, Field(gt=0, le=1)] = 0.3
    lifetime_years: Annotated[Number, Field(gt=0, le=200)] = 25.0


class Worth(Section):
    """What the flux is worth in other terms."""

    carbon_dioxide_ppm: Annotated[Number, Field(gt=150, lt=2000)] = 425.0
    panel_mass: Annotated[Number, Field(gt=0)] = 10.0
    embodied_energy: Annotated[Number, Field(ge=0)] = 150.0
    cost_low: Annotated[Number, Field(ge=0)] = 14.0
    cost_high: Annotated[Number, Field(ge=0)] = 100.0


class Uncertainty(Section):
    """Stated standard errors of the inputs."""

    albedo: Annotated[Number, Field(ge=0, le=0.3)] = 0.02
    concentration_factor: Annotated[Number, Field(gt=0, le=5)] = 0.6


class Layers(Section):
    """Layers wanted beyond the usual ones."""

    extra: list[str] = []

    @model_validator(mode="after")
    def _known(self) -> Self:
        offered = [name for name, layer in layer_variables().items() if layer.on_request]
        for name in self.extra:
            if name not in offered:
                near = difflib.get_close_matches(name, offered, n=1, cutoff=0.5)
                hint = (
                    f"did you mean {near[0]}?" if near else f"on request are {', '.join(offered)}"
                )
                raise ValueError(f"extra: there is no layer {name} on request; {hint}")
        return self


class Maps(Section):
    """Which layers are drawn (the usual ones if none is named), and whether with coastlines."""

    layers: list[str] = []
    coastlines: bool = True

    @model_validator(mode="after")
    def _known(self) -> Self:
        for name in self.layers:
            if name not in layer_variables():
                near = difflib.get_close_matches(name, layer_variables(), n=1, cutoff=0.5)
                hint = f"; did you mean {near[0]}?" if near else ""
                raise ValueError(f"layers: there is no layer {name}{hint}")
        return self


class Compute(Section):
    """How much memory the run may take and what computes its blocks."""

    memory: Annotated[str, Field(pattern=r"^\s*\d+(\.\d+)?\s*[kMGT]i?B\s*$")] = "2 GB"
    scheduler: Annotated[str, Field(pattern=r"^(threads|(tcp|tls|ucx)://\S+)$")] = "threads"


class Release(Section):
    """How many releases stay on disk."""

    keep: Annotated[int, Field(ge=1)] = 3
