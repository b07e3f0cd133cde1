"""Sections of the settings file that planning needs: rules, criteria, regions, ranks, target."""

from __future__ import annotations

from typing import Annotated, Any, Literal, Self

from pydantic import BeforeValidator, Field, model_validator

from gridcool.sections import Number, Section, Share

#: Words for people: something, and nothing that no file can hold.
Words = Annotated[str, Field(min_length=1, max_length=200, pattern=r"^[^\x00-\x1f\x7f]+$")]
Positive = Annotated[Number, Field(gt=0)]


def _list(value: Any) -> Any:
    """Let one value stand where a list is wanted."""
    return value if isinstance(value, list) else [value]


Numbers = Annotated[list[Number], BeforeValidator(_list), Field(min_length=1)]


class Exclude(Section):
    """A rule that takes cells out, and why."""

    layer: str
    reason: Words
    above: Number | None = None
    below: Number | None = None
    equals: Numbers | None = None
    missing: Literal["keep", "out"] = "keep"

    @model_validator(mode="after")
    def _some_limit(self) -> Self:
        if self.above is None and self.below is None and self.equals is None:
            raise ValueError("give above, below or equals")
        return self


class Criterion(Section):
    """What makes a cell good: 0 at worst, 1 at best; or 0 at both of worst and 1 at ideal."""

    layer: str
    worst: Annotated[Numbers, Field(max_length=2)]
    best: Number | None = None
    ideal: Number | None = None
    weight: Positive = 1.0

    @model_validator(mode="after")
    def _one_shape(self) -> Self:
        if (self.best is None) == (self.ideal is None):
            raise ValueError("give best, or ideal with worst = [low, high]")
        if self.ideal is not None:
            if len(self.worst) != 2 or not self.worst[0] < self.ideal < self.worst[1]:
                raise ValueError("ideal lies between the two of worst = [low, high]")
        elif len(self.worst) != 1 or self.worst[0] == self.best:
            raise ValueError("worst is one number, other than best")
        return self


class Suitability(Section):
    """How the criteria come together."""

    mean: Literal["arithmetic", "geometric"] = "arithmetic"


class SuitabilityClass(Section):
    """A named class of suitability, from a lower limit up."""

    name: Words
    above: Share


class Regions(Section):
    """Polygons with a name attribute, a raster of codes with names, or boxes of some degrees."""

    path: str | None = None
    name: str | None = None
    codes: dict[str, str] = Field(default_factory=dict)
    boxes: Annotated[Number, Field(gt=0, le=90)] | None = None

    @model_validator(mode="after")
    def _one_way(self) -> Self:
        if (self.path is None) == (self.boxes is None):
            raise ValueError("give either path (a polygon file) or boxes (degrees)")
        return self


class Ranking(Section):
    """By what regions are ranked, and how far their errors go together.

    ``common_share`` of an estimate's error variance is the same everywhere; the rest is the same
    within about ``correlation_km``.
    """

    by: Literal["suitability", "rejected_flux"] | None = None
    top: Annotated[int, Field(ge=1)] = 3
    common_share: Share = 0.5
    correlation_km: Positive = 500.0
    draws: Annotated[int, Field(ge=100, le=100_000)] = 2000
    seed: Annotated[int, Field(ge=0)] = 1


class Zones(Section):
    """Which connected cells make a candidate zone."""

    suitability: Share = 0.7
    minimum_area_km2: Annotated[Number, Field(ge=0)] = 50.0


class Target(Section):
    """The rejected power that is wanted, and how fast panels can be built."""

    rejected_power_tw: Positive
    panel_km2_per_year: Positive | None = None
