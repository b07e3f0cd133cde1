"""Colour ramps of the maps, styles and colour tables.

Drawn for this project in CIE L*a*b* (CIE 15; D65): each runs through a few anchors of lightness,
chroma and hue. Lightness always rises or falls along a ramp (about its middle, where two sides are
told apart), so that order survives colour blindness and grey prints; hue only helps.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.floating]
Colour = tuple[int, int, int]

_WHITE = np.array([0.95047, 1.0, 1.08883])  # D65
_TO_RGB = np.array(  # IEC 61966-2-1, from CIE XYZ to linear sRGB
    [
        [3.2406, -1.5372, -0.4986],
        [-0.9689, 1.8758, 0.0415],
        [0.0557, -0.2040, 1.0570],
    ]
)
EXCLUDED: Colour = (120, 120, 120)  # hatching
MISSING: Colour = (226, 226, 226)


@dataclass(frozen=True)
class Ramp:
    """A ramp through anchors of lightness (0 to 100), chroma and hue (degrees), evenly spaced."""

    anchors: tuple[tuple[float, float, float], ...]

    def colours(self, count: int) -> list[Colour]:
        """So many colours from one end to the other."""
        light, chroma, hue = np.array(self.anchors, float).T
        lab = np.stack(
            [light, chroma * np.cos(np.deg2rad(hue)), chroma * np.sin(np.deg2rad(hue))], axis=1
        )
        places = np.linspace(0, len(lab) - 1, count)
        path = np.stack(
            [np.interp(places, np.arange(len(lab)), component) for component in lab.T], axis=1
        )
        return [(int(r), int(g), int(b)) for r, g, b in srgb(path)]


def srgb(lab: FloatArray) -> NDArray[np.uint8]:
    """CIE L*a*b* to sRGB, 0 to 255, shape (..., 3); what no screen shows is held at the edge."""
    light, a, b = np.moveaxis(np.asarray(lab, float), -1, 0)
    y = (light + 16) / 116
    f = np.stack([y + a / 500, y, y - b / 200], axis=-1)
    xyz = _WHITE * np.where(f > 6 / 29, f**3, 3 * (6 / 29) ** 2 * (f - 4 / 29))
    linear = np.clip(xyz @ _TO_RGB.T, 0, 1)
    encoded = np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055)
    whole: NDArray[np.uint8] = np.round(255 * encoded).astype(np.uint8)
    return whole


#: By the name that ``variables.toml`` gives a layer's ramp.
RAMPS: Mapping[str, Ramp] = MappingProxyType(
    {
        "flux": Ramp(((96, 8, 100), (82, 38, 82), (63, 52, 55), (43, 50, 30), (24, 36, 350))),
        "gain": Ramp(((96, 5, 140), (80, 26, 150), (60, 38, 165), (40, 33, 185), (24, 24, 215))),
        "angle": Ramp(((96, 4, 260), (80, 20, 250), (60, 32, 262), (42, 38, 285), (25, 38, 305))),
        "share": Ramp(((26, 30, 285), (45, 32, 255), (64, 28, 225), (82, 20, 190), (96, 6, 120))),
        "irradiance": Ramp(
            ((22, 26, 300), (42, 42, 340), (62, 50, 25), (80, 50, 65), (95, 30, 98))
        ),
        "spread": Ramp(((97, 2, 0), (82, 14, 320), (64, 26, 325), (46, 34, 330), (28, 30, 330))),
        "hours": Ramp(((96, 6, 90), (82, 24, 70), (66, 40, 50), (48, 46, 38), (30, 36, 32))),
        "cooling": Ramp(((97, 3, 200), (82, 20, 215), (64, 32, 230), (45, 38, 258), (26, 36, 280))),
        "worth": Ramp(((96, 8, 110), (80, 30, 120), (62, 40, 135), (44, 36, 148), (27, 26, 160))),
        "suitability": Ramp(
            ((95, 6, 75), (80, 22, 95), (64, 34, 120), (46, 36, 165), (27, 28, 215))
        ),
        "difference": Ramp(((30, 38, 275), (58, 34, 255), (95, 2, 0), (64, 46, 60), (36, 46, 45))),
        # Round the compass: dark in the north, light in the south, cool in the west, warm in the
        # east; round the year from January: cool in spring, warm in autumn. Blue and yellow are
        # the hues that most colour-blind eyes still tell apart.
        "compass": Ramp(((32, 30, 300), (60, 44, 72), (92, 18, 95), (60, 34, 255), (32, 30, 300))),
        "month": Ramp(((32, 30, 300), (60, 34, 255), (92, 18, 95), (60, 44, 72), (32, 30, 300))),
    }
)
CYCLIC = ("compass", "month")
DIVERGING = ("difference",)
SPANS: Mapping[str, tuple[float, float]] = MappingProxyType(
    {"compass": (0.0, 360.0), "month": (1.0, 13.0), "suitability": (0.0, 1.0)}
)


def ramp(name: str) -> Ramp:
    """A ramp by its name.

    Raises
    ------
    KeyError
        If there is none; flags and classes have `class_colours`.
    """
    return RAMPS[name]


def class_colours(count: int) -> list[Colour]:
    """Colours of so many classes, from the lowest to the highest, told apart by lightness."""
    if count == 1:
        return [RAMPS["suitability"].colours(5)[3]]
    return RAMPS["suitability"].colours(count + 1)[1:]


def paler(colours: Sequence[Colour], share: float) -> list[Colour]:
    """The colours with so much white in them, 0 to 1."""
    mixed = np.round((1 - share) * np.array(colours, float) + share * 255).astype(int)
    return [(int(r), int(g), int(b)) for r, g, b in mixed]
