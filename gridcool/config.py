"""Settings: one TOML file, checked key by key, frozen; seen by cli and pipeline only."""

from __future__ import annotations

import difflib
import tomllib
from pathlib import Path
from typing import Any, Self

from pydantic import BaseModel, Field, ValidationError, model_validator

from gridcool.errors import SettingsError
from gridcool.planning_sections import (
    Criterion,
    Exclude,
    Ranking,
    Regions,
    Suitability,
    SuitabilityClass,
    Target,
    Zones,
)
from gridcool.sections import (
    Compute,
    GridSection,
    Input,
    Job,
    Layers,
    Maps,
    Panel,
    Release,
    Section,
    Sky,
    Uncertainty,
    Worth,
)
from gridcool.variables import input_variables

REQUIRED_INPUTS = ("albedo",)
MOST_CLASSES = 50
#: What a key with a pattern may look like.
EXAMPLES = {"scheduler": '"threads" or "tcp://host:8786"', "memory": '"2 GB"'}


class Settings(Section):
    """The whole settings file. Relative paths start from the file's own folder, ``base``."""

    job: Job = Job()
    inputs: dict[str, Input]
    grid: GridSection = GridSection()
    sky: Sky = Sky()
    panel: Panel = Panel()
    worth: Worth = Worth()
    uncertainty: Uncertainty = Uncertainty()
    layers: Layers = Layers()
    maps: Maps = Maps()
    exclude: list[Exclude] = Field(default_factory=list)
    criterion: list[Criterion] = Field(default_factory=list)
    suitability: Suitability = Suitability()
    suitability_class: list[SuitabilityClass] = Field(default_factory=list)
    regions: Regions | None = None
    ranking: Ranking = Ranking()
    zones: Zones | None = None
    target: Target | None = None
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
        problems += self._planning_problems()
        if problems:
            raise ValueError("; ".join(problems))
        return self

    def _planning_problems(self) -> list[str]:
        """What the sections of planning need of each other."""
        needs = {"[zones]": self.zones, "[[suitability_class]]": self.suitability_class}
        found = [
            f"{section} needs at least one [[criterion]]"
            for section, given in needs.items()
            if given and not self.criterion
        ]
        if self.ranking.by == "suitability" and not self.criterion:
            found.append('[ranking] by = "suitability" needs at least one [[criterion]]')
        if self.target is not None and self.regions is None:
            found.append("[target] needs [regions]")
        limits = [each.above for each in self.suitability_class]
        if len(limits) > MOST_CLASSES:
            found.append(f"there may be at most {MOST_CLASSES} [[suitability_class]]")
        if sorted(set(limits)) != limits:
            found.append("[[suitability_class]] stand from the lowest limit to the highest")
        return found

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
    where, got = _place(error["loc"]), repr(error["input"])
    if error["type"] == "extra_forbidden":
        return f"Unknown key {where}; {_did_you_mean(error['loc'])}"
    if error["type"] == "missing":
        return f"Key {where} is missing."
    if error["type"] in ("model_type", "dict_type"):
        return f"{where} is a section with keys of its own: write [{where}] (found {got})."
    if error["type"] == "string_pattern_mismatch":
        example = EXAMPLES.get(str(error["loc"][-1]), "a few words on one line")
        return f"{where}: write something like {example} (found {got})."
    if error["type"] == "value_error":
        message = error["msg"].removeprefix("Value error, ")
        return f"{where}: {message}." if where else f"{message}."
    return f"{where}: {error['msg']} (found {got})."


def _place(location: tuple[Any, ...]) -> str:
    """A key as people count: the second [[exclude]] is exclude[2]."""
    parts = [f"[{part + 1}]" if isinstance(part, int) else f".{part}" for part in location]
    return "".join(parts).removeprefix(".")


def _did_you_mean(location: tuple[Any, ...]) -> str:
    model: Any = Settings
    for part in location[:-1]:
        if isinstance(part, int):  # one of several tables of the same kind
            continue
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
