"""Legends: what colours stand for, in words and units that people read.

Whole numbers (bits, classes) get a name for each value, quantities a bar of their ramp.
"""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.figure import Figure
from matplotlib.patches import Patch
from numpy.typing import NDArray

from gridcool.products.cartography import INK
from gridcool.products.geotiff import MONTHS
from gridcool.products.ramps import MISSING, SPANS, Colour, class_colours, ramp
from gridcool.variables import LayerVariable

FloatArray = NDArray[np.floating]

NOTHING: Colour = (250, 250, 245)  # no bit is set
UNKNOWN: Colour = (150, 150, 150)
MOST_COMBINATIONS = 11  # more than these no eye tells apart
LEGEND_LETTERS = 95  # in a line of a map's width
POINTS = ("N", "E", "S", "W", "N")


@dataclass(frozen=True)
class Category:
    """A value of a layer of whole numbers: its words and its colour."""

    value: int
    words: str
    colour: Colour


def combinations(layer: LayerVariable, counts: Mapping[int, int]) -> list[Category]:
    """The values that occur in a layer of bits, or every class of one of classes.

    A cell may have several bits; what is named is then the combination, "this; that".

    Parameters
    ----------
    layer : LayerVariable
    counts : mapping of int
        How many cells have a value. Where there are very many values, the rarest share one colour.

    Returns
    -------
    list of Category
        By value.
    """
    if layer.classes:
        colours = [MISSING, *class_colours(len(layer.classes) - 1)]
        return [
            Category(each.value, words(each.description), colour)
            for each, colour in zip(layer.classes, colours, strict=True)
        ]
    present = sorted(value for value, count in counts.items() if value and count)
    several = set(sorted(present, key=lambda value: (-counts[value], value))[:MOST_COMBINATIONS])
    painted = dict(zip(sorted(several), apart(len(several)), strict=True))
    none = "eligible" if layer.made_by == "planning" else "nothing to report"
    named = [
        Category(value, words(_bits(layer, value)), painted.get(value, UNKNOWN))
        for value in present
    ]
    return [Category(0, words(none), NOTHING), *named] if counts.get(0) or not named else named


def reasons(layer: LayerVariable, values: NDArray[np.generic]) -> tuple[FloatArray, list[Category]]:
    """For a map of exclusions: the first reason of each cell, numbered from 1, and their legend.

    Of several reasons a cell shows the first of the settings file, and the first bit, "unknown",
    only if it stands alone. Reasons that occur nowhere still stand in the legend.
    """
    shown = np.zeros(values.shape)
    whole = values.astype(np.int64)
    numbered = list(enumerate(layer.flags, start=1))
    for number, flag in (*numbered[:1], *reversed(numbered[1:])):
        shown[(whole & flag.value) > 0] = number
    colours = [UNKNOWN, *apart(len(layer.flags) - 1)]
    named = [
        Category(number, words(flag.description), colour)
        for (number, flag), colour in zip(numbered, colours, strict=True)
    ]
    return shown, [Category(0, "Eligible", NOTHING), *named]


def apart(count: int) -> list[Colour]:
    """Colours for things without an order: every other one of a long ramp, light and dark."""
    if count < 1:
        return []
    several = ramp("irradiance").colours(count + 2)[1:-1]
    return several[::2] + several[1::2]


def span(layer: LayerVariable, known: FloatArray) -> tuple[float, float]:
    """Ends of the ramp: fixed for directions and the like, else so that 2 % of values lie outside.

    Parameters
    ----------
    layer : LayerVariable
    known : array
        Values without NaN.
    """
    if layer.ramp in SPANS:
        return SPANS[layer.ramp]
    if known.size == 0:
        return 0.0, 1.0
    low, high = np.percentile(known, (1, 99))
    return (float(low), float(high)) if high > low else (float(low) - 0.5, float(low) + 0.5)


def ticks(layer: LayerVariable) -> tuple[list[float], list[str]] | None:
    """Where a legend of directions or months has its marks, and their names; None for numbers."""
    if layer.ramp == "compass":
        return [0.0, 90.0, 180.0, 270.0, 360.0], list(POINTS)
    if layer.ramp == "month":
        return [float(number) for number in range(1, 13)], [name[:3] for name in MONTHS]
    return None


def title(layer: LayerVariable) -> str:
    """A heading: what the layer is, without afterthoughts."""
    return words(layer.long_name.split(";")[0])


def legend_name(layer: LayerVariable) -> str:
    """The layer's name and unit as people write it."""
    name, its_unit = layer.name.replace("_", " "), unit(layer)
    return f"{name} ({its_unit})" if its_unit and ticks(layer) is None else name


def unit(layer: LayerVariable) -> str:
    """The unit with raised digits; nothing for shares."""
    plain = {"1": "", "degree": "°"}.get(layer.units, layer.units)
    return plain.replace("-2", "⁻²").replace("-1", "⁻¹")


def words(text: str) -> str:
    """A phrase with a capital in front."""
    return text[:1].upper() + text[1:]


def write_heading(figure: Figure, panels: Sequence[Any], layer: LayerVariable) -> None:
    """Write the title over a map, or over a sheet of several."""
    heading = "\n".join(textwrap.wrap(title(layer), 78))
    if len(panels) == 1:
        panels[0].set_title(heading, fontsize=11, loc="left")
    else:
        figure.suptitle(heading, fontsize=11)


def legend_columns(named: Sequence[Category]) -> int:
    """As many columns as their longest words leave room for."""
    longest = max((len(each.words) for each in named), default=1)
    return int(np.clip(LEGEND_LETTERS // (longest + 8), 1, 3))


def name_colours(figure: Figure, named: Sequence[Category], across: int) -> None:
    """A legend of categories below the map."""
    patches = [
        Patch(
            facecolor=hexadecimal(each.colour),
            edgecolor=INK,
            linewidth=0.3,
            label="\n".join(textwrap.wrap(each.words, LEGEND_LETTERS)),
        )
        for each in named
    ]
    figure.legend(handles=patches, loc="outside lower center", ncols=across, frameon=False)


def name_ramp(figure: Figure, panels: Sequence[Any], picture: Any, layer: LayerVariable) -> None:
    """A colour bar below the map or maps, with the unit or with names."""
    bar = figure.colorbar(
        picture,
        ax=list(panels),
        orientation="horizontal",
        shrink=0.7,
        pad=0.03,
        aspect=35,
        extend="neither" if layer.ramp in SPANS else "both",
    )
    marks = ticks(layer)
    if marks is not None:
        bar.set_ticks(marks[0], labels=marks[1])
    bar.set_label(legend_name(layer))


def explain_hatching(figure: Figure, panels: Sequence[Any]) -> None:
    """Say what the hatching means."""
    patch = Patch(facecolor="white", edgecolor=INK, hatch="//////", label="left out by a rule")
    if len(panels) == 1:
        panels[0].legend(handles=[patch], loc="lower left", fontsize=8, framealpha=0.85)
    else:
        figure.legend(handles=[patch], loc="outside lower right", fontsize=8, frameon=False)


def hexadecimal(colour: Colour) -> str:
    """A colour as web pages and styles write it."""
    return "#{:02x}{:02x}{:02x}".format(*colour)


def _bits(layer: LayerVariable, value: int) -> str:
    named = [flag.description for flag in layer.flags if value & flag.value]
    return "; ".join(named) or f"value {value}"
