"""Settings: one TOML file, checked key by key, frozen; seen by cli and pipeline only."""

from __future__ import annotations

import difflib
import math
import tomllib
from pathlib import Path
from typing import Annotated, Any, Literal, Self

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    ValidationError,
    model_validator,
)

from gridcool.errors import SettingsError
from gridcool.variables import input_variables, layer_variables

REQUIRED_INPUTS = ("albedo",)


def _number(value: Any) -> Any:
    """Let a whole number stand where a fraction is wanted, and nothing else."""
    return float(value) if isinstance(value, int) and not isinstance(value, bool) else value


Number = Annotated[float, BeforeValidator(_number), Field(allow_inf_nan=False)]
Share = Annotated[Number, Field(ge=0, le=1)]


class _Section(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class Job(_Section):
    """Free name of the job and the folder of its products."""

    name: str = "gridcool"
    output: str = "out"


class Input(_Section):
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


class GridSection(_Section):
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


class Sky(_Section):
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


class Panel(_Section):
    """The reflector and how densely a field of it covers the ground."""

    reflectance: Share = 0.92
    soiling: Share = 0.03
    specular_share: Share = 1.0
    back_reflectance: Share = 0.3
    ground_cover: Annotated[Number, Field(gt=0, le=1)] = 0.3
    lifetime_years: Annotated[Number, Field(gt=0, le=200)] = 25.0


class Worth(_Section):
    """What the flux is worth in other terms."""

    carbon_dioxide_ppm: Annotated[Number, Field(gt=150, lt=2000)] = 425.0
    panel_mass: Annotated[Number, Field(gt=0)] = 10.0
    embodied_energy: Annotated[Number, Field(ge=0)] = 150.0
    cost_low: Annotated[Number, Field(ge=0)] = 14.0
    cost_high: Annotated[Number, Field(ge=0)] = 100.0


class Uncertainty(_Section):
    """Stated standard errors of the inputs."""

    albedo: Annotated[Number, Field(ge=0, le=0.3)] = 0.02
    concentration_factor: Annotated[Number, Field(gt=0, le=5)] = 0.6


class Layers(_Section):
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


class Regions(_Section):
    """Polygons with a name attribute, or boxes of some degrees."""

    path: str | None = None
    name: str | None = None
    boxes: Annotated[Number, Field(gt=0, le=90)] | None = None

    @model_validator(mode="after")
    def _one_way(self) -> Self:
        if (self.path is None) == (self.boxes is None):
            raise ValueError("give either path (a polygon file) or boxes (degrees)")
        return self


class Compute(_Section):
    """How much memory the run may take and what computes its blocks."""

    memory: Annotated[str, Field(pattern=r"^\s*\d+(\.\d+)?\s*[kMGT]i?B\s*$")] = "2 GB"
    scheduler: Literal["threads"] = "threads"


class Release(_Section):
    """How many releases stay on disk."""

    keep: Annotated[int, Field(ge=1)] = 3


class Settings(_Section):
    """The whole settings file. Relative paths start from the file's own folder, ``base``."""

    job: Job = Job()
    inputs: dict[str, Input]
    grid: GridSection = GridSection()
    sky: Sky = Sky()
    panel: Panel = Panel()
    worth: Worth = Worth()
    uncertainty: Uncertainty = Uncertainty()
    layers: Layers = Layers()
    regions: Regions | None = None
    compute: Compute = Compute()
    release: Release = Release()
    base: Path = Field(default=Path(), exclude=True)

    @model_validator(mode="after")
    def _inputs_fit(self) -> Self:
        problems = [
            f"[inputs.{name}] is needed" for name in REQUIRED_INPUTS if name not in self.inputs
        ]
        problems += [misspelt for name in self.inputs if (misspelt := _misspelt(name))]
        if ("temperature_maximum" in self.inputs) != ("temperature_minimum" in self.inputs):
            problems.append("temperature_maximum and temperature_minimum are needed together")
        if self.grid.like is not None and self.grid.like not in self.inputs:
            problems.append(f'[grid] like = "{self.grid.like}" is not one of the inputs')
        missing = _missing_for(self.sky.irradiance, set(self.inputs))
        if missing:
            problems.append(f'[sky] irradiance = "{self.sky.irradiance}" needs {missing}')
        if problems:
            raise ValueError("; ".join(problems))
        return self

    def resolve(self, path: str) -> Path:
        """An absolute path from one that the settings file names."""
        return (self.base / Path(path).expanduser()).resolve()


def _misspelt(name: str) -> str:
    """A sentence if an input has almost the name of a known one and would be left unused."""
    if name in input_variables():
        return ""
    near = difflib.get_close_matches(name, input_variables(), n=1, cutoff=0.8)
    return f"[inputs.{name}] is not known (did you mean [inputs.{near[0]}]?)" if near else ""


def _missing_for(irradiance: str, inputs: set[str]) -> str:
    has_range = "temperature_range" in inputs or "temperature_maximum" in inputs
    if irradiance in ("cloud", "blend") and "cloud_fraction" not in inputs:
        return "[inputs.cloud_fraction]"
    if irradiance == "temperature-range" and not has_range:
        return "[inputs.temperature_range]"
    if irradiance == "measured" and "surface_shortwave" not in inputs:
        return "[inputs.surface_shortwave]"
    return ""


def load_settings(path: str | Path) -> Settings:
    """Read and check a settings file.

    Raises
    ------
    SettingsError
        If the file is missing, is not TOML, or holds an unknown key or an impossible value; the
        message lists every problem found.
    """
    path = Path(path)
    try:
        raw = tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise SettingsError(f"Settings file {path} does not exist; check the path.") from None
    except (OSError, UnicodeDecodeError) as problem:
        raise SettingsError(f"Settings file {path} cannot be read: {problem}.") from None
    except tomllib.TOMLDecodeError as problem:
        raise SettingsError(f"Settings file {path} is not valid TOML: {problem}.") from None
    return settings_from(raw, source=str(path), base=path.resolve().parent)


def settings_from(
    raw: dict[str, Any], source: str = "settings", base: Path | None = None
) -> Settings:
    """Check settings that are already parsed; ``source`` names them in messages."""
    if "base" in raw:
        raise SettingsError(f"{source}: unknown key base; remove it.")
    try:
        return Settings.model_validate({**raw, "base": base or Path.cwd()})
    except ValidationError as problem:
        lines = [_sentence(error) for error in problem.errors()]
        raise SettingsError(f"{source}: " + " ".join(lines)) from None


def _sentence(error: Any) -> str:
    where, got = ".".join(str(part) for part in error["loc"]), repr(error["input"])
    if error["type"] == "extra_forbidden":
        return f"Unknown key {where}; {_did_you_mean(error['loc'])}"
    if error["type"] == "missing":
        return f"Key {where} is missing."
    if error["type"] in ("model_type", "dict_type"):
        return f"{where} is a section with keys of its own: write [{where}] (found {got})."
    if error["type"] == "string_pattern_mismatch":
        return f'{where}: write a size such as "2 GB" (found {got}).'
    if error["type"] == "value_error":
        message = error["msg"].removeprefix("Value error, ")
        return f"{where}: {message}." if where else f"{message}."
    return f"{where}: {error['msg']} (found {got})."


def _did_you_mean(location: tuple[Any, ...]) -> str:
    model: Any = Settings
    for part in location[:-1]:
        if model is None:
            return ""
        model = Input if model == "inputs" else _section(model, str(part))
    names = [] if isinstance(model, str) or model is None else list(model.model_fields)
    known = [name for name in names if name != "base"]
    near = difflib.get_close_matches(str(location[-1]), known, n=1, cutoff=0.5)
    return f"did you mean {near[0]}?" if near else f"known here: {', '.join(known)}."


def _section(model: type[BaseModel], part: str) -> Any:
    if part == "inputs":
        return "inputs"
    annotation = model.model_fields[part].annotation if part in model.model_fields else None
    options = [annotation, *getattr(annotation, "__args__", ())]
    return next((o for o in options if isinstance(o, type) and issubclass(o, BaseModel)), None)
