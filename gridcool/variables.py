"""The declared table of inputs and layers, read from ``variables.toml``."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from types import MappingProxyType
from typing import Any, Literal

#: How many bands a layer has.
BANDS = {"year": 1, "month": 12, "season": 2}
FLAG_KEYS = ("flags", "classes")


@dataclass(frozen=True)
class Flag:
    """One bit of a flag layer: its value, its CF meaning (one word) and a sentence for people."""

    value: int
    meaning: str
    description: str


@dataclass(frozen=True)
class InputVariable:
    """What is known of one input.

    ``units`` are those used inside; ``difference`` marks a temperature difference, which changes
    scale but not origin when converted; ``valid`` bounds what is possible, ``usual`` what is
    common; ``names`` are the variable's usual names inside files.
    """

    name: str
    standard_name: str
    long_name: str
    units: str
    time: Literal["month", "none"]
    valid: tuple[float, float]
    usual: tuple[float, float]
    names: tuple[str, ...]
    difference: bool = False


@dataclass(frozen=True)
class LayerVariable:
    """What is declared of one output layer.

    ``flags`` are bits that may stand together, ``classes`` values of which each cell has one.
    Layers made by planning depend on the settings, which also name their flags and classes.
    """

    name: str
    standard_name: str
    long_name: str
    units: str
    bands: Literal["year", "month", "season"]
    cell_methods: str
    ramp: str
    flags: tuple[Flag, ...] = ()
    on_request: bool = False
    caution: str = ""
    classes: tuple[Flag, ...] = ()
    made_by: Literal["engine", "planning"] = "engine"

    @property
    def count(self) -> int:
        """Number of bands."""
        return BANDS[self.bands]

    @property
    def dimensions(self) -> tuple[str, ...]:
        """Dimensions, slowest first."""
        return (*((self.bands,) if self.count > 1 else ()), "latitude", "longitude")

    @property
    def is_flags(self) -> bool:
        """Whether the layer holds bits instead of a quantity."""
        return bool(self.flags)

    @property
    def is_whole(self) -> bool:
        """Whether the layer holds whole numbers, bits or classes, instead of a quantity."""
        return bool(self.flags or self.classes)


@cache
def _table() -> dict[str, dict[str, dict[str, Any]]]:
    text = (files("gridcool") / "variables.toml").read_text(encoding="utf-8")
    return tomllib.loads(text)


@cache
def input_variables() -> Mapping[str, InputVariable]:
    """Every input that gridcool knows by name, in the order of the table."""
    known = {}
    for name, row in _table()["inputs"].items():
        pairs = {key: tuple(row[key]) for key in ("valid", "usual", "names")}
        known[name] = InputVariable(name=name, **{**row, **pairs})
    return MappingProxyType(known)


@cache
def layer_variables() -> Mapping[str, LayerVariable]:
    """Every layer that gridcool writes, in the order of the table."""
    known = {}
    for name, row in _table()["layers"].items():
        named = {key: tuple(Flag(*each) for each in row.get(key, ())) for key in FLAG_KEYS}
        known[name] = LayerVariable(name=name, **{**row, **named})
    return MappingProxyType(known)


def engine_layers() -> list[str]:
    """Names of the layers that the engine makes, in the order of the table."""
    return [name for name, layer in layer_variables().items() if layer.made_by == "engine"]


def flag_words(texts: Sequence[str], fallback: str, taken: Iterable[str] = ()) -> list[str]:
    """A word for each text that CF allows among flag meanings, each used once.

    Parameters
    ----------
    texts : sequence of str
        Names as people write them.
    fallback : str
        Stands, with the text's number, for a text without any Latin letter or digit.
    taken : iterable of str
        Words that are used already.
    """
    words, used = [], set(taken)
    for number, text in enumerate(texts, start=1):
        word = re.sub(r"[^A-Za-z0-9]+", "_", text).strip("_").lower() or f"{fallback}_{number}"
        while word in used:
            word = f"{word}_{number}"
        used.add(word)
        words.append(word)
    return words


def flag_value(layer: str, meaning: str) -> int:
    """The bit of a flag layer that stands for ``meaning``.

    Raises
    ------
    KeyError
        If the layer has no such flag.
    """
    for flag in layer_variables()[layer].flags:
        if flag.meaning == meaning:
            return flag.value
    raise KeyError(meaning)
